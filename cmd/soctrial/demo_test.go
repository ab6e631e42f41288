package main

import (
	"bytes"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"soctrial/benches/demo"
	"soctrial/benches/job"
	"soctrial/benches/score"
	"soctrial/benches/store"
)

// TestDemo does the whole job and reads what came out: enough scenarios, long
// enough, a limit that fails on the flat cell and says so, and the tracked
// scenarios are what their captions say.
func TestDemo(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "tryout")
	var out, errs bytes.Buffer
	if status := run([]string{"demo", "-o", dir}, &out, &errs); status != statusDone {
		t.Fatalf("exit status %d, want 0\n%s", status, errs.String())
	}
	for _, said := range []string{"sweeper: 384 scenarios × 3 estimators", "FAIL", "why: cell quay-sweeper-flat-50", "this demo means to show it",
		"soctrial run " + filepath.Join(dir, "sweeper.parquet")} {
		if !strings.Contains(strings.ReplaceAll(out.String(), " \\\n   ", ""), said) {
			t.Errorf("the demo does not say %q", said)
		}
	}
	results := map[string][]score.Result{}
	for _, step := range demo.Steps() {
		rows, meta, err := store.ReadResults(filepath.Join(dir, step.Name, job.ResultsFile))
		if err != nil || !meta.Complete {
			t.Fatalf("%s: complete is %t, %v", step.Name, meta.Complete, err)
		}
		results[step.Name] = rows
	}
	scenarios := map[int64]bool{}
	for _, r := range results["sweeper"] {
		scenarios[r.ScenarioID] = true
		if r.Status != score.OK || r.Metrics.DurationS < 3600 {
			t.Errorf("scenario %d, %s: status %s after %g s, want ok and an hour", r.ScenarioID, r.Estimator, r.Status, r.Metrics.DurationS)
		}
	}
	if len(scenarios) < 256 || len(results["sweeper"]) != 3*len(scenarios) {
		t.Errorf("%d scenarios and %d results, want at least 256 and three each", len(scenarios), len(results["sweeper"]))
	}
	checkTracks(t, results)
	checkFolder(t, dir)
}

// checkTracks compares each tracked scenario with the one its caption means.
func checkTracks(t *testing.T, results map[string][]score.Result) {
	t.Helper()
	means := map[string]struct{ cell, duty, which string }{
		"track-steep-median": {"quay-sweeper-21", "rounds", "median"}, "track-steep-worst": {"quay-sweeper-21", "rounds", "worst"},
		"track-flat-median": {"quay-sweeper-flat-50", "rounds", "median"}, "track-flat-worst": {"quay-sweeper-flat-50", "rounds", "worst"},
		"track-published-dst": {"published-850", "stress-test", "worst"}, "track-published-nedc": {"published-850", "driving-cycle", "worst"},
	}
	for _, step := range demo.Steps() {
		for _, track := range step.Tracks {
			m, ok := means[track.File]
			if !ok {
				t.Errorf("nobody checks %s", track.File)
				continue
			}
			var of []score.Result
			for _, r := range results[step.Name] {
				if r.Estimator == "ekf" && r.Cell == m.cell && r.Duty == m.duty {
					of = append(of, r)
				}
			}
			slices.SortFunc(of, func(a, b score.Result) int {
				if a.Metrics.SettledMaxAbs < b.Metrics.SettledMaxAbs {
					return -1
				}
				return 1
			})
			want := of[len(of)-1].ScenarioID
			if m.which == "median" {
				want = of[(len(of)-1)/2].ScenarioID
			}
			if track.ScenarioID != want {
				t.Errorf("%s shows scenario %d, want %d", track.File, track.ScenarioID, want)
			}
		}
	}
}

// checkFolder looks at the folder's files, and at when it is replaced.
func checkFolder(t *testing.T, dir string) {
	t.Helper()
	files, err := demo.Files()
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range files {
		if got, err := os.ReadFile(filepath.Join(dir, demoDefinitions, f.Name)); err != nil || string(got) != f.Text {
			t.Errorf("%s is not the demo's (%v)", f.Name, err)
		}
	}
	names := []string{"errors-quay-sweeper-21-rounds", "errors-quay-sweeper-flat-50-rounds", "errors-published-850-stress-test", "worst-published-850",
		"worst-quay-sweeper-21", "worst-quay-sweeper-flat-50", "quay-sweeper-21", "rounds"}
	for _, step := range demo.Steps() {
		for _, track := range step.Tracks {
			names = append(names, track.File)
		}
	}
	for _, name := range names {
		for _, ending := range []string{".png", ".svg"} {
			if info, err := os.Stat(filepath.Join(dir, demoPictures, name+ending)); err != nil || info.Size() < 1000 {
				t.Errorf("picture %s%s is missing or empty (%v)", name, ending, err)
			}
		}
	}
	if left, _ := filepath.Glob(filepath.Join(filepath.Dir(dir), ".*")); len(left) > 0 {
		t.Errorf("%q are left over", left)
	}
	note := filepath.Join(dir, "note.txt")
	if err := os.WriteFile(note, []byte("mine"), 0o644); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		args []string
		said string
	}{{[]string{"demo", "-o", dir}, "exists"}, {[]string{"demo", "-o", dir, "--force"}, "note.txt"}, {[]string{"demo", "-o", note}, "is a file"}} {
		var out, errs bytes.Buffer
		if status := run(c.args, &out, &errs); status != statusInput || !strings.Contains(errs.String(), c.said) {
			t.Errorf("%q: exit status %d and %q, want 2 and %q", c.args, status, errs.String(), c.said)
		}
	}
	if got, err := os.ReadFile(note); err != nil || string(got) != "mine" {
		t.Errorf("the note is lost (%v)", err)
	}
}

func TestDemoReplacesAnEarlierOne(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "tryout")
	if err := os.MkdirAll(filepath.Join(dir, demoPictures), 0o755); err != nil {
		t.Fatal(err)
	}
	d := demoRun{dir: dir, force: true}
	if err := d.begin(); err != nil {
		t.Fatal(err)
	}
	if err := d.writeDefinitions(); err != nil {
		t.Fatal(err)
	}
	if err := d.finish(); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(filepath.Join(dir, demoDefinitions, "sweeper.toml")); err != nil {
		t.Error(err)
	}
	if left, _ := filepath.Glob(filepath.Join(filepath.Dir(dir), ".*")); len(left) > 0 {
		t.Errorf("%q are left over", left)
	}
}

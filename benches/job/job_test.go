package job

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"soctrial/benches/score"
	"soctrial/benches/store"
)

// The works department's quay sweeper, small enough to count by hand.
const (
	cellText = `format = "soctrial/cell/1"
name = "quay-sweeper"
capacity_ah = 2.0
coulombic_efficiency = 1.0
voltage_min_v = 2.5
voltage_max_v = 4.3
ocv = { soc = [0.0, 1.0], voltage_v = [3.0, 4.0] }
r0 = { ohm = 0.02 }
branch = [{ ohm = 0.01, tau_s = 30.0 }]
`
	dutyText = `format = "soctrial/duty/1"
name = "rounds"
leg = [{ kind = "current", c_rate = 0.5, duration_s = 600.0 }, { kind = "rest", duration_s = 300.0 }]
`
	sensorsText = `format = "soctrial/sensors/1"
name = "pack"
sample_period_s = 1.0
current = { noise_a = 0.02 }
voltage = { noise_v = 0.002 }
`
	ekfText = `format = "soctrial/estimator/1"
name = "ekf"
kind = "ekf"
start = { soc_std = 0.1, branch_std_v = 0.01 }
process = { soc_std_per_sqrt_s = 1e-5, branch_std_v_per_sqrt_s = 1e-4 }
measurement = { voltage_std_v = 0.004, current_std_a = 0.02 }
`
	coulombText = `format = "soctrial/estimator/1"
name = "counting"
kind = "coulomb"
`
	planText = `format = "soctrial/plan/1"
name = "aged"
seed = 3
cells = ["cell.toml"]
duties = ["duty.toml"]
sensors = ["sensors.toml"]
draw = "sobol"
count = 64
vary = [{ column = "current_offset_a", between = [-0.1, 0.1] }, { column = "soc_start_error", between = [-0.1, 0.1] }]
score = { settle_after_s = 60.0 }
limit = [{ metric = "settled_max_abs", at_most = 0.05, share = 0.5 }]
`
)

// workplace is a folder with definitions and a drawn set.
type workplace struct {
	t   *testing.T
	dir string
}

func newWorkplace(t *testing.T, extra map[string]string) workplace {
	t.Helper()
	w := workplace{t, t.TempDir()}
	for name, text := range map[string]string{"cell.toml": cellText, "duty.toml": dutyText, "sensors.toml": sensorsText,
		"ekf.toml": ekfText, "coulomb.toml": coulombText, "plan.toml": planText} {
		w.write(name, text)
	}
	for name, text := range extra {
		w.write(name, text)
	}
	return w
}

func (w workplace) path(name string) string { return filepath.Join(w.dir, name) }

func (w workplace) write(name, text string) {
	w.t.Helper()
	if err := os.WriteFile(w.path(name), []byte(text), 0o644); err != nil {
		w.t.Fatal(err)
	}
}

func (w workplace) read(name string) []byte {
	w.t.Helper()
	data, err := os.ReadFile(w.path(name))
	if err != nil {
		w.t.Fatal(err)
	}
	return data
}

func (w workplace) draw() {
	w.t.Helper()
	if _, err := Draw(DrawOptions{PlanPath: w.path("plan.toml"), OutPath: w.path("set.parquet")}); err != nil {
		w.t.Fatal(err)
	}
}

func (w workplace) options(out string) RunOptions {
	return RunOptions{SetPath: w.path("set.parquet"), EstimatorPaths: []string{w.path("ekf.toml"), w.path("coulomb.toml")},
		OutDir: w.path(out), Version: "test", Traces: "worst:2"}
}

// run runs to the end and returns the bytes of results and traces.
func (w workplace) run(o RunOptions) (results, traces []byte) {
	w.t.Helper()
	if _, err := Run(context.Background(), o); err != nil {
		w.t.Fatal(err)
	}
	name := filepath.Base(o.OutDir)
	return w.read(filepath.Join(name, ResultsFile)), w.read(filepath.Join(name, TracesFile))
}

// A run that is broken off anywhere and continued, with another number of
// workers, ends with the bytes of one that was not.
func TestContinuedRunsEndWithTheSameBytes(t *testing.T) {
	w := newWorkplace(t, nil)
	w.draw()
	results, traces := w.run(w.options("whole"))
	for _, at := range []int{1, 7, 40, 64} {
		t.Run(fmt.Sprintf("after %d", at), func(t *testing.T) {
			out := fmt.Sprintf("broken-%d", at)
			ctx, cancel := context.WithCancel(context.Background())
			defer cancel()
			o := w.options(out)
			o.Workers = 2
			o.Report.Progress = func(p Progress) {
				if p.Stage == "scenarios" && p.Done >= at {
					cancel()
				}
			}
			got, err := Run(ctx, o)
			if !errors.Is(err, ErrInterrupted) || got == nil || got.Complete {
				t.Fatalf("found outcome %v and error %v, asked is an interrupted one", got, err)
			}
			rows, meta, err := store.ReadResults(w.path(filepath.Join(out, ResultsFile)))
			if err != nil {
				t.Fatal(err)
			}
			if meta.Complete || meta.Finished != int64(got.Finished) || len(rows) != 2*got.Finished || meta.Total != 64 {
				t.Errorf("metadata says complete %v, %d of %d, with %d rows; the run finished %d", meta.Complete, meta.Finished, meta.Total, len(rows), got.Finished)
			}
			if _, err := os.Stat(w.path(filepath.Join(out, partsDir))); err == nil {
				t.Error("parts are left beside the results they became")
			}
			var told []string
			o = w.options(out)
			o.Workers = 3
			o.Report.Warn = func(s string) { told = append(told, s) }
			again, tracedAgain := w.run(o)
			if !bytes.Equal(again, results) || !bytes.Equal(tracedAgain, traces) {
				t.Error("results or traces differ from those of a run that was not broken off")
			}
			if !strings.Contains(strings.Join(told, "\n"), "were finished already") {
				t.Errorf("nothing tells that the run was continued: %q", told)
			}
		})
	}
}

// A run that was killed leaves parts only; they are continued too. The folder
// is copied while the run goes on, which is what a kill leaves.
func TestKilledRunsAreContinued(t *testing.T) {
	w := newWorkplace(t, nil)
	w.draw()
	results, traces := w.run(w.options("whole"))
	o := w.options("running")
	o.partRows = 8
	copied := 0
	o.Report.Progress = func(p Progress) {
		if p.Stage == "scenarios" && p.Done == 30 {
			copied++
			if err := os.CopyFS(w.path("killed"), os.DirFS(o.OutDir)); err != nil {
				t.Error(err)
			}
			if err := os.WriteFile(w.path("killed/parts/.part-000099.parquet.123.part"), []byte("half"), 0o644); err != nil {
				t.Error(err)
			}
		}
	}
	w.run(o)
	if copied != 1 {
		t.Fatalf("the folder was copied %d times", copied)
	}
	if found, err := filepath.Glob(w.path("killed/parts/part-*.parquet")); err != nil || len(found) < 5 {
		t.Fatalf("found %d parts (%v), asked are at least 5 of 4 scenarios", len(found), err)
	}
	o = w.options("killed")
	ran := 0
	o.Report.Progress = func(p Progress) {
		if p.Stage == "scenarios" {
			ran++
		}
	}
	again, tracedAgain := w.run(o)
	if !bytes.Equal(again, results) || !bytes.Equal(tracedAgain, traces) {
		t.Error("results or traces differ from those of a run that was not killed")
	}
	if ran >= 64-20 {
		t.Errorf("%d scenarios ran again; at least 20 were finished", ran)
	}
	if _, err := os.Stat(w.path("killed/parts")); err == nil {
		t.Error("parts are left in a finished folder")
	}
}

// An unfinished folder of anything else is refused and left as it was.
func TestOtherUnfinishedFoldersAreRefused(t *testing.T) {
	w := newWorkplace(t, map[string]string{"other.toml": strings.Replace(ekfText, "0.004", "0.005", 1),
		"plan2.toml": strings.Replace(planText, "seed = 3", "seed = 4", 1), "strict.toml": strings.Replace(planText, "60.0", "61.0", 1)})
	w.draw()
	if _, err := Draw(DrawOptions{PlanPath: w.path("plan2.toml"), OutPath: w.path("set2.parquet")}); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	o := w.options("out")
	o.Report.Progress = func(p Progress) { cancel() }
	if _, err := Run(ctx, o); !errors.Is(err, ErrInterrupted) {
		t.Fatal(err)
	}
	before := w.read("out/results.parquet")
	for _, x := range []struct {
		name   string
		change func(*RunOptions)
		says   string
	}{
		{"another set", func(o *RunOptions) { o.SetPath = w.path("set2.parquet") }, "holds results of another set"},
		{"another estimator", func(o *RunOptions) { o.EstimatorPaths[0] = w.path("other.toml") }, "estimator ekf is another"},
		{"one estimator less", func(o *RunOptions) { o.EstimatorPaths = o.EstimatorPaths[:1] }, "estimator counting is another"},
		{"other scores", func(o *RunOptions) { o.PlanPath = w.path("strict.toml") }, "setting settle_after_s is another"},
		{"another version", func(o *RunOptions) { o.Version = "newer" }, "version is another"},
	} {
		t.Run(x.name, func(t *testing.T) {
			o := w.options("out")
			x.change(&o)
			_, err := Run(context.Background(), o)
			if _, ok := errors.AsType[*Error](err); !ok || !strings.Contains(err.Error(), x.says) {
				t.Errorf("found %v, asked is an input error with %q", err, x.says)
			}
			if !bytes.Equal(before, w.read("out/results.parquet")) {
				t.Error("the folder was changed")
			}
		})
	}
}

// With --force the old results stay until the new ones are whole, and a
// replacement that was broken off is continued.
func TestForceSwapsAtTheEnd(t *testing.T) {
	w := newWorkplace(t, nil)
	w.draw()
	one := w.options("out")
	one.EstimatorPaths = one.EstimatorPaths[1:]
	old, _ := w.run(one)
	want, _ := w.run(w.options("whole"))
	ctx, cancel := context.WithCancel(context.Background())
	o := w.options("out")
	o.Force = true
	o.Report.Progress = func(p Progress) {
		if p.Done == 20 {
			cancel()
		}
	}
	got, err := Run(ctx, o)
	if !errors.Is(err, ErrInterrupted) || got.Dir != w.path(".out.unfinished") {
		t.Fatalf("found %+v, %v", got, err)
	}
	if !bytes.Equal(old, w.read("out/results.parquet")) {
		t.Error("the old results were touched before the new ones were whole")
	}
	o.Report.Progress = nil
	if again, _ := w.run(o); !bytes.Equal(again, want) {
		t.Error("the continued replacement has other bytes")
	}
	for _, name := range []string{".out.unfinished", ".out.replaced"} {
		if _, err := os.Stat(w.path(name)); err == nil {
			t.Errorf("%s is left", name)
		}
	}
}

// Where parts cannot be written the run ends with an error, and nothing stands
// under a final name.
func TestPartsThatCannotBeWritten(t *testing.T) {
	w := newWorkplace(t, nil)
	w.draw()
	o := w.options("out")
	o.partRows = 8
	o.Report.Progress = func(p Progress) {
		if p.Done == 1 { // a file where the folder of parts should be
			if err := errors.Join(os.Remove(w.path("out/parts")), os.WriteFile(w.path("out/parts"), nil, 0o644)); err != nil {
				t.Error(err)
			}
		}
	}
	_, err := Run(context.Background(), o)
	if _, ok := errors.AsType[*Error](err); !ok || !strings.Contains(err.Error(), "parts") {
		t.Errorf("found %v, asked is an error about the parts", err)
	}
	if _, err := os.Stat(w.path("out/results.parquet")); err == nil {
		t.Error("results stand there all the same")
	}
}

// Two runs do not write into one folder at once.
func TestOneRunAtATime(t *testing.T) {
	w := newWorkplace(t, nil)
	w.draw()
	var second error
	o := w.options("out")
	o.Report.Progress = func(p Progress) {
		if p.Done == 1 && p.Stage == "scenarios" {
			_, second = Run(context.Background(), w.options("out"))
		}
	}
	w.run(o)
	if second == nil || !strings.Contains(second.Error(), "being written by another run") {
		t.Errorf("the second run found %v", second)
	}
}

// A cell asked for more power than it has ends the row with that reason, and a
// pulse that readings may miss is a warning.
func TestWhatIsToldAndNotRefused(t *testing.T) {
	w := newWorkplace(t, map[string]string{
		"duty.toml": `format = "soctrial/duty/1"
leg = [{ kind = "rest", duration_s = 10.0 }, { kind = "pulses", current_a = 1.0, pulse_s = 0.5, rest_s = 9.5, count = 3 }, { kind = "power", power_w = 500.0, duration_s = 60.0 }]
`,
		"plan.toml": strings.Replace(planText, "count = 64", "count = 4", 1)})
	var told []string
	if _, err := Draw(DrawOptions{PlanPath: w.path("plan.toml"), OutPath: w.path("set.parquet"),
		Report: Reporter{Warn: func(s string) { told = append(told, s) }}}); err != nil {
		t.Fatal(err)
	}
	if len(told) != 1 || !strings.Contains(told[0], "under sensors pack: leg[1].pulse_s is 0.5, shorter than the sample period 1 s") {
		t.Errorf("told %q, asked is one warning about the pulse", told)
	}
	out, err := Run(context.Background(), w.options("out"))
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range out.Results {
		// 500 W needs 125 A at 4 V over 20 mΩ: at most U²/(4·R0) = 200 W.
		if r.Status != score.OK || r.Reason != "power" || r.Metrics.Samples != 40 {
			t.Errorf("scenario %d, %s: status %s, reason %q, %d samples; asked is ok, power and 40", r.ScenarioID, r.Estimator, r.Status, r.Reason, r.Metrics.Samples)
		}
	}
	if s := out.Summary(); len(s.Estimators) != 2 || len(s.Estimators[0].Reasons) != 1 || s.Estimators[0].Reasons[0] != (Reason{"power", 4}) {
		t.Errorf("the summary tells %+v", out.Summary().Estimators)
	}
}

// Contrasts find the column that was made to part the scenarios, and keep
// still about chance.
func TestContrastsFindTheCause(t *testing.T) {
	n := 60
	offset, noise, kind := make([]float64, n), make([]float64, n), make([]string, n)
	var broke, met []int
	for i := range n {
		offset[i] = math.Mod(float64(i)*0.37, 1) - 0.5
		noise[i] = math.Mod(float64(i)*0.61, 1)
		kind[i] = []string{"old", "new"}[i%2]
		if math.Abs(offset[i]) > 0.3 {
			broke = append(broke, i)
		} else {
			met = append(met, i)
		}
	}
	got := contrasts([]score.Column{{Name: "noise", Numbers: noise}, {Name: "offset", Numbers: offset}, {Name: "kind", Texts: kind}}, broke, met)
	if len(got) != 1 || got[0].Column != "offset" || !got[0].Size || got[0].Clearness != 1 {
		t.Errorf("found %+v, asked is the offset's size alone, wholly parting", got)
	}
	broke, met = nil, nil
	for i := range n {
		if kind[i] == "old" {
			broke = append(broke, i)
		} else {
			met = append(met, i)
		}
	}
	got = contrasts([]score.Column{{Name: "kind", Texts: kind}}, broke, met)
	if len(got) != 1 || got[0].Text != "old" || got[0].ShareOfBroke < 0.999 || got[0].ShareOfMet != 0 {
		t.Errorf("found %+v, asked is kind old", got)
	}
}

func (w workplace) glob(pattern string) ([]string, error) { return filepath.Glob(w.path(pattern)) }

package define

import (
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"soctrial/benches/scenario"
	"soctrial/plant/duty"
	"soctrial/plant/record"
)

// folder holds files by name and returns its path.
func folder(t *testing.T, files map[string]string) string {
	t.Helper()
	dir := t.TempDir()
	for name, text := range files {
		path := filepath.Join(dir, name)
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

// wantError checks the whole message, with the folder's path cut from it.
func wantError(t *testing.T, err error, dir, want string) {
	t.Helper()
	if err == nil {
		t.Errorf("accepted, want %s", want)
		return
	}
	got := err.Error()
	if dir != "" {
		got = strings.ReplaceAll(got, dir+string(filepath.Separator), "")
	}
	if got != want {
		t.Errorf("got\n  %s\nwant\n  %s", got, want)
	}
}

const traceDuty = "format = \"soctrial/duty/1\"\n[[leg]]\nkind = \"rest\"\nduration_s = 1\n[[leg]]\nkind = \"trace\"\nfile = \"logs/run.csv\"\nmap = \"maps/log.toml\"\nrepeat = 2\n"

func TestTraceFromFile(t *testing.T) {
	dir := folder(t, map[string]string{"d.toml": traceDuty, "maps/log.toml": mapText})
	d, stored, err := ReadDuty(filepath.Join(dir, "d.toml"), func(path string, m *record.Map, kind duty.Kind) (*Trace, error) {
		if path != filepath.Join(dir, "logs/run.csv") || kind != duty.Trace || m == nil || m.SkipRows != 2 {
			t.Errorf("asked for %s, %v, %s", path, m, kind)
		}
		return &Trace{TimeS: []float64{5, 6, 8}, CurrentA: []float64{1, 2, 0}}, nil
	})
	if err != nil {
		t.Fatal(err)
	}
	l := d.Legs[1]
	if d.Name != "d" || l.File != "logs/run.csv" || l.Repeat != 2 || cmp.Diff([]float64{0, 1, 3}, l.TimeS) != "" {
		t.Errorf("name %q, leg %+v; times begin at 0", d.Name, l)
	}
	again, err := Duty("stored", []byte(stored), Openers{})
	if err != nil {
		t.Fatal(err)
	}
	l.File = ""
	if diff := cmp.Diff(l, again.Legs[1], cmpopts.EquateNaNs()); diff != "" || again.Name != "d" {
		t.Errorf("the stored text does not stand alone: %s\n%s", diff, stored)
	}
}

func TestBadTraceFiles(t *testing.T) {
	good := &Trace{TimeS: []float64{0, 1}, CurrentA: []float64{1, 0}}
	for _, c := range []struct {
		name, mapText string
		trace         *Trace
		err           error
		want          string
	}{
		{"unreadable", mapText, nil, errors.New("run.csv: line 3: no number"), `d.toml:7:1: leg[1].file: run.csv: line 3: no number`},
		{"backward", mapText, &Trace{TimeS: []float64{0, 2, 1}, CurrentA: []float64{1, 2, 0}}, nil,
			"d.toml:7:1: leg[1].file: logs/run.csv: time_s[2]: found 1, allowed is at least the one before it (2): time does not go backward"},
		{"not a number", mapText, &Trace{TimeS: []float64{0, 1}, PowerW: []float64{math.NaN(), 0}}, nil,
			"d.toml:7:1: leg[1].file: logs/run.csv: power_w[0]: found NaN, allowed is a finite number"},
		{"empty", mapText, &Trace{}, nil,
			"d.toml:7:1: leg[1].file: logs/run.csv: found neither or both of current_a and power_w, allowed is time_s with one of the two, inline or by file"},
		{"one value", mapText, &Trace{TimeS: []float64{3}, CurrentA: []float64{1}}, nil,
			"d.toml:7:1: leg[1].file: logs/run.csv: time_s: found 1 values, allowed is at least 2: the last is the end"},
		{"spoilt map", strings.Replace(mapText, "mA", "kA", 1), good, nil,
			`d.toml:8:1: leg[1].map: maps/log.toml:10:1: current.unit: found "kA", allowed is one of "A", "mA"`},
		{"no map", "", good, nil, `d.toml:8:1: leg[1].map: stat maps/log.toml: no such file or directory`},
	} {
		t.Run(c.name, func(t *testing.T) {
			files := map[string]string{"d.toml": traceDuty}
			if c.mapText != "" {
				files["maps/log.toml"] = c.mapText
			}
			dir := folder(t, files)
			_, _, err := ReadDuty(filepath.Join(dir, "d.toml"), func(string, *record.Map, duty.Kind) (*Trace, error) { return c.trace, c.err })
			wantError(t, err, dir, c.want)
		})
	}
}

func TestEstimatorOnItsOwnCell(t *testing.T) {
	text := strings.Replace(estimatorText, "branches = 2", `cell = "cells/own.toml"`, 1)
	dir := folder(t, map[string]string{"e.toml": text, "cells/own.toml": cellText})
	s, kept, err := ReadEstimator(filepath.Join(dir, "e.toml"))
	if err != nil {
		t.Fatal(err)
	}
	if s.CellFile != "cells/own.toml" || s.Cell == nil || s.Cell.Name != "quay-sweeper-21" || s.Branches != -1 || kept != text {
		t.Errorf("got %+v", s)
	}
	for _, c := range []struct{ text, cell, want string }{
		{strings.Replace(estimatorText, "branches = 2", "branches = 3\ncell = \"cells/own.toml\"", 1), cellText,
			"e.toml:4:1: branches: found 3, allowed is 0 to 2, the branches of its cell"},
		{text, strings.Replace(cellText, "4.8", "-4.8", 1),
			"e.toml:4:1: cell: cells/own.toml:3:1: capacity_ah: found -4.8, allowed is a finite number > 0"},
		{text, "", `e.toml:4:1: cell: cells/own.toml: found an empty file, allowed is a definition that begins with format = "soctrial/cell/1"`},
	} {
		dir := folder(t, map[string]string{"e.toml": c.text, "cells/own.toml": c.cell})
		_, _, err := ReadEstimator(filepath.Join(dir, "e.toml"))
		wantError(t, err, dir, c.want)
		var one *Error
		if !errors.As(err, &one) || one.File != filepath.Join(dir, "e.toml") || one.Line != 4 {
			t.Errorf("%v is not told as an *Error", err)
		}
	}
}

func TestReadersSayWhatCannotBeRead(t *testing.T) {
	dir := folder(t, map[string]string{"in/f.toml": "format = \"soctrial/none/1\"\n"})
	for kind, read := range map[string]func(string) error{
		KindCell:      func(p string) error { _, _, err := ReadCell(p); return err },
		KindDuty:      func(p string) error { _, _, err := ReadDuty(p, nil); return err },
		KindSensors:   func(p string) error { _, _, err := ReadSensors(p); return err },
		KindEstimator: func(p string) error { _, _, err := ReadEstimator(p); return err },
		KindPlan:      func(p string) error { _, _, err := ReadPlan(p); return err },
		KindMap:       func(p string) error { _, err := ReadMap(p); return err },
	} {
		wantError(t, read(filepath.Join(dir, "absent.toml")), dir, "stat absent.toml: no such file or directory")
		wantError(t, read(filepath.Join(dir, "in")), dir, "in is a folder, not a file")
		wantError(t, read(filepath.Join(dir, "in", "f.toml")), dir,
			fmt.Sprintf(`in/f.toml:1:1: format: found "soctrial/none/1", allowed is "soctrial/%s/1"`, kind))
	}
}

func TestKind(t *testing.T) {
	for kind, text := range map[string]string{KindCell: cellText, KindDuty: dutyText, KindSensors: sensorsText, KindEstimator: estimatorText,
		KindPlan: planText, KindMap: mapText} {
		if got, err := Kind("f.toml", []byte(text)); got != kind || err != nil {
			t.Errorf("%s is taken for %q, %v", kind, got, err)
		}
	}
	const all = `one of "soctrial/cell/1", "soctrial/duty/1", "soctrial/sensors/1", "soctrial/estimator/1", "soctrial/plan/1", "soctrial/map/1"`
	for text, want := range map[string]string{
		"":                           "f.toml: found an empty file, allowed is a definition with a format, " + all,
		" \n\t":                      "f.toml: found an empty file, allowed is a definition with a format, " + all,
		"a = 1":                      "f.toml: format: found nothing, allowed is " + all,
		"\nformat = 'soctrial/duty'": `f.toml:2:1: format: found "soctrial/duty", allowed is ` + all,
		"a = ":                       "f.toml:1:4: found text that is not TOML (expected value, not end of input), allowed is TOML 1.0",
	} {
		_, err := Kind("f.toml", []byte(text))
		wantError(t, err, "", want)
	}
}

// A check that comes after reading, e.g. of metrics, gets its line too.
func TestAt(t *testing.T) {
	p, err := Plan("f.toml", []byte(planText))
	if err != nil {
		t.Fatal(err)
	}
	if At("f.toml", []byte(planText), nil) != nil {
		t.Error("no error became one")
	}
	limits := scenario.CheckLimits(p.Limits, []string{"soc_rmse", "settled_max_abs_soc"})
	wantError(t, At("f.toml", []byte(planText), fmt.Errorf("plan: %w", limits)), "",
		`f.toml:11:12: limit[0].metric: found "settled_max_abs", allowed is a metric (the nearest is settled_max_abs_soc)`)
	wantError(t, At("f.toml", []byte(planText), errors.New("no key")), "", "f.toml: no key")
	wantError(t, At("f.toml", []byte(planText), odd{}), "", "f.toml:8:1: count: is odd")
}

// odd names a key but says neither what was found nor what is allowed.
type odd struct{}

func (odd) Error() string   { return "count: is odd" }
func (odd) KeyPath() string { return "count" }

// However TOML lets a table be spelled, it is the same definition and its
// keys are found where they stand.
func TestSpellings(t *testing.T) {
	want, err := Duty("f.toml", []byte(everyLeg), Openers{})
	if err != nil {
		t.Fatal(err)
	}
	inline := strings.NewReplacer("[leg.vehicle]\nmass_kg", "vehicle.mass_kg", "\nrolling_coefficient = 0.01\n", "\nvehicle.rolling_coefficient = 1e-2\n",
		"drag_area_m2 = 0.5", "'vehicle'.\"drag_area_m2\" = 0.5", "[vehicle]\nmass_kg = 900", "[ vehicle ] # the sweeper\nmass_kg = 0x384").Replace(everyLeg)
	got, err := Duty("f.toml", []byte(inline), Openers{})
	if err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(want, got, cmpopts.EquateNaNs()); d != "" {
		t.Error(d)
	}
	_, err = Duty("f.toml", []byte(strings.Replace(inline, "1e-2", "-1e-2", 1)), Openers{})
	wantError(t, err, "", "f.toml:51:9: leg[3].vehicle.rolling_coefficient: found -0.01, allowed is a finite number ≥ 0")
}

// A spoilt table tells ten errors and how many more there are.
func TestManyErrors(t *testing.T) {
	var b strings.Builder
	for k := range 25 {
		fmt.Fprintf(&b, "z%02d = 1\n", k)
	}
	_, err := Sensors("f.toml", []byte("format = \"soctrial/sensors/1\"\nsample_period_s = 1\n"+b.String()))
	var all Errors
	if !errors.As(err, &all) || len(all) != 25 {
		t.Fatalf("got %v", err)
	}
	var first *Error
	if !errors.As(err, &first) || first.Key != "z00" || first.Line != 3 || first.Column != 1 {
		t.Errorf("the first is %+v", first)
	}
	lines := strings.Split(err.Error(), "\n")
	if len(lines) != 11 || !strings.HasPrefix(lines[9], "f.toml:12:1: z09: ") || lines[10] != "and 15 more" {
		t.Errorf("got\n%v", err)
	}
}

package define

import (
	"errors"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"soctrial/benches/scenario"
	"soctrial/estimator"
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
	"soctrial/plant/record"
)

// fuzz feeds spoilt texts to a reader: it never panics, what it accepts is
// what its owner allows, and reads back as it was once written.
func fuzz[T any](f *testing.F, seed string, read func(string, []byte) (*T, error), check func(*T) error, write func(*T) string) {
	f.Add([]byte(seed))
	f.Add([]byte(strings.ReplaceAll(seed, "0", "")))
	f.Add([]byte(strings.ReplaceAll(seed, " = ", ".x = ")))
	f.Add([]byte("format = \"soctrial/\" [[a.b]]\n[a]\nb=1"))
	f.Add([]byte(seed + "\n[[a.b]]\n[a.b.c]\nd = [1, [2, {e.f = 3}]] # g\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		v, err := read("f.toml", text)
		if err != nil {
			if !strings.HasPrefix(err.Error(), "f.toml:") {
				t.Fatalf("%q does not name the file", err)
			}
			return
		}
		if check != nil {
			if err := check(v); err != nil {
				t.Fatalf("accepted but not allowed: %v", err)
			}
		}
		if write == nil {
			return
		}
		again, err := read("f.toml", []byte(write(v)))
		if err != nil {
			t.Fatalf("what was read is not written back: %v\n%s", err, write(v))
		}
		if d := cmp.Diff(v, again, cmpopts.EquateNaNs(), cmpopts.EquateEmpty()); d != "" {
			t.Fatalf("differs (-read +read again):\n%s\n%s", d, write(v))
		}
	})
}

func FuzzCell(f *testing.F) {
	f.Add([]byte(cellText + "[uncertainty]\nnames = ['a']\ncorrelation = [[1]]\nr0.ohm = nan\n[origin]\na = {b = [1979-05-27, true, {}]}\n"))
	fuzz(f, cellText, Cell, func(c *cell.Cell) error { _, err := cell.Prepare(c); return err }, FormatCell)
}

func FuzzDuty(f *testing.F) {
	f.Add([]byte(everyLeg))
	fuzz(f, dutyText, func(file string, text []byte) (*duty.Duty, error) { return Duty(file, text, Openers{}) },
		(*duty.Duty).Validate, FormatDuty)
}

func FuzzSensors(f *testing.F) {
	fuzz(f, sensorsText, Sensors, (*noise.Sensors).Validate, FormatSensors)
}

func FuzzEstimator(f *testing.F) {
	fuzz(f, estimatorText, func(file string, text []byte) (*estimator.Spec, error) { return Estimator(file, text, Openers{}) },
		nil, FormatEstimator)
}

func FuzzPlan(f *testing.F) { fuzz(f, planText, Plan, (*scenario.Plan).Validate, FormatPlan) }

func FuzzMap(f *testing.F) {
	given := func(m *record.Map) error {
		for _, c := range mapColumns(m) {
			if c.to.Given() && c.to.Position >= 0 {
				return nil
			}
		}
		return errors.New("no column")
	}
	fuzz(f, mapText, Map, given, nil)
}

func FuzzKind(f *testing.F) {
	f.Add([]byte(cellText))
	f.Fuzz(func(t *testing.T, text []byte) {
		if kind, err := Kind("f.toml", text); (kind == "") == (err == nil) {
			t.Fatalf("kind %q with error %v", kind, err)
		}
	})
}

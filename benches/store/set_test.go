package store

import (
	"bytes"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"pgregory.net/rapid"

	"soctrial/benches/scenario"
)

// sweeperTexts are the definitions of the sets these tests write; the store
// does not read them.
func sweeperTexts() map[string]string {
	return map[string]string{
		"cell.sweeper": "format = \"soctrial/cell/1\"\n", "duty.rounds": "format = \"soctrial/duty/1\"\n",
		"sensors.pack": "format = \"soctrial/sensors/1\"\n", "plan": "format = \"soctrial/plan/1\"\n",
	}
}

func sweeperRow(id int64) scenario.Row {
	r := scenario.DefaultRow()
	r.ID, r.Seed, r.Cell, r.Duty, r.Sensors = id, uint64(id)*0x9e3779b97f4a7c15, "sweeper", "rounds", "pack"
	return r
}

func sweeperSet(n int) *scenario.Set {
	s := &scenario.Set{Texts: sweeperTexts()}
	for i := range n {
		r := sweeperRow(int64(i + 1))
		r.SOCStartError = float64(i) / float64(n)
		s.Rows = append(s.Rows, r)
	}
	return s
}

// rowGen draws a row from the ranges that the columns themselves state.
func rowGen(id int64) *rapid.Generator[scenario.Row] {
	return rapid.Custom(func(t *rapid.T) scenario.Row {
		r := sweeperRow(id)
		r.Seed = rapid.Uint64().Draw(t, "seed")
		for _, c := range scenario.Columns() {
			if c.Required || !rapid.Bool().Draw(t, "set "+c.Name) {
				continue
			}
			var v scenario.Value
			switch {
			case c.Kind == scenario.Text && c.Words != nil:
				v = scenario.TextValue(rapid.SampledFrom(c.Words).Draw(t, c.Name))
			case c.Kind == scenario.Text:
				v = scenario.TextValue(rapid.StringN(1, 20, -1).Draw(t, c.Name))
			case c.Kind == scenario.Int:
				v = scenario.IntValue(rapid.Int64Range(1, 1000).Draw(t, c.Name))
			default:
				v = scenario.NumberValue(rapid.Float64Range(max(c.Range.Low, -1e3), min(c.Range.High, 1e3)).Draw(t, c.Name))
			}
			if err := c.Set(&r, v); err != nil {
				t.Skip(err) // an open end of the range
			}
		}
		for _, name := range []string{"site", "label_draw"} {
			if rapid.Bool().Draw(t, "has "+name) {
				l := scenario.Label{Column: name}
				if l.IsNumber = name == "label_draw"; l.IsNumber {
					l.Number = rapid.Float64().Draw(t, name)
				} else {
					l.Text = rapid.String().Draw(t, name)
				}
				r.Labels = append(r.Labels, l)
			}
		}
		return r
	})
}

func TestSetRoundTrip(t *testing.T) {
	path := filepath.Join(t.TempDir(), "set.parquet")
	again := filepath.Join(t.TempDir(), "again.parquet")
	rapid.Check(t, func(t *rapid.T) {
		s := &scenario.Set{Texts: sweeperTexts()}
		for i := range rapid.IntRange(1, 40).Draw(t, "rows") {
			s.Rows = append(s.Rows, rowGen(int64(i*3)).Draw(t, "row"))
		}
		if err := WriteSet(path, s); err != nil {
			t.Fatal(err)
		}
		got, err := ReadSet(path)
		if err != nil {
			t.Fatal(err)
		}
		byName := cmpopts.SortSlices(func(a, b scenario.Label) bool { return a.Column < b.Column })
		if d := cmp.Diff(s.Rows, got.Rows, cmpopts.EquateNaNs(), cmpopts.EquateEmpty(), byName); d != "" {
			t.Fatal(d)
		}
		if d := cmp.Diff(s.Texts, got.Texts); d != "" {
			t.Fatal(d)
		}
		// The same set gives the same bytes, and their hash.
		if err := WriteSet(again, s); err != nil {
			t.Fatal(err)
		}
		one, _ := os.ReadFile(path)
		two, _ := os.ReadFile(again)
		if !bytes.Equal(one, two) || got.SHA256 != hashOf(one) {
			t.Fatal("bytes differ between two writes of one set")
		}
	})
}

func TestSetBeyondOneRowGroup(t *testing.T) {
	s := sweeperSet(groupRows + 5)
	s.Rows[groupRows].Override[3] = 0.25
	s.Rows[7].Group = "aged"
	path := filepath.Join(t.TempDir(), "set.parquet")
	if err := WriteSet(path, s); err != nil {
		t.Fatal(err)
	}
	got, err := ReadSet(path)
	if err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(s.Rows, got.Rows, cmpopts.EquateNaNs()); d != "" {
		t.Fatal(d)
	}
}

// Columns at their default are left out, but for identity, start and ageing.
func TestSetColumnsWritten(t *testing.T) {
	s := sweeperSet(2)
	s.Rows[1].R0DriftPerH = 0.01
	path := filepath.Join(t.TempDir(), "set.parquet")
	if err := WriteSet(path, s); err != nil {
		t.Fatal(err)
	}
	got, err := ReadSet(path)
	if err != nil {
		t.Fatal(err)
	}
	want := append([]string{"scenario_id", "seed", "cell", "duty", "sensors"}, alwaysWritten...)
	if d := cmp.Diff(append(want, "r0_drift_per_h"), got.Columns); d != "" {
		t.Error(d)
	}
	if !math.IsNaN(got.Rows[0].TemperatureStartC) || got.Rows[0].PlantSubsteps != 1 {
		t.Errorf("defaults of absent columns: %+v", got.Rows[0])
	}
}

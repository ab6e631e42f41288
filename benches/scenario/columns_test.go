package scenario

import (
	"errors"
	"math"
	"strings"
	"testing"
)

func TestColumnsAreOneOfAKind(t *testing.T) {
	seen := map[string]bool{}
	for _, c := range Columns() {
		if seen[c.Name] {
			t.Errorf("column %s stands twice", c.Name)
		}
		seen[c.Name] = true
		if Nearest(c.Name) != c.Name {
			t.Errorf("nearest to %s is %s", c.Name, Nearest(c.Name))
		}
	}
	// The names are promised by the design; these spell its examples and both ends.
	for _, name := range []string{"scenario_id", "seed", "cell", "duty", "sensors", "group", "soc_start",
		"soc_start_error", "hysteresis_start", "temperature_start_c", "ambient_c", "capacity_scale", "r0_scale",
		"branch_r_scale", "branch_tau_scale", "ocv_offset_v", "r0_drift_per_h", "capacity_drift_per_h",
		"r0_walk_per_sqrt_h", "plant_substeps", "current_offset_a", "current_gain_error", "current_noise_a",
		"voltage_offset_v", "voltage_walk_v_per_sqrt_s", "temperature_offset_c_per_k", "temperature_every",
		"current_reading"} {
		if !seen[name] {
			t.Errorf("column %s is lacking", name)
		}
	}
	if len(seen) != 20+39+1 {
		t.Errorf("%d columns, want 60", len(seen))
	}
}

func TestDefaultRowHoldsTheDesignsDefaults(t *testing.T) {
	r := DefaultRow()
	if r.SOCStart != 1 || r.SOCStartError != 0 || r.HysteresisStart != 0 || !math.IsNaN(r.TemperatureStartC) ||
		r.AmbientC != 25 || r.CapacityScale != 1 || r.R0Scale != 1 || r.BranchRScale != 1 || r.BranchTauScale != 1 ||
		r.OCVOffsetV != 0 || r.R0DriftPerH != 0 || r.CapacityDriftPerH != 0 || r.R0WalkPerSqrtH != 0 || r.PlantSubsteps != 1 {
		t.Errorf("default row %+v", r)
	}
	for i, x := range r.Override {
		if !math.IsNaN(x) {
			t.Errorf("sensor value %d is %g, want NaN (the definition's)", i, x)
		}
	}
}

// Every column keeps what it was given and moves no other.
func TestSetThenGet(t *testing.T) {
	for _, c := range Columns() {
		var v Value
		switch {
		case c.Words != nil:
			v = TextValue(c.Words[len(c.Words)-1])
		case c.Kind == Text:
			v = TextValue("quay")
		case c.Kind == Int:
			v = IntValue(3)
		default:
			v = NumberValue(0.25)
		}
		r := DefaultRow()
		if err := c.Set(&r, v); err != nil {
			t.Errorf("%s: %v", c.Name, err)
		}
		if got := c.Get(&r); got != v {
			t.Errorf("%s: set %v, got %v", c.Name, v, got)
		}
		plain := DefaultRow()
		for _, o := range Columns() {
			if o.Name == c.Name {
				continue
			}
			a, b := o.Get(&r), o.Get(&plain)
			if a.String() != b.String() {
				t.Errorf("setting %s moved %s from %v to %v", c.Name, o.Name, b, a)
			}
		}
		if !c.Required {
			if err := c.Set(&r, NullValue(c.Kind)); err != nil {
				t.Errorf("%s: a null: %v", c.Name, err)
			}
			if got := c.Get(&r); got.String() != c.Default.String() {
				t.Errorf("%s: a null gives %v, want the default %v", c.Name, got, c.Default)
			}
		}
	}
}

func TestColumnsRefuse(t *testing.T) {
	for _, tt := range []struct {
		column string
		value  Value
		want   string // "" fits
	}{
		{"soc_start", NumberValue(1.2), "found 1.2, allowed is a number in [0, 1]"},
		{"soc_start", IntValue(1), ""},
		{"soc_start", TextValue("full"), `found "full"`},
		{"soc_start_error", NumberValue(-1.5), "allowed is a number in [-1, 1]"},
		{"hysteresis_start", NumberValue(2), "[-1, 1]"},
		{"temperature_start_c", NumberValue(-300), "allowed is a number > -273.15"},
		{"capacity_scale", NumberValue(0), "found 0, allowed is a number > 0"},
		{"r0_scale", NumberValue(-0.1), "≥ 0"},
		{"r0_drift_per_h", NumberValue(math.Inf(1)), "found +Inf, allowed is any finite number"},
		{"plant_substeps", NumberValue(2), ""},
		{"plant_substeps", NumberValue(2.5), "found 2.5, allowed is a whole number in [1, 1e+06]"},
		{"plant_substeps", IntValue(0), "found 0"},
		{"plant_substeps", NumberValue(1e300), "found 1e+300"},
		{"seed", IntValue(math.MaxInt64), ""},
		{"seed", IntValue(-1), ""},
		{"seed", NumberValue(1e18), "found 1e+18"},
		{"seed", NullValue(Int), "found nothing"},
		{"scenario_id", IntValue(-1), "found -1, allowed is a whole number ≥ 0"},
		{"cell", TextValue(""), `found "", allowed is a text that is not empty`},
		{"cell", NumberValue(3), "found 3"},
		{"group", TextValue(""), ""},
		{"current_reading", TextValue("mean"), "allowed is instant or interval-mean"},
		{"current_dropout_share", NumberValue(1), "[0, 1)"},
		{"current_gain_error", NumberValue(-2), ""},
		{"voltage_noise_v", NumberValue(-1e-3), "≥ 0"},
		{"voltage_every", NumberValue(2.5), "whole number"},
		{"voltage_every", IntValue(0), "found 0"},
		{"ambient_c", IntValue(math.MaxInt64), "a number that a double holds exactly"},
	} {
		c, ok := Find(tt.column)
		if !ok {
			t.Fatalf("no column %s", tt.column)
		}
		r := DefaultRow()
		before := c.Get(&r)
		err := c.Set(&r, tt.value)
		if tt.want == "" {
			if err != nil {
				t.Errorf("%s = %v: %v", tt.column, tt.value, err)
			}
			continue
		}
		var bad *ValueError
		if !errors.As(err, &bad) || bad.KeyPath() != tt.column || !strings.Contains(err.Error(), tt.want) {
			t.Errorf("%s = %v: got %v, want %q", tt.column, tt.value, err, tt.want)
		}
		if after := c.Get(&r); after.String() != before.String() {
			t.Errorf("%s: a refused value was kept: %v", tt.column, after)
		}
	}
}

func TestNearest(t *testing.T) {
	for typed, want := range map[string]string{
		"current_ofset_a": "current_offset_a", // the design's example
		"soc_strat":       "soc_start", "capacity_scal": "capacity_scale",
		"temprature_noise_c": "temperature_noise_c", "ro_scale": "r0_scale",
	} {
		if got := Nearest(typed); got != want {
			t.Errorf("nearest to %s is %s, want %s", typed, got, want)
		}
	}
	// Textbook distances: Levenshtein's own example, and a swap of neighbours.
	if d := distance("kitten", "sitting"); d != 3 {
		t.Errorf("kitten to sitting is %d, want 3", d)
	}
	if d := distance("ab", "ba"); d != 1 {
		t.Errorf("ab to ba is %d, want 1", d)
	}
}

func TestRowValidate(t *testing.T) {
	whole := func() Row {
		r := DefaultRow()
		r.Cell, r.Duty, r.Sensors = "quay-sweeper-21", "rounds", "pack"
		return r
	}
	good := whole()
	if err := good.Validate(); err != nil {
		t.Fatal(err)
	}
	for want, spoil := range map[string]func(*Row){
		"soc_start: found NaN":           func(r *Row) { r.SOCStart = math.NaN() },
		"soc_start: found 1.01":          func(r *Row) { r.SOCStart = 1.01 },
		"temperature_start_c: found +In": func(r *Row) { r.TemperatureStartC = math.Inf(1) },
		"cell: found nothing":            func(r *Row) { r.Cell = "" },
		"plant_substeps: found 0":        func(r *Row) { r.PlantSubsteps = 0 },
		"current_every: found 1.5":       func(r *Row) { r.Override[12] = 1.5 },
		"current_offset_a: found -Inf":   func(r *Row) { r.Override[0] = math.Inf(-1) },
		"current_reading: found":         func(r *Row) { r.CurrentReading = "average" },
		"nearest is current_offset_a":    func(r *Row) { r.Labels = []Label{{Column: "current_ofset_a", IsNumber: true}} },
	} {
		r := whole()
		spoil(&r)
		if err := r.Validate(); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q", err, want)
		}
	}
}

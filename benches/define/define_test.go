package define

import (
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"pgregory.net/rapid"

	"soctrial/benches/scenario"
	"soctrial/estimator"
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
	"soctrial/plant/record"
)

// The smallest useful example of each kind, as the design gives them.
const (
	cellText = `format = "soctrial/cell/1"
name = "quay-sweeper-21"
capacity_ah = 4.8
coulombic_efficiency = 0.9985
voltage_min_v = 2.6
voltage_max_v = 4.2
ocv = { soc = [0.0, 0.1, 0.5, 1.0], voltage_v = [2.9, 3.42, 3.71, 4.18] }
r0 = { soc = [0.0, 1.0], temperature_c = [0.0, 25.0], ohm = [[0.062, 0.050], [0.031, 0.024]] }
branch = [{ ohm = 0.011, tau_s = 18.0 }, { ohm = 0.016, tau_s = 640.0 }]
`
	dutyText = `format = "soctrial/duty/1"
leg = [{ kind = "current", c_rate = 0.5, duration_s = 1800.0 }, { kind = "rest", duration_s = 3600.0 },
       { kind = "trace", time_s = [0.0, 10.0, 25.0], current_a = [4.0, -2.0, 0.0], repeat = 40, until_soc = 0.15 }]
`
	sensorsText = `format = "soctrial/sensors/1"
sample_period_s = 1.0
current = { noise_a = 0.02, offset_a = 0.0, gain_error = 0.0, quantum_a = 0.01, range_a = 60.0 }
voltage = { noise_v = 0.002, offset_v = 0.0, quantum_v = 0.0003 }
`
	estimatorText = `format = "soctrial/estimator/1"
name = "ekf two branches"
kind = "ekf"
branches = 2
start = { soc_std = 0.1, branch_std_v = 0.01 }
process = { soc_std_per_sqrt_s = 1e-5, branch_std_v_per_sqrt_s = 1e-4 }
measurement = { voltage_std_v = 0.004, current_std_a = 0.02 }
`
	planText = `format = "soctrial/plan/1"
name = "aged and offset"
seed = 7
cells = ["quay-sweeper-21.toml"]
duties = ["rounds.toml"]
sensors = ["pack.toml"]
draw = "sobol"
count = 256
vary = [{ column = "current_offset_a", between = [-0.1, 0.1] }, { column = "capacity_scale", values = [1.0, 0.9, 0.8] },
        { column = "soc_start_error", normal = { mean = 0.0, std = 0.1 } }]
limit = [{ metric = "settled_max_abs", at_most = 0.05, share = 0.95 }]
`
	mapText = `format = "soctrial/map/1"
skip_rows = 2
delimiter = ";"
decimal = ","
[time]
column = "Test Time"
unit = "min"
[current]
column = 4
unit = "mA"
charge_positive = true
[voltage]
column = "U"
`
)

func TestDesignExamples(t *testing.T) {
	tau1, tau2 := cell.Constant(18), cell.Constant(640)
	c, err := Cell("x.toml", []byte(cellText))
	same(t, err, c, &cell.Cell{Name: "quay-sweeper-21", CapacityAh: 4.8, CoulombicEfficiency: 0.9985, VoltageMinV: 2.6, VoltageMaxV: 4.2,
		TemperatureRefC: 25, OCV: cell.OverSOC([]float64{0, 0.1, 0.5, 1}, []float64{2.9, 3.42, 3.71, 4.18}),
		R0:       cell.Table{SOC: []float64{0, 1}, TemperatureC: []float64{0, 25}, Values: [][]float64{{0.062, 0.05}, {0.031, 0.024}}},
		Branches: []cell.Branch{{Ohm: cell.Constant(0.011), TauS: &tau1}, {Ohm: cell.Constant(0.016), TauS: &tau2}}})

	d, err := Duty("quay/rounds.toml", []byte(dutyText), Openers{})
	if err != nil {
		t.Fatal(err)
	}
	if d.Name != "rounds" || len(d.Legs) != 3 || d.Legs[0].CRate != 0.5 || !math.IsNaN(d.Legs[0].CurrentA) ||
		d.Legs[2].Repeat != 40 || d.Legs[2].UntilSOC != 0.15 || d.Legs[2].TraceA[1] != -2 || d.Legs[1].Kind != duty.Rest {
		t.Errorf("duty: %+v", d)
	}

	s, err := Sensors("pack.toml", []byte(sensorsText))
	same(t, err, s, &noise.Sensors{Name: "pack", SamplePeriodS: 1, Current: noise.Channel{Noise: 0.02, Quantum: 0.01, Range: 60},
		Voltage: noise.Channel{Noise: 0.002, Quantum: 0.0003}})

	e, err := Estimator("e.toml", []byte(estimatorText), Openers{})
	same(t, err, e, &estimator.Spec{Name: "ekf two branches", Kind: "ekf", Branches: 2, SOCStd: 0.1, BranchStdV: 0.01, SOCStdPerSqrtS: 1e-5,
		BranchStdVPerSqrtS: 1e-4, VoltageStdV: 0.004, CurrentStdA: 0.02})

	p, err := Plan("p.toml", []byte(planText))
	nan := math.NaN()
	same(t, err, p, &scenario.Plan{Name: "aged and offset", Seed: 7, Cells: []string{"quay-sweeper-21.toml"}, Duties: []string{"rounds.toml"},
		Sensors: []string{"pack.toml"}, Draw: scenario.Sobol, Count: 256, Score: scenario.DefaultScore(),
		Vary: []scenario.Vary{{Column: "current_offset_a", Between: &[2]float64{-0.1, 0.1}, Min: nan, Max: nan},
			{Column: "capacity_scale", Values: []float64{1, 0.9, 0.8}, Min: nan, Max: nan},
			{Column: "soc_start_error", Normal: &scenario.Normal{Mean: 0, Std: 0.1}, Min: nan, Max: nan}},
		Limits: []scenario.Limit{{Metric: "settled_max_abs", AtMost: 0.05, Share: 0.95}}})

	m, err := Map("m.toml", []byte(mapText))
	same(t, err, m, &record.Map{SkipRows: 2, Delimiter: ";", Decimal: ",", Time: record.Column{Heading: "Test Time", Unit: "min"},
		Current: record.Column{Position: 4, Unit: "mA", ChargePositive: true}, Voltage: record.Column{Heading: "U"}})
}

func same(t *testing.T, err error, got, want any) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(want, got, cmpopts.EquateNaNs()); d != "" {
		t.Errorf("differs (-want +got):\n%s", d)
	}
}

// Every error names file, line and key, what was found and what is allowed.
func TestBadInput(t *testing.T) {
	change := func(text, old, replacement string) string {
		t.Helper()
		if !strings.Contains(text, old) {
			t.Fatalf("%q is not in the text", old)
		}
		return strings.Replace(text, old, replacement, 1)
	}
	read := map[string]func(text string) error{
		"cell":      func(s string) error { _, err := Cell("f.toml", []byte(s)); return err },
		"duty":      func(s string) error { _, err := Duty("f.toml", []byte(s), Openers{}); return err },
		"sensors":   func(s string) error { _, err := Sensors("f.toml", []byte(s)); return err },
		"estimator": func(s string) error { _, err := Estimator("f.toml", []byte(s), Openers{}); return err },
		"plan":      func(s string) error { _, err := Plan("f.toml", []byte(s)); return err },
		"map":       func(s string) error { _, err := Map("f.toml", []byte(s)); return err },
	}
	for _, c := range []struct {
		name, kind, text string
		want             []string
	}{
		{"empty file", "cell", "", []string{"f.toml: ", "an empty file"}},
		{"not TOML", "cell", "format = ", []string{"f.toml:1:"}},
		{"another kind", "cell", dutyText, []string{"f.toml:1:1: format: ", `"soctrial/duty/1"`, `"soctrial/cell/1"`}},
		{"no format", "duty", "leg = []", []string{"format: found nothing"}},
		{"unknown key", "cell", cellText + "colour = 1\n", []string{"f.toml:10:1: colour: ", "unknown key"}},
		{"mistyped key", "sensors", change(sensorsText, "offset_a", "ofset_a"), []string{"f.toml:3:", "current.ofset_a", "nearest: offset_a"}},
		{"wrong unit", "cell", change(cellText, "capacity_ah = 4.8", "capacity_mah = 4800"), []string{"f.toml:3:1: capacity_mah: ", `"capacity_ah"`}},
		{"unit missing", "sensors", change(sensorsText, "sample_period_s", "sample_period"), []string{"f.toml:2:1: sample_period: ", "sample_period_s"}},
		{"wrong type", "cell", change(cellText, "4.8", `"4.8"`), []string{"f.toml:3:1: capacity_ah: ", `the text "4.8"`, "a number"}},
		{"NaN", "cell", change(cellText, "voltage_min_v = 2.6", "voltage_min_v = nan"), []string{"f.toml:5:1: voltage_min_v: found nan", "a finite number"}},
		{"infinite", "duty", change(dutyText, "1800.0", "inf"), []string{"leg[0].duration_s: found +inf"}},
		{"unsorted axis", "cell", change(cellText, "[0.0, 0.1, 0.5, 1.0]", "[0.0, 0.5, 0.1, 1.0]"), []string{"f.toml:7:26: ocv.soc[2]: found 0.1", "above the one before"}},
		{"SOC outside", "cell", change(cellText, "[0.0, 0.1, 0.5, 1.0]", "[0.0, 0.1, 0.5, 1.1]"), []string{"ocv.soc[3]: found 1.1", "0 to 1"}},
		{"lengths", "cell", change(cellText, "2.9, 3.42", "3.42"), []string{"f.toml:7:", "ocv.voltage_v: found 3 values", "4, one a SOC point"}},
		{"negative resistance", "cell", change(cellText, "0.062", "-0.062"), []string{"f.toml:8:", "r0.ohm[0][0]: found -0.062", "≥ 0"}},
		{"plain list on two axes", "cell", change(cellText, "[[0.062, 0.050], [0.031, 0.024]]", "[0.062, 0.050]"), []string{"r0.ohm: found a plain list", "a row a temperature"}},
		{"no time constant", "cell", change(cellText, ", tau_s = 18.0", ""), []string{"f.toml:9:", "branch[0].tau_s: found neither"}},
		{"unknown leg", "duty", change(dutyText, `"rest"`, `"pause"`), []string{"f.toml:2:", `leg[1].kind: found "pause"`, `"rest"`}},
		{"key of another leg", "duty", change(dutyText, `kind = "rest",`, `kind = "rest", power_w = 3.0,`), []string{"leg[1].power_w", `"rest"`, "power"}},
		{"leg without end", "duty", change(dutyText, "c_rate = 0.5, duration_s = 1800.0", "c_rate = 0.5"), []string{"leg[0].duration_s: found nothing"}},
		{"trace length", "duty", change(dutyText, "[4.0, -2.0, 0.0]", "[4.0, -2.0]"), []string{"f.toml:3:", "leg[2].current_a: found 2 values", "time_s (3)"}},
		{"trace backward", "duty", change(dutyText, "[0.0, 10.0, 25.0]", "[0.0, 10.0, 5.0]"), []string{"leg[2].time_s[2]: found 5"}},
		{"negative noise", "sensors", change(sensorsText, "noise_a = 0.02", "noise_a = -0.02"), []string{"f.toml:3:", "current.noise_a", "-0.02", "≥ 0"}},
		{"unknown kind", "estimator", change(estimatorText, `"ekf"`, `"ukf9"`), []string{"f.toml:3:1: kind: ", `"rest-ocv"`}},
		{"zero voltage_std_v", "estimator", change(estimatorText, "0.004", "0.0"), []string{"f.toml:7:", "measurement.voltage_std_v", "> 0"}},
		{"key of another kind", "estimator", change(change(estimatorText, `"ekf"`, `"coulomb"`), "branches = 2\n", ""), []string{"branch_std_v"}},
		{"unknown column", "plan", change(planText, "current_offset_a", "current_ofset_a"), []string{"f.toml:9:", "vary[0].column", "current_offset_a"}},
		{"unknown draw", "plan", change(planText, `"sobol"`, `"halton"`), []string{"f.toml:7:1: draw: ", `"latin-hypercube"`}},
		{"no cells", "plan", change(planText, `cells = ["quay-sweeper-21.toml"]`, ""), []string{"cells: found nothing"}},
		{"negative seed", "plan", change(planText, "seed = 7", "seed = -7"), []string{"f.toml:3:1: seed: "}},
		{"unknown unit", "map", change(mapText, `"mA"`, `"kA"`), []string{"f.toml:10:1: current.unit: ", `"kA"`, `"mA"`}},
		{"two characters", "map", change(mapText, `";"`, `"::"`), []string{"delimiter", "one character"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			err := read[c.kind](c.text)
			if err == nil {
				t.Fatal("accepted")
			}
			for _, w := range append(c.want, "allowed is ") {
				if !strings.Contains(err.Error(), w) {
					t.Errorf("%q lacks %q", err, w)
				}
			}
		})
	}
}

func TestRoundTrips(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := drawCell(t)
		back, err := Cell("f.toml", []byte(FormatCell(c)))
		if err != nil {
			t.Fatalf("%v\n%s", err, FormatCell(c))
		}
		if d := cmp.Diff(c, back); d != "" {
			t.Fatalf("cell differs:\n%s\n%s", d, FormatCell(c))
		}
		u := func(label string) float64 { return rapid.Float64Range(0, 1).Draw(t, label) }
		s := &noise.Sensors{Name: "say \"pack\"\n", SamplePeriodS: 0.1 + u("period"), CurrentReading: record.IntervalMean,
			Current: noise.Channel{Noise: u("noise"), Offset: -u("offset"), Every: 3}, Temperature: noise.Channel{Quantum: u("quantum"), OffsetPerK: u("per k")}}
		sBack, err := Sensors("f.toml", []byte(FormatSensors(s)))
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(s, sBack); d != "" {
			t.Fatalf("sensors differ:\n%s", d)
		}
		e := &estimator.Spec{Name: "filter", Kind: "ekf", Branches: 1, SOCStd: u("soc"), VoltageStdV: 1e-4 + u("v"), CurrentStdA: u("i"), BranchStdV: u("b")}
		eBack, err := Estimator("f.toml", []byte(FormatEstimator(e)), Openers{})
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(e, eBack); d != "" {
			t.Fatalf("estimator differs:\n%s", d)
		}
	})
}

func drawCell(t *rapid.T) *cell.Cell {
	axis := func(label string, lo, hi float64) []float64 {
		n := rapid.IntRange(2, 5).Draw(t, label)
		out := make([]float64, n)
		for k := range out {
			out[k] = lo + (hi-lo)*(float64(k)+0.9*rapid.Float64Range(0, 1).Draw(t, label))/float64(n)
		}
		return out
	}
	table := func(label string) cell.Table {
		tab := cell.Table{Interpolation: rapid.SampledFrom([]cell.Interpolation{"", cell.PCHIP, cell.Linear}).Draw(t, label)}
		rows, cols := 1, 1
		if rapid.Bool().Draw(t, label) {
			tab.SOC = axis(label, 0, 1)
			cols = len(tab.SOC)
		}
		if rapid.Bool().Draw(t, label) {
			tab.TemperatureC = axis(label, -20, 60)
			rows = len(tab.TemperatureC)
		}
		for range rows {
			tab.Values = append(tab.Values, rapid.SliceOfN(rapid.Float64Range(1e-4, 10), cols, cols).Draw(t, label))
		}
		return tab
	}
	c := &cell.Cell{Name: "drawn", CapacityAh: rapid.Float64Range(0.1, 300).Draw(t, "capacity"), CoulombicEfficiency: 1, VoltageMinV: 2, VoltageMaxV: 4.2,
		TemperatureRefC: 20, R0: table("r0")}
	soc := axis("ocv", 0, 1)
	c.OCV = cell.OverSOC(soc, rapid.SliceOfN(rapid.Float64Range(2, 4), len(soc), len(soc)).Draw(t, "ocv"))
	for range rapid.IntRange(0, 3).Draw(t, "branches") {
		b := cell.Branch{Ohm: table("ohm")}
		tau := b.Ohm
		if rapid.Bool().Draw(t, "constant tau") {
			tau = cell.Table{Values: [][]float64{{30}}, Interpolation: b.Ohm.Interpolation}
		}
		if rapid.Bool().Draw(t, "farad") {
			b.Farad = &tau
		} else {
			b.TauS = &tau
		}
		c.Branches = append(c.Branches, b)
	}
	if rapid.Bool().Draw(t, "hysteresis") {
		c.Hysteresis = &cell.Hysteresis{HalfGapV: cell.OverSOC([]float64{0.1, 0.9}, []float64{0.01, 0.02}), Rate: 20}
	}
	if rapid.Bool().Draw(t, "thermal") {
		c.Thermal = &cell.Thermal{HeatCapacityJPerK: 70, ConductanceWPerK: 0.1}
	}
	if rapid.Bool().Draw(t, "origin") {
		c.Origin = map[string]any{"made by": "a test", "records": []any{"a", "b"}, "rmse_v": 0.012, "n": int64(3)}
		c.Uncertainty = &cell.Uncertainty{Names: []string{"r0", "tau"}, Correlation: [][]float64{{1, 0.3}, {0.3, 1}},
			Tables: map[string]any{"r0": map[string]any{"ohm": 0.001}}}
	}
	return c
}

func TestDutyRoundTrip(t *testing.T) {
	text := `format = "soctrial/duty/1"
name = "every kind"
[vehicle]
mass_kg = 900
rolling_coefficient = 0.012
drag_area_m2 = 0.8
drive_efficiency = 0.85
regeneration_efficiency = 0.6
series = 96
[[leg]]
kind = "pulses"
c_rate = 1.0
pulse_s = 10.0
rest_s = 40.0
count = 9
return_ratio = 0.75
soc_step = 0.1
step_c_rate = 0.33
step_rest_s = 3600.0
[[leg]]
kind = "group"
repeat = 3
until_soc = 0.2
[[leg.leg]]
kind = "speed"
time_s = [0.0, 5.0, 9.0]
speed_mps = [0.0, 4.0, 0.0]
[[leg.leg]]
kind = "profile"
name = "dst"
peak_power_w = 40.0
at_limit = "cut"
[[leg]]
kind = "hold-voltage"
voltage_v = 4.2
until_c_rate = 0.05
[[leg]]
kind = "profile"
name = "nedc"
[leg.vehicle]
mass_kg = 500
rolling_coefficient = 0.01
drag_area_m2 = 0.5
`
	d, err := Duty("f.toml", []byte(text), Openers{})
	if err != nil {
		t.Fatal(err)
	}
	back, err := Duty("f.toml", []byte(FormatDuty(d)), Openers{})
	if err != nil {
		t.Fatalf("%v\n%s", err, FormatDuty(d))
	}
	if diff := cmp.Diff(d, back, cmpopts.EquateNaNs()); diff != "" {
		t.Errorf("differs:\n%s", diff)
	}
	if _, err := Duty("f.toml", []byte(strings.Replace(text, "speed_mps = [0.0, 4.0, 0.0]", "speed_mps = [0.0, -4.0, 0.0]", 1)), Openers{}); err == nil ||
		!strings.Contains(err.Error(), "f.toml:27:19: leg[1].leg[0].speed_mps[1]: found -4") {
		t.Errorf("nested key: %v", err)
	}
}

func TestTraceFromFile(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "d.toml")
	text := "format = \"soctrial/duty/1\"\n[[leg]]\nkind = \"trace\"\nfile = \"run.csv\"\n"
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	open := func(p string, m *record.Map, kind duty.Kind) (*Trace, error) {
		if p != filepath.Join(dir, "run.csv") || kind != duty.Trace || m != nil {
			t.Errorf("asked for %s, %v, %s", p, m, kind)
		}
		return &Trace{TimeS: []float64{5, 6, 8}, CurrentA: []float64{1, 2, 0}}, nil
	}
	d, stored, err := ReadDuty(path, open)
	if err != nil {
		t.Fatal(err)
	}
	if d.Legs[0].TimeS[2] != 3 {
		t.Errorf("times %v do not begin at 0", d.Legs[0].TimeS)
	}
	again, err := Duty("stored", []byte(stored), Openers{})
	if err != nil {
		t.Fatal(err)
	}
	if again.Legs[0].TraceA[1] != 2 || again.Legs[0].File != "" {
		t.Errorf("the stored text does not stand alone: %s", stored)
	}
}

func fuzz(f *testing.F, seed string, check func(t *testing.T, text []byte)) {
	f.Add([]byte(seed))
	f.Add([]byte(strings.ReplaceAll(seed, "0", "")))
	f.Add([]byte("format = \"soctrial/\" [[a.b]]\n[a]\nb=1"))
	f.Fuzz(check)
}

func FuzzCell(f *testing.F) {
	fuzz(f, cellText, func(t *testing.T, text []byte) {
		c, err := Cell("f.toml", text)
		if err != nil {
			return
		}
		if _, err := cell.Prepare(c); err != nil {
			t.Fatalf("accepted but not usable: %v", err)
		}
		back, err := Cell("f.toml", []byte(FormatCell(c)))
		if err != nil {
			t.Fatalf("what was read is not written back: %v\n%s", err, FormatCell(c))
		}
		if d := cmp.Diff(c.OCV, back.OCV); d != "" {
			t.Fatal(d)
		}
	})
}

func FuzzDuty(f *testing.F) {
	fuzz(f, dutyText, func(t *testing.T, text []byte) {
		d, err := Duty("f.toml", text, Openers{})
		if err != nil {
			return
		}
		if _, err := Duty("f.toml", []byte(FormatDuty(d)), Openers{}); err != nil {
			t.Fatalf("%v\n%s", err, FormatDuty(d))
		}
	})
}

func FuzzSensors(f *testing.F) {
	fuzz(f, sensorsText, func(t *testing.T, text []byte) {
		if s, err := Sensors("f.toml", text); err == nil {
			if _, err := Sensors("f.toml", []byte(FormatSensors(s))); err != nil {
				t.Fatalf("%v\n%s", err, FormatSensors(s))
			}
		}
	})
}

func FuzzEstimator(f *testing.F) {
	fuzz(f, estimatorText, func(t *testing.T, text []byte) {
		if s, err := Estimator("f.toml", text, Openers{}); err == nil {
			if _, err := Estimator("f.toml", []byte(FormatEstimator(s)), Openers{}); err != nil {
				t.Fatalf("%v\n%s", err, FormatEstimator(s))
			}
		}
	})
}

func FuzzPlan(f *testing.F) {
	fuzz(f, planText, func(t *testing.T, text []byte) {
		if p, err := Plan("f.toml", text); err == nil && p.Validate() != nil {
			t.Fatalf("accepted but not valid: %v", p.Validate())
		}
	})
}

func FuzzMap(f *testing.F) {
	fuzz(f, mapText, func(t *testing.T, text []byte) {
		if m, err := Map("f.toml", text); err == nil && m == nil {
			t.Fatal("neither a map nor an error")
		}
	})
}

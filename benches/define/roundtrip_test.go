package define

import (
	"math"
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

// What is written reads back as it was, to the last bit.

func back[T any](t *rapid.T, want *T, text string, read func(file string, text []byte) (*T, error)) {
	got, err := read("f.toml", []byte(text))
	if err != nil {
		t.Fatalf("%v\n%s", err, text)
	}
	if d := cmp.Diff(want, got, cmpopts.EquateNaNs()); d != "" {
		t.Fatalf("differs (-written +read):\n%s\n%s", d, text)
	}
}

func name(t *rapid.T) string {
	s := rapid.StringMatching(`[a-z"\\'=\[\]#é電 	\x00-\x1f\x7f]{1,12}`).Draw(t, "name")
	return strings.ToValidUTF8(s, "?")
}

func between(t *rapid.T, label string, low, high float64) float64 {
	return rapid.Float64Range(low, high).Draw(t, label)
}

// maybe is NaN, not given, as often as not.
func maybe(t *rapid.T, label string, low, high float64) float64 {
	if rapid.Bool().Draw(t, label+" given") {
		return between(t, label, low, high)
	}
	return math.NaN()
}

func TestCellRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := drawCell(t)
		back(t, c, FormatCell(c), Cell)
	})
}

func axis(t *rapid.T, label string, lo, hi float64) []float64 {
	out := make([]float64, rapid.IntRange(2, 5).Draw(t, label))
	for k := range out {
		out[k] = lo + (hi-lo)*(float64(k)+0.9*between(t, label, 0, 1))/float64(len(out))
	}
	return out
}

func drawTable(t *rapid.T, label string, low, high float64) cell.Table {
	tab := cell.Table{Interpolation: rapid.SampledFrom([]cell.Interpolation{"", cell.PCHIP, cell.Linear}).Draw(t, label)}
	rows, cols := 1, 1
	if rapid.Bool().Draw(t, label) {
		tab.SOC = axis(t, label, 0, 1)
		cols = len(tab.SOC)
	}
	if rapid.Bool().Draw(t, label) {
		tab.TemperatureC = axis(t, label, -20, 60)
		rows = len(tab.TemperatureC)
	}
	for range rows {
		tab.Values = append(tab.Values, rapid.SliceOfN(rapid.Float64Range(low, high), cols, cols).Draw(t, label))
	}
	return tab
}

// another is a table on the axes of t, or a constant.
func another(t *rapid.T, like cell.Table, low, high float64) *cell.Table {
	out := cell.Table{Interpolation: like.Interpolation, Values: [][]float64{{between(t, "constant", low, high)}}}
	if rapid.Bool().Draw(t, "on the axes") {
		out = like
		out.Values = nil
		for _, row := range like.Values {
			out.Values = append(out.Values, rapid.SliceOfN(rapid.Float64Range(low, high), len(row), len(row)).Draw(t, "row"))
		}
	}
	return &out
}

func drawCell(t *rapid.T) *cell.Cell {
	c := &cell.Cell{Name: name(t), CapacityAh: between(t, "capacity", 0.1, 300), CoulombicEfficiency: between(t, "efficiency", 0.5, 1), VoltageMinV: 2,
		VoltageMaxV: 4.2, TemperatureRefC: between(t, "reference", -40, 60), R0: drawTable(t, "r0", 0, 10),
		Interpolation: rapid.SampledFrom([]cell.Interpolation{"", cell.PCHIP, cell.Linear}).Draw(t, "interpolation")}
	for c.OCV.SOC == nil {
		c.OCV = drawTable(t, "ocv", 2, 4)
		if c.OCV.SOC == nil {
			c.OCV = cell.OverSOC([]float64{0, 1}, []float64{3, 4})
		}
	}
	if c.OCV.TemperatureC == nil && rapid.Bool().Draw(t, "slope") {
		c.OCVSlopeVPerK = another(t, c.OCV, -1e-3, 1e-3)
	}
	for range rapid.IntRange(0, cell.MaxBranches).Draw(t, "branches") {
		b := cell.Branch{Ohm: drawTable(t, "ohm", 0, 1)}
		tau := another(t, b.Ohm, 1e-3, 1e5)
		if rapid.Bool().Draw(t, "farad") {
			b.Farad = tau
		} else {
			b.TauS = tau
		}
		c.Branches = append(c.Branches, b)
	}
	if rapid.Bool().Draw(t, "hysteresis") {
		c.Hysteresis = &cell.Hysteresis{HalfGapV: cell.OverSOC([]float64{0.1, 0.9}, []float64{0.01, 0.02}), Rate: between(t, "rate", 0, 500)}
	}
	if rapid.Bool().Draw(t, "thermal") {
		c.Thermal = &cell.Thermal{HeatCapacityJPerK: 70, ConductanceWPerK: between(t, "conductance", 0, 1)}
	}
	if rapid.Bool().Draw(t, "origin") {
		c.Origin = map[string]any{"made by": "a test", "records": []any{"a", "b\n"}, "rmse_v": 0.012, "n": int64(3), "ok": true, "none": map[string]any{}}
		c.Uncertainty = &cell.Uncertainty{Names: []string{"r0", name(t)}, Correlation: [][]float64{{1, 0.3}, {0.3, 1}},
			Tables: map[string]any{"r0": map[string]any{"ohm": 0.001}, "branch": []any{map[string]any{"ohm": math.NaN(), "tau_s": 0.5}}}}
	}
	return c
}

func TestDutyRoundTrip(t *testing.T) {
	seen := map[duty.Kind]bool{}
	rapid.Check(t, func(t *rapid.T) {
		d := &duty.Duty{Name: name(t), Legs: drawLegs(t, 0), Vehicle: drawVehicle(t)}
		for _, l := range d.Legs {
			seen[l.Kind] = true
		}
		back(t, d, FormatDuty(d), func(f string, b []byte) (*duty.Duty, error) { return Duty(f, b, Openers{}) })
	})
	if len(seen) != len(duty.Kinds()) {
		t.Errorf("only %v were tried", seen)
	}
}

func drawVehicle(t *rapid.T) *duty.Vehicle {
	return &duty.Vehicle{MassKg: between(t, "mass", 1, 4000), RotatingMassKg: between(t, "rotating", 0, 50), RollingCoefficient: 0.01,
		DragAreaM2: between(t, "drag", 0, 3), AirDensityKgPerM3: 1.2, Slope: between(t, "slope", -0.2, 0.2), DriveEfficiency: 0.9,
		RegenerationEfficiency: between(t, "regeneration", 0, 1), AuxiliaryW: 200, Series: rapid.IntRange(1, 200).Draw(t, "series"), Parallel: 2}
}

func drawLegs(t *rapid.T, depth int) []duty.Leg {
	var out []duty.Leg
	for range rapid.IntRange(1, 4).Draw(t, "legs") {
		out = append(out, drawLeg(t, depth))
	}
	return out
}

func drawLeg(t *rapid.T, depth int) duty.Leg {
	kinds := duty.Kinds()
	if depth > 1 {
		kinds = kinds[:len(kinds)-1] // no deeper group
	}
	l := duty.Leg{Kind: rapid.SampledFrom(kinds).Draw(t, "kind")}
	for _, x := range legNumbers(&l) {
		*x = math.NaN()
	}
	l.CurrentA, l.PowerW = math.NaN(), math.NaN()
	l.DurationS = between(t, "duration", 1e-3, 1e5)
	l.UntilSOC, l.UntilVoltageV = maybe(t, "until soc", 0, 1), maybe(t, "until voltage", 0, 5)
	l.UntilCurrentA, l.UntilCRate = maybe(t, "until current", 0, 9), maybe(t, "until rate", 0, 1)
	l.Repeat = rapid.IntRange(0, 9).Draw(t, "repeat")
	l.AtLimit = rapid.SampledFrom([]duty.AtLimit{"", duty.Cut, duty.End}).Draw(t, "at limit")
	current := func() {
		if rapid.Bool().Draw(t, "by rate") {
			l.CRate = between(t, "rate", 0.01, 5)
		} else {
			l.CurrentA = -between(t, "current", 0.01, 500)
		}
	}
	column := func() []float64 {
		return rapid.SliceOfN(rapid.Float64Range(0, 40), len(l.TimeS), len(l.TimeS)).Draw(t, "column")
	}
	switch l.Kind {
	case duty.Current:
		current()
	case duty.Power:
		l.PowerW = between(t, "power", -1e3, 1e3)
	case duty.HoldVoltage:
		l.VoltageV = between(t, "held", 1, 5)
	case duty.Pulses:
		current()
		l.PulseS, l.RestS, l.Count = between(t, "pulse", 1, 60), between(t, "rest", 0, 3600), rapid.IntRange(0, 20).Draw(t, "count")
		if l.ReturnRatio = maybe(t, "return", 0, 1); rapid.Bool().Draw(t, "steps") {
			l.SOCStep, l.StepCRate, l.StepRestS = between(t, "step", 0.01, 0.5), 0.3, maybe(t, "step rest", 0, 3600)
		}
	case duty.Trace:
		l.TimeS = []float64{0, between(t, "time", 1e-6, 10), 10, 10, 11.5}
		if rapid.Bool().Draw(t, "watts") {
			l.TraceW = column()
		} else {
			l.TraceA = column()
		}
	case duty.Speed:
		l.TimeS = []float64{0, between(t, "time", 1e-6, 9), 10}
		l.SpeedMps = column()
		if rapid.Bool().Draw(t, "own vehicle") {
			l.Vehicle = drawVehicle(t)
		}
	case duty.Profile:
		if l.ProfileName = "nedc"; rapid.Bool().Draw(t, "dst") {
			l.ProfileName, l.PeakPowerW = "dst", between(t, "peak", 1, 500)
		}
	case duty.Group:
		l.Legs = drawLegs(t, depth+1)
	}
	return l
}

func TestSensorsRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := &noise.Sensors{Name: name(t), SamplePeriodS: between(t, "period", 1e-3, 60),
			CurrentReading: rapid.SampledFrom([]record.CurrentReading{"", record.Instant, record.IntervalMean}).Draw(t, "reading")}
		for _, c := range channels(s) {
			if rapid.Bool().Draw(t, "ideal") {
				continue
			}
			for _, n := range channelNumbers(c.unit, c.to) {
				*n.to = between(t, n.key, 1e-6, 0.9)
			}
			c.to.Every = rapid.IntRange(0, 9).Draw(t, "every")
		}
		back(t, s, FormatSensors(s), Sensors)
	})
}

func TestEstimatorRoundTrip(t *testing.T) {
	openers := Openers{Cell: func(file string) ([]byte, error) { return []byte(cellText), nil }}
	rapid.Check(t, func(t *rapid.T) {
		k := rapid.SampledFrom(estimatorKinds()).Draw(t, "kind")
		s := &estimator.Spec{Name: name(t), Kind: k.kind, Branches: -1}
		if k.branches {
			s.Branches = rapid.IntRange(-1, 2).Draw(t, "branches")
		}
		for _, n := range append(k.needs, k.takes...) {
			for _, key := range estimatorKeys() {
				if key.path() == n {
					*key.to(s) = between(t, n, 1e-9, 1)
				}
			}
		}
		if k.tellsNone && rapid.Bool().Draw(t, "no deviation") {
			s.SOCStd, s.CurrentStdA = math.NaN(), math.NaN()
		}
		if rapid.Bool().Draw(t, "own cell") {
			s.CellFile = "own/cell.toml"
			s.Cell, _ = Cell(s.CellFile, []byte(cellText))
		}
		back(t, s, FormatEstimator(s), func(f string, b []byte) (*estimator.Spec, error) { return Estimator(f, b, openers) })
	})
}

func TestPlanRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := &scenario.Plan{Name: name(t), Seed: rapid.Uint64().Draw(t, "seed"), Cells: []string{name(t), "b.toml"}, Duties: []string{"d.toml"},
			Sensors: []string{"s.toml"}, Draw: scenario.LatinHypercube, Count: rapid.IntRange(1, 999).Draw(t, "count"),
			Score: scenario.ScoreSettings{SettleAfterS: between(t, "settle", 0, 999), ConvergeBand: 0.03, ConvergeHoldS: 10, LowSOC: 0.1}}
		column := func(name string) *scenario.Vary {
			p.Vary = append(p.Vary, scenario.Vary{Column: name, Min: maybe(t, "min", -1, 0), Max: maybe(t, "max", 1, 2)})
			return &p.Vary[len(p.Vary)-1]
		}
		column("ambient_c").Values = rapid.SliceOfN(rapid.Float64Range(-40, 60), 1, 5).Draw(t, "values")
		column("group").Texts = []string{name(t), "warm"}
		column("current_offset_a").Between = &[2]float64{between(t, "low", -9, 0), between(t, "high", 1, 9)}
		column("soc_start_error").Normal = &scenario.Normal{Mean: between(t, "mean", -1, 1), Std: between(t, "std", 0, 1)}
		column("r0_scale").LogNormal = &scenario.LogNormal{Median: between(t, "median", 0.1, 2), Sigma: between(t, "sigma", 0, 1)}
		column("label_of_ours").Triangular = &scenario.Triangular{Low: between(t, "low", -9, 0), Mode: 0.5, High: between(t, "high", 1, 9)}
		if rapid.Bool().Draw(t, "grid") {
			p.Draw, p.Count, p.Vary = scenario.Grid, 0, p.Vary[:3]
			p.Vary[2].Steps = rapid.IntRange(2, 9).Draw(t, "steps")
		}
		if rapid.Bool().Draw(t, "limits") {
			p.Limits = []scenario.Limit{{Metric: "soc_rmse", AtMost: between(t, "at most", 0, 1), Share: 1},
				{Metric: "converge_s", AtMost: 600, Share: between(t, "share", 0.01, 1), Group: name(t), Estimator: name(t)}}
		}
		back(t, p, FormatPlan(p), Plan)
	})
}

// Tables of one section that lack each other's axes are written along them:
// the same cell, though not the same tables.
func TestAxesAreSpread(t *testing.T) {
	c, err := Cell("f.toml", []byte(cellText))
	if err != nil {
		t.Fatal(err)
	}
	c.Branches = []cell.Branch{{Ohm: cell.OverSOC([]float64{0, 0.5, 1}, []float64{3, 2, 1}),
		TauS: &cell.Table{TemperatureC: []float64{0, 40}, Values: [][]float64{{50}, {20}}}}}
	got, err := Cell("f.toml", []byte(FormatCell(c)))
	if err != nil {
		t.Fatalf("%v\n%s", err, FormatCell(c))
	}
	b := got.Branches[0]
	if d := cmp.Diff([][]float64{{3, 2, 1}, {3, 2, 1}}, b.Ohm.Values); d != "" {
		t.Error(d)
	}
	if d := cmp.Diff([][]float64{{50, 50, 50}, {20, 20, 20}}, b.TauS.Values); d != "" {
		t.Error(d)
	}
}

func TestAxesThatDifferAreRefused(t *testing.T) {
	for _, spoil := range []func(*cell.Cell){
		func(c *cell.Cell) {
			tau := cell.OverSOC([]float64{0, 0.4, 1}, []float64{3, 2, 1})
			c.Branches[0] = cell.Branch{Ohm: cell.OverSOC([]float64{0, 1}, []float64{2, 1}), TauS: &tau}
		},
		func(c *cell.Cell) {
			tau := cell.OverSOC([]float64{0, 1}, []float64{3, 1})
			tau.Interpolation = cell.Linear
			c.Branches[0] = cell.Branch{Ohm: cell.OverSOC([]float64{0, 1}, []float64{2, 1}), TauS: &tau}
		},
		func(c *cell.Cell) { c.Origin = map[string]any{"how": func() {}} },
	} {
		c, err := Cell("f.toml", []byte(cellText))
		if err != nil {
			t.Fatal(err)
		}
		spoil(c)
		func() {
			defer func() {
				if recover() == nil {
					t.Error("written, though no cell file can say it")
				}
			}()
			FormatCell(c)
		}()
	}
}

// What a program carries in Go's own types is written like what was read.
func TestOriginOfAnyType(t *testing.T) {
	c, err := Cell("f.toml", []byte(cellText+`
[origin]
on = 1979-05-27
at = 1979-05-27T07:32:00Z
until = 07:32:00
`))
	if err != nil {
		t.Fatal(err)
	}
	c.Origin["files"] = []string{"a", "b"}
	c.Origin["fits"] = []map[string]float64{{"rmse_v": 0.01}, {}}
	c.Origin["steps"] = 12
	c.Origin["grid"] = [][]float64{{1, 2.5}}
	text := FormatCell(c)
	for _, want := range []string{"on = 1979-05-27\n", "at = 1979-05-27T07:32:00Z\n", "until = 07:32:00\n", `files = ["a", "b"]`,
		"fits = [{ rmse_v = 0.01 }, {}]", "steps = 12\n", "grid = [[1.0, 2.5]]"} {
		if !strings.Contains(text, want) {
			t.Errorf("%q is not in\n%s", want, text)
		}
	}
	if _, err := Cell("f.toml", []byte(text)); err != nil {
		t.Error(err)
	}
}

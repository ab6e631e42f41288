package counting_test

import (
	"math"
	"strings"
	"testing"

	"soctrial/estimator"
	"soctrial/estimator/counting"
	"soctrial/estimator/estimatortest"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

var nan = math.NaN()

func readings(currentA, voltageV []float64) record.Readings {
	in := record.MakeReadings(len(currentA))
	in.PeriodS = 60
	for k := range currentA {
		in.TimeS[k], in.CurrentA[k], in.VoltageV[k], in.TemperatureC[k] = 60*float64(k), currentA[k], voltageV[k], 25
	}
	return in
}

// twoVolt is a cell of 6 Ah, so that 6 A for a minute is 1/60 of it, with an
// OCV of 3 V + 1 V·soc.
func twoVolt(efficiency float64) *cell.Cell {
	return &cell.Cell{Name: "plain", CapacityAh: 6, CoulombicEfficiency: efficiency, VoltageMinV: 2, VoltageMaxV: 5, TemperatureRefC: 25,
		OCV: cell.OverSOC([]float64{0, 1}, []float64{3, 4}), R0: cell.Constant(0)}
}

func follow(t *testing.T, build func(estimator.Setup) (estimator.Estimator, error), s estimator.Setup, in record.Readings) estimator.Estimate {
	t.Helper()
	e, err := build(s)
	if err != nil {
		t.Fatal(err)
	}
	out := estimator.MakeEstimate(in.Len())
	if err := e.Advance(&in, &out); err != nil {
		t.Fatal(err)
	}
	return out
}

func near(t *testing.T, what string, got, want []float64) {
	t.Helper()
	for k := range want {
		if !(math.Abs(got[k]-want[k]) < 1e-13) && (got[k] == got[k] || want[k] == want[k]) {
			t.Errorf("%s[%d] is %v, want %v", what, k, got[k], want[k])
		}
	}
}

// Counted by hand: 6 A for a minute moves SOC by 1/60, a charge by 0.9 of it.
func TestCountsByHand(t *testing.T) {
	in := readings([]float64{6, -6, nan, 0, 12}, []float64{nan, nan, nan, nan, nan})
	s := estimator.Setup{Spec: estimator.Spec{SOCStd: nan, CurrentStdA: nan}, Cell: twoVolt(0.9), SOCStart: 0.5, PeriodS: 60}
	a, c := 1.0/60, 0.9/60
	out := follow(t, counting.NewCoulomb, s, in)
	near(t, "instant", out.SOCFree, []float64{0.5, 0.5 - a, 0.5 - a + c, 0.5 - a + 2*c, 0.5 - a + 2*c})
	near(t, "no deviation", out.SOCStd, []float64{nan, nan, nan, nan, nan})
	in.CurrentReading = record.IntervalMean
	out = follow(t, counting.NewCoulomb, s, in)
	near(t, "interval-mean", out.SOCFree, []float64{0.5, 0.5 + c, 0.5 + 2*c, 0.5 + 2*c, 0.5 + 2*c - 2*a})
}

// soc_std² grows by (dt·current_std_a/(3600 Q))² a step; a deviation not given counts as 0.
func TestStatedDeviationByHand(t *testing.T) {
	in := readings([]float64{6, 6, 6}, []float64{nan, nan, nan})
	s := estimator.Setup{Cell: twoVolt(1), SOCStart: 0.5, PeriodS: 60}
	d := 60 * 0.3 / (3600 * 6)
	for _, c := range []struct{ start, current, after float64 }{{0.01, 0.3, math.Sqrt(1e-4 + 2*d*d)}, {nan, 0.3, math.Sqrt(2) * d}, {0.01, nan, 0.01}, {0, 0, 0}} {
		s.Spec = estimator.Spec{SOCStd: c.start, CurrentStdA: c.current}
		if got := follow(t, counting.NewCoulomb, s, in).SOCStd[2]; math.Abs(got-c.after) > 1e-15 {
			t.Errorf("soc_std %g, current_std_a %g: deviation is %v after two steps, by hand %v", c.start, c.current, got, c.after)
		}
	}
}

func restSpec() estimator.Spec {
	return estimator.Spec{Kind: "rest-ocv", SOCStd: 0.1, CurrentStdA: 0, VoltageStdV: 0.004, RestCurrentBelowA: 0.5, RestAfterS: 120}
}

// The cell shows 3.7 V all along, SOC 0.7. Only after two minutes without a
// break below 0.5 A is that taken, and every sample of the rest again.
func TestCorrectsAfterTheRestOnly(t *testing.T) {
	s := estimator.Setup{Spec: restSpec(), Cell: twoVolt(1), SOCStart: 0.2, PeriodS: 60}
	i := []float64{0, 0.4, 0.5, 0.1, -0.1, 0, 0, 6, 0}
	v := []float64{3.7, 3.7, 3.7, 3.7, 3.7, 3.7, 3.71, 3.7, 3.7}
	const a = 1.0 / 360 // of 1 A for a minute
	z := []float64{0.2, 0.2, 0.2 - 0.4*a, 0.2 - 0.9*a, 0.2 - a, 0.7, 0.71, 0.71, 0.71 - 6*a}
	near(t, "instant", follow(t, counting.NewRestOCV, s, readings(i, v)).SOCFree, z)

	in := readings(i, v)
	in.CurrentReading = record.IntervalMean // the reading tells of the minute before
	z = []float64{0.2, 0.2 - 0.4*a, 0.2 - 0.9*a, 0.2 - a, 0.7, 0.7, 0.71, 0.71 - 6*a, 0.71 - 6*a}
	near(t, "interval-mean", follow(t, counting.NewRestOCV, s, in).SOCFree, z)
	near(t, "deviation", follow(t, counting.NewRestOCV, s, in).SOCStd, []float64{0.1, 0.1, 0.1, 0.1, 0.004, 0.004, 0.004, 0.004, 0.004})

	in.VoltageV[4], in.VoltageV[5], in.VoltageV[6] = nan, nan, nan
	got := follow(t, counting.NewRestOCV, s, in)
	near(t, "without a voltage", got.SOCFree, []float64{0.2, 0.2 - 0.4*a, 0.2 - 0.9*a, 0.2 - a, 0.2 - 0.9*a, 0.2 - 0.9*a, 0.2 - 0.9*a, 0.2 - 6.9*a, 0.2 - 6.9*a})
}

// rest shows voltageV to a resting cell and returns what is made of it.
func rest(t *testing.T, c *cell.Cell, told, hysteresis, voltageV, tempC float64) (soc, std float64) {
	t.Helper()
	in := readings(make([]float64, 4), []float64{voltageV, voltageV, voltageV, voltageV})
	for k := range in.TemperatureC {
		in.TemperatureC[k] = tempC
	}
	out := follow(t, counting.NewRestOCV, estimator.Setup{Spec: restSpec(), Cell: c, SOCStart: told, HysteresisStart: hysteresis, PeriodS: 60}, in)
	return out.SOCFree[3], out.SOCStd[3]
}

// What the cell's own model shows at rest is read back as the SOC it had, with
// hysteresis and temperature, from wherever the count had got to.
func TestInvertsTheCurve(t *testing.T) {
	for _, c := range []*cell.Cell{estimatortest.PlainCell(), estimatortest.RichCell()} {
		m, err := cell.Compile(c, cell.AsBuilt(0))
		if err != nil {
			t.Fatal(err)
		}
		for _, tempC := range []float64{-5, 25, 38} {
			for _, h := range []float64{-1, 0, 0.6} {
				var v cell.View
				v.Bind(m, tempC)
				for _, z := range []float64{0, 0.03, 0.1, 0.33, 0.5, 0.77, 0.9, 0.999, 1} {
					x := cell.State{SOC: z, Hysteresis: h}
					for _, told := range []float64{0, z, 1} {
						got, std := rest(t, c, told, h, v.Rest(&x), tempC)
						if math.Abs(got-z) > 1e-9 {
							t.Errorf("%s, %g °C, h %g, told %g: SOC %v, was %v", c.Name, tempC, h, told, got, z)
						}
						if !(std > 0 && std <= math.Sqrt(1.0/12)) {
							t.Errorf("%s: deviation is %g, allowed is up to that of not knowing", c.Name, std)
						}
					}
				}
			}
		}
	}
}

// Flat and turning curves: the crossing nearest to the count, the nearest
// point where the voltage is out of reach, and no certainty from a flat one.
func TestInvertsOddCurves(t *testing.T) {
	c := twoVolt(1)
	c.Interpolation = cell.Linear
	c.OCV = cell.OverSOC([]float64{0, 0.2, 0.4, 0.6, 0.8, 1}, []float64{3, 3.4, 3.2, 3.2, 3.5, 3.3}) // up, down, flat, up, down
	for _, k := range []struct{ told, voltage, want float64 }{
		{0.05, 3.3, 0.15}, {0.29, 3.3, 0.3}, {0.5, 3.3, 0.6 + 0.2/3}, {0.35, 3.3, 0.3}, {0.95, 3.3, 1},
		{0.5, 3.2, 0.5}, {0.9, 3.2, 0.6}, {0.02, 3.2, 0.1}, // on the flat stretch, from above, from below
		{0.1, 3.6, 0.8}, {0.9, 9, 0.8}, {0.9, 2.9, 0}, {1, 3.0, 0}, // beyond the curve
	} {
		got, std := rest(t, c, k.told, 0, k.voltage, 25)
		if math.Abs(got-k.want) > 1e-9 {
			t.Errorf("told %g, %g V: SOC %v, want %v", k.told, k.voltage, got, k.want)
		}
		if k.want == 0.5 && std != math.Sqrt(1.0/12) {
			t.Errorf("deviation is %g on a flat curve, want that of not knowing", std)
		}
	}
}

func TestBadSpecs(t *testing.T) {
	for _, bad := range []struct {
		name   string
		change func(*estimator.Spec)
	}{
		{"start.soc_std", func(s *estimator.Spec) { s.SOCStd = -1 }},
		{"measurement.current_std_a", func(s *estimator.Spec) { s.CurrentStdA = math.Inf(1) }},
		{"measurement.voltage_std_v", func(s *estimator.Spec) { s.VoltageStdV = -1 }},
		{"rest.current_below_a", func(s *estimator.Spec) { s.RestCurrentBelowA = 0 }},
		{"rest.after_s", func(s *estimator.Spec) { s.RestAfterS = nan }},
	} {
		spec := restSpec()
		bad.change(&spec)
		_, err := counting.NewRestOCV(estimator.Setup{Spec: spec, Cell: twoVolt(1), SOCStart: 0.5})
		if err == nil || !strings.Contains(err.Error(), bad.name) || !strings.Contains(err.Error(), "allowed") {
			t.Errorf("%s: error is %v, want one that names it and what is allowed", bad.name, err)
		}
	}
	if _, err := counting.NewCoulomb(estimator.Setup{}); err == nil {
		t.Error("a counter without a cell was built")
	}
}

package plant_test

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"

	"pgregory.net/rapid"

	"soctrial/plant"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
	"soctrial/testdata"
)

var nan = math.NaN()

func leg(kind duty.Kind, durationS float64) duty.Leg {
	return duty.Leg{Kind: kind, DurationS: durationS, UntilSOC: nan, UntilVoltageV: nan, UntilCurrentA: nan, UntilCRate: nan,
		CurrentA: nan, CRate: nan, PowerW: nan, VoltageV: nan, PulseS: nan, RestS: nan, ReturnRatio: nan, SOCStep: nan,
		StepCRate: nan, StepRestS: nan, PeakPowerW: nan}
}

func current(a, durationS float64) duty.Leg {
	l := leg(duty.Current, durationS)
	l.CurrentA = a
	return l
}

func power(w, durationS float64) duty.Leg {
	l := leg(duty.Power, durationS)
	l.PowerW = w
	return l
}

func plain() *cell.Cell {
	return &cell.Cell{Name: "plain", CapacityAh: 4.8, CoulombicEfficiency: 1, VoltageMinV: 2.6, VoltageMaxV: 4.2, TemperatureRefC: 25,
		OCV:      cell.OverSOC([]float64{0, 0.1, 0.5, 1}, []float64{2.9, 3.42, 3.71, 4.18}),
		R0:       cell.OverSOC([]float64{0, 0.4, 1}, []float64{0.04, 0.024, 0.026}),
		Branches: []cell.Branch{{Ohm: cell.Constant(0.011), TauS: tab(cell.Constant(18))}, {Ohm: cell.OverSOC([]float64{0, 1}, []float64{0.02, 0.016}), TauS: tab(cell.Constant(640))}}}
}

func tab(t cell.Table) *cell.Table { return &t }

func setup(t testing.TB, c *cell.Cell, periodS float64, legs ...duty.Leg) plant.Setup {
	t.Helper()
	p, err := cell.Prepare(c)
	if err != nil {
		t.Fatal(err)
	}
	d, err := duty.Compile(&duty.Duty{Name: "test", Legs: legs}, c.CapacityAh)
	if err != nil {
		t.Fatal(err)
	}
	return plant.Default(p, d, periodS)
}

// simulate runs a whole duty in blocks of the given length.
func simulate(t testing.TB, s plant.Setup, block int) (plant.Truth, plant.Outcome) {
	t.Helper()
	p, err := plant.New(s)
	if err != nil {
		t.Fatal(err)
	}
	var all plant.Truth
	b := plant.MakeTruth(block)
	for {
		n := p.Next(&b)
		all.TimeS = append(all.TimeS, b.TimeS[:n]...)
		all.SOC = append(all.SOC, b.SOC[:n]...)
		all.CurrentA = append(all.CurrentA, b.CurrentA[:n]...)
		all.VoltageV = append(all.VoltageV, b.VoltageV[:n]...)
		all.CurrentBeforeA = append(all.CurrentBeforeA, b.CurrentBeforeA[:n]...)
		all.VoltageBeforeV = append(all.VoltageBeforeV, b.VoltageBeforeV[:n]...)
		all.CurrentMeanA = append(all.CurrentMeanA, b.CurrentMeanA[:n]...)
		all.TemperatureC = append(all.TemperatureC, b.TemperatureC[:n]...)
		if n < block {
			return all, p.Outcome()
		}
	}
}

// Terminal voltage against a stored circuit simulation (ngspice-39) and the sum
// of steps, each second, just before any edge at that second; values and their
// making are described in testdata/reference.
func TestCircuitSimulatorTransient(t *testing.T) {
	c := &cell.Cell{Name: "netlist", CapacityAh: 1e9, CoulombicEfficiency: 1, VoltageMinV: 1, VoltageMaxV: 5, TemperatureRefC: 25,
		OCV: cell.OverSOC([]float64{0, 1}, []float64{3.3, 3.3}), R0: cell.Constant(1.8e-3),
		Branches: []cell.Branch{{Ohm: cell.Constant(1.1e-3), Farad: tab(cell.Constant(9e3))}, {Ohm: cell.Constant(2.4e-3), Farad: tab(cell.Constant(120e3))}}}
	s := setup(t, c, 1, current(40, 60), leg(duty.Rest, 600), current(-30, 120), leg(duty.Rest, 601))
	s.SOCStart = 0.5
	truth, _ := simulate(t, s, 100)
	f, err := os.Open(testdata.Reference(t, "rc_two_branch_transient.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	rows = rows[1:]
	if len(rows) != 1381 || truth.Len() != 1381 {
		t.Fatalf("%d rows, %d samples, want 1381 of both", len(rows), truth.Len())
	}
	for k, r := range rows {
		got := truth.VoltageBeforeV[k]
		if k == 0 {
			got = truth.VoltageV[0] + truth.CurrentA[0]*1.8e-3 // nothing flowed before the first edge
		}
		near(t, "simulator", k, got, num(t, r[3]), 1e-7)
		near(t, "closed form", k, got, num(t, r[4]), 1e-11)
	}
}

// The current held, each branch follows i·R(1-exp(-t/tau)); after five time
// constants it has settled to within 1 % (common practice, no source).
func TestClosedFormResponseAndFiveTimeConstants(t *testing.T) {
	c := plain()
	c.CapacityAh = 1e9
	c.Branches[1].Ohm = cell.Constant(0.016)
	s := setup(t, c, 1, current(4, 4000))
	s.SOCStart = 0.5
	truth, _ := simulate(t, s, 256)
	rest := 3.71 - 4*truthR0(t, c)
	for k, ts := range truth.TimeS {
		want := rest - 4*0.011*(1-math.Exp(-ts/18)) - 4*0.016*(1-math.Exp(-ts/640))
		near(t, "voltage", k, truth.VoltageV[k], want, 1e-7) // the SOC moves by 4e-9
		if ts >= 5*640 {
			if left := truth.VoltageV[k] - (rest - 4*0.027); left > 0.01*4*0.016+1e-7 || left < -1e-6 {
				t.Fatalf("%g s: %g V left to settle", ts, left)
			}
		}
	}
}

func truthR0(t *testing.T, c *cell.Cell) float64 {
	m, err := cell.Compile(c, cell.AsBuilt(1))
	if err != nil {
		t.Fatal(err)
	}
	var v cell.View
	v.Bind(m, 25)
	return v.R0(0.5)
}

// Charge counted over the demands, by hand, at any sample period, substeps and
// trace times that fall between samples.
func TestChargeIsConserved(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		l := leg(duty.Trace, nan)
		at, charge := 0.0, 0.0
		for range rapid.IntRange(1, 30).Draw(t, "steps") {
			i := rapid.Float64Range(-3, 5).Draw(t, "current")
			dt := rapid.Float64Range(0.01, 40).Draw(t, "length")
			l.TimeS = append(l.TimeS, at)
			l.TraceA = append(l.TraceA, i)
			at += dt
			charge += i * dt
		}
		l.TimeS, l.TraceA = append(l.TimeS, at), append(l.TraceA, 0)
		c := plain()
		c.VoltageMinV, c.VoltageMaxV = 0.1, 9
		period := rapid.Float64Range(0.05, 20).Draw(t, "period")
		prepared, err := cell.Prepare(c)
		if err != nil {
			t.Fatal(err)
		}
		tail := leg(duty.Rest, 3*period)
		d, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{l, tail}}, c.CapacityAh)
		if err != nil {
			t.Fatal(err)
		}
		s := plant.Default(prepared, d, period)
		s.SOCStart, s.Substeps = 0.5, rapid.IntRange(1, 4).Draw(t, "substeps")
		p, err := plant.New(s)
		if err != nil {
			t.Fatal(err)
		}
		b := plant.MakeTruth(64)
		last, mean := 0.0, 0.0
		for {
			n := p.Next(&b)
			for k := range n {
				last = b.SOC[k]
				if b.TimeS[k] > 0 {
					mean += b.CurrentMeanA[k] * period
				}
			}
			if n < 64 {
				break
			}
		}
		want := 0.5 - charge/(3600*c.CapacityAh)
		if math.Abs(last-want) > 1e-12 {
			t.Errorf("SOC at the end %.15g, by counting %.15g", last, want)
		}
		if math.Abs(mean-charge) > 1e-8 {
			t.Errorf("mean currents sum to %.12g A·s, the demands to %.12g", mean, charge)
		}
	})
}

// Whether a scenario takes a loop written out or the general path, and however
// it is cut into blocks, it is the same scenario. A stop that is never met
// keeps a duty on the general path.
func TestFastAndGeneralPathsAgree(t *testing.T) {
	rich := plain()
	rich.CoulombicEfficiency = 0.98
	rich.R0 = cell.Table{SOC: []float64{0, 0.4, 1}, TemperatureC: []float64{0, 25, 45}, Values: [][]float64{{0.08, 0.05, 0.05}, {0.04, 0.024, 0.026}, {0.03, 0.02, 0.022}}}
	slope := cell.OverSOC([]float64{0, 0.1, 0.5, 1}, []float64{-3e-4, 1e-4, 2e-4, 1e-4})
	rich.OCVSlopeVPerK = &slope
	rich.Hysteresis = &cell.Hysteresis{HalfGapV: cell.Constant(0.01), Rate: 40}
	rich.Thermal = &cell.Thermal{HeatCapacityJPerK: 70, ConductanceWPerK: 0.15}
	rich.Branches = append(rich.Branches, cell.Branch{Ohm: cell.Constant(0.004), Farad: tab(cell.Constant(900))})
	for name, c := range map[string]*cell.Cell{"lean": plain(), "rich": rich} {
		t.Run(name, func(t *testing.T) {
			legs := func(stop float64) []duty.Leg {
				out := []duty.Leg{current(4, 600), leg(duty.Rest, 100.5), current(-2, 700), power(9, 50), current(-6, 900), current(9.5, 1500)}
				for k := range out {
					out[k].UntilVoltageV = stop
				}
				return out
			}
			fast := setup(t, c, 1, legs(nan)...)
			general := setup(t, c, 1, legs(nan)...)
			stopped := legs(nan)
			for k := range stopped {
				stopped[k].UntilSOC = 0 // on discharge at SOC 0, on charge at once: so only where it cannot be met
				if stopped[k].CurrentA < 0 {
					stopped[k].UntilSOC = 1
				}
			}
			general.Duty = setup(t, c, 1, stopped...).Duty
			for _, s := range []*plant.Setup{&fast, &general} {
				s.SOCStart, s.Seed = 0.9, 5
				if name == "rich" {
					s.AmbientC, s.TemperatureStartC, s.R0DriftPerH, s.CapacityDriftPerH, s.R0WalkPerSqrtH = 12, 30, 0.3, -0.02, 0.05
				}
			}
			a, oa := simulate(t, fast, 256)
			b, _ := simulate(t, fast, 7)
			g, og := simulate(t, general, 256)
			if a.Len() != b.Len() || a.Len() != g.Len() || oa.EndS != og.EndS || oa.Reason != og.Reason || math.Abs(oa.HeatJ-og.HeatJ) > 1e-8*(1+math.Abs(og.HeatJ)) {
				t.Fatalf("lengths %d, %d, %d; outcomes %+v, %+v", a.Len(), b.Len(), g.Len(), oa, og)
			}
			for k := range a.TimeS {
				if a.SOC[k] != b.SOC[k] || a.VoltageV[k] != b.VoltageV[k] || a.VoltageBeforeV[k] != b.VoltageBeforeV[k] || a.TemperatureC[k] != b.TemperatureC[k] {
					t.Fatalf("sample %d depends on the block length", k)
				}
				near(t, "soc", k, a.SOC[k], g.SOC[k], 1e-13)
				near(t, "current", k, a.CurrentA[k], g.CurrentA[k], 1e-9)
				near(t, "voltage", k, a.VoltageV[k], g.VoltageV[k], 1e-11)
				near(t, "before", k, a.VoltageBeforeV[k], g.VoltageBeforeV[k], 1e-11)
				near(t, "mean", k, a.CurrentMeanA[k], g.CurrentMeanA[k], 1e-9)
				near(t, "temperature", k, a.TemperatureC[k], g.TemperatureC[k], 1e-10)
			}
		})
	}
}

func TestPowerIsMet(t *testing.T) {
	s := setup(t, plain(), 1, power(12, 900), power(-6, 300), power(20, 200))
	s.SOCStart = 0.8
	truth, _ := simulate(t, s, 256)
	for k := range truth.TimeS {
		want := 12.0
		if truth.TimeS[k] >= 900 {
			want = -6
		}
		if truth.TimeS[k] >= 1200 {
			want = 20
		}
		near(t, "power", k, truth.CurrentA[k]*truth.VoltageV[k], want, 1e-9)
	}
	if truth.Len() != 1400 {
		t.Fatalf("%d samples", truth.Len())
	}
}

func TestPowerWithoutSeriesResistance(t *testing.T) {
	c := plain()
	c.R0 = cell.Constant(0)
	truth, _ := simulate(t, setup(t, c, 1, power(10, 60)), 64)
	for k := range truth.TimeS {
		near(t, "power", k, truth.CurrentA[k]*truth.VoltageV[k], 10, 1e-9)
	}
}

func TestPowerBeyondTheCellEndsTheDuty(t *testing.T) {
	c := plain()
	c.VoltageMinV = 0.1
	truth, o := simulate(t, setup(t, c, 1, current(1, 10), power(500, 100)), 64)
	if truth.Len() != 10 || o.Reason != plant.ReasonPower || o.EndS != 10 {
		t.Errorf("%d samples, outcome %+v", truth.Len(), o)
	}
}

// Over a cycle that returns to its start, with dOCV/dT = 0 and full efficiency,
// the heat is what the terminals lost: energy is kept, hysteresis included.
func TestEnergyOverAClosedCycle(t *testing.T) {
	c := plain()
	c.Hysteresis = &cell.Hysteresis{HalfGapV: cell.Constant(0.02), Rate: 60}
	c.Thermal = &cell.Thermal{HeatCapacityJPerK: 70, ConductanceWPerK: 0.1}
	for _, period := range []float64{1, 0.5} {
		// a long rest at the end, so that the branches return too
		s := setup(t, c, period, current(4, 1800), leg(duty.Rest, 600), current(-4, 1800), leg(duty.Rest, 14400))
		s.SOCStart, s.HysteresisStart = 0.7, 1
		truth, o := simulate(t, s, 256)
		var lost float64
		for k := range truth.TimeS {
			lost -= truth.CurrentA[k] * truth.VoltageV[k] * period
		}
		end := truth.Len() - 1
		near(t, "SOC", end, truth.SOC[end], 0.7, 1e-12)
		// the sums are left-point ones, exact to first order in the step
		if d := math.Abs(o.HeatJ-lost) / lost; d > 1e-3*period {
			t.Errorf("heat %g J, lost at the terminals %g J", o.HeatJ, lost)
		}
		if o.HeatJ < 100 {
			t.Errorf("heat of %g J is too little to show anything", o.HeatJ)
		}
	}
}

// With no way to cool, all heat stays: C·ΔT = heat.
func TestAdiabaticCellKeepsItsHeat(t *testing.T) {
	c := plain()
	c.Thermal = &cell.Thermal{HeatCapacityJPerK: 70}
	truth, o := simulate(t, setup(t, c, 1, current(8, 600), leg(duty.Rest, 10)), 64)
	near(t, "temperature", 0, truth.TemperatureC[truth.Len()-1], 25+o.HeatJ/70, 1e-9)
}

func near(t *testing.T, what string, k int, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Fatalf("%s at sample %d: %.15g, want %.15g within %g", what, k, got, want, tol)
	}
}

func num(t *testing.T, s string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

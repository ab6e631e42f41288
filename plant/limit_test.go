package plant_test

import (
	"math"
	"strings"
	"testing"

	"soctrial/plant"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

func TestDischargeEndsAtTheLimits(t *testing.T) {
	s := setup(t, plain(), 1, current(4.8, 7200))
	truth, o := simulate(t, s, 256)
	if o.Reason != plant.ReasonVoltageMin {
		t.Fatalf("outcome %+v", o)
	}
	if v := truth.VoltageV[truth.Len()-1]; v < 2.6 {
		t.Errorf("a sample below the limit was given: %g V", v)
	}
	c := plain()
	c.VoltageMinV = 0.5
	truth, o = simulate(t, setup(t, c, 1, current(4.8, 7200)), 256)
	if o.Reason != plant.ReasonEmpty || truth.Len() < 3599 || truth.Len() > 3601 {
		t.Errorf("%d samples, outcome %+v", truth.Len(), o)
	}
}

func TestChargeIsCutBackAtTheVoltageLimit(t *testing.T) {
	s := setup(t, plain(), 1, current(-4.8, 5400))
	s.SOCStart = 0.3
	truth, o := simulate(t, s, 256)
	if o.Reason != "" || truth.Len() != 5400 {
		t.Fatalf("%d samples, outcome %+v", truth.Len(), o)
	}
	cut := 0
	for k := range truth.TimeS {
		if truth.VoltageV[k] > 4.2+1e-8 || truth.SOC[k] > 1 {
			t.Fatalf("sample %d: %g V at SOC %g", k, truth.VoltageV[k], truth.SOC[k])
		}
		if truth.CurrentA[k] > -4.8+1e-9 {
			cut++
			if truth.SOC[k] < 1 {
				near(t, "held voltage", k, truth.VoltageV[k], 4.2, 1e-8)
			}
		}
	}
	if cut < 100 || math.Abs(o.LimitedS-float64(cut)) > 1.5 {
		t.Errorf("cut back in %d samples, told %g s", cut, o.LimitedS)
	}
	end := leg(duty.Current, 5400)
	end.CurrentA, end.AtLimit = -4.8, duty.End
	s = setup(t, plain(), 1, end)
	s.SOCStart = 0.3
	if _, o := simulate(t, s, 256); o.Reason != plant.ReasonVoltageMax {
		t.Errorf("at_limit end: %+v", o)
	}
}

// Nothing goes in above SOC 1, whatever the period.
func TestFullIsFull(t *testing.T) {
	c := plain()
	c.VoltageMaxV = 6
	for _, period := range []float64{0.3, 1, 60} {
		s := setup(t, c, period, current(-4.8, 1200), leg(duty.Rest, 120))
		s.SOCStart = 0.9
		truth, _ := simulate(t, s, 50)
		if z := truth.SOC[truth.Len()-1]; z != 1 {
			t.Errorf("period %g s: SOC %.17g at the end, want 1", period, z)
		}
	}
}

func TestCutDischargeHoldsTheLowerLimit(t *testing.T) {
	l := leg(duty.Current, 4000)
	l.CurrentA, l.AtLimit = 4.8, duty.Cut
	truth, o := simulate(t, setup(t, plain(), 1, l), 256)
	if o.Reason != "" || truth.Len() != 4000 || o.LimitedS == 0 {
		t.Fatalf("%d samples, %+v", truth.Len(), o)
	}
	for k := range truth.TimeS {
		if truth.VoltageV[k] < 2.6-1e-8 && truth.CurrentA[k] > 0 {
			t.Fatalf("sample %d: %g V", k, truth.VoltageV[k])
		}
	}
}

// Constant current, then constant voltage until the current has fallen: the
// usual charge (common practice, no source).
func TestConstantVoltageTaper(t *testing.T) {
	cc := leg(duty.Current, nan)
	cc.CurrentA, cc.UntilVoltageV = -2.4, 4.1
	cv := leg(duty.HoldVoltage, nan)
	cv.VoltageV, cv.UntilCRate = 4.1, 0.05
	s := setup(t, plain(), 1, cc, cv, leg(duty.Rest, 60))
	s.SOCStart = 0.2
	truth, o := simulate(t, s, 256)
	if o.Reason != "" || len(o.Notices) != 0 {
		t.Fatalf("%+v", o)
	}
	held, last := 0, 0.0
	for k := range truth.TimeS {
		i := truth.CurrentA[k]
		if i < 0 && i > -2.4+1e-9 {
			held++
			near(t, "held voltage", k, truth.VoltageV[k], 4.1, 1e-9)
			if i < last-1e-9 && held > 1 {
				t.Fatalf("sample %d: the current grows again: %g after %g", k, i, last)
			}
			last = i
		}
	}
	if held < 60 || math.Abs(last+0.24) > 0.01 {
		t.Errorf("held in %d samples, last current %g A, want about -0.24", held, last)
	}
}

// A stiff cell, whose branches answer faster than its R0: the held voltage must
// not oscillate.
func TestHeldVoltageDoesNotOscillate(t *testing.T) {
	c := plain()
	c.R0 = cell.Constant(0.002)
	c.Branches[0] = cell.Branch{Ohm: cell.Constant(0.02), TauS: tab(cell.Constant(2))}
	cv := leg(duty.HoldVoltage, 600)
	cv.VoltageV = 3.9
	s := setup(t, c, 10, cv)
	s.SOCStart = 0.6
	truth, o := simulate(t, s, 64)
	if o.Reason != "" {
		t.Fatalf("%+v", o)
	}
	for k := 1; k < truth.Len(); k++ {
		near(t, "held voltage", k, truth.VoltageV[k], 3.9, 1e-9)
		if truth.CurrentA[k] < truth.CurrentA[k-1] {
			t.Fatalf("sample %d: current %g after %g", k, truth.CurrentA[k], truth.CurrentA[k-1])
		}
	}
	c.R0 = cell.Constant(0)
	s = setup(t, c, 10, cv)
	if truth, o := simulate(t, s, 64); truth.Len() != 0 || !strings.Contains(o.Reason, "R0 is 0") {
		t.Errorf("%d samples, %+v", truth.Len(), o)
	}
}

func TestStops(t *testing.T) {
	down := leg(duty.Current, nan)
	down.CurrentA, down.UntilSOC = 4.8, 0.5
	s := setup(t, plain(), 1, down, current(1, 10))
	s.SOCStart = 0.8
	truth, o := simulate(t, s, 64)
	if len(o.Notices) != 0 {
		t.Fatalf("%+v", o)
	}
	at := truth.Len() - 10 // the instant a stop is met belongs to the next leg
	if truth.CurrentA[at] != 1 || truth.CurrentA[at-1] != 4.8 || truth.SOC[at] > 0.5 || truth.SOC[at-1] <= 0.5 {
		t.Errorf("around the stop: currents %g, %g, SOC %g, %g", truth.CurrentA[at-1], truth.CurrentA[at], truth.SOC[at-1], truth.SOC[at])
	}
	if truth.CurrentBeforeA[at] != 4.8 || truth.CurrentMeanA[at] != 4.8 {
		t.Errorf("before the stop: %g A, mean %g A", truth.CurrentBeforeA[at], truth.CurrentMeanA[at])
	}
	s.SOCStart = 0.4 // already met: skipped and told
	truth, o = simulate(t, s, 64)
	if truth.Len() != 10 || len(o.Notices) != 1 || !strings.Contains(o.Notices[0], "leg 1 skipped") {
		t.Errorf("%d samples, %+v", truth.Len(), o)
	}
}

// A group whose stop is met ends its repeats too.
func TestGroupStop(t *testing.T) {
	g := leg(duty.Group, nan)
	g.Legs, g.Repeat, g.UntilSOC = []duty.Leg{current(9.6, 30), current(-4.8, 20), leg(duty.Rest, 10)}, 500, 0.6
	s := setup(t, plain(), 1, g, leg(duty.Rest, 5))
	s.SOCStart = 0.9
	truth, o := simulate(t, s, 64)
	if o.Reason != "" {
		t.Fatalf("%+v", o)
	}
	below := 0
	for k := range truth.TimeS {
		if truth.SOC[k] <= 0.6 {
			below++
		}
	}
	if below != 5 {
		t.Errorf("%d samples at or below the stop, want the 5 of the rest", below)
	}
}

func TestSetupIsChecked(t *testing.T) {
	good := setup(t, plain(), 1, current(1, 10))
	for name, spoil := range map[string]func(*plant.Setup){
		"sample_period_s":     func(s *plant.Setup) { s.PeriodS = 0 },
		"plant_substeps":      func(s *plant.Setup) { s.Substeps = 0 },
		"soc_start":           func(s *plant.Setup) { s.SOCStart = 1.1 },
		"hysteresis_start":    func(s *plant.Setup) { s.HysteresisStart = -2 },
		"ambient_c":           func(s *plant.Setup) { s.AmbientC = -280 },
		"capacity_scale":      func(s *plant.Setup) { s.CapacityScale = 0 },
		"branch_tau_scale":    func(s *plant.Setup) { s.BranchTauScale = math.Inf(1) },
		"temperature_start_c": func(s *plant.Setup) { s.TemperatureStartC = 10 },
	} {
		s := good
		spoil(&s)
		if _, err := plant.New(s); err == nil || !strings.Contains(err.Error(), name) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// Drift and walk act as the design says: R0 grows with time, and the walk's
// logarithm has the variance it is given.
func TestDriftAndWalk(t *testing.T) {
	c := plain()
	c.R0 = cell.Constant(0.02)
	s := setup(t, c, 10, current(0.5, 7200))
	s.R0DriftPerH, s.CapacityDriftPerH = 0.5, -0.1
	truth, _ := simulate(t, s, 64)
	end := truth.Len() - 1
	h := truth.TimeS[end] / 3600
	m, err := cell.Compile(c, cell.AsBuilt(10))
	if err != nil {
		t.Fatal(err)
	}
	var v cell.View
	v.Bind(m, 25)
	u, _ := v.OCV(truth.SOC[end])
	r0 := (u - 0.5*0.011*(1-math.Exp(-truth.TimeS[end]/18)) - truth.VoltageV[end] - 0.5*branch2(truth.TimeS[end])) / 0.5
	if math.Abs(r0-0.02*(1+0.5*h)) > 2e-4 {
		t.Errorf("R0 after %g h: %g", h, r0)
	}
	// dz/dt = -i/(3600 Q (1-0.1 t)): the integral is logarithmic
	want := 1 + 0.5/4.8*math.Log(1-0.1*h)/0.1
	near(t, "SOC under capacity drift", end, truth.SOC[end], want, 1e-4)
	var sum, n float64
	for seed := range uint64(400) {
		w := setup(t, c, 60, leg(duty.Rest, 3600), current(1, 60))
		w.R0WalkPerSqrtH, w.Seed = 0.1, seed
		truth, _ := simulate(t, w, 128)
		k := truth.Len() - 1
		r := (truth.VoltageV[k-1] - truth.VoltageV[k]) / 1
		x := math.Log(r / 0.02)
		sum += x * x
		n++
	}
	// χ²(400)/400 lies in 0.8..1.22 at 99.9 % (normal approximation)
	if v := sum / n / 0.01; v < 0.78 || v > 1.24 {
		t.Errorf("variance of ln R0 after an hour is %g of what was asked", v)
	}
}

func branch2(t float64) float64 { return 0.0168 * (1 - math.Exp(-t/640)) } // about, near SOC 0.8

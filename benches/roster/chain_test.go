package roster_test

import (
	"math"
	"testing"

	"soctrial/estimator"
	"soctrial/estimator/estimatortest"
	"soctrial/noise"
	"soctrial/plant"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
	"soctrial/plant/record"
)

// leg is a leg with no number given.
func leg(kind duty.Kind) duty.Leg {
	nan := math.NaN()
	return duty.Leg{Kind: kind, DurationS: nan, UntilSOC: nan, UntilVoltageV: nan, UntilCurrentA: nan, UntilCRate: nan, CurrentA: nan,
		CRate: nan, PowerW: nan, VoltageV: nan, PulseS: nan, RestS: nan, ReturnRatio: nan, SOCStep: nan, StepCRate: nan, StepRestS: nan, PeakPowerW: nan}
}

// trace is a duty that holds each current for a second.
func trace(currentA []float64) *duty.Duty {
	l := leg(duty.Trace)
	for k, i := range append(currentA, 0) { // the last value never flows
		l.TimeS, l.TraceA = append(l.TimeS, float64(k)), append(l.TraceA, i)
	}
	return &duty.Duty{Name: "trace", Legs: []duty.Leg{l}}
}

// follow runs a cell through a duty and reads it.
func follow(t *testing.T, c *cell.Cell, d *duty.Duty, sensors noise.Sensors, seed uint64, change func(*plant.Setup)) (plant.Truth, record.Readings) {
	t.Helper()
	prepared, err := cell.Prepare(c)
	if err != nil {
		t.Fatal(err)
	}
	program, err := duty.Compile(d, c.CapacityAh)
	if err != nil {
		t.Fatal(err)
	}
	setup := plant.Default(prepared, program, sensors.SamplePeriodS)
	setup.Seed = seed
	change(&setup)
	p, err := plant.New(setup)
	if err != nil {
		t.Fatal(err)
	}
	chain, err := noise.NewChain(noise.Setup{Sensors: sensors, Seed: seed, TemperatureRefC: c.TemperatureRefC})
	if err != nil {
		t.Fatal(err)
	}
	const room = 6000
	truth, in := plant.MakeTruth(room), record.MakeReadings(room)
	n := p.Next(&truth)
	if out := p.Outcome(); out.Reason != "" || n == room {
		t.Fatalf("the duty ended after %d samples: %s", n, out.Reason)
	}
	period := truth.PeriodS
	truth, in = truth.Slice(0, n), in.Slice(0, n)
	truth.PeriodS = period
	chain.Read(&truth, &in)
	return truth, in
}

// Interval-mean readings by ideal sensors of the very cell the filter believes
// in give no innovation, through the whole chain: heat, temperature tables,
// hysteresis, powers and held voltages, each of which holds its current from
// sample to sample.
func TestIdealChainHasNoInnovation(t *testing.T) {
	rich := estimatortest.RichCell()
	rich.Thermal = &cell.Thermal{HeatCapacityJPerK: 900, ConductanceWPerK: 0.4}
	power, hold, rest := leg(duty.Power), leg(duty.HoldVoltage), leg(duty.Rest)
	power.DurationS, hold.DurationS, rest.DurationS = 600, 600, 600
	for _, c := range []*cell.Cell{consistentCell(), estimatortest.PlainCell(), rich} {
		pull, push := leg(duty.Current), leg(duty.Current)
		pull.CRate, pull.DurationS, push.CRate, push.DurationS = 1, 900, -0.7, 700
		power.PowerW = 2 * c.CapacityAh
		hold.VoltageV = c.OCV.Values[0][len(c.OCV.SOC)/2]
		d := &duty.Duty{Name: "everything", Legs: []duty.Leg{pull, rest, push, power, hold, rest}}
		for _, period := range []float64{1, 2.5} {
			truth, in := follow(t, c, d, noise.Sensors{SamplePeriodS: period, CurrentReading: record.IntervalMean}, 1, func(s *plant.Setup) {
				s.SOCStart, s.HysteresisStart, s.AmbientC = 0.8, 0.25, 12
			})
			e := newEstimator(t, estimator.Setup{Spec: estimator.Spec{Kind: "ekf", Branches: -1, SOCStd: 0.1, BranchStdV: 0.01, VoltageStdV: 0.004,
				CurrentStdA: 0.02}, Cell: c, SOCStart: 0.8, HysteresisStart: 0.25, PeriodS: period})
			out := advance(t, e, in)
			for k, y := range out.InnovationV {
				if !(math.Abs(y) <= 1e-12) || !(math.Abs(out.SOCFree[k]-truth.SOC[k]) <= 1e-11) {
					t.Errorf("%s, every %g s: innovation %g V and SOC off by %g at %g s", c.Name, period, y, out.SOCFree[k]-truth.SOC[k], in.TimeS[k])
					break
				}
			}
		}
	}
}

package benches

import (
	"context"
	"math"
	"testing"

	"soctrial/benches/roster"
	"soctrial/benches/scenario"
	"soctrial/estimator"
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

// benchCell is the cell of the hand-written C++ the figures are held against:
// 21 points crowded to the ends of the SOC axis, PCHIP, two branches.
func benchCell() *cell.Cell {
	soc := make([]float64, 21)
	for j := range soc {
		soc[j] = 0.5 * (1 - math.Cos(math.Pi*float64(j)/20))
	}
	over := func(f func(s float64) float64) cell.Table {
		y := make([]float64, len(soc))
		for j, s := range soc {
			y[j] = f(s)
		}
		return cell.OverSOC(soc, y)
	}
	tau1, tau2 := cell.Constant(12), cell.Constant(240)
	return &cell.Cell{Name: "bench", CapacityAh: 4.8, CoulombicEfficiency: 1, VoltageMinV: 2.5, VoltageMaxV: 4.3, TemperatureRefC: 25,
		OCV: over(func(s float64) float64 { return 3.42 + 0.74*s - 0.42*math.Exp(-22*s) + 0.03*math.Tanh(9*(s-0.55)) }),
		R0:  over(func(s float64) float64 { return 0.020 + 0.012*math.Exp(-8*s) }),
		Branches: []cell.Branch{
			{Ohm: over(func(s float64) float64 { return 0.012 + 0.010*math.Exp(-6*s) }), TauS: &tau1},
			{Ohm: over(func(s float64) float64 { return 0.015 + 0.012*math.Exp(-5*s) }), TauS: &tau2},
		}}
}

// benchDuty is an hour of a current that jumps now and then and lags behind.
func benchDuty() *duty.Duty {
	nan := math.NaN()
	l := duty.Leg{Kind: duty.Trace, DurationS: nan, UntilSOC: nan, UntilVoltageV: nan, UntilCurrentA: nan, UntilCRate: nan, CurrentA: nan,
		CRate: nan, PowerW: nan, VoltageV: nan, PulseS: nan, RestS: nan, ReturnRatio: nan, SOCStep: nan, StepCRate: nan, StepRestS: nan, PeakPowerW: nan}
	seed, target, i := 12345.0, 0.0, 0.0
	uniform := func() float64 { // Park & Miller (1988), "minimal standard"
		seed = math.Mod(seed*16807, 2147483647)
		return seed / 2147483647
	}
	for k := range 3601 {
		if p, t := uniform(), uniform(); p < 0.1 {
			target = t*16 - 5
		}
		i += 0.3 * (target - i)
		l.TimeS, l.TraceA = append(l.TimeS, float64(k)), append(l.TraceA, i)
	}
	return &duty.Duty{Name: "bench", Legs: []duty.Leg{l}}
}

func benchSpec() estimator.Spec {
	return estimator.Spec{Name: "ekf", Kind: "ekf", Branches: -1, SOCStd: math.Sqrt(0.02), BranchStdV: math.Sqrt(1e-5), SOCStdPerSqrtS: 1e-5,
		BranchStdVPerSqrtS: 1e-4, VoltageStdV: math.Sqrt(1e-5), CurrentStdA: 0.05}
}

func benchJob(c *cell.Cell, s noise.Sensors, rows int) Job {
	set := &scenario.Set{Cells: map[string]*cell.Cell{"bench": c}, Duties: map[string]*duty.Duty{"bench": benchDuty()},
		Sensors: map[string]*noise.Sensors{"bench": &s}, Score: scenario.DefaultScore()}
	for k := range rows {
		r := scenario.DefaultRow()
		r.ID, r.Seed, r.Cell, r.Duty, r.Sensors = int64(k), uint64(k), "bench", "bench", "bench"
		r.SOCStart, r.SOCStartError = 0.90+0.01*float64(k%8), -0.1
		set.Rows = append(set.Rows, r)
	}
	return Job{Set: set, Estimators: []estimator.Spec{benchSpec()}, Build: roster.New, Workers: 1}
}

func benchSensors() noise.Sensors {
	return noise.Sensors{Name: "bench", SamplePeriodS: 1, Current: noise.Channel{Noise: 0.05, Quantum: 0.01}, Voltage: noise.Channel{Noise: 0.002, Quantum: 0.001}}
}

// everything is a cell and sensors with every feature at work.
func everything() (*cell.Cell, noise.Sensors) {
	c := benchCell()
	c.CoulombicEfficiency = 0.998
	c.Thermal = &cell.Thermal{HeatCapacityJPerK: 70, ConductanceWPerK: 0.2}
	c.Hysteresis = &cell.Hysteresis{HalfGapV: cell.OverSOC([]float64{0, 0.5, 1}, []float64{0.004, 0.012, 0.006}), Rate: 40}
	slope := cell.OverSOC(c.OCV.SOC, make([]float64, len(c.OCV.SOC)))
	for k := range slope.Values[0] {
		slope.Values[0][k] = 2e-4 * (c.OCV.SOC[k] - 0.4)
	}
	c.OCVSlopeVPerK = &slope
	warm := func(t *cell.Table) {
		row := t.Values[0]
		t.TemperatureC = []float64{-10, 25, 45}
		t.Values = nil
		for _, f := range []float64{2.2, 1, 0.8} {
			scaled := make([]float64, len(row))
			for k, v := range row {
				scaled[k] = f * v
			}
			t.Values = append(t.Values, scaled)
		}
	}
	warm(&c.R0)
	warm(&c.Branches[0].Ohm)
	warm(&c.Branches[1].Ohm)
	faults := func(noiseU, quantum, limit float64) noise.Channel {
		return noise.Channel{Offset: noiseU, GainError: 0.002, Noise: noiseU, WalkPerSqrtS: noiseU / 50, OffsetPerK: noiseU / 20, Quantum: quantum,
			Range: limit, DelayS: 0.4, DropoutShare: 0.01, DropoutS: 3, StuckShare: 0.01, StuckS: 4}
	}
	s := noise.Sensors{Name: "bench", SamplePeriodS: 1, Current: faults(0.05, 0.01, 60), Voltage: faults(0.002, 0.001, 5), Temperature: faults(0.2, 0.1, 120)}
	return c, s
}

func benchmarkFull(b *testing.B, c *cell.Cell, s noise.Sensors) {
	j := benchJob(c, s, 8)
	if c.Thermal != nil {
		for k := range j.Set.Rows {
			r := &j.Set.Rows[k]
			r.AmbientC, r.TemperatureStartC, r.R0DriftPerH, r.CapacityDriftPerH, r.R0WalkPerSqrtH = 15, 20, 0.05, -0.01, 0.02
		}
	}
	shared, err := j.prepare()
	if err != nil {
		b.Fatal(err)
	}
	w := newWorker(&j, shared)
	var samples int64
	run := func(at int) {
		if err := w.begin(at); err != nil {
			b.Fatal(err)
		}
		if reason, whole := w.follow(context.Background(), nil); reason != "" || !whole {
			b.Fatal(reason)
		}
		if w.seats[0].lost != "" {
			b.Fatal(w.seats[0].lost)
		}
		samples += w.seats[0].cost.Samples
	}
	for at := range 8 {
		run(at)
	}
	samples = 0
	b.ReportAllocs()
	b.ResetTimer()
	for n := 0; b.Loop(); n++ {
		run(n % 8)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(samples), "ns/sample")
}

// BenchmarkFullSample2RC is one sample of the whole chain on one core: plant,
// sensors, EKF on two branches and score, through what run uses.
func BenchmarkFullSample2RC(b *testing.B) { benchmarkFull(b, benchCell(), benchSensors()) }

// BenchmarkFullSampleEverything is the same with temperature, tables over it,
// hysteresis, drift, walk and every sensor fault at work.
func BenchmarkFullSampleEverything(b *testing.B) {
	c, s := everything()
	benchmarkFull(b, c, s)
}

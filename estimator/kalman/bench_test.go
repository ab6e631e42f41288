package kalman_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"soctrial/estimator"
	"soctrial/estimator/estimatortest"
	"soctrial/estimator/kalman"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// benchCell is the cell of the hand-written C++ the figure is held against:
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

// benchReadings are an hour of samples of m from SOC 0.9 under a current that
// jumps now and then and lags behind, read with noise and rounded.
func benchReadings(m *cell.Model) record.Readings {
	const n = 3600
	in := record.MakeReadings(n)
	in.PeriodS = 1
	var v cell.View
	v.Bind(m, 25)
	x := cell.State{SOC: 0.9}
	noise := rand.New(rand.NewPCG(7, 0))
	seed, target, i := 12345.0, 0.0, 0.0
	uniform := func() float64 { // Park & Miller (1988), "minimal standard"
		seed = math.Mod(seed*16807, 2147483647)
		return seed / 2147483647
	}
	for k := range n {
		if p, t := uniform(), uniform(); p < 0.1 {
			target = t*16 - 5
		}
		i += 0.3 * (target - i)
		in.TimeS[k] = float64(k)
		in.CurrentA[k] = math.RoundToEven((i+0.05*noise.NormFloat64())*100) / 100
		in.VoltageV[k] = math.RoundToEven((v.Voltage(&x, i)+0.002*noise.NormFloat64())*1000) / 1000
		in.TemperatureC[k] = 25
		v.Advance(&x, i, 1, m.CapacityAh)
	}
	return in
}

func benchSpec() estimator.Spec {
	return estimator.Spec{Name: "ekf", Kind: "ekf", Branches: -1, SOCStd: math.Sqrt(0.02), BranchStdV: math.Sqrt(1e-5),
		SOCStdPerSqrtS: 1e-5, BranchStdVPerSqrtS: 1e-4, VoltageStdV: math.Sqrt(1e-5), CurrentStdA: 0.05}
}

// BenchmarkEKF2RC is the cost of one sample of the EKF with two branches, in
// blocks of 256 through the public interface, starts included.
func BenchmarkEKF2RC(b *testing.B) { benchmarkEKF(b, benchCell(), func(*record.Readings) {}) }

// BenchmarkEKF2RCGeneral is the same by the general step: uneven samples.
func BenchmarkEKF2RCGeneral(b *testing.B) {
	benchmarkEKF(b, benchCell(), func(in *record.Readings) { in.PeriodS = 0 })
}

// BenchmarkEKFEverything is the EKF of a cell with hysteresis, temperature
// tables and time constants over SOC, at a temperature that never rests.
func BenchmarkEKFEverything(b *testing.B) {
	benchmarkEKF(b, estimatortest.RichCell(), func(in *record.Readings) {
		for k := range in.TemperatureC {
			in.TemperatureC[k] = 25 + 10*math.Sin(float64(k)/200)
		}
	})
}

func benchmarkEKF(b *testing.B, c *cell.Cell, change func(*record.Readings)) {
	m, err := cell.Compile(c, cell.AsBuilt(1))
	if err != nil {
		b.Fatal(err)
	}
	in := benchReadings(m)
	change(&in)
	setup := estimator.Setup{Spec: benchSpec(), Cell: c, Model: m, SOCStart: 0.8, PeriodS: 1}
	est, err := kalman.NewEKF(setup)
	if err != nil {
		b.Fatal(err)
	}
	out := estimator.MakeEstimate(256)
	n := in.Len()
	b.ReportAllocs()
	b.ResetTimer()
	at, samples := 0, 0
	for b.Loop() {
		if at == n {
			at = 0
			if err := est.(estimator.Resetter).Reset(setup); err != nil {
				b.Fatal(err)
			}
		}
		block := in.Slice(at, min(at+256, n))
		o := out.Slice(0, block.Len())
		if err := est.Advance(&block, &o); err != nil {
			b.Fatal(err)
		}
		at += block.Len()
		samples += block.Len()
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(samples), "ns/sample")
}

package kalman_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"

	"soctrial/estimator"
	"soctrial/estimator/estimatortest"
	"soctrial/estimator/kalman"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

var nan = math.NaN()

// readings are columns of one length, one sample a second.
func readings(currentA, voltageV, temperatureC []float64) record.Readings {
	in := record.MakeReadings(len(currentA))
	in.PeriodS = 1
	for k := range currentA {
		in.TimeS[k], in.CurrentA[k], in.VoltageV[k], in.TemperatureC[k] = float64(k), currentA[k], voltageV[k], 25
		if temperatureC != nil {
			in.TemperatureC[k] = temperatureC[k]
		}
	}
	return in
}

// Noise-free interval-mean readings of the very cell the filter believes in
// give no innovation at all: the plant holds its current between samples.
func TestPerfectModelHasNoInnovation(t *testing.T) {
	for _, c := range []*cell.Cell{estimatortest.PlainCell(), estimatortest.RichCell()} {
		for _, even := range []bool{true, false} {
			course, err := estimatortest.Run(c, estimatortest.Options{Samples: 3000, Reading: record.IntervalMean, Even: even, SOC: 0.7}, 3)
			if err != nil {
				t.Fatal(err)
			}
			e := build(t, estimator.Setup{Spec: ekfSpec(), Cell: c, SOCStart: 0.7, PeriodS: 1})
			out := advance(t, e, course.Readings)
			for k, y := range out.InnovationV {
				if !(math.Abs(y) <= 1e-12) || math.Abs(out.SOCFree[k]-course.State[k].SOC) > 1e-11 {
					t.Fatalf("%s, even %t: innovation %g V, SOC off by %g at sample %d", c.Name, even, y, out.SOCFree[k]-course.State[k].SOC, k)
				}
			}
		}
	}
}

// By hand: the variance of SOC over one prediction is P + q²·dt + (dt/3600Q)²·σ²,
// without coulombic efficiency even while charging; the mean has it.
func TestPredictionByHand(t *testing.T) {
	c := straightCell(0.9, 0)
	spec := ekfSpec()
	spec.SOCStdPerSqrtS, spec.CurrentStdA = 1e-3, 2
	in := readings([]float64{-7.2, 0}, []float64{nan, nan}, nil)
	in.PeriodS, in.TimeS[1] = 4, 4
	out := advance(t, build(t, estimator.Setup{Spec: spec, Cell: c, SOCStart: 0.5, PeriodS: 1}), in)
	b := 4.0 / (3600 * 4.8)
	if want := 0.5 + 0.9*7.2*b; math.Abs(out.SOCFree[1]-want) > 1e-15 {
		t.Errorf("SOC is %v, by hand %v", out.SOCFree[1], want)
	}
	if want := math.Sqrt(0.01 + 4e-6 + 4*b*b); math.Abs(out.SOCStd[1]-want) > 1e-15 {
		t.Errorf("deviation is %v, by hand %v", out.SOCStd[1], want)
	}
}

// Two samples at one time are two looks at one state: informations add.
func TestSamplesAtOneTimeAddInformation(t *testing.T) {
	spec := ekfSpec()
	spec.SOCStdPerSqrtS, spec.CurrentStdA = 0.1, 0
	in := readings([]float64{3, 3}, []float64{3.3, 3.35}, nil)
	in.PeriodS, in.TimeS[1] = 0, 0
	out := advance(t, build(t, estimator.Setup{Spec: spec, Cell: straightCell(1, 0), SOCStart: 0.5}), in)
	info := 0.36 / (0.004 * 0.004)
	variance := 1 / (100 + 2*info)
	if want := math.Sqrt(variance); math.Abs(out.SOCStd[1]-want) > 1e-14 {
		t.Errorf("deviation is %v, by hand %v", out.SOCStd[1], want)
	}
	if want := variance * (100*0.5 + info*(0.5+0.35/0.6)); math.Abs(out.SOCFree[1]-want) > 1e-12 {
		t.Errorf("SOC is %v, by hand %v", out.SOCFree[1], want)
	}
}

// What a missing reading counts as, written out as readings that are there.
func TestMissingReadingsAreTheLastOnes(t *testing.T) {
	c := estimatortest.RichCell()
	v := []float64{3.3, 3.29, 3.31, 3.3, 3.28}
	gaps := readings([]float64{nan, nan, 20, nan, -9}, v, []float64{nan, nan, 12, nan, 14})
	said := readings([]float64{0, 0, 20, 20, -9}, v, []float64{25, 25, 12, 12, 14})
	for _, reading := range []record.CurrentReading{record.Instant, record.IntervalMean} {
		gaps.CurrentReading, said.CurrentReading = reading, reading
		setup := estimator.Setup{Spec: ekfSpec(), Cell: c, SOCStart: 0.5, PeriodS: 1}
		a, b := build(t, setup), build(t, setup)
		got, want := advance(t, a, gaps), advance(t, b, said)
		for k := range v {
			if got.SOCFree[k] != want.SOCFree[k] || got.SOCStd[k] != want.SOCStd[k] || got.InnovationV[k] != want.InnovationV[k] {
				t.Errorf("%s, sample %d: %v ± %v, with the readings written out %v ± %v", reading, k, got.SOCFree[k], got.SOCStd[k], want.SOCFree[k], want.SOCStd[k])
			}
		}
	}
}

// With fewer branches the slowest stay and the others' resistance joins R0:
// the same as a cell written that way.
func TestFewerBranches(t *testing.T) {
	whole := straightCell(1, 0.02, [2]float64{0.004, 3}, [2]float64{0.012, 400}, [2]float64{0.008, 20})
	course, err := estimatortest.Run(whole, estimatortest.Options{Samples: 500, Even: true, SOC: 0.6}, 8)
	if err != nil {
		t.Fatal(err)
	}
	for n, folded := range []*cell.Cell{straightCell(1, 0.044), straightCell(1, 0.032, [2]float64{0.012, 400}),
		straightCell(1, 0.024, [2]float64{0.012, 400}, [2]float64{0.008, 20})} {
		spec := ekfSpec()
		spec.Branches = n
		a := advance(t, build(t, estimator.Setup{Spec: spec, Cell: whole, SOCStart: 0.5, PeriodS: 1}), course.Readings)
		b := advance(t, build(t, estimator.Setup{Spec: ekfSpec(), Cell: folded, SOCStart: 0.5, PeriodS: 1}), course.Readings)
		for k := range a.SOCFree {
			if math.Abs(a.SOCFree[k]-b.SOCFree[k]) > 1e-12 || math.Abs(a.SOCStd[k]-b.SOCStd[k]) > 1e-12 {
				t.Fatalf("%d branches, sample %d: %v, the folded cell gives %v", n, k, a.SOCFree[k], b.SOCFree[k])
			}
		}
	}
	spec := ekfSpec()
	spec.Branches = 4
	if _, err := kalman.NewEKF(estimator.Setup{Spec: spec, Cell: whole, SOCStart: 0.5, PeriodS: 1}); err == nil || !strings.Contains(err.Error(), "4 branches") {
		t.Errorf("4 branches of a cell with 3: error is %v", err)
	}
}

// Outside its table the OCV goes on with its edge slope, in value and
// derivative alike: a filter that is told a full cell, or pushed beyond full
// by a lying sensor, settles where the voltage says.
func TestStaysAtFullCharge(t *testing.T) {
	c := estimatortest.PlainCell()
	m, err := cell.Compile(c, cell.AsBuilt(1))
	if err != nil {
		t.Fatal(err)
	}
	var v cell.View
	v.Bind(m, 25)
	full, edge := v.OCV(1)
	for _, told := range []float64{0.7, 0.95, 1} {
		for _, offsetV := range []float64{-0.03, 0, 0.05} {
			n := 4000
			i, u := make([]float64, n), make([]float64, n)
			for k := range u {
				u[k] = full + offsetV
			}
			out := advance(t, build(t, estimator.Setup{Spec: ekfSpec(), Cell: c, SOCStart: told, PeriodS: 1}), readings(i, u, nil))
			want := 1 + offsetV/edge // by the edge slope; below full the curve is close to it
			if got := out.SOCFree[n-1]; math.Abs(got-want) > 0.01 || out.SOC[n-1] != min(max(got, 0), 1) {
				t.Errorf("told %g, voltage off by %g V: free SOC %g, reported %g, want about %g", told, offsetV, got, out.SOC[n-1], want)
			}
		}
	}
}

// Over a million samples the covariance stays positive and the filter found.
func TestLongRun(t *testing.T) {
	for _, period := range []float64{1, 0} { // kernel, general
		spec := ekfSpec()
		spec.SOCStdPerSqrtS, spec.BranchStdVPerSqrtS = 0, 0 // the hard case: nothing but the current's noise adds
		c := estimatortest.PlainCell()
		e := build(t, estimator.Setup{Spec: spec, Cell: c, SOCStart: 0.4, PeriodS: 1})
		draw := rand.New(rand.NewPCG(1, 0))
		in, out := record.MakeReadings(1000), estimator.MakeEstimate(1000)
		in.PeriodS = period
		for block := range 1000 {
			for k := range in.TimeS {
				in.TimeS[k], in.CurrentA[k] = float64(block*1000+k), 6*math.Sin(float64(block*1000+k)/500)
				in.VoltageV[k], in.TemperatureC[k] = 3.65-0.04*in.CurrentA[k]+0.004*draw.NormFloat64(), 25
			}
			if err := e.Advance(&in, &out); err != nil {
				t.Fatal(err)
			}
			var chol mat.Cholesky
			if !chol.Factorize(covariance(e)) {
				t.Fatalf("block %d: covariance is not positive definite", block)
			}
		}
	}
}

func TestLostOnNegativeVariance(t *testing.T) {
	for n := 1; n <= 3; n++ {
		setup := estimator.Setup{Spec: ekfSpec(), Cell: straightCell(1, 0.01, [][2]float64{{0.01, 30}, {0.02, 300}, {0.005, 4}}[:n]...), SOCStart: 0.5, PeriodS: 1}
		for bad := 0; bad <= n; bad++ {
			for _, period := range []float64{1, 0} { // kernel, general
				// branches, samples, time, current, temperature, hysteresis, mean, covariance
				state := []float64{float64(n), 10, 9, 0, 25, 0}
				state = append(state, append([]float64{0.5}, make([]float64, n)...)...)
				for r := 0; r <= n; r++ {
					for c := r; c <= n; c++ {
						v := 0.0
						if r == c {
							v = 1e-2
						}
						if r == c && r == bad {
							v = -1e-6 // too little to turn the innovation's variance
						}
						state = append(state, v)
					}
				}
				e := build(t, setup)
				if err := e.UnmarshalBinary(estimator.PackState("ekf", state)); err != nil {
					t.Fatal(err)
				}
				in := readings([]float64{1, 1}, []float64{3.3, 3.3}, nil)
				in.PeriodS, in.TimeS[0], in.TimeS[1] = period, 10, 11
				out := estimator.MakeEstimate(2)
				var lost *estimator.LostError
				if err := e.Advance(&in, &out); !errors.As(err, &lost) {
					t.Fatalf("%d branches, variance %d, period %g: error is %v, want a LostError", n, bad, period, err)
				}
				if lost.Sample != 10 || lost.TimeS != 10 || !strings.Contains(lost.Cause, "covariance not positive: variance of "+e.(estimator.Inspectable).StateNames()[bad]) {
					t.Errorf("%d branches, variance %d, period %g: %v, want sample 10 at 10 s and what is negative", n, bad, period, lost)
				}
				if _, err := e.MarshalBinary(); err == nil {
					t.Error("a lost filter's state was saved")
				}
			}
		}
	}
}

// With every deviation but the voltage's zero the filter only counts, and is
// not lost.
func TestCertainFilterCounts(t *testing.T) {
	c := straightCell(1, 0.01, [2]float64{0.01, 30})
	e := build(t, estimator.Setup{Spec: estimator.Spec{Kind: "ekf", Branches: -1, VoltageStdV: 0.01}, Cell: c, SOCStart: 0.5, PeriodS: 1})
	i, v := make([]float64, 101), make([]float64, 101)
	for k := range i {
		i[k], v[k] = 1.728, 3.5
	}
	out := advance(t, e, readings(i, v, nil))
	if got := out.SOCFree[100]; math.Abs(got-0.49) > 1e-13 || out.SOCStd[100] != 0 {
		t.Errorf("SOC is %v ± %v, want 0.49 ± 0", got, out.SOCStd[100])
	}
}

func TestBadSpecs(t *testing.T) {
	for _, bad := range []struct {
		name   string
		change func(*estimator.Spec)
	}{
		{"start.soc_std", func(s *estimator.Spec) { s.SOCStd = -0.1 }},
		{"start.soc_std", func(s *estimator.Spec) { s.SOCStd = nan }},
		{"start.branch_std_v", func(s *estimator.Spec) { s.BranchStdV = math.Inf(1) }},
		{"process.soc_std_per_sqrt_s", func(s *estimator.Spec) { s.SOCStdPerSqrtS = -1 }},
		{"process.branch_std_v_per_sqrt_s", func(s *estimator.Spec) { s.BranchStdVPerSqrtS = nan }},
		{"measurement.voltage_std_v", func(s *estimator.Spec) { s.VoltageStdV = 0 }},
		{"measurement.voltage_std_v", func(s *estimator.Spec) { s.VoltageStdV = nan }},
		{"measurement.current_std_a", func(s *estimator.Spec) { s.CurrentStdA = -0.02 }},
	} {
		spec := ekfSpec()
		bad.change(&spec)
		_, err := kalman.NewEKF(estimator.Setup{Spec: spec, Cell: estimatortest.PlainCell(), SOCStart: 0.5, PeriodS: 1})
		if err == nil || !strings.Contains(err.Error(), bad.name) || !strings.Contains(err.Error(), "allowed") {
			t.Errorf("%s: error is %v, want one that names it and what is allowed", bad.name, err)
		}
	}
	if _, err := kalman.NewEKF(estimator.Setup{Spec: ekfSpec()}); err == nil {
		t.Error("a filter without a cell was built")
	}
}

package score

import (
	"math"
	"math/rand/v2"
	"testing"

	"pgregory.net/rapid"

	"soctrial/estimator"
	"soctrial/plant"
)

// run is a stored run to be scored in two ways.
type run struct {
	truth plant.Truth
	est   estimator.Estimate
}

// noisy draws a run whose errors wander in and out of the band, with missing
// innovations and deviations.
func noisy(t *rapid.T, samples int, periodS float64) run {
	r := run{truth: plant.MakeTruth(samples), est: estimator.MakeEstimate(samples)}
	r.truth.PeriodS = periodS
	stated := rapid.Bool().Draw(t, "stated")
	gaps := rapid.IntRange(1, 5).Draw(t, "gaps")
	bias := rapid.Float64Range(-0.2, 0.2).Draw(t, "bias")
	decay := rapid.Float64Range(0.5, 1).Draw(t, "decay")
	wild := rapid.SliceOfN(rapid.Float64Range(-1, 1), samples, samples).Draw(t, "wild")
	for k := range samples {
		r.truth.TimeS[k] = float64(k) * periodS
		r.truth.SOC[k] = 1 - 0.9*float64(k)/float64(samples)
		e := bias + 0.02*wild[k]
		bias *= decay
		r.est.SOCFree[k] = r.truth.SOC[k] + e
		r.est.SOC[k] = min(max(r.est.SOCFree[k], 0), 1)
		r.est.SOCStd[k] = math.NaN()
		if stated {
			r.est.SOCStd[k] = math.Round(2e4*math.Abs(wild[(k+1)%samples])) / 1e6 // 0 now and then
		}
		r.est.InnovationV[k], r.est.InnovationStdV[k] = math.NaN(), math.NaN()
		if k%gaps == 0 {
			r.est.InnovationV[k] = 0.01 * wild[(k+3)%samples]
			if stated {
				r.est.InnovationStdV[k] = 0.003 + 0.001*wild[(k+7)%samples]
			}
		}
	}
	return r
}

func settings(t *rapid.T) Settings {
	return Settings{
		SettleAfterS:  float64(rapid.IntRange(0, 400).Draw(t, "settle")),
		ConvergeBand:  rapid.Float64Range(0.005, 0.1).Draw(t, "band"),
		ConvergeHoldS: float64(rapid.IntRange(0, 60).Draw(t, "hold")),
		LowSOC:        rapid.Float64Range(0, 0.5).Draw(t, "low"),
	}
}

// Every metric against its own definition on stored arrays. The tolerance is
// the rounding of sums; the percentile's is one bin.
func TestMetricsAgainstTheirDefinitions(t *testing.T) {
	var a Accumulator
	rapid.Check(t, func(t *rapid.T) {
		samples := rapid.IntRange(1, 700).Draw(t, "samples")
		periodS := rapid.SampledFrom([]float64{0.1, 0.5, 1, 7}).Draw(t, "period")
		r, set := noisy(t, samples, periodS), settings(t)
		a.Reset(set)
		a.Add(&r.truth, &r.est)
		n := naive{set: set, timeS: r.truth.TimeS, soc: r.truth.SOC, est: r.est, weight: ones(samples),
			endS: r.truth.TimeS[samples-1] + periodS, duration: r.truth.TimeS[samples-1] + periodS}
		if rapid.Bool().Draw(t, "told") {
			n.duration, n.limitedS = n.endS-0.3*periodS, 3.5
			n.endS = n.duration
			a.SetDuration(n.duration, n.limitedS)
		}
		same(t, a.Metrics(), n.metrics())
	})
}

// A record's uneven and repeated times, with gaps in its reference.
func TestReplayAgainstItsDefinitions(t *testing.T) {
	var a Accumulator
	rapid.Check(t, func(t *rapid.T) {
		samples := rapid.IntRange(2, 600).Draw(t, "samples")
		r, set := noisy(t, samples, 1), settings(t)
		set.WeightByInterval = rapid.Bool().Draw(t, "weighted")
		steps := rapid.SliceOfN(rapid.SampledFrom([]float64{0, 0.1, 1, 1, 1, 30}), samples, samples).Draw(t, "steps")
		missing := rapid.SliceOfN(rapid.IntRange(0, 9), samples, samples).Draw(t, "missing")
		at := rapid.Float64Range(0, 100).Draw(t, "start")
		weight := ones(samples)
		for k := range samples {
			r.truth.TimeS[k] = at
			if k+1 < samples {
				at += steps[k]
			}
			if missing[k] == 0 {
				r.truth.SOC[k] = math.NaN()
			}
		}
		if set.WeightByInterval {
			for k := range weight {
				weight[k] = 0
				if k+1 < samples {
					weight[k] = r.truth.TimeS[k+1] - r.truth.TimeS[k]
				}
			}
		}
		cut := rapid.IntRange(0, samples).Draw(t, "cut")
		head, tail := r.est.Slice(0, cut), r.est.Slice(cut, samples)
		a.Reset(set)
		a.AddReference(r.truth.TimeS[:cut], r.truth.SOC[:cut], &head)
		a.AddReference(r.truth.TimeS[cut:], r.truth.SOC[cut:], &tail)
		n := naive{set: set, timeS: r.truth.TimeS, soc: r.truth.SOC, est: r.est, weight: weight,
			endS: r.truth.TimeS[samples-1], duration: r.truth.TimeS[samples-1] - r.truth.TimeS[0]}
		same(t, a.Metrics(), n.metrics())
	})
}

func ones(n int) []float64 {
	w := make([]float64, n)
	for i := range w {
		w[i] = 1
	}
	return w
}

func same(t *rapid.T, got, want Metrics) {
	g, w := got.Values(), want.Values()
	for i, name := range MetricNames() {
		tolerance := 1e-12 * (1 + math.Abs(w[i]))
		if name == "soc_p95_abs" {
			tolerance = binWidth
		}
		if math.IsNaN(g[i]) != math.IsNaN(w[i]) || math.Abs(g[i]-w[i]) > tolerance {
			t.Errorf("%s is %v, by its definition %v", name, g[i], w[i])
		}
	}
}

// However a run is cut into blocks, its metrics are the same bits.
func TestCutsChangeNoBit(t *testing.T) {
	var a Accumulator
	rapid.Check(t, func(t *rapid.T) {
		samples := rapid.IntRange(1, 1500).Draw(t, "samples")
		r, set := noisy(t, samples, 1), settings(t)
		a.Reset(set)
		a.Add(&r.truth, &r.est)
		whole := a.Metrics()
		a.Reset(set)
		for from := 0; from < samples; {
			to := min(samples, from+rapid.IntRange(1, 600).Draw(t, "block"))
			truth, est := r.truth.Slice(from, to), r.est.Slice(from, to)
			a.Add(&truth, &est)
			from = to
		}
		cut := a.Metrics()
		g, w := cut.Values(), whole.Values()
		for i, name := range MetricNames() {
			if math.Float64bits(g[i]) != math.Float64bits(w[i]) {
				t.Errorf("%s is %v in blocks and %v in one", name, g[i], w[i])
			}
		}
	})
}

// A run worked out on paper: true SOC falls by 0.1 a sample, the estimate lies
// 0.08 too high and then 0.02 too low.
func TestClosedForm(t *testing.T) {
	truth, est := plant.MakeTruth(10), estimator.MakeEstimate(10)
	truth.PeriodS = 10
	for k := range 10 {
		truth.TimeS[k], truth.SOC[k] = 10*float64(k), 0.9-0.1*float64(k)
		e := 0.08
		if k >= 5 {
			e = -0.02
		}
		est.SOC[k] = max(truth.SOC[k]+e, 0)
		est.SOCFree[k] = truth.SOC[k] + e // at k = 9 limited: -0.02 is reported as 0
		est.SOCStd[k] = 0.04
		est.InnovationV[k], est.InnovationStdV[k] = 0.006, 0.003
	}
	est.InnovationV[3] = 0.003
	truth.SOC[9] = 0
	est.SOC[9], est.SOCFree[9] = 0, -0.02
	var a Accumulator
	a.Reset(Settings{SettleAfterS: 60, ConvergeBand: 0.05, ConvergeHoldS: 30, LowSOC: 0.2})
	a.Add(&truth, &est)
	a.SetDuration(100, 4)
	want := Metrics{
		SOCRMSE: math.Sqrt((5*0.0064 + 4*0.0004) / 10), SOCMAE: (0.4 + 0.08) / 10, SOCBias: (0.4 - 0.08) / 10,
		SOCMaxAbs: 0.08, SOCP95Abs: 0.08, SettledRMSE: math.Sqrt(3 * 0.0004 / 4), SettledMaxAbs: 0.02,
		ConvergeS: 50, EndError: 0, LowSOCMaxAbs: 0.02, SOCStepMax: 0.02,
		VoltageRMSEV: math.Sqrt((9*36e-6 + 9e-6) / 10), NISMean: (9*4 + 1) / 10.0, NISInBandShare: 0.1,
		NEESMean: (5*4 + 5*0.25) / 10, Coverage95: 0.5, Samples: 10, DurationS: 100, LimitedS: 4,
	}
	got := a.Metrics()
	g, w := got.Values(), want.Values()
	for i, name := range MetricNames() {
		tolerance := 1e-12
		if name == "soc_p95_abs" {
			tolerance = binWidth
		}
		if !(math.Abs(g[i]-w[i]) <= tolerance) {
			t.Errorf("%s is %v, on paper %v", name, g[i], w[i])
		}
	}
}

// The hold ends with the run: one sample less and nothing has converged.
func TestConvergenceNeedsTheWholeHold(t *testing.T) {
	for _, tt := range []struct {
		samples int
		want    float64
	}{{59, math.NaN()}, {60, 0}, {61, 0}} {
		truth, est := plant.MakeTruth(tt.samples), estimator.MakeEstimate(tt.samples)
		truth.PeriodS = 1
		for k := range tt.samples {
			truth.TimeS[k] = float64(k)
		}
		var a Accumulator
		a.Reset(Settings{ConvergeBand: 0.05, ConvergeHoldS: 60})
		a.Add(&truth, &est)
		if got := a.Metrics().ConvergeS; got != tt.want && !(math.IsNaN(got) && math.IsNaN(tt.want)) {
			t.Errorf("%d samples: converge_s is %g, want %g", tt.samples, got, tt.want)
		}
	}
}

func TestNothingAddedIsNothing(t *testing.T) {
	var a Accumulator
	a.Reset(Settings{ConvergeHoldS: 60})
	got, want := a.Metrics(), Nothing()
	got.DurationS, got.LimitedS = math.NaN(), math.NaN() // how long nothing lasted is known: 0
	g, w := got.Values(), want.Values()
	for i, name := range MetricNames() {
		if g[i] != w[i] && !(math.IsNaN(g[i]) && math.IsNaN(w[i])) {
			t.Errorf("%s is %v, want %v", name, g[i], w[i])
		}
	}
}

// A perfect estimate has a percentile of 0, not of half a bin.
func TestPercentileIsAtMostTheLargest(t *testing.T) {
	truth, est := plant.MakeTruth(100), estimator.MakeEstimate(100)
	truth.PeriodS = 1
	var a Accumulator
	a.Reset(Settings{})
	a.Add(&truth, &est)
	if got := a.Metrics().SOCP95Abs; got != 0 {
		t.Errorf("soc_p95_abs of no error is %g", got)
	}
}

// A run keeps nothing from the one before, whatever that one touched.
func TestResetForgets(t *testing.T) {
	var used, fresh Accumulator
	rapid.Check(t, func(t *rapid.T) {
		first, second := noisy(t, 300, 1), noisy(t, 200, 1)
		set := settings(t)
		used.Reset(set)
		used.Add(&first.truth, &first.est)
		used.Reset(set)
		used.Add(&second.truth, &second.est)
		fresh = Accumulator{}
		fresh.Reset(set)
		fresh.Add(&second.truth, &second.est)
		a, b := used.Metrics(), fresh.Metrics()
		g, w := a.Values(), b.Values()
		for i, name := range MetricNames() {
			if math.Float64bits(g[i]) != math.Float64bits(w[i]) {
				t.Errorf("%s is %v after another run, %v alone", name, g[i], w[i])
			}
		}
	})
}

// A NaN estimate must show in the means, never vanish from them.
func TestNaNEstimateShows(t *testing.T) {
	truth, est := plant.MakeTruth(300), estimator.MakeEstimate(300)
	truth.PeriodS = 1
	for k := range truth.TimeS {
		truth.TimeS[k] = float64(k)
	}
	est.SOC[200] = math.NaN()
	var a Accumulator
	a.Reset(Settings{SettleAfterS: 10})
	a.Add(&truth, &est)
	if m := a.Metrics(); !math.IsNaN(m.SOCRMSE) || !math.IsNaN(m.SettledRMSE) {
		t.Errorf("soc_rmse %g and settled_rmse %g hide a NaN", m.SOCRMSE, m.SettledRMSE)
	}
	a.Reset(Settings{SettleAfterS: 10})
	a.AddReference(truth.TimeS, truth.SOC, &est)
	if m := a.Metrics(); !math.IsNaN(m.SOCRMSE) {
		t.Errorf("soc_rmse %g of a record hides a NaN", m.SOCRMSE)
	}
}

// Long runs keep their digits: 3e6 samples of one error have that mean to the
// last few bits, where one running sum loses five digits.
func TestLongSumsKeepTheirDigits(t *testing.T) {
	const block, blocks = 1000, 3000
	truth, est := plant.MakeTruth(block), estimator.MakeEstimate(block)
	truth.PeriodS = 1
	for k := range block {
		est.SOC[k] = 0.1
	}
	var a Accumulator
	a.Reset(Settings{SettleAfterS: math.Inf(1)})
	for range blocks {
		a.Add(&truth, &est)
	}
	if got := a.Metrics().SOCBias; math.Abs(got-0.1) > 1e-13 {
		t.Errorf("mean of %d times 0.1 is off by %g", block*blocks, got-0.1)
	}
}

func TestAddAllocatesNothing(t *testing.T) {
	truth, est := plant.MakeTruth(300), estimator.MakeEstimate(300)
	truth.PeriodS = 1
	a := new(Accumulator)
	a.Reset(Settings{SettleAfterS: 10})
	if n := testing.AllocsPerRun(10, func() {
		a.Add(&truth, &est)
		a.AddReference(truth.TimeS, truth.SOC, &est)
		_ = a.Metrics()
		a.Reset(Settings{})
	}); n != 0 {
		t.Errorf("%g allocations a run", n)
	}
}

// BenchmarkAdd is what scoring costs a sample of a plain run of about an hour.
// As in a run, a block still lies in the nearest cache when it is scored.
func BenchmarkAdd(b *testing.B) {
	const block, blocks = 256, 14
	var truth [2]plant.Truth // before and after settling
	var est [2]estimator.Estimate
	r := rand.New(rand.NewPCG(1, 2))
	for i := range truth {
		t, e := plant.MakeTruth(block), estimator.MakeEstimate(block)
		t.PeriodS = 1
		for k := range block {
			t.TimeS[k], t.SOC[k] = float64(1000*i+k), 1-float64(k)/400
			e.SOC[k] = t.SOC[k] + 0.005*r.NormFloat64()
			e.SOCFree[k], e.SOCStd[k] = e.SOC[k], 0.005
			e.InnovationV[k], e.InnovationStdV[k] = 0.003*r.NormFloat64(), 0.003
		}
		truth[i], est[i] = t, e
	}
	a := new(Accumulator)
	for b.Loop() {
		a.Reset(Settings{SettleAfterS: 600, ConvergeBand: 0.05, ConvergeHoldS: 60, LowSOC: 0.2})
		for k := range blocks {
			i := min(k/3, 1)
			a.Add(&truth[i], &est[i])
		}
		_ = a.Metrics()
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/(block*blocks), "ns/sample")
}

// Package score says how wrong an estimator was and whether it was honest
// about it: metrics over truth and estimates, limits and summaries over
// scenarios.
//
// Metrics are running sums over blocks, so that a run of any length costs the
// same memory, and however a run is cut into blocks its metrics are the same
// bits. Means are plain means over samples; only in replay, where samples lie
// unevenly, is each weighted by the interval it stands for.
//
// The samples of one run are correlated: bands for NEES, NIS and coverage are
// taken over scenarios, never over samples. The package draws no conclusion
// from one run alone.
package score

import "math"

// Metrics are one run's scores. SOC and its errors are fractions; an error is
// the reported estimate minus the true SOC. NaN stands where a kind states no
// deviation or nothing qualifies; it is written as null. A time is counted from
// the run's first sample.
type Metrics struct {
	SOCRMSE        float64 // soc_rmse: root of the mean squared error over the whole run
	SOCMAE         float64 // soc_mae: mean of |error|
	SOCBias        float64 // soc_bias: mean error
	SOCMaxAbs      float64 // soc_max_abs: largest |error|
	SOCP95Abs      float64 // soc_p95_abs: 95th percentile of |error| over samples (in replay too, without weights), from a histogram of 5e-5, at most soc_max_abs
	SettledRMSE    float64 // settled_rmse: soc_rmse over samples with t ≥ settle_after_s
	SettledMaxAbs  float64 // settled_max_abs: soc_max_abs over samples with t ≥ settle_after_s
	ConvergeS      float64 // converge_s: first sample time t with |error| ≤ converge_band at every sample in [t, t + converge_hold_s], the run lasting to its end; s
	EndError       float64 // end_error: error at the last sample
	LowSOCMaxAbs   float64 // low_soc_max_abs: largest |error| over samples whose true SOC < low_soc
	SOCStepMax     float64 // soc_step_max: largest |Δestimate - Δtrue| between consecutive samples, both with t ≥ settle_after_s
	VoltageRMSEV   float64 // voltage_rmse_v: root of the mean squared innovation over samples that have one; V
	NISMean        float64 // nis_mean: mean of y²/S over samples with an innovation y and its stated variance S > 0
	NISInBandShare float64 // nis_in_band_share: share of those samples with y²/S ≤ 3.841
	NEESMean       float64 // nees_mean: mean of (SOC before it is limited - true SOC)²/soc_std² over samples with a stated soc_std > 0
	Coverage95     float64 // coverage_95: share of samples with a stated soc_std where |that error| ≤ 1.96 soc_std
	Samples        int64   // samples: how many the estimator followed
	DurationS      float64 // duration_s: how long the duty or record lasted; s
	LimitedS       float64 // limited_s: how long the plant cut the demand back to stay in the cell's limits; s
}

// Nothing returns the metrics of a run that has none: all NaN, no samples.
func Nothing() Metrics {
	n := math.NaN()
	return Metrics{n, n, n, n, n, n, n, n, n, n, n, n, n, n, n, n, 0, n, n}
}

// MetricNames lists the result columns in the order of Values.
func MetricNames() []string {
	return []string{"soc_rmse", "soc_mae", "soc_bias", "soc_max_abs", "soc_p95_abs", "settled_rmse",
		"settled_max_abs", "converge_s", "end_error", "low_soc_max_abs", "soc_step_max", "voltage_rmse_v",
		"nis_mean", "nis_in_band_share", "nees_mean", "coverage_95", "samples", "duration_s", "limited_s"}
}

// Values returns the metrics in the order of MetricNames.
func (m *Metrics) Values() []float64 {
	return []float64{m.SOCRMSE, m.SOCMAE, m.SOCBias, m.SOCMaxAbs, m.SOCP95Abs, m.SettledRMSE,
		m.SettledMaxAbs, m.ConvergeS, m.EndError, m.LowSOCMaxAbs, m.SOCStepMax, m.VoltageRMSEV,
		m.NISMean, m.NISInBandShare, m.NEESMean, m.Coverage95, float64(m.Samples), m.DurationS, m.LimitedS}
}

// Value returns the metric called name, and whether there is one.
func (m *Metrics) Value(name string) (float64, bool) {
	for i, n := range MetricNames() {
		if n == name {
			return m.Values()[i], true
		}
	}
	return math.NaN(), false
}

// Status is how one run ended.
type Status string

// How a run ended.
const (
	OK     Status = "ok"     // the estimator followed to the duty's end
	Lost   Status = "lost"   // the estimator gave up; Reason says where and why
	Failed Status = "failed" // the scenario could not be run; Reason says why
)

// Result is one row of results: one estimator on one scenario.
type Result struct {
	ScenarioID                 int64
	Seed                       uint64
	Cell, Duty, Sensors, Group string
	Estimator                  string
	Status                     Status
	Reason                     string // also why a duty ended early, with status ok: power, voltage_min_v, soc_zero …
	Metrics                    Metrics
}

// Package score says how wrong an estimator was and whether it was honest
// about it: metrics over truth and estimates, and limits over scenarios.
//
// Metrics are running sums over blocks, so that a run of any length costs the
// same memory. Every mean is weighted by the interval its sample stands for.
// The samples of one run are correlated: bands for NEES, NIS and coverage are
// taken over scenarios, never over samples.
package score

// Metrics are one run's scores. NaN stands where a kind states no deviation or
// nothing qualifies; it is written as null.
type Metrics struct {
	SOCRMSE        float64 // soc_rmse
	SOCMAE         float64 // soc_mae
	SOCBias        float64 // soc_bias
	SOCMaxAbs      float64 // soc_max_abs
	SOCP95Abs      float64 // soc_p95_abs
	SettledRMSE    float64 // settled_rmse
	SettledMaxAbs  float64 // settled_max_abs
	ConvergeS      float64 // converge_s
	EndError       float64 // end_error
	LowSOCMaxAbs   float64 // low_soc_max_abs
	SOCStepMax     float64 // soc_step_max
	VoltageRMSEV   float64 // voltage_rmse_v
	NISMean        float64 // nis_mean
	NISInBandShare float64 // nis_in_band_share
	NEESMean       float64 // nees_mean
	Coverage95     float64 // coverage_95
	Samples        int64   // samples
	DurationS      float64 // duration_s
	LimitedS       float64 // limited_s
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

package job

import (
	"math"
	"slices"

	"soctrial/benches"
	"soctrial/benches/scenario"
	"soctrial/benches/score"
)

// worstCases is how many of the worst scenarios a summary tells of.
const worstCases = 5

// Summary is what a person reads of results: each estimator over its scenarios,
// the limits, and the worst scenarios with what is special about them.
type Summary struct {
	Estimators []EstimatorSummary
	Limits     []JudgedLimit
	Worst      []WorstCase
	WorstBy    string // the metric by which they are the worst
}

// EstimatorSummary is one estimator.
type EstimatorSummary struct {
	score.Summary
	NsPerSample float64  // NaN where it was not timed
	Reasons     []Reason // why runs were lost or failed, the most frequent first
}

// Reason is why runs did not come to an end of their own.
type Reason struct {
	Text  string
	Count int
}

// JudgedLimit is one limit on one estimator.
type JudgedLimit struct {
	score.Judgement
	// Because says what sets scenarios that broke the limit apart from those
	// that met it, the clearest first; empty where it holds or nothing does.
	Because []Contrast
	Worst   float64 // largest size of the metric; NaN where none has it
	WorstID int64
}

// WorstCase is one of the worst results.
type WorstCase struct {
	Result  score.Result
	Value   float64 // of the metric; NaN for a lost run
	Special []score.Special
}

// Metrics a summary shows the spread of.
const (
	MetricSettledMaxAbs = "settled_max_abs"
	MetricSOCRMSE       = "soc_rmse"
	MetricConverge      = "converge_s"
)

// Summarise sums results up. The set may be nil: then nothing is said of what
// is special.
func Summarise(results []score.Result, judged []score.Judgement, set *scenario.Set, costs map[string]benches.Cost) *Summary {
	s := &Summary{WorstBy: MetricSettledMaxAbs}
	for _, e := range score.Summarise(results, score.MetricNames()) {
		ns := math.NaN()
		if c := costs[e.Estimator]; c.Samples > 0 && c.Nanos > 0 {
			ns = float64(c.Nanos) / float64(c.Samples)
		}
		s.Estimators = append(s.Estimators, EstimatorSummary{Summary: e, NsPerSample: ns, Reasons: reasonsOf(results, e.Estimator)})
	}
	columns, at := columnsOf(set)
	for _, j := range judged {
		s.Limits = append(s.Limits, judgedLimit(j, results, columns, at))
	}
	worst := score.Worst(results, "", s.WorstBy, worstCases)
	if len(worst) == 0 { // runs too short to settle
		s.WorstBy = MetricSOCRMSE
		worst = score.Worst(results, "", s.WorstBy, worstCases)
	}
	for _, i := range worst {
		w := WorstCase{Result: results[i]}
		w.Value, _ = results[i].Metrics.Value(s.WorstBy)
		if row, ok := at[results[i].ScenarioID]; ok {
			w.Special = standingOut(score.SpecialOf(columns, row, mostSpecial))
		}
		s.Worst = append(s.Worst, w)
	}
	return s
}

// What stands out of a worst case: no more than mostSpecial values, and of the
// commoner ones only the first.
const (
	mostSpecial = 3
	commonShare = 0.2
)

func standingOut(special []score.Special) []score.Special {
	for i, s := range special {
		if i > 0 && s.Share > commonShare {
			return special[:i]
		}
	}
	return special
}

// Summary sums the outcome up.
func (o *Outcome) Summary() *Summary { return Summarise(o.Results, o.Judged, o.Set, o.Costs) }

func reasonsOf(results []score.Result, estimator string) []Reason {
	var out []Reason
	for i := range results {
		r := &results[i]
		if r.Estimator != estimator || r.Reason == "" {
			continue
		}
		text := r.Reason
		if r.Status != score.OK {
			text = string(r.Status) + ": " + text
		}
		at := slices.IndexFunc(out, func(x Reason) bool { return x.Text == text })
		if at < 0 {
			out = append(out, Reason{Text: text})
			at = len(out) - 1
		}
		out[at].Count++
	}
	slices.SortStableFunc(out, func(a, b Reason) int { return b.Count - a.Count })
	return out
}

// judgedLimit looks for what the scenarios that broke a limit have in common.
func judgedLimit(j score.Judgement, results []score.Result, columns []score.Column, at map[int64]int) JudgedLimit {
	out := JudgedLimit{Judgement: j, Worst: math.NaN()}
	var broke, met []int
	for i := range results {
		r := &results[i]
		if r.Estimator != j.Estimator || j.Limit.Group != "" && r.Group != j.Limit.Group {
			continue
		}
		x, _ := r.Metrics.Value(j.Limit.Metric)
		if size := math.Abs(x); size > out.Worst || math.IsNaN(out.Worst) && !math.IsNaN(size) {
			out.Worst, out.WorstID = size, r.ScenarioID
		}
		row, known := at[r.ScenarioID]
		switch {
		case !known:
		case r.Status != score.OK || math.Abs(x) > j.Limit.AtMost || math.IsNaN(x) && j.Limit.Metric == MetricConverge:
			broke = append(broke, row)
		case math.Abs(x) <= j.Limit.AtMost:
			met = append(met, row)
		}
	}
	if j.Verdict != score.Pass {
		out.Because = contrasts(columns, broke, met)
	}
	return out
}

// columnsOf returns a set's columns, with where each scenario stands in them.
func columnsOf(set *scenario.Set) ([]score.Column, map[int64]int) {
	at := map[int64]int{}
	if set == nil {
		return nil, at
	}
	for i := range set.Rows {
		at[set.Rows[i].ID] = i
	}
	var out []score.Column
	for _, c := range scenario.Columns() {
		if c.Name == "scenario_id" || c.Name == "seed" {
			continue
		}
		col := score.Column{Name: c.Name}
		for i := range set.Rows {
			v := c.Get(&set.Rows[i])
			switch {
			case c.Kind == scenario.Text:
				col.Texts = append(col.Texts, v.Text)
			case v.Null:
				col.Numbers = append(col.Numbers, math.NaN())
			case c.Kind == scenario.Int:
				col.Numbers = append(col.Numbers, float64(v.Int))
			default:
				col.Numbers = append(col.Numbers, v.Number)
			}
		}
		out = append(out, col)
	}
	return out, at
}

package score

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Limit is a bound on a metric that a share of scenarios must meet.
type Limit struct {
	Metric    string
	AtMost    float64 // bound of the metric's size, ≥ 0
	Share     float64 // (0, 1]
	Group     string  // only scenarios of this group; empty: all
	Estimator string  // only this estimator; empty: each by itself
}

// Verdict is what a limit comes to.
type Verdict string

// What a limit comes to.
const (
	Pass       Verdict = "pass"
	Fail       Verdict = "fail"
	CannotTell Verdict = "cannot tell"
)

// Sampling is how the scenarios came about.
type Sampling struct {
	// Counted says that the scenarios are all there is, from a grid or a list:
	// a limit is judged by the plain count, with no interval.
	Counted bool
	// Draw is the draw each scenario belongs to (label_draw); scenarios of one
	// draw depend on each other and count as one. One that is not in it is a
	// draw of its own. Not used when Counted.
	Draw map[int64]int64
}

// Judgement is one limit on one estimator.
type Judgement struct {
	Limit     Limit
	Estimator string
	// Draws by what they came to; with Counted, scenarios. A draw is met when
	// all its scenarios meet the bound.
	Met, NotMet, Undecided int
	Share                  float64 // Met of those decided; NaN without any
	// Low and High are the two-sided 95 % Clopper-Pearson interval of the share;
	// with Counted both are the share.
	Low, High float64
	Verdict   Verdict
	Why       string // one phrase with the numbers
}

// met is what one scenario or draw came to; the worst of a draw counts.
type met uint8

const (
	yes met = iota
	undecided
	no
)

// Judge judges every limit on every estimator it is for, in the order of the
// limits and of the estimators' first rows. A scenario meets a limit when the
// metric's size is at most the bound. Failed and lost rows and a null
// converge_s count as not met; any other null, as of a run too short for the
// metric, leaves the scenario undecided, and one undecided draw makes the limit
// CannotTell. Otherwise a limit passes when the lower end of its interval is at
// least the share, fails when the upper end is below it, and else CannotTell.
// An unknown metric is an error.
func Judge(limits []Limit, results []Result, s Sampling) ([]Judgement, error) {
	var estimators []string
	seen := map[string]bool{}
	for i := range results {
		if e := results[i].Estimator; !seen[e] {
			seen[e] = true
			estimators = append(estimators, e)
		}
	}
	var out []Judgement
	for _, l := range limits {
		if _, known := new(Metrics).Value(l.Metric); !known {
			return nil, fmt.Errorf("score: limit on metric %q: found no such metric, allowed is one of %q", l.Metric, MetricNames())
		}
		on := estimators
		if l.Estimator != "" {
			on = []string{l.Estimator}
		}
		for _, e := range on {
			out = append(out, judge(l, e, results, s))
		}
	}
	return out, nil
}

func judge(l Limit, estimator string, results []Result, s Sampling) Judgement {
	j := Judgement{Limit: l, Estimator: estimator}
	draws := map[int64]met{}
	for i := range results {
		r := &results[i]
		if r.Estimator != estimator || l.Group != "" && r.Group != l.Group {
			continue
		}
		m := meets(l, r)
		draw, shared := s.Draw[r.ScenarioID]
		if s.Counted || !shared {
			j.count(m)
			continue
		}
		draws[draw] = max(draws[draw], m)
	}
	for _, m := range draws {
		j.count(m)
	}
	j.decide(s.Counted)
	return j
}

func meets(l Limit, r *Result) met {
	if r.Status != OK {
		return no
	}
	x, _ := r.Metrics.Value(l.Metric)
	switch {
	case math.IsNaN(x) && l.Metric == "converge_s":
		return no
	case math.IsNaN(x):
		return undecided
	case math.Abs(x) <= l.AtMost:
		return yes
	}
	return no
}

func (j *Judgement) count(m met) {
	switch m {
	case yes:
		j.Met++
	case no:
		j.NotMet++
	case undecided:
		j.Undecided++
	}
}

func (j *Judgement) decide(counted bool) {
	n := j.Met + j.NotMet
	j.Share = mean(float64(j.Met), float64(n))
	j.Low, j.High = ClopperPearson(j.Met, n, 0.95)
	if counted {
		j.Low, j.High = j.Share, j.Share
	}
	met := fmt.Sprintf("%d of %d met", j.Met, n)
	if !counted && n > 0 {
		met = fmt.Sprintf("%d of %d met, 95 %% interval %.4g to %.4g", j.Met, n, j.Low, j.High)
	}
	need := j.Limit.Share
	switch {
	case j.Undecided > 0:
		j.Verdict, j.Why = CannotTell, fmt.Sprintf("%s is null in %d more: their runs are too short for it, or the estimator states none; %s",
			j.Limit.Metric, j.Undecided, met)
	case n == 0:
		j.Verdict, j.Why = CannotTell, "no scenario to judge"
	case j.Low >= need:
		j.Verdict, j.Why = Pass, fmt.Sprintf("%s, share %g asked", met, need)
	case j.High < need:
		j.Verdict, j.Why = Fail, fmt.Sprintf("%s, share %g asked", met, need)
	case need == 1:
		j.Verdict, j.Why = CannotTell, met+": no number of draws can show a share of 1; ask for less, or use a grid or a list"
	default:
		j.Verdict, j.Why = CannotTell, fmt.Sprintf("%s, share %g asked: more scenarios are needed", met, need)
	}
}

// ClopperPearson returns the two-sided interval of a share of which met of n
// draws were met (Clopper & Pearson 1934, Biometrika 26, 404-413): each end is
// where as many or more, or as few or fewer, have half of what confidence
// leaves. Without draws it is [0, 1].
func ClopperPearson(met, n int, confidence float64) (low, high float64) {
	tail := (1 - confidence) / 2
	low, high = 0, 1
	k := float64(met)
	if met > 0 {
		low = distuv.Beta{Alpha: k, Beta: float64(n-met) + 1}.Quantile(tail)
	}
	if met < n {
		high = distuv.Beta{Alpha: k + 1, Beta: float64(n - met)}.Quantile(1 - tail)
	}
	return low, high
}

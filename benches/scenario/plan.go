package scenario

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// drawLabel is the label that numbers a set's draws, from 1 on.
const drawLabel = LabelPrefix + "draw"

// maxRows keeps a mistyped grid from filling the memory.
const maxRows = 10_000_000

// Validate says which key of the plan is not allowed. Metrics and estimators
// that limits name are for CheckLimits; groups for Set.Validate.
func (p *Plan) Validate() error {
	switch p.Draw {
	case Grid, List:
		if p.Count < 0 {
			return bad("count", fmt.Sprint(p.Count), "the number of points, or none")
		}
	case Sobol, LatinHypercube:
		if p.Count < 1 || p.Count > maxRows {
			return bad("count", fmt.Sprint(p.Count), fmt.Sprintf("a whole number in [1, %d]", maxRows))
		}
	default:
		return bad("draw", fmt.Sprintf("%q", string(p.Draw)), "grid, sobol, latin-hypercube or list")
	}
	if p.Draw == Sobol && len(p.Vary) > sobolDimensions {
		return bad("vary", fmt.Sprintf("%d columns", len(p.Vary)),
			fmt.Sprintf("at most %d in a Sobol draw; latin-hypercube takes any number", sobolDimensions))
	}
	if err := p.Score.Validate(); err != nil {
		return err
	}
	for i := range p.Vary {
		key := fmt.Sprintf("vary[%d]", i)
		if err := p.Vary[i].validate(key, p.Draw); err != nil {
			return err
		}
		for j := range i {
			if p.Vary[j].Column == p.Vary[i].Column {
				return bad(key+".column", fmt.Sprintf("%q a second time", p.Vary[i].Column), "each column once")
			}
		}
	}
	return nil
}

// validate checks one [[vary]], whose key is key.
func (v *Vary) validate(key string, draw DrawKind) error {
	column, known := Find(v.Column)
	numbers := v.Texts == nil
	switch {
	case v.Column == "":
		return bad(key+".column", "nothing", "a column of a scenario set")
	case v.Column == drawLabel:
		return bad(key+".column", fmt.Sprintf("%q", v.Column), "any other label: this one numbers the draws")
	case slices.Contains([]string{"scenario_id", "seed", "cell", "duty", "sensors"}, v.Column):
		return bad(key+".column", fmt.Sprintf("%q", v.Column),
			"a column that is not identity; cells, duties, sensors and seed of the plan set those")
	case !known && numbers && !strings.HasPrefix(v.Column, LabelPrefix):
		return bad(key+".column", fmt.Sprintf("%q", v.Column), fmt.Sprintf(
			"a column of a scenario set (the nearest is %s) or a name that begins with %s", Nearest(v.Column), LabelPrefix))
	case known && (column.Kind == Text) == numbers:
		return bad(key, "values of another kind for "+v.Column, column.Allowed())
	}
	if n := v.forms(); n != 1 {
		return bad(key, fmt.Sprintf("%d of them", n), "exactly one of values, between, normal, log_normal and triangular")
	}
	if err := v.validateForm(key, draw); err != nil {
		return err
	}
	if known && column.Kind == Int && v.Values == nil && (draw != Grid || v.Between == nil) {
		return bad(key, "a distribution for "+v.Column, "values: the column holds whole numbers")
	}
	if v.Min > v.Max {
		return bad(key+".min", fmt.Sprintf("%g above max %g", v.Min, v.Max), "min ≤ max")
	}
	if math.IsInf(v.Min, 0) || math.IsInf(v.Max, 0) {
		return bad(key, "an infinite min or max", "finite numbers")
	}
	return nil
}

// forms counts how many ways of giving values are used.
func (v *Vary) forms() int {
	n := 0
	for _, given := range []bool{v.Values != nil, v.Texts != nil, v.Between != nil, v.Normal != nil,
		v.LogNormal != nil, v.Triangular != nil} {
		if given {
			n++
		}
	}
	return n
}

func (v *Vary) validateForm(key string, draw DrawKind) error {
	finite := func(xs ...float64) bool {
		return !slices.ContainsFunc(xs, func(x float64) bool { return math.IsNaN(x) || math.IsInf(x, 0) })
	}
	spread := v.Normal != nil || v.LogNormal != nil || v.Triangular != nil
	switch {
	case v.Values != nil && len(v.Values) == 0, v.Texts != nil && len(v.Texts) == 0:
		return bad(key+".values", "an empty list", "at least one value")
	case !finite(v.Values...):
		return bad(key+".values", fmt.Sprint(v.Values), "finite numbers")
	case draw == List && v.Values == nil && v.Texts == nil:
		return bad(key, "no values", "values, one a row: the draw is a list")
	case draw == Grid && spread:
		return bad(key, "a distribution", "values, or between with steps: the draw is a grid")
	case v.Steps != 0 && (draw != Grid || v.Between == nil):
		return bad(key+".steps", fmt.Sprint(v.Steps), "none but beside between in a grid")
	case draw == Grid && v.Between != nil && (v.Steps < 2 || v.Steps > maxRows):
		return bad(key+".steps", fmt.Sprint(v.Steps), fmt.Sprintf("a whole number in [2, %d]", maxRows))
	}
	if b := v.Between; b != nil && !(finite(b[0], b[1]) && b[0] < b[1] && finite(b[1]-b[0])) {
		return bad(key+".between", fmt.Sprint(*b), "two finite numbers, the lower first")
	}
	if n := v.Normal; n != nil && !(finite(n.Mean, n.Std) && n.Std >= 0) {
		return bad(key+".normal", fmt.Sprintf("%+v", *n), "finite mean, std ≥ 0")
	}
	if n := v.LogNormal; n != nil && !(finite(n.Median, n.Sigma) && n.Median > 0 && n.Sigma >= 0) {
		return bad(key+".log_normal", fmt.Sprintf("%+v", *n), "median > 0, sigma ≥ 0")
	}
	if n := v.Triangular; n != nil && !(finite(n.Low, n.Mode, n.High) && n.Low <= n.Mode && n.Mode <= n.High && n.Low < n.High) {
		return bad(key+".triangular", fmt.Sprintf("%+v", *n), "low ≤ mode ≤ high, low < high")
	}
	return nil
}

// Validate says which setting is not allowed.
func (s ScoreSettings) Validate() error {
	for _, x := range []struct {
		key     string
		value   float64
		allowed Range
	}{{"settle_after_s", s.SettleAfterS, atLeast(0)}, {"converge_band", s.ConvergeBand, Range{Low: 0, High: 1}},
		{"converge_hold_s", s.ConvergeHoldS, atLeast(0)}, {"low_soc", s.LowSOC, Range{Low: 0, High: 1}}} {
		if !x.allowed.Holds(x.value) {
			return bad("score."+x.key, fmt.Sprint(x.value), (&Column{Kind: Number, Range: x.allowed}).Allowed())
		}
	}
	return nil
}

// CheckLimits says which limit is not allowed; metrics are the names there are.
func CheckLimits(limits []Limit, metrics []string) error {
	for i, l := range limits {
		key := fmt.Sprintf("limit[%d]", i)
		switch {
		case !slices.Contains(metrics, l.Metric):
			return bad(key+".metric", fmt.Sprintf("%q", l.Metric),
				fmt.Sprintf("a metric (the nearest is %s)", Closest(l.Metric, metrics)))
		case !(l.AtMost >= 0) || math.IsInf(l.AtMost, 0):
			return bad(key+".at_most", fmt.Sprint(l.AtMost), "a finite number ≥ 0: a metric's size is judged")
		case !(l.Share > 0 && l.Share <= 1):
			return bad(key+".share", fmt.Sprint(l.Share), "a number in (0, 1]")
		}
	}
	return nil
}

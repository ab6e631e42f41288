package define

import (
	"fmt"
	"math"
	"strconv"

	"soctrial/benches/scenario"
)

// Plan reads a plan.
func Plan(file string, text []byte) (*scenario.Plan, error) {
	d, t, err := parse(file, text, KindPlan)
	if err != nil {
		return nil, err
	}
	p := &scenario.Plan{Name: nameOf(t, file), Score: scenario.DefaultScore()}
	p.Cells, p.Duties, p.Sensors = files(t, "cells"), files(t, "duties"), files(t, "sensors")
	p.Draw = scenario.DrawKind(t.needWord("draw", string(scenario.Grid), string(scenario.Sobol), string(scenario.LatinHypercube), string(scenario.List)))
	p.Count = t.whole("count", 0, 1)
	if !t.has("count") && (p.Draw == scenario.Sobol || p.Draw == scenario.LatinHypercube) {
		t.missing("count", "how many draws each cell × duty × sensors gets, a whole number ≥ 1")
	}
	p.Seed = seed(t)
	for _, v := range t.tables("vary") {
		p.Vary = append(p.Vary, vary(v))
	}
	if s := t.table("score"); s != nil {
		p.Score.SettleAfterS = s.number("settle_after_s", p.Score.SettleAfterS)
		p.Score.ConvergeBand = s.number("converge_band", p.Score.ConvergeBand)
		p.Score.ConvergeHoldS = s.number("converge_hold_s", p.Score.ConvergeHoldS)
		p.Score.LowSOC = s.number("low_soc", p.Score.LowSOC)
		s.finish()
	}
	for _, l := range t.tables("limit") {
		p.Limits = append(p.Limits, limit(l))
	}
	t.finish()
	if err := d.err(); err != nil {
		return nil, err
	}
	if err := d.owned(p.Validate()); err != nil {
		return nil, err
	}
	return p, nil
}

// files reads a list of paths.
func files(t *table, key string) []string {
	const allowed = "a list of at least one file"
	if !t.has(key) {
		t.missing(key, allowed)
	}
	list := t.texts(key)
	if len(list) == 0 && t.has(key) {
		t.failOnce(key, "an empty list", allowed)
	}
	for i, f := range list {
		if f == "" {
			t.failOnce(element(key, i), `""`, "a path beside the plan's file")
		}
	}
	return list
}

// limit reads one [[limit]]. Which metrics there are is for who scores.
func limit(t *table) scenario.Limit {
	l := scenario.Limit{Metric: needText(t, "metric", "the name of a metric"),
		AtMost: t.needNumber("at_most", "a finite number ≥ 0: a metric's size is judged"),
		Share:  t.number("share", 1), Group: t.text("group"), Estimator: t.text("estimator")}
	if l.AtMost < 0 {
		t.fail("at_most", number(l.AtMost), "a finite number ≥ 0: a metric's size is judged")
	}
	if l.Share <= 0 || l.Share > 1 {
		t.fail("share", number(l.Share), "above 0, at most 1")
	}
	t.finish()
	return l
}

func needText(t *table, key, allowed string) string {
	s := t.text(key)
	if !t.has(key) {
		t.missing(key, allowed)
	} else if s == "" {
		t.failOnce(key, `""`, allowed)
	}
	return s
}

// seed reads a whole number of 64 bits; TOML holds 63, so that a larger one is
// written as a text.
func seed(t *table) uint64 {
	v, ok := t.get("seed")
	if !ok {
		return 0
	}
	switch v := v.(type) {
	case int64:
		if v >= 0 {
			return uint64(v)
		}
	case string:
		if n, err := strconv.ParseUint(v, 10, 64); err == nil {
			return n
		}
	}
	t.fail("seed", describe(v), "a whole number ≥ 0, in quotes above 9223372036854775807")
	return 0
}

func vary(t *table) scenario.Vary {
	v := scenario.Vary{Column: needText(t, "column", "a column of a scenario set"), Min: t.number("min", math.NaN()), Max: t.number("max", math.NaN())}
	if list, ok := t.m["values"].([]any); ok && len(list) > 0 {
		if _, isText := list[0].(string); isText {
			v.Texts = t.texts("values")
		}
	}
	if v.Texts == nil {
		v.Values = t.numbers("values")
	}
	t.get("values")
	if b := t.numbers("between"); len(b) == 2 {
		v.Between = &[2]float64{b[0], b[1]}
	} else if b != nil {
		t.fail("between", fmt.Sprintf("a list of %d", len(b)), "two numbers, the lower first")
	}
	v.Steps = t.whole("steps", 0, 2)
	if n := t.table("normal"); n != nil {
		v.Normal = &scenario.Normal{Mean: n.needNumber("mean", "a finite number"), Std: notBelow0(n, "std")}
		n.finish()
	}
	if n := t.table("log_normal"); n != nil {
		v.LogNormal = &scenario.LogNormal{Median: n.needNumber("median", "a finite number > 0"), Sigma: notBelow0(n, "sigma")}
		if v.LogNormal.Median <= 0 {
			n.failOnce("median", number(v.LogNormal.Median), "a finite number > 0")
		}
		n.finish()
	}
	if n := t.table("triangular"); n != nil {
		const allowed = "a number: low ≤ mode ≤ high, low < high"
		v.Triangular = &scenario.Triangular{Low: n.needNumber("low", allowed), Mode: n.needNumber("mode", allowed), High: n.needNumber("high", allowed)}
		n.finish()
	}
	inColumn(t, &v)
	t.finish()
	return v
}

func notBelow0(t *table, key string) float64 {
	x := t.needNumber(key, "a finite number ≥ 0")
	if x < 0 {
		t.failOnce(key, number(x), "a finite number ≥ 0")
	}
	return x
}

// inColumn checks values, and the ends of between, against what their column
// allows, unless min or max may bring them there.
func inColumn(t *table, v *scenario.Vary) {
	column, known := scenario.Find(v.Column)
	if !known || !math.IsNaN(v.Min) || !math.IsNaN(v.Max) {
		return
	}
	check := func(key string, x scenario.Value) {
		if _, err := column.Fit(x); err != nil {
			t.failOnce(key, x.String(), column.Allowed()+", which column "+v.Column+" holds")
		}
	}
	for i, x := range v.Texts {
		if column.Kind == scenario.Text {
			check(element("values", i), scenario.TextValue(x))
		}
	}
	if column.Kind == scenario.Text {
		return
	}
	for i, x := range v.Values {
		check(element("values", i), scenario.NumberValue(x))
	}
	if v.Between != nil && column.Kind == scenario.Number {
		for i, x := range v.Between {
			check(element("between", i), scenario.NumberValue(x))
		}
	}
}

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
	words := []string{string(scenario.Grid), string(scenario.Sobol), string(scenario.LatinHypercube), string(scenario.List)}
	if !t.has("draw") {
		t.missing("draw", "one of "+quoted(words))
	}
	p.Draw = scenario.DrawKind(t.word("draw", words...))
	p.Count = t.whole("count", 0)
	p.Seed = seed(t)
	for _, v := range t.tables("vary") {
		p.Vary = append(p.Vary, vary(v))
		v.finish()
	}
	if s := t.table("score"); s != nil {
		p.Score.SettleAfterS = s.number("settle_after_s", p.Score.SettleAfterS)
		p.Score.ConvergeBand = s.number("converge_band", p.Score.ConvergeBand)
		p.Score.ConvergeHoldS = s.number("converge_hold_s", p.Score.ConvergeHoldS)
		p.Score.LowSOC = s.number("low_soc", p.Score.LowSOC)
		s.finish()
	}
	for _, l := range t.tables("limit") {
		p.Limits = append(p.Limits, scenario.Limit{Metric: l.text("metric", true), AtMost: l.needNumber("at_most", "a number ≥ 0"),
			Share: l.number("share", 1), Group: l.text("group", false), Estimator: l.text("estimator", false)})
		l.finish()
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

func files(t *table, key string) []string {
	list := t.texts(key)
	if len(list) == 0 && !(t.has(key) && list == nil && len(t.doc.errs) > 0) {
		t.missing(key, "a list of at least one file")
	}
	return list
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
	v := scenario.Vary{Column: t.text("column", true), Min: t.number("min", math.NaN()), Max: t.number("max", math.NaN())}
	if list, ok := t.m["values"].([]any); ok && len(list) > 0 {
		if _, isText := list[0].(string); isText {
			v.Texts = t.texts("values")
		} else {
			v.Values = t.numbers("values")
		}
	} else {
		v.Values = t.numbers("values")
	}
	if b := t.numbers("between"); b != nil {
		if len(b) == 2 {
			v.Between = &[2]float64{b[0], b[1]}
		} else {
			t.fail("between", fmt.Sprintf("a list of %d", len(b)), "two numbers, the lower first")
		}
	}
	v.Steps = positiveWhole(t, "steps")
	if n := t.table("normal"); n != nil {
		v.Normal = &scenario.Normal{Mean: n.needNumber("mean", "a number"), Std: n.needNumber("std", "a number ≥ 0")}
		n.finish()
	}
	if n := t.table("log_normal"); n != nil {
		v.LogNormal = &scenario.LogNormal{Median: n.needNumber("median", "a number > 0"), Sigma: n.needNumber("sigma", "a number ≥ 0")}
		n.finish()
	}
	if n := t.table("triangular"); n != nil {
		v.Triangular = &scenario.Triangular{Low: n.needNumber("low", "a number"), Mode: n.needNumber("mode", "a number"), High: n.needNumber("high", "a number")}
		n.finish()
	}
	return v
}

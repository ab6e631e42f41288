package define

import (
	"math"
	"slices"
	"strconv"

	"soctrial/benches/scenario"
	"soctrial/estimator"
	"soctrial/noise"
)

// FormatSensors writes s as a sensors file; reading it gives s again. What is
// 0, as in an ideal sensor, is left out.
func FormatSensors(s *noise.Sensors) string {
	w := begin(KindSensors, s.Name)
	w.number("sample_period_s", s.SamplePeriodS)
	for _, c := range channels(s) {
		reading := ""
		if c.name == "current" {
			reading = string(s.CurrentReading)
		}
		if *c.to == (noise.Channel{}) && reading == "" {
			continue
		}
		w.section(c.name)
		w.word("reading", reading)
		for _, n := range channelNumbers(c.unit, c.to) {
			if *n.to != 0 {
				w.number(n.key, *n.to)
			}
		}
		w.count("every", c.to.Every)
	}
	return w.String()
}

// FormatEstimator writes s as an estimator file; reading it, with the cell it
// names beside it, gives s again.
func FormatEstimator(s *estimator.Spec) string {
	w := begin(KindEstimator, s.Name)
	w.word("kind", s.Kind)
	kind, _ := kindOf(s.Kind)
	if kind.branches && s.Branches >= 0 {
		w.pair("branches", strconv.Itoa(s.Branches))
	}
	w.word("cell", s.CellFile)
	section := ""
	for _, k := range estimatorKeys() {
		needed := slices.Contains(kind.needs, k.path())
		v := *k.to(s)
		if math.IsNaN(v) || !needed && !slices.Contains(kind.takes, k.path()) {
			continue
		}
		if k.section != section {
			section = k.section
			w.section(section)
		}
		w.number(k.key, v)
	}
	return w.String()
}

// FormatPlan writes p as a plan file; reading it gives p again.
func FormatPlan(p *scenario.Plan) string {
	w := begin(KindPlan, p.Name)
	if p.Seed > math.MaxInt64 { // beyond TOML's whole numbers
		w.pair("seed", text(strconv.FormatUint(p.Seed, 10)))
	} else {
		w.pair("seed", strconv.FormatUint(p.Seed, 10))
	}
	w.pair("cells", texts(p.Cells))
	w.pair("duties", texts(p.Duties))
	w.pair("sensors", texts(p.Sensors))
	w.word("draw", string(p.Draw))
	w.count("count", p.Count)
	for i := range p.Vary {
		w.vary(&p.Vary[i])
	}
	w.section("score")
	w.number("settle_after_s", p.Score.SettleAfterS)
	w.number("converge_band", p.Score.ConvergeBand)
	w.number("converge_hold_s", p.Score.ConvergeHoldS)
	w.number("low_soc", p.Score.LowSOC)
	for _, l := range p.Limits {
		w.element("limit")
		w.word("metric", l.Metric)
		w.number("at_most", l.AtMost)
		w.number("share", l.Share)
		w.word("group", l.Group)
		w.word("estimator", l.Estimator)
	}
	return w.String()
}

func (w *writer) vary(v *scenario.Vary) {
	w.element("vary")
	w.word("column", v.Column)
	if v.Values != nil {
		w.pair("values", numbers(v.Values))
	}
	if v.Texts != nil {
		w.pair("values", texts(v.Texts))
	}
	if v.Between != nil {
		w.pair("between", numbers(v.Between[:]))
	}
	w.count("steps", v.Steps)
	if n := v.Normal; n != nil {
		w.pair("normal", inline(map[string]float64{"mean": n.Mean, "std": n.Std}))
	}
	if n := v.LogNormal; n != nil {
		w.pair("log_normal", inline(map[string]float64{"median": n.Median, "sigma": n.Sigma}))
	}
	if n := v.Triangular; n != nil {
		w.pair("triangular", inline(map[string]float64{"low": n.Low, "mode": n.Mode, "high": n.High}))
	}
	w.given("min", v.Min)
	w.given("max", v.Max)
}

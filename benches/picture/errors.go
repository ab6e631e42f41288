package picture

import (
	"fmt"
	"io"
	"math"
	"slices"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// ErrorColumns are percentiles over scenarios of the size of the SOC error, at
// each time.
type ErrorColumns struct {
	Title, Note string
	Estimators  []ErrorPercentiles // a panel each
	Limit       float64            // on the error, a fraction of SOC; NaN: none
}

// ErrorPercentiles are one estimator's, fractions of SOC over TimeS.
type ErrorPercentiles struct {
	Name                   string
	TimeS                  []float64
	P50, P90, P95, Largest []float64
}

// leastError is the smallest error the log axis shows, in % SOC.
const leastError = 0.01

// ErrorsOverTime draws the 50th, 90th and 95th percentile over scenarios and
// the largest |error| of each estimator over time, side by side on the same
// log axis. Errors below 0.01 % are drawn there.
func ErrorsOverTime(w io.Writer, format Format, c ErrorColumns) error {
	f := figure{title: c.Title, note: c.Note, shareY: true}
	var times [][]float64
	y := axis{name: "|SOC error|", unit: "%", log: true, floor: leastError}
	all := noExtent()
	for _, e := range c.Estimators {
		times = append(times, e.TimeS)
		for _, col := range [][]float64{e.P50, e.P90, e.P95, e.Largest} {
			all.add(&y, scaled(col, 100)...)
		}
	}
	all.add(&y, 100*c.Limit)
	x, perS := timeAxis(times...)
	y.fit(all, 0.03)
	y.fixed = true
	looks := percentileLooks()
	for _, k := range looks {
		f.legend = append(f.legend, entry{name: k.name, line: k.line, fill: k.fill})
	}
	if !math.IsNaN(c.Limit) {
		f.legend = append(f.legend, entry{name: fmt.Sprintf("limit: %.4g %%", 100*c.Limit), line: limitLine()})
	}
	for _, e := range c.Estimators {
		p := &panel{name: e.Name, x: x, y: y}
		t := scaled(e.TimeS, perS)
		under := make([]float64, len(t)) // bands fill from what lies under them
		for i, col := range [][]float64{e.P50, e.P90, e.P95, e.Largest} {
			col = scaled(col, 100)
			if looks[i].fill != nil {
				p.bands = append(p.bands, band{x: t, lo: under, hi: col, fill: looks[i].fill})
			}
			p.lines = append(p.lines, line{x: t, y: col, style: looks[i].line})
			under = col
		}
		if !math.IsNaN(c.Limit) {
			p.levels = []level{{100 * c.Limit, limitLine()}}
		}
		f.place(p, 3)
	}
	if len(f.rows) == 0 {
		f.place(&panel{x: x, y: y}, 1)
	}
	return f.render(w, format)
}

// place puts a panel into the last row, or a new one where columns stand in
// it.
func (f *figure) place(p *panel, columns int) {
	if n := len(f.rows); n > 0 && len(f.rows[n-1].panels) < columns {
		f.rows[n-1].panels = append(f.rows[n-1].panels, p)
		return
	}
	f.rows = append(f.rows, row{[]*panel{p}, 1})
}

// percentileLooks are the looks of the lines of ErrorsOverTime, from below.
func percentileLooks() []entry {
	blue := palette()[0]
	return []entry{
		{"median of scenarios", draw.LineStyle{Color: blue, Width: 2.2 * pt}, faint(blue, 0x60)},
		{"90 %", draw.LineStyle{Color: blue, Width: 1.5 * pt, Dashes: []vg.Length{7, 2.5}}, faint(blue, 0x38)},
		{"95 %", draw.LineStyle{Color: blue, Width: 1.5 * pt, Dashes: []vg.Length{3, 2}}, faint(blue, 0x1c)},
		{"largest", draw.LineStyle{Color: black, Width: 1.2 * pt, Dashes: []vg.Length{1.4, 2}}, nil},
	}
}

// DistributionColumns are one figure of every scenario, an estimator each.
type DistributionColumns struct {
	Title, Note string
	Quantity    string // what the figure is, e.g. "Largest |SOC error| after settling"
	Unit        string
	Estimators  []Scenarios
	AtMost      float64 // the limit, in Unit; NaN: none
	Share       float64 // of scenarios that are to meet it, 0 to 1; NaN: none
}

// Scenarios are the figures of one estimator, in Unit. NaN or +Inf stands for a
// scenario that was lost or failed: it never counts as reached.
type Scenarios struct {
	Name   string
	Values []float64
}

// WorstErrors draws which share of the scenarios stays at or below a figure,
// the empirical cumulative distribution, one line an estimator, with the limit.
func WorstErrors(w io.Writer, format Format, c DistributionColumns) error {
	f := figure{title: c.Title, note: c.Note}
	x := axis{name: c.Quantity, unit: c.Unit, log: spansDecades(c.Estimators)}
	p := &panel{x: x, y: axis{name: "Share of scenarios at or below", unit: "%", fixed: true, lo: 0, hi: 100}}
	end := noExtent()
	for _, e := range c.Estimators {
		end.add(&x, e.Values...)
	}
	end.add(&x, c.AtMost)
	if x.log { // a few lucky scenarios must not push the others aside
		end.lo = math.Max(end.lo, end.hi/3000)
	}
	p.x.fit(end, 0.03)
	if !p.x.log && end.lo >= 0 {
		p.x.lo = 0
	}
	p.x.fixed = true
	for i, e := range c.Estimators {
		st := lineOf(i)
		st.Width = 2.2 * pt
		sx, sy := cumulative(&p.x, e.Values)
		p.lines = append(p.lines, line{x: sx, y: sy, style: st})
		f.legend = append(f.legend, entry{name: e.Name, line: st})
	}
	if !math.IsNaN(c.AtMost) {
		p.walls = []level{{c.AtMost, limitLine()}}
		word := fmt.Sprintf("limit: %.4g %s", c.AtMost, c.Unit)
		if c.Share > 0 {
			p.levels = []level{{100 * c.Share, limitLine()}}
			word = fmt.Sprintf("limit: %.4g %% of scenarios at or below %.4g %s", 100*c.Share, c.AtMost, c.Unit)
		}
		f.legend = append(f.legend, entry{name: word, line: limitLine()})
	}
	f.rows = []row{{[]*panel{p}, 1}}
	return f.render(w, format)
}

// spansDecades tells whether the figures are better shown on a log axis: all
// above 0 and more than thirty-fold apart.
func spansDecades(all []Scenarios) bool {
	e := noExtent()
	for _, s := range all {
		for _, v := range s.Values {
			if !math.IsNaN(v) && !math.IsInf(v, 0) {
				e.lo, e.hi = math.Min(e.lo, v), math.Max(e.hi, v)
			}
		}
	}
	return e.lo > 0 && e.hi > 30*e.lo
}

// cumulative is the staircase of the share, in %, of values at or below x.
func cumulative(a *axis, values []float64) (x, share []float64) {
	var sorted []float64
	for _, v := range values {
		if a.drawable(v) {
			sorted = append(sorted, v)
		}
	}
	if len(sorted) == 0 {
		return nil, nil
	}
	slices.Sort(sorted)
	n := float64(len(values))
	x, share = append(x, a.lo), append(share, 0)
	for i, v := range sorted {
		v = math.Max(v, a.lo)
		x, share = append(x, v, v), append(share, 100*float64(i)/n, 100*float64(i+1)/n)
	}
	return append(x, a.hi), append(share, 100*float64(len(sorted))/n)
}

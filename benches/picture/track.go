package picture

import (
	"fmt"
	"io"
	"math"

	"gonum.org/v1/plot/vg/draw"
)

// TrackColumns is one run, column by column over time. SOC are fractions.
type TrackColumns struct {
	Title, Note string
	TimeS       []float64
	SOCTrue     []float64 // nil: not known
	CurrentA    []float64 // > 0 on discharge
	Estimates   []Estimate
}

// Estimate is what one estimator made of a run, on the run's times.
type Estimate struct {
	Name           string
	SOC            []float64
	SOCStd         []float64 // NaN or nil: none stated
	InnovationV    []float64 // voltage reading minus its prediction; NaN or nil: none
	InnovationStdV []float64
}

// mostResiduals is how many estimators' voltage residuals get a panel.
const mostResiduals = 3

// Track draws true and estimated state of charge with the band of ±2 stated
// deviations, below it the error, the current, and the voltage residual of
// each estimator that has one, on one time axis.
func Track(w io.Writer, format Format, t TrackColumns) error {
	x, perS := timeAxis(t.TimeS)
	time := scaled(t.TimeS, perS)
	f := figure{title: t.Title, note: t.Note, shareX: true}
	soc := &panel{x: x, y: axis{name: "SOC", unit: "%"}}
	wrong := &panel{x: x, y: axis{name: "SOC error", unit: "%"}, zero: true}
	current := &panel{x: x, y: axis{name: "Current", unit: "A"}, zero: true}
	if known(t.SOCTrue) {
		truth := truthLine()
		soc.lines = append(soc.lines, line{x: time, y: scaled(t.SOCTrue, 100), style: truth})
		f.legend = append(f.legend, entry{name: "true", line: truth})
	}
	var residuals []*panel
	banded := false
	for i, e := range t.Estimates {
		st := lineOf(i)
		z := scaled(e.SOC, 100)
		l := line{x: time, y: z, style: st}
		f.legend = append(f.legend, entry{name: e.Name, line: st})
		if known(e.SOCStd) {
			f.legend[len(f.legend)-1].fill = faint(st.Color, 0x38)
			banded = true
		}
		soc.add(l, around(z, e.SOCStd, 200))
		if known(t.SOCTrue) {
			l.y = difference(z, scaled(t.SOCTrue, 100))
			wrong.add(l, around(l.y, e.SOCStd, 200))
		}
		if known(e.InnovationV) && len(residuals) < mostResiduals {
			residuals = append(residuals, residual(x, time, e, st))
		}
	}
	for i := range soc.bands { // a wide band must not squeeze 0 to 100 %
		clamp(soc.bands[i].lo, 0, 100)
		clamp(soc.bands[i].hi, 0, 100)
	}
	if banded {
		f.legend = append(f.legend, entry{name: "±2 stated standard deviations", fill: faint(grey, 0x38)})
	}
	f.rows = append(f.rows, row{[]*panel{soc}, 3})
	if known(t.SOCTrue) && len(t.Estimates) > 0 {
		wrong.clip()
		f.rows = append(f.rows, row{[]*panel{wrong}, 2})
	}
	sx, sy := steps(time, t.CurrentA, x.hi)
	current.lines = []line{{x: sx, y: sy, style: plainLine(black)}}
	f.rows = append(f.rows, row{[]*panel{current}, 1.4})
	for _, p := range residuals {
		f.rows = append(f.rows, row{[]*panel{p}, 1.4})
	}
	return f.render(w, format)
}

// add puts a line and the band around it on the panel.
func (p *panel) add(l line, b *band) {
	p.lines = append(p.lines, l)
	if b != nil {
		b.x, b.fill = l.x, faint(l.style.Color, 0x38)
		p.bands = append(p.bands, *b)
	}
}

// clip cuts bands at three times the height the lines need, so that the lines
// stay readable.
func (p *panel) clip() {
	e := noExtent()
	for _, l := range p.lines {
		e.add(&p.y, l.y...)
	}
	if e.lo > e.hi {
		return
	}
	reach := 3 * math.Max(math.Abs(e.lo), math.Abs(e.hi))
	if reach == 0 {
		return
	}
	for _, b := range p.bands {
		clamp(b.lo, -reach, reach)
		clamp(b.hi, -reach, reach)
	}
}

func residual(x axis, time []float64, e Estimate, st draw.LineStyle) *panel {
	p := &panel{name: "", x: x, y: axis{name: "Residual", unit: "mV"}, zero: true}
	y := scaled(e.InnovationV, 1000)
	p.name = fmt.Sprintf("Voltage residual of %s, reading minus prediction", e.Name)
	if b := around(scaled(e.InnovationV, 0), e.InnovationStdV, 2000); b != nil {
		p.name += "; shaded: its stated ±2σ, as far as shown"
		b.x, b.fill = time, faint(st.Color, 0x38)
		p.bands = append(p.bands, *b)
	}
	p.lines = []line{{x: time, y: y, style: draw.LineStyle{Color: st.Color, Width: 0.9 * pt}}}
	p.clip()
	return p
}

// around is the band of times·std on both sides of middle; nil where no
// deviation is known.
func around(middle, std []float64, times float64) *band {
	if !known(std) {
		return nil
	}
	n := min(len(middle), len(std))
	b := &band{lo: make([]float64, n), hi: make([]float64, n)}
	for i := range n {
		b.lo[i], b.hi[i] = middle[i]-times*std[i], middle[i]+times*std[i]
	}
	return b
}

func difference(a, b []float64) []float64 {
	out := make([]float64, min(len(a), len(b)))
	for i := range out {
		out[i] = a[i] - b[i]
	}
	return out
}

func clamp(values []float64, lo, hi float64) {
	for i, v := range values {
		if v < lo {
			values[i] = lo
		} else if v > hi {
			values[i] = hi
		}
	}
}

// known reports whether a column holds any number.
func known(values []float64) bool {
	for _, v := range values {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			return true
		}
	}
	return false
}

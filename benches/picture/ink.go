package picture

import (
	"image/color"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// grid draws pale lines at the labelled ticks.
type grid struct{}

// Plot implements plot.Plotter.
func (grid) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	line := draw.LineStyle{Color: color.RGBA{225, 225, 225, 255}, Width: 0.8 * px}
	for _, t := range p.X.Tick.Marker.Ticks(p.X.Min, p.X.Max) {
		if t.Label != "" {
			c.StrokeLine2(line, x(t.Value), c.Min.Y, x(t.Value), c.Max.Y)
		}
	}
	for _, t := range p.Y.Tick.Marker.Ticks(p.Y.Min, p.Y.Max) {
		if t.Label != "" {
			c.StrokeLine2(line, c.Min.X, y(t.Value), c.Max.X, y(t.Value))
		}
	}
}

// level draws one straight line across.
type level Level

// Plot implements plot.Plotter.
func (l level) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	if l.Vertical {
		if l.Value >= p.X.Min && l.Value <= p.X.Max {
			c.StrokeLine2(levelLine(), x(l.Value), c.Min.Y, x(l.Value), c.Max.Y)
		}
		return
	}
	if l.Value >= p.Y.Min && l.Value <= p.Y.Max {
		c.StrokeLine2(levelLine(), c.Min.X, y(l.Value), c.Max.X, y(l.Value))
	}
}

// ink draws one series.
type ink struct {
	Series
	widthPx    float64
	logX, logY bool
}

// Plot implements plot.Plotter.
func (s ink) Plot(c draw.Canvas, p *plot.Plot) {
	st := styleOf(s.Style)
	toX, toY := p.Transforms(&c)
	at := func(x, y float64) vg.Point { return vg.Point{X: toX(x), Y: toY(y)} }
	for _, run := range s.runs() {
		x, y := s.X[run[0]:run[1]], s.Y[run[0]:run[1]]
		if s.Low != nil && s.High != nil {
			s.band(c, st, at, run)
		}
		if s.Dots {
			for k := range x {
				c.DrawGlyph(draw.GlyphStyle{Color: st.ink, Radius: 2.2 * px, Shape: draw.CircleGlyph{}}, at(x[k], y[k]))
			}
			continue
		}
		if s.Steps {
			x, y = stairs(x, y)
		}
		x, y = Thin(x, y, int(s.widthPx))
		pts := make([]vg.Point, len(x))
		for k := range x {
			pts[k] = at(x[k], y[k])
		}
		line := st.line(2 * px)
		if s.Faint {
			line.Width, line.Color = 1*px, color.NRGBA{st.ink.R, st.ink.G, st.ink.B, 110}
		}
		if len(pts) == 1 {
			c.DrawGlyph(draw.GlyphStyle{Color: st.ink, Radius: 2.2 * px, Shape: draw.CircleGlyph{}}, pts[0])
			continue
		}
		c.StrokeLines(line, c.ClipLinesXY(pts)...)
	}
}

// band fills between Low and High.
func (s ink) band(c draw.Canvas, st style, at func(x, y float64) vg.Point, run [2]int) {
	from, to := run[0], min(run[1], len(s.Low), len(s.High))
	if to-from < 2 {
		return
	}
	lowX, low := Thin(s.X[from:to], s.Low[from:to], int(s.widthPx)/2)
	highX, high := Thin(s.X[from:to], s.High[from:to], int(s.widthPx)/2)
	var pts []vg.Point
	for k := range lowX {
		if finite(low[k]) && !(s.logY && low[k] <= 0) {
			pts = append(pts, at(lowX[k], low[k]))
		}
	}
	for k := len(highX) - 1; k >= 0; k-- {
		if finite(high[k]) && !(s.logY && high[k] <= 0) {
			pts = append(pts, at(highX[k], high[k]))
		}
	}
	if len(pts) > 2 {
		c.FillPolygon(pale(st.ink), c.ClipPolygonXY(pts))
	}
}

// runs cuts the series at its gaps.
func (s ink) runs() [][2]int {
	var out [][2]int
	n := min(len(s.X), len(s.Y))
	good := func(k int) bool {
		return finite(s.X[k]) && finite(s.Y[k]) && !(s.logX && s.X[k] <= 0) && !(s.logY && s.Y[k] <= 0)
	}
	for k := 0; k < n; k++ {
		if !good(k) {
			continue
		}
		from := k
		for k < n && good(k) {
			k++
		}
		out = append(out, [2]int{from, k})
	}
	return out
}

// stairs makes each value hold until the next.
func stairs(x, y []float64) (sx, sy []float64) {
	for k := range x {
		if k > 0 {
			sx, sy = append(sx, x[k]), append(sy, y[k-1])
		}
		sx, sy = append(sx, x[k]), append(sy, y[k])
	}
	return sx, sy
}

// Thin returns a line that looks the same in so many columns of pixels and has
// at most four points in each: first, lowest, highest, last. x ascends.
func Thin(x, y []float64, columns int) (tx, ty []float64) {
	n := min(len(x), len(y))
	if n <= 4*max(columns, 1) {
		return x[:n], y[:n]
	}
	lo, hi := x[0], x[n-1]
	if !(hi > lo) {
		lo, hi = 0, 1
	}
	column := func(k int) int {
		return min(int((x[k]-lo)/(hi-lo)*float64(columns)), columns-1)
	}
	keep := func(k int) { tx, ty = append(tx, x[k]), append(ty, y[k]) }
	for from := 0; from < n; {
		to, low, high := from, from, from
		for col := column(from); to < n && column(to) == col; to++ {
			if y[to] < y[low] {
				low = to
			}
			if y[to] > y[high] {
				high = to
			}
		}
		last := math.MinInt
		for _, k := range []int{from, min(low, high), max(low, high), to - 1} {
			if k > last {
				keep(k)
				last = k
			}
		}
		from = to
	}
	return tx, ty
}

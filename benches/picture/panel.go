package picture

import (
	"image/color"
	"math"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// panel is one pair of axes and what is drawn on it.
type panel struct {
	name   string
	x, y   axis
	bands  []band
	lines  []line
	levels []level
	walls  []level // upright
	zero   bool    // a thin line at y = 0, which the panel then shows
}

// line joins points; with dots, each is marked too.
type line struct {
	x, y  []float64
	style draw.LineStyle
	dots  bool
}

// band is the area between two lines over one column of x.
type band struct {
	x, lo, hi []float64
	fill      color.Color
}

// level is a straight line at one value; the legend names it.
type level struct {
	at    float64
	style draw.LineStyle
}

// fit sets the axes to hold everything.
func (p *panel) fit() {
	ex, ey := noExtent(), noExtent()
	for _, l := range p.lines {
		ex.add(&p.x, l.x...)
		ey.add(&p.y, l.y...)
	}
	for _, b := range p.bands {
		ex.add(&p.x, b.x...)
		ey.add(&p.y, b.lo...)
		ey.add(&p.y, b.hi...)
	}
	for _, l := range p.levels {
		ey.add(&p.y, l.at)
	}
	for _, l := range p.walls {
		ex.add(&p.x, l.at)
	}
	if p.zero {
		ey.add(&p.y, 0)
	}
	p.x.fit(ex, 0)
	p.y.fit(ey, 0.06)
}

// yTicks are the marks of a panel of some height.
func (p *panel) yTicks(high vg.Length) []tick {
	return p.y.ticks(min(10, tickRoom(high, 1.9*tickSize)))
}

// xTicks are the marks of a panel of some width: as many as their labels have
// room for.
func (p *panel) xTicks(st text.Style, wide vg.Length) []tick {
	for most := min(12, tickRoom(wide, 4*tickSize)); ; most-- {
		ticks := p.x.ticks(most)
		need := vg.Length(0)
		for _, t := range ticks {
			if t.label != "" {
				need += st.Width(t.label) + tickSize
			}
		}
		if need <= 1.1*wide || most <= 2 {
			return ticks
		}
	}
}

func (p *panel) leftRoom(st text.Style, high vg.Length) vg.Length {
	widest := vg.Length(0)
	for _, t := range p.yTicks(high) {
		widest = max(widest, st.Width(t.label))
	}
	return widest + tickLong + 4*pt + 1.7*labelSize
}

// draw draws the panel into c, its data area. Labels of the axes lie outside.
func (p *panel) draw(c draw.Canvas, l lettering, nameX, nameY bool, left vg.Length) {
	at := func(q point) vg.Point {
		return vg.Point{X: c.X(p.x.share(q.x)), Y: c.Y(p.y.share(q.y))}
	}
	if p.name != "" {
		st := l.style(labelSize, text.XLeft, text.YBottom)
		st.Font.Weight = bold
		c.FillText(st, vg.Point{X: c.Min.X, Y: c.Max.Y + 3*pt}, cut(st, clean(p.name), c.Max.X-c.Min.X))
	}
	p.drawGrid(c, l, nameX, nameY, left)
	columns := int(float64(c.Max.X-c.Min.X) * perPt)
	for _, b := range p.bands {
		for _, shape := range b.shapes(&p.x, &p.y, columns) {
			var path []vg.Point
			for _, q := range shape {
				path = append(path, at(q))
			}
			if path = c.ClipPolygonXY(path); len(path) > 2 {
				c.FillPolygon(b.fill, path)
			}
		}
	}
	frame := draw.LineStyle{Color: black, Width: 0.8 * pt}
	if p.zero && p.y.lo < 0 && p.y.hi > 0 {
		y := c.Y(p.y.share(0))
		c.StrokeLine2(draw.LineStyle{Color: grey, Width: 0.8 * pt}, c.Min.X, y, c.Max.X, y)
	}
	for _, ln := range p.lines {
		for _, run := range runs(&p.x, &p.y, ln.x, ln.y) {
			var path []vg.Point
			for _, q := range thin(run, &p.x, columns) {
				path = append(path, at(q))
			}
			c.StrokeLines(ln.style, c.ClipLinesXY(path)...)
			if ln.dots || len(path) == 1 {
				for _, q := range path {
					c.DrawGlyph(draw.GlyphStyle{Color: ln.style.Color, Radius: 1.4 * ln.style.Width, Shape: draw.CircleGlyph{}}, q)
				}
			}
		}
	}
	p.drawLevels(c)
	c.StrokeLines(frame, []vg.Point{c.Min, {X: c.Max.X, Y: c.Min.Y}, c.Max, {X: c.Min.X, Y: c.Max.Y}, c.Min})
}

// drawGrid draws grid lines, ticks, their labels and the axes' names.
func (p *panel) drawGrid(c draw.Canvas, l lettering, nameX, nameY bool, left vg.Length) {
	grid, mark := draw.LineStyle{Color: pale, Width: 0.7 * pt}, draw.LineStyle{Color: black, Width: 0.7 * pt}
	st := l.style(tickSize, text.XRight, text.YCenter)
	for _, t := range p.yTicks(c.Max.Y - c.Min.Y) {
		s := p.y.share(t.value)
		if s < -1e-9 || s > 1+1e-9 {
			continue
		}
		y, long := c.Y(s), tickLong
		if t.label == "" {
			long /= 2
		} else {
			c.StrokeLine2(grid, c.Min.X, y, c.Max.X, y)
			if nameY {
				c.FillText(st, vg.Point{X: c.Min.X - tickLong - 2*pt, Y: y}, t.label)
			}
		}
		if nameY {
			c.StrokeLine2(mark, c.Min.X-long, y, c.Min.X, y)
		}
	}
	st = l.style(tickSize, text.XCenter, text.YTop)
	for _, t := range p.xTicks(st, c.Max.X-c.Min.X) {
		s := p.x.share(t.value)
		if s < -1e-9 || s > 1+1e-9 {
			continue
		}
		x, long := c.X(s), tickLong
		if t.label == "" {
			long /= 2
		} else {
			c.StrokeLine2(grid, x, c.Min.Y, x, c.Max.Y)
			if nameX {
				c.FillText(st, vg.Point{X: x, Y: c.Min.Y - tickLong - 2*pt}, t.label)
			}
		}
		c.StrokeLine2(mark, x, c.Min.Y-long, x, c.Min.Y)
	}
	label := l.style(labelSize, text.XCenter, text.YTop)
	if nameX {
		c.FillText(label, vg.Point{X: c.Center().X, Y: c.Min.Y - tickLong - 1.6*tickSize}, cut(label, clean(p.x.label()), c.Max.X-c.Min.X))
	}
	if nameY {
		label.Rotation = math.Pi / 2
		flat := l.style(labelSize, text.XCenter, text.YTop)
		c.FillText(label, vg.Point{X: c.Min.X - left, Y: c.Center().Y}, cut(flat, clean(p.y.label()), c.Max.Y-c.Min.Y+10*pt))
	}
}

// drawLevels draws straight lines across the panel.
func (p *panel) drawLevels(c draw.Canvas) {
	for _, v := range p.levels {
		if p.y.drawable(v.at) {
			y := c.Y(p.y.share(v.at))
			c.StrokeLine2(v.style, c.Min.X, y, c.Max.X, y)
		}
	}
	for _, v := range p.walls {
		if p.x.drawable(v.at) {
			x := c.X(p.x.share(v.at))
			c.StrokeLine2(v.style, x, c.Min.Y, x, c.Max.Y)
		}
	}
}

// shapes are the polygons of a band, one a stretch without a gap, thinned.
func (b *band) shapes(xa, ya *axis, columns int) [][]point {
	n := min(len(b.x), len(b.lo), len(b.hi))
	bounded := func(v float64) float64 { // a band may reach below a log axis
		if ya.log && !(v > ya.lo) && !math.IsNaN(v) {
			return ya.lo
		}
		return v
	}
	lo, hi := make([]float64, n), make([]float64, n)
	for i := range n {
		lo[i], hi[i] = bounded(b.lo[i]), bounded(b.hi[i])
		if !ya.drawable(lo[i]) || !ya.drawable(hi[i]) {
			lo[i], hi[i] = math.NaN(), math.NaN()
		}
	}
	lower, upper := runs(xa, ya, b.x[:n], lo), runs(xa, ya, b.x[:n], hi)
	var out [][]point
	for i := range lower {
		under, over := thin(lower[i], xa, columns), thin(upper[i], xa, columns)
		shape := append([]point{}, under...)
		for k := len(over) - 1; k >= 0; k-- {
			shape = append(shape, over[k])
		}
		out = append(out, shape)
	}
	return out
}

package picture

import (
	"image/color"
	"math"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// figure is one picture: a title, what the lines mean, and panels in rows.
type figure struct {
	title, note string
	legend      []entry
	rows        []row
	shareX      bool // one time axis for all rows, named under the lowest
	shareY      bool // one y axis for all panels of a row, named at the left
}

// row is some panels side by side, as high as its weight.
type row struct {
	panels []*panel
	weight float64
}

// entry is one line of the legend.
type entry struct {
	name string
	line draw.LineStyle
	fill color.Color // a swatch behind the line
}

// sizes of text.
const (
	titleSize  = 14 * pt
	noteSize   = 10 * pt
	legendSize = 10.5 * pt
	labelSize  = 10.5 * pt
	tickSize   = 9.5 * pt
)

const (
	margin   = 12 * pt
	tickLong = 4 * pt
	bold     = 3 // golang.org/x/image/font.WeightBold
)

// draw lays the picture out from its top: title, note, legend, panels.
func (f *figure) draw(c draw.Canvas) {
	c.SetColor(color.White)
	c.Fill(c.Rectangle.Path())
	l := newLettering()
	c = draw.Crop(c, margin, -margin, margin, -margin)
	if f.title != "" {
		st := l.style(titleSize, text.XLeft, text.YTop)
		st.Font.Weight = bold
		c.FillText(st, vg.Point{X: c.Min.X, Y: c.Max.Y}, cut(st, clean(f.title), c.Max.X-c.Min.X))
		c.Max.Y -= 1.35 * titleSize
	}
	if f.note != "" {
		st := l.style(noteSize, text.XLeft, text.YTop)
		st.Color = grey
		c.FillText(st, vg.Point{X: c.Min.X, Y: c.Max.Y}, cut(st, clean(f.note), c.Max.X-c.Min.X))
		c.Max.Y -= 1.4 * noteSize
	}
	c.Max.Y -= f.drawLegend(c, l)
	f.drawPanels(c, l)
}

// drawLegend writes the legend in lines from the left and returns its height.
// What has no room left is counted.
func (f *figure) drawLegend(c draw.Canvas, l lettering) vg.Length {
	const sample, gap, between, lineHeight, mostLines = 30 * pt, 5 * pt, 18 * pt, 1.55 * legendSize, 4
	if len(f.legend) == 0 {
		return 4 * pt
	}
	st := l.style(legendSize, text.XLeft, text.YCenter)
	wide := c.Max.X - c.Min.X
	x, y, lines := c.Min.X, c.Max.Y-lineHeight/2-2*pt, 1
	for i, e := range f.legend {
		name := cut(st, clean(e.name), wide/3)
		need := sample + gap + st.Width(name)
		if x > c.Min.X && x+need > c.Max.X {
			if lines == mostLines {
				c.FillText(st, vg.Point{X: x, Y: y}, "+ "+number(float64(len(f.legend)-i), 1))
				break
			}
			x, y, lines = c.Min.X, y-lineHeight, lines+1
		}
		if e.fill != nil {
			c.FillPolygon(e.fill, []vg.Point{{X: x, Y: y - 4*pt}, {X: x + sample, Y: y - 4*pt}, {X: x + sample, Y: y + 4*pt}, {X: x, Y: y + 4*pt}})
		}
		if e.line.Width > 0 {
			c.StrokeLine2(e.line, x, y, x+sample, y)
		}
		c.FillText(st, vg.Point{X: x + sample + gap, Y: y}, name)
		x += need + between
	}
	return vg.Length(lines)*lineHeight + 8*pt
}

// drawPanels shares the room left out to the panels.
func (f *figure) drawPanels(c draw.Canvas, l lettering) {
	total, columns := 0.0, 0
	for _, r := range f.rows {
		total, columns = total+r.weight, max(columns, len(r.panels))
	}
	if columns == 0 {
		return
	}
	ticks := l.style(tickSize, text.XRight, text.YCenter)
	axisRoom := 2.0*tickSize + 1.5*labelSize // under a panel that names its x axis
	const gapX, gapY, right = 16 * pt, 10 * pt, 16 * pt
	under := func(r int) vg.Length {
		if f.shareX && r < len(f.rows)-1 {
			return 0
		}
		return axisRoom
	}
	free := c.Max.Y - c.Min.Y
	over := make([]vg.Length, len(f.rows)) // room for panels' names
	for r := range f.rows {
		for _, p := range f.rows[r].panels {
			if p.name != "" {
				over[r] = 1.6 * labelSize
			}
		}
		free -= under(r) + over[r] + gapY
	}
	// The left margin of each column is that of its widest labels.
	left := make([]vg.Length, columns)
	for r := range f.rows {
		high := free * vg.Length(f.rows[r].weight/total)
		for i, p := range f.rows[r].panels {
			p.fit()
			if f.shareY && i > 0 {
				continue
			}
			left[i] = max(left[i], p.leftRoom(ticks, high))
		}
	}
	wide := c.Max.X - c.Min.X - vg.Length(columns-1)*gapX - right
	for _, x := range left {
		wide -= x
	}
	wide /= vg.Length(columns)
	top := c.Max.Y
	for r := range f.rows {
		high := free * vg.Length(f.rows[r].weight/total)
		top -= over[r]
		x := c.Min.X
		for i, p := range f.rows[r].panels {
			x += left[i]
			in := draw.Canvas{Canvas: c.Canvas, Rectangle: vg.Rectangle{Min: vg.Point{X: x, Y: top - high}, Max: vg.Point{X: x + wide, Y: top}}}
			p.draw(in, l, under(r) > 0, !f.shareY || i == 0, left[i])
			x += wide + gapX
		}
		top -= high + under(r) + gapY
	}
}

// tickRoom says how many labels an axis of some length has room for.
func tickRoom(length, each vg.Length) int { return max(2, int(math.Floor(float64(length/each)))) }

// Package picture draws static pictures of plain columns: tracks of a state of
// charge, errors over time, distributions, cells, duties and records, as PNG
// and SVG.
//
// A Figure is a stack of panels over one horizontal axis. Every axis says what
// it shows and in which unit; series differ by colour (after Okabe & Ito,
// "Color Universal Design", 2008) and by dash, so that colour is never the
// only cue; the legend stands above the panels and never on the data.
//
// The package is the only importer of gonum/plot. It opens no file, knows no
// scenario and computes nothing but where ink goes; a value that is not finite
// is a gap.
package picture

import (
	"bytes"
	"fmt"
	"image/color"
	"math"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgsvg"
)

// Format is a picture file's format.
type Format string

// The formats.
const (
	PNG Format = "png"
	SVG Format = "svg"
)

// Series is one line of a panel.
type Series struct {
	Name      string // in the legend; empty: not there
	X, Y      []float64
	Low, High []float64 // a band around it, or nil
	Style     int       // colour and dash; the same number looks the same in every panel
	Steps     bool      // each value holds until the next
	Dots      bool      // points without a line
	Faint     bool      // thin and pale, behind the others
}

// Level is a horizontal or vertical line at one value.
type Level struct {
	Name     string
	Value    float64
	Vertical bool
}

// Panel is one plot of a figure.
type Panel struct {
	YLabel string // with its unit, e.g. "Current / A"
	Series []Series
	Levels []Level
	Weight float64 // height beside the other panels; 0 means 1
	LogY   bool    // values ≤ 0 are gaps
	// YFloor is a value the axis shows at least; NaN or 0 with YCeil 0: none.
	YFloor, YCeil float64
}

// Figure is a picture: panels over one horizontal axis.
type Figure struct {
	Title  string
	XLabel string
	LogX   bool
	Panels []Panel
	Note   string // a line below
}

const (
	widthPx, heightPx = 1200, 800
	dpi               = 96
)

// px is one pixel of a PNG.
const px = vg.Inch / dpi

// Draw returns the figure as a file of 1200×800 pixels, or as tall as its
// panels need. The same figure gives the same bytes.
func Draw(f Figure, format Format) ([]byte, error) {
	if len(f.Panels) == 0 {
		return nil, fmt.Errorf("picture: %q has no panel", f.Title)
	}
	w, h := vg.Length(widthPx)*px, vg.Length(heightPx)*px
	var b bytes.Buffer
	switch format {
	case PNG:
		c := vgimg.NewWith(vgimg.UseWH(w, h), vgimg.UseDPI(dpi))
		f.onto(draw.New(c))
		if _, err := (vgimg.PngCanvas{Canvas: c}).WriteTo(&b); err != nil {
			return nil, fmt.Errorf("picture: %w", err)
		}
	case SVG:
		c := vgsvg.New(w, h)
		f.onto(draw.New(c))
		if _, err := c.WriteTo(&b); err != nil {
			return nil, fmt.Errorf("picture: %w", err)
		}
		// The font's family is named as it is installed here; name what others have too.
		s := strings.ReplaceAll(b.String(), "font-family:Liberation Sans;", "font-family:'Liberation Sans',Arial,Helvetica,sans-serif;")
		return []byte(s), nil
	default:
		return nil, fmt.Errorf("picture: format %q, allowed is %q or %q", format, PNG, SVG)
	}
	return b.Bytes(), nil
}

// style is how a series looks.
type style struct {
	ink    color.RGBA
	dashes []vg.Length
}

// styles are the eight colours of Okabe & Ito without yellow, which is too pale
// on white; from the second round on the dashes differ too.
func styleOf(n int) style {
	inks := []color.RGBA{{0, 0, 0, 255}, {0, 114, 178, 255}, {213, 94, 0, 255}, {0, 158, 115, 255}, {204, 121, 167, 255}, {230, 159, 0, 255}, {86, 180, 233, 255}}
	dashes := [][]vg.Length{nil, nil, {8 * px, 4 * px}, {2.5 * px, 3 * px}, {9 * px, 3 * px, 2 * px, 3 * px}, {5 * px, 3 * px}, {12 * px, 4 * px}}
	n = ((n % 49) + 49) % 49
	return style{inks[n%7], dashes[(n+n/7)%7]}
}

func (s style) line(width vg.Length) draw.LineStyle {
	return draw.LineStyle{Color: s.ink, Width: width, Dashes: s.dashes}
}

func sans(size vg.Length) text.Style {
	return text.Style{Color: color.Black, Handler: plot.DefaultTextHandler,
		Font: font.Font{Typeface: "Liberation", Variant: "Sans", Size: size}}
}

// onto draws title, legend, panels and note.
func (f *Figure) onto(c draw.Canvas) {
	c.SetColor(color.White)
	c.Fill(c.Rectangle.Path())
	pad := 12 * px
	c = draw.Crop(c, pad, -pad, pad, -pad)
	title := sans(18 * px)
	title.YAlign = text.YTop
	c.FillText(title, vg.Point{X: c.Min.X, Y: c.Max.Y}, f.Title)
	c = draw.Crop(c, 0, 0, 0, -30*px)
	c = f.legend(c)
	if f.Note != "" {
		c.FillText(sans(12*px), vg.Point{X: c.Min.X, Y: c.Min.Y}, f.Note)
		c = draw.Crop(c, 0, 0, 22*px, 0)
	}
	f.panels(c)
}

// legend writes one entry a name, in rows above the panels, and returns what is
// left of the canvas.
func (f *Figure) legend(c draw.Canvas) draw.Canvas {
	label := sans(14 * px)
	x, y := c.Min.X, c.Max.Y
	const row, swatch, gap = 22 * px, 34 * px, 8 * px
	seen := map[string]bool{}
	any := false
	entry := func(name string, ink func(from, to vg.Point)) {
		if name == "" || seen[name] {
			return
		}
		seen[name], any = true, true
		width := swatch + gap + label.Width(name) + 26*px
		if x > c.Min.X && x+width > c.Max.X {
			x, y = c.Min.X, y-row
		}
		mid := y - row/2
		ink(vg.Point{X: x, Y: mid}, vg.Point{X: x + swatch, Y: mid})
		l := label
		l.YAlign = text.YCenter
		c.FillText(l, vg.Point{X: x + swatch + gap, Y: mid}, name)
		x += width
	}
	for i := range f.Panels {
		for _, s := range f.Panels[i].Series {
			st := styleOf(s.Style)
			entry(s.Name, func(a, b vg.Point) {
				if s.Dots {
					c.DrawGlyph(draw.GlyphStyle{Color: st.ink, Radius: 3 * px, Shape: draw.CircleGlyph{}}, vg.Point{X: (a.X + b.X) / 2, Y: a.Y})
					return
				}
				if s.Low != nil {
					c.FillPolygon(pale(st.ink), []vg.Point{{X: a.X, Y: a.Y - 6*px}, {X: b.X, Y: b.Y - 6*px}, {X: b.X, Y: b.Y + 6*px}, {X: a.X, Y: a.Y + 6*px}})
				}
				c.StrokeLines(st.line(2.2*px), []vg.Point{a, b})
			})
		}
		for _, l := range f.Panels[i].Levels {
			entry(l.Name, func(a, b vg.Point) { c.StrokeLines(levelLine(), []vg.Point{a, b}) })
		}
	}
	if !any {
		return c
	}
	return draw.Crop(c, 0, 0, 0, y-row-6*px-c.Max.Y)
}

func levelLine() draw.LineStyle {
	return draw.LineStyle{Color: color.RGBA{90, 90, 90, 255}, Width: 1.6 * px, Dashes: []vg.Length{3 * px, 3 * px}}
}

// pale is ink as it looks thinly on white.
func pale(ink color.RGBA) color.Color {
	return color.NRGBA{ink.R, ink.G, ink.B, 56}
}

// panels draws the plots one above the other, their axes in line.
func (f *Figure) panels(c draw.Canvas) {
	lo, hi := f.xRange()
	var plots [][]*plot.Plot
	total := 0.0
	for i := range f.Panels {
		plots = append(plots, []*plot.Plot{f.plot(i, lo, hi, float64(c.Max.X-c.Min.X)/float64(px))})
		total += weight(&f.Panels[i])
	}
	// plot.Align gives equal heights; heights by weight are cut by hand, and the
	// left edges are brought in line by the widest axis.
	left := vg.Length(0)
	for i := range plots {
		left = max(left, plots[i][0].Y.Padding+axisWidth(plots[i][0]))
	}
	top := c.Max.Y
	for i := range plots {
		h := (c.Max.Y - c.Min.Y) * vg.Length(weight(&f.Panels[i])/total)
		part := c
		part.Max.Y, part.Min.Y = top, top-h
		p := plots[i][0]
		part = draw.Crop(part, left-p.Y.Padding-axisWidth(p), 0, 4*px, -6*px)
		p.Draw(part)
		top -= h
	}
}

func weight(p *Panel) float64 {
	if p.Weight <= 0 {
		return 1
	}
	return p.Weight
}

// axisWidth is how much room the vertical axis takes, from its widest label.
func axisWidth(p *plot.Plot) vg.Length {
	w := vg.Length(0)
	for _, t := range p.Y.Tick.Marker.Ticks(p.Y.Min, p.Y.Max) {
		w = max(w, p.Y.Tick.Label.Width(t.Label))
	}
	return w
}

func (f *Figure) xRange() (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for i := range f.Panels {
		for _, s := range f.Panels[i].Series {
			for k, x := range s.X {
				if k < len(s.Y) && finite(x) && finite(s.Y[k]) && !(f.LogX && x <= 0) {
					lo, hi = min(lo, x), max(hi, x)
				}
			}
		}
	}
	return widened(lo, hi, f.LogX)
}

// widened makes a range that can be drawn.
func widened(lo, hi float64, log bool) (float64, float64) {
	switch {
	case lo > hi:
		return map[bool]float64{true: 0.1, false: 0}[log], 1
	case lo == hi && log:
		return lo / 2, hi * 2
	case lo == hi:
		d := math.Max(math.Abs(lo)*0.05, 1e-3)
		return lo - d, hi + d
	}
	return lo, hi
}

func finite(v float64) bool { return !math.IsNaN(v) && math.Abs(v) <= 1e300 }

// plot makes panel i.
func (f *Figure) plot(i int, xLo, xHi, widthPx float64) *plot.Plot {
	panel := &f.Panels[i]
	p := plot.New()
	for _, a := range []*plot.Axis{&p.X, &p.Y} {
		a.Label.TextStyle.Font = sans(14 * px).Font
		a.Tick.Label.Font = sans(13 * px).Font
		a.LineStyle.Width, a.Tick.LineStyle.Width = 1*px, 1*px
		a.Tick.Marker = ticks{about: 7}
		a.Padding = 4 * px
	}
	p.X.Min, p.X.Max = xLo, xHi
	p.Y.Min, p.Y.Max = panel.yRange(f.LogX)
	p.Y.Tick.Marker = ticks{about: 5}
	if f.LogX {
		p.X.Scale, p.X.Tick.Marker = plot.LogScale{}, decades{}
	}
	if panel.LogY {
		p.Y.Scale, p.Y.Tick.Marker = plot.LogScale{}, decades{}
	}
	p.Y.Label.Text = panel.YLabel
	p.X.Label.Text = f.XLabel
	if i < len(f.Panels)-1 {
		p.X.Label.Text = ""
		p.X.Tick.Marker = unlabelled{p.X.Tick.Marker}
	}
	p.Add(grid{})
	for _, pass := range []bool{true, false} {
		for _, s := range panel.Series {
			if s.Faint == pass {
				p.Add(ink{s, widthPx, f.LogX, panel.LogY})
			}
		}
	}
	for _, l := range panel.Levels {
		p.Add(level(l))
	}
	return p
}

func (panel *Panel) yRange(logX bool) (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	see := func(v float64) {
		if finite(v) && !(panel.LogY && v <= 0) {
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	for _, s := range panel.Series {
		for k, v := range s.Y {
			if k < len(s.X) && finite(s.X[k]) && !(logX && s.X[k] <= 0) {
				see(v)
			}
		}
		for k := range s.Low {
			if k < len(s.Y) && k < len(s.High) && finite(s.Y[k]) {
				see(s.Low[k])
				see(s.High[k])
			}
		}
	}
	for _, l := range panel.Levels {
		if !l.Vertical {
			see(l.Value)
		}
	}
	if panel.YFloor != 0 || panel.YCeil != 0 {
		see(panel.YFloor)
		see(panel.YCeil)
	}
	lo, hi = widened(lo, hi, panel.LogY)
	if !panel.LogY {
		d := (hi - lo) * 0.04
		lo, hi = lo-d, hi+d
	}
	return lo, hi
}

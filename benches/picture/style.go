package picture

import (
	"image/color"

	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/font/liberation"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// The colours of Okabe & Ito, Color Universal Design (2008), but for the
// yellow, which is hardly seen on white. Black is the truth.
var (
	black = color.NRGBA{0x00, 0x00, 0x00, 0xff}
	grey  = color.NRGBA{0x55, 0x55, 0x55, 0xff}
	pale  = color.NRGBA{0xe2, 0xe2, 0xe2, 0xff}
)

func palette() []color.NRGBA {
	return []color.NRGBA{
		{0x00, 0x72, 0xB2, 0xff}, // blue
		{0xD5, 0x5E, 0x00, 0xff}, // vermillion
		{0x00, 0x9E, 0x73, 0xff}, // bluish green
		{0xCC, 0x79, 0xA7, 0xff}, // reddish purple
		{0xE6, 0x9F, 0x00, 0xff}, // orange
		{0x56, 0xB4, 0xE9, 0xff}, // sky blue
	}
}

func dashes() [][]vg.Length {
	return [][]vg.Length{nil, {8, 3}, {8, 3, 1.6, 3}, {1.6, 2.6}, {4, 2.5}, {8, 2.5, 1.6, 2.5, 1.6, 2.5}}
}

// lineOf is the look of the i-th of several lines: no two of the first 36 are
// alike, and of the first six no two share colour or dashes.
func lineOf(i int) draw.LineStyle {
	p, d := palette(), dashes()
	return draw.LineStyle{Color: p[i%len(p)], Width: 1.7 * pt, Dashes: d[(i+i/len(p))%len(d)]}
}

// truthLine is the look of what really happened.
func truthLine() draw.LineStyle { return draw.LineStyle{Color: black, Width: 2.6 * pt} }

func plainLine(c color.NRGBA) draw.LineStyle { return draw.LineStyle{Color: c, Width: 1.3 * pt} }

// limitLine is the look of a limit.
func limitLine() draw.LineStyle {
	return draw.LineStyle{Color: grey, Width: 1.6 * pt, Dashes: []vg.Length{5, 2}}
}

func faint(c color.Color, alpha uint8) color.NRGBA {
	n := color.NRGBAModel.Convert(c).(color.NRGBA)
	n.A = alpha
	return n
}

// lettering writes text in one typeface.
type lettering struct{ handler text.Handler }

func newLettering() lettering {
	return lettering{text.Plain{Fonts: font.NewCache(liberation.Collection())}}
}

// style is text of a size; black and upright unless said otherwise.
func (l lettering) style(size vg.Length, x text.XAlignment, y text.YAlignment) text.Style {
	return text.Style{Color: black, Font: font.Font{Typeface: "Liberation", Variant: "Sans", Size: size}, XAlign: x, YAlign: y,
		Handler: l.handler}
}

// cut shortens s to fit into room.
func cut(st text.Style, s string, room vg.Length) string {
	if st.Width(s) <= room {
		return s
	}
	r := []rune(s)
	for len(r) > 1 && st.Width(string(r)+"…") > room {
		r = r[:len(r)-1]
	}
	return string(r) + "…"
}

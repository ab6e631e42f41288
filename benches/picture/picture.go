// Package picture draws static pictures of what a bench did: estimates against
// the truth, errors over time and over scenarios, cells, duties and records.
//
// It takes plain columns and writes PNG or SVG, in one look for all: ticks at
// 1, 2 and 5, a name and a unit on every axis, a legend that never covers data,
// and colours that also colour-blind people tell apart (Okabe & Ito, Color
// Universal Design, 2008) beside dashes, so that colour is never the only cue.
// Long columns are thinned to what a pixel column can show, extremes kept; the
// same columns give the same bytes.
//
// It opens no files, computes no scores and mends no data: a value that is not
// a finite number leaves a gap. It is the only importer of gonum/plot.
package picture

import (
	"bytes"
	"fmt"
	"html"
	"io"
	"path/filepath"
	"strings"
	"unicode"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgsvg"
)

// Format is a kind of picture file.
type Format string

// The kinds of picture files.
const (
	PNG Format = "png"
	SVG Format = "svg"
)

// FormatOf tells the format by a file's ending.
func FormatOf(path string) (Format, error) {
	switch ext := strings.ToLower(filepath.Ext(path)); ext {
	case ".png":
		return PNG, nil
	case ".svg":
		return SVG, nil
	default:
		return "", fmt.Errorf("picture: %s ends in %q, allowed is .png or .svg", path, ext)
	}
}

// All pictures are 1200×800 pixels, which at 96 pixels an inch is 900×600
// points.
const (
	widthPx  = 1200
	heightPx = 800
	dpi      = 96
	pt       = vg.Length(1)
	perPt    = float64(dpi) / 72 // pixels a point
	width    = vg.Length(widthPx) / vg.Length(perPt)
	height   = vg.Length(heightPx) / vg.Length(perPt)
)

// render draws f and writes it.
func (f *figure) render(w io.Writer, format Format) error {
	switch format {
	case PNG:
		c := vgimg.NewWith(vgimg.UseWH(width, height), vgimg.UseDPI(dpi))
		f.draw(draw.NewCanvas(c, width, height))
		if _, err := (vgimg.PngCanvas{Canvas: c}).WriteTo(w); err != nil {
			return fmt.Errorf("picture: writing PNG: %w", err)
		}
		return nil
	case SVG:
		c := vgsvg.New(width, height)
		f.draw(draw.NewCanvas(c, width, height))
		var b bytes.Buffer
		if _, err := c.WriteTo(&b); err != nil {
			return fmt.Errorf("picture: writing SVG: %w", err)
		}
		if _, err := io.WriteString(w, f.finishSVG(b.String())); err != nil {
			return fmt.Errorf("picture: writing SVG: %w", err)
		}
		return nil
	}
	return fmt.Errorf("picture: format is %q, allowed is %q or %q", format, PNG, SVG)
}

// finishSVG gives the SVG fonts to fall back on, where Liberation Sans is not
// installed, and a title for those who hear it read.
func (f *figure) finishSVG(svg string) string {
	svg = strings.ReplaceAll(svg, "font-family:Liberation Sans;", "font-family:'Liberation Sans',Arial,Helvetica,sans-serif;")
	// The library's first tag ends with the first '>' after "<svg".
	at := strings.Index(svg, "<svg")
	end := at + strings.Index(svg[at:], ">") + 1
	return svg[:end-1] + ` role="img">` + "\n<title>" + html.EscapeString(clean(f.title)) + "</title>" + svg[end:]
}

// clean drops what neither a font nor XML has a sign for.
func clean(s string) string {
	return strings.Map(func(r rune) rune {
		if unicode.IsControl(r) || r == unicode.ReplacementChar || r > 0xfffd {
			return -1
		}
		return r
	}, strings.ToValidUTF8(s, ""))
}

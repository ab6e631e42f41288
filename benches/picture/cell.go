package picture

import (
	"fmt"
	"io"
	"math"
	"slices"
)

// CellColumns are a cell's tables, as columns over SOC (fractions).
type CellColumns struct {
	Title, Note string
	OCV         []CellRow // V
	HalfGapV    []float64 // hysteresis on each side, on OCV's SOC; nil: none
	R0          []CellRow // Ω
	Branches    []BranchColumns
}

// BranchColumns are one RC pair's tables.
type BranchColumns struct {
	Ohm  []CellRow
	TauS []CellRow
}

// CellRow is one table row. A value that does not depend on SOC has a nil SOC
// and one value.
type CellRow struct {
	TemperatureC float64 // NaN: the same at all
	SOC, Values  []float64
}

// Cell draws OCV, resistances and time constants over SOC, one line a
// temperature.
func Cell(w io.Writer, format Format, c CellColumns) error {
	f := figure{title: c.Title, note: c.Note}
	temperatures := c.temperatures()
	for i, t := range temperatures {
		f.legend = append(f.legend, entry{name: fmt.Sprintf("at %s °C", number(t, 0)), line: lineOf(i)})
	}
	plain := plainLine(black)
	plain.Width = 1.8 * pt
	constant := false
	table := func(name, symbol, unit string, rows []CellRow, factor float64) *panel {
		p := &panel{name: name, x: axis{name: "SOC", unit: "%", fixed: true, lo: 0, hi: 100}, y: axis{name: symbol, unit: unit}}
		for _, r := range rows {
			st := plain
			if i := slices.Index(temperatures, r.TemperatureC); i >= 0 {
				st = lineOf(i)
			} else {
				constant = true
			}
			x, y := scaled(r.SOC, 100), scaled(r.Values, factor)
			if r.SOC == nil && len(y) > 0 {
				x, y = []float64{0, 100}, []float64{y[0], y[0]}
			}
			p.lines = append(p.lines, line{x: x, y: y, style: st, dots: r.SOC != nil && len(x) <= 60})
		}
		return p
	}
	ocv := table("Open-circuit voltage", "OCV", "V", c.OCV, 1)
	gap := false
	for _, r := range c.OCV {
		if n := min(len(r.Values), len(c.HalfGapV)); n > 0 {
			b := band{x: scaled(r.SOC, 100), lo: make([]float64, n), hi: make([]float64, n), fill: faint(grey, 0x50)}
			for i := range n {
				b.lo[i], b.hi[i] = r.Values[i]-c.HalfGapV[i], r.Values[i]+c.HalfGapV[i]
			}
			ocv.bands, gap = append(ocv.bands, b), true
		}
	}
	panels := []*panel{ocv, table("Series resistance", "R0", "mΩ", c.R0, 1000)}
	for j, b := range c.Branches {
		panels = append(panels, table(fmt.Sprintf("Branch %d, resistance", j+1), fmt.Sprintf("R%d", j+1), "mΩ", b.Ohm, 1000),
			table(fmt.Sprintf("Branch %d, time constant", j+1), fmt.Sprintf("τ%d", j+1), "s", b.TauS, 1))
	}
	if constant {
		f.legend = append(f.legend, entry{name: "at every temperature", line: plain})
	}
	if gap {
		f.legend = append(f.legend, entry{name: "between charged and discharged (hysteresis)", fill: faint(grey, 0x50)})
	}
	columns := 2
	if len(panels) > 4 {
		columns = 3
	}
	if len(panels) > 9 {
		columns = 4
	}
	for _, p := range panels {
		f.place(p, columns)
	}
	return f.render(w, format)
}

// temperatures lists every temperature of a row, ascending.
func (c *CellColumns) temperatures() []float64 {
	var out []float64
	tables := [][]CellRow{c.OCV, c.R0}
	for _, b := range c.Branches {
		tables = append(tables, b.Ohm, b.TauS)
	}
	for _, t := range tables {
		for _, r := range t {
			if !math.IsNaN(r.TemperatureC) && !slices.Contains(out, r.TemperatureC) {
				out = append(out, r.TemperatureC)
			}
		}
	}
	slices.Sort(out)
	return out
}

package define

import (
	"fmt"
	"slices"

	"soctrial/plant/cell"
)

// FormatCell writes c, which must be valid, as a cell file; reading it gives c
// again. Tables that share a section, as a branch's do, must share their axes,
// where they have them, and their interpolation: FormatCell panics where they
// do not, since no cell file could say so. One that lacks an axis of the other
// is written along it.
func FormatCell(c *cell.Cell) string {
	w := begin(KindCell, c.Name)
	w.number("capacity_ah", c.CapacityAh)
	w.number("coulombic_efficiency", c.CoulombicEfficiency)
	w.number("voltage_min_v", c.VoltageMinV)
	w.number("voltage_max_v", c.VoltageMaxV)
	w.number("temperature_ref_c", c.TemperatureRefC)
	w.word("interpolation", string(c.Interpolation))
	w.section("ocv")
	w.tables(c.Interpolation, keyTable{"voltage_v", &c.OCV}, keyTable{"slope_v_per_k", c.OCVSlopeVPerK})
	w.section("r0")
	w.tables(c.Interpolation, keyTable{"ohm", &c.R0})
	for i := range c.Branches {
		b := &c.Branches[i]
		w.element("branch")
		w.tables(c.Interpolation, keyTable{"ohm", &b.Ohm}, keyTable{"tau_s", b.TauS}, keyTable{"farad", b.Farad})
	}
	if h := c.Hysteresis; h != nil {
		w.section("hysteresis")
		w.tables(c.Interpolation, keyTable{"half_gap_v", &h.HalfGapV})
		w.number("rate", h.Rate)
	}
	if t := c.Thermal; t != nil {
		w.section("thermal")
		w.number("heat_capacity_j_per_k", t.HeatCapacityJPerK)
		w.number("conductance_w_per_k", t.ConductanceWPerK)
	}
	if u := c.Uncertainty; u != nil {
		w.section("uncertainty")
		if u.Names != nil {
			w.pair("names", texts(u.Names))
		}
		if u.Correlation != nil {
			w.pair("correlation", rows(u.Correlation))
		}
		w.tree(u.Tables)
	}
	if c.Origin != nil {
		w.section("origin")
		w.tree(c.Origin)
	}
	return w.String()
}

// keyTable is a table and the key its values stand at; nil: not given.
type keyTable struct {
	key   string
	table *cell.Table
}

// tables writes the tables of one section and the axes they share.
func (w *writer) tables(def cell.Interpolation, all ...keyTable) {
	all = slices.DeleteFunc(all, func(k keyTable) bool { return k.table == nil })
	axes := cell.Table{Interpolation: all[0].table.Interpolation}
	for _, k := range all {
		t := k.table
		if t.SOC != nil { // else nothing is interpolated
			if axes.SOC == nil {
				axes.Interpolation = t.Interpolation
			}
			if effective(t.Interpolation, def) != effective(axes.Interpolation, def) {
				panic(fmt.Sprintf("define: %s: found interpolation %q beside %q in one section", k.key, t.Interpolation, axes.Interpolation))
			}
		}
		axes.SOC = commonAxis(k.key+" over soc", axes.SOC, t.SOC)
		axes.TemperatureC = commonAxis(k.key+" over temperature_c", axes.TemperatureC, t.TemperatureC)
	}
	if axes.SOC != nil {
		w.pair("soc", numbers(axes.SOC))
	}
	if axes.TemperatureC != nil {
		w.pair("temperature_c", numbers(axes.TemperatureC))
	}
	w.word("interpolation", string(axes.Interpolation))
	for _, k := range all {
		w.values(k, &axes)
	}
}

func effective(i, def cell.Interpolation) cell.Interpolation {
	switch {
	case i != "":
		return i
	case def != "":
		return def
	}
	return cell.PCHIP
}

func commonAxis(what string, have, also []float64) []float64 {
	switch {
	case also == nil:
		return have
	case have != nil && !slices.Equal(have, also):
		panic(fmt.Sprintf("define: %s: found axis %v beside %v in one section", what, also, have))
	}
	return also
}

// values writes one table along axes; a constant stays a number.
func (w *writer) values(k keyTable, axes *cell.Table) {
	t := k.table
	if t.SOC == nil && t.TemperatureC == nil {
		w.number(k.key, t.Values[0][0])
		return
	}
	all := make([][]float64, max(1, len(axes.TemperatureC)))
	for r := range all {
		all[r] = make([]float64, max(1, len(axes.SOC)))
		for c := range all[r] {
			row := t.Values[min(r, len(t.Values)-1)] // the one row, without an axis of temperatures
			all[r][c] = row[min(c, len(row)-1)]
		}
	}
	switch {
	case axes.TemperatureC == nil:
		w.pair(k.key, numbers(all[0]))
	case axes.SOC == nil:
		column := make([]float64, len(all))
		for r := range all {
			column[r] = all[r][0]
		}
		w.pair(k.key, numbers(column))
	default:
		w.pair(k.key, rows(all))
	}
}

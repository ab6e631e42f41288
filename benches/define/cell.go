package define

import (
	"fmt"

	"soctrial/plant/cell"
)

// Cell reads a cell. The file's stem is its default name.
func Cell(file string, text []byte) (*cell.Cell, error) {
	d, t, err := parse(file, text, KindCell)
	if err != nil {
		return nil, err
	}
	c := &cell.Cell{Name: nameOf(t, file)}
	c.CapacityAh = t.needNumber("capacity_ah", "the nameplate capacity in Ah, > 0")
	c.CoulombicEfficiency = t.number("coulombic_efficiency", 1)
	c.VoltageMinV = t.needNumber("voltage_min_v", "the lower voltage limit in V")
	c.VoltageMaxV = t.needNumber("voltage_max_v", "the upper voltage limit in V")
	c.TemperatureRefC = t.number("temperature_ref_c", 25)
	c.Interpolation = interpolation(t)
	readOCV(t, c)
	if r := needTable(t, "r0", "a table with ohm"); r != nil {
		s := sectionOf(r)
		c.R0 = s.values("ohm")
		r.finish()
	}
	for _, b := range t.tables("branch") {
		c.Branches = append(c.Branches, branch(b))
		b.finish()
	}
	if h := t.table("hysteresis"); h != nil {
		s := sectionOf(h)
		c.Hysteresis = &cell.Hysteresis{HalfGapV: s.values("half_gap_v"), Rate: h.needNumber("rate", "gamma, a finite number ≥ 0")}
		h.finish()
	}
	if h := t.table("thermal"); h != nil {
		c.Thermal = &cell.Thermal{HeatCapacityJPerK: h.needNumber("heat_capacity_j_per_k", "a finite number > 0"),
			ConductanceWPerK: h.needNumber("conductance_w_per_k", "a finite number ≥ 0")}
		h.finish()
	}
	c.Uncertainty = uncertainty(t.table("uncertainty"))
	if o := t.table("origin"); o != nil {
		c.Origin = o.m
	}
	t.finish()
	if err := d.err(); err != nil {
		return nil, err
	}
	if err := d.owned(c.Validate()); err != nil {
		return nil, err
	}
	return c, nil
}

func needTable(t *table, key, allowed string) *table {
	if !t.has(key) {
		t.missing(key, allowed)
	}
	return t.table(key)
}

func interpolation(t *table) cell.Interpolation {
	return cell.Interpolation(t.word("interpolation", string(cell.PCHIP), string(cell.Linear)))
}

func readOCV(t *table, c *cell.Cell) {
	o := needTable(t, "ocv", "a table with soc and voltage_v")
	if o == nil {
		return
	}
	if !o.has("soc") {
		o.missing("soc", "the axis of voltage_v: at least 2 ascending numbers from 0 to 1")
	}
	s := sectionOf(o)
	c.OCV = s.values("voltage_v")
	if c.OCV.SOC == nil && o.has("voltage_v") && o.has("soc") {
		o.failOnce("voltage_v", describe(o.m["voltage_v"]), "a list, a voltage for each SOC point")
	}
	if o.has("slope_v_per_k") {
		if s.temps != nil {
			o.fail("slope_v_per_k", "both slope_v_per_k and temperature_c", "one of the two")
		} else {
			slope := s.values("slope_v_per_k")
			c.OCVSlopeVPerK = &slope
		}
	}
	o.get("slope_v_per_k")
	o.finish()
}

func branch(b *table) cell.Branch {
	s := sectionOf(b)
	out := cell.Branch{Ohm: s.values("ohm")}
	for _, k := range []struct {
		key string
		to  **cell.Table
	}{{"tau_s", &out.TauS}, {"farad", &out.Farad}} {
		if b.has(k.key) {
			v := s.values(k.key)
			*k.to = &v
		}
		b.get(k.key)
	}
	if out.TauS == nil && out.Farad == nil {
		b.missing("tau_s", "a time constant in s, or farad in its place")
	}
	return out
}

// section is a table of a cell: axes, and values that lie over them.
type section struct {
	*table
	soc, temps    []float64
	interpolation cell.Interpolation
}

// sectionOf reads the axes of t. An axis that only constants stand beside is
// checked like any other.
func sectionOf(t *table) section {
	s := section{t, t.numbers("soc"), t.numbers("temperature_c"), interpolation(t)}
	ascending(t, "soc", s.soc)
	ascending(t, "temperature_c", s.temps)
	for i, z := range s.soc {
		if z < 0 || z > 1 {
			t.failOnce(element("soc", i), number(z), "SOC from 0 to 1")
		}
	}
	return s
}

func ascending(t *table, key string, axis []float64) {
	if axis != nil && len(axis) == 0 {
		t.fail(key, "an empty list", "at least one number")
	}
	for i := 1; i < len(axis); i++ {
		if axis[i] <= axis[i-1] {
			t.failOnce(element(key, i), number(axis[i]), fmt.Sprintf("above the one before it (%g): the axis ascends", axis[i-1]))
		}
	}
}

// values reads the table whose values stand at key, over the section's axes: a
// number is a constant, a plain list lies over the one axis there is, and with
// both axes there is a row a temperature.
func (s *section) values(key string) cell.Table {
	out := cell.Table{Interpolation: s.interpolation}
	v, ok := s.get(key)
	if !ok {
		s.missing(key, "a number, a list or rows of numbers")
		return out
	}
	list, isList := v.([]any)
	if !isList {
		if x, ok := s.toNumber(key, v); ok {
			out.Values = [][]float64{{x}}
		}
		return out
	}
	rows := 0
	for _, x := range list {
		if _, ok := x.([]any); ok {
			rows++
		}
	}
	switch {
	case rows > 0 && rows < len(list):
		s.fail(key, "numbers and rows together", "either numbers or a row a temperature")
	case rows > 0 && (s.soc == nil || s.temps == nil):
		s.fail(key, fmt.Sprintf("%d rows", rows), "rows only with both soc and temperature_c beside them")
	case rows > 0:
		out.SOC, out.TemperatureC = s.soc, s.temps
		for i, x := range list {
			out.Values = append(out.Values, s.toNumbers(element(key, i), x))
		}
	case s.soc == nil && s.temps == nil:
		s.fail(key, describe(v), "a number, or soc or temperature_c beside the list")
	case s.soc != nil && s.temps != nil:
		s.fail(key, "a plain list", "a row a temperature, since both soc and temperature_c are given")
	case s.temps != nil:
		out.TemperatureC = s.temps
		for _, x := range s.toNumbers(key, v) {
			out.Values = append(out.Values, []float64{x})
		}
	default:
		out.SOC, out.Values = s.soc, [][]float64{s.toNumbers(key, v)}
	}
	return out
}

package define

import (
	"fmt"
	"math"

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
	if o := t.table("ocv"); o != nil {
		c.OCV = values(o, "voltage_v")
		if o.has("slope_v_per_k") {
			s := values(o, "slope_v_per_k")
			c.OCVSlopeVPerK = &s
		} else {
			o.get("slope_v_per_k")
		}
		o.finish()
	} else {
		t.missing("ocv", "a table with soc and voltage_v")
	}
	if r := t.table("r0"); r != nil {
		c.R0 = values(r, "ohm")
		r.finish()
	} else {
		t.missing("r0", "a table with ohm")
	}
	for _, b := range t.tables("branch") {
		c.Branches = append(c.Branches, branch(b))
		b.finish()
	}
	if h := t.table("hysteresis"); h != nil {
		c.Hysteresis = &cell.Hysteresis{HalfGapV: values(h, "half_gap_v"), Rate: h.needNumber("rate", "gamma, a number ≥ 0")}
		h.finish()
	}
	if h := t.table("thermal"); h != nil {
		c.Thermal = &cell.Thermal{HeatCapacityJPerK: h.needNumber("heat_capacity_j_per_k", "a number > 0"),
			ConductanceWPerK: h.needNumber("conductance_w_per_k", "a number ≥ 0")}
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

func nameOf(t *table, file string) string {
	name := t.text("name", false)
	if name == "" {
		return stem(file)
	}
	return name
}

func interpolation(t *table) cell.Interpolation {
	return cell.Interpolation(t.word("interpolation", string(cell.PCHIP), string(cell.Linear)))
}

func branch(b *table) cell.Branch {
	out := cell.Branch{Ohm: values(b, "ohm")}
	for _, k := range []string{"tau_s", "farad"} {
		if !b.has(k) {
			b.get(k)
			continue
		}
		v := values(b, k)
		if k == "tau_s" {
			out.TauS = &v
		} else {
			out.Farad = &v
		}
	}
	return out
}

// values reads the table whose values stand at key, on the axes soc and
// temperature_c beside it: a number is a constant, a plain list lies over the
// one axis there is, and with both axes there is a row a temperature.
func values(t *table, key string) cell.Table {
	soc, temps := t.numbers("soc"), t.numbers("temperature_c")
	out := cell.Table{Interpolation: interpolation(t)}
	v, ok := t.get(key)
	if !ok {
		t.missing(key, "a number, a list or rows of numbers")
		return out
	}
	list, isList := v.([]any)
	if !isList {
		x, _ := t.toNumber(key, v)
		out.Values = [][]float64{{x}}
		return out
	}
	rows := 0
	for _, x := range list {
		if _, ok := x.([]any); ok {
			rows++
		}
	}
	switch {
	case rows == 0 && soc == nil && temps == nil:
		t.fail(key, fmt.Sprintf("a list of %d", len(list)), "a number, or soc or temperature_c beside it")
	case rows == 0 && soc != nil && temps != nil && key == "slope_v_per_k", rows == 0 && temps == nil:
		out.SOC, out.Values = soc, [][]float64{t.toNumbers(key, v)}
	case rows == 0 && soc == nil:
		out.TemperatureC = temps
		for _, x := range t.toNumbers(key, v) {
			out.Values = append(out.Values, []float64{x})
		}
	case rows == 0:
		t.fail(key, "a plain list", "a row a temperature, since both soc and temperature_c are given")
	case rows != len(list):
		t.fail(key, "numbers and rows together", "a row a temperature")
	case soc == nil || temps == nil:
		t.fail(key, fmt.Sprintf("%d rows", rows), "rows only with both soc and temperature_c beside them")
	default:
		out.SOC, out.TemperatureC = soc, temps
		for i, x := range list {
			out.Values = append(out.Values, t.toNumbers(fmt.Sprintf("%s[%d]", key, i), x))
		}
	}
	return out
}

func uncertainty(t *table) *cell.Uncertainty {
	if t == nil {
		return nil
	}
	u := &cell.Uncertainty{Names: t.texts("names"), Tables: map[string]any{}}
	if v, ok := t.get("correlation"); ok {
		list, isList := v.([]any)
		if !isList {
			t.fail("correlation", describe(v), "rows of numbers")
		}
		for i, x := range list {
			u.Correlation = append(u.Correlation, t.toNumbers(fmt.Sprintf("correlation[%d]", i), x))
		}
	}
	for _, k := range []string{"capacity_ah", "coulombic_efficiency", "ocv", "r0", "branch", "hysteresis", "thermal"} {
		if v, ok := t.get(k); ok {
			errorsOf(t, k, v)
			u.Tables[k] = v
		}
	}
	t.finish()
	return u
}

// errorsOf checks that every number below v is a standard error.
func errorsOf(t *table, key string, v any) {
	switch v := v.(type) {
	case map[string]any:
		for k, x := range v {
			errorsOf(t, key+"."+k, x)
		}
	case []any:
		for i, x := range v {
			errorsOf(t, fmt.Sprintf("%s[%d]", key, i), x)
		}
	case float64:
		if math.IsInf(v, 0) {
			t.fail(key, fmt.Sprint(v), "a finite number, or nan where the record cannot say")
		}
	}
}

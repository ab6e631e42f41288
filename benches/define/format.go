package define

import (
	"fmt"
	"math"
	"slices"
	"sort"
	"strconv"
	"strings"

	"github.com/pelletier/go-toml/v2"

	"soctrial/estimator"
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

// writer builds TOML line by line.
type writer struct{ strings.Builder }

func begin(kind, name string) *writer {
	w := &writer{}
	w.pair("format", strconv.Quote(formatOf(kind)))
	if name != "" {
		w.pair("name", text(name))
	}
	return w
}

func (w *writer) pair(key, value string) { fmt.Fprintf(w, "%s = %s\n", key, value) }

func (w *writer) number(key string, v float64) { w.pair(key, number(v)) }

// some writes v where it is not the default, which 0 and NaN are.
func (w *writer) some(key string, v float64) {
	if v != 0 && !math.IsNaN(v) {
		w.number(key, v)
	}
}

func (w *writer) section(name string) { fmt.Fprintf(w, "\n[%s]\n", name) }

// number writes v to the last bit, as a TOML float.
func number(v float64) string {
	s := strconv.FormatFloat(v, 'g', -1, 64)
	switch {
	case math.IsNaN(v):
		return "nan"
	case math.IsInf(v, 0):
		return strings.ToLower(strings.TrimSuffix(s, "Inf")) + "inf"
	case !strings.ContainsAny(s, ".e"):
		return s + ".0"
	}
	return s
}

func numbers(v []float64) string {
	var b strings.Builder
	b.WriteByte('[')
	for i, x := range v {
		if i > 0 {
			b.WriteString(", ")
		}
		b.WriteString(number(x))
	}
	b.WriteByte(']')
	return b.String()
}

// text writes a TOML basic string.
func text(s string) string {
	b, err := toml.Marshal(map[string]string{"k": s})
	if err != nil {
		return strconv.Quote(s)
	}
	return strings.TrimSpace(strings.TrimPrefix(string(b), "k = "))
}

// axes writes the axes of t, once a section.
func (w *writer) axes(t *cell.Table) {
	if t.SOC != nil {
		w.pair("soc", numbers(t.SOC))
	}
	if t.TemperatureC != nil {
		w.pair("temperature_c", numbers(t.TemperatureC))
	}
}

func (w *writer) values(key string, t *cell.Table) {
	switch {
	case t.SOC == nil && t.TemperatureC == nil:
		w.number(key, t.Values[0][0])
	case t.TemperatureC == nil:
		w.pair(key, numbers(t.Values[0]))
	case t.SOC == nil:
		column := make([]float64, len(t.Values))
		for i, row := range t.Values {
			column[i] = row[0]
		}
		w.pair(key, numbers(column))
	default:
		rows := make([]string, len(t.Values))
		for i, row := range t.Values {
			rows[i] = "\n  " + numbers(row)
		}
		w.pair(key, "["+strings.Join(rows, ",")+",\n]")
	}
}

func (w *writer) interpolation(i cell.Interpolation) {
	if i != "" {
		w.pair("interpolation", strconv.Quote(string(i)))
	}
}

// FormatCell writes c as a cell file; reading it gives c again. Tables of one
// section must share their axes, as those that were read from a file do; a
// constant beside a table is fine.
func FormatCell(c *cell.Cell) string {
	w := begin(KindCell, c.Name)
	w.number("capacity_ah", c.CapacityAh)
	w.number("coulombic_efficiency", c.CoulombicEfficiency)
	w.number("voltage_min_v", c.VoltageMinV)
	w.number("voltage_max_v", c.VoltageMaxV)
	w.number("temperature_ref_c", c.TemperatureRefC)
	w.interpolation(c.Interpolation)
	w.section("ocv")
	w.axes(&c.OCV)
	w.interpolation(c.OCV.Interpolation)
	w.values("voltage_v", &c.OCV)
	if c.OCVSlopeVPerK != nil {
		w.values("slope_v_per_k", c.OCVSlopeVPerK)
	}
	w.section("r0")
	w.axes(&c.R0)
	w.interpolation(c.R0.Interpolation)
	w.values("ohm", &c.R0)
	for i := range c.Branches {
		b := &c.Branches[i]
		w.WriteString("\n[[branch]]\n")
		key, tau := "tau_s", b.TauS
		if tau == nil {
			key, tau = "farad", b.Farad
		}
		axes := &b.Ohm
		if axes.SOC == nil && axes.TemperatureC == nil {
			axes = tau
		}
		w.axes(axes)
		w.interpolation(b.Ohm.Interpolation)
		w.values("ohm", &b.Ohm)
		w.values(key, tau)
	}
	if h := c.Hysteresis; h != nil {
		w.section("hysteresis")
		w.axes(&h.HalfGapV)
		w.interpolation(h.HalfGapV.Interpolation)
		w.values("half_gap_v", &h.HalfGapV)
		w.number("rate", h.Rate)
	}
	if t := c.Thermal; t != nil {
		w.section("thermal")
		w.number("heat_capacity_j_per_k", t.HeatCapacityJPerK)
		w.number("conductance_w_per_k", t.ConductanceWPerK)
	}
	if u := c.Uncertainty; u != nil {
		w.section("uncertainty")
		names := make([]string, len(u.Names))
		for i, n := range u.Names {
			names[i] = text(n)
		}
		w.pair("names", "["+strings.Join(names, ", ")+"]")
		rows := make([]string, len(u.Correlation))
		for i, row := range u.Correlation {
			rows[i] = "\n  " + numbers(row)
		}
		w.pair("correlation", "["+strings.Join(rows, ",")+"]")
		w.tree(u.Tables)
	}
	if c.Origin != nil {
		w.section("origin")
		w.tree(c.Origin)
	}
	return w.String()
}

// tree writes what is carried along unread, inline, in the order of its keys.
func (w *writer) tree(m map[string]any) {
	for _, k := range sortedKeys(m) {
		w.pair(key(k), inline(m[k]))
	}
}

func sortedKeys(m map[string]any) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	return keys
}

// key writes a key, bare where TOML allows it.
func key(k string) string {
	for _, c := range k {
		if !(c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= '0' && c <= '9' || c == '_' || c == '-') {
			return text(k)
		}
	}
	if k == "" {
		return `""`
	}
	return k
}

func inline(v any) string {
	switch v := v.(type) {
	case float64:
		return number(v)
	case string:
		return text(v)
	case []any:
		parts := make([]string, len(v))
		for i, x := range v {
			parts[i] = inline(x)
		}
		return "[" + strings.Join(parts, ", ") + "]"
	case map[string]any:
		var parts []string
		for _, k := range sortedKeys(v) {
			parts = append(parts, key(k)+" = "+inline(v[k]))
		}
		return "{ " + strings.Join(parts, ", ") + " }"
	}
	b, err := toml.Marshal(map[string]any{"k": v})
	if err != nil {
		return text(fmt.Sprint(v))
	}
	return strings.TrimSpace(strings.TrimPrefix(string(b), "k = "))
}

// FormatDuty writes d as a duty file; a trace that came from a file is written
// inline, so that the duty stands alone.
func FormatDuty(d *duty.Duty) string {
	w := begin(KindDuty, d.Name)
	if d.Vehicle != nil {
		w.section("vehicle")
		w.vehicle(d.Vehicle)
	}
	w.legs(d.Legs, "leg")
	return w.String()
}

func (w *writer) legs(legs []duty.Leg, path string) {
	for i := range legs {
		l := &legs[i]
		fmt.Fprintf(w, "\n[[%s]]\n", path)
		w.pair("kind", strconv.Quote(string(l.Kind)))
		if l.ProfileName != "" {
			w.pair("name", text(l.ProfileName))
		}
		for _, f := range []struct {
			key   string
			value float64
		}{{"current_a", l.CurrentA}, {"power_w", l.PowerW}} {
			if !math.IsNaN(f.value) && l.Kind != duty.Trace {
				w.number(f.key, f.value)
			}
		}
		numbersOf := legNumbers(l)
		for _, k := range legKeyOrder() {
			if v := *numbersOf[k]; !math.IsNaN(v) {
				w.number(k, v)
			}
		}
		if l.Count != 0 {
			w.pair("count", strconv.Itoa(l.Count))
		}
		if l.Repeat != 0 {
			w.pair("repeat", strconv.Itoa(l.Repeat))
		}
		if l.AtLimit != "" {
			w.pair("at_limit", strconv.Quote(string(l.AtLimit)))
		}
		for _, c := range []struct {
			key    string
			values []float64
		}{{"time_s", l.TimeS}, {"current_a", l.TraceA}, {"power_w", l.TraceW}, {"speed_mps", l.SpeedMps}} {
			if c.values != nil {
				w.pair(c.key, numbers(c.values))
			}
		}
		if l.Vehicle != nil {
			fmt.Fprintf(w, "\n[%s.vehicle]\n", path)
			w.vehicle(l.Vehicle)
		}
		w.legs(l.Legs, path+".leg")
	}
}

func (w *writer) vehicle(v *duty.Vehicle) {
	w.number("mass_kg", v.MassKg)
	w.number("rotating_mass_kg", v.RotatingMassKg)
	w.number("rolling_coefficient", v.RollingCoefficient)
	w.number("drag_area_m2", v.DragAreaM2)
	w.number("air_density_kg_per_m3", v.AirDensityKgPerM3)
	w.number("slope", v.Slope)
	w.number("drive_efficiency", v.DriveEfficiency)
	w.number("regeneration_efficiency", v.RegenerationEfficiency)
	w.number("auxiliary_w", v.AuxiliaryW)
	w.pair("series", strconv.Itoa(v.Series))
	w.pair("parallel", strconv.Itoa(v.Parallel))
}

// FormatSensors writes s as a sensors file.
func FormatSensors(s *noise.Sensors) string {
	w := begin(KindSensors, s.Name)
	w.number("sample_period_s", s.SamplePeriodS)
	for _, c := range channels(s) {
		reading := c.name == "current" && s.CurrentReading != ""
		if *c.to == (noise.Channel{}) && !reading {
			continue
		}
		w.section(c.name)
		if reading {
			w.pair("reading", strconv.Quote(string(s.CurrentReading)))
		}
		for _, n := range channelNumbers(c.unit, c.to) {
			w.some(n.key, *n.to)
		}
		if c.to.Every != 0 {
			w.pair("every", strconv.Itoa(c.to.Every))
		}
	}
	return w.String()
}

// FormatEstimator writes s as an estimator file.
func FormatEstimator(s *estimator.Spec) string {
	w := begin(KindEstimator, s.Name)
	w.pair("kind", strconv.Quote(s.Kind))
	if s.Branches >= 0 {
		w.pair("branches", strconv.Itoa(s.Branches))
	}
	if s.CellFile != "" {
		w.pair("cell", text(s.CellFile))
	}
	section := ""
	for _, kind := range estimatorKinds() {
		if kind.kind != s.Kind {
			continue
		}
		for _, k := range estimatorKeys() {
			v := *k.to(s)
			name := k.section + "." + k.key
			if math.IsNaN(v) || !slices.Contains(kind.needs, name) && !slices.Contains(kind.takes, name) {
				continue
			}
			if k.section != section {
				section = k.section
				w.section(section)
			}
			w.number(k.key, v)
		}
	}
	return w.String()
}

package picture

import "io"

// DutyColumns are what is asked over time, each value holding until the next;
// nil where a duty asks for none of a kind.
type DutyColumns struct {
	Title, Note string
	TimeS       []float64
	CurrentA    []float64 // > 0 on discharge
	PowerW      []float64 // > 0 on discharge
	VoltageV    []float64 // held
	SpeedMps    []float64 // joined by straight lines
	EndS        float64   // when the last value ends; 0: with its time
}

// Duty draws what a duty asks for over time, a panel a quantity.
func Duty(w io.Writer, format Format, d DutyColumns) error {
	ends := d.TimeS
	if d.EndS > 0 {
		ends = append(append([]float64{}, d.TimeS...), d.EndS)
	}
	x, perS := timeAxis(ends)
	f := figure{title: d.Title, note: d.Note, shareX: true}
	t := scaled(d.TimeS, perS)
	for i, q := range []struct {
		name, unit string
		values     []float64
		factor     float64
		joined     bool
	}{{"Current", "A", d.CurrentA, 1, false}, {"Power", "W", d.PowerW, 1, false}, {"Held voltage", "V", d.VoltageV, 1, false}, {"Speed", "km/h", d.SpeedMps, 3.6, true}} {
		if !known(q.values) {
			continue
		}
		p := &panel{x: x, y: axis{name: q.name, unit: q.unit}, zero: q.name != "Held voltage"}
		sx, sy := t, scaled(q.values, q.factor)
		if !q.joined {
			sx, sy = steps(t, sy, x.hi)
		}
		p.lines = []line{{x: sx, y: sy, style: plainLine(palette()[min(i, 2)])}}
		f.rows = append(f.rows, row{[]*panel{p}, 1})
	}
	if len(f.rows) == 0 {
		f.rows = []row{{[]*panel{{x: x, y: axis{name: "Current", unit: "A"}}}, 1}}
	}
	return f.render(w, format)
}

// RecordColumns are a recorded test; a nil column was not recorded.
type RecordColumns struct {
	Title, Note  string
	TimeS        []float64
	VoltageV     []float64
	CurrentA     []float64 // > 0 on discharge
	TemperatureC []float64
	SOC          []float64 // fractions
}

// Record draws what was recorded over time, a panel a quantity.
func Record(w io.Writer, format Format, r RecordColumns) error {
	x, perS := timeAxis(r.TimeS)
	t := scaled(r.TimeS, perS)
	f := figure{title: r.Title, note: r.Note, shareX: true}
	for i, q := range []struct {
		name, unit string
		values     []float64
		factor     float64
		needed     bool
	}{{"Voltage", "V", r.VoltageV, 1, true}, {"Current", "A", r.CurrentA, 1, true}, {"Temperature", "°C", r.TemperatureC, 1, false}, {"SOC", "%", r.SOC, 100, false}} {
		if !q.needed && !known(q.values) {
			continue
		}
		p := &panel{x: x, y: axis{name: q.name, unit: q.unit}, zero: q.name == "Current"}
		p.lines = []line{{x: t, y: scaled(q.values, q.factor), style: plainLine(palette()[i])}}
		f.rows = append(f.rows, row{[]*panel{p}, 1})
	}
	return f.render(w, format)
}

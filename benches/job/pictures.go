package job

import (
	"fmt"
	"io"
	"math"
	"slices"

	"soctrial/benches/picture"
	"soctrial/benches/score"
	"soctrial/benches/store"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
	"soctrial/plant/record"
)

// drawTo writes a picture whose format its file's ending says.
func drawTo(path string, draw func(io.Writer, picture.Format) error) error {
	format, err := picture.FormatOf(path)
	if err != nil {
		return wrongf("--picture: %w", err)
	}
	return wrong(store.WriteFile(path, func(w io.Writer) error { return draw(w, format) }))
}

// curvePoints is how many points a curve over SOC is drawn from, so that it
// bends as the interpolation makes it.
const curvePoints = 200

// drawCell shows a cell's curves at every temperature of its tables, or the
// one that holds at all.
func drawCell(path string, c *cell.Cell, m *cell.Model) error {
	soc := make([]float64, curvePoints+1)
	for i := range soc {
		soc[i] = float64(i) / curvePoints
	}
	cols := picture.CellColumns{Title: fmt.Sprintf("Cell %s, %g Ah", c.Name, c.CapacityAh), Branches: make([]picture.BranchColumns, m.N)}
	temps := temperaturesOf(c)
	for k, tempC := range temps {
		var v cell.View
		v.Bind(m, tempC)
		row := func(f func(z float64) float64) picture.CellRow {
			r := picture.CellRow{TemperatureC: tempC, SOC: soc, Values: make([]float64, len(soc))}
			if len(temps) == 1 {
				r.TemperatureC = math.NaN()
			}
			for i, z := range soc {
				r.Values[i] = f(z)
			}
			return r
		}
		cols.OCV = append(cols.OCV, row(func(z float64) float64 { u, _ := v.OCV(z); return u }))
		cols.R0 = append(cols.R0, row(v.R0))
		for j := range m.N {
			b := &cols.Branches[j]
			b.Ohm = append(b.Ohm, row(func(z float64) float64 { g := v.Segment(z); return g.R[j].At(z - g.Ref) }))
			b.TauS = append(b.TauS, row(func(z float64) float64 { g := v.Segment(z); return m.Tau(j, g, z-g.Ref) }))
		}
		if c.Hysteresis != nil && k == 0 {
			cols.HalfGapV = row(func(z float64) float64 { g := v.Segment(z); return g.HalfGapV.At(z - g.Ref) }).Values
		}
	}
	cols.OCV, cols.R0 = merged(cols.OCV), merged(cols.R0)
	for j := range cols.Branches {
		b := &cols.Branches[j]
		b.Ohm, b.TauS = merged(b.Ohm), merged(b.TauS)
	}
	return drawTo(path, func(w io.Writer, f picture.Format) error { return picture.Cell(w, f, cols) })
}

// merged makes one row of rows that are the same at every temperature.
func merged(rows []picture.CellRow) []picture.CellRow {
	for _, r := range rows[1:] {
		if !slices.Equal(r.Values, rows[0].Values) {
			return rows
		}
	}
	rows[0].TemperatureC = math.NaN()
	return rows[:1]
}

// temperaturesOf returns the temperatures of a cell's tables, ascending; the
// reference where none has any.
func temperaturesOf(c *cell.Cell) []float64 {
	all := slices.Concat(c.OCV.TemperatureC, c.R0.TemperatureC)
	for i := range c.Branches {
		all = append(all, c.Branches[i].Ohm.TemperatureC...)
		if t := c.Branches[i].TauS; t != nil {
			all = append(all, t.TemperatureC...)
		}
	}
	if len(all) == 0 {
		return []float64{c.TemperatureRefC}
	}
	slices.Sort(all)
	return slices.Compact(all)
}

// drawDuty shows what a duty asks over time, up to a demand that only a stop
// ends.
func drawDuty(path, name string, p *duty.Program) error {
	const most = 200_000
	d := picture.DutyColumns{Title: "Duty " + name, Note: "A C-rate is drawn for a cell of 1 Ah. Stops may end legs sooner."}
	c := p.Start()
	for !c.Done() {
		now := c.Demand()
		nan := math.NaN()
		a, w, v := nan, nan, nan
		switch now.Quantity {
		case duty.CurrentDemand:
			a = now.Value
		case duty.PowerDemand:
			w = now.Value
		case duty.VoltageDemand:
			v = now.Value
		}
		d.TimeS, d.CurrentA, d.PowerW, d.VoltageV = append(d.TimeS, d.EndS), append(d.CurrentA, a), append(d.PowerW, w), append(d.VoltageV, v)
		if math.IsInf(now.EndS, 0) || len(d.TimeS) == most {
			d.Note += " Drawn up to a demand that only a stop ends."
			break
		}
		d.EndS = now.EndS
		c.Next()
	}
	return drawTo(path, func(w io.Writer, f picture.Format) error { return picture.Duty(w, f, d) })
}

func drawRecord(path string, r *record.Record) error {
	cols := picture.RecordColumns{Title: "Record " + r.Name, Note: "Current is positive on discharge.", TimeS: r.TimeS, VoltageV: r.VoltageV,
		CurrentA: r.CurrentA, TemperatureC: r.TemperatureC, SOC: r.SOC}
	return drawTo(path, func(w io.Writer, f picture.Format) error { return picture.Record(w, f, cols) })
}

// drawTraces shows one scenario of a traces file by all its estimators, the
// first where id is negative.
func drawTraces(path, from string, id int64, keys []store.TraceKey) error {
	if len(keys) == 0 {
		return wrongf("%s: holds no trace to draw", from)
	}
	if id < 0 {
		id = keys[0].ScenarioID
	}
	keys = slices.DeleteFunc(slices.Clone(keys), func(k store.TraceKey) bool { return k.ScenarioID != id })
	if len(keys) == 0 {
		return wrongf("--scenario: found %d, which %s does not trace", id, from)
	}
	cols := picture.TrackColumns{Title: fmt.Sprintf("Scenario %d", id), Note: "Current is positive on discharge."}
	for _, k := range keys {
		t, err := store.ReadTraces(from, k.ScenarioID, k.Estimator)
		if err != nil {
			return wrong(err)
		}
		if cols.TimeS == nil {
			cols.TimeS, cols.SOCTrue, cols.CurrentA = t.TimeS, t.SOCTrue, t.CurrentTrueA
			if low, _ := rangeOf(t.CurrentTrueA); math.IsNaN(low) { // a replay knows readings only
				cols.CurrentA = t.CurrentA
			}
		}
		cols.Estimates = append(cols.Estimates, picture.Estimate{Name: k.Estimator, SOC: t.SOC, SOCStd: t.SOCStd,
			InnovationV: t.InnovationV, InnovationStdV: t.InnovationStdV})
	}
	return drawTo(path, func(w io.Writer, f picture.Format) error { return picture.Track(w, f, cols) })
}

// drawResults shows how the worst errors spread over scenarios.
func drawResults(path string, o *Outcome) error {
	metric := MetricSettledMaxAbs
	cols := picture.DistributionColumns{Title: o.Name, Note: "A run that was lost or failed counts as reaching no error.",
		Quantity: "Largest |SOC error| after settling", Unit: "%", AtMost: math.NaN(), Share: math.NaN()}
	if len(score.Worst(o.Results, "", metric, 1)) == 0 { // runs too short to settle
		metric, cols.Quantity = MetricSOCRMSE, "RMSE of SOC"
	}
	at := map[string]int{}
	for i := range o.Results {
		r := &o.Results[i]
		k, ok := at[r.Estimator]
		if !ok {
			k = len(cols.Estimators)
			at[r.Estimator] = k
			cols.Estimators = append(cols.Estimators, picture.Scenarios{Name: r.Estimator})
		}
		x, _ := r.Metrics.Value(metric)
		if r.Status != score.OK {
			x = math.NaN()
		}
		cols.Estimators[k].Values = append(cols.Estimators[k].Values, 100*x)
	}
	for _, j := range o.Judged {
		if l := j.Limit; l.Metric == metric && l.Group == "" {
			cols.AtMost, cols.Share = 100*l.AtMost, l.Share
			break
		}
	}
	return drawTo(path, func(w io.Writer, f picture.Format) error { return picture.WorstErrors(w, f, cols) })
}

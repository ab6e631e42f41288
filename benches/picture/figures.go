package picture

import (
	"fmt"
	"math"
	"sort"
)

// timeAxis scales times to the unit that suits their span.
func timeAxis(spanS float64) (perS float64, name string) {
	switch {
	case spanS > 3*3600:
		return 1.0 / 3600, "Time / h"
	case spanS > 10*60:
		return 1.0 / 60, "Time / min"
	}
	return 1, "Time / s"
}

func scaled(v []float64, by float64) []float64 {
	out := make([]float64, len(v))
	for k, x := range v {
		out[k] = x * by
	}
	return out
}

func span(timeS []float64) float64 {
	if len(timeS) == 0 {
		return 0
	}
	return timeS[len(timeS)-1] - timeS[0]
}

// Estimate is one estimator's track.
type Estimate struct {
	Name      string
	SOC       []float64
	SOCStd    []float64 // NaN where it states none
	ResidualV []float64 // innovation, NaN where there is none
}

// TrackColumns are what a track is drawn from, columns of one length.
type TrackColumns struct {
	Title     string
	TimeS     []float64
	SOCTrue   []float64
	CurrentA  []float64
	Estimates []Estimate
	Note      string
}

// Track shows true and estimated state of charge with the stated ±2σ band, the
// current below and the voltage residual at the foot.
func Track(t TrackColumns) Figure {
	perS, axis := timeAxis(span(t.TimeS))
	x := scaled(t.TimeS, perS)
	soc := Panel{YLabel: "SOC / %", Weight: 2.2}
	residual := Panel{YLabel: "Residual / mV"}
	for i, e := range t.Estimates {
		s := Series{Name: e.Name, X: x, Y: scaled(e.SOC, 100), Style: i + 1}
		if len(e.SOCStd) == len(e.SOC) && anyFinite(e.SOCStd) {
			s.Name += " ±2σ"
			s.Low, s.High = make([]float64, len(s.Y)), make([]float64, len(s.Y))
			for k := range s.Y {
				s.Low[k] = math.Max(s.Y[k]-200*e.SOCStd[k], -5)
				s.High[k] = math.Min(s.Y[k]+200*e.SOCStd[k], 105)
			}
		}
		soc.Series = append(soc.Series, s)
		if anyFinite(e.ResidualV) {
			residual.Series = append(residual.Series, Series{Name: s.Name, X: x, Y: scaled(e.ResidualV, 1000), Style: i + 1})
		}
	}
	soc.Series = append(soc.Series, Series{Name: "true SOC", X: x, Y: scaled(t.SOCTrue, 100), Style: 0})
	panels := []Panel{soc, {YLabel: "Current / A", Series: []Series{{X: x, Y: t.CurrentA, Steps: true, Style: 0}}}}
	if len(residual.Series) > 0 {
		panels = append(panels, residual)
	}
	return Figure{Title: t.Title, XLabel: axis, Panels: panels, Note: t.Note}
}

func anyFinite(v []float64) bool {
	for _, x := range v {
		if finite(x) {
			return true
		}
	}
	return false
}

// Quantiles are one estimator's percentiles of |error| over scenarios, at each
// of some instants.
type Quantiles struct {
	Name               string
	Median, P95, Worst []float64
}

// ErrorsOverTime shows how |error| falls: median, 95th percentile and worst over
// scenarios, a panel an estimator on one scale.
func ErrorsOverTime(title string, timeS []float64, all []Quantiles, limit float64, note string) Figure {
	perS, axis := timeAxis(span(timeS))
	x := scaled(timeS, perS)
	top := 100 * limit
	for _, q := range all {
		for _, v := range q.Worst {
			if finite(v) {
				top = math.Max(top, 100*v)
			}
		}
	}
	f := Figure{Title: title, XLabel: axis, Note: note}
	for _, q := range all {
		p := Panel{YLabel: q.Name + " / %", YFloor: 0, YCeil: top, Series: []Series{
			{Name: "worst scenario", X: x, Y: scaled(q.Worst, 100), Style: 2},
			{Name: "95th percentile", X: x, Y: scaled(q.P95, 100), Style: 1},
			{Name: "median", X: x, Y: scaled(q.Median, 100), Style: 0},
		}}
		if limit > 0 {
			p.Levels = []Level{{Name: fmt.Sprintf("limit %g %%", 100*limit), Value: 100 * limit}}
		}
		f.Panels = append(f.Panels, p)
	}
	return f
}

// Named is a sample of one quantity, one value a scenario.
type Named struct {
	Name   string
	Values []float64
}

// WorstErrors shows, for each estimator, the share of scenarios whose error is
// at most what the axis says.
func WorstErrors(title, xLabel string, all []Named, limit float64, note string) Figure {
	p := Panel{YLabel: "Scenarios / %", YFloor: 0, YCeil: 100}
	for i, a := range all {
		var v []float64
		for _, x := range a.Values {
			if finite(x) {
				v = append(v, 100*math.Abs(x))
			}
		}
		sort.Float64s(v)
		s := Series{Name: a.Name, Style: i + 1, Steps: true}
		for k, x := range v {
			if k == 0 {
				s.X, s.Y = append(s.X, x), append(s.Y, 0)
			}
			s.X, s.Y = append(s.X, x), append(s.Y, 100*float64(k+1)/float64(len(a.Values)))
		}
		p.Series = append(p.Series, s)
	}
	if limit > 0 {
		p.Levels = []Level{{Name: fmt.Sprintf("limit %g %%", 100*limit), Value: 100 * limit, Vertical: true}}
	}
	return Figure{Title: title, XLabel: xLabel, LogX: true, Panels: []Panel{p}, Note: note}
}

// Curve is one line over SOC.
type Curve struct {
	Name      string
	SOC, Y    []float64
	Low, High []float64
}

// CellColumns are a cell's curves; any may be empty.
type CellColumns struct {
	Title               string
	OCVV, ResistanceOhm []Curve
	TauS                []Curve
	Note                string
}

// Cell shows open-circuit voltage, resistances and time constants over SOC.
func Cell(c CellColumns) Figure {
	f := Figure{Title: c.Title, XLabel: "SOC / %", Note: c.Note}
	add := func(label string, weight, by float64, log bool, curves []Curve, style int) {
		if len(curves) == 0 {
			return
		}
		p := Panel{YLabel: label, Weight: weight, LogY: log}
		for i, k := range curves {
			s := Series{Name: k.Name, X: scaled(k.SOC, 100), Y: scaled(k.Y, by), Style: style + i}
			if k.Low != nil {
				s.Low, s.High = scaled(k.Low, by), scaled(k.High, by)
			}
			p.Series = append(p.Series, s)
		}
		f.Panels = append(f.Panels, p)
	}
	add("OCV / V", 1.5, 1, false, c.OCVV, 0)
	add("Resistance / mΩ", 1.3, 1000, true, c.ResistanceOhm, 1)
	add("Time constant / s", 0.8, 1, true, c.TauS, 1)
	return f
}

// Stack is one quantity over time.
type Stack struct {
	Label string // with its unit
	Y     []float64
	Steps bool
}

// OverTime shows quantities one above the other over time; a stack without
// values is left out.
func OverTime(title string, timeS []float64, stacks []Stack, note string) Figure {
	perS, axis := timeAxis(span(timeS))
	f := Figure{Title: title, XLabel: axis, Note: note}
	x := scaled(timeS, perS)
	for i, s := range stacks {
		if anyFinite(s.Y) {
			f.Panels = append(f.Panels, Panel{YLabel: s.Label, Series: []Series{{X: x, Y: s.Y, Steps: s.Steps, Style: i % 2}}})
		}
	}
	return f
}

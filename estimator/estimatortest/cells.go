package estimatortest

import (
	"math"
	"math/rand/v2"

	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// PlainCell is an invented cell of two branches without hysteresis, the same
// at every temperature, its OCV curved.
func PlainCell() *cell.Cell {
	tau1, tau2 := cell.Constant(14), cell.Constant(310)
	return &cell.Cell{Name: "plain", CapacityAh: 4.8, CoulombicEfficiency: 0.998, VoltageMinV: 2.5, VoltageMaxV: 4.25, TemperatureRefC: 25,
		OCV: cell.OverSOC([]float64{0, 0.08, 0.2, 0.45, 0.7, 0.9, 1}, []float64{2.95, 3.38, 3.55, 3.68, 3.88, 4.06, 4.18}),
		R0:  cell.OverSOC([]float64{0, 0.3, 1}, []float64{0.045, 0.024, 0.021}),
		Branches: []cell.Branch{
			{Ohm: cell.OverSOC([]float64{0, 0.5, 1}, []float64{0.018, 0.009, 0.011}), TauS: &tau1},
			{Ohm: cell.Constant(0.013), TauS: &tau2},
		}}
}

// RichCell is an invented cell with everything a cell may have: hysteresis,
// OCV and resistances over temperature, time constants over SOC and from
// capacitances, a flat stretch of OCV.
func RichCell() *cell.Cell {
	soc := []float64{0, 0.1, 0.3, 0.6, 0.9, 1}
	temp := []float64{-10, 10, 40}
	slope := cell.OverSOC(soc, []float64{-2e-4, -1e-4, 0, 1e-4, 1e-4, 2e-4})
	tau := cell.OverSOC([]float64{0, 0.4, 1}, []float64{9, 16, 12})
	farad := cell.Constant(2.4e4)
	return &cell.Cell{Name: "rich", CapacityAh: 50, CoulombicEfficiency: 0.995, VoltageMinV: 2.5, VoltageMaxV: 3.65, TemperatureRefC: 25,
		OCV: cell.OverSOC(soc, []float64{2.75, 3.21, 3.27, 3.30, 3.335, 3.42}), OCVSlopeVPerK: &slope,
		R0: cell.Table{SOC: []float64{0, 0.5, 1}, TemperatureC: temp, Values: [][]float64{{6e-3, 4e-3, 4.2e-3}, {3e-3, 2e-3, 2.1e-3}, {1.4e-3, 1e-3, 1.1e-3}}},
		Branches: []cell.Branch{
			{Ohm: cell.Table{TemperatureC: temp, Values: [][]float64{{3e-3}, {1.5e-3}, {0.8e-3}}}, TauS: &tau},
			{Ohm: cell.OverSOC([]float64{0, 1}, []float64{2e-3, 1.2e-3}), Farad: &farad},
		},
		Hysteresis: &cell.Hysteresis{HalfGapV: cell.OverSOC([]float64{0, 0.5, 1}, []float64{0.004, 0.02, 0.01}), Rate: 60}}
}

// Course is a simulated run of a cell and what perfect sensors read of it.
type Course struct {
	Readings record.Readings
	State    []cell.State // at each sample
	SOCStart float64
}

// Options are how a course is read.
type Options struct {
	Samples int
	Reading record.CurrentReading
	Even    bool // one a second, PeriodS given; else uneven, some at one and the same time
	SOC     float64
}

// Run simulates c by the design's steps under a current that jumps between
// rests, discharge and charge, temperature drifting. The current is held
// between samples.
func Run(c *cell.Cell, o Options, seed uint64) (Course, error) {
	m, err := cell.Compile(c, cell.AsBuilt(0))
	if err != nil {
		return Course{}, err
	}
	in := record.MakeReadings(o.Samples)
	in.CurrentReading = o.Reading
	if o.Even {
		in.PeriodS = 1
	}
	draw := rand.New(rand.NewPCG(seed, 0))
	x := cell.State{SOC: o.SOC}
	var v cell.View
	v.Bind(m, c.TemperatureRefC)
	course := Course{Readings: in, State: make([]cell.State, o.Samples), SOCStart: o.SOC}
	i, t, tempC, left := 0.0, 0.0, c.TemperatureRefC, 0
	for k := range o.Samples {
		before := i
		if left == 0 {
			left = 20 + draw.IntN(120)
			i = 0
			if draw.Float64() < 0.7 {
				i = c.CapacityAh * (draw.Float64()*2.2 - 0.9)
			}
			if (x.SOC > 0.9 && i < 0) || (x.SOC < 0.1 && i > 0) {
				i = -i
			}
		}
		left--
		if k == 0 {
			before = i
		}
		v.SetTemperature(tempC)
		in.TimeS[k], in.TemperatureC[k] = t, tempC
		in.CurrentA[k], in.VoltageV[k] = i, v.Voltage(&x, i)
		if o.Reading == record.IntervalMean {
			in.CurrentA[k], in.VoltageV[k] = before, v.Voltage(&x, before)
		}
		course.State[k] = x
		dt := 1.0
		if !o.Even {
			dt = float64(draw.IntN(7)) / 2 // 0 included
		}
		v.Advance(&x, i, dt, c.CapacityAh)
		t += dt
		tempC += 0.02 * dt * math.Sin(t/300)
	}
	return course, nil
}

// Spoil adds sensor noise to in, and leaves readings of every kind out.
func Spoil(in *record.Readings, noiseA, noiseV float64, seed uint64) {
	draw := rand.New(rand.NewPCG(seed, 1))
	for k := range in.TimeS {
		in.CurrentA[k] += noiseA * draw.NormFloat64()
		in.VoltageV[k] += noiseV * draw.NormFloat64()
		for _, col := range [][]float64{in.CurrentA, in.VoltageV, in.TemperatureC} {
			if draw.Float64() < 0.04 {
				col[k] = math.NaN()
			}
		}
	}
}

package plant_test

import (
	"math"
	"testing"

	"soctrial/plant"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

// BenchmarkPlant2RC is the plant alone: two branches, 21 uneven points, a
// current that changes every sample.
func BenchmarkPlant2RC(b *testing.B) {
	soc := make([]float64, 21)
	for j := range soc {
		soc[j] = 0.5 * (1 - math.Cos(math.Pi*float64(j)/20))
	}
	over := func(f func(s float64) float64) cell.Table {
		y := make([]float64, len(soc))
		for j, s := range soc {
			y[j] = f(s)
		}
		return cell.OverSOC(soc, y)
	}
	c := plain()
	c.OCV = over(func(s float64) float64 { return 3.42 + 0.74*s - 0.42*math.Exp(-22*s) })
	c.R0 = over(func(s float64) float64 { return 0.020 + 0.012*math.Exp(-8*s) })
	c.Branches[0].Ohm = over(func(s float64) float64 { return 0.012 + 0.010*math.Exp(-6*s) })
	c.Branches[1].Ohm = over(func(s float64) float64 { return 0.015 + 0.012*math.Exp(-5*s) })
	l := leg(duty.Trace, nan)
	for k := range 3601 {
		l.TimeS, l.TraceA = append(l.TimeS, float64(k)), append(l.TraceA, 2.5+6*math.Sin(float64(k*k%977)))
	}
	s := setup(b, c, 1, l)
	s.SOCStart = 0.95
	var p plant.Plant
	out := plant.MakeTruth(256)
	samples := 0
	b.ReportAllocs()
	for b.Loop() {
		if err := p.Reset(s); err != nil {
			b.Fatal(err)
		}
		for {
			n := p.Next(&out)
			samples += n
			if n < 256 {
				break
			}
		}
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(samples), "ns/sample")
}

package cell

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// The voltage of the SOC that is found is the one that was asked for, at any
// temperature, and no higher SOC has it.
func TestSOCAtOCVInvertsTheCurve(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(2, 8).Draw(t, "points")
		soc, volts := make([]float64, n), make([]float64, n)
		at, u := rapid.Float64Range(0, 0.1).Draw(t, "first"), 2.5
		for i := range soc {
			soc[i], volts[i] = at, u
			at += rapid.Float64Range(0.01, (1-at)/float64(n-i)).Draw(t, "step")
			u += rapid.Float64Range(0.01, 0.3).Draw(t, "rise")
		}
		slope := Constant(rapid.Float64Range(0, 1e-4).Draw(t, "slope"))
		c := &Cell{Name: "any", CapacityAh: 2, CoulombicEfficiency: 1, VoltageMinV: 2, VoltageMaxV: 9, TemperatureRefC: 25,
			Interpolation: rapid.SampledFrom([]Interpolation{PCHIP, Linear}).Draw(t, "interpolation"),
			OCV:           OverSOC(soc, volts), OCVSlopeVPerK: &slope, R0: Constant(0.01)}
		m, err := Compile(c, AsBuilt(1))
		if err != nil {
			t.Fatal(err)
		}
		var v View
		v.Bind(m, rapid.Float64Range(-20, 60).Draw(t, "temperature"))
		want := rapid.Float64Range(0, 1).Draw(t, "soc")
		asked, _ := v.OCV(want)
		got, reached := v.SOCAtOCV(asked)
		found, _ := v.OCV(got)
		if !reached || math.Abs(found-asked) > 1e-12 || got < want-1e-6 { // the highest, where an edge is flat
			t.Errorf("SOC %g has %g V; asked for that it gives %g (reached %v), which has %g V", want, asked, got, reached, found)
		}
	})
}

// By hand: a straight line from 3 V to 4 V.
func TestSOCAtOCVAtTheEnds(t *testing.T) {
	c := &Cell{Name: "line", CapacityAh: 1, CoulombicEfficiency: 1, VoltageMinV: 2, VoltageMaxV: 5, TemperatureRefC: 25,
		Interpolation: Linear, OCV: OverSOC([]float64{0, 1}, []float64{3, 4}), R0: Constant(0)}
	m, err := Compile(c, AsBuilt(1))
	if err != nil {
		t.Fatal(err)
	}
	for _, x := range []struct {
		voltageV, soc float64
		reached       bool
	}{{3, 0, true}, {4, 1, true}, {3.25, 0.25, true}, {2.9, 0, false}, {4.2, 1, false}} {
		var v View
		v.Bind(m, 25)
		if soc, reached := v.SOCAtOCV(x.voltageV); math.Abs(soc-x.soc) > 1e-12 || reached != x.reached {
			t.Errorf("%g V: found SOC %g, reached %v; by hand %g, %v", x.voltageV, soc, reached, x.soc, x.reached)
		}
	}
}

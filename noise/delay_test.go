package noise

import (
	"fmt"
	"math"
	"testing"

	"soctrial/plant"
	"soctrial/plant/record"
)

// at walks to the value at time t of what runs straight from x at each sample
// to y at the next; just before a sample where before is true, else from it on.
func at(x, y []float64, periodS, t float64, before bool) float64 {
	p := t / periodS
	if r := math.Round(p); math.Abs(p-r) < 1e-9 {
		p = r
	}
	j := int(math.Floor(p))
	switch {
	case p <= 0:
		return x[0]
	case p == float64(j) && before:
		return y[j]
	case p == float64(j):
		return x[j]
	}
	return x[j]*(float64(j+1)-p) + y[j+1]*(p-float64(j))
}

// chargeAt sums the charge moved from 0 to t by the interval means.
func chargeAt(truth *plant.Truth, t float64) float64 {
	if t <= 0 {
		return truth.CurrentA[0] * t
	}
	q := 0.0
	for k := 1; k < truth.Len(); k++ {
		from, to := truth.TimeS[k-1], truth.TimeS[k]
		q += truth.CurrentMeanA[k] * (math.Min(t, to) - math.Min(t, from))
	}
	return q
}

// Delays of all sizes, longer than the blocks and not a multiple of the
// period, against the truth at t - delay computed directly.
func TestDelay(t *testing.T) {
	for _, periodS := range []float64{1, 0.1, 2.5} {
		truth := unsteadyTruth(300, periodS)
		for _, samples := range []float64{1e-6, 0.3, 1, 1.75, 2, 3, 7, 40.5, 63.999, 299, 299.5, 1000} {
			delayS := samples * periodS
			for _, kind := range []record.CurrentReading{record.Instant, record.IntervalMean} {
				mean := kind == record.IntervalMean
				ch := Channel{DelayS: delayS}
				s := Sensors{SamplePeriodS: periodS, Current: ch, Voltage: ch, Temperature: ch, CurrentReading: kind}
				got := record.MakeReadings(truth.Len())
				got.PeriodS, got.CurrentReading = periodS, kind
				chain := newChain(t, s, 1)
				for from := 0; from < 300; from += 16 { // blocks far shorter than the longest delays
					to := min(from+16, 300)
					in, out := truth.Slice(from, to), got.Slice(from, to)
					chain.Read(&in, &out)
				}
				want := record.MakeReadings(truth.Len())
				for k, now := range truth.TimeS {
					then := now - delayS
					want.VoltageV[k] = at(truth.VoltageV, truth.VoltageBeforeV, periodS, then, mean)
					want.TemperatureC[k] = at(truth.TemperatureC, truth.TemperatureC, periodS, then, false)
					switch {
					case !mean:
						j := math.Max(0, math.Floor(then/periodS+1e-9))
						want.CurrentA[k] = truth.CurrentA[int(j)]
					case k == 0:
						want.CurrentA[k] = truth.CurrentA[0]
					default:
						want.CurrentA[k] = (chargeAt(&truth, then) - chargeAt(&truth, then-periodS)) / periodS
					}
				}
				what := fmt.Sprintf("%s, period %v s, delay of %v samples: ", kind, periodS, samples)
				checkClose(t, what+"current", got.CurrentA, want.CurrentA, 1e-9)
				checkClose(t, what+"voltage", got.VoltageV, want.VoltageV, 1e-9)
				checkClose(t, what+"temperature", got.TemperatureC, want.TemperatureC, 1e-9)

				c, err := NewChain(Setup{Sensors: s, TemperatureRefC: temperatureRefC, Samples: 300})
				if err != nil {
					t.Fatal(err)
				}
				known := record.MakeReadings(truth.Len())
				c.Read(&truth, &known)
				if !sameReadings(&known, &got) {
					t.Errorf("%stelling the run's length changed a number", what)
				}
			}
		}
	}
}

// offset_per_k goes by the temperature now, whatever the delays.
func TestDelayLeavesTheTemperatureOfTheSensor(t *testing.T) {
	truth := unsteadyTruth(40, 1)
	for k := range truth.VoltageV {
		truth.VoltageV[k], truth.VoltageBeforeV[k] = 0, 0
	}
	got := readAll(t, Sensors{SamplePeriodS: 1, Voltage: Channel{DelayS: 5, OffsetPerK: 0.5}, Temperature: Channel{DelayS: 7}}, 1, &truth)
	for k, v := range got.VoltageV {
		if want := 0.5 * (truth.TemperatureC[k] - temperatureRefC); math.Abs(v-want) > 1e-12 {
			t.Fatalf("sample %d reads %v, want %v", k, v, want)
		}
	}
}

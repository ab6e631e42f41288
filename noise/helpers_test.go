package noise

import (
	"math"
	"math/rand/v2"
	"testing"

	"soctrial/plant"
	"soctrial/plant/record"
)

// unsteadyTruth is a block from t = 0 whose columns all differ, with jumps at
// every sample.
func unsteadyTruth(n int, periodS float64) plant.Truth {
	rng := rand.New(rand.NewPCG(1, 2))
	t := plant.MakeTruth(n)
	t.PeriodS = periodS
	for k := range n {
		t.TimeS[k] = float64(k) * periodS
		t.SOC[k] = 0.5
		t.CurrentA[k] = 20 * rng.NormFloat64()
		t.VoltageV[k] = 3.7 + 0.1*rng.NormFloat64()
		t.VoltageBeforeV[k] = 3.7 + 0.1*rng.NormFloat64()
		t.CurrentMeanA[k] = 20 * rng.NormFloat64()
		t.TemperatureC[k] = 25 + 10*rng.NormFloat64()
	}
	if n > 0 {
		t.CurrentMeanA[0], t.VoltageBeforeV[0] = t.CurrentA[0], t.VoltageV[0]
	}
	copy(t.CurrentBeforeA, t.CurrentMeanA)
	return t
}

const temperatureRefC = 20.0

func newChain(t testing.TB, s Sensors, seed uint64) *Chain {
	t.Helper()
	c, err := NewChain(Setup{Sensors: s, Seed: seed, TemperatureRefC: temperatureRefC})
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// readAll reads the whole truth as one block.
func readAll(t testing.TB, s Sensors, seed uint64, truth *plant.Truth) record.Readings {
	t.Helper()
	out := record.MakeReadings(truth.Len())
	newChain(t, s, seed).Read(truth, &out)
	return out
}

// readOne reads a truth of nothing but zeros at T_ref through the voltage
// channel ch: what is left is what the channel adds.
func readOne(t testing.TB, ch Channel, seed uint64, n int, periodS float64) []float64 {
	t.Helper()
	truth := plant.MakeTruth(n)
	for k := range truth.TemperatureC {
		truth.TemperatureC[k] = temperatureRefC
	}
	return readAll(t, Sensors{SamplePeriodS: periodS, Voltage: ch}, seed, &truth).VoltageV
}

// same compares bit for bit, so that NaN is NaN.
func same(a, b []float64) bool {
	if len(a) != len(b) {
		return false
	}
	for k := range a {
		if math.Float64bits(a[k]) != math.Float64bits(b[k]) {
			return false
		}
	}
	return true
}

func sameReadings(a, b *record.Readings) bool {
	return same(a.TimeS, b.TimeS) && same(a.CurrentA, b.CurrentA) && same(a.VoltageV, b.VoltageV) &&
		same(a.TemperatureC, b.TemperatureC) && a.PeriodS == b.PeriodS && a.CurrentReading == b.CurrentReading
}

// close compares within tol, NaN being close to NaN alone.
func checkClose(t *testing.T, what string, got, want []float64, tol float64) {
	t.Helper()
	if len(got) != len(want) {
		t.Fatalf("%s: %d values, want %d", what, len(got), len(want))
	}
	for k := range got {
		if math.IsNaN(got[k]) != math.IsNaN(want[k]) || math.Abs(got[k]-want[k]) > tol {
			t.Fatalf("%s: sample %d reads %v, want %v", what, k, got[k], want[k])
		}
	}
}

// everyFault is a channel with all faults on.
var everyFault = Channel{Offset: 0.013, GainError: -0.02, Noise: 0.05, WalkPerSqrtS: 0.02, OffsetPerK: 0.001, Quantum: 0.01,
	Range: 30, DelayS: 1.3, DropoutShare: 0.1, DropoutS: 4, StuckShare: 0.15, StuckS: 6, Every: 2}

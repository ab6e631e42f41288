package noise

import (
	"testing"

	"soctrial/plant"
	"soctrial/plant/record"
)

func BenchmarkReadPlain(b *testing.B) {
	benchmarkRead(b, Sensors{SamplePeriodS: 1,
		Current: Channel{GainError: 0.001, Offset: 0.01, Noise: 0.02, Quantum: 0.01},
		Voltage: Channel{GainError: 0.001, Offset: 0.001, Noise: 0.002, Quantum: 0.0003}})
}

func BenchmarkReadEverything(b *testing.B) {
	ch := Channel{GainError: 0.001, Offset: 0.01, Noise: 0.02, Quantum: 0.01, WalkPerSqrtS: 1e-4, OffsetPerK: 1e-3,
		Range: 60, DelayS: 2.5, DropoutShare: 0.01, DropoutS: 5, StuckShare: 0.01, StuckS: 5, Every: 2}
	benchmarkRead(b, Sensors{SamplePeriodS: 1, Current: ch, Voltage: ch, Temperature: ch})
}

func benchmarkRead(b *testing.B, s Sensors) {
	c, err := NewChain(Setup{Sensors: s, Seed: 1, TemperatureRefC: 25})
	if err != nil {
		b.Fatal(err)
	}
	truth, out := plant.MakeTruth(256), record.MakeReadings(256)
	for k := range truth.TimeS {
		truth.CurrentA[k], truth.VoltageV[k], truth.VoltageBeforeV[k] = float64(k%17), 3.7-0.001*float64(k), 3.7
	}
	b.ReportAllocs()
	for b.Loop() {
		c.Read(&truth, &out)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*256), "ns/sample")
}

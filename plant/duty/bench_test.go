package duty_test

import (
	"testing"

	"soctrial/plant/duty"
)

// BenchmarkNext steps through a trace of one value a second.
func BenchmarkNext(b *testing.B) {
	l := leg(duty.Trace)
	for k := range 3600 {
		l.TimeS, l.TraceA = append(l.TimeS, float64(k)), append(l.TraceA, float64(k%7))
	}
	l.Repeat = 1 << 40
	p, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{l}}, 5)
	if err != nil {
		b.Fatal(err)
	}
	b.ReportAllocs()
	c, sum := p.Start(), 0.0
	for b.Loop() {
		sum += c.Demand().Value
		c.Next()
	}
	if sum == 0 {
		b.Error("nothing was asked")
	}
}

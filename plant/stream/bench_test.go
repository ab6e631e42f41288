package stream

import "testing"

func BenchmarkNormals(b *testing.B) {
	s := New(1, "bench")
	dst := make([]float64, 256)
	for b.Loop() {
		s.Normals(dst)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(dst)), "ns/normal")
}

func BenchmarkFloat64s(b *testing.B) {
	s := New(1, "bench")
	dst := make([]float64, 256)
	for b.Loop() {
		s.Float64s(dst)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(dst)), "ns/uniform")
}

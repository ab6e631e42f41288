package store

import (
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// someTrace makes n samples from first on, with gaps, as the runner would.
func someTrace(first, n int, salt float64) *TraceColumns {
	c := &TraceColumns{}
	for k, col := range traceColumns() {
		x := make([]float64, n)
		for i := range x {
			x[i] = salt + float64(k) + 1/float64(first+i+1)
			if k > 0 && (first+i+k)%7 == 0 {
				x[i] = math.NaN()
			}
		}
		*col.at(c) = x
	}
	return c
}

func TestTracesRoundTrip(t *testing.T) {
	path := filepath.Join(t.TempDir(), "traces.parquet")
	w, err := NewTraceWriter(path, false, TraceMeta{SetSHA256: hashOf(nil), Version: "0.1"})
	if err != nil {
		t.Fatal(err)
	}
	// Two estimators in turns, block by block, beyond one row group.
	const block, blocks = 256, 140
	for b := range blocks {
		for e, name := range []string{"ekf", "coulomb"} {
			if err := w.Append(7, name, int64(b*block), someTrace(b*block, block, float64(e))); err != nil {
				t.Fatal(err)
			}
		}
	}
	// A replay of three samples knows no truth, and its estimator was lost after one.
	if err := w.Append(0, "ekf", 0, &TraceColumns{TimeS: []float64{0, 1, 2.5}, CurrentA: []float64{1, 2, 3}, SOC: []float64{0.5}}); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(path); err == nil {
		t.Fatal("the file stands before Close")
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	held, err := ListTraces(path)
	if err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff([]TraceKey{{7, "ekf", block * blocks}, {7, "coulomb", block * blocks}, {0, "ekf", 3}}, held); d != "" {
		t.Fatal(d)
	}
	for e, name := range []string{"ekf", "coulomb"} {
		got, err := ReadTraces(path, 7, name)
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(*someTrace(0, block*blocks, float64(e)), got.TraceColumns, cmpopts.EquateNaNs()); d != "" {
			t.Fatal(d)
		}
		for i, s := range got.Sample {
			if s != int64(i) {
				t.Fatalf("sample %d stands at %d", s, i)
			}
		}
	}
	got, err := ReadTraces(path, 0, "ekf")
	if err != nil {
		t.Fatal(err)
	}
	nan := math.NaN()
	if d := cmp.Diff([][]float64{{0, 1, 2.5}, {1, 2, 3}, {0.5, nan, nan}, {nan, nan, nan}},
		[][]float64{got.TimeS, got.CurrentA, got.SOC, got.SOCTrue}, cmpopts.EquateNaNs()); d != "" {
		t.Fatal(d)
	}
}

// Thin traces round to 32 bits, but for the time.
func TestThinTraces(t *testing.T) {
	path := filepath.Join(t.TempDir(), "traces.parquet")
	w, err := NewTraceWriter(path, true, TraceMeta{})
	if err != nil {
		t.Fatal(err)
	}
	want := someTrace(100, 50, 1e6)
	if err := w.Append(1, "ekf", 100, want); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	got, err := ReadTraces(path, 1, "ekf")
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range traceColumns()[1:] {
		for i, x := range *c.at(want) {
			(*c.at(want))[i] = float64(float32(x))
		}
	}
	if d := cmp.Diff(*want, got.TraceColumns, cmpopts.EquateNaNs()); d != "" {
		t.Fatal(d)
	}
}

func TestTracesNotWritten(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "traces.parquet")
	w, err := NewTraceWriter(path, false, TraceMeta{})
	if err != nil {
		t.Fatal(err)
	}
	bad := someTrace(0, 4, 0)
	bad.SOC = make([]float64, 5)
	if err := w.Append(1, "ekf", 0, bad); err == nil {
		t.Fatal("a column longer than time_s was taken")
	}
	if err := w.Close(); err == nil {
		t.Fatal("Close after a failed Append put a file in place")
	}
	w, err = NewTraceWriter(path, false, TraceMeta{})
	if err != nil {
		t.Fatal(err)
	}
	w.Abort()
	w.Abort()
	left, _ := os.ReadDir(dir)
	if len(left) != 0 {
		t.Fatalf("left behind: %v", left)
	}
}

func BenchmarkTraces(b *testing.B) {
	const block = 256
	c := someTrace(0, block, 0)
	w, err := NewTraceWriter(filepath.Join(b.TempDir(), "traces.parquet"), false, TraceMeta{})
	if err != nil {
		b.Fatal(err)
	}
	defer w.Abort()
	b.ReportAllocs()
	for at := int64(0); b.Loop(); at += block {
		if err := w.Append(1, "ekf", at, c); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*block), "ns/row")
}

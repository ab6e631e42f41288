package score

import (
	"math"
	"slices"
	"testing"
)

// Percentiles on paper: of 1, 2, 3, 4 the median is 2.5 and the 95th 3.85.
func TestPercentile(t *testing.T) {
	x := []float64{1, 2, 3, 4}
	for p, want := range map[float64]float64{0: 1, 0.5: 2.5, 0.95: 3.85, 1: 4} {
		if got := Percentile(x, p); math.Abs(got-want) > 1e-15 {
			t.Errorf("%g: %g, want %g", p, got, want)
		}
	}
	if !math.IsNaN(Percentile(nil, 0.5)) || Percentile([]float64{7}, 0.95) != 7 {
		t.Error("percentiles of none or one")
	}
}

func TestSummarise(t *testing.T) {
	rows := rowsOf(0.04, 0.01, 0.03, math.NaN(), 0.02)
	other := rowsOf(0.5, 0.6)
	other[0].Status, other[1].Status = Lost, Failed
	for i := range other {
		other[i].Estimator = "coulomb"
	}
	got := Summarise(append(other[:1:1], append(rows, other[1])...), []string{"settled_max_abs", "soc_bias"})
	if len(got) != 2 || got[0].Estimator != "coulomb" || got[1].Estimator != "ekf" {
		t.Fatalf("got %+v", got)
	}
	if c := got[0]; c.OK != 0 || c.Lost != 1 || c.Failed != 1 || c.Spreads[0].N != 0 || !math.IsNaN(c.Spreads[0].Worst) {
		t.Errorf("coulomb: %+v", c)
	}
	for _, metric := range []string{"settled_max_abs", "soc_bias"} { // a bias counts by its size
		s, asked := got[1].Spread(metric)
		if !asked || got[1].OK != 5 || s.N != 4 || s.Null != 1 || math.Abs(s.Median-0.025) > 1e-15 ||
			math.Abs(s.P95-0.0385) > 1e-15 || s.Worst != 0.04 {
			t.Errorf("%s: %+v", metric, s)
		}
	}
}

func TestWorst(t *testing.T) {
	rows := rowsOf(0.04, 0.01, 0.05, math.NaN(), 0.04, 0.03, 0.9)
	rows[5].Status = Lost
	rows[6].Status = Failed
	if got := Worst(rows, "ekf", "settled_max_abs", 4); !slices.Equal(got, []int{5, 2, 0, 4}) {
		t.Errorf("worst are rows %v", got)
	}
	if got := Worst(rows, "coulomb", "settled_max_abs", 4); len(got) != 0 {
		t.Errorf("rows %v of no such estimator", got)
	}
}

func TestSpecialOf(t *testing.T) {
	n := 64
	offset, constant, level, sparse, group := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n), make([]string, n)
	for i := range n {
		offset[i], constant[i], level[i], sparse[i], group[i] = float64(i), 25, []float64{1, 0.9, 0.8, 0.7}[i%4], math.NaN(), "fresh"
	}
	group[63], sparse[1] = "aged", 3
	columns := []Column{{Name: "level", Numbers: level}, {Name: "offset", Numbers: offset}, {Name: "constant", Numbers: constant},
		{Name: "sparse", Numbers: sparse}, {Name: "group", Texts: group}}
	var got []string
	for _, s := range SpecialOf(columns, 63, 5) {
		got = append(got, s.String())
	}
	want := []string{"offset 63 (highest 1.6 %)", "group aged (1.6 % have it)", "level 0.7 (lowest 25 %)"}
	if !slices.Equal(got, want) {
		t.Errorf("got %q, want %q", got, want)
	}
	if got := SpecialOf(columns, 33, 5); len(got) != 1 || got[0].Column != "offset" || got[0].Side != "highest" {
		t.Errorf("scenario 33: %v", got)
	}
	if got := SpecialOf(columns, 63, 1); len(got) != 1 {
		t.Errorf("one was asked for: %v", got)
	}
}

package stream

import (
	"math"
	"slices"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
	"pgregory.net/rapid"
)

// The strips must fill the curve exactly: the topmost ends at the curve's top,
// and each has the area of the bottom one. Marsaglia & Tsang (2000) print that
// area as 0.00492867323399 (from memory; their last digit is not quite right,
// as the closing of the strips to 1e-15 below shows).
func TestStripsFillTheCurve(t *testing.T) {
	edge := func(i int) float64 { return strips[i].width * scale }
	area := edge(0) * heights[layers-1]
	if math.Abs(area-0.00492867323399) > 2e-14 {
		t.Errorf("area of the bottom strip: %.16f", area)
	}
	for i := 1; i < layers; i++ {
		if got := edge(i) * (heights[i-1] - heights[i]); math.Abs(got-area) > 1e-15 {
			t.Errorf("strip %d has area %v, want %v", i, got, area)
		}
		if i > 1 && edge(i) <= edge(i-1) {
			t.Errorf("strip %d is not wider than the one above", i)
		}
	}
}

func normals(seed uint64, n int) []float64 {
	s, x := New(seed, "normal"), make([]float64, n)
	s.Normals(x)
	return x
}

// Moments of a standard normal: E x^p = (p-1)!! for even p and 0 for odd; the
// variance of the mean of x^p is (E x^2p - (E x^p)²)/n.
func TestMoments(t *testing.T) {
	const n = 1 << 22
	x := normals(11, n)
	even := func(p int) float64 {
		m := 1.0
		for q := p - 1; q > 1; q -= 2 {
			m *= float64(q)
		}
		return m
	}
	for p := 1; p <= 8; p++ {
		want := 0.0
		if p%2 == 0 {
			want = even(p)
		}
		sum := 0.0
		for _, v := range x {
			sum += math.Pow(v, float64(p))
		}
		if err := math.Sqrt((even(2*p) - want*want) / n); math.Abs(sum/n-want) > 4.5*err {
			t.Errorf("moment %d: %v, want %v ± %v", p, sum/n, want, err)
		}
	}
}

// Kolmogorov-Smirnov against another implementation of the normal
// distribution: √n·D is beyond 2.47 with a chance of 2·exp(-2·2.47²) = 1e-5.
func TestDistribution(t *testing.T) {
	const n = 1 << 20
	x := normals(12, n)
	slices.Sort(x)
	d := 0.0
	for k, v := range x {
		p := distuv.UnitNormal.CDF(v)
		d = max(d, p-float64(k)/n, float64(k+1)/n-p)
	}
	if d*math.Sqrt(n) > 2.47 {
		t.Errorf("Kolmogorov-Smirnov √n·D = %v", d*math.Sqrt(n))
	}
}

// The far tails, where only the tail method draws, count as they should.
func TestTails(t *testing.T) {
	const n = 1 << 24
	limits := []float64{1, 2, 3, 3.5, tailStart, 3.8, 4, 4.5}
	over, under := make([]float64, len(limits)), make([]float64, len(limits))
	s, block := New(13, "tails"), make([]float64, 1<<12)
	for range n / len(block) {
		s.Normals(block)
		for _, v := range block {
			for k, l := range limits {
				if v > l {
					over[k]++
				} else if v < -l {
					under[k]++
				}
			}
		}
	}
	for k, l := range limits {
		want := n * distuv.UnitNormal.Survival(l)
		for side, got := range map[string]float64{"above": over[k], "below": under[k]} {
			if math.Abs(got-want) > 4.5*math.Sqrt(want)+1 {
				t.Errorf("%v numbers %s ±%v, want %v ± %v", got, side, l, want, math.Sqrt(want))
			}
		}
	}
}

func TestNeighboursAreIndependent(t *testing.T) {
	const n = 1 << 20
	x := normals(14, n)
	for _, shift := range []int{1, 2, 3, 4, 7, 8} {
		r, r2 := 0.0, 0.0
		for k := shift; k < n; k++ {
			r += x[k] * x[k-shift]
			r2 += (x[k]*x[k] - 1) * (x[k-shift]*x[k-shift] - 1) / 2
		}
		if math.Abs(r/n) > 4.5/math.Sqrt(n) || math.Abs(r2/n) > 4.5/math.Sqrt(n) {
			t.Errorf("shift %d: correlation %v, of squares %v", shift, r/n, r2/n)
		}
	}
}

func TestBlocksMoveNothing(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		seed := rapid.Uint64().Draw(t, "seed")
		one, cut := New(seed, "n"), New(seed, "n")
		for _, n := range rapid.SliceOfN(rapid.IntRange(0, 600), 1, 8).Draw(t, "blocks") {
			dst := make([]float64, n)
			cut.Normals(dst)
			for k, got := range dst {
				if want := one.Normal(); got != want {
					t.Fatalf("number %d of a block of %d: %v, one at a time %v", k, n, got, want)
				}
			}
		}
		if one != cut {
			t.Fatal("the streams stand at different places")
		}
	})
}

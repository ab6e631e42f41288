package scenario

import (
	"math"
	"math/bits"
	"slices"
	"testing"
)

// The first points of three dimensions as printed in Joe & Kuo (2008), "Notes on
// generating Sobol sequences" (from memory); without a shift ours lie half a
// unit of the last place above them.
func TestSobolFirstPoints(t *testing.T) {
	want := [][3]float64{{0, 0, 0}, {0.5, 0.5, 0.5}, {0.75, 0.25, 0.25}, {0.25, 0.75, 0.75}, {0.375, 0.375, 0.625},
		{0.875, 0.875, 0.125}, {0.625, 0.125, 0.875}, {0.125, 0.625, 0.375}, {0.1875, 0.3125, 0.9375}, {0.6875, 0.8125, 0.4375}}
	s := newSobol(make([]uint64, 3))
	at := make([]float64, 3)
	for i, w := range want {
		s.next(at)
		for d := range at {
			if at[d]-w[d] != 0x1p-53 {
				t.Errorf("point %d, dimension %d is %v, want %v", i, d, at[d], w[d])
			}
		}
	}
}

// The table's entries against what they must be: primitive polynomials, each
// once; odd direction numbers below 2^i; and Sobol's Property A (1976), which Joe
// & Kuo (2003, ACM TOMS 29, 49-57) ask of theirs: the first 2^d points of d
// dimensions lie one in each of the 2^d half cubes, that is, the first bits of
// the direction numbers are a regular matrix modulo 2.
func TestSobolTable(t *testing.T) {
	seen := map[uint64]bool{}
	for i, p := range primitives() {
		poly := 1<<p.degree | p.inner<<1 | 1
		if seen[poly] || !isPrimitive(poly, p.degree) {
			t.Errorf("dimension %d: polynomial %b is not primitive, or stands twice", i+2, poly)
		}
		seen[poly] = true
		if len(p.first) != p.degree {
			t.Errorf("dimension %d: %d numbers for degree %d", i+2, len(p.first), p.degree)
		}
		for k, m := range p.first {
			if m%2 == 0 || m >= 1<<(k+1) {
				t.Errorf("dimension %d: m_%d = %d", i+2, k+1, m)
			}
		}
	}
	if len(primitives())+1 != sobolDimensions {
		t.Errorf("%d dimensions in the table", len(primitives())+1)
	}
	for d := 1; d <= sobolBits; d++ { // more dimensions need more bits than are drawn
		rows := make([]uint64, d)
		for i := range rows {
			m := directionNumbers(i)
			for k := range d {
				rows[i] |= (m[k] >> k & 1) << k
			}
		}
		if rankModulo2(rows) != d {
			t.Fatalf("the first %d dimensions lack Property A", d)
		}
	}
}

// isPrimitive tells whether x generates every element of the field: x^(2^n-1) is
// 1 and no smaller divisor of 2^n-1 does it.
func isPrimitive(poly uint64, degree int) bool {
	order := uint64(1)<<degree - 1
	power := func(e uint64) uint64 {
		x := uint64(1)
		for range e {
			if x <<= 1; x>>degree == 1 {
				x ^= poly
			}
		}
		return x
	}
	if power(order) != 1 {
		return false
	}
	for e := uint64(1); e < order; e++ {
		if order%e == 0 && power(e) == 1 {
			return false
		}
	}
	return true
}

func rankModulo2(rows []uint64) int {
	rows = slices.Clone(rows)
	rank := 0
	for i := range rows {
		if rows[i] == 0 {
			continue
		}
		rank++
		pivot := uint64(1) << bits.TrailingZeros64(rows[i])
		for j := i + 1; j < len(rows); j++ {
			if rows[j]&pivot != 0 {
				rows[j] ^= rows[i]
			}
		}
	}
	return rank
}

// Sobol points fill the cube more evenly than independent ones: Warnock's formula
// (1972) for the L2 star discrepancy, whose square has the expectation
// (2^-d - 3^-d)/n for independent points.
func TestSobolDiscrepancy(t *testing.T) {
	const n, d = 256, 5
	for seed := range uint64(5) {
		p := &Plan{Draw: Sobol, Seed: seed, Vary: make([]Vary, d)}
		next := p.walk(n, 0)
		points := make([][]float64, n)
		for i := range points {
			points[i] = make([]float64, d)
			next(points[i])
		}
		square := math.Pow(3, -d)
		for _, x := range points {
			one := 1.0
			for _, u := range x {
				one *= (1 - u*u) / 2
			}
			square -= 2 * one / n
			for _, y := range points {
				both := 1.0
				for k := range x {
					both *= 1 - max(x[k], y[k])
				}
				square += both / (n * n)
			}
		}
		if independent := (math.Pow(2, -d) - math.Pow(3, -d)) / n; square > independent/5 {
			t.Errorf("seed %d: squared discrepancy %g, independent points have %g", seed, square, independent)
		}
	}
}

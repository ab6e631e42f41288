package stream

import (
	"fmt"
	"math"
	"testing"

	"pgregory.net/rapid"
)

// The vectors of the reference implementations, from memory: splitmix64 from
// seed 1234567, and xoshiro256++ from the state {1, 2, 3, 4}.
func TestKnownVectors(t *testing.T) {
	x := uint64(1234567)
	for k, want := range []uint64{6457827717110365317, 3203168211198807973, 9817491932198370423, 4593380528125082431, 16408922859458223821} {
		x += golden
		if got := mix(x); got != want {
			t.Errorf("splitmix64 output %d: %d, want %d", k, got, want)
		}
	}
	s := Source{1, 2, 3, 4}
	for k, want := range []uint64{41943041, 58720359, 3588806011781223, 3591011842654386, 9228616714210784205, 9973669472204895162} {
		if got := s.Uint64(); got != want {
			t.Errorf("xoshiro256++ output %d: %d, want %d", k, got, want)
		}
	}
	// FNV-1a of 64 bits: the offset basis, and "a" and "foobar" of the authors'
	// test vectors, from memory.
	for name, want := range map[string]uint64{"": 0xcbf29ce484222325, "a": 0xaf63dc4c8601ec8c, "foobar": 0x85944171f73967e8} {
		if got := hash(name); got != want {
			t.Errorf("FNV-1a of %q: %x, want %x", name, got, want)
		}
	}
}

// Our own numbers, so that a change to how streams are seeded, which would
// change every result anybody stored, cannot pass unnoticed.
func TestStreamsStayThemselves(t *testing.T) {
	s := New(7, "voltage.noise")
	got := fmt.Sprint(s.Uint64(), s.Uint64(), Derive(7, "draw", 3))
	if want := "9833629997073251164 13524271372099232182 16139258785673982575"; got != want {
		t.Errorf("streams moved: %s, want %s", got, want)
	}
}

func TestFloat64IsUniform(t *testing.T) {
	const n = 1 << 20
	s := New(3, "uniform")
	sum, bins := 0.0, [64]float64{}
	for range n {
		u := s.Float64()
		if u < 0 || u >= 1 {
			t.Fatalf("%v is outside [0, 1)", u)
		}
		sum += u
		bins[int(u*64)]++
	}
	if mean := sum / n; math.Abs(mean-0.5) > 5/math.Sqrt(12*n) {
		t.Errorf("mean %v is more than 5 standard errors from 1/2", mean)
	}
	chi2 := 0.0
	for _, b := range bins {
		chi2 += (b - n/64) * (b - n/64) / (n / 64)
	}
	// χ² with 63 degrees of freedom: 27.5 and 117 cut off 1e-5 each (normal
	// approximation of Wilson & Hilferty).
	if chi2 < 27.5 || chi2 > 117 {
		t.Errorf("χ² of 64 equal bins: %v", chi2)
	}
}

func TestFloat64sAreFloat64(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		seed := rapid.Uint64().Draw(t, "seed")
		one, cut := New(seed, "u"), New(seed, "u")
		for _, n := range rapid.SliceOfN(rapid.IntRange(0, 40), 1, 8).Draw(t, "blocks") {
			dst := make([]float64, n)
			cut.Float64s(dst)
			for k, got := range dst {
				if want := one.Float64(); got != want {
					t.Fatalf("number %d of a block of %d: %v, one at a time %v", k, n, got, want)
				}
			}
		}
		if one != cut {
			t.Fatal("the streams stand at different places")
		}
	})
}

// Streams of other names and of other seeds, neighbours above all, have nothing
// to do with one another: |r| of n pairs is below 4.5/√n but for a chance of
// 7e-6 each.
func TestStreamsAreUncorrelated(t *testing.T) {
	const n = 1 << 16
	var streams [][]float64
	for _, name := range []string{"current.noise", "current.walk", "voltage.noise", "temperature.noise", "a", "b", ""} {
		for _, seed := range []uint64{0, 1, 2, 1 << 63, math.MaxUint64} {
			s, x := New(seed, name), make([]float64, n)
			s.Normals(x)
			streams = append(streams, x)
		}
	}
	for a := range streams {
		for b := range a {
			for _, shift := range []int{0, 1} {
				r := 0.0
				for k := shift; k < n; k++ {
					r += streams[a][k] * streams[b][k-shift]
				}
				if r /= n; math.Abs(r) > 4.5/math.Sqrt(n) {
					t.Errorf("streams %d and %d shifted by %d: correlation %v", a, b, shift, r)
				}
			}
		}
	}
}

func TestDeriveTellsChildrenApart(t *testing.T) {
	seen := map[uint64]string{}
	for _, name := range []string{"draw", "scenario", ""} {
		for _, seed := range []uint64{0, 1, 2, math.MaxUint64} {
			for index := range uint64(20000) {
				d, who := Derive(seed, name, index), fmt.Sprint(seed, name, index)
				if other, taken := seen[d]; taken {
					t.Fatalf("%s and %s both have seed %d", who, other, d)
				}
				seen[d] = who
			}
		}
	}
}

func TestNothingIsAllocated(t *testing.T) {
	dst, sum := make([]float64, 100), 0.0
	got := testing.AllocsPerRun(100, func() {
		s := New(5, "voltage.noise")
		s.Normals(dst)
		s.Float64s(dst[:50])
		sum += s.Normal() + s.Float64()
	})
	if got != 0 {
		t.Errorf("%v allocations, want none", got)
	}
}

// Package stream makes random numbers that belong to a name.
//
// Every use of chance in a scenario draws from its own Source, named by the
// scenario's seed and by what it is for ("current.noise", "voltage.dropout").
// So adding, removing or changing one fault moves no other's numbers, and two
// estimators can be shown the very same luck.
//
// A Source is a plain value: copy it to fork it, keep it in a struct, and it
// costs no allocation. The package refuses to choose a seed, reads no clock
// and shares no generator between goroutines.
package stream

import "math/bits"

// Source is a stream of random numbers: xoshiro256++ of Blackman & Vigna
// (2018), "Scrambled linear pseudorandom number generators", period 2²⁵⁶-1.
// The zero value is not a stream; use New. Not safe for concurrent use.
type Source struct{ s0, s1, s2, s3 uint64 }

// golden is the odd step of splitmix64, 2⁶⁴ over the golden ratio.
const golden = 0x9e3779b97f4a7c15

// New returns the stream that belongs to seed and name, at its beginning. Any
// seed will do, 0 and neighbours included.
func New(seed uint64, name string) Source {
	x := root(seed, name)
	next := func() uint64 { x += golden; return mix(x) }
	// mix is one to one and x moves, so the four words are never all zero.
	return Source{next(), next(), next(), next()}
}

// Derive returns a seed for the index-th child of (seed, name), e.g. for the
// scenario of one draw. Children of one (seed, name) all differ.
func Derive(seed uint64, name string, index uint64) uint64 {
	return mix(^root(seed, name) + golden*index)
}

// root joins a seed and a name to one number, where each matters in full.
func root(seed uint64, name string) uint64 {
	return mix(mix(seed+golden) + hash(name))
}

// hash is FNV-1a of 64 bits, by Fowler, Noll and Vo.
func hash(name string) uint64 {
	h := uint64(14695981039346656037)
	for i := 0; i < len(name); i++ {
		h = (h ^ uint64(name[i])) * 1099511628211
	}
	return h
}

// mix is the output function of splitmix64 (Steele, Lea & Flood 2014, "Fast
// splittable pseudorandom number generators"; Stafford's variant 13).
func mix(z uint64) uint64 {
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return z ^ z>>31
}

// Uint64 returns 64 random bits.
func (s *Source) Uint64() uint64 {
	u := bits.RotateLeft64(s.s0+s.s3, 23) + s.s0
	t := s.s1 << 17
	s.s2 ^= s.s0
	s.s3 ^= s.s1
	s.s1 ^= s.s2
	s.s0 ^= s.s3
	s.s2 ^= t
	s.s3 = bits.RotateLeft64(s.s3, 45)
	return u
}

// Float64 returns a number uniform on [0, 1), a multiple of 2⁻⁵³.
func (s *Source) Float64() float64 { return unit(s.Uint64()) }

func unit(u uint64) float64 { return float64(u>>11) * (1.0 / (1 << 53)) }

// Float64s fills dst with what as many calls of Float64 would return.
func (s *Source) Float64s(dst []float64) {
	s0, s1, s2, s3 := s.s0, s.s1, s.s2, s.s3
	for k := range dst {
		dst[k] = unit(bits.RotateLeft64(s0+s3, 23) + s0)
		t := s1 << 17
		s2 ^= s0
		s3 ^= s1
		s1 ^= s2
		s0 ^= s3
		s2 ^= t
		s3 = bits.RotateLeft64(s3, 45)
	}
	s.s0, s.s1, s.s2, s.s3 = s0, s1, s2, s3
}

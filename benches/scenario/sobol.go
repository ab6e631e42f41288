package scenario

import "math/bits"

// sobolDimensions is how many columns a Sobol draw can vary: more than the
// columns of numbers there are, labels aside.
const sobolDimensions = 64

// sobolBits is the length of the fractions drawn: what a double in (0, 1) keeps
// of them with a half added behind.
const sobolBits = 52

// sobol walks Sobol's sequence in Gray-code order (Antonov & Saleev 1979, USSR
// Comput. Maths. Math. Phys. 19), one point a call of next, with a digital
// shift: every coordinate's bits are exclusive-ored with one random word, which
// keeps the equal shares of every elementary interval and makes each point
// uniform by itself.
type sobol struct {
	direction [][sobolBits]uint64 // by dimension; bit 51 is the first of the fraction
	state     []uint64
	index     uint64
}

// newSobol returns the sequence of len(shift) dimensions, at most
// sobolDimensions, shifted by the low 52 bits of each.
func newSobol(shift []uint64) *sobol {
	s := &sobol{state: make([]uint64, len(shift)), direction: make([][sobolBits]uint64, len(shift))}
	for d := range shift {
		s.state[d] = shift[d] & (1<<sobolBits - 1)
		for k, m := range directionNumbers(d) {
			s.direction[d][k] = m << (sobolBits - 1 - k)
		}
	}
	return s
}

// next writes the next point to out, every coordinate inside (0, 1).
func (s *sobol) next(out []float64) {
	if s.index > 0 {
		c := bits.TrailingZeros64(s.index)
		for d := range s.state {
			s.state[d] ^= s.direction[d][c]
		}
	}
	s.index++
	for d, x := range s.state {
		out[d] = (float64(x) + 0.5) / (1 << sobolBits)
	}
}

// directionNumbers returns m_1, m_2 … of dimension d, counted from 0, by the
// recurrence of Joe & Kuo (2008), "Constructing Sobol sequences with better
// two-dimensional projections", SIAM J. Sci. Comput. 30, 2635-2654.
func directionNumbers(d int) [sobolBits]uint64 {
	var m [sobolBits]uint64
	if d == 0 {
		for k := range m {
			m[k] = 1 // van der Corput's sequence
		}
		return m
	}
	p := primitives()[d-1]
	for k := range m {
		if k < p.degree {
			m[k] = p.first[k]
			continue
		}
		m[k] = m[k-p.degree] ^ m[k-p.degree]<<p.degree
		for j := 1; j < p.degree; j++ {
			if p.inner>>(p.degree-1-j)&1 == 1 {
				m[k] ^= m[k-j] << j
			}
		}
	}
	return m
}

// primitive is a primitive polynomial modulo 2,
// x^degree + a_1 x^(degree-1) + … + a_(degree-1) x + 1, and the first
// direction numbers that go with it.
type primitive struct {
	degree int
	inner  uint64   // a_1 … a_(degree-1), a_1 the highest bit
	first  []uint64 // m_1 … m_degree
}

// primitives are dimensions 2 to 64 of Joe & Kuo's table new-joe-kuo-6, as
// SciPy 1.10.1 carries it.
func primitives() []primitive {
	return []primitive{
		{1, 0, []uint64{1}},
		{2, 1, []uint64{1, 3}},
		{3, 1, []uint64{1, 3, 1}},
		{3, 2, []uint64{1, 1, 1}},
		{4, 1, []uint64{1, 1, 3, 3}},
		{4, 4, []uint64{1, 3, 5, 13}},
		{5, 2, []uint64{1, 1, 5, 5, 17}},
		{5, 4, []uint64{1, 1, 5, 5, 5}},
		{5, 7, []uint64{1, 1, 7, 11, 19}},
		{5, 11, []uint64{1, 1, 5, 1, 1}},
		{5, 13, []uint64{1, 1, 1, 3, 11}},
		{5, 14, []uint64{1, 3, 5, 5, 31}},
		{6, 1, []uint64{1, 3, 3, 9, 7, 49}},
		{6, 13, []uint64{1, 1, 1, 15, 21, 21}},
		{6, 16, []uint64{1, 3, 1, 13, 27, 49}},
		{6, 19, []uint64{1, 1, 1, 15, 7, 5}},
		{6, 22, []uint64{1, 3, 1, 15, 13, 25}},
		{6, 25, []uint64{1, 1, 5, 5, 19, 61}},
		{7, 1, []uint64{1, 3, 7, 11, 23, 15, 103}},
		{7, 4, []uint64{1, 3, 7, 13, 13, 15, 69}},
		{7, 7, []uint64{1, 1, 3, 13, 7, 35, 63}},
		{7, 8, []uint64{1, 3, 5, 9, 1, 25, 53}},
		{7, 14, []uint64{1, 3, 1, 13, 9, 35, 107}},
		{7, 19, []uint64{1, 3, 1, 5, 27, 61, 31}},
		{7, 21, []uint64{1, 1, 5, 11, 19, 41, 61}},
		{7, 28, []uint64{1, 3, 5, 3, 3, 13, 69}},
		{7, 31, []uint64{1, 1, 7, 13, 1, 19, 1}},
		{7, 32, []uint64{1, 3, 7, 5, 13, 19, 59}},
		{7, 37, []uint64{1, 1, 3, 9, 25, 29, 41}},
		{7, 41, []uint64{1, 3, 5, 13, 23, 1, 55}},
		{7, 42, []uint64{1, 3, 7, 3, 13, 59, 17}},
		{7, 50, []uint64{1, 3, 1, 3, 5, 53, 69}},
		{7, 55, []uint64{1, 1, 5, 5, 23, 33, 13}},
		{7, 56, []uint64{1, 1, 7, 7, 1, 61, 123}},
		{7, 59, []uint64{1, 1, 7, 9, 13, 61, 49}},
		{7, 62, []uint64{1, 3, 3, 5, 3, 55, 33}},
		{8, 14, []uint64{1, 3, 1, 15, 31, 13, 49, 245}},
		{8, 21, []uint64{1, 3, 5, 15, 31, 59, 63, 97}},
		{8, 22, []uint64{1, 3, 1, 11, 11, 11, 77, 249}},
		{8, 38, []uint64{1, 3, 1, 11, 27, 43, 71, 9}},
		{8, 47, []uint64{1, 1, 7, 15, 21, 11, 81, 45}},
		{8, 49, []uint64{1, 3, 7, 3, 25, 31, 65, 79}},
		{8, 50, []uint64{1, 3, 1, 1, 19, 11, 3, 205}},
		{8, 52, []uint64{1, 1, 5, 9, 19, 21, 29, 157}},
		{8, 56, []uint64{1, 3, 7, 11, 1, 33, 89, 185}},
		{8, 67, []uint64{1, 3, 3, 3, 15, 9, 79, 71}},
		{8, 70, []uint64{1, 3, 7, 11, 15, 39, 119, 27}},
		{8, 84, []uint64{1, 1, 3, 1, 11, 31, 97, 225}},
		{8, 97, []uint64{1, 1, 1, 3, 23, 43, 57, 177}},
		{8, 103, []uint64{1, 3, 7, 7, 17, 17, 37, 71}},
		{8, 115, []uint64{1, 3, 1, 5, 27, 63, 123, 213}},
		{8, 122, []uint64{1, 1, 3, 5, 11, 43, 53, 133}},
		{9, 8, []uint64{1, 3, 5, 5, 29, 17, 47, 173, 479}},
		{9, 13, []uint64{1, 3, 3, 11, 3, 1, 109, 9, 69}},
		{9, 16, []uint64{1, 1, 1, 5, 17, 39, 23, 5, 343}},
		{9, 22, []uint64{1, 3, 1, 5, 25, 15, 31, 103, 499}},
		{9, 25, []uint64{1, 1, 1, 11, 11, 17, 63, 105, 183}},
		{9, 44, []uint64{1, 1, 5, 11, 9, 29, 97, 231, 363}},
		{9, 47, []uint64{1, 1, 5, 15, 19, 45, 41, 7, 383}},
		{9, 52, []uint64{1, 3, 7, 7, 31, 19, 83, 137, 221}},
		{9, 55, []uint64{1, 1, 1, 3, 23, 15, 111, 223, 83}},
		{9, 59, []uint64{1, 1, 5, 13, 31, 15, 55, 25, 161}},
		{9, 62, []uint64{1, 1, 3, 13, 25, 47, 39, 87, 257}},
	}
}

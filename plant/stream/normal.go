package stream

import (
	"math"
	"math/bits"
)

// layers is how many strips of equal area the ziggurat has. A draw spends its
// lowest 8 bits on the layer and its upper 53 on where it falls in it.
const (
	layers = 256
	scale  = 1 << 52
)

// tailStart is where the unbounded tail begins: r of Marsaglia & Tsang (2000),
// "The ziggurat method for generating random variables", J. Stat. Software
// 5(8), for 256 layers. The recurrence in makeTable closes with it alone.
const tailStart = 3.6541528853610088

// layer is one strip under exp(-x²/2), lying down: layer 0 is the bottom, with
// the tail, and layer 1 the top.
type layer struct {
	inside int64   // a draw smaller than this lies under the curve for sure
	width  float64 // right edge over scale
}

// strips and heights are read only. heights[i] is exp(-x²/2) at the right edge
// of layer i; heights[0] is that at 0.
var (
	strips, heights = makeTable()
)

// makeTable follows the recurrence of Marsaglia & Tsang: every layer holds the
// area v of the bottom one, so the next edge inwards of x is where the curve is
// v/x higher.
func makeTable() (s [layers]layer, f [layers]float64) {
	curve := func(x float64) float64 { return math.Exp(-0.5 * x * x) }
	x := tailStart
	v := x*curve(x) + math.Sqrt(math.Pi/2)*math.Erfc(x/math.Sqrt2)
	bottom := v / curve(x) // width of a box as high as the bottom and as large as it with its tail
	s[0] = layer{inside: int64(x / bottom * scale), width: bottom / scale}
	f[0] = 1
	for i := layers - 1; i >= 1; i-- {
		inner := 0.0
		if i > 1 {
			inner = math.Sqrt(-2 * math.Log(v/x+curve(x)))
		}
		s[i] = layer{inside: int64(inner / x * scale), width: x / scale}
		f[i] = curve(x)
		x = inner
	}
	return s, f
}

// Normal returns a standard normal number by the ziggurat of Marsaglia & Tsang
// (2000) with 64-bit draws; the tail is exact (Marsaglia 1964).
func (s *Source) Normal() float64 {
	u := s.Uint64()
	l := &strips[u%layers]
	j := int64(u) >> 11
	if size(j) < l.inside {
		return float64(j) * l.width
	}
	return s.settle(u)
}

// Normals fills dst with standard normal numbers, the ones that as many calls
// of Normal would return, so that how a run is cut into blocks moves nothing.
func (s *Source) Normals(dst []float64) {
	s0, s1, s2, s3 := s.s0, s.s1, s.s2, s.s3 // in registers
	for k := range dst {
		u := bits.RotateLeft64(s0+s3, 23) + s0
		t := s1 << 17
		s2 ^= s0
		s3 ^= s1
		s1 ^= s2
		s0 ^= s3
		s2 ^= t
		s3 = bits.RotateLeft64(s3, 45)

		l := &strips[u%layers]
		j := int64(u) >> 11
		x := float64(j) * l.width
		if size(j) >= l.inside { // 1.2 % of draws
			s.s0, s.s1, s.s2, s.s3 = s0, s1, s2, s3
			x = s.settle(u)
			s0, s1, s2, s3 = s.s0, s.s1, s.s2, s.s3
		}
		dst[k] = x
	}
	s.s0, s.s1, s.s2, s.s3 = s0, s1, s2, s3
}

// size is |j|.
func size(j int64) int64 {
	sign := j >> 63
	return (j ^ sign) - sign
}

// settle decides a draw that may lie outside the curve, and draws again until
// one lies inside.
func (s *Source) settle(u uint64) float64 {
	for {
		i, j := u%layers, int64(u)>>11
		x := float64(j) * strips[i].width
		switch {
		case size(j) < strips[i].inside:
			return x
		case i == 0:
			return math.Copysign(s.tail(), x)
		case heights[i]+s.Float64()*(heights[i-1]-heights[i]) < math.Exp(-0.5*x*x):
			return x
		}
		u = s.Uint64()
	}
}

// tail returns a normal number beyond tailStart by the method of Marsaglia
// (1964), "Generating a variable from the tail of the normal distribution",
// Technometrics 6(1).
func (s *Source) tail() float64 {
	for {
		x := -math.Log(1-s.Float64()) / tailStart
		y := -math.Log(1 - s.Float64())
		if y+y > x*x {
			return tailStart + x
		}
	}
}

package counting

import (
	"math"

	"soctrial/plant/cell"
)

// invert returns the SOC in [0, 1] nearest to from at which OCV + M·h is
// voltageV, and the slope of OCV + M·h over SOC there. Where the curve does
// not reach the voltage, it is the point of the table that comes nearest.
//
// The curve is a polynomial between the points of its tables, and is taken to
// run one way between two of them, as the interpolations make it.
func invert(v *cell.View, h, voltageV, from float64) (soc, slopeV float64) {
	gap := func(z float64) float64 {
		g := v.Segment(z)
		return g.OCV.At(z-g.Ref) + h*g.HalfGapV.At(z-g.Ref) - voltageV
	}
	best, bestGap := from, math.Abs(gap(from))
	if bestGap > 0 {
		found := math.NaN()
		for _, dir := range []float64{1, -1} {
			z, ok := seek(v, gap, dir, from, &best, &bestGap)
			if ok && !(math.Abs(z-from) >= math.Abs(found-from)) {
				found = z
			}
		}
		if found == found {
			best = found
		}
	}
	g := v.Segment(best)
	t := best - g.Ref
	return best, g.OCV.Slope(t) + h*g.HalfGapV.Slope(t)
}

// seek walks from one way, interval by interval, to the first place where gap
// changes sign, keeping the least gap met in best.
func seek(v *cell.View, gap func(float64) float64, dir, from float64, best, bestGap *float64) (float64, bool) {
	end := 0.0
	if dir > 0 {
		end = 1
	}
	a, ga := from, gap(from)
	for a != end {
		b := v.Segment(a).Hi
		if dir < 0 {
			if b = v.Segment(a).Lo; b == a {
				b = v.Segment(math.Nextafter(a, math.Inf(-1))).Lo
			}
			b = max(b, 0)
		} else {
			b = min(b, 1)
		}
		gb := gap(b)
		if size := math.Abs(gb); size < *bestGap {
			*best, *bestGap = b, size
		}
		if (ga < 0) != (gb < 0) || gb == 0 {
			return bisect(gap, a, b, ga), true
		}
		a, ga = b, gb
	}
	return 0, false
}

// bisect halves [a, b], in either order, down to neighbouring numbers or 60
// times, keeping the side of a where gap has the sign of ga.
func bisect(gap func(float64) float64, a, b, ga float64) float64 {
	for range 60 {
		m := a + (b-a)/2
		if m == a || m == b {
			break
		}
		if gm := gap(m); gm != 0 && (gm < 0) == (ga < 0) {
			a = m
		} else {
			b = m
		}
	}
	return b
}

package cell

import "math"

// SOCAtOCV returns the SOC in [0, 1] whose open-circuit voltage, without
// hysteresis, is voltageV at the view's temperature, and whether there is one;
// of several it is the highest. Where the curve does not reach the voltage, soc
// is the point of [0, 1] that comes nearest among the ends and the points of
// the tables.
//
// Between two points of its tables the curve is taken to run one way, as the
// interpolations make it.
func (v *View) SOCAtOCV(voltageV float64) (soc float64, reached bool) {
	gap := func(z float64) float64 {
		ocv, _ := v.OCV(z)
		return ocv - voltageV
	}
	high, gHigh := 1.0, gap(1)
	soc, nearest := high, math.Abs(gHigh)
	for high > 0 {
		low := v.Segment(math.Nextafter(high, math.Inf(-1))).Lo
		if !(low > 0) { // the lowest interval begins far below
			low = 0
		}
		gLow := gap(low)
		if size := math.Abs(gLow); size < nearest {
			soc, nearest = low, size
		}
		if gHigh == 0 {
			return high, true
		}
		if (gLow < 0) != (gHigh < 0) || gLow == 0 {
			return bisect(gap, low, high, gLow), true
		}
		high, gHigh = low, gLow
	}
	return soc, nearest == 0
}

// bisect narrows [low, high], where gap changes sign, down to neighbours.
func bisect(gap func(float64) float64, low, high, gLow float64) float64 {
	if gLow == 0 {
		return low
	}
	for {
		mid := low + (high-low)/2
		if mid <= low || mid >= high {
			return mid
		}
		if g := gap(mid); g == 0 {
			return mid
		} else if (g < 0) == (gLow < 0) {
			low = mid
		} else {
			high = mid
		}
	}
}

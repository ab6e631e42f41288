package picture

import "math"

// axis is one direction of a panel. Its values are in the unit it names.
type axis struct {
	name, unit string
	log        bool
	lo, hi     float64 // set by fit
	fixed      bool    // lo and hi are given
	floor      float64 // log: nothing is shown below; 0: no floor
}

func (a *axis) label() string {
	if a.unit == "" {
		return a.name
	}
	return a.name + " / " + a.unit
}

// largest is the size above which a value is not drawn: spans must not
// overflow.
const largest = 1e300

// drawable reports whether the axis has a place for v.
func (a *axis) drawable(v float64) bool {
	if a.log {
		return v > 1e-300 && v < largest
	}
	return math.Abs(v) < largest
}

// extent is the range of some values.
type extent struct{ lo, hi float64 }

func noExtent() extent { return extent{math.Inf(1), math.Inf(-1)} }

func (e *extent) add(a *axis, values ...float64) {
	for _, v := range values {
		if a.log && a.floor > 0 && v < a.floor {
			v = a.floor
		}
		if a.drawable(v) {
			e.lo, e.hi = math.Min(e.lo, v), math.Max(e.hi, v)
		}
	}
}

// fit sets the range to hold e, never of no length. room is the share of free
// space at both ends.
func (a *axis) fit(e extent, room float64) {
	if a.fixed {
		return
	}
	if e.lo > e.hi { // nothing to show
		e = extent{0, 1}
		if a.log {
			e = extent{0.1, 10}
		}
	}
	if a.log {
		lo, hi := math.Log10(e.lo), math.Log10(e.hi)
		if hi-lo < 0.3 {
			mid := (lo + hi) / 2
			lo, hi = mid-0.15, mid+0.15
		}
		more := room * (hi - lo)
		a.lo, a.hi = math.Pow(10, lo-more), math.Pow(10, hi+more)
		return
	}
	if least := 1e-9 * math.Max(math.Abs(e.lo), math.Abs(e.hi)); e.hi-e.lo <= least {
		by := math.Max(math.Abs(e.lo)*0.05, 1e-12)
		if e.lo == 0 {
			by = 1
		}
		e.lo, e.hi = e.lo-by, e.hi+by
	}
	more := room * (e.hi - e.lo)
	a.lo, a.hi = e.lo-more, e.hi+more
}

// share is how far along the axis v lies, 0 at its beginning and 1 at its end.
func (a *axis) share(v float64) float64 {
	if a.log {
		if v < a.lo {
			v = a.lo
		}
		return (math.Log(v) - math.Log(a.lo)) / (math.Log(a.hi) - math.Log(a.lo))
	}
	return (v - a.lo) / (a.hi - a.lo)
}

func (a *axis) ticks(most int) []tick {
	if a.log {
		return decadeTicks(a.lo, a.hi, most)
	}
	return linearTicks(a.lo, a.hi, most)
}

// timeUnit chooses how a time axis counts: seconds, minutes, hours or days.
func timeUnit(spanS float64) (unit string, seconds float64) {
	switch {
	case !(spanS >= 180):
		return "s", 1
	case spanS < 3*3600:
		return "min", 60
	case spanS < 4*86400:
		return "h", 3600
	}
	return "d", 86400
}

// timeAxis makes the axis of times given in s, and the factor to its unit. It
// is exactly as long as the times.
func timeAxis(columns ...[]float64) (axis, float64) {
	plain := axis{}
	e := noExtent()
	for _, c := range columns {
		e.add(&plain, c...)
	}
	span := 0.0
	if e.hi > e.lo {
		span = e.hi - e.lo
	}
	unit, s := timeUnit(span)
	a := axis{name: "Time", unit: unit}
	if e.lo <= e.hi {
		e.lo, e.hi = e.lo/s, e.hi/s
	}
	a.fit(e, 0)
	a.fixed = true
	return a, 1 / s
}

// scaled returns values times factor.
func scaled(values []float64, factor float64) []float64 {
	out := make([]float64, len(values))
	for i, v := range values {
		out[i] = v * factor
	}
	return out
}

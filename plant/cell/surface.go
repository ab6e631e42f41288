package cell

import "sort"

// surface is a whole table made ready: one curve a temperature row.
type surface struct {
	temps  []float64 // empty or one: the same at every temperature
	curves []curve
	edges  bool // temperature goes on with the edge slope outside; else holds flat
}

func newSurface(t *Table, cellWide Interpolation, edges bool) surface {
	how := t.Interpolation
	if how == "" {
		how = cellWide
	}
	if how == "" {
		how = PCHIP
	}
	s := surface{edges: edges}
	if len(t.TemperatureC) > 1 {
		s.temps = t.TemperatureC
	}
	for _, row := range t.Values {
		s.curves = append(s.curves, newCurve(t.SOC, row, how, edges))
	}
	return s
}

// knots appends where the surface's polynomial changes.
func (s *surface) knots(to []float64) []float64 {
	for i := range s.curves {
		c := &s.curves[i]
		to = append(to, c.x...)
		if n := len(c.x); n > 0 && c.pchip {
			to = append(to, above(c.x[n-1]))
		}
	}
	return to
}

// on returns the polynomial that holds on [lo, hi) at temperatureC.
func (s *surface) on(lo, hi, ref, temperatureC float64) Cubic {
	if len(s.temps) == 0 {
		return s.curves[0].on(lo, hi, ref)
	}
	k, w := bracket(s.temps, temperatureC)
	if !s.edges {
		w = min(max(w, 0), 1)
	}
	a := s.curves[k].on(lo, hi, ref)
	if w == 0 {
		return a
	}
	b := s.curves[k+1].on(lo, hi, ref)
	if w == 1 {
		return b
	}
	return a.mixed(&b, w)
}

// bracket returns the interval of x (at least two, ascending) that v lies in,
// or the nearest one, and how far along it v is: outside [0, 1] beyond the
// ends.
func bracket(x []float64, v float64) (int, float64) {
	k := sort.Search(len(x), func(i int) bool { return x[i] > v }) - 1
	k = min(max(k, 0), len(x)-2)
	return k, (v - x[k]) / (x[k+1] - x[k])
}

// union sorts x and drops repeats.
func union(x []float64) []float64 {
	sort.Float64s(x)
	out := x[:0]
	for i, v := range x {
		if i == 0 || v != out[len(out)-1] {
			out = append(out, v)
		}
	}
	return out
}

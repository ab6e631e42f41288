package cell

import (
	"math"
	"sort"

	"gonum.org/v1/gonum/interp"
)

// Cubic is a polynomial in the distance t from its segment's Ref:
// Y + t(B + t(C + t·D)).
type Cubic struct{ Y, B, C, D float64 }

// At returns the value at distance t.
func (q *Cubic) At(t float64) float64 { return q.Y + t*(q.B+t*(q.C+t*q.D)) }

// Slope returns the derivative at distance t.
func (q *Cubic) Slope(t float64) float64 { return q.B + t*(2*q.C+3*t*q.D) }

// shifted returns the same polynomial seen from d further up.
func (q Cubic) shifted(d float64) Cubic {
	if d == 0 {
		return q
	}
	return Cubic{Y: q.At(d), B: q.Slope(d), C: q.C + 3*d*q.D, D: q.D}
}

func (q Cubic) scaled(f float64) Cubic { return Cubic{q.Y * f, q.B * f, q.C * f, q.D * f} }

func (q Cubic) plus(o Cubic) Cubic { return Cubic{q.Y + o.Y, q.B + o.B, q.C + o.C, q.D + o.D} }

// mixed returns (1-w)·q + w·o; w may lie outside [0, 1].
func (q *Cubic) mixed(o *Cubic, w float64) Cubic {
	return Cubic{q.Y + w*(o.Y-q.Y), q.B + w*(o.B-q.B), q.C + w*(o.C-q.C), q.D + w*(o.D-q.D)}
}

// mix sets q to a.mixed(b, w).
func (q *Cubic) mix(a, b *Cubic, w float64) {
	q.Y = a.Y + w*(b.Y-a.Y)
	q.B = a.B + w*(b.B-a.B)
	q.C = a.C + w*(b.C-a.C)
	q.D = a.D + w*(b.D-a.D)
}

// curve is one row of a table, as polynomials between its SOC points.
type curve struct {
	x     []float64
	poly  []Cubic // len(x)-1, each from its left edge
	pchip bool
	edges bool // goes on with its edge slope outside; else holds flat
}

// newCurve joins y over x. A single value gives a constant.
func newCurve(x, y []float64, how Interpolation, edges bool) curve {
	c := curve{x: x, edges: edges, pchip: how == PCHIP}
	if len(x) < 2 {
		c.x = nil
		c.poly = []Cubic{{Y: y[0]}}
		return c
	}
	n := len(x) - 1
	c.poly = make([]Cubic, n)
	slope := make([]float64, n+1)
	if c.pchip {
		var fb interp.FritschButland
		if err := fb.Fit(x, y); err != nil {
			panic(err) // documented to be nil always
		}
		for i := range slope {
			slope[i] = fb.PredictDerivative(x[i])
		}
	}
	for i := range c.poly {
		h := x[i+1] - x[i]
		e := (y[i+1] - y[i]) / h
		if c.pchip {
			c.poly[i] = Cubic{y[i], slope[i], (3*e - 2*slope[i] - slope[i+1]) / h, (slope[i] + slope[i+1] - 2*e) / (h * h)}
		} else {
			c.poly[i] = Cubic{Y: y[i], B: e}
		}
	}
	return c
}

// on returns the polynomial that holds on [lo, hi), seen from ref. No point of
// the curve lies strictly inside.
func (c *curve) on(lo, hi, ref float64) Cubic {
	n := len(c.x)
	if n == 0 {
		return c.poly[0]
	}
	top := c.x[n-1]
	switch {
	case lo < c.x[0]: // below
		return c.outside(c.poly[0], c.x[0], ref)
	case lo >= top && !(lo == top && c.pchip && hi == above(top)): // above
		last := c.poly[n-2].shifted(top - c.x[n-2])
		return c.outside(last, top, ref)
	}
	i := min(sort.Search(n, func(i int) bool { return c.x[i] > lo })-1, n-2)
	return c.poly[i].shifted(ref - c.x[i])
}

// outside continues the edge polynomial, whose own place is x.
func (c *curve) outside(edge Cubic, x, ref float64) Cubic {
	if !c.edges {
		return Cubic{Y: edge.Y}
	}
	return Cubic{Y: edge.Y + edge.B*(ref-x), B: edge.B}
}

// above is the next number up. A PCHIP table still holds at its last point
// itself, in value and derivative; only beyond it does it continue or go flat.
func above(x float64) float64 { return math.Nextafter(x, math.Inf(1)) }

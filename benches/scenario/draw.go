package scenario

import (
	"fmt"
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/stat/distuv"

	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

// Definitions are what a plan's files hold, by name, with the names in the
// plan's order and the texts a Set keeps (see Set.Texts).
type Definitions struct {
	CellNames, DutyNames, SensorsNames []string

	Cells   map[string]*cell.Cell
	Duties  map[string]*duty.Duty
	Sensors map[string]*noise.Sensors
	Texts   map[string]string
}

// Draw resolves a plan into a set. Rows stand by cell, duty and sensors in the
// plan's order, the sensors changing fastest, and within each combination by
// draw. Scenarios and draws (label_draw) count from 1 over the whole set:
// scenario 0 is a replayed record.
//
//   - grid: every value with every other, in the order listed, the last column
//     changing fastest; between is cut into steps equal to both ends.
//   - list: the i-th row takes the i-th of every column's values.
//   - sobol: count points of Sobol's sequence from its first on, shifted anew
//     for each combination (see sobol).
//   - latin-hypercube: count points, one in each of count equal shares of every
//     column's distribution (McKay, Beckman & Conover 1979, Technometrics 21),
//     anew for each combination.
//
// A point's coordinate becomes a value through the quantile of the column's
// distribution; values have equal shares. Draws are then clipped to min and
// max: what lies beyond gathers at the end, the distribution is not truncated.
//
// The same plan gives the same set. Each row's seed is of its own, mixed from
// the plan's and the draw's number.
func Draw(p *Plan, defs Definitions) (*Set, error) {
	if err := p.Validate(); err != nil {
		return nil, err
	}
	for _, d := range []struct {
		key   string
		names []string
	}{{"cells", defs.CellNames}, {"duties", defs.DutyNames}, {"sensors", defs.SensorsNames}} {
		if len(d.names) == 0 {
			return nil, bad(d.key, "none", "at least one")
		}
	}
	points, err := p.points()
	if err != nil {
		return nil, err
	}
	combinations := len(defs.CellNames) * len(defs.DutyNames) * len(defs.SensorsNames)
	if points > maxRows/combinations {
		return nil, bad("count", fmt.Sprintf("%d points in each of %d combinations", points, combinations),
			fmt.Sprintf("at most %d rows", maxRows))
	}
	columns := make([]Column, len(p.Vary)) // left empty for labels
	for i, v := range p.Vary {
		columns[i], _ = Find(v.Column)
	}
	s := &Set{Cells: defs.Cells, Duties: defs.Duties, Sensors: defs.Sensors, Texts: defs.Texts,
		Score: p.Score, Limits: p.Limits, Draw: p.Draw, Rows: make([]Row, 0, points*combinations)}
	plain := DefaultRow()
	at := make([]float64, len(p.Vary))
	for _, plain.Cell = range defs.CellNames {
		for _, plain.Duty = range defs.DutyNames {
			for _, plain.Sensors = range defs.SensorsNames {
				next := p.walk(points, uint64(len(s.Rows)))
				for range points {
					next(at)
					row, err := p.row(plain, columns, at, int64(len(s.Rows))+1)
					if err != nil {
						return nil, err
					}
					s.Rows = append(s.Rows, row)
				}
			}
		}
	}
	return s, s.Validate()
}

// points returns how many points each combination has.
func (p *Plan) points() (int, error) {
	n := 1
	switch p.Draw {
	case Grid:
		for i := range p.Vary {
			if n *= p.Vary[i].levels(); n > maxRows {
				return 0, bad("vary", "a grid of more points", fmt.Sprintf("at most %d", maxRows))
			}
		}
	case List:
		for i := range p.Vary {
			l := p.Vary[i].levels()
			if i > 0 && l != n {
				return 0, bad(fmt.Sprintf("vary[%d].values", i), fmt.Sprintf("%d values", l),
					fmt.Sprintf("%d, as many as the first column has", n))
			}
			n = l
		}
	default:
		return p.Count, nil
	}
	if p.Count != 0 && p.Count != n {
		return 0, bad("count", fmt.Sprint(p.Count), fmt.Sprintf("%d, what the values make, or none", n))
	}
	return n, nil
}

// levels is how many values a column takes in a grid or a list.
func (v *Vary) levels() int {
	if v.Steps > 0 {
		return v.Steps
	}
	return len(v.Values) + len(v.Texts)
}

// walk returns what writes one point after another: coordinates in (0, 1) for
// sampled plans, the number of the value for grid and list. first, the rows
// before, names the combination.
func (p *Plan) walk(points int, first uint64) func([]float64) {
	k, n := 0, len(p.Vary)
	source := rand.NewPCG(mix(p.Seed), mix(^first))
	switch p.Draw {
	case Sobol:
		shift := make([]uint64, n)
		for i := range shift {
			shift[i] = source.Uint64()
		}
		return newSobol(shift).next
	case LatinHypercube:
		return latinHypercube(rand.New(source), points, n)
	case List:
		return func(at []float64) {
			for i := range at {
				at[i] = float64(k)
			}
			k++
		}
	}
	return func(at []float64) {
		rest := k
		for i := n - 1; i >= 0; i-- {
			l := p.Vary[i].levels()
			at[i] = float64(rest % l)
			rest /= l
		}
		k++
	}
}

// latinHypercube returns a walk over points of n coordinates, each of which has
// one value in every [k/points, (k+1)/points).
func latinHypercube(r *rand.Rand, points, n int) func([]float64) {
	columns := make([][]float64, n)
	for i := range columns {
		columns[i] = make([]float64, points)
		for k, share := range r.Perm(points) {
			u := (float64(share) + r.Float64()) / float64(points)
			columns[i][k] = min(max(u, 0x1p-54), 1-0x1p-53) // the ends have infinite quantiles
		}
	}
	k := 0
	return func(at []float64) {
		for i := range at {
			at[i] = columns[i][k]
		}
		k++
	}
}

// row resolves one point.
func (p *Plan) row(plain Row, columns []Column, at []float64, draw int64) (Row, error) {
	r := plain
	r.ID, r.Seed = draw, rowSeed(p.Seed, draw)
	for i := range p.Vary {
		v := &p.Vary[i]
		x := v.value(p.Draw, at[i])
		if columns[i].Name == "" {
			r.Labels = append(r.Labels, Label{Column: v.Column, Text: x.Text, Number: x.Number, IsNumber: x.Kind == Number})
			continue
		}
		if err := columns[i].Set(&r, x); err != nil {
			return r, bad(fmt.Sprintf("vary[%d]", i), fmt.Sprintf("%s = %v in draw %d", v.Column, x, draw),
				columns[i].Allowed()+"; min and max limit a draw")
		}
	}
	r.Labels = append(r.Labels, Label{Column: drawLabel, Number: float64(draw), IsNumber: true})
	return r, nil
}

// value turns a coordinate, or the number of a value, into the value.
func (v *Vary) value(draw DrawKind, at float64) Value {
	number := func(x float64) Value {
		if x < v.Min { // false where there is none
			x = v.Min
		}
		if x > v.Max {
			x = v.Max
		}
		return NumberValue(x)
	}
	n := v.levels()
	k := int(at)
	if draw != Grid && draw != List {
		k = min(int(at*float64(n)), n-1)
	}
	switch {
	case v.Texts != nil:
		return TextValue(v.Texts[k])
	case v.Values != nil:
		return number(v.Values[k])
	case v.Steps > 0 && k == n-1:
		return number(v.Between[1])
	case v.Steps > 0:
		return number(v.Between[0] + (v.Between[1]-v.Between[0])*at/float64(n-1))
	}
	return number(v.quantile(at))
}

// quantile is that of the column's distribution, for u in (0, 1).
func (v *Vary) quantile(u float64) float64 {
	switch {
	case v.Normal != nil:
		return distuv.Normal{Mu: v.Normal.Mean, Sigma: v.Normal.Std}.Quantile(u)
	case v.LogNormal != nil:
		return math.Exp(distuv.Normal{Mu: math.Log(v.LogNormal.Median), Sigma: v.LogNormal.Sigma}.Quantile(u))
	case v.Triangular != nil:
		t := v.Triangular
		return distuv.NewTriangle(t.Low, t.High, t.Mode, nil).Quantile(u)
	}
	return distuv.Uniform{Min: v.Between[0], Max: v.Between[1]}.Quantile(u)
}

// rowSeed mixes the plan's seed and a draw's number into a seed that any
// reader of int64 takes for a plain number.
func rowSeed(seed uint64, draw int64) uint64 {
	return mix(mix(seed)^uint64(draw)) >> 1
}

// mix is the finaliser of SplitMix64 (Steele, Lea & Flood 2014, "Fast
// splittable pseudorandom number generators", OOPSLA) after its increment.
func mix(x uint64) uint64 {
	x += 0x9e3779b97f4a7c15
	x = (x ^ x>>30) * 0xbf58476d1ce4e5b9
	x = (x ^ x>>27) * 0x94d049bb133111eb
	return x ^ x>>31
}

package cell

import (
	"fmt"
	"math"
	"sort"
)

// Options are how a cell is compiled into a Model.
type Options struct {
	PeriodS float64 // the usual step, s, > 0: decay factors for it are made ready; 0: none
	// Branches to keep, the slowest ones (by time constant at SOC 0.5 and
	// TemperatureRefC); the others' resistance is added to R0. Negative: all.
	Branches int
	// Isothermal collapses every table to TemperatureC, which then never changes.
	Isothermal   bool
	TemperatureC float64

	OCVOffsetV     float64
	R0Scale        float64 // > 0 or 0
	BranchRScale   float64 // ≥ 0; leaves time constants alone
	BranchTauScale float64 // > 0
}

// AsBuilt returns the options of a cell as its definition says, at every
// temperature, to be stepped by periodS.
func AsBuilt(periodS float64) Options {
	return Options{PeriodS: periodS, Branches: -1, R0Scale: 1, BranchRScale: 1, BranchTauScale: 1}
}

// Segment is one interval of SOC, [Lo, Hi), on which every table is a
// polynomial in t = SOC - Ref.
type Segment struct {
	Lo, Hi, Ref float64
	OCV         Cubic              // V
	R0          Cubic              // Ω
	R           [MaxBranches]Cubic // Ω
	HalfGapV    Cubic
	Tau         [MaxBranches]Cubic // s; F where the time constant is R·C
}

// Model is a cell made ready to be stepped. It is read-only once compiled; any
// number of Views may share it.
type Model struct {
	Cell       *Cell
	N          int     // branches
	CapacityAh float64 // nameplate
	Efficiency float64 // coulombic, on charge
	Hysteretic bool
	Rate       float64 // hysteresis
	PeriodS    float64 // the usual step

	// TauFixed says that branch j's time constant is the same everywhere; then
	// TauS[j], and for a step of PeriodS Decay[j] = exp(-dt/tau) and
	// Rise[j] = 1 - Decay[j], are ready.
	TauFixed    [MaxBranches]bool
	AllTauFixed bool
	TauS        [MaxBranches]float64
	Decay       [MaxBranches]float64
	Rise        [MaxBranches]float64

	farad  [MaxBranches]bool // Tau holds a capacitance, to be multiplied by R
	rOverR float64           // R as defined over R as scaled, for R·C
	temps  []float64         // layers; empty: one layer for every temperature
	perK   []float64         // one over the distance from a layer to the next
	layers [][]Segment
	ocvByT bool
	back   []Segment // what the layers are cut from
}

// Prepared is a checked cell with its tables joined into polynomials, from
// which Models for many scenarios are cut cheaply. It is read-only.
type Prepared struct {
	Cell  *Cell
	s     surfaces
	knots []float64
	temps []float64 // where a table bends over temperature
	perK  []float64 // one over the distance from one to the next
	byT   bool      // the OCV depends on temperature
}

// Prepare checks c and joins its tables. The error is c.Validate's.
func Prepare(c *Cell) (*Prepared, error) {
	if err := c.Validate(); err != nil {
		return nil, err
	}
	p := &Prepared{Cell: c, s: surfacesOf(c)}
	for _, f := range p.s.all() {
		p.knots = f.knots(p.knots)
		p.temps = append(p.temps, f.temps...)
	}
	p.knots, p.temps = union(p.knots), union(p.temps)
	p.byT = len(p.s.ocv.temps) > 0 || p.s.slope != nil
	if len(p.temps) < 2 && p.s.slope != nil { // linear in temperature: any two will do
		p.temps = []float64{c.TemperatureRefC, c.TemperatureRefC + 1}
	}
	for k := 1; k < len(p.temps); k++ {
		p.perK = append(p.perK, 1/(p.temps[k]-p.temps[k-1]))
	}
	return p, nil
}

// Compile makes c ready. It returns c.Validate's error, or one for an option
// out of range.
func Compile(c *Cell, o Options) (*Model, error) {
	p, err := Prepare(c)
	if err != nil {
		return nil, err
	}
	return p.Model(o)
}

// Model cuts the model for one set of options. It returns an error for an
// option out of range.
func (p *Prepared) Model(o Options) (*Model, error) {
	m := new(Model)
	if err := p.ModelInto(m, o); err != nil {
		return nil, err
	}
	return m, nil
}

// ModelInto is Model into the memory of m, whose former self is lost to every
// View bound to it.
func (p *Prepared) ModelInto(m *Model, o Options) error {
	c := p.Cell
	if err := o.validate(c); err != nil {
		return err
	}
	*m = Model{Cell: c, CapacityAh: c.CapacityAh, Efficiency: c.CoulombicEfficiency, PeriodS: o.PeriodS, ocvByT: p.byT,
		layers: m.layers[:0], back: m.back}
	if h := c.Hysteresis; h != nil {
		m.Hysteretic, m.Rate = true, h.Rate
	}
	keep, fold := p.s.split(c, o.Branches)
	m.N = len(keep)
	m.layOut(p, keep, fold, o)
	m.fixTaus(c, keep, o)
	return nil
}

func (o *Options) validate(c *Cell) error {
	switch {
	case !(o.PeriodS >= 0) || math.IsInf(o.PeriodS, 0):
		return fmt.Errorf("cell: period is %g s, allowed is a finite number ≥ 0", o.PeriodS)
	case o.Branches > len(c.Branches):
		return fmt.Errorf("cell: %d branches asked of %s, which has %d", o.Branches, c.Name, len(c.Branches))
	case o.Isothermal && !(o.TemperatureC > absoluteZeroC && finite(o.TemperatureC)):
		return fmt.Errorf("cell: temperature is %g °C, allowed is a finite number > -273.15", o.TemperatureC)
	case !finite(o.OCVOffsetV):
		return fmt.Errorf("cell: ocv_offset_v is %g, allowed is a finite number", o.OCVOffsetV)
	case !(o.R0Scale >= 0) || math.IsInf(o.R0Scale, 0):
		return fmt.Errorf("cell: r0_scale is %g, allowed is a finite number ≥ 0", o.R0Scale)
	case !(o.BranchRScale >= 0) || math.IsInf(o.BranchRScale, 0):
		return fmt.Errorf("cell: branch_r_scale is %g, allowed is a finite number ≥ 0", o.BranchRScale)
	case !(o.BranchTauScale > 0) || math.IsInf(o.BranchTauScale, 0):
		return fmt.Errorf("cell: branch_tau_scale is %g, allowed is a finite number > 0", o.BranchTauScale)
	}
	return nil
}

// surfaces are all tables of a cell, made ready.
type surfaces struct {
	ocv, r0, gap surface
	slope        *surface
	r, tau       []surface
}

func surfacesOf(c *Cell) surfaces {
	s := surfaces{ocv: newSurface(&c.OCV, c.Interpolation, true), r0: newSurface(&c.R0, c.Interpolation, false)}
	if c.OCVSlopeVPerK != nil {
		t := newSurface(c.OCVSlopeVPerK, c.Interpolation, false)
		s.slope = &t
	}
	zero := Constant(0)
	s.gap = newSurface(&zero, c.Interpolation, false)
	if c.Hysteresis != nil {
		s.gap = newSurface(&c.Hysteresis.HalfGapV, c.Interpolation, false)
	}
	for j := range c.Branches {
		b := &c.Branches[j]
		s.r = append(s.r, newSurface(&b.Ohm, c.Interpolation, false))
		t := b.TauS
		if t == nil {
			t = b.Farad
		}
		s.tau = append(s.tau, newSurface(t, c.Interpolation, false))
	}
	return s
}

// split returns the branches to keep, in the cell's order, and the others.
func (s *surfaces) split(c *Cell, n int) (keep, fold []int) {
	order := make([]int, len(c.Branches))
	tau := make([]float64, len(order))
	for j := range order {
		order[j] = j
		q := s.tau[j].on(0.5, above(0.5), 0.5, c.TemperatureRefC)
		tau[j] = q.Y
		if c.Branches[j].Farad != nil {
			r := s.r[j].on(0.5, above(0.5), 0.5, c.TemperatureRefC)
			tau[j] *= r.Y
		}
	}
	if n < 0 || n >= len(order) {
		return order, nil
	}
	sort.SliceStable(order, func(a, b int) bool { return tau[order[a]] > tau[order[b]] })
	keep, fold = order[:n:n], order[n:]
	sort.Ints(keep)
	return keep, fold
}

func (s *surfaces) all() []*surface {
	all := []*surface{&s.ocv, &s.r0, &s.gap}
	if s.slope != nil {
		all = append(all, s.slope)
	}
	for j := range s.r {
		all = append(all, &s.r[j], &s.tau[j])
	}
	return all
}

// layOut cuts one layer of segments for each temperature where a table bends.
func (m *Model) layOut(p *Prepared, keep, fold []int, o Options) {
	temps := p.temps
	switch {
	case o.Isothermal:
		temps = []float64{o.TemperatureC}
	case len(temps) == 0:
		temps = []float64{p.Cell.TemperatureRefC}
	default:
		m.temps, m.perK = temps, p.perK
	}
	n := len(p.knots)
	if need := len(temps) * (n + 1); cap(m.back) < need {
		m.back = make([]Segment, need)
	}
	m.back = m.back[:cap(m.back)]
	for l, at := range temps {
		segs := m.back[l*(n+1) : (l+1)*(n+1) : (l+1)*(n+1)]
		for k := range segs {
			lo, hi, ref := math.Inf(-1), math.Inf(1), p.knots[0]
			if k > 0 {
				lo, ref = p.knots[k-1], p.knots[k-1]
			}
			if k < n {
				hi = p.knots[k]
			}
			p.s.segment(&segs[k], p.Cell, lo, hi, ref, at, keep, fold, o)
		}
		m.layers = append(m.layers, segs)
	}
	m.rOverR = 1
	if o.BranchRScale > 0 {
		m.rOverR = 1 / o.BranchRScale
	}
}

func (s *surfaces) segment(g *Segment, c *Cell, lo, hi, ref, at float64, keep, fold []int, o Options) {
	*g = Segment{Lo: lo, Hi: hi, Ref: ref}
	g.OCV = s.ocv.on(lo, hi, ref, at)
	if s.slope != nil {
		g.OCV = g.OCV.plus(s.slope.on(lo, hi, ref, at).scaled(at - c.TemperatureRefC))
	}
	g.OCV.Y += o.OCVOffsetV
	g.R0 = s.r0.on(lo, hi, ref, at).scaled(o.R0Scale)
	for _, j := range fold {
		g.R0 = g.R0.plus(s.r[j].on(lo, hi, ref, at).scaled(o.BranchRScale))
	}
	for i, j := range keep {
		g.R[i] = s.r[j].on(lo, hi, ref, at).scaled(o.BranchRScale)
		g.Tau[i] = s.tau[j].on(lo, hi, ref, at).scaled(o.BranchTauScale)
	}
	g.HalfGapV = s.gap.on(lo, hi, ref, at)
}

// fixTaus finds the time constants that are the same everywhere.
func (m *Model) fixTaus(c *Cell, keep []int, o Options) {
	m.AllTauFixed = true
	for i, j := range keep {
		b := &c.Branches[j]
		m.farad[i] = b.Farad != nil
		first := m.layers[0][0].Tau[i]
		fixed := !m.farad[i]
		for _, segs := range m.layers {
			for k := range segs {
				fixed = fixed && segs[k].Tau[i] == Cubic{Y: first.Y}
			}
		}
		if !fixed {
			m.AllTauFixed = false
			continue
		}
		m.TauFixed[i] = true
		m.TauS[i] = first.Y
		m.Decay[i], m.Rise[i] = Decay(o.PeriodS, first.Y)
	}
}

// Decay returns exp(-dtS/tauS) and one minus it, the latter without losing
// digits where dtS is short.
func Decay(dtS, tauS float64) (decay, rise float64) {
	return math.Exp(-dtS / tauS), -math.Expm1(-dtS / tauS)
}

// TemperatureMatters reports whether any table of the model depends on
// temperature.
func (m *Model) TemperatureMatters() bool { return len(m.temps) > 0 }

// Package plant simulates one cell under a duty: what happens, whatever the
// sensors say of it.
//
// A Plant gives its Truth in blocks, so that memory does not grow with the
// duty. It steps exactly at every sample, at every change of demand between
// samples and at every substep; parameters and heat are taken at the state
// before a step. Stops and limits are tested at those instants.
//
// The package reads no files, draws random numbers only from streams named by
// the scenario's seed, and never lets a demand beyond the cell become NaN: the
// duty ends there, with a reason.
package plant

import (
	"fmt"
	"math"
	"slices"

	"soctrial/plant/cell"
	"soctrial/plant/duty"
	"soctrial/plant/stream"
)

// Setup is one scenario as the plant needs it. Zero scales are not defaults:
// take Default and change it.
type Setup struct {
	Cell     *cell.Prepared
	Duty     *duty.Program
	PeriodS  float64 // sample period, > 0
	Substeps int     // plant steps a sample, ≥ 1
	Seed     uint64

	SOCStart          float64   // [0, 1]
	HysteresisStart   float64   // [-1, 1]
	BranchStartV      []float64 // V; nil: at rest
	TemperatureStartC float64   // NaN: ambient; else only with [thermal]
	AmbientC          float64

	CapacityScale     float64 // > 0
	R0Scale           float64 // ≥ 0
	BranchRScale      float64 // ≥ 0
	BranchTauScale    float64 // > 0
	OCVOffsetV        float64
	R0DriftPerH       float64
	CapacityDriftPerH float64
	R0WalkPerSqrtH    float64 // ≥ 0
}

// Default returns the setup of a fresh, full cell at 25 °C.
func Default(c *cell.Prepared, d *duty.Program, periodS float64) Setup {
	return Setup{Cell: c, Duty: d, PeriodS: periodS, Substeps: 1, SOCStart: 1, TemperatureStartC: math.NaN(),
		AmbientC: 25, CapacityScale: 1, R0Scale: 1, BranchRScale: 1, BranchTauScale: 1}
}

// Outcome is how a duty ended.
type Outcome struct {
	// Reason is empty where the duty ran to its end; else why it ended early:
	// ReasonPower and the other Reason constants, or a sentence.
	Reason   string
	EndS     float64 // when it ended, s
	Samples  int64
	LimitedS float64 // time in which a charging demand was cut back
	HeatJ    float64 // heat made in the cell, with [thermal] only
	// Notices tell what a user would want to know, e.g. a leg that was skipped
	// because its stop was met already; at most maxNotices.
	Notices []string
}

// Why a duty ended early.
const (
	ReasonPower      = "power"         // the power asked for is beyond the cell
	ReasonVoltageMin = "voltage_min_v" // discharged to the lower voltage limit
	ReasonEmpty      = "soc_0"         // discharged to SOC 0
	ReasonVoltageMax = "voltage_max_v" // charged to the upper limit in a leg with at_limit = "end"
	ReasonFull       = "soc_1"         // likewise to SOC 1
)

const (
	maxNotices  = 8
	legCapS     = 1e7  // a leg without duration that meets no stop by then ends the duty
	voltageTolV = 1e-9 // a held limit is not a broken one
	kelvin      = 273.15
	hPerS       = 1.0 / 3600
)

// Plant is a running cell.
type Plant struct {
	set   Setup
	model *cell.Model
	view  cell.View
	cur   duty.Cursor
	walk  stream.Source

	walkBefore stream.Source // as it was before a block of draws
	steps      []float64     // those draws

	state cell.State
	tempC float64
	tS    float64 // now
	k     int64   // the next sample to give

	fresh     int // stops from this depth on are to be armed; none: noFresh
	armed     [maxStops]duty.Side
	legStartS float64

	iA         float64 // flows now
	limited    bool    // iA was cut back from the demand
	holding    bool    // iA holds a voltage
	meanA      float64 // over the interval that ends at the next sample
	r0Factor   float64 // drift and walk of R0
	walkFactor float64
	capacityAh float64 // now

	lean     bool // nothing but SOC and branches moves: see leanSamples
	cooling  float64
	heatRise float64 // exp(-k·period/C), ready for the usual step

	done bool
	out  Outcome
}

const (
	maxStops = 32
	noFresh  = math.MaxInt
)

// New returns a plant at the start of its duty.
func New(s Setup) (*Plant, error) {
	p := new(Plant)
	if err := p.Reset(s); err != nil {
		return nil, err
	}
	return p, nil
}

// Reset puts p at the start of another duty. The error names the value that is
// out of range.
func (p *Plant) Reset(s Setup) error {
	if err := s.validate(); err != nil {
		return err
	}
	c := s.Cell.Cell
	o := cell.Options{PeriodS: s.PeriodS / float64(s.Substeps), Branches: -1, Isothermal: c.Thermal == nil, TemperatureC: s.AmbientC,
		OCVOffsetV: s.OCVOffsetV, R0Scale: s.R0Scale, BranchRScale: s.BranchRScale, BranchTauScale: s.BranchTauScale}
	m := p.model
	if m == nil {
		m = new(cell.Model)
	}
	if err := s.Cell.ModelInto(m, o); err != nil {
		return fmt.Errorf("plant: %w", err)
	}
	*p = Plant{set: s, model: m, steps: p.steps, cur: s.Duty.Start(), fresh: noFresh, r0Factor: 1, walkFactor: 1}
	p.capacityAh = m.CapacityAh * s.CapacityScale
	p.state.SOC, p.state.Hysteresis = s.SOCStart, s.HysteresisStart
	copy(p.state.BranchV[:m.N], s.BranchStartV)
	p.tempC = s.AmbientC
	if s.TemperatureStartC == s.TemperatureStartC {
		p.tempC = s.TemperatureStartC
	}
	if t := c.Thermal; t != nil {
		p.cooling = t.ConductanceWPerK / t.HeatCapacityJPerK
		p.heatRise = math.Exp(-p.cooling * o.PeriodS)
	}
	p.walk = stream.New(s.Seed, "plant.r0_walk")
	p.view.Bind(m, p.tempC)
	p.lean = c.Thermal == nil && !m.Hysteretic && m.AllTauFixed && m.N <= 2 && s.Substeps == 1 &&
		s.R0DriftPerH == 0 && s.CapacityDriftPerH == 0 && s.R0WalkPerSqrtH == 0
	p.entered()
	if p.cur.Done() {
		p.finish("")
	}
	return nil
}

func (s *Setup) validate() error {
	ambient := s.AmbientC
	for _, r := range []struct {
		name    string
		v       float64
		ok      bool
		allowed string
	}{
		{"sample_period_s", s.PeriodS, s.PeriodS > 0, "> 0"},
		{"plant_substeps", float64(s.Substeps), s.Substeps >= 1, "a whole number ≥ 1"},
		{"soc_start", s.SOCStart, s.SOCStart >= 0 && s.SOCStart <= 1, "SOC from 0 to 1"},
		{"hysteresis_start", s.HysteresisStart, s.HysteresisStart >= -1 && s.HysteresisStart <= 1, "-1 to 1"},
		{"ambient_c", ambient, ambient > -kelvin, "> -273.15"},
		{"capacity_scale", s.CapacityScale, s.CapacityScale > 0, "> 0"},
		{"r0_scale", s.R0Scale, s.R0Scale >= 0, "≥ 0"},
		{"branch_r_scale", s.BranchRScale, s.BranchRScale >= 0, "≥ 0"},
		{"branch_tau_scale", s.BranchTauScale, s.BranchTauScale > 0, "> 0"},
		{"ocv_offset_v", s.OCVOffsetV, s.OCVOffsetV == s.OCVOffsetV, "a number"},
		{"r0_drift_per_h", s.R0DriftPerH, s.R0DriftPerH == s.R0DriftPerH, "a number"},
		{"capacity_drift_per_h", s.CapacityDriftPerH, s.CapacityDriftPerH == s.CapacityDriftPerH, "a number"},
		{"r0_walk_per_sqrt_h", s.R0WalkPerSqrtH, s.R0WalkPerSqrtH >= 0, "≥ 0"},
	} {
		if !r.ok || math.IsInf(r.v, 0) {
			return fmt.Errorf("plant: %s is %g, allowed is %s, and finite", r.name, r.v, r.allowed)
		}
	}
	if t := s.TemperatureStartC; t == t {
		if !(t > -kelvin) || math.IsInf(t, 0) {
			return fmt.Errorf("plant: temperature_start_c is %g, allowed is a finite number > -273.15", t)
		}
		if s.Cell.Cell.Thermal == nil && t != ambient {
			return fmt.Errorf("plant: temperature_start_c is %g at an ambient_c of %g, but cell %s has no [thermal]: it stays at ambient",
				t, ambient, s.Cell.Cell.Name)
		}
	}
	if len(s.BranchStartV) > len(s.Cell.Cell.Branches) {
		return fmt.Errorf("plant: %d branch voltages at the start of a cell with %d branches", len(s.BranchStartV), len(s.Cell.Cell.Branches))
	}
	return nil
}

// Outcome tells how the duty ended; it is final once Next has returned fewer
// samples than asked for.
func (p *Plant) Outcome() Outcome { return p.out }

// Next fills out with the next samples and returns how many there were; fewer
// than out.Len() means that the duty has ended.
func (p *Plant) Next(out *Truth) int {
	out.PeriodS = p.set.PeriodS
	n, room := 0, out.Len()
	for n < room && !p.done {
		if s := &p.set; s.Substeps == 1 {
			n = p.runFast(out, n)
			if n >= room || p.done {
				break
			}
		}
		if !p.sample(out, n) {
			break
		}
		n++
	}
	return n
}

// sample settles what flows at the present sample, gives it and moves on to the
// next one. Where the duty ends at the sample itself it gives none and reports
// false.
func (p *Plant) sample(out *Truth, n int) bool {
	before, u, r0 := p.iA, 0.0, 0.0
	first := p.k == 0
	if !first {
		u, r0 = p.view.Rest(&p.state), p.view.R0(p.state.SOC)*p.r0Factor
		if p.set.R0WalkPerSqrtH > 0 {
			p.walkFactor *= cell.Exp(p.set.R0WalkPerSqrtH * math.Sqrt(p.set.PeriodS/3600) * p.walk.Normal())
			p.refresh()
		}
	}
	if !p.done {
		p.settle()
	}
	if p.done {
		return false
	}
	voltage := p.view.Voltage(&p.state, 0) - p.iA*p.view.R0(p.state.SOC)*p.r0Factor
	if first {
		before, p.meanA = p.iA, p.iA
		out.VoltageBeforeV[n] = voltage
	} else {
		out.VoltageBeforeV[n] = u - before*r0
	}
	out.TimeS[n] = p.tS
	out.SOC[n] = p.state.SOC
	out.CurrentA[n] = p.iA
	out.VoltageV[n] = voltage
	out.CurrentBeforeA[n] = before
	out.CurrentMeanA[n] = p.meanA
	out.TemperatureC[n] = p.tempC
	p.k++
	p.out.Samples = p.k
	p.toNextSample()
	return true
}

// finish ends the duty now.
func (p *Plant) finish(reason string) {
	p.done = true
	p.out.Reason, p.out.EndS = reason, p.tS
}

func (p *Plant) notice(format string, args ...any) {
	text := fmt.Sprintf(format, args...)
	if len(p.out.Notices) < maxNotices && !slices.Contains(p.out.Notices, text) {
		p.out.Notices = append(p.out.Notices, text)
	}
}

// refresh works out what drifts with time.
func (p *Plant) refresh() {
	h := p.tS * hPerS
	p.r0Factor = p.walkFactor * (1 + p.set.R0DriftPerH*h)
	p.capacityAh = p.model.CapacityAh * p.set.CapacityScale * (1 + p.set.CapacityDriftPerH*h)
	if p.capacityAh <= 0 || p.r0Factor < 0 {
		p.finish(fmt.Sprintf("drift left a capacity of %g Ah and R0 times %g after %g h", p.capacityAh, p.r0Factor, h))
	}
}

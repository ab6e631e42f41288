package cell

import "math"

// State is the state of a running cell, but for its temperature.
type State struct {
	SOC        float64
	BranchV    [MaxBranches]float64 // V
	Hysteresis float64              // [-1, 1]
}

// Advance moves s by dtS seconds of currentA held, exactly for parameters held
// at their values at the state and temperature before the step. capacityAh is
// the present capacity. A step of zero length changes nothing.
func (v *View) Advance(s *State, currentA, dtS, capacityAh float64) {
	if dtS == 0 {
		return
	}
	m := v.m
	g := v.Segment(s.SOC)
	t := s.SOC - g.Ref
	for j := range m.N {
		a, r := m.Decay[j], m.Rise[j]
		if dtS != m.PeriodS || !m.TauFixed[j] {
			a, r = Decay(dtS, m.Tau(j, g, t))
		}
		s.BranchV[j] = a*s.BranchV[j] + g.R[j].At(t)*r*currentA
	}
	moved := currentA * dtS / (3600 * capacityAh)
	if currentA < 0 {
		moved *= m.Efficiency
	}
	if m.Hysteretic {
		s.Hysteresis = StepHysteresis(s.Hysteresis, currentA, m.Rate, moved)
	}
	s.SOC -= moved
}

// StepHysteresis returns the hysteresis state after moved (a signed share of
// the capacity, > 0 on discharge) has gone through at rate gamma.
func StepHysteresis(h, currentA, rate, moved float64) float64 {
	if currentA == 0 {
		return h
	}
	sign := math.Copysign(1, currentA)
	return -sign + (h+sign)*Exp(-math.Abs(rate*moved))
}

// Rest returns the terminal voltage of s without its series drop, V: OCV plus
// hysteresis minus the branches.
func (v *View) Rest(s *State) float64 {
	g := v.Segment(s.SOC)
	t := s.SOC - g.Ref
	u := g.OCV.At(t)
	if v.m.Hysteretic {
		u += g.HalfGapV.At(t) * s.Hysteresis
	}
	for j := range v.m.N {
		u -= s.BranchV[j]
	}
	return u
}

// R0 returns the series resistance at soc, Ω.
func (v *View) R0(soc float64) float64 {
	g := v.Segment(soc)
	return g.R0.At(soc - g.Ref)
}

// Voltage returns the terminal voltage of s under currentA, V.
func (v *View) Voltage(s *State, currentA float64) float64 {
	return v.Rest(s) - currentA*v.R0(s.SOC)
}

// Package counting holds the estimators that count charge.
//
// Coulomb integrates the current reading from the SOC it is told. RestOCV does
// the same and, once the cell has rested, reads SOC back from the open-circuit
// voltage. Both follow the design's step 1: coulombic efficiency by the sign
// of the reading, hysteresis carried from the filter's own readings.
//
// Neither models the cell's dynamics; neither predicts a voltage, so predicted
// voltage and innovation are NaN.
package counting

import (
	"fmt"
	"math"

	"soctrial/estimator"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// counter is what both kinds share: charge counted sample by sample.
type counter struct {
	kind  string
	setup estimator.Setup
	model *cell.Model

	currentStdA  float64 // 0 where not given
	statesStd    bool
	soc, socVar  float64
	h            float64
	heldA, tempC float64 // last readings
	timeS        float64
	samples      int
	restS        float64 // how long the current has been low; rest-ocv only
	lost         *estimator.LostError
}

func (c *counter) reset(kind string, s estimator.Setup) error {
	for _, v := range []struct {
		key   string
		value float64
	}{{"start.soc_std", s.Spec.SOCStd}, {"measurement.current_std_a", s.Spec.CurrentStdA}} {
		if v.value < 0 || math.IsInf(v.value, 0) {
			return fmt.Errorf("counting: %s is %g, allowed is a finite number ≥ 0, or none", v.key, v.value)
		}
	}
	if err := s.Check(); err != nil {
		return err
	}
	m := c.model
	same := s.Model == nil && c.setup.Model == nil && m != nil && c.setup.Cell == s.Cell &&
		c.setup.PeriodS == s.PeriodS && c.setup.Spec.Branches == s.Spec.Branches
	if !same {
		var err error
		if m, err = s.Compile(); err != nil {
			return fmt.Errorf("counting: %w", err)
		}
	}
	std, current := s.Spec.SOCStd, s.Spec.CurrentStdA
	*c = counter{kind: kind, setup: s, model: m, soc: s.SOCStart, h: s.HysteresisStart, tempC: m.Cell.TemperatureRefC,
		statesStd: std == std || current == current, currentStdA: given(current), socVar: given(std) * given(std)}
	return nil
}

// given returns v, or 0 where it is not given.
func given(v float64) float64 {
	if v != v {
		return 0
	}
	return v
}

// pace is what a step of dtS comes to.
type pace struct {
	dtS    float64
	perA   [2]float64 // SOC moved by 1 A: discharge, charge
	socVar float64    // variance one step adds
}

func (c *counter) paceOf(dtS float64) pace {
	per := dtS / (3600 * c.model.CapacityAh)
	return pace{dtS: dtS, perA: [2]float64{per, per * c.model.Efficiency}, socVar: (per * c.currentStdA) * (per * c.currentStdA)}
}

// move counts one sample of in and returns the current that flows at it and
// the one that flowed up to it. p is kept between calls.
func (c *counter) move(in *record.Readings, k int, p *pace) (nowA, flowedA float64) {
	i := in.CurrentA[k]
	if i != i {
		i = c.heldA
	}
	flowed := c.heldA
	if in.CurrentReading == record.IntervalMean {
		flowed = i
	}
	if c.samples > 0 {
		dt := in.PeriodS
		if !(dt > 0) {
			dt = in.TimeS[k] - c.timeS
		}
		if dt > 0 {
			if dt != p.dtS {
				*p = c.paceOf(dt)
			}
			moved := flowed * p.perA[math.Float64bits(flowed)>>63]
			if c.model.Hysteretic {
				c.h = cell.StepHysteresis(c.h, flowed, c.model.Rate, moved)
			}
			c.soc -= moved
			c.socVar += p.socVar
		}
	}
	if t := in.TemperatureC[k]; t == t {
		c.tempC = t
	}
	c.heldA, c.timeS = i, in.TimeS[k]
	c.samples++
	return i, flowed
}

// write puts estimate k out, unless the count is lost.
func (c *counter) write(out *estimator.Estimate, k int) bool {
	if !(c.soc*c.soc+c.socVar < math.Inf(1)) {
		c.lost = &estimator.LostError{Sample: c.samples - 1, TimeS: c.timeS,
			Cause: fmt.Sprintf("state not finite: soc is %.3g", c.soc)}
		return false
	}
	out.SOC[k] = min(max(c.soc, 0), 1)
	out.SOCFree[k] = c.soc
	out.SOCStd[k] = math.NaN()
	if c.statesStd {
		out.SOCStd[k] = math.Sqrt(c.socVar)
	}
	out.VoltagePredictedV[k] = math.NaN()
	out.InnovationV[k] = math.NaN()
	out.InnovationStdV[k] = math.NaN()
	return true
}

// MarshalBinary implements estimator.Estimator.
func (c *counter) MarshalBinary() ([]byte, error) {
	if c.lost != nil {
		return nil, c.lost
	}
	return estimator.PackState(c.kind, []float64{c.soc, c.socVar, c.h, c.heldA, c.tempC, c.timeS, float64(c.samples), c.restS}), nil
}

// UnmarshalBinary implements estimator.Estimator.
func (c *counter) UnmarshalBinary(state []byte) error {
	var v [8]float64
	if err := estimator.UnpackState(c.kind, state, v[:]); err != nil {
		return err
	}
	if !(v[6] >= 0 && v[6] == math.Trunc(v[6]) && v[6] < 1<<53) {
		return fmt.Errorf("counting: saved state has followed %g samples, allowed is a whole number ≥ 0", v[6])
	}
	c.soc, c.socVar, c.h, c.heldA, c.tempC, c.timeS, c.samples, c.restS = v[0], v[1], v[2], v[3], v[4], v[5], int(v[6]), v[7]
	c.lost = nil
	return nil
}

// StateNames implements estimator.Inspectable.
func (c *counter) StateNames() []string { return []string{"soc"} }

// State implements estimator.Inspectable.
func (c *counter) State(dst []float64) { dst[0] = c.soc }

// Covariance implements estimator.Inspectable.
func (c *counter) Covariance(dst []float64) { dst[0] = c.socVar }

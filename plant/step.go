package plant

import (
	"fmt"
	"math"

	"soctrial/plant/cell"
)

// toNextSample carries the state from the present sample to the next one, in
// steps cut at substeps and at every change of demand. It may end the duty.
func (p *Plant) toNextSample() {
	from, to := p.tS, float64(p.k)*p.set.PeriodS
	subs := p.set.Substeps
	base := p.model.PeriodS
	var charge float64 // A·s
	i0, whole := p.iA, true
	for s := 1; s <= subs; s++ {
		end := to
		if s < subs {
			end = from + float64(s)*base
		}
		for {
			charge += p.stepToward(end, base)
			if p.done {
				return
			}
			arrived := p.tS >= end-tolS(end)
			if arrived {
				p.tS = end
				if s == subs { // the sample settles at its own instant
					break
				}
			}
			p.settle()
			if p.done {
				return
			}
			whole = whole && p.iA == i0
			if arrived {
				break
			}
		}
	}
	p.meanA = charge / p.set.PeriodS
	if whole {
		p.meanA = i0
	}
}

// stepToward makes one plant step and returns the charge that flowed, A·s. It
// goes to end or to a change of demand before it. Where a voltage is held the
// full step base is halved until it cannot oscillate; where charging reaches
// SOC 1 the step is cut there, and nothing more goes in.
func (p *Plant) stepToward(end, base float64) float64 {
	edge := end
	if e := p.cur.Demand().EndS; e < end-tolS(end) && e > p.tS {
		edge = e
	}
	h := edge - p.tS
	if math.Abs(h-base) <= 2*tolS(end) {
		h = base // to the bit, so that the ready decay factors serve
	}
	whole := true
	if p.holding {
		if short := p.halved(base); short < h*(1-1e-9) {
			h, whole = short, false
		}
		if p.done {
			return 0
		}
	}
	if p.iA < 0 {
		full := (1 - p.state.SOC) * 3600 * p.capacityAh / (-p.iA * p.model.Efficiency)
		if full < h {
			p.step(full)
			p.state.SOC = 1
			p.tS += full
			p.refresh()
			return p.iA * full
		}
	}
	charge := p.iA * h
	p.step(h)
	if whole {
		p.tS = edge
	} else {
		p.tS += h
	}
	p.refresh()
	return charge
}

// halved returns dtS halved until the branches cannot answer a change of
// current by more than half of what R0 does.
func (p *Plant) halved(dtS float64) float64 {
	g := p.view.Segment(p.state.SOC)
	t := p.state.SOC - g.Ref
	r0 := g.R0.At(t) * p.r0Factor
	for range maxHalvings {
		var sum float64
		for j := range p.model.N {
			_, rise := cell.Decay(dtS, p.model.Tau(j, g, t))
			sum += g.R[j].At(t) * rise
		}
		if sum <= r0/2 {
			return dtS
		}
		dtS /= 2
	}
	p.finish(fmt.Sprintf("R0 of %g ohm is too small beside the branches to hold a voltage", r0))
	return dtS
}

// maxHalvings of a step are tried before a voltage is said not to be held: a
// second then is a microsecond.
const maxHalvings = 20

// step moves the state by dtS under the present current.
func (p *Plant) step(dtS float64) {
	if p.limited {
		p.out.LimitedS += dtS
	}
	tempC := p.tempC
	if t := p.model.Cell.Thermal; t != nil {
		ocv, _ := p.view.OCV(p.state.SOC)
		v := p.view.Rest(&p.state) - p.iA*p.view.R0(p.state.SOC)*p.r0Factor
		q := p.iA*(ocv-v) - p.iA*(p.tempC+kelvin)*p.view.OCVSlopeVPerK(p.state.SOC)
		p.out.HeatJ += q * dtS
		if t.ConductanceWPerK == 0 {
			tempC += q * dtS / t.HeatCapacityJPerK
		} else {
			decay := p.heatRise
			if dtS != p.model.PeriodS {
				decay = math.Exp(-p.cooling * dtS)
			}
			settled := p.set.AmbientC + q/t.ConductanceWPerK
			tempC = settled + (p.tempC-settled)*decay
		}
	}
	p.view.Advance(&p.state, p.iA, dtS, p.capacityAh)
	if tempC != p.tempC {
		p.tempC = tempC
		p.view.SetTemperature(tempC)
	}
}

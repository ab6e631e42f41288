package plant

import (
	"math"

	"soctrial/plant/cell"
)

// richSamples is leanSamples for a cell with anything else at work: heat and
// tables over temperature, hysteresis, drift and walk, any branches. Limits are
// left to the general path, sample by sample.
func (p *Plant) richSamples(out *Truth, n, count int) int {
	m, set := p.model, &p.set
	c, th := m.Cell, m.Cell.Thermal
	period := set.PeriodS
	drifts := set.R0DriftPerH != 0 || set.CapacityDriftPerH != 0 || set.R0WalkPerSqrtH > 0
	vMax, vMin := c.VoltageMaxV+voltageTolV, c.VoltageMinV-voltageTolV
	walkStd := set.R0WalkPerSqrtH * math.Sqrt(period/3600)
	perAh := period / 3600
	perA := perAh / p.capacityAh
	perW := 0.0
	if th != nil && th.ConductanceWPerK > 0 {
		perW = 1 / th.ConductanceWPerK
	}
	x := &p.state
	cur := out.CurrentA[n:][:count]
	timeS, soc, temp := out.TimeS[n:][:count], out.SOC[n:][:count], out.TemperatureC[n:][:count]
	volt, voltB := out.VoltageV[n:][:count], out.VoltageBeforeV[n:][:count]
	curB, meanA := out.CurrentBeforeA[n:][:count], out.CurrentMeanA[n:][:count]
	if p.k == 0 {
		p.iA, p.meanA = cur[0], cur[0]
	}
	steps := p.drawWalk(count)
	j := 0
	for ; j < len(cur); j++ {
		i := cur[j]
		g := p.view.Segment(x.SOC)
		t := x.SOC - g.Ref
		ocv, r0 := g.OCV.At(t), g.R0.At(t)
		u := ocv
		if m.Hysteretic {
			u += g.HalfGapV.At(t) * x.Hysteresis
		}
		for b := range m.N {
			u -= x.BranchV[b]
		}
		before := u - p.iA*r0*p.r0Factor
		factor, walked := p.r0Factor, p.walkFactor
		if walkStd > 0 && p.k > 0 {
			walked *= cell.Exp(walkStd * steps[j])
			factor = walked * (1 + set.R0DriftPerH*(p.tS*hPerS))
		}
		v := u - i*r0*factor
		moved := i * perA
		if i < 0 {
			moved *= m.Efficiency
		}
		if i > 0 && !(x.SOC > 0 && v >= vMin) || i < 0 && !(x.SOC-moved <= 1 && x.SOC < 1 && v <= vMax) || x.SOC != x.SOC {
			break
		}
		p.r0Factor, p.walkFactor = factor, walked
		timeS[j], soc[j], temp[j] = p.tS, x.SOC, p.tempC
		volt[j], voltB[j] = v, before
		curB[j], meanA[j] = p.iA, p.meanA

		tempC := p.tempC
		if th != nil {
			q := i*(ocv-v) - i*(tempC+kelvin)*p.view.OCVSlopeVPerK(x.SOC)
			p.out.HeatJ += q * period
			if th.ConductanceWPerK == 0 {
				tempC += q * period / th.HeatCapacityJPerK
			} else {
				settled := set.AmbientC + q*perW
				tempC = settled + (tempC-settled)*p.heatRise
			}
		}
		for b := range m.N {
			a, rise := m.Decay[b], m.Rise[b]
			if !m.TauFixed[b] {
				a, rise = cell.Decay(period, m.Tau(b, g, t))
			}
			x.BranchV[b] = a*x.BranchV[b] + g.R[b].At(t)*rise*i
		}
		if m.Hysteretic {
			x.Hysteresis = cell.StepHysteresis(x.Hysteresis, i, m.Rate, moved)
		}
		x.SOC -= moved
		if tempC != p.tempC {
			p.tempC = tempC
			p.view.SetTemperature(tempC)
		}
		p.iA, p.meanA = i, i
		p.k++
		p.tS = float64(p.k) * period
		if drifts {
			if p.refresh(); p.done {
				j++
				break
			}
			perA = perAh / p.capacityAh
		}
	}
	p.drewWalk(count, j)
	p.limited, p.holding = false, false
	p.out.Samples = p.k
	return j
}

// drawWalk returns the numbers R0 walks by at the next count samples, in step
// with a draw at every sample but the run's first.
func (p *Plant) drawWalk(count int) []float64 {
	if p.set.R0WalkPerSqrtH == 0 {
		return nil
	}
	if cap(p.steps) < count {
		p.steps = make([]float64, max(count, 256))
	}
	steps := p.steps[:count]
	p.walkBefore = p.walk
	first := 0
	if p.k == 0 {
		first = 1
	}
	p.walk.Normals(steps[first:])
	return steps
}

// drewWalk takes back the draws of samples that were not given.
func (p *Plant) drewWalk(count, used int) {
	if p.set.R0WalkPerSqrtH == 0 || used == count {
		return
	}
	p.walk = p.walkBefore
	first := 0
	if p.k == int64(used) { // they were the run's first
		first = 1
	}
	if used > first {
		p.walk.Normals(p.steps[:used-first])
	}
}

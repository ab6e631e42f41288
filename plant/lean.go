package plant

import (
	"math"

	"soctrial/plant/duty"
)

// runLean is the plain case written out: up to two branches of fixed time
// constants, one temperature, no hysteresis or drift, demands of current
// without stops. It gives samples from n on until the block is full or
// something else is needed; the caller's general path then takes one sample.
// Both paths are the same arithmetic.
func (p *Plant) runLean(out *Truth, n int) int {
	m, c := p.model, p.model.Cell
	period := p.set.PeriodS
	perAs := 1 / (3600 * p.capacityAh)
	a1, b1, a2, b2 := m.Decay[0], m.Rise[0], m.Decay[1], m.Rise[1]
	z, v1, v2 := p.state.SOC, p.state.BranchV[0], p.state.BranchV[1]
	vMax, vMin := c.VoltageMaxV+voltageTolV, c.VoltageMinV-voltageTolV
	before, mean := p.iA, p.meanA
	k, tK := p.k, p.tS
	room := out.Len()
	timeS, soc, cur, volt := out.TimeS[:room], out.SOC[:room], out.CurrentA[:room], out.VoltageV[:room]
	curB, voltB, meanA, temp := out.CurrentBeforeA[:room], out.VoltageBeforeV[:room], out.CurrentMeanA[:room], out.TemperatureC[:room]
	ready := true
	for n < room && ready {
		d := p.cur.Demand()
		for d.EndS <= tK+tolS(tK) {
			p.tS = tK
			p.cur.Next()
			p.entered()
			if p.cur.Done() {
				break
			}
			d = p.cur.Demand()
		}
		if p.cur.Done() || d.Quantity != duty.CurrentDemand || len(p.cur.Stops()) > 0 {
			break
		}
		next := float64(k+1) * period
		if d.EndS < next-tolS(next) {
			break
		}
		i := d.Value
		g := p.view.Segment(z)
		t := z - g.Ref
		r0 := g.R0.At(t)
		u := g.OCV.At(t) - v1 - v2
		v := u - i*r0
		moved := i * period * perAs
		if i > 0 {
			if z <= 0 || v < vMin {
				break
			}
		} else if i < 0 {
			moved *= m.Efficiency
			if z-moved > 1 || z >= 1 || v > vMax {
				break
			}
		}
		if k == 0 {
			before, mean = i, i
		}
		timeS[n] = tK
		soc[n] = z
		cur[n] = i
		volt[n] = v
		curB[n] = before
		voltB[n] = u - before*r0
		meanA[n] = mean
		temp[n] = p.tempC
		v1 = a1*v1 + g.R[0].At(t)*b1*i
		v2 = a2*v2 + g.R[1].At(t)*b2*i
		z -= moved
		before, mean = i, i
		tK = next
		k++
		n++
		ready = !math.IsNaN(z)
	}
	p.state.SOC, p.state.BranchV[0], p.state.BranchV[1] = z, v1, v2
	p.iA, p.meanA, p.limited, p.holding = before, mean, false, false
	p.k, p.tS, p.out.Samples = k, tK, k
	p.fresh = noFreshUnlessStops(p)
	return n
}

// noFreshUnlessStops forgets scopes without stops that began in the lean loop.
func noFreshUnlessStops(p *Plant) int {
	if p.cur.Done() || len(p.cur.Stops()) == 0 {
		return noFresh
	}
	return p.fresh
}

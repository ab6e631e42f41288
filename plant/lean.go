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
	room := out.Len()
	for n < room {
		if !p.leanDemand() {
			return n
		}
		saved := p.cur
		// as many currents as the duty can tell at once, straight into their column
		told := p.cur.Currents(out.CurrentA[n:room], p.k, p.set.PeriodS, tolS(float64(p.k)*p.set.PeriodS))
		if told == 0 {
			return n
		}
		used := p.leanSamples(out, n, told)
		if used < told { // a limit: go back to the demand at the sample that met it
			p.cur = saved
			p.cur.Currents(out.CurrentA[n:n+used], p.k-int64(used), p.set.PeriodS, tolS(float64(p.k)*p.set.PeriodS))
			return n + used
		}
		n += used
	}
	return n
}

// leanDemand passes over demands whose time is up and reports whether what
// holds now is a current without stops.
func (p *Plant) leanDemand() bool {
	for !p.cur.Done() && p.cur.EndS() <= p.tS+tolS(p.tS) {
		p.cur.Next()
		p.entered()
	}
	if p.cur.Done() || p.cur.Demand().Quantity != duty.CurrentDemand || len(p.cur.Stops()) > 0 {
		return false
	}
	p.fresh = noFresh
	return true
}

// leanSamples gives count samples from n on, whose currents are in their
// column already; fewer where a limit is met.
func (p *Plant) leanSamples(out *Truth, n, count int) int {
	m, c := p.model, p.model.Cell
	period := p.set.PeriodS
	a1, b1, a2, b2 := m.Decay[0], m.Rise[0], m.Decay[1], m.Rise[1]
	z, v1, v2 := p.state.SOC, p.state.BranchV[0], p.state.BranchV[1]
	vMax, vMin := c.VoltageMaxV+voltageTolV, c.VoltageMinV-voltageTolV
	full := 3600 * p.capacityAh
	perA := [2]float64{period / full, period / full * m.Efficiency} // discharge, charge
	cur := out.CurrentA[n:][:count]
	timeS, soc, volt := out.TimeS[n:][:count], out.SOC[n:][:count], out.VoltageV[n:][:count]
	curB, voltB, meanA := out.CurrentBeforeA[n:][:count], out.VoltageBeforeV[n:][:count], out.CurrentMeanA[n:][:count]
	before, mean := p.iA, p.meanA
	if p.k == 0 {
		before, mean = cur[0], cur[0]
	}
	k := p.k
	g := p.view.Segment(z)
	j := 0
	for ; j < len(cur); j++ {
		i := cur[j]
		if !(z >= g.Lo && z < g.Hi) {
			g = p.view.Segment(z)
		}
		t := z - g.Ref
		tt := t * t
		r0 := (g.R0.Y + t*g.R0.B) + tt*(g.R0.C+t*g.R0.D)
		u := (g.OCV.Y + t*g.OCV.B) + tt*(g.OCV.C+t*g.OCV.D) - (v1 + v2)
		v := u - i*r0
		left := z - i*perA[math.Float64bits(i)>>63]
		if !(z > 0 && z < 1 && left <= 1 && v >= vMin && v <= vMax) { // near a limit; which way the current flows is asked only then
			if i > 0 && !(z > 0 && v >= vMin) || i < 0 && !(left <= 1 && z < 1 && v <= vMax) || z != z {
				break
			}
		}
		timeS[j] = float64(k) * period
		soc[j] = z
		volt[j] = v
		curB[j] = before
		voltB[j] = u - before*r0
		meanA[j] = mean
		r1 := (g.R[0].Y + t*g.R[0].B) + tt*(g.R[0].C+t*g.R[0].D)
		r2 := (g.R[1].Y + t*g.R[1].B) + tt*(g.R[1].C+t*g.R[1].D)
		v1 = a1*v1 + r1*(b1*i)
		v2 = a2*v2 + r2*(b2*i)
		z = left
		before, mean = i, i
		k++
	}
	temp := out.TemperatureC[n:][:j]
	for x := range temp {
		temp[x] = p.tempC
	}
	p.state.SOC, p.state.BranchV[0], p.state.BranchV[1] = z, v1, v2
	p.iA, p.meanA, p.limited, p.holding = before, mean, false, false
	p.k, p.tS, p.out.Samples = k, float64(k)*period, k
	return j
}

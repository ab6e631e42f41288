package plant

import (
	"math"

	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

// runFast is the usual case written out: demands of current without stops that
// change at samples, one step a sample. It gives samples from n on until the
// block is full or something else is needed; the caller's general path then
// takes one sample. The paths are the same arithmetic.
func (p *Plant) runFast(out *Truth, n int) int {
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
		var used int
		if p.lean {
			used = p.leanSamples(out, n, told)
		} else {
			used = p.richSamples(out, n, told)
		}
		if p.done {
			return n + used
		}
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

// leanSamples is the plain cell: up to two branches of fixed time constants,
// one temperature, no hysteresis or drift. It gives count samples from n on, whose currents are in their
// column already; fewer where a limit is met. While SOC stays inside one
// interval of the tables that touches neither end, only the voltage can meet
// one.
func (p *Plant) leanSamples(out *Truth, n, count int) int {
	m, c := p.model, p.model.Cell
	a1, a2 := m.Decay[0], m.Decay[1]
	z, v1, v2 := p.state.SOC, p.state.BranchV[0], p.state.BranchV[1]
	vMax, vMin := c.VoltageMaxV+voltageTolV, c.VoltageMinV-voltageTolV
	perA := p.leanPerA()
	cur := out.CurrentA[n:][:count]
	soc, volt, voltB := out.SOC[n:][:count], out.VoltageV[n:][:count], out.VoltageBeforeV[n:][:count]
	before := p.iA
	if p.k == 0 {
		before, p.meanA = cur[0], cur[0]
	}
	firstBefore, firstMean := before, p.meanA
	var g leanSegment
	g.hi = math.Inf(-1) // none yet
	j := 0
	for ; j < len(cur); j++ {
		i := cur[j]
		left := z - i*perA[math.Float64bits(i)>>63]
		if !(z >= g.lo && left >= g.lo && z < g.hi && left < g.hi) {
			if i > 0 && !(z > 0) || i < 0 && !(left <= 1 && z < 1) || z != z {
				break
			}
			g.load(m, p.view.Segment(z))
		}
		t := z - g.ref
		tt := t * t
		r0 := (g.r0.Y + t*g.r0.B) + tt*(g.r0.C+t*g.r0.D)
		u := (g.ocv.Y + t*g.ocv.B) + tt*(g.ocv.C+t*g.ocv.D) - (v1 + v2)
		v := u - i*r0
		if !(v >= vMin && v <= vMax) && (i > 0 && !(v >= vMin) || i < 0 && !(v <= vMax)) {
			break
		}
		soc[j] = z
		volt[j] = v
		voltB[j] = u - before*r0
		v1 = a1*v1 + ((g.r1.Y+t*g.r1.B)+tt*(g.r1.C+t*g.r1.D))*i
		v2 = a2*v2 + ((g.r2.Y+t*g.r2.B)+tt*(g.r2.C+t*g.r2.D))*i
		z = left
		before = i
	}
	p.fillLean(out, n, j, firstBefore, firstMean)
	p.state.SOC, p.state.BranchV[0], p.state.BranchV[1] = z, v1, v2
	if j > 0 {
		p.iA, p.meanA = before, before
	}
	p.limited, p.holding = false, false
	p.k += int64(j)
	p.tS, p.out.Samples = float64(p.k)*p.set.PeriodS, p.k
	return j
}

// leanPerA is what 1 A moves of the SOC in a sample, on discharge and on
// charge.
func (p *Plant) leanPerA() [2]float64 {
	x := p.set.PeriodS / (3600 * p.capacityAh)
	return [2]float64{x, x * p.model.Efficiency}
}

// leanSegment is an interval of the tables with the branches' rise over a
// sample multiplied in.
type leanSegment struct {
	lo, hi, ref     float64
	ocv, r0, r1, r2 cell.Cubic
}

func (g *leanSegment) load(m *cell.Model, s *cell.Segment) {
	scaled := func(q cell.Cubic, f float64) cell.Cubic {
		return cell.Cubic{Y: q.Y * f, B: q.B * f, C: q.C * f, D: q.D * f}
	}
	*g = leanSegment{lo: s.Lo, hi: s.Hi, ref: s.Ref, ocv: s.OCV, r0: s.R0, r1: scaled(s.R[0], m.Rise[0]), r2: scaled(s.R[1], m.Rise[1])}
	if !(g.lo > 0 && g.hi <= 1) { // SOC may meet a limit in here: look at every sample
		g.hi = math.Inf(-1)
	}
}

// fillLean fills in the columns that follow from the others.
func (p *Plant) fillLean(out *Truth, n, count int, firstBefore, firstMean float64) {
	if count == 0 {
		return
	}
	timeS, temp := out.TimeS[n:][:count], out.TemperatureC[n:][:count]
	period, tempC := p.set.PeriodS, p.tempC
	for j := range timeS {
		timeS[j] = float64(p.k+int64(j)) * period
		temp[j] = tempC
	}
	cur := out.CurrentA[n:][:count]
	curB, meanA := out.CurrentBeforeA[n:][:count], out.CurrentMeanA[n:][:count]
	curB[0], meanA[0] = firstBefore, firstMean
	copy(curB[1:], cur)
	copy(meanA[1:], cur)
}

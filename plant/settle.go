package plant

import (
	"fmt"
	"math"

	"soctrial/plant/duty"
)

// tolS is how far two instants may lie apart and still be one: some rounding
// of k·period against the sum of a leg's start, passes and edge.
func tolS(tS float64) float64 { return 4e-15 * (1 + math.Abs(tS)) }

// entered notes that scopes have begun, whose stops are to be armed.
func (p *Plant) entered() {
	if d := p.cur.Entered(); d >= 0 {
		p.fresh = min(p.fresh, d)
		p.legStartS = p.tS
	}
}

// settle works out the current that flows from now on: it passes over demands
// whose time is up, leaves legs whose stop is met, and minds the limits. It
// may end the duty.
func (p *Plant) settle() {
	u, r0 := p.view.Rest(&p.state), p.view.R0(p.state.SOC)*p.r0Factor
	for {
		tol := tolS(p.tS)
		for !p.cur.Done() && p.cur.Demand().EndS <= p.tS+tol {
			p.cur.Next()
			p.entered()
		}
		if p.cur.Done() {
			p.finish("")
			return
		}
		if p.tS-p.legStartS > legCapS && math.IsInf(p.cur.Demand().EndS, 1) {
			p.finish(fmt.Sprintf("leg %d met no stop in %g s", p.cur.Leg(), float64(legCapS)))
			return
		}
		i, ok := p.demanded(u, r0)
		if !ok {
			p.finish(ReasonPower)
			return
		}
		if p.stopped(i, u-i*r0, false) {
			continue
		}
		if p.limit(&i, u, r0); p.done {
			return
		}
		if p.stopped(i, u-i*r0, true) {
			continue
		}
		p.iA, p.fresh = i, noFresh
		return
	}
}

// demanded returns the current that meets the demand at rest voltage u and
// series resistance r0; false where no current does.
func (p *Plant) demanded(u, r0 float64) (float64, bool) {
	d := p.cur.Demand()
	p.holding = false
	switch d.Quantity {
	case duty.PowerDemand:
		return powerCurrent(d.Value, u, r0)
	case duty.VoltageDemand:
		p.holding = true
		if r0 == 0 {
			p.finish("hold-voltage needs a series resistance: R0 is 0")
			return 0, true
		}
		return (u - d.Value) / r0, true
	}
	return d.Value, true
}

// powerCurrent returns the current that meets powerW: the smaller root of
// R0·i² - U·i + P = 0, written so that R0 = 0 is included.
func powerCurrent(powerW, u, r0 float64) (float64, bool) {
	if powerW == 0 {
		return 0, true
	}
	root := u*u - 4*r0*powerW
	if !(root >= 0) || u <= 0 {
		return 0, false
	}
	return 2 * powerW / (u + math.Sqrt(root)), true
}

// stopped tests the active stops, on SOC and voltage under the demanded
// current, or on the current that is left after the limits. Where one is met it
// leaves that leg and reports true.
func (p *Plant) stopped(currentA, voltageV float64, onCurrent bool) bool {
	if p.done {
		return false
	}
	stops := p.cur.Stops()
	for n := range stops {
		s := &stops[n]
		if (s.Quantity == duty.StopCurrent) != onCurrent {
			continue
		}
		began := s.Depth >= p.fresh
		if !p.met(n, s, currentA, voltageV, began) {
			continue
		}
		if began {
			p.notice("leg %d skipped: its stop was met already when it began", s.Leg)
		}
		p.cur.Leave(s.Depth, p.tS)
		p.entered()
		return true
	}
	return false
}

func (p *Plant) met(n int, s *duty.Stop, currentA, voltageV float64, began bool) bool {
	if s.Quantity == duty.StopCurrent {
		return math.Abs(currentA) <= s.Value
	}
	q := voltageV
	if s.Quantity == duty.StopSOC {
		q = p.state.SOC
	}
	side := s.Side
	if side == duty.SideAsBegun && n < maxStops {
		if began {
			p.armed[n] = duty.SideFalling
			if q < s.Value {
				p.armed[n] = duty.SideRising
			}
		}
		side = p.armed[n]
	}
	if side == duty.SideFalling {
		return q <= s.Value
	}
	return q >= s.Value
}

// limit cuts a current back to what the cell allows, or ends the duty.
func (p *Plant) limit(i *float64, u, r0 float64) {
	p.limited = false
	c := p.model.Cell
	if *i < 0 {
		full := p.state.SOC >= 1
		if !full && u-*i*r0 <= c.VoltageMaxV+voltageTolV {
			return
		}
		if p.cur.AtLimit() == duty.End {
			p.finish(ReasonVoltageMax)
			if full {
				p.out.Reason = ReasonFull
			}
			return
		}
		p.limited = true
		if full || r0 == 0 {
			*i = 0
			return
		}
		*i = min(0, (u-c.VoltageMaxV)/r0)
		p.holding = *i < 0
		return
	}
	if *i == 0 {
		return
	}
	empty := p.state.SOC <= 0
	if !empty && u-*i*r0 >= c.VoltageMinV-voltageTolV {
		return
	}
	if p.cur.AtLimit() != duty.Cut {
		p.finish(ReasonVoltageMin)
		if empty {
			p.out.Reason = ReasonEmpty
		}
		return
	}
	p.limited = true
	if empty || r0 == 0 {
		*i = 0
		return
	}
	*i = max(0, (u-c.VoltageMinV)/r0)
	p.holding = *i > 0
}

package duty

import (
	"fmt"
	"math"
)

// Program is a duty made ready to be walked. It is read-only.
type Program struct {
	root node
}

// node is a leg made ready: a leaf with its values, or a group.
type node struct {
	kind     Kind
	key      string // the TOML file's, for messages
	repeat   int
	children []node
	topLeg   int     // 1-based, 0 for the root
	atLimit  AtLimit // of the innermost scope that says
	stops    []Stop  // all that are active in it, outermost first

	// A leaf's pass: value[k] holds from at[k] on; it lasts passS.
	quantity Quantity
	at       []float64
	value    []float64
	stepS    float64 // at[k] is k·stepS to the bit; 0: uneven
	passS    float64 // a leaf's length, a group's cap; +Inf: none
	pulseS   float64 // pulses

	// regular says that nothing but a stop of its own or around it makes it
	// last other than totalS; exact, that it has none of its own.
	regular, exact bool
	ownStops       bool
	eachS          float64 // a pass, at most
	totalS         float64 // all passes
	// offset is when each child begins, counted from the last irregular one
	// before it.
	offset []float64
}

// Compile makes d ready for a cell of nameplate capacityAh, > 0 and finite. The
// error is d.Validate's, or a *ValueError where what a leg asks for is too
// large to be a number.
func Compile(d *Duty, capacityAh float64) (*Program, error) {
	if err := d.Validate(); err != nil {
		return nil, err
	}
	if !positive.ok(capacityAh) {
		return nil, bad("capacity_ah", capacityAh, positive.allowed)
	}
	b := builder{duty: d, capacityAh: capacityAh}
	p := &Program{root: node{kind: Group, repeat: 1, passS: math.Inf(1)}}
	for i := range d.Legs {
		n := b.node(&d.Legs[i], fmt.Sprintf("leg[%d]", i), 0, i+1, nil, "")
		p.root.children = append(p.root.children, n)
	}
	if b.err != nil {
		return nil, b.err
	}
	p.root.measure()
	return p, nil
}

type builder struct {
	duty       *Duty
	capacityAh float64
	err        error // the first
}

func (b *builder) node(l *Leg, key string, depth, topLeg int, outer []Stop, atLimit AtLimit) node {
	n := node{kind: l.Kind, key: key, repeat: max(1, l.Repeat), topLeg: topLeg, atLimit: atLimit, passS: math.Inf(1)}
	if l.AtLimit != "" {
		n.atLimit = l.AtLimit
	}
	own := b.stopsOf(l, depth, topLeg)
	n.stops, n.ownStops = append(outer[:len(outer):len(outer)], own...), len(own) > 0
	if given(l.DurationS) {
		n.passS = l.DurationS
	}
	if l.Kind == Group {
		for i := range l.Legs {
			n.children = append(n.children, b.node(&l.Legs[i], fmt.Sprintf("%s.leg[%d]", key, i), depth+1, topLeg, n.stops, n.atLimit))
		}
	} else {
		b.leaf(&n, l)
		n.stepS = evenStepS(n.at)
		b.finite(&n)
	}
	n.measure()
	return n
}

// finite checks that what a leaf asks for is a number.
func (b *builder) finite(n *node) {
	for k, v := range n.value {
		if !finiteNumber.ok(v) && b.err == nil {
			b.err = bad(n.key, fmt.Sprintf("%g asked for from %g s on", v, n.at[k]), "currents and powers that are finite numbers")
		}
	}
}

// evenStepS returns the one distance of all changes, or 0.
func evenStepS(at []float64) float64 {
	if len(at) < 2 {
		return 0
	}
	for k := range at {
		if at[k] != float64(k)*at[1] {
			return 0
		}
	}
	return at[1]
}

// measure works out how long the node lasts, where that is known.
func (n *node) measure() {
	pass := n.passS
	n.regular = true
	if n.kind == Group {
		var sum, since float64
		for i := range n.children {
			c := &n.children[i]
			n.offset = append(n.offset, since)
			sum += c.totalS
			since += c.totalS
			if !c.regular { // what follows counts from its real end
				since = 0
			}
			n.regular = n.regular && c.exact
		}
		pass = min(pass, sum)
	}
	n.eachS, n.totalS = pass, pass*float64(n.repeat)
	n.regular = n.regular && !math.IsInf(n.totalS, 1)
	n.exact = n.regular && !n.ownStops
}

func (b *builder) stopsOf(l *Leg, depth, topLeg int) []Stop {
	side := SideAsBegun
	signed := 0.0
	switch l.Kind {
	case Current:
		signed = b.currentA(l)
	case Power:
		signed = l.PowerW
	}
	if signed > 0 {
		side = SideFalling
	} else if signed < 0 {
		side = SideRising
	}
	var out []Stop
	if given(l.UntilSOC) {
		out = append(out, Stop{StopSOC, side, l.UntilSOC, depth, topLeg})
	}
	if given(l.UntilVoltageV) {
		out = append(out, Stop{StopVoltage, side, l.UntilVoltageV, depth, topLeg})
	}
	below := -1.0 // of two, the larger is met first
	if given(l.UntilCurrentA) {
		below = l.UntilCurrentA
	}
	if given(l.UntilCRate) {
		below = max(below, l.UntilCRate*b.capacityAh)
	}
	if below >= 0 {
		out = append(out, Stop{StopCurrent, SideFalling, below, depth, topLeg})
	}
	return out
}

func (b *builder) currentA(l *Leg) float64 {
	if given(l.CRate) {
		return l.CRate * b.capacityAh
	}
	return l.CurrentA
}

// leaf fills in the values of one pass.
func (b *builder) leaf(n *node, l *Leg) {
	switch l.Kind {
	case Rest:
		n.constant(CurrentDemand, 0)
	case Current:
		n.constant(CurrentDemand, b.currentA(l))
	case Power:
		n.constant(PowerDemand, l.PowerW)
	case HoldVoltage:
		n.constant(VoltageDemand, l.VoltageV)
	case Pulses:
		b.pulses(n, l)
	case Trace:
		n.quantity = CurrentDemand
		values := l.TraceA
		if values == nil {
			n.quantity, values = PowerDemand, l.TraceW
		}
		last := len(l.TimeS) - 1
		n.pieces(l.TimeS[:last], values[:last], l.TimeS[last], values[last])
	case Speed:
		b.speed(n, l, l.TimeS, l.SpeedMps)
	case Profile:
		b.profile(n, l)
	}
}

func (n *node) constant(q Quantity, v float64) {
	n.quantity, n.at, n.value = q, []float64{0}, []float64{v}
}

// pieces sets a pass that changes at times at and is over at endS. Where the
// leg's duration is longer, after flows until then; where it is shorter, the
// pass is cut. Of values at one time the last counts.
func (n *node) pieces(at, value []float64, endS, after float64) {
	for k := range at {
		end := endS
		if k+1 < len(at) {
			end = at[k+1]
		}
		if end > at[k] && at[k] < n.passS {
			n.at, n.value = append(n.at, at[k]), append(n.value, value[k])
		}
	}
	if math.IsInf(n.passS, 1) {
		n.passS = endS
	} else if n.passS > endS {
		n.at, n.value = append(n.at, endS), append(n.value, after)
	}
}

// steps is pieces from durations.
func (n *node) steps(q Quantity, steps []span, scale float64) {
	n.quantity = q
	var at, value []float64
	end := 0.0
	for _, s := range steps {
		if s.durationS > 0 {
			at, value = append(at, end), append(value, s.share*scale)
		}
		end += s.durationS
	}
	n.pieces(at, value, end, value[len(value)-1])
}

func (b *builder) pulses(n *node, l *Leg) {
	i := b.currentA(l)
	n.pulseS = l.PulseS
	count := max(1, l.Count)
	var steps []span
	for g := range count {
		steps = append(steps, span{l.PulseS, i}, span{l.RestS, 0})
		if given(l.ReturnRatio) && l.ReturnRatio > 0 {
			steps = append(steps, span{l.PulseS, -l.ReturnRatio * i}, span{l.RestS, 0})
		}
		if g+1 < count && given(l.SOCStep) && l.SOCStep > 0 {
			step := math.Copysign(l.StepCRate*b.capacityAh, i)
			steps = append(steps, span{l.SOCStep * 3600 / l.StepCRate, step})
			if given(l.StepRestS) {
				steps = append(steps, span{l.StepRestS, 0})
			}
		}
	}
	n.steps(CurrentDemand, steps, 1)
}

func (b *builder) speed(n *node, l *Leg, timeS, speedMps []float64) {
	v := l.Vehicle
	if v == nil {
		v = b.duty.Vehicle
	}
	n.quantity = PowerDemand
	last := len(timeS) - 1
	power := make([]float64, last)
	for k := range power {
		power[k] = v.PowerW(speedMps[k], speedMps[k+1], timeS[k+1]-timeS[k])
	}
	end := speedMps[last]
	n.pieces(timeS[:last], power, timeS[last], v.PowerW(end, end, 1))
}

func (b *builder) profile(n *node, l *Leg) {
	switch l.ProfileName {
	case "dst":
		n.steps(PowerDemand, dstSteps(), l.PeakPowerW)
	case "nedc":
		t, v := NEDC()
		b.speed(n, l, t, v)
	default:
		n.steps(CurrentDemand, pulseSteps(l.ProfileName), b.currentA(l))
	}
}

// TotalS returns how long the duty lasts; where stops or legs without an end
// of their own leave that open, it is a bound, perhaps +Inf, and exact is
// false.
func (p *Program) TotalS() (totalS float64, exact bool) { return p.root.totalS, p.root.exact }

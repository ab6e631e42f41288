package job

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"soctrial/benches/define"
	"soctrial/plant/duty"
)

// duty shows a duty's legs and what it asks in all.
func (s *Shown) duty(o *ShowOptions) error {
	d, _, err := define.ReadDuty(o.Path, readTrace)
	if err != nil {
		return err
	}
	s.Name = d.Name
	// All asked charge is a·1 Ah + b·capacity: two capacities tell both.
	one, err := duty.Compile(d, 1)
	if err != nil {
		return err
	}
	two, err := duty.Compile(d, 2)
	if err != nil {
		return err
	}
	totalS, exact := one.TotalS()
	switch {
	case exact && !math.IsInf(totalS, 0):
		s.fact("length", "%s", duration(totalS))
	case !math.IsInf(totalS, 0):
		s.fact("length", "at most %s: stops may end legs sooner", duration(totalS))
	default:
		s.fact("length", "open: stops end it")
	}
	a, b := askedOf(one), askedOf(two)
	if a.whole {
		s.fact("asks for", "%s", asked(2*a.ah-b.ah, b.ah-a.ah, a.wh))
	}
	rows := [][]string{{"leg", "kind", "asks", "lasts", "repeat", "stops"}}
	s.Tables = append(s.Tables, ShownTable{"Legs", addLegs(rows, d.Legs, "")})
	if o.PicturePath != "" {
		return drawDuty(o.PicturePath, d.Name, one)
	}
	return nil
}

// sums are the charge and energy a program asks for where no stop is met.
type sums struct {
	ah, wh float64
	whole  bool // every demand has an end and is a current or a power
}

func askedOf(p *duty.Program) sums {
	const most = 5_000_000
	out := sums{whole: true}
	c := p.Start()
	t := 0.0
	for n := 0; !c.Done(); n++ {
		d := c.Demand()
		if math.IsInf(d.EndS, 0) || d.Quantity == duty.VoltageDemand || n == most {
			out.whole = false
			return out
		}
		if d.Quantity == duty.CurrentDemand {
			out.ah += d.Value * (d.EndS - t) / 3600
		} else {
			out.wh += d.Value * (d.EndS - t) / 3600
		}
		t = d.EndS
		c.Next()
	}
	return out
}

func asked(ah, capacities, wh float64) string {
	var parts []string
	for _, x := range []struct {
		value float64
		unit  string
	}{{ah, "Ah"}, {capacities, "times the nameplate capacity"}, {wh, "Wh"}} {
		if math.Abs(x.value) > 1e-9 {
			parts = append(parts, fmt.Sprintf("%.4g %s", x.value, x.unit))
		}
	}
	if len(parts) == 0 {
		return "nothing net"
	}
	return strings.Join(parts, " and ") + " net, discharge positive"
}

// addLegs adds a row a leg, those of a group set in under it.
func addLegs(rows [][]string, legs []duty.Leg, inset string) [][]string {
	for i := range legs {
		l := &legs[i]
		lasts := "-"
		if l.DurationS > 0 {
			lasts = short3(l.DurationS) + " s"
		} else if n := len(l.TimeS); n > 0 {
			lasts = short3(l.TimeS[n-1]) + " s"
		}
		rows = append(rows, []string{inset + strconv.Itoa(i+1), string(l.Kind), legAsks(l), lasts, strconv.Itoa(max(1, l.Repeat)), legStops(l)})
		rows = addLegs(rows, l.Legs, inset+strconv.Itoa(i+1)+".")
	}
	return rows
}

func legAsks(l *duty.Leg) string {
	current := func() string {
		if !math.IsNaN(l.CRate) {
			return short3(l.CRate) + " C"
		}
		return short3(l.CurrentA) + " A"
	}
	switch l.Kind {
	case duty.Current:
		return current()
	case duty.Power:
		return short3(l.PowerW) + " W"
	case duty.HoldVoltage:
		return short3(l.VoltageV) + " V"
	case duty.Pulses:
		return fmt.Sprintf("%d × %s for %g s, rest %g s", l.Count, current(), l.PulseS, l.RestS)
	case duty.Trace:
		what, x := "A", l.TraceA
		if l.TraceW != nil {
			what, x = "W", l.TraceW
		}
		low, high := rangeOf(x)
		return fmt.Sprintf("%d points, %.3g to %.3g %s", len(l.TimeS), low, high, what)
	case duty.Speed:
		low, high := rangeOf(l.SpeedMps)
		return fmt.Sprintf("%d points, %.3g to %.3g m/s", len(l.TimeS), low, high)
	case duty.Profile:
		return l.ProfileName
	}
	return ""
}

func legStops(l *duty.Leg) string {
	var out []string
	for _, x := range []struct {
		what  string
		value float64
	}{{"SOC", l.UntilSOC}, {"V", l.UntilVoltageV}, {"A", l.UntilCurrentA}, {"C", l.UntilCRate}} {
		if !math.IsNaN(x.value) {
			out = append(out, fmt.Sprintf("%s %g", x.what, x.value))
		}
	}
	return strings.Join(out, ", ")
}

// rangeOf returns the least and the largest of x that are numbers; NaN where
// there is none.
func rangeOf(x []float64) (low, high float64) {
	low, high = math.NaN(), math.NaN()
	for _, v := range x {
		if !math.IsNaN(v) && !(v >= low) {
			low = v
		}
		if !math.IsNaN(v) && !(v <= high) {
			high = v
		}
	}
	return low, high
}

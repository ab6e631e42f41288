package noise

import (
	"math"

	"soctrial/plant/record"
)

// Disturb does to the next samples of a recorded test what Read does to truth:
// it writes to out the readings in, with the chain's faults put on top. Both
// have one length, else it panics; out may be in itself. A run is either read
// or disturbed, not both.
//
// What a record does not know is taken from what it does: times are the
// record's own and may be uneven, so walk, stuck and dropout go by their
// differences and every counts samples; out.CurrentReading and out.PeriodS are
// in's. A missing reading stays missing, and nothing is held or counted there.
// The temperature of offset_per_k is the last one recorded, at first that of
// reference. A delayed reading is looked up among the existing ones: an instant
// current holds from its sample on, voltage and temperature run straight
// between samples, a mean current is that of the shifted interval; before the
// first reading all is as there.
//
// It allocates only for a block longer, or a delay over more samples, than any
// before it.
func (c *Chain) Disturb(in, out *record.Readings) {
	n := in.Len()
	if n == 0 {
		return
	}
	c.work, c.dtS, c.aboveRefK = grow(c.work, n), grow(c.dtS, n), grow(c.aboveRefK, n)
	beforeS := c.lastS
	if !c.begun {
		c.begun, beforeS = true, in.TimeS[0]
	}
	c.lastS = beforeS
	for k, t := range in.TimeS {
		c.dtS[k] = math.Max(t-c.lastS, 0)
		c.lastS = t
		if now := in.TemperatureC[k]; !math.IsNaN(now) {
			c.lastC = now
		}
		c.aboveRefK[k] = c.lastC - c.set.TemperatureRefC
	}
	dt := spacing{dtS: c.dtS}
	if in.PeriodS > 0 {
		dt = spacing{periodS: in.PeriodS}
	}
	out.PeriodS, out.CurrentReading = in.PeriodS, in.CurrentReading
	copy(out.TimeS[:n], in.TimeS)

	columns := [...][2][]float64{{in.CurrentA, out.CurrentA}, {in.VoltageV, out.VoltageV}, {in.TemperatureC, out.TemperatureC}}
	for s := range c.sensors {
		x, from, to := &c.sensors[s], columns[s][0][:n], columns[s][1][:n]
		if x.past.delayS > 0 {
			switch {
			case s > 0:
				x.past.linear(in.TimeS, from, to)
			case in.CurrentReading == record.IntervalMean:
				x.past.mean(in.TimeS, from, to, beforeS)
			default:
				x.past.held(in.TimeS, from, to)
			}
			from = to
		}
		x.read(from, c.aboveRefK, to, c.work, dt)
	}
}

package noise

import (
	"fmt"

	"soctrial/plant"
	"soctrial/plant/record"
)

// Setup is one scenario's sensors.
type Setup struct {
	Sensors         Sensors
	Seed            uint64  // the scenario's
	TemperatureRefC float64 // of the cell; offset_per_k counts from it
	// Samples is how many samples the run has at most, or 0 where that is not
	// known; it only spares memory for a delay longer than the run.
	Samples int
}

// Chain is a sensor set in operation. It remembers what its links need, of
// constant size, and never goes back. The zero Chain is ready for Reset.
type Chain struct {
	set              Setup
	sensors          [3]sensor // current, voltage, temperature
	needsTemperature bool

	work      []float64 // a block of scratch
	aboveRefK []float64 // T - T_ref
	dtS       []float64 // for Disturb

	lastS, lastC float64 // for Disturb: the sample before
	begun        bool
}

// sensor is a channel with its two delays, of which a run uses one.
type sensor struct {
	channel
	lag  lag  // of even samples of truth
	past past // of recorded readings
}

// NewChain returns a chain at the start of a run, or an error where the
// sensors are out of range (see Validate) or a delay is beyond memory.
func NewChain(s Setup) (*Chain, error) {
	c := &Chain{}
	if err := c.Reset(s); err != nil {
		return nil, err
	}
	return c, nil
}

// Reset puts the chain at the start of another run. It allocates nothing,
// unless a delay is longer than any before it. After an error the chain is not
// to be used.
func (c *Chain) Reset(s Setup) error {
	c.set = s
	def := &c.set.Sensors
	if err := def.Validate(); err != nil {
		return fmt.Errorf("noise: %w", err)
	}
	c.lastS, c.lastC, c.begun = 0, s.TemperatureRefC, false
	c.needsTemperature = false
	for k, ch := range [...]*Channel{&def.Current, &def.Voltage, &def.Temperature} {
		x := &c.sensors[k]
		x.channel.reset(s.Seed, *ch, &streams[k])
		x.past.reset(ch.DelayS)
		if err := x.lag.reset(ch.DelayS, def.SamplePeriodS, s.Samples); err != nil {
			return fmt.Errorf("noise: %s.%w", channelNames[k], err)
		}
		c.needsTemperature = c.needsTemperature || ch.OffsetPerK != 0
	}
	if def.CurrentReading == "" {
		def.CurrentReading = record.Instant
	}
	return nil
}

// Read writes to out what the sensors report of the next samples of truth,
// which lie sample_period_s apart. Both have one length, else Read panics. It
// allocates nothing, unless a block is longer than any before it.
func (c *Chain) Read(truth *plant.Truth, out *record.Readings) {
	n := truth.Len()
	out.PeriodS, out.CurrentReading = c.set.Sensors.SamplePeriodS, c.set.Sensors.CurrentReading
	c.work = grow(c.work, n)
	dt := spacing{periodS: out.PeriodS}
	copy(out.TimeS[:n], truth.TimeS)
	if c.needsTemperature {
		c.aboveRefK = grow(c.aboveRefK, n)
		for k, t := range truth.TemperatureC {
			c.aboveRefK[k] = t - c.set.TemperatureRefC
		}
	}
	mean := out.CurrentReading == record.IntervalMean

	x, i, to := &c.sensors[0], truth.CurrentA, out.CurrentA[:n]
	if mean {
		i = truth.CurrentMeanA
	}
	if x.lag.whole > 0 {
		if mean {
			x.lag.linear(i, i, to, false)
		} else {
			x.lag.held(i, to)
		}
		i = to
	}
	x.read(i[:n], c.aboveRefK, to, c.work, dt)

	x, to = &c.sensors[1], out.VoltageV[:n]
	v := truth.VoltageV
	if mean {
		v = truth.VoltageBeforeV
	}
	if x.lag.whole > 0 {
		x.lag.linear(truth.VoltageV, truth.VoltageBeforeV, to, mean)
		v = to
	}
	x.read(v[:n], c.aboveRefK, to, c.work, dt)

	x, to = &c.sensors[2], out.TemperatureC[:n]
	t := truth.TemperatureC
	if x.lag.whole > 0 {
		x.lag.linear(t, t, to, false)
		t = to
	}
	x.read(t[:n], c.aboveRefK, to, c.work, dt)
}

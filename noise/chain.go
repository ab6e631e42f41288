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
// constant size, and never goes back.
type Chain struct {
	set                                    Setup
	current, voltage, temperature          channel
	currentLag, voltageLag, temperatureLag lag
	work                                   []float64
	aboveRefK                              []float64
	needsTemperature                       bool
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
	if err := s.Sensors.Validate(); err != nil {
		return fmt.Errorf("noise: %w", err)
	}
	c.set = s
	for _, ch := range []struct {
		name    string
		channel *channel
		lag     *lag
		set     *Channel
		streams *channelStreams
	}{
		{"current", &c.current, &c.currentLag, &c.set.Sensors.Current, &currentStreams},
		{"voltage", &c.voltage, &c.voltageLag, &c.set.Sensors.Voltage, &voltageStreams},
		{"temperature", &c.temperature, &c.temperatureLag, &c.set.Sensors.Temperature, &temperatureStreams},
	} {
		ch.channel.reset(s.Seed, *ch.set, ch.streams)
		if err := ch.lag.reset(ch.set.DelayS, s.Sensors.SamplePeriodS, s.Samples); err != nil {
			return fmt.Errorf("noise: %s.%w", ch.name, err)
		}
	}
	if c.set.Sensors.CurrentReading == "" {
		c.set.Sensors.CurrentReading = record.Instant
	}
	c.needsTemperature = s.Sensors.Current.OffsetPerK != 0 || s.Sensors.Voltage.OffsetPerK != 0 || s.Sensors.Temperature.OffsetPerK != 0
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

	i := truth.CurrentA
	if mean {
		i = truth.CurrentMeanA
	}
	if l := &c.currentLag; l.whole > 0 {
		if mean {
			l.linear(i, i, out.CurrentA, false)
		} else {
			l.held(i, out.CurrentA)
		}
		i = out.CurrentA
	}
	c.current.read(i[:n], c.aboveRefK, out.CurrentA[:n], c.work, dt)

	v := truth.VoltageV
	if mean {
		v = truth.VoltageBeforeV
	}
	if l := &c.voltageLag; l.whole > 0 {
		l.linear(truth.VoltageV, truth.VoltageBeforeV, out.VoltageV, mean)
		v = out.VoltageV
	}
	c.voltage.read(v[:n], c.aboveRefK, out.VoltageV[:n], c.work, dt)

	t := truth.TemperatureC
	if l := &c.temperatureLag; l.whole > 0 {
		l.linear(t, t, out.TemperatureC, false)
		t = out.TemperatureC
	}
	c.temperature.read(t[:n], c.aboveRefK, out.TemperatureC[:n], c.work, dt)
}

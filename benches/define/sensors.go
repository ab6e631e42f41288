package define

import (
	"soctrial/noise"
	"soctrial/plant/record"
)

// Sensors reads a sensor set.
func Sensors(file string, text []byte) (*noise.Sensors, error) {
	d, t, err := parse(file, text, KindSensors)
	if err != nil {
		return nil, err
	}
	s := &noise.Sensors{Name: nameOf(t, file), SamplePeriodS: t.needNumber("sample_period_s", "a number of seconds > 0")}
	for _, c := range channels(s) {
		if v := t.table(c.name); v != nil {
			readChannel(v, c.unit, c.to)
			if c.name == "current" {
				s.CurrentReading = record.CurrentReading(v.word("reading", string(record.Instant), string(record.IntervalMean)))
			}
			v.finish()
		}
	}
	t.finish()
	if err := d.err(); err != nil {
		return nil, err
	}
	if err := d.owned(s.Validate()); err != nil {
		return nil, err
	}
	return s, nil
}

type channel struct {
	name, unit string
	to         *noise.Channel
}

func channels(s *noise.Sensors) []channel {
	return []channel{{"current", "a", &s.Current}, {"voltage", "v", &s.Voltage}, {"temperature", "c", &s.Temperature}}
}

// channelNumber is one number of a channel, by its key.
type channelNumber struct {
	key string
	to  *float64
}

func channelNumbers(unit string, c *noise.Channel) []channelNumber {
	return []channelNumber{
		{"offset_" + unit, &c.Offset}, {"gain_error", &c.GainError}, {"noise_" + unit, &c.Noise},
		{"walk_" + unit + "_per_sqrt_s", &c.WalkPerSqrtS}, {"offset_" + unit + "_per_k", &c.OffsetPerK},
		{"quantum_" + unit, &c.Quantum}, {"range_" + unit, &c.Range}, {"delay_s", &c.DelayS},
		{"dropout_share", &c.DropoutShare}, {"dropout_s", &c.DropoutS}, {"stuck_share", &c.StuckShare}, {"stuck_s", &c.StuckS},
	}
}

func readChannel(t *table, unit string, c *noise.Channel) {
	for _, n := range channelNumbers(unit, c) {
		*n.to = t.number(n.key, 0)
	}
	c.Every = t.whole("every", 0, 1)
}

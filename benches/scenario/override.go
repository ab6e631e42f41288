package scenario

import "soctrial/noise"

// SensorValues holds one value for every sensor column of a set, in the order
// of SensorColumns; NaN: the definition's.
type SensorValues [39]float64

// SensorColumns names the set's sensor columns: the channel, then the key of
// the sensors file.
func SensorColumns() []string {
	out := make([]string, 0, len(SensorValues{}))
	for _, ch := range []struct{ name, unit string }{{"current", "a"}, {"voltage", "v"}, {"temperature", "c"}} {
		for _, key := range channelKeys(ch.unit) {
			out = append(out, ch.name+"_"+key)
		}
	}
	return out
}

// channelKeys are the keys of one channel in a sensors file, for its unit.
func channelKeys(unit string) []string {
	return []string{"offset_" + unit, "gain_error", "noise_" + unit, "walk_" + unit + "_per_sqrt_s",
		"offset_" + unit + "_per_k", "quantum_" + unit, "range_" + unit, "delay_s",
		"dropout_share", "dropout_s", "stuck_share", "stuck_s", "every"}
}

// Apply returns s with the values of v that are not NaN put in place.
func (v SensorValues) Apply(s noise.Sensors) noise.Sensors {
	for c, ch := range []*noise.Channel{&s.Current, &s.Voltage, &s.Temperature} {
		fields := []*float64{&ch.Offset, &ch.GainError, &ch.Noise, &ch.WalkPerSqrtS, &ch.OffsetPerK,
			&ch.Quantum, &ch.Range, &ch.DelayS, &ch.DropoutShare, &ch.DropoutS, &ch.StuckShare, &ch.StuckS}
		at := c * 13
		for k, f := range fields {
			if x := v[at+k]; x == x {
				*f = x
			}
		}
		if x := v[at+12]; x == x {
			ch.Every = int(x)
		}
	}
	return s
}

package noise

import (
	"fmt"
	"math"
	"strings"

	"soctrial/plant/record"
)

// ValueError says that one value of a sensor set is not allowed; its key is
// that of the sensors file, e.g. "current.noise_a".
type ValueError struct{ Key, Found, Allowed string }

// Error implements error.
func (e *ValueError) Error() string { return e.Key + ": " + e.Found + ", allowed is " + e.Allowed }

// KeyPath returns the key the error belongs to.
func (e *ValueError) KeyPath() string { return e.Key }

func bad(key string, found any, allowed string) error {
	return &ValueError{key, fmt.Sprint(found), allowed}
}

// Validate returns an error for the first value out of range, by its key in a
// sensors file, with what was found and what is allowed.
func (s *Sensors) Validate() error {
	if !(s.SamplePeriodS > 0) || math.IsInf(s.SamplePeriodS, 0) {
		return bad("sample_period_s", s.SamplePeriodS, "> 0 and finite")
	}
	for _, ch := range []struct {
		name, unit string
		set        *Channel
	}{
		{"current", "a", &s.Current}, {"voltage", "v", &s.Voltage}, {"temperature", "c", &s.Temperature},
	} {
		if err := ch.set.validate(ch.name, ch.unit); err != nil {
			return err
		}
	}
	switch s.CurrentReading {
	case "", record.Instant, record.IntervalMean:
		return nil
	}
	return bad("current.reading", fmt.Sprintf("%q", s.CurrentReading), fmt.Sprintf("%q or %q", record.Instant, record.IntervalMean))
}

// validate checks one channel, whose quantity has this unit in key names.
func (c *Channel) validate(name, unit string) error {
	type bound uint8
	const (
		finite   bound = iota
		positive       // ≥ 0
		share          // [0, 1)
	)
	allowed := [...]string{"a finite number", "≥ 0 and finite", "≥ 0 and < 1"}
	for _, v := range []struct {
		key   string // % stands for the unit
		value float64
		bound bound
	}{
		{"offset_%", c.Offset, finite},
		{"gain_error", c.GainError, finite},
		{"noise_%", c.Noise, positive},
		{"walk_%_per_sqrt_s", c.WalkPerSqrtS, positive},
		{"offset_%_per_k", c.OffsetPerK, finite},
		{"quantum_%", c.Quantum, positive},
		{"range_%", c.Range, positive},
		{"delay_s", c.DelayS, positive},
		{"dropout_share", c.DropoutShare, share},
		{"dropout_s", c.DropoutS, positive},
		{"stuck_share", c.StuckShare, share},
		{"stuck_s", c.StuckS, positive},
	} {
		outside := math.IsNaN(v.value) || math.IsInf(v.value, 0) ||
			v.bound != finite && v.value < 0 || v.bound == share && v.value >= 1
		if outside {
			return bad(name+"."+strings.Replace(v.key, "%", unit, 1), v.value, allowed[v.bound])
		}
	}
	for _, f := range []struct {
		key           string
		share, length float64
	}{{"dropout", c.DropoutShare, c.DropoutS}, {"stuck", c.StuckShare, c.StuckS}} {
		if f.share > 0 && f.length == 0 {
			return bad(name+"."+f.key+"_s", 0, fmt.Sprintf("> 0 where %s_share is given", f.key))
		}
	}
	if c.Every < 0 {
		return bad(name+".every", c.Every, "≥ 1")
	}
	return nil
}

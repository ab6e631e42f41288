package noise

import (
	"math"
	"strings"
	"testing"

	"soctrial/plant/record"
)

func TestValidateNamesKeyValueAndWhatIsAllowed(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, c := range []struct {
		want string // the whole message
		bad  func(*Sensors)
	}{
		{"sample_period_s: 0, allowed is > 0 and finite", func(s *Sensors) { s.SamplePeriodS = 0 }},
		{"sample_period_s: -1, allowed is > 0 and finite", func(s *Sensors) { s.SamplePeriodS = -1 }},
		{"sample_period_s: NaN, allowed is > 0 and finite", func(s *Sensors) { s.SamplePeriodS = nan }},
		{"sample_period_s: +Inf, allowed is > 0 and finite", func(s *Sensors) { s.SamplePeriodS = inf }},
		{"current.offset_a: NaN, allowed is a finite number", func(s *Sensors) { s.Current.Offset = nan }},
		{"voltage.gain_error: -Inf, allowed is a finite number", func(s *Sensors) { s.Voltage.GainError = -inf }},
		{"current.noise_a: -0.1, allowed is ≥ 0 and finite", func(s *Sensors) { s.Current.Noise = -0.1 }},
		{"temperature.walk_c_per_sqrt_s: -1, allowed is ≥ 0 and finite", func(s *Sensors) { s.Temperature.WalkPerSqrtS = -1 }},
		{"voltage.offset_v_per_k: +Inf, allowed is a finite number", func(s *Sensors) { s.Voltage.OffsetPerK = inf }},
		{"voltage.quantum_v: -0.001, allowed is ≥ 0 and finite", func(s *Sensors) { s.Voltage.Quantum = -0.001 }},
		{"current.range_a: NaN, allowed is ≥ 0 and finite", func(s *Sensors) { s.Current.Range = nan }},
		{"current.delay_s: -2, allowed is ≥ 0 and finite", func(s *Sensors) { s.Current.DelayS = -2 }},
		{"current.dropout_share: 1, allowed is ≥ 0 and < 1", func(s *Sensors) { s.Current.DropoutShare = 1 }},
		{"current.dropout_share: -0.5, allowed is ≥ 0 and < 1", func(s *Sensors) { s.Current.DropoutShare = -0.5 }},
		{"voltage.stuck_share: NaN, allowed is ≥ 0 and < 1", func(s *Sensors) { s.Voltage.StuckShare = nan }},
		{"voltage.stuck_s: -1, allowed is ≥ 0 and finite", func(s *Sensors) { s.Voltage.StuckS = -1 }},
		{"current.dropout_s: 0, allowed is > 0 where dropout_share is given", func(s *Sensors) { s.Current.DropoutShare = 0.1 }},
		{"temperature.stuck_s: 0, allowed is > 0 where stuck_share is given", func(s *Sensors) { s.Temperature.StuckShare = 0.1 }},
		{"temperature.every: -1, allowed is ≥ 1", func(s *Sensors) { s.Temperature.Every = -1 }},
		{`current.reading: "mean", allowed is "instant" or "interval-mean"`, func(s *Sensors) { s.CurrentReading = "mean" }},
	} {
		s := Sensors{SamplePeriodS: 1}
		c.bad(&s)
		err := s.Validate()
		if err == nil || err.Error() != c.want {
			t.Errorf("Validate says %v, want %s", err, c.want)
		}
		if _, err := NewChain(Setup{Sensors: s}); err == nil || err.Error() != "noise: "+c.want {
			t.Errorf("NewChain says %v, want the same with its package before it", err)
		}
	}
}

func TestValidateTakesAllThatIsAllowed(t *testing.T) {
	for _, s := range []Sensors{
		{SamplePeriodS: 1e-3},
		{SamplePeriodS: 60, Current: everyFault, Voltage: everyFault, Temperature: everyFault, CurrentReading: record.IntervalMean},
		{SamplePeriodS: 1, Voltage: Channel{Offset: -1, GainError: -2, OffsetPerK: -1, DropoutS: 5, Every: 1}, CurrentReading: record.Instant},
	} {
		if err := s.Validate(); err != nil {
			t.Errorf("%+v: %v", s, err)
		}
	}
}

func TestDelayBeyondMemoryIsRefused(t *testing.T) {
	s := Sensors{SamplePeriodS: 1, Voltage: Channel{DelayS: 3e6}}
	_, err := NewChain(Setup{Sensors: s})
	if err == nil || !strings.HasPrefix(err.Error(), "noise: voltage.delay_s: 3e+06, which is 3000000 samples of 1 s") {
		t.Errorf("a delay of 3,000,000 samples: %v", err)
	}
	if _, err := NewChain(Setup{Sensors: s, Samples: 100}); err != nil {
		t.Errorf("the same in a run of 100 samples, which never sees past the first: %v", err)
	}
}

package noise

import (
	"math"
	"testing"

	"soctrial/plant/record"
	"soctrial/plant/stream"
)

// oracle reads channel ch sample by sample, as the formula of the package
// comment is written; delayed is the truth at t - delay.
func oracle(ch Channel, name string, seed uint64, delayed, temperatureC []float64, periodS float64) []float64 {
	noise, walk := stream.New(seed, name+".noise"), stream.New(seed, name+".walk")
	w := 0.0
	out := make([]float64, len(delayed))
	for k, v := range delayed {
		if k > 0 {
			w += ch.WalkPerSqrtS * math.Sqrt(periodS) * walk.Normal()
		}
		v = (1+ch.GainError)*v + ch.Offset
		v += w
		v += ch.OffsetPerK * (temperatureC[k] - temperatureRefC)
		v += ch.Noise * noise.Normal()
		if ch.Range > 0 {
			v = math.Max(-ch.Range, math.Min(ch.Range, v))
		}
		if ch.Quantum > 0 {
			v = math.RoundToEven(v/ch.Quantum) * ch.Quantum
		}
		out[k] = v
	}
	return out
}

// Every fault alone, and all of them at once, against the formula written out.
func TestLinksAgainstTheFormula(t *testing.T) {
	truth := unsteadyTruth(1000, 0.5)
	for name, ch := range map[string]Channel{
		"ideal":              {},
		"offset":             {Offset: 0.25},
		"gain":               {GainError: -0.1},
		"noise":              {Noise: 0.3},
		"walk":               {WalkPerSqrtS: 0.1},
		"offset per kelvin":  {OffsetPerK: 0.02},
		"quantum":            {Quantum: 0.3},
		"range":              {Range: 3.71},
		"usual":              {Offset: -0.01, GainError: 0.01, Noise: 0.05, Quantum: 0.01},
		"usual with a range": {Noise: 0.05, Quantum: 0.01, Range: 3.7},
		"usual per kelvin":   {Noise: 0.05, Quantum: 0.01, OffsetPerK: 0.01},
		"usual walking":      {Noise: 0.05, Quantum: 0.01, WalkPerSqrtS: 0.05},
		"all": {Offset: 0.1, GainError: 0.2, Noise: 0.4, WalkPerSqrtS: 0.2, OffsetPerK: 0.01,
			Quantum: 0.07, Range: 5},
	} {
		s := Sensors{SamplePeriodS: 0.5, Current: ch, Voltage: ch, Temperature: ch}
		got := readAll(t, s, 42, &truth)
		for channel, pair := range map[string][2][]float64{
			"current": {got.CurrentA, truth.CurrentA}, "voltage": {got.VoltageV, truth.VoltageV},
			"temperature": {got.TemperatureC, truth.TemperatureC},
		} {
			want := oracle(ch, channel, 42, pair[1], truth.TemperatureC, 0.5)
			// Where multiply-add is fused (not on amd64) the last digits differ,
			// and a value may then round to the next quantum.
			checkClose(t, name+" of "+channel, pair[0], want, 1e-12)
		}
		if !same(got.TimeS, truth.TimeS) || got.PeriodS != 0.5 || got.CurrentReading != record.Instant {
			t.Errorf("%s: times, period %v or reading %q are wrong", name, got.PeriodS, got.CurrentReading)
		}
	}
}

// The order of the links, each pair by a case where the other order reads
// something else. Numbers by hand.
func TestOrderOfLinks(t *testing.T) {
	for _, c := range []struct {
		name  string
		ch    Channel
		truth float64
		want  float64
	}{
		{"gain ahead of offset: 1.5·2 + 1, not 1.5·3", Channel{GainError: 0.5, Offset: 1}, 2, 4},
		{"offset ahead of quantiser: 1.4 + 0.4 is 2, not 1 + 0.4", Channel{Offset: 0.4, Quantum: 1}, 1.4, 2},
		{"offset ahead of saturation: 5 - 1 is 4, not min(5, 4.5) - 1", Channel{Offset: -1, Range: 4.5}, 5, 4},
		{"saturation ahead of quantiser: 60 is 86 steps of 0.7", Channel{Range: 60, Quantum: 0.7}, 100, 86 * 0.7},
		{"negative saturation", Channel{Range: 60}, -100, -60},
		{"half to even below", Channel{Quantum: 1}, 2.5, 2},
		{"half to even above", Channel{Quantum: 1}, 3.5, 4},
		{"half to even, negative", Channel{Quantum: 2}, -5, -4},
		{"per kelvin ahead of quantiser: 1 + 0.1·5 K", Channel{OffsetPerK: 0.1, Quantum: 0.5}, 1.2, 1.5},
		{"gain leaves the offset per kelvin alone", Channel{GainError: 1, OffsetPerK: 0.1}, 1, 2.5},
	} {
		truth := unsteadyTruth(3, 1)
		for k := range truth.VoltageV {
			truth.VoltageV[k], truth.TemperatureC[k] = c.truth, temperatureRefC+5
		}
		for _, got := range readAll(t, Sensors{SamplePeriodS: 1, Voltage: c.ch}, 1, &truth).VoltageV {
			if math.Abs(got-c.want) > 1e-12 {
				t.Errorf("%s: reads %v, want %v", c.name, got, c.want)
			}
		}
	}
}

func TestIntervalMeanReadsTheOtherColumns(t *testing.T) {
	truth := unsteadyTruth(20, 2)
	got := readAll(t, Sensors{SamplePeriodS: 2, CurrentReading: record.IntervalMean}, 1, &truth)
	if !same(got.CurrentA, truth.CurrentMeanA) || !same(got.VoltageV, truth.VoltageBeforeV) || !same(got.TemperatureC, truth.TemperatureC) {
		t.Error("an ideal interval-mean sensor does not read the mean current and the voltage before")
	}
	if got.CurrentReading != record.IntervalMean {
		t.Errorf("readings call themselves %q", got.CurrentReading)
	}
	if got.CurrentA[0] != truth.CurrentA[0] || got.VoltageV[0] != truth.VoltageV[0] {
		t.Error("the first reading is not the instant one")
	}
}

func TestEveryLeavesEachNth(t *testing.T) {
	truth := unsteadyTruth(50, 1)
	s := Sensors{SamplePeriodS: 1, Current: Channel{Every: 1}, Voltage: Channel{Every: 3}, Temperature: Channel{Every: 7, Noise: 1}}
	got := readAll(t, s, 1, &truth)
	s.Temperature.Every = 0
	full := readAll(t, s, 1, &truth)
	for k := range 50 {
		if got.CurrentA[k] != truth.CurrentA[k] {
			t.Errorf("every = 1 reads %v at sample %d, want %v", got.CurrentA[k], k, truth.CurrentA[k])
		}
		if k%3 == 0 && got.VoltageV[k] != truth.VoltageV[k] || k%3 != 0 && !math.IsNaN(got.VoltageV[k]) {
			t.Errorf("every = 3 reads %v at sample %d", got.VoltageV[k], k)
		}
		if k%7 == 0 && got.TemperatureC[k] != full.TemperatureC[k] || k%7 != 0 && !math.IsNaN(got.TemperatureC[k]) {
			t.Errorf("every = 7 with noise reads %v at sample %d", got.TemperatureC[k], k)
		}
	}
}

// Stuck and dropout against where their streams say they are on: the value
// held is the last one made outside a spell, and a dropout does not change it.
func TestStuckThenDropout(t *testing.T) {
	truth := unsteadyTruth(4000, 1)
	for _, every := range []int{1, 3} {
		held := 0
		free := Channel{Noise: 0.1, Every: every}
		stuck, lost, both := free, free, free
		stuck.StuckShare, stuck.StuckS = 0.3, 5
		lost.DropoutShare, lost.DropoutS = 0.2, 4
		both = stuck
		both.DropoutShare, both.DropoutS = 0.2, 4
		read := func(ch Channel) []float64 {
			return readAll(t, Sensors{SamplePeriodS: 1, Voltage: ch}, 9, &truth).VoltageV
		}
		plain, stuckV, lostV, bothV := read(free), read(stuck), read(lost), read(both)

		src := stream.New(9, "voltage.stuck")
		last := math.NaN()
		on := src.Float64() < 0.3
		trials := -1 // until the state turns, the sample it turned at not counted
		for k := range plain {
			odds := 0.2 * 0.3 / 0.7 // share 0.3, mean 5 samples: ends 1 in 5, begins 0.2·0.3/0.7
			if on {
				odds = 0.2
			}
			if trials < 0 { // failures before the first success, by inversion
				trials = int(math.Log(1-src.Float64()) / math.Log(1-odds))
			} else if trials--; trials < 0 {
				on = !on
				if odds = 0.2 * 0.3 / 0.7; on {
					odds = 0.2
				}
				trials = int(math.Log(1-src.Float64()) / math.Log(1-odds))
			}
			want := plain[k]
			if k%every == 0 {
				if on && !math.IsNaN(last) {
					want = last
					held++
				} else {
					last = want
				}
			}
			if math.Float64bits(stuckV[k]) != math.Float64bits(want) {
				t.Fatalf("every %d, sample %d: stuck channel reads %v, want %v", every, k, stuckV[k], want)
			}
			if math.IsNaN(lostV[k]) != math.IsNaN(bothV[k]) {
				t.Fatalf("every %d, sample %d: stuck moved a dropout", every, k)
			}
			if !math.IsNaN(bothV[k]) && bothV[k] != stuckV[k] {
				t.Fatalf("every %d, sample %d: a dropout changed what is held: %v, want %v", every, k, bothV[k], stuckV[k])
			}
		}
		if held < 200 {
			t.Errorf("every %d: only %d readings were held", every, held)
		}
	}
}

// A channel that is stuck from the first sample on holds its first reading.
func TestStuckFromTheStart(t *testing.T) {
	truth := unsteadyTruth(50, 1)
	for seed := range uint64(20) {
		got := readAll(t, Sensors{SamplePeriodS: 1, Current: Channel{StuckShare: 0.999, StuckS: 1e9}}, seed, &truth).CurrentA
		u := stream.New(seed, "current.stuck")
		if u.Float64() >= 0.999 {
			continue
		}
		for k, v := range got {
			if v != truth.CurrentA[0] {
				t.Fatalf("seed %d: sample %d reads %v, want the first, %v", seed, k, v, truth.CurrentA[0])
			}
		}
	}
}

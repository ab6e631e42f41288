package noise

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"soctrial/plant/record"
)

// unevenReadings is a record of n samples with uneven and some repeated times,
// starting at startS, and with gaps where gaps is true.
func unevenReadings(n int, startS float64, gaps bool) record.Readings {
	truth := unsteadyTruth(n, 1)
	r := record.MakeReadings(n)
	t := startS
	for k := range n {
		r.TimeS[k], r.CurrentA[k], r.VoltageV[k], r.TemperatureC[k] = t, truth.CurrentA[k], truth.VoltageV[k], truth.TemperatureC[k]
		t += float64((k*7)%5) * 0.4 // 0, 0.8, 1.6, 0.4, 1.2 s
		if gaps && k%7 == 3 {
			r.CurrentA[k] = math.NaN()
		}
		if gaps && k%5 == 2 {
			r.VoltageV[k] = math.NaN()
		}
		if gaps && k%3 == 0 {
			r.TemperatureC[k] = math.NaN()
		}
	}
	return r
}

func disturb(t testing.TB, s Sensors, seed uint64, in *record.Readings) record.Readings {
	t.Helper()
	out := record.MakeReadings(in.Len())
	newChain(t, s, seed).Disturb(in, &out)
	return out
}

// Readings at even times, with nothing between samples to know of, take the
// same faults from the same streams as truth does.
func TestDisturbIsReadOnRecordedReadings(t *testing.T) {
	truth := unsteadyTruth(500, 0.5)
	copy(truth.VoltageBeforeV[1:], truth.VoltageV[1:]) // a record has one voltage a sample
	ch := everyFault
	s := Sensors{SamplePeriodS: 0.5, Current: ch, Voltage: ch, Temperature: ch}
	want := readAll(t, s, 5, &truth)
	in := record.Readings{TimeS: truth.TimeS, CurrentA: truth.CurrentA, VoltageV: truth.VoltageV, TemperatureC: truth.TemperatureC}
	for _, periodS := range []float64{0, 0.5} {
		in.PeriodS = periodS
		got := disturb(t, s, 5, &in)
		// Delays are found by another road, and a rounded difference may then
		// round to another quantum: one quantum is allowed, rarely.
		off := 0
		for c, pair := range [][2][]float64{{got.CurrentA, want.CurrentA}, {got.VoltageV, want.VoltageV}, {got.TemperatureC, want.TemperatureC}} {
			for k := range pair[0] {
				g, w := pair[0][k], pair[1][k]
				if math.IsNaN(g) != math.IsNaN(w) || math.Abs(g-w) > ch.Quantum*1.001 {
					t.Fatalf("channel %d, sample %d: %v, want %v", c, k, g, w)
				}
				if math.Abs(g-w) > 1e-9 {
					off++
				}
			}
		}
		if off > 3 {
			t.Errorf("%d readings differ", off)
		}
		if got.PeriodS != periodS || got.CurrentReading != "" || !same(got.TimeS, in.TimeS) {
			t.Errorf("period %v, reading %q or times are not the record's", got.PeriodS, got.CurrentReading)
		}
	}
}

func TestDisturbLeavesGapsAndIdealReadings(t *testing.T) {
	in := unevenReadings(300, 12, true)
	in.CurrentReading = record.IntervalMean
	got := disturb(t, Sensors{SamplePeriodS: 1}, 1, &in)
	if !sameReadings(&got, &in) {
		t.Error("ideal sensors changed a record")
	}
	ch := Channel{Offset: 0.5, GainError: 0.1, Noise: 0.1, WalkPerSqrtS: 0.1, OffsetPerK: 0.1, StuckShare: 0.3, StuckS: 5, DelayS: 2}
	got = disturb(t, Sensors{SamplePeriodS: 1, Current: ch, Voltage: ch, Temperature: ch}, 1, &in)
	for k := range in.TimeS {
		if math.IsNaN(got.CurrentA[k]) != math.IsNaN(in.CurrentA[k]) || math.IsNaN(got.VoltageV[k]) != math.IsNaN(in.VoltageV[k]) ||
			math.IsNaN(got.TemperatureC[k]) != math.IsNaN(in.TemperatureC[k]) {
			t.Fatalf("sample %d: gaps moved", k)
		}
	}
}

// offset_per_k takes the last recorded temperature, at first that of reference.
func TestDisturbHoldsTheTemperatureThroughGaps(t *testing.T) {
	nan := math.NaN()
	in := record.Readings{TimeS: []float64{0, 1, 2, 3, 4}, CurrentA: make([]float64, 5), VoltageV: make([]float64, 5),
		TemperatureC: []float64{nan, 30, nan, nan, 10}}
	c := newChain(t, Sensors{SamplePeriodS: 1, Voltage: Channel{OffsetPerK: 0.1}}, 1)
	out := record.MakeReadings(5)
	for k := range 5 {
		from, to := in.Slice(k, k+1), out.Slice(k, k+1)
		c.Disturb(&from, &to)
	}
	checkClose(t, "voltage", out.VoltageV, []float64{0, 1, 1, 1, -1}, 1e-12)
}

// Delays on a record against each sample looked up from the start of it.
func TestDisturbDelaysByLookingBack(t *testing.T) {
	for _, gaps := range []bool{false, true} {
		in := unevenReadings(400, -3, gaps)
		line := func(value []float64, t float64) float64 {
			last := -1
			for j, v := range value {
				if math.IsNaN(v) {
					continue
				}
				if in.TimeS[j] > t {
					if last < 0 {
						return v
					}
					part := (t - in.TimeS[last]) / (in.TimeS[j] - in.TimeS[last])
					return value[last]*(1-part) + v*part
				}
				last = j
			}
			return value[last]
		}
		hold := func(value []float64, t float64) float64 {
			held := math.NaN()
			for j, v := range value {
				if !math.IsNaN(v) && (in.TimeS[j] <= t+1e-9 || math.IsNaN(held)) {
					held = v
				}
			}
			return held
		}
		// charge since the start, each mean flowing since the existing reading before
		charge := func(t float64) float64 {
			if t <= in.TimeS[0] {
				return in.CurrentA[0] * (t - in.TimeS[0])
			}
			q, before := 0.0, in.TimeS[0]
			for j, v := range in.CurrentA {
				if !math.IsNaN(v) {
					q += v * (math.Min(t, in.TimeS[j]) - math.Min(t, before))
					before = in.TimeS[j]
				}
			}
			return q
		}
		for _, delayS := range []float64{0.1, 0.4, 1.37, 8, 33.3, 1e4} {
			ch := Channel{DelayS: delayS}
			s := Sensors{SamplePeriodS: 1, Current: ch, Voltage: ch, Temperature: ch}
			want := record.MakeReadings(in.Len())
			mean, lastMean := make([]float64, in.Len()), in.CurrentA[0]
			for k, now := range in.TimeS {
				want.CurrentA[k] = in.CurrentA[k]
				if !math.IsNaN(in.CurrentA[k]) {
					want.CurrentA[k] = hold(in.CurrentA[:k+1], now-delayS)
				}
				want.VoltageV[k], want.TemperatureC[k], mean[k] = in.VoltageV[k], in.TemperatureC[k], in.CurrentA[k]
				if !math.IsNaN(in.VoltageV[k]) {
					want.VoltageV[k] = line(in.VoltageV, now-delayS)
				}
				if !math.IsNaN(in.TemperatureC[k]) {
					want.TemperatureC[k] = line(in.TemperatureC, now-delayS)
				}
				if !math.IsNaN(in.CurrentA[k]) {
					if k > 0 && now > in.TimeS[k-1] {
						lastMean = (charge(now-delayS) - charge(in.TimeS[k-1]-delayS)) / (now - in.TimeS[k-1])
					}
					mean[k] = lastMean
				}
			}
			in.CurrentReading = record.Instant
			got := disturb(t, s, 1, &in)
			checkClose(t, "held current", got.CurrentA, want.CurrentA, 1e-9)
			checkClose(t, "voltage", got.VoltageV, want.VoltageV, 1e-9)
			checkClose(t, "temperature", got.TemperatureC, want.TemperatureC, 1e-9)
			in.CurrentReading = record.IntervalMean
			got = disturb(t, s, 1, &in)
			checkClose(t, "mean current", got.CurrentA, mean, 1e-9)
		}
	}
}

// Walk, stuck and dropout go by the time stamps, and a repeated time moves none.
func TestDisturbGoesByTime(t *testing.T) {
	const n, runs = 60, 3000
	in := unevenReadings(n, 0, false)
	for k := range n {
		in.VoltageV[k] = 0
	}
	end := 0.0
	for seed := uint64(1); seed <= runs; seed++ {
		v := disturb(t, Sensors{SamplePeriodS: 1, Voltage: Channel{WalkPerSqrtS: 0.2}}, seed, &in).VoltageV
		end += v[n-1] * v[n-1] / runs
		for k := 1; k < n; k++ {
			if in.TimeS[k] == in.TimeS[k-1] && v[k] != v[k-1] {
				t.Fatal("a walk moved in no time")
			}
		}
	}
	want := 0.04 * (in.TimeS[n-1] - in.TimeS[0])
	if math.Abs(end/want-1) > 4.5*math.Sqrt(2.0/runs) {
		t.Errorf("variance %v at the end of the walk, want %v", end, want)
	}

	long := unevenReadings(200_000, 0, false)
	v := disturb(t, Sensors{SamplePeriodS: 1, Voltage: Channel{DropoutShare: 0.2, DropoutS: 8}}, 3, &long).VoltageV
	out, spells := 0.0, 0
	for k := range v {
		if math.IsNaN(v[k]) {
			out++
			if k == 0 || !math.IsNaN(v[k-1]) {
				spells++
			}
		}
	}
	// The mean step is 0.8 s: a spell of 8 s lasts 10 samples. About 4,000
	// spells, so 4.5 standard errors are 7 % of the length; the share's
	// standard error is 0.0035 by the formula of TestSpellsHaveTheirShareAndLength
	// with b = 0.1.
	if math.Abs(out/float64(len(v))-0.2) > 4.5*0.0035 || math.Abs(out/float64(spells)-10) > 0.75 {
		t.Errorf("out for %v of the samples, %v samples a spell; want 0.2 and 10", out/float64(len(v)), out/float64(spells))
	}
}

// A delay remembers what it can still be asked for, however long the record.
func TestDisturbForgets(t *testing.T) {
	ch := Channel{DelayS: 20}
	c := newChain(t, Sensors{SamplePeriodS: 1, Current: ch, Voltage: ch, Temperature: ch}, 1)
	in := unevenReadings(500, 0, false)
	out := record.MakeReadings(500)
	for range 400 {
		c.Disturb(&in, &out)
		for k := range in.TimeS {
			in.TimeS[k] += 400 // 499 steps of at most 0.8 s on average
		}
	}
	for s := range c.sensors {
		if n := cap(c.sensors[s].past.timeS); n > 4096 {
			t.Errorf("after 200,000 samples the %s remembers %d of them", channelNames[s], n)
		}
	}
}

func TestDisturbInBlocksAndInPlace(t *testing.T) {
	const n = 200
	rapid.Check(t, func(t *rapid.T) {
		s := anySensors(t)
		in := unevenReadings(n, rapid.Float64Range(-10, 1e6).Draw(t, "start"), rapid.Bool().Draw(t, "gaps"))
		in.CurrentReading = s.CurrentReading
		set := Setup{Sensors: s, Seed: 4, TemperatureRefC: temperatureRefC}
		a, err := NewChain(set)
		if err != nil {
			t.Fatal(err)
		}
		b, err := NewChain(set)
		if err != nil {
			t.Fatal(err)
		}
		whole := record.MakeReadings(n)
		a.Disturb(&in, &whole)
		for _, cut := range cuts(t, n) {
			block := in.Slice(cut[0], cut[1])
			b.Disturb(&block, &block)
		}
		if !sameReadings(&whole, &in) {
			t.Fatal("blocks in place read otherwise than the whole")
		}
	})
}

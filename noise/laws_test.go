package noise

import (
	"fmt"
	"math"
	"testing"

	"pgregory.net/rapid"

	"soctrial/plant/record"
)

// anyChannel draws a channel with any mixture of faults.
func anyChannel(t *rapid.T, name string) Channel {
	pick := func(key string, value float64) float64 {
		if rapid.Bool().Draw(t, name+" has "+key) {
			return value
		}
		return 0
	}
	ch := Channel{Offset: pick("offset", 0.1), GainError: pick("gain", 0.02), Noise: pick("noise", 0.05),
		WalkPerSqrtS: pick("walk", 0.01), OffsetPerK: pick("per kelvin", 0.002), Quantum: pick("quantum", 0.01),
		Range: pick("range", 15), DropoutS: 4, DropoutShare: pick("dropout", 0.2), StuckS: 3, StuckShare: pick("stuck", 0.2)}
	ch.DelayS = pick("delay", rapid.Float64Range(0, 60).Draw(t, name+" delay"))
	ch.Every = rapid.IntRange(0, 4).Draw(t, name+" every")
	return ch
}

func anySensors(t *rapid.T) Sensors {
	return Sensors{SamplePeriodS: rapid.SampledFrom([]float64{0.1, 1, 3}).Draw(t, "period"),
		Current: anyChannel(t, "current"), Voltage: anyChannel(t, "voltage"), Temperature: anyChannel(t, "temperature"),
		CurrentReading: rapid.SampledFrom([]record.CurrentReading{"", record.Instant, record.IntervalMean}).Draw(t, "reading")}
}

// cuts draws where to cut n samples into blocks, empty ones included.
func cuts(t *rapid.T, n int) [][2]int {
	var out [][2]int
	for from := 0; from < n; {
		to := min(n, from+rapid.IntRange(0, 90).Draw(t, "block"))
		out = append(out, [2]int{from, to})
		from = to
	}
	return out
}

// Any cut into blocks gives the same numbers, and so does a chain that was
// used for another run before.
func TestBlocksAndReuseMoveNothing(t *testing.T) {
	const n = 200
	used := &Chain{}
	rapid.Check(t, func(t *rapid.T) {
		s := anySensors(t)
		truth := unsteadyTruth(n, s.SamplePeriodS)
		set := Setup{Sensors: s, Seed: rapid.Uint64().Draw(t, "seed"), TemperatureRefC: temperatureRefC}
		fresh, err := NewChain(set)
		if err != nil {
			t.Fatal(err)
		}
		whole, parts := record.MakeReadings(n), record.MakeReadings(n)
		fresh.Read(&truth, &whole)
		if err := used.Reset(set); err != nil {
			t.Fatal(err)
		}
		for _, cut := range cuts(t, n) {
			in, out := truth.Slice(cut[0], cut[1]), parts.Slice(cut[0], cut[1])
			used.Read(&in, &out)
			parts.PeriodS, parts.CurrentReading = out.PeriodS, out.CurrentReading
		}
		if !sameReadings(&whole, &parts) {
			t.Fatal("blocks read otherwise than the whole")
		}
	})
}

// Taking one fault away moves no other's numbers.
func TestFaultsKeepToTheirStreams(t *testing.T) {
	const n = 3000
	truth := unsteadyTruth(n, 1)
	all := everyFault
	all.Quantum, all.Range, all.Every, all.DelayS = 0, 0, 0, 0 // so that what links add can be told by a difference
	s := Sensors{SamplePeriodS: 1, Current: all, Voltage: all, Temperature: all}
	without := func(change func(*Channel)) record.Readings {
		less := s
		change(&less.Voltage)
		return readAll(t, less, 77, &truth)
	}
	full := without(func(*Channel) {})
	for name, change := range map[string]func(*Channel){
		"noise":    func(c *Channel) { c.Noise = 0 },
		"walk":     func(c *Channel) { c.WalkPerSqrtS = 0 },
		"stuck":    func(c *Channel) { c.StuckShare = 0 },
		"dropout":  func(c *Channel) { c.DropoutShare = 0 },
		"offset":   func(c *Channel) { c.Offset = 0 },
		"every":    func(c *Channel) { c.Every = 3 },
		"delay":    func(c *Channel) { c.DelayS = 2.2 },
		"quantum":  func(c *Channel) { c.Quantum = 1e-3 },
		"the lot":  func(c *Channel) { *c = Channel{} },
		"per K":    func(c *Channel) { c.OffsetPerK = 0 },
		"the gain": func(c *Channel) { c.GainError = 0 },
	} {
		less := without(change)
		if !same(full.CurrentA, less.CurrentA) || !same(full.TemperatureC, less.TemperatureC) {
			t.Errorf("without %s of the voltage other channels read otherwise", name)
		}
		if name == "dropout" || name == "every" || name == "the lot" {
			continue
		}
		for k := range less.VoltageV {
			if math.IsNaN(less.VoltageV[k]) != math.IsNaN(full.VoltageV[k]) {
				t.Fatalf("without %s a dropout moved at sample %d", name, k)
			}
		}
	}

	// A link's own share is the difference with and without it, and is the same
	// whichever others are there.
	share := func(base Channel, with func(*Channel)) []float64 {
		more := base
		with(&more)
		a := readAll(t, Sensors{SamplePeriodS: 1, Voltage: more}, 77, &truth).VoltageV
		b := readAll(t, Sensors{SamplePeriodS: 1, Voltage: base}, 77, &truth).VoltageV
		for k := range a {
			a[k] -= b[k]
		}
		return a
	}
	for name, with := range map[string]func(*Channel){
		"noise": func(c *Channel) { c.Noise = 0.05 },
		"walk":  func(c *Channel) { c.WalkPerSqrtS = 0.02 },
	} {
		alone := share(Channel{}, with)
		base := Channel{Offset: 1, OffsetPerK: 0.1, GainError: 0.1}
		if name == "noise" {
			base.WalkPerSqrtS = 0.1
		} else {
			base.Noise = 0.3
		}
		checkClose(t, name+" among others", share(base, with), alone, 1e-12)
	}
	for name, ch := range map[string]Channel{"alone": {}, "with the rest": {Noise: 1, WalkPerSqrtS: 1, StuckShare: 0.2, StuckS: 9, Every: 1}} {
		ch.DropoutShare, ch.DropoutS = all.DropoutShare, all.DropoutS
		got := readAll(t, Sensors{SamplePeriodS: 1, Voltage: ch}, 77, &truth).VoltageV
		for k, v := range got {
			if math.IsNaN(v) != math.IsNaN(full.VoltageV[k]) {
				t.Fatalf("dropout %s: sample %d differs", name, k)
			}
		}
	}
}

func TestOtherSeedsReadOtherNumbers(t *testing.T) {
	seen := map[string]uint64{}
	for seed := range uint64(50) {
		key := fmt.Sprint(readOne(t, Channel{Noise: 1}, seed, 3, 1))
		if other, taken := seen[key]; taken {
			t.Errorf("seeds %d and %d read the same", seed, other)
		}
		seen[key] = seed
	}
}

// A run allocates nothing once the chain has seen a block as long and a delay
// as far, and neither does starting the next run.
func TestNothingIsAllocated(t *testing.T) {
	truth, out := unsteadyTruth(256, 1), record.MakeReadings(256)
	for _, kind := range []record.CurrentReading{record.Instant, record.IntervalMean} {
		set := Setup{Sensors: Sensors{SamplePeriodS: 1, Current: everyFault, Voltage: everyFault, Temperature: everyFault, CurrentReading: kind}}
		c, err := NewChain(set)
		if err != nil {
			t.Fatal(err)
		}
		half, halfOut := truth.Slice(0, 128), out.Slice(0, 128)
		got := testing.AllocsPerRun(50, func() {
			set.Seed++
			if err := c.Reset(set); err != nil {
				t.Fatal(err)
			}
			c.Read(&truth, &out)
			c.Read(&half, &halfOut)
		})
		if got != 0 {
			t.Errorf("%s: %v allocations a run, want none", kind, got)
		}
	}
}

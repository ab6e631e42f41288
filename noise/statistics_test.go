package noise

import (
	"fmt"
	"math"
	"testing"
)

// The statistics below take seeds fixed beforehand, 1 and up. Bounds are 4.5
// standard errors, which one right figure in 150,000 exceeds.

func TestNoiseIsWhiteNormalAndItsOwn(t *testing.T) {
	const n = 1 << 17
	truth := unsteadyTruth(n, 1)
	ch := Channel{Noise: 0.25}
	got := readAll(t, Sensors{SamplePeriodS: 1, Current: ch, Voltage: ch, Temperature: ch}, 1, &truth)
	names := []string{"current", "voltage", "temperature"}
	noise := make([][]float64, 3)
	for c, pair := range [][2][]float64{{got.CurrentA, truth.CurrentA}, {got.VoltageV, truth.VoltageV}, {got.TemperatureC, truth.TemperatureC}} {
		for k, v := range pair[0] {
			noise[c] = append(noise[c], (v-pair[1][k])/0.25)
		}
	}
	moment := func(a, b []float64, shift int) float64 {
		sum := 0.0
		for k := shift; k < n; k++ {
			sum += a[k] * b[k-shift]
		}
		return sum / n
	}
	for a := range noise {
		mean := 0.0
		for _, v := range noise[a] {
			mean += v / n
		}
		if math.Abs(mean) > 4.5/math.Sqrt(n) {
			t.Errorf("%s noise has mean %v", names[a], mean)
		}
		if v := moment(noise[a], noise[a], 0); math.Abs(v-1) > 4.5*math.Sqrt(2.0/n) {
			t.Errorf("%s noise has %v times its variance", names[a], v)
		}
		for _, shift := range []int{1, 2, 3} {
			if r := moment(noise[a], noise[a], shift); math.Abs(r) > 4.5/math.Sqrt(n) {
				t.Errorf("%s noise correlates with itself %d samples on: %v", names[a], shift, r)
			}
		}
		for b := range a {
			if r := moment(noise[a], noise[b], 0); math.Abs(r) > 4.5/math.Sqrt(n) {
				t.Errorf("%s and %s noise correlate: %v", names[a], names[b], r)
			}
		}
	}
}

// A random walk of w per √s has variance w²·t after t seconds, whatever the
// sample period, independent increments, and starts at 0.
func TestWalkGrowsWithTime(t *testing.T) {
	const runs, n = 4000, 41
	for _, periodS := range []float64{0.1, 1, 10} {
		var end, half, cross float64
		for seed := uint64(1); seed <= runs; seed++ {
			w := readOne(t, Channel{WalkPerSqrtS: 0.03}, seed, n, periodS)
			if w[0] != 0 {
				t.Fatalf("the walk starts at %v", w[0])
			}
			end += w[n-1] * w[n-1] / runs
			half += w[n/2] * w[n/2] / runs
			cross += (w[n-1] - w[n/2]) * w[n/2] / runs
		}
		want := 0.03 * 0.03 * 40 * periodS
		se := math.Sqrt(2.0 / runs)
		if math.Abs(end/want-1) > 4.5*se || math.Abs(half/(want/2)-1) > 4.5*se {
			t.Errorf("period %v s: variance %v at the half and %v at the end, want %v there", periodS, half, end, want)
		}
		if math.Abs(cross/(want/2)) > 4.5/math.Sqrt(runs) {
			t.Errorf("period %v s: the halves of the walk correlate: %v", periodS, cross/(want/2))
		}
	}
}

// spells counts the samples in spells and the whole spells of a channel.
func spells(v []float64, in func(k int) bool) (share, meanSamples float64, count int) {
	samples := 0
	for k := range v {
		if in(k) {
			samples++
			if k == 0 || !in(k-1) {
				count++
			}
		}
	}
	return float64(samples) / float64(len(v)), float64(samples) / float64(count), count
}

// Share and mean length of spells. For a two-state chain that begins with
// probability a and ends with b, the share p = a/(a+b) over n samples has the
// variance p(1-p)/n·(2-a-b)/(a+b), and a spell's length is geometric.
func TestSpellsHaveTheirShareAndLength(t *testing.T) {
	const n = 400_000
	for _, c := range []struct {
		share, meanS, periodS float64
		wantSamples           float64 // mean length
	}{
		{0.05, 10, 1, 10},
		{0.2, 3, 0.5, 6},
		{0.5, 1, 1, 1},      // one good, one bad
		{0.3, 0.01, 1, 1},   // shorter than a sample: one sample each
		{0.8, 1, 1, 4},      // at most one good sample between: 4 in 5
		{0.9, 60, 2, 30},    // mostly out
		{0.001, 5, 0.1, 50}, // seldom
	} {
		name := fmt.Sprintf("share %v, mean %v s, period %v s", c.share, c.meanS, c.periodS)
		end := 1 / c.wantSamples
		begin := end * c.share / (1 - c.share)
		shareSE := math.Sqrt(c.share * (1 - c.share) / n * (2 - begin - end) / (begin + end))

		out := readOne(t, Channel{DropoutShare: c.share, DropoutS: c.meanS}, 1, n, c.periodS)
		share, mean, count := spells(out, func(k int) bool { return math.IsNaN(out[k]) })
		lengthSE := math.Sqrt(1-end) * c.wantSamples / math.Sqrt(float64(count))
		if math.Abs(share-c.share) > 4.5*shareSE+2.0/n {
			t.Errorf("dropout, %s: share %v ± %v", name, share, shareSE)
		}
		if math.Abs(mean-c.wantSamples) > 4.5*lengthSE+c.wantSamples/float64(count) {
			t.Errorf("dropout, %s: spells of %v ± %v samples, want %v", name, mean, lengthSE, c.wantSamples)
		}

		// With noise no two readings are equal unless the channel is stuck. Its
		// spells follow the good reading they repeat.
		v := readOne(t, Channel{Noise: 1, StuckShare: c.share, StuckS: c.meanS}, 2, n, c.periodS)
		share, mean, count = spells(v, func(k int) bool { return k > 0 && v[k] == v[k-1] })
		lengthSE = math.Sqrt(1-end) * c.wantSamples / math.Sqrt(float64(count))
		if math.Abs(share-c.share) > 4.5*shareSE+2.0/n {
			t.Errorf("stuck, %s: share %v ± %v", name, share, shareSE)
		}
		if math.Abs(mean-c.wantSamples) > 4.5*lengthSE+c.wantSamples/float64(count) {
			t.Errorf("stuck, %s: spells of %v ± %v samples, want %v", name, mean, lengthSE, c.wantSamples)
		}
	}
}

// The chain is stationary from its first sample on: over many runs each sample
// is as likely out as any other.
func TestSpellsAreStationaryFromTheStart(t *testing.T) {
	const runs, n, share = 20_000, 12, 0.25
	var out [n]float64
	for seed := uint64(1); seed <= runs; seed++ {
		for k, v := range readOne(t, Channel{DropoutShare: share, DropoutS: 5}, seed, n, 1) {
			if math.IsNaN(v) {
				out[k]++
			}
		}
	}
	for k, c := range out {
		if math.Abs(c/runs-share) > 4.5*math.Sqrt(share*(1-share)/runs) {
			t.Errorf("sample %d is out in %v of the runs, want %v", k, c/runs, share)
		}
	}
}

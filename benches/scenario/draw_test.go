package scenario

import (
	"fmt"
	"math"
	"reflect"
	"slices"
	"sort"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
	"pgregory.net/rapid"

	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

// yard is what the works department's plans name.
func yard() Definitions {
	return Definitions{
		CellNames: []string{"sweeper", "barge"}, DutyNames: []string{"rounds"}, SensorsNames: []string{"pack", "bench"},
		Cells:   map[string]*cell.Cell{"sweeper": {}, "barge": {}},
		Duties:  map[string]*duty.Duty{"rounds": {}},
		Sensors: map[string]*noise.Sensors{"pack": {}, "bench": {}},
	}
}

func vary(column string) Vary { return Vary{Column: column, Min: math.NaN(), Max: math.NaN()} }

func between(column string, low, high float64, steps int) Vary {
	v := vary(column)
	v.Between, v.Steps = &[2]float64{low, high}, steps
	return v
}

func values(column string, xs ...float64) Vary {
	v := vary(column)
	v.Values = xs
	return v
}

func TestGridOrder(t *testing.T) {
	groups := vary("group")
	groups.Texts = []string{"fresh", "aged"}
	p := &Plan{Draw: Grid, Seed: 7, Vary: []Vary{groups, between("current_offset_a", -0.1, 0.1, 3)}}
	s, err := Draw(p, yard())
	if err != nil {
		t.Fatal(err)
	}
	if len(s.Rows) != 2*2*6 {
		t.Fatalf("%d rows, want 24", len(s.Rows))
	}
	var got []string
	for _, r := range s.Rows[:9] {
		got = append(got, fmt.Sprintf("%d %s %s %s %g %g", r.ID, r.Cell, r.Sensors, r.Group, r.Override[0], r.Labels[0].Number))
	}
	want := []string{"1 sweeper pack fresh -0.1 1", "2 sweeper pack fresh 0 2", "3 sweeper pack fresh 0.1 3",
		"4 sweeper pack aged -0.1 4", "5 sweeper pack aged 0 5", "6 sweeper pack aged 0.1 6",
		"7 sweeper bench fresh -0.1 7", "8 sweeper bench fresh 0 8", "9 sweeper bench fresh 0.1 9"}
	if !slices.Equal(got, want) {
		t.Errorf("got\n%s\nwant\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
	}
}

func TestListGoesByPosition(t *testing.T) {
	label := vary("bay")
	label.Texts = []string{"north", "south"}
	substeps := values("plant_substeps", 4, 2)
	s, err := Draw(&Plan{Draw: List, Count: 2, Vary: []Vary{values("soc_start", 0.9, 0.4), substeps, label}}, yard())
	if err != nil {
		t.Fatal(err)
	}
	for i, r := range s.Rows {
		want := []Row{{SOCStart: 0.9, PlantSubsteps: 4}, {SOCStart: 0.4, PlantSubsteps: 2}}[i%2]
		if r.SOCStart != want.SOCStart || r.PlantSubsteps != want.PlantSubsteps || r.Labels[0].Text != []string{"north", "south"}[i%2] {
			t.Errorf("row %d is %+v", i, r)
		}
	}
}

// Every column of a Latin hypercube, and of 2^k shifted Sobol points, has one
// value in each of n equal shares.
func TestStratified(t *testing.T) {
	for _, kind := range []DrawKind{LatinHypercube, Sobol} {
		rapid.Check(t, func(t *rapid.T) {
			p := &Plan{Draw: kind, Seed: rapid.Uint64().Draw(t, "seed")}
			n := 1 << rapid.IntRange(0, 8).Draw(t, "log points")
			dims := rapid.IntRange(1, 40).Draw(t, "dims")
			p.Vary = make([]Vary, dims)
			next := p.walk(n, 0)
			counts := make([][]int, dims)
			for i := range counts {
				counts[i] = make([]int, n)
			}
			at := make([]float64, dims)
			for range n {
				next(at)
				for i, u := range at {
					if !(u > 0 && u < 1) {
						t.Fatalf("coordinate %v", u)
					}
					counts[i][int(u*float64(n))]++
				}
			}
			for i := range counts {
				for k, c := range counts[i] {
					if c != 1 {
						t.Fatalf("%s: column %d has %d values in share %d of %d", kind, i, c, k, n)
					}
				}
			}
		})
	}
}

// What is drawn has the distribution asked for: the Kolmogorov-Smirnov distance
// of n stratified values from it is below 1/n.
func TestMarginals(t *testing.T) {
	const n = 512
	normal, logNormal, triangular := vary("soc_start_error"), vary("r0_scale"), vary("ambient_c")
	normal.Normal = &Normal{Mean: 0.02, Std: 0.05}
	logNormal.LogNormal = &LogNormal{Median: 1.5, Sigma: 0.2}
	triangular.Triangular = &Triangular{Low: -10, Mode: 20, High: 35}
	uniform := between("current_offset_a", -0.1, 0.3, 0)
	for _, tt := range []struct {
		vary Vary
		cdf  func(float64) float64
	}{
		{normal, distuv.Normal{Mu: 0.02, Sigma: 0.05}.CDF},
		{logNormal, distuv.LogNormal{Mu: math.Log(1.5), Sigma: 0.2}.CDF},
		{triangular, func(x float64) float64 { // the area under two straight lines
			if x < 20 {
				return (x + 10) * (x + 10) / (45 * 30)
			}
			return 1 - (35-x)*(35-x)/(45*15)
		}},
		{uniform, func(x float64) float64 { return (x + 0.1) / 0.4 }},
	} {
		for _, kind := range []DrawKind{Sobol, LatinHypercube} {
			s, err := Draw(&Plan{Draw: kind, Count: n, Seed: 3, Vary: []Vary{tt.vary}}, yard())
			if err != nil {
				t.Fatal(err)
			}
			c, _ := Find(tt.vary.Column)
			var xs []float64
			for _, r := range s.Rows[:n] {
				xs = append(xs, c.Get(&r).Number)
			}
			sort.Float64s(xs)
			distance := 0.0
			for i, x := range xs {
				f := tt.cdf(x)
				distance = max(distance, f-float64(i)/n, float64(i+1)/n-f)
			}
			if distance > 1.0/n+1e-9 {
				t.Errorf("%s of %s: distance %g from its distribution", kind, tt.vary.Column, distance)
			}
		}
	}
}

func TestValuesHaveEqualShares(t *testing.T) {
	s, err := Draw(&Plan{Draw: Sobol, Count: 256, Seed: 1, Vary: []Vary{values("capacity_scale", 1, 0.9, 0.8, 0.7)}}, yard())
	if err != nil {
		t.Fatal(err)
	}
	count := map[float64]int{}
	for _, r := range s.Rows {
		count[r.CapacityScale]++
	}
	if want := map[float64]int{1: 256, 0.9: 256, 0.8: 256, 0.7: 256}; !reflect.DeepEqual(count, want) {
		t.Errorf("shares %v, want %v", count, want)
	}
}

// Draws are clipped, not truncated: what lies beyond gathers at the ends.
func TestMinMaxClip(t *testing.T) {
	v := vary("soc_start_error")
	v.Normal, v.Min, v.Max = &Normal{Std: 0.1}, -0.1, 0.2
	s, err := Draw(&Plan{Draw: LatinHypercube, Count: 10000, Vary: []Vary{v}}, yard())
	if err != nil {
		t.Fatal(err)
	}
	var low, high, beyond float64
	for _, r := range s.Rows {
		switch {
		case r.SOCStartError == -0.1:
			low++
		case r.SOCStartError == 0.2:
			high++
		case r.SOCStartError < -0.1 || r.SOCStartError > 0.2:
			beyond++
		}
	}
	n := float64(len(s.Rows))
	// One sigma below and two above: 15.87 % and 2.275 % of a normal, stratified.
	if beyond != 0 || math.Abs(low/n-0.15866) > 2e-4 || math.Abs(high/n-0.02275) > 2e-4 {
		t.Errorf("%g at the lower end, %g at the upper, %g beyond", low/n, high/n, beyond/n)
	}
}

// The same plan gives the same set; another seed another; and no combination
// repeats another's draws or seeds.
func TestDrawsAreReproducibleAndTheirOwn(t *testing.T) {
	for _, kind := range []DrawKind{Sobol, LatinHypercube} {
		p := &Plan{Draw: kind, Count: 64, Seed: 7, Vary: []Vary{between("soc_start", 0.5, 1, 0), between("r0_scale", 1, 2, 0)}}
		a, err := Draw(p, yard())
		if err != nil {
			t.Fatal(err)
		}
		b, _ := Draw(p, yard())
		for i := range a.Rows {
			if !sameRow(a.Rows[i], b.Rows[i]) {
				t.Fatalf("%s: row %d differs between two draws of one plan", kind, i)
			}
		}
		other := *p
		other.Seed = 8
		c, _ := Draw(&other, yard())
		values, seeds := map[float64]bool{}, map[uint64]bool{}
		for i, r := range a.Rows {
			if r.SOCStart == c.Rows[i].SOCStart || r.Seed == c.Rows[i].Seed {
				t.Errorf("%s: row %d is the same under another seed", kind, i)
			}
			if values[r.SOCStart] || seeds[r.Seed] || r.Seed > math.MaxInt64 {
				t.Errorf("%s: row %d repeats a value or a seed, or its seed is no int64: %g, %d", kind, i, r.SOCStart, r.Seed)
			}
			values[r.SOCStart], seeds[r.Seed] = true, true
			if r.ID != int64(i+1) || r.Labels[0].Number != float64(i+1) || r.Labels[0].Column != "label_draw" {
				t.Errorf("row %d has id %d and label %+v", i, r.ID, r.Labels[0])
			}
		}
	}
}

func sameRow(a, b Row) bool { return fmt.Sprintf("%v", a) == fmt.Sprintf("%v", b) }

// SplitMix64's first outputs from seed 0, as widely printed (from memory): the
// finaliser of one, two and three increments.
func TestMix(t *testing.T) {
	for k, want := range []uint64{0xe220a8397b1dcdaf, 0x6e789e6aa1b965f4, 0x06c45d188009454f} {
		if got := mix(uint64(k) * 0x9e3779b97f4a7c15); got != want {
			t.Errorf("output %d is %#x, want %#x", k, got, want)
		}
	}
}

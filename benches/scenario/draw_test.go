package scenario

import (
	"errors"
	"fmt"
	"math"
	"math/bits"
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

// The first points of three dimensions as printed in Joe & Kuo (2008), "Notes on
// generating Sobol sequences" (from memory); without a shift ours lie half a
// unit of the last place above them.
func TestSobolFirstPoints(t *testing.T) {
	want := [][3]float64{{0, 0, 0}, {0.5, 0.5, 0.5}, {0.75, 0.25, 0.25}, {0.25, 0.75, 0.75}, {0.375, 0.375, 0.625},
		{0.875, 0.875, 0.125}, {0.625, 0.125, 0.875}, {0.125, 0.625, 0.375}, {0.1875, 0.3125, 0.9375}, {0.6875, 0.8125, 0.4375}}
	s := newSobol(make([]uint64, 3))
	at := make([]float64, 3)
	for i, w := range want {
		s.next(at)
		for d := range at {
			if at[d]-w[d] != 0x1p-53 {
				t.Errorf("point %d, dimension %d is %v, want %v", i, d, at[d], w[d])
			}
		}
	}
}

// The table's entries against what they must be: primitive polynomials, each
// once; odd direction numbers below 2^i; and Sobol's Property A (1976), which Joe
// & Kuo (2003, ACM TOMS 29, 49-57) ask of theirs: the first 2^d points of d
// dimensions lie one in each of the 2^d half cubes, that is, the first bits of
// the direction numbers are a regular matrix modulo 2.
func TestSobolTable(t *testing.T) {
	seen := map[uint64]bool{}
	for i, p := range primitives() {
		poly := 1<<p.degree | p.inner<<1 | 1
		if seen[poly] || !isPrimitive(poly, p.degree) {
			t.Errorf("dimension %d: polynomial %b is not primitive, or stands twice", i+2, poly)
		}
		seen[poly] = true
		if len(p.first) != p.degree {
			t.Errorf("dimension %d: %d numbers for degree %d", i+2, len(p.first), p.degree)
		}
		for k, m := range p.first {
			if m%2 == 0 || m >= 1<<(k+1) {
				t.Errorf("dimension %d: m_%d = %d", i+2, k+1, m)
			}
		}
	}
	if len(primitives())+1 != sobolDimensions {
		t.Errorf("%d dimensions in the table", len(primitives())+1)
	}
	for d := 1; d <= sobolBits; d++ { // more dimensions need more bits than are drawn
		rows := make([]uint64, d)
		for i := range rows {
			m := directionNumbers(i)
			for k := range d {
				rows[i] |= (m[k] >> k & 1) << k
			}
		}
		if rankModulo2(rows) != d {
			t.Fatalf("the first %d dimensions lack Property A", d)
		}
	}
}

// isPrimitive tells whether x generates every element of the field: x^(2^n-1) is
// 1 and no smaller divisor of 2^n-1 does it.
func isPrimitive(poly uint64, degree int) bool {
	order := uint64(1)<<degree - 1
	power := func(e uint64) uint64 {
		x := uint64(1)
		for range e {
			if x <<= 1; x>>degree == 1 {
				x ^= poly
			}
		}
		return x
	}
	if power(order) != 1 {
		return false
	}
	for e := uint64(1); e < order; e++ {
		if order%e == 0 && power(e) == 1 {
			return false
		}
	}
	return true
}

func rankModulo2(rows []uint64) int {
	rows = slices.Clone(rows)
	rank := 0
	for i := range rows {
		if rows[i] == 0 {
			continue
		}
		rank++
		pivot := uint64(1) << bits.TrailingZeros64(rows[i])
		for j := i + 1; j < len(rows); j++ {
			if rows[j]&pivot != 0 {
				rows[j] ^= rows[i]
			}
		}
	}
	return rank
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

// Sobol points fill the cube more evenly than independent ones: Warnock's formula
// (1972) for the L2 star discrepancy, whose square has the expectation
// (2^-d - 3^-d)/n for independent points.
func TestSobolDiscrepancy(t *testing.T) {
	const n, d = 256, 5
	for seed := range uint64(5) {
		p := &Plan{Draw: Sobol, Seed: seed, Vary: make([]Vary, d)}
		next := p.walk(n, 0)
		points := make([][]float64, n)
		for i := range points {
			points[i] = make([]float64, d)
			next(points[i])
		}
		square := math.Pow(3, -d)
		for _, x := range points {
			one := 1.0
			for _, u := range x {
				one *= (1 - u*u) / 2
			}
			square -= 2 * one / n
			for _, y := range points {
				both := 1.0
				for k := range x {
					both *= 1 - max(x[k], y[k])
				}
				square += both / (n * n)
			}
		}
		if independent := (math.Pow(2, -d) - math.Pow(3, -d)) / n; square > independent/5 {
			t.Errorf("seed %d: squared discrepancy %g, independent points have %g", seed, square, independent)
		}
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

func TestPlansAreRefused(t *testing.T) {
	normal := func(column string, mean, std float64) Vary {
		v := vary(column)
		v.Normal = &Normal{mean, std}
		return v
	}
	two := values("soc_start", 1)
	two.Between = &[2]float64{0, 1}
	upside := between("soc_start", 0.2, 0.4, 0)
	upside.Min, upside.Max = 1, 0
	texts := vary("soc_start")
	texts.Texts = []string{"full"}
	many := make([]Vary, 65)
	for i := range many {
		many[i] = between(fmt.Sprintf("label_%d", i), 0, 1, 0)
	}
	for _, tt := range []struct {
		name string
		plan Plan
		key  string
		want string
	}{
		{"no draw", Plan{}, "draw", "grid, sobol, latin-hypercube or list"},
		{"no count", Plan{Draw: Sobol}, "count", "found 0"},
		{"huge count", Plan{Draw: LatinHypercube, Count: maxRows}, "count", "4 combinations"},
		{"mistyped column", Plan{Draw: Sobol, Count: 4, Vary: []Vary{between("current_ofset_a", 0, 1, 0)}}, "vary[0].column", "nearest is current_offset_a"},
		{"no column", Plan{Draw: Sobol, Count: 4, Vary: []Vary{between("", 0, 1, 0)}}, "vary[0].column", "found nothing"},
		{"identity", Plan{Draw: Grid, Vary: []Vary{values("seed", 1)}}, "vary[0].column", "identity"},
		{"the draw's label", Plan{Draw: Grid, Vary: []Vary{values("label_draw", 1)}}, "vary[0].column", "numbers the draws"},
		{"column twice", Plan{Draw: Grid, Vary: []Vary{values("soc_start", 1), values("soc_start", 0.5)}}, "vary[1].column", "a second time"},
		{"two forms", Plan{Draw: Sobol, Count: 4, Vary: []Vary{two}}, "vary[0]", "exactly one"},
		{"no form", Plan{Draw: Sobol, Count: 4, Vary: []Vary{vary("soc_start")}}, "vary[0]", "exactly one"},
		{"text for numbers", Plan{Draw: Grid, Vary: []Vary{texts}}, "vary[0]", "another kind"},
		{"numbers for text", Plan{Draw: Grid, Vary: []Vary{values("group", 1)}}, "vary[0]", "another kind"},
		{"empty values", Plan{Draw: Grid, Vary: []Vary{values("soc_start", []float64{}...)}}, "vary[0].values", "an empty list"},
		{"NaN value", Plan{Draw: Grid, Vary: []Vary{values("soc_start", math.NaN())}}, "vary[0].values", "finite"},
		{"value out of range", Plan{Draw: Grid, Vary: []Vary{values("soc_start", 1.5)}}, "vary[0]", "soc_start = 1.5 in draw 1"},
		{"fraction of a substep", Plan{Draw: List, Vary: []Vary{values("plant_substeps", 1.5)}}, "vary[0]", "whole number"},
		{"distribution of whole numbers", Plan{Draw: Sobol, Count: 4, Vary: []Vary{between("voltage_every", 1, 3, 0)}}, "vary[0]", "whole numbers"},
		{"grid of a distribution", Plan{Draw: Grid, Vary: []Vary{normal("soc_start_error", 0, 0.1)}}, "vary[0]", "between with steps"},
		{"grid without steps", Plan{Draw: Grid, Vary: []Vary{between("soc_start", 0, 1, 0)}}, "vary[0].steps", "found 0"},
		{"steps in a sample", Plan{Draw: Sobol, Count: 4, Vary: []Vary{between("soc_start", 0, 1, 3)}}, "vary[0].steps", "found 3"},
		{"list of a range", Plan{Draw: List, Vary: []Vary{between("soc_start", 0, 1, 0)}}, "vary[0]", "list"},
		{"list of two lengths", Plan{Draw: List, Vary: []Vary{values("soc_start", 1), values("r0_scale", 1, 2)}}, "vary[1].values", "found 2 values"},
		{"count beside a grid", Plan{Draw: Grid, Count: 5, Vary: []Vary{values("soc_start", 1, 0.5)}}, "count", "found 5"},
		{"range upside down", Plan{Draw: Sobol, Count: 4, Vary: []Vary{between("soc_start", 1, 0, 0)}}, "vary[0].between", "lower first"},
		{"negative std", Plan{Draw: Sobol, Count: 4, Vary: []Vary{normal("soc_start_error", 0, -1)}}, "vary[0].normal", "std ≥ 0"},
		{"draws beyond the column", Plan{Draw: Sobol, Count: 64, Vary: []Vary{normal("soc_start_error", 0, 5)}}, "vary[0]", "min and max limit a draw"},
		{"min above max", Plan{Draw: Sobol, Count: 4, Vary: []Vary{upside}}, "vary[0].min", "min ≤ max"},
		{"too many columns", Plan{Draw: Sobol, Count: 4, Vary: many}, "vary", "at most 64"},
		{"limit on no group", Plan{Draw: Grid, Limits: []Limit{{Group: "aged"}}}, "limit[0].group", `found "aged"`},
	} {
		_, err := Draw(&tt.plan, yard())
		var bad *ValueError
		if !errors.As(err, &bad) {
			t.Errorf("%s: got %v, want a refusal", tt.name, err)
			continue
		}
		if bad.KeyPath() != tt.key || !strings.Contains(err.Error(), tt.want) {
			t.Errorf("%s: got key %q, %v; want %q, %q", tt.name, bad.KeyPath(), err, tt.key, tt.want)
		}
	}
	if _, err := Draw(&Plan{Draw: Grid}, Definitions{}); err == nil {
		t.Error("a plan without cells was drawn")
	}
}

func TestCheckLimits(t *testing.T) {
	metrics := []string{"soc_rmse", "settled_max_abs"}
	good := Limit{Metric: "soc_rmse", AtMost: 0.02, Share: 1}
	if err := CheckLimits([]Limit{good}, metrics); err != nil {
		t.Error(err)
	}
	for want, spoil := range map[string]func(*Limit){
		"limit[0].metric: found \"soc_rms\"": func(l *Limit) { l.Metric = "soc_rms" },
		"limit[0].at_most: found NaN":        func(l *Limit) { l.AtMost = math.NaN() },
		"limit[0].at_most: found -1":         func(l *Limit) { l.AtMost = -1 },
		"limit[0].share: found 0":            func(l *Limit) { l.Share = 0 },
		"limit[0].share: found 95":           func(l *Limit) { l.Share = 95 },
	} {
		l := good
		spoil(&l)
		if err := CheckLimits([]Limit{l}, metrics); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q", err, want)
		}
	}
}

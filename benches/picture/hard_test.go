package picture

import (
	"bytes"
	"fmt"
	"math"
	"testing"

	"pgregory.net/rapid"
)

// TestHardColumns draws columns that have nothing, little or too much to show.
func TestHardColumns(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for name, col := range map[string][]float64{
		"empty":    nil,
		"one":      {0.5},
		"zero":     {0, 0, 0},
		"all NaN":  {nan, nan, nan},
		"constant": {3.7, 3.7, 3.7},
		"huge":     {-1e308, 1e308, 1e299, -1e299},
		"tiny":     {5e-324, 1e-310, 1e-300},
		"close":    {1, 1 + 1e-15, 1 - 1e-15},
		"infinite": {inf, -inf, 1, 2},
		"gaps":     {nan, 1, nan, 2, 3, nan, nan, 4},
		"negative": {-1, -2, -3},
		"backward": {5, 4, 3, 9, 1},
	} {
		for _, time := range [][]float64{nil, {0}, {0, 1, 2, 3, 4, 5, 6, 7}, col} {
			t.Run(fmt.Sprintf("%s over %d times", name, len(time)), func(t *testing.T) { drawAll(t, time, col) })
		}
	}
}

// drawAll puts one column everywhere a column may go.
func drawAll(t testing.TB, time, col []float64) {
	rows := []CellRow{{25, time, col}, {math.NaN(), nil, col}, {-20, nil, nil}}
	value := math.NaN()
	if len(col) > 0 {
		value = col[0]
	}
	formats := []Format{SVG, PNG}
	if len(time) != len(col) { // pixels are slow; they follow the same paths
		formats = formats[:1]
	}
	for _, format := range formats {
		var b bytes.Buffer
		for name, err := range map[string]error{
			"track": Track(&b, format, TrackColumns{Title: "<a & b>\x00\xff", TimeS: time, SOCTrue: col, CurrentA: col,
				Estimates: []Estimate{{"one", col, col, col, col}, {"two", nil, nil, nil, nil}}}),
			"errors":  ErrorsOverTime(&b, format, ErrorColumns{Estimators: []ErrorPercentiles{{"e", time, col, col, col, col}}, Limit: value}),
			"nothing": ErrorsOverTime(&b, format, ErrorColumns{Limit: value}),
			"worst":   WorstErrors(&b, format, DistributionColumns{Estimators: []Scenarios{{"e", col}, {"f", time}}, AtMost: value, Share: value}),
			"cell":    Cell(&b, format, CellColumns{OCV: rows, HalfGapV: col, R0: rows, Branches: []BranchColumns{{rows, rows}}}),
			"duty":    Duty(&b, format, DutyColumns{TimeS: time, CurrentA: col, PowerW: col, VoltageV: col, SpeedMps: col, EndS: value}),
			"record":  Record(&b, format, RecordColumns{TimeS: time, VoltageV: col, CurrentA: col, TemperatureC: col, SOC: col}),
		} {
			if err != nil {
				t.Fatalf("%s: %v", name, err)
			}
		}
	}
	var svg bytes.Buffer
	if err := Track(&svg, SVG, TrackColumns{Title: "\x01<&>", TimeS: time, SOCTrue: col, CurrentA: col}); err != nil {
		t.Fatal(err)
	}
	if s := svg.String(); bytes.Contains(svg.Bytes(), []byte("NaN")) || bytes.Contains(svg.Bytes(), []byte("Inf")) {
		t.Fatalf("a coordinate is not finite: %s", s)
	}
}

func TestUnknownFormat(t *testing.T) {
	if err := Record(&bytes.Buffer{}, "gif", RecordColumns{}); err == nil {
		t.Error("a GIF was drawn")
	}
	for path, want := range map[string]Format{"a.png": PNG, "b/c.SVG": SVG, "d.jpg": "", "e": ""} {
		if got, err := FormatOf(path); got != want || (err == nil) != (want != "") {
			t.Errorf("FormatOf(%q) is %q, %v", path, got, err)
		}
	}
}

// TestThinningKeepsExtremes compares the least and greatest of each pixel
// column before and after, found by a plain look at every point.
func TestThinningKeepsExtremes(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 3000).Draw(t, "points")
		columns := rapid.IntRange(1, 200).Draw(t, "columns")
		xa := axis{lo: 0, hi: 1}
		if rapid.Bool().Draw(t, "log") {
			xa = axis{lo: 1e-3, hi: 1, log: true}
		}
		values := rapid.SliceOfN(rapid.Float64Range(-5, 5), n, n).Draw(t, "values")
		all := make([]point, n)
		for i, v := range values {
			all[i] = point{xa.lo + (xa.hi-xa.lo)*float64(i)/float64(n), v}
		}
		kept := thin(all, &xa, columns)
		if len(kept) > max(4*(columns+1), 4) {
			t.Fatalf("%d of %d points kept for %d columns", len(kept), n, columns)
		}
		extremes := func(points []point) map[int][2]float64 {
			m := map[int][2]float64{}
			for _, p := range points {
				c := int(math.Floor(xa.share(p.x) * float64(columns)))
				e, ok := m[c]
				if !ok {
					e = [2]float64{p.y, p.y}
				}
				m[c] = [2]float64{math.Min(e[0], p.y), math.Max(e[1], p.y)}
			}
			return m
		}
		want, got := extremes(all), extremes(kept)
		if len(want) != len(got) {
			t.Fatalf("%d columns have points, want %d", len(got), len(want))
		}
		for c, e := range want {
			if got[c] != e {
				t.Fatalf("column %d spans %v, want %v", c, got[c], e)
			}
		}
		if kept[0] != all[0] || kept[len(kept)-1] != all[n-1] {
			t.Fatal("an end is lost")
		}
	})
}

// TestTicks: every range has at least two marks with labels that differ, in
// steps of 1, 2 or 5 (common practice, no source), inside the range.
func TestTicks(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		a := axis{log: rapid.Bool().Draw(t, "log")}
		size := math.Pow(10, rapid.Float64Range(-12, 12).Draw(t, "exponent"))
		e := extent{size, size * (1 + math.Pow(10, rapid.Float64Range(-6, 5).Draw(t, "span")))}
		if !a.log && rapid.Bool().Draw(t, "negative") {
			e = extent{-e.hi, -e.lo}
		}
		a.fit(e, 0.05)
		most := rapid.IntRange(3, 12).Draw(t, "most")
		seen := map[string]bool{}
		last := math.Inf(-1)
		for _, k := range a.ticks(most) {
			if k.value < a.lo-1e-6*(a.hi-a.lo) || k.value > a.hi+1e-6*(a.hi-a.lo) || k.value <= last {
				t.Fatalf("%g to %g: mark at %g after %g", a.lo, a.hi, k.value, last)
			}
			last = k.value
			if k.label == "" {
				continue
			}
			if seen[k.label] || k.label == "-0" || k.label == "−0" {
				t.Fatalf("%g to %g: label %q at %g again, or of nothing", a.lo, a.hi, k.label, k.value)
			}
			seen[k.label] = true
		}
		if len(seen) < 1 || len(seen) > most+1 {
			t.Fatalf("%g to %g: %d labels, want 1 to %d", a.lo, a.hi, len(seen), most+1)
		}
	})
}

func TestNumbers(t *testing.T) {
	for _, c := range []struct {
		v, step float64
		want    string
	}{{0, 1, "0"}, {math.Copysign(0, -1), 0.1, "0"}, {-1e-18, 0.01, "0"}, {-5, 5, "−5"}, {0.30000000000000004, 0.1, "0.3"}, {2.5e7, 5e6, "2.5e7"},
		{2e-7, 1e-7, "2e−7"}, {1500, 500, "1500"}} {
		if got := number(c.v, c.step); got != c.want {
			t.Errorf("number(%g, %g) is %q, want %q", c.v, c.step, got, c.want)
		}
	}
}

// TestLooksDiffer: colour is never the only cue.
func TestLooksDiffer(t *testing.T) {
	seen := map[string]int{}
	for i := range 36 {
		l := lineOf(i)
		key := fmt.Sprint(l.Color, l.Dashes)
		if at, twice := seen[key]; twice {
			t.Errorf("lines %d and %d look alike", at, i)
		}
		seen[key] = i
	}
	for i := range 6 {
		for k := range i {
			if a, b := lineOf(i), lineOf(k); a.Color == b.Color || fmt.Sprint(a.Dashes) == fmt.Sprint(b.Dashes) {
				t.Errorf("lines %d and %d share colour or dashes", i, k)
			}
		}
	}
}

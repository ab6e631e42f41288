package score

import (
	"cmp"
	"fmt"
	"math"
	"slices"
)

// Percentile returns the p-quantile, p in [0, 1], of values in ascending order,
// with linear interpolation between order statistics (the (n-1)p rule, type 7 of
// Hyndman & Fan 1996, Am. Stat. 50). NaN without values.
func Percentile(ascending []float64, p float64) float64 {
	n := len(ascending)
	if n == 0 {
		return math.NaN()
	}
	rank := p * float64(n-1)
	i := int(rank)
	if i+1 >= n {
		return ascending[n-1]
	}
	return ascending[i] + (rank-float64(i))*(ascending[i+1]-ascending[i])
}

// Spread is how large a metric is over scenarios; NaN where none has it.
type Spread struct {
	Metric             string
	Median, P95, Worst float64 // of the metric's size
	N, Null            int     // scenarios that have it, and that do not
}

// Summary is one estimator over its scenarios.
type Summary struct {
	Estimator        string
	OK, Lost, Failed int
	Spreads          []Spread // of the metrics asked for, over scenarios with status ok
	Honesty          Honesty
}

// Spread returns the spread of the metric, and whether it was asked for.
func (s *Summary) Spread(metric string) (Spread, bool) {
	for _, x := range s.Spreads {
		if x.Metric == metric {
			return x, true
		}
	}
	return Spread{}, false
}

// Summarise sums up each estimator, in the order of their first rows. Metrics
// that do not exist are left null.
func Summarise(results []Result, metrics []string) []Summary {
	var order []string
	rows := map[string][]Result{}
	for _, r := range results {
		if rows[r.Estimator] == nil {
			order = append(order, r.Estimator)
		}
		rows[r.Estimator] = append(rows[r.Estimator], r)
	}
	out := make([]Summary, 0, len(order))
	for _, name := range order {
		s := Summary{Estimator: name, Honesty: HonestyOf(rows[name])}
		for i := range rows[name] {
			switch rows[name][i].Status {
			case OK:
				s.OK++
			case Lost:
				s.Lost++
			default:
				s.Failed++
			}
		}
		for _, m := range metrics {
			s.Spreads = append(s.Spreads, spread(rows[name], m))
		}
		out = append(out, s)
	}
	return out
}

func spread(results []Result, metric string) Spread {
	s := Spread{Metric: metric}
	var sizes []float64
	for i := range results {
		if results[i].Status != OK {
			continue
		}
		if x, _ := results[i].Metrics.Value(metric); math.IsNaN(x) {
			s.Null++
		} else {
			sizes = append(sizes, math.Abs(x))
		}
	}
	slices.Sort(sizes)
	s.N = len(sizes)
	s.Median, s.P95, s.Worst = Percentile(sizes, 0.5), Percentile(sizes, 0.95), Percentile(sizes, 1)
	return s
}

// Worst returns up to k indices into results, the worst first: lost runs before
// all, then by the metric's size, equals by scenario. Failed rows, which no
// estimator is to blame for, and rows whose metric is null are left out. An
// empty estimator means any.
func Worst(results []Result, estimator, metric string, k int) []int {
	size := func(i int) float64 {
		if results[i].Status == Lost {
			return math.Inf(1)
		}
		x, _ := results[i].Metrics.Value(metric)
		return math.Abs(x)
	}
	var at []int
	for i := range results {
		if (estimator == "" || results[i].Estimator == estimator) && results[i].Status != Failed && !math.IsNaN(size(i)) {
			at = append(at, i)
		}
	}
	slices.SortStableFunc(at, func(a, b int) int {
		return cmp.Or(cmp.Compare(size(b), size(a)), cmp.Compare(results[a].ScenarioID, results[b].ScenarioID))
	})
	return at[:min(k, len(at))]
}

// Column is one column of a scenario set, one value a scenario: Numbers, NaN
// where none, or Texts.
type Column struct {
	Name    string
	Numbers []float64
	Texts   []string
}

// Special is a value that stands out of its column.
type Special struct {
	Column string
	Number float64
	Text   string  // of a text column
	Side   string  // "lowest" or "highest"; empty for a text
	Share  float64 // of scenarios whose value is as far out on that side, or the same text
}

// String says it in a phrase, e.g. "current_offset_a 0.0981 (highest 1.6 %)".
func (s Special) String() string {
	if s.Side == "" {
		return fmt.Sprintf("%s %s (%.2g %% have it)", s.Column, s.Text, 100*s.Share)
	}
	return fmt.Sprintf("%s %.3g (%s %.2g %%)", s.Column, s.Number, s.Side, 100*s.Share)
}

// SpecialOf returns up to k columns in which scenario number at stands out most,
// the rarest value first, equals in the columns' order. A value that half the
// scenarios match or exceed on its side is not special, nor is one in a column
// that holds a single value.
func SpecialOf(columns []Column, at, k int) []Special {
	var out []Special
	for _, c := range columns {
		s := Special{Column: c.Name, Number: math.NaN()}
		if c.Texts != nil {
			same := 0
			for _, t := range c.Texts {
				if t == c.Texts[at] {
					same++
				}
			}
			s.Text, s.Share = c.Texts[at], float64(same)/float64(len(c.Texts))
		} else {
			x := c.Numbers[at]
			low, high, n := 0, 0, 0
			for _, y := range c.Numbers {
				if math.IsNaN(y) {
					continue
				}
				n++
				if y <= x {
					low++
				}
				if y >= x {
					high++
				}
			}
			if math.IsNaN(x) || low == n && high == n {
				continue
			}
			s.Number, s.Side, s.Share = x, "lowest", float64(low)/float64(n)
			if high < low {
				s.Side, s.Share = "highest", float64(high)/float64(n)
			}
		}
		if s.Share < 0.5 {
			out = append(out, s)
		}
	}
	slices.SortStableFunc(out, func(a, b Special) int { return cmp.Compare(a.Share, b.Share) })
	return out[:min(k, len(out))]
}

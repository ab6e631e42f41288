package job

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"soctrial/benches/score"
)

// Contrast is a column in which scenarios that broke a limit differ from those
// that met it.
type Contrast struct {
	Column string
	// Clearness is how well the column alone parts the two: 0 not at all, 1
	// wholly. For numbers it is |2A - 1| with A the chance that one that broke
	// lies above one that met (Mann & Whitney 1947, Ann. Math. Stat. 18); for
	// texts the total variation distance of their shares.
	Clearness    float64
	Size         bool    // it is the number's size that differs
	BrokeMedian  float64 // of numbers
	MetMedian    float64
	Text         string  // of texts: the value that is over-represented most
	ShareOfBroke float64 // of texts: who has it
	ShareOfMet   float64
}

// String says it in a phrase.
func (c Contrast) String() string {
	if c.Text != "" {
		return fmt.Sprintf("%s %s: %.0f %% of those that broke it, %.0f %% of the others", c.Column, c.Text, 100*c.ShareOfBroke, 100*c.ShareOfMet)
	}
	name, side := c.Column, "high"
	if c.Size {
		name = "|" + name + "|"
	}
	if c.BrokeMedian < c.MetMedian {
		side = "low"
	}
	return fmt.Sprintf("%s is %s: median %.3g where broken, %.3g elsewhere", name, side, c.BrokeMedian, c.MetMedian)
}

const (
	leastClearness = 0.3 // below it a difference may be chance, or says little
	leastRows      = 4   // on each side
	mostContrasts  = 3
)

// contrasts returns the columns that part broke from met best, the clearest
// first. Both are rows of the columns.
func contrasts(columns []score.Column, broke, met []int) []Contrast {
	if len(broke) < leastRows || len(met) < leastRows {
		return nil
	}
	var out []Contrast
	for _, c := range columns {
		var best Contrast
		if c.Texts != nil {
			best = contrastOfTexts(c, broke, met)
		} else {
			best = contrastOfNumbers(c, broke, met)
		}
		if best.Clearness >= leastClearness {
			out = append(out, best)
		}
	}
	slices.SortStableFunc(out, func(a, b Contrast) int { return cmp.Compare(b.Clearness, a.Clearness) })
	return out[:min(mostContrasts, len(out))]
}

func contrastOfTexts(c score.Column, broke, met []int) Contrast {
	out := Contrast{Column: c.Name}
	share := func(rows []int) map[string]float64 {
		m := map[string]float64{}
		for _, i := range rows {
			m[c.Texts[i]] += 1 / float64(len(rows))
		}
		return m
	}
	b, m := share(broke), share(met)
	most := 0.0
	for _, text := range slices.Compact(slices.Sorted(slices.Values(c.Texts))) {
		if d := b[text] - m[text]; d > 0 {
			out.Clearness += d
			if d > most && text != "" {
				most = d
				out.Text, out.ShareOfBroke, out.ShareOfMet = text, b[text], m[text]
			}
		}
	}
	if out.Text == "" {
		out.Clearness = 0
	}
	return out
}

func contrastOfNumbers(c score.Column, broke, met []int) Contrast {
	value := func(x float64) float64 { return x }
	best := partedBy(c, broke, met, value)
	size := partedBy(c, broke, met, math.Abs)
	if size.Clearness > best.Clearness+0.05 { // else the value itself says it
		size.Size = true
		return size
	}
	return best
}

func partedBy(c score.Column, broke, met []int, form func(float64) float64) Contrast {
	b, m := taken(c, broke, form), taken(c, met, form)
	out := Contrast{Column: c.Name}
	if len(b) >= leastRows && len(m) >= leastRows {
		out.Clearness = math.Abs(2*chanceAbove(b, m) - 1)
		out.BrokeMedian, out.MetMedian = score.Percentile(b, 0.5), score.Percentile(m, 0.5)
	}
	return out
}

func taken(c score.Column, rows []int, form func(float64) float64) []float64 {
	var out []float64
	for _, i := range rows {
		if x := c.Numbers[i]; !math.IsNaN(x) {
			out = append(out, form(x))
		}
	}
	slices.Sort(out)
	return out
}

// chanceAbove is the chance that a value of a lies above one of b, equals
// counting half; both ascend.
func chanceAbove(a, b []float64) float64 {
	wins, below, notAbove := 0.0, 0, 0
	for _, x := range a {
		for below < len(b) && b[below] < x {
			below++
		}
		for notAbove < len(b) && b[notAbove] <= x {
			notAbove++
		}
		wins += float64(below) + float64(notAbove-below)/2
	}
	return wins / float64(len(a)) / float64(len(b))
}

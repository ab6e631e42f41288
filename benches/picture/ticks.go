package picture

import (
	"math"
	"strconv"

	"gonum.org/v1/plot"
)

// ticks marks an axis at multiples of 1, 2 or 5 times a power of ten, about so
// many of them.
type ticks struct{ about int }

// Ticks implements plot.Ticker.
func (t ticks) Ticks(lo, hi float64) []plot.Tick {
	if !(hi > lo) || !finite(lo) || !finite(hi) {
		return nil
	}
	raw := (hi - lo) / float64(max(t.about, 2))
	power := math.Floor(math.Log10(raw))
	step := math.Pow(10, power+1)
	for _, m := range []float64{1, 2, 5} {
		if s := m * math.Pow(10, power); s >= raw*(1-1e-9) {
			step = s
			break
		}
	}
	decimals := max(0, -int(math.Floor(math.Log10(step)+1e-9)))
	var out []plot.Tick
	for k := math.Ceil(lo/step - 1e-9); k*step <= hi+1e-9*step && len(out) < 100; k++ {
		out = append(out, plot.Tick{Value: k * step, Label: label(k*step, step, decimals)})
	}
	return out
}

// label writes v; very large and very small axes by powers of ten.
func label(v, step float64, decimals int) string {
	if math.Abs(v) < step/2 {
		return "0"
	}
	if math.Abs(v) >= 1e6 || decimals > 5 {
		return strconv.FormatFloat(v, 'g', 4, 64)
	}
	return strconv.FormatFloat(v, 'f', decimals, 64)
}

// decades marks a logarithmic axis at powers of ten, and at 2 and 5 times them
// where there is room.
type decades struct{}

// Ticks implements plot.Ticker.
func (decades) Ticks(lo, hi float64) []plot.Tick {
	if !(lo > 0) || !(hi > lo) {
		return nil
	}
	span := math.Log10(hi / lo)
	every := max(1, int(math.Ceil(span/8)))
	var out []plot.Tick
	for e := int(math.Floor(math.Log10(lo))); e <= int(math.Ceil(math.Log10(hi))); e++ {
		for m := 1.0; m < 10; m++ {
			v := m * math.Pow(10, float64(e))
			if v < lo*(1-1e-9) || v > hi*(1+1e-9) {
				continue
			}
			t := plot.Tick{Value: v}
			if m == 1 && e%every == 0 || span < 2.5 && (m == 2 || m == 5) {
				t.Label = strconv.FormatFloat(v, 'g', 3, 64)
			}
			out = append(out, t)
		}
	}
	return out
}

// unlabelled keeps the marks of an axis and drops their labels, for panels that
// have another one below.
type unlabelled struct{ of plot.Ticker }

// Ticks implements plot.Ticker.
func (u unlabelled) Ticks(lo, hi float64) []plot.Tick {
	out := u.of.Ticks(lo, hi)
	for i := range out {
		if out[i].Label != "" {
			out[i].Label = " "
		}
	}
	return out
}

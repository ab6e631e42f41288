package score

import "math"

const (
	binWidth = 5e-5
	bins     = 80_001 // [0, 4] in steps of binWidth; the last holds 4 and whatever is above
	perUnit  = 20_000
)

// histogram counts sizes in bins of 5e-5 over [0, 4]: a
// reference counted over too small a capacity leaves [0, 1]. It remembers which bins
// were touched, so that clearing it between runs costs what was used.
type histogram struct {
	count  [bins]uint32
	top    int // one past the highest bin touched
	number int64
}

func (h *histogram) clear() {
	clear(h.count[:h.top])
	h.top, h.number = 0, 0
}

// binOf returns the bin of size ≥ 0.
func binOf(size float64) int {
	if size < 4 {
		return int(size * perUnit)
	}
	return bins - 1
}

// add counts size, which is not negative; NaN is not counted.
func (h *histogram) add(size float64) {
	if !(size >= 0) {
		return
	}
	b := binOf(size)
	h.count[b]++
	h.top = max(h.top, b+1)
	h.number++
}

// percentile returns the value below which the share p of the sizes lies, with
// linear interpolation between order statistics (the (n-1)p rule, type 7 of
// Hyndman & Fan 1996). The m sizes of a bin are taken as the middles of m equal
// parts of it, so the result is less than one bin width from that of the sizes
// themselves. NaN where nothing was counted.
func (h *histogram) percentile(p float64) float64 {
	if h.number == 0 {
		return math.NaN()
	}
	rank := p * float64(h.number-1)
	low := int64(rank)
	a := h.order(low)
	if low+1 == h.number {
		return a
	}
	return a + (rank-float64(low))*(h.order(low+1)-a)
}

// order returns about the k-th smallest size, counted from 0.
func (h *histogram) order(k int64) float64 {
	var below int64
	for b := range h.count[:h.top] {
		m := int64(h.count[b])
		if k < below+m {
			return (float64(b) + (float64(k-below)+0.5)/float64(m)) * binWidth
		}
		below += m
	}
	return math.NaN()
}

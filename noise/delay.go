package noise

import (
	"fmt"
	"math"
)

// maxLag is the longest delay that is kept in memory, in samples.
const maxLag = 1 << 20

// lag is a delay of evenly sampled columns: the value at t_k - delay lies
// whole samples back, and then part of a sample on. It remembers two columns,
// since a voltage runs from just after one sample to just before the next.
type lag struct {
	whole   int     // 0: no delay
	part    float64 // [0, 1)
	at      int     // where the oldest remembered sample is
	from    []float64
	to      []float64
	started bool
}

// reset makes a lag of delayS, for at most samples samples (0: unknown). It
// allocates only to remember more than ever before.
func (l *lag) reset(delayS, periodS float64, samples int) error {
	l.whole, l.part, l.at, l.started = 0, 0, 0, false
	if delayS == 0 {
		return nil
	}
	d := delayS / periodS
	if near := math.Round(d); math.Abs(d-near) <= 1e-9*math.Max(1, d) {
		d = near // a multiple of the period, but for the rounding of both
	}
	whole := math.Ceil(d)
	if samples > 0 && whole >= float64(samples) {
		whole, d = float64(samples), float64(samples) // never sees anything but t = 0
	}
	if whole > maxLag {
		return fmt.Errorf("delay_s: %v, which is %.0f samples of %v s, allowed is at most %d samples in a run as long as that",
			delayS, whole, periodS, maxLag)
	}
	l.whole, l.part = int(whole), whole-d
	l.from, l.to = grow(l.from, l.whole), grow(l.to, l.whole)
	return nil
}

// held writes to out the value of column x at t - delay, each value holding
// from its sample on.
func (l *lag) held(x, out []float64) {
	l.start(x)
	at, mem := l.at, l.from
	for k, v := range x {
		out[k] = mem[at]
		mem[at] = v
		if at++; at == len(mem) {
			at = 0
		}
	}
	l.at = at
}

// linear writes to out the value at t - delay of what runs straight from x at
// each sample to y at the next. Without part it is y at a sample where before
// is true, else x. Read with y = x for one column that is linear between
// samples, which is also what shifts the means over intervals.
func (l *lag) linear(x, y, out []float64, before bool) {
	if l.part == 0 {
		if before {
			x = y
		}
		l.held(x, out)
		return
	}
	l.start(x)
	at, from, to, part := l.at, l.from, l.to, l.part
	to = to[:len(from)]
	for k, v := range x {
		left := from[at]
		from[at], to[at] = v, y[k]
		if at++; at == len(from) {
			at = 0
		}
		out[k] = left + part*(to[at]-left)
	}
	l.at = at
}

// start fills the memory with the first value, which is as all was before.
func (l *lag) start(x []float64) {
	if l.started || len(x) == 0 {
		return
	}
	l.started = true
	for k := range l.from {
		l.from[k], l.to[k] = x[0], x[0]
	}
}

// grow returns a slice of n values, in x's memory if they fit.
func grow(x []float64, n int) []float64 {
	if cap(x) < n {
		return make([]float64, n)
	}
	return x[:n]
}

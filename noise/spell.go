package noise

import (
	"math"

	"soctrial/plant/stream"
)

// spell is a fault that comes and goes: a Markov chain of two states, one step
// a sample. A spell ends at a step of dt with probability dt/mean, so spells
// last mean seconds on average, counting dt for each sample in them; one begins
// as often as keeps the share of time within spells. The first sample is drawn
// from that share itself, so the chain is stationary from the start.
//
// A sample is the shortest spell there is. Where the mean is shorter than dt,
// or so short for its share that good samples would be fewer than spells,
// spells last as long as they must: the share always holds.
type spell struct {
	src          stream.Source
	share, meanS float64
	on, begun    bool
	needed       float64 // of hazard before the state turns, in uneven samples …
	left         int     // … and samples before it does, in even ones
	found        []run
}

// run is a stretch of a block, to excluded.
type run struct{ from, to int }

func (p *spell) reset(seed uint64, name string, share, meanS float64) {
	*p = spell{share: share, meanS: meanS, found: p.found[:0]}
	if share > 0 {
		p.src = stream.New(seed, name)
	}
}

// odds returns the probabilities that a spell begins and ends at a step of dtS.
func (p *spell) odds(dtS float64) (begin, end float64) {
	end = min(dtS/p.meanS, 1, (1-p.share)/p.share)
	return end * p.share / (1 - p.share), end
}

// runs moves on by a block of n samples and returns where in it the fault is
// on. Even samples cost a number a turn, uneven ones a number each.
func (p *spell) runs(n int, dt spacing) []run {
	p.found = p.found[:0]
	if n == 0 {
		return p.found
	}
	begin, end := p.odds(dt.periodS)
	first := !p.begun
	if first {
		p.begun = true
		p.on = p.src.Float64() < p.share
		p.stay(begin, end)
	}
	if dt.dtS != nil {
		p.uneven(n, dt.dtS, first)
		return p.found
	}
	for k := 0; k < n; {
		to := min(n, k+p.left)
		p.add(k, to)
		p.left -= to - k
		k = to
		if p.left == 0 {
			p.on = !p.on
			p.stay(begin, end)
		}
	}
	return p.found
}

// add notes the stretch where the fault is on, joined to one just before.
func (p *spell) add(from, to int) {
	if !p.on || to == from {
		return
	}
	if n := len(p.found); n > 0 && p.found[n-1].to == from {
		p.found[n-1].to = to
		return
	}
	p.found = append(p.found, run{from, to})
}

// stay draws how long the state stays as it is: the state turns where the sum
// of -ln(1-odds) over the samples passes an exponential number, which for even
// samples is after the number of trials to the first success.
func (p *spell) stay(begin, end float64) {
	p.needed = -math.Log1p(-p.src.Float64())
	p.left = 1 + int(min(math.Floor(p.needed/p.hazard(begin, end)), 1e15))
}

// hazard is what a step of these odds takes off what is needed.
func (p *spell) hazard(begin, end float64) float64 {
	if p.on {
		return -math.Log1p(-end)
	}
	return -math.Log1p(-begin)
}

func (p *spell) uneven(n int, dtS []float64, first bool) {
	for k := range n {
		if k > 0 || !first {
			begin, end := p.odds(dtS[k])
			if p.needed -= p.hazard(begin, end); p.needed < 0 {
				p.on = !p.on
				p.stay(begin, end)
			}
		}
		p.add(k, k+1)
	}
}

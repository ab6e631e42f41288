package noise

import "soctrial/plant/stream"

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
	end, begin   float64 // probabilities of a step of lastS
	lastS        float64
}

func (p *spell) reset(seed uint64, name string, share, meanS float64) {
	*p = spell{share: share, meanS: meanS}
	if share > 0 {
		p.src = stream.New(seed, name)
	}
}

// step moves on by dtS, spending the uniform u, and reports whether the fault
// is on there. At the first sample dtS does not matter.
func (p *spell) step(u, dtS float64) bool {
	if dtS != p.lastS {
		p.lastS = dtS
		p.end = min(dtS/p.meanS, 1, (1-p.share)/p.share)
		p.begin = p.end * p.share / (1 - p.share)
	}
	switch {
	case !p.begun:
		p.begun = true
		p.on = u < p.share
	case p.on:
		p.on = u >= p.end
	default:
		p.on = u < p.begin
	}
	return p.on
}

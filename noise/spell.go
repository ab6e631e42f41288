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
}

func (p *spell) reset(seed uint64, name string, share, meanS float64) {
	*p = spell{share: share, meanS: meanS}
	if share > 0 {
		p.src = stream.New(seed, name)
	}
}

// odds returns the probabilities that a spell begins and ends at a step of dtS.
func (p *spell) odds(dtS float64) (begin, end float64) {
	end = min(dtS/p.meanS, 1, (1-p.share)/p.share)
	return end * p.share / (1 - p.share), end
}

// mark moves on by a block and writes to marks 1 where the fault is on, else 0.
// It spends one uniform number a sample.
func (p *spell) mark(marks []float64, dt spacing) {
	p.src.Float64s(marks)
	on, from := p.on, 0
	if !p.begun && len(marks) > 0 {
		p.begun, from = true, 1
		on = marks[0] < p.share
		marks[0] = one(on)
	}
	begin, end := p.odds(dt.periodS)
	for k := from; k < len(marks); k++ {
		if dt.dtS != nil {
			begin, end = p.odds(dt.dtS[k])
		}
		turn := begin
		if on {
			turn = end
		}
		if marks[k] < turn {
			on = !on
		}
		marks[k] = one(on)
	}
	p.on = on
}

func one(on bool) float64 {
	if on {
		return 1
	}
	return 0
}

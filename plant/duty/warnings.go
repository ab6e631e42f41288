package duty

import "fmt"

// Warnings tells, once a leg and in the legs' order, what a test sampled every
// periodS seconds may not see: pulses, legs and values of a trace that are over
// within a sample. The plant cuts its steps at every change, so that their
// charge is counted all the same.
func (p *Program) Warnings(periodS float64) []string {
	return p.root.warnings(nil, periodS)
}

func (n *node) warnings(out []string, periodS float64) []string {
	if n.kind == Group {
		for i := range n.children {
			out = n.children[i].warnings(out, periodS)
		}
		return out
	}
	// Rounding of a sum of times makes no piece shorter than a sample.
	bound := periodS * (1 - 1e-9)
	count, shortest := 0, 0
	for k := range n.at {
		if l := n.pieceS(k); l < bound {
			count++
			if count == 1 || l < n.pieceS(shortest) {
				shortest = k
			}
		}
	}
	const ending = "shorter than the sample period %g s: a reading may miss %s, its charge is counted all the same"
	switch {
	case n.kind == Pulses && n.pulseS < bound:
		out = append(out, fmt.Sprintf("%s.pulse_s is %g, "+ending, n.key, n.pulseS, periodS, "the pulse"))
	case count == 0:
	case len(n.at) == 1:
		out = append(out, fmt.Sprintf("%s lasts %g s, "+ending, n.key, n.passS, periodS, "it"))
	default:
		out = append(out, fmt.Sprintf("%s: %d of %d values hold for a time shorter than the sample period %g s, the shortest for %g s from %g s on: "+
			"readings may miss them, their charge is counted all the same", n.key, count, len(n.at), periodS, n.pieceS(shortest), n.at[shortest]))
	}
	return out
}

// pieceS is how long value k of a leaf holds.
func (n *node) pieceS(k int) float64 {
	if k+1 < len(n.at) {
		return n.at[k+1] - n.at[k]
	}
	return n.passS - n.at[k]
}

package score

import (
	"math"

	"soctrial/estimator"
)

// sample is what one sample adds to the means.
type sample struct {
	waits, scored, settled  bool
	timeS                   float64
	err, free, std, y, ystd float64
}

// AddReference scores the next block of a replayed record against its
// reference SOC at the record's own times, which never decrease. A reference
// that is NaN is not scored: the sample counts in the metrics of the voltage
// alone, and no step is taken across it.
func (a *Accumulator) AddReference(timeS, socTrue []float64, est *estimator.Estimate) {
	a.periodS = 0
	for i := range est.SOC {
		t := timeS[i]
		if a.samples == 0 {
			a.startS = t
		}
		a.weighPending(t)
		e := est.SOC[i] - socTrue[i]
		settled := t >= a.startS+a.set.SettleAfterS
		scored := !math.IsNaN(socTrue[i])
		if scored {
			a.addExtremes(t, e, socTrue[i], settled)
		} else {
			a.before = math.NaN()
		}
		a.pending = sample{waits: true, scored: scored, settled: settled, timeS: t, err: e, free: est.SOCFree[i] - socTrue[i],
			std: est.SOCStd[i], y: est.InnovationV[i], ystd: est.InnovationStdV[i]}
		if !a.set.WeightByInterval {
			a.weigh(1)
		}
		a.lastS = t
		a.samples++
		if a.samples%foldAt == 0 {
			a.fold()
		}
	}
}

// weighPending weighs the sample that waits, now that the next one's time is known.
func (a *Accumulator) weighPending(nextS float64) {
	if a.pending.waits {
		a.weigh(nextS - a.pending.timeS)
	}
}

// addExtremes takes in what is not a mean.
func (a *Accumulator) addExtremes(t, e, soc float64, settled bool) {
	size := math.Abs(e)
	if math.IsNaN(a.convergedS) {
		a.watchOne(t, e)
	}
	part := &a.unsettled
	if settled {
		part = &a.settled
		if d := math.Abs(e - a.before); d > a.stepMax {
			a.stepMax = d
		}
		a.before = e
	}
	part.max = max(part.max, size)
	if soc < a.set.LowSOC && size > a.lowMax {
		a.lowMax = size
	}
	a.hist.add(size)
	a.last = e
}

// weigh adds the waiting sample to the means with weight w.
func (a *Accumulator) weigh(w float64) {
	p := &a.pending
	p.waits = false
	if p.scored {
		part := &a.unsettled
		if p.settled {
			part = &a.settled
		}
		part.weight.part += w
		part.bias.part += w * p.err
		part.abs.part += w * math.Abs(p.err)
		part.square.part += w * (p.err * p.err)
	}
	if p.std == p.std && p.free == p.free {
		a.coverW.part += w
		if math.Abs(p.free) <= twoSided*p.std {
			a.coverIn.part += w
		}
		if p.std > 0 {
			a.neesW.part += w
			a.nees.part += w * (p.free * p.free / (p.std * p.std))
		}
	}
	if p.y == p.y {
		a.innovationW.part += w
		a.innovation.part += w * (p.y * p.y)
		if p.ystd > 0 {
			q := p.y * p.y / (p.ystd * p.ystd)
			a.nisW.part += w
			a.nis.part += w * q
			if q <= inBand {
				a.nisIn.part += w
			}
		}
	}
}

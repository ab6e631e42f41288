package score

import (
	"math"

	"soctrial/estimator"
	"soctrial/plant"
)

// Settings rule which samples a metric looks at.
type Settings struct {
	SettleAfterS  float64 // samples from this time on count as settled; s
	ConvergeBand  float64 // |error| that counts as converged
	ConvergeHoldS float64 // how long it must stay there; s
	LowSOC        float64 // true SOC below which low_soc_max_abs looks
	// WeightByInterval weighs every mean by the time to the next sample, for
	// records whose samples lie unevenly; the last sample then has no weight.
	WeightByInterval bool
}

const (
	// inBand is the 95 % quantile of chi-square with one degree of freedom, to
	// the digits the design promises.
	inBand = 3.841
	// twoSided is the same of a standard normal size, likewise.
	twoSided = 1.96
	// foldAt is how many samples are summed before the sum joins the total: a
	// running sum of 1e8 samples would lose digits, and folding at multiples of
	// the sample's own number keeps sums free of where blocks were cut.
	foldAt = 256
)

// sum is a running sum in two storeys.
type sum struct{ part, total float64 }

func (s *sum) fold()          { s.total += s.part; s.part = 0 }
func (s *sum) value() float64 { return s.total + s.part }

// errorSums are the sums over the samples before, or from, settling on.
type errorSums struct {
	weight, bias, abs, square sum
	max                       float64 // negative: none yet
}

// Accumulator turns consecutive blocks of truth and estimates into Metrics. Its
// zero value is to be Reset before use; it is reused between runs and
// allocates nothing.
type Accumulator struct {
	set       Settings
	samples   int64
	startS    float64 // time of the first sample
	lastS     float64 // time of the last sample
	periodS   float64 // 0: uneven
	durationS float64 // NaN: not told
	limited   float64

	unsettled, settled errorSums
	lowMax             float64 // negative: none yet
	stepMax            float64 // negative: none yet
	last               float64 // error of the last scored sample
	before             float64 // error of the sample before, where a step may be taken from it; else NaN

	innovation, nis, nees            sum // squares and ratios
	innovationW, nisW, neesW, coverW sum // weights
	nisIn, coverIn                   sum // weights in band

	streakS    float64 // start of the streak in band; NaN: none
	outS       float64 // time of the last sample out of the band; NaN: none
	convergedS float64 // NaN: not yet

	hist    histogram
	pending sample // of a weighted run: waits for its interval
}

// Reset makes the accumulator ready for another run.
func (a *Accumulator) Reset(s Settings) {
	a.hist.clear()
	nan := math.NaN()
	a.set = s
	a.samples, a.startS, a.lastS, a.periodS = 0, 0, 0, 0
	a.durationS, a.limited = nan, 0
	a.unsettled, a.settled = errorSums{max: -1}, errorSums{max: -1}
	a.lowMax, a.stepMax, a.last, a.before = -1, -1, nan, nan
	a.innovation, a.nis, a.nees = sum{}, sum{}, sum{}
	a.innovationW, a.nisW, a.neesW, a.coverW = sum{}, sum{}, sum{}, sum{}
	a.nisIn, a.coverIn = sum{}, sum{}
	a.streakS, a.outS, a.convergedS = nan, nan, nan
	a.pending = sample{}
}

// SetDuration tells how long the duty lasted and how long the plant cut its
// demand back; without it duration_s is the time the samples stand for and
// limited_s is 0.
func (a *Accumulator) SetDuration(durationS, limitedS float64) {
	a.durationS, a.limited = durationS, limitedS
}

// Add scores the next block. truth and est are of one length; est may be a
// run's beginning when an estimator was lost. A true or estimated SOC that is
// NaN makes the SOC means NaN.
func (a *Accumulator) Add(truth *plant.Truth, est *estimator.Estimate) {
	if a.set.WeightByInterval {
		a.AddReference(truth.TimeS, truth.SOC, est)
		return
	}
	a.periodS = truth.PeriodS
	for from, n := 0, est.Len(); from < n; {
		to := min(n, from+foldAt-int(a.samples%foldAt))
		a.addPiece(truth, est, from, to)
		from = to
	}
}

// addPiece scores samples from to to, which cross no multiple of foldAt.
func (a *Accumulator) addPiece(truth *plant.Truth, est *estimator.Estimate, from, to int) {
	timeS, soc := truth.TimeS[from:to], truth.SOC[from:to]
	if a.samples == 0 {
		a.startS = timeS[0]
	}
	reported := est.SOC[from:to]
	if math.IsNaN(a.convergedS) {
		a.watch(timeS, soc, reported)
	}
	settles := settledFrom(timeS, a.startS+a.set.SettleAfterS)
	if settles > 0 {
		a.addErrors(&a.unsettled, soc[:settles], reported[:settles])
		a.before, a.stepMax = math.NaN(), -1 // steps count between settled samples alone
	}
	if settles < len(timeS) {
		a.addErrors(&a.settled, soc[settles:], reported[settles:])
	}
	a.addSpread(soc, est.SOCFree[from:to], est.SOCStd[from:to])
	a.addInnovations(est.InnovationV[from:to], est.InnovationStdV[from:to])
	a.lastS = timeS[len(timeS)-1]
	a.samples += int64(to - from)
	if a.samples%foldAt == 0 {
		a.fold()
	}
}

// settledFrom returns the first index whose time is at least atS; times ascend.
func settledFrom(timeS []float64, atS float64) int {
	if timeS[0] >= atS {
		return 0
	}
	n := len(timeS)
	for n > 0 && timeS[n-1] >= atS {
		n--
	}
	return n
}

// sizeBits returns |x| as the integer of its bits. Those order as the sizes do,
// NaN above all, and integers are compared without a branch to mispredict.
func sizeBits(x float64) uint64 { return math.Float64bits(x) &^ (1 << 63) }

// addErrors sums the errors of reported against soc.
func (a *Accumulator) addErrors(to *errorSums, soc, reported []float64) {
	bias, abs, square := to.bias.part, to.abs.part, to.square.part
	reported = reported[:len(soc)]
	before, below := a.before, a.set.LowSOC
	if math.IsNaN(before) {
		before = reported[0] - soc[0] // no step into the first
	}
	var largest, step, low uint64
	anyLow := false
	count := &a.hist.count
	for i, z := range soc {
		e := reported[i] - z
		bias += e
		square += e * e
		bits := sizeBits(e)
		size := math.Float64frombits(bits)
		abs += size
		largest = max(largest, bits)
		step = max(step, sizeBits(e-before))
		before = e
		if z < below {
			anyLow = true
			low = max(low, bits)
		}
		if b := int(size * perUnit); uint(b) < bins {
			count[b]++
		} else {
			count[bins-1]++
		}
	}
	to.bias.part, to.abs.part, to.square.part = bias, abs, square
	to.weight.part += float64(len(soc))
	to.max = max(to.max, math.Float64frombits(largest))
	if anyLow {
		a.lowMax = max(a.lowMax, math.Float64frombits(low))
	}
	if len(soc) > 1 || !math.IsNaN(a.before) {
		a.stepMax = max(a.stepMax, math.Float64frombits(step))
	}
	a.hist.top = max(a.hist.top, binOf(math.Float64frombits(largest))+1)
	a.hist.number += int64(len(soc))
	a.before, a.last = before, before
}

// addSpread compares the stated deviations with the error of the SOC before it
// is limited. A stated deviation of 0 covers an error of 0 alone, and has no
// part in NEES.
func (a *Accumulator) addSpread(soc, free, std []float64) {
	free, std = free[:len(soc)], std[:len(soc)]
	nees := a.nees.part
	var covered, unstated, certain int
	for i, z := range soc {
		s, e := std[i], free[i]-z
		if s > 0 {
			nees += e * e / (s * s)
		} else if s == 0 {
			certain++
		} else {
			unstated++
			continue
		}
		if sizeBits(e) <= sizeBits(twoSided*s) {
			covered++
		}
	}
	a.nees.part = nees
	a.neesW.part += float64(len(soc) - unstated - certain)
	a.coverW.part += float64(len(soc) - unstated)
	a.coverIn.part += float64(covered)
}

// addInnovations compares the innovations with their stated deviations.
func (a *Accumulator) addInnovations(innovation, std []float64) {
	std = std[:len(innovation)]
	square, nis := a.innovation.part, a.nis.part
	var within, unmeasured, unsure int
	for i, y := range innovation {
		if y != y {
			unmeasured++
			continue
		}
		y2 := y * y
		square += y2
		s := std[i]
		if !(s > 0) {
			unsure++
			continue
		}
		q := y2 / (s * s)
		nis += q
		if sizeBits(q) <= math.Float64bits(inBand) {
			within++
		}
	}
	a.innovation.part, a.nis.part = square, nis
	a.innovationW.part += float64(len(innovation) - unmeasured)
	a.nisW.part += float64(len(innovation) - unmeasured - unsure)
	a.nisIn.part += float64(within)
}

// watch looks for the first time that stays in the band.
func (a *Accumulator) watch(timeS, soc, reported []float64) {
	for i, t := range timeS {
		a.watchOne(t, reported[i]-soc[i])
		if !math.IsNaN(a.convergedS) {
			return
		}
	}
}

// watchOne takes the error e at time t into the search. A streak is decided
// once a later time than its hold has come, or at the run's end.
func (a *Accumulator) watchOne(t, e float64) {
	switch in := math.Abs(e) <= a.set.ConvergeBand; {
	case t > a.streakS+a.set.ConvergeHoldS:
		a.convergedS = a.streakS
	case !in:
		a.streakS, a.outS = math.NaN(), t
	case math.IsNaN(a.streakS) && t != a.outS: // times may repeat
		a.streakS = t
	}
}

// fold moves every running sum one storey up.
func (a *Accumulator) fold() {
	for _, e := range []*errorSums{&a.unsettled, &a.settled} {
		e.weight.fold()
		e.bias.fold()
		e.abs.fold()
		e.square.fold()
	}
	for _, s := range []*sum{&a.innovation, &a.nis, &a.nees, &a.innovationW, &a.nisW, &a.neesW, &a.coverW, &a.nisIn, &a.coverIn} {
		s.fold()
	}
}

// Metrics returns the scores of what was added since Reset.
func (a *Accumulator) Metrics() Metrics {
	u, s := &a.unsettled, &a.settled
	weight := u.weight.value() + s.weight.value()
	m := Metrics{
		SOCRMSE:        math.Sqrt(mean(u.square.value()+s.square.value(), weight)),
		SOCMAE:         mean(u.abs.value()+s.abs.value(), weight),
		SOCBias:        mean(u.bias.value()+s.bias.value(), weight),
		SOCMaxAbs:      orNaN(max(u.max, s.max)),
		SOCP95Abs:      a.hist.percentile(0.95),
		SettledRMSE:    math.Sqrt(mean(s.square.value(), s.weight.value())),
		SettledMaxAbs:  orNaN(s.max),
		ConvergeS:      a.convergedS - a.startS,
		EndError:       a.last,
		LowSOCMaxAbs:   orNaN(a.lowMax),
		SOCStepMax:     orNaN(a.stepMax),
		VoltageRMSEV:   math.Sqrt(mean(a.innovation.value(), a.innovationW.value())),
		NISMean:        mean(a.nis.value(), a.nisW.value()),
		NISInBandShare: mean(a.nisIn.value(), a.nisW.value()),
		NEESMean:       mean(a.nees.value(), a.neesW.value()),
		Coverage95:     mean(a.coverIn.value(), a.coverW.value()),
		Samples:        a.samples,
		DurationS:      a.durationS,
		LimitedS:       a.limited,
	}
	m.SOCP95Abs = min(m.SOCP95Abs, m.SOCMaxAbs) // a bin's parts may lie above its only size
	endS := a.lastS + a.periodS                 // the last sample stands for one period
	if math.IsNaN(m.DurationS) {
		m.DurationS = 0
		if a.samples > 0 {
			m.DurationS = endS - a.startS
		}
	}
	if !math.IsNaN(a.durationS) {
		endS = min(endS, a.startS+a.durationS)
	}
	if math.IsNaN(m.ConvergeS) && a.streakS+a.set.ConvergeHoldS <= endS {
		m.ConvergeS = a.streakS - a.startS
	}
	return m
}

func mean(sum, weight float64) float64 {
	if weight == 0 {
		return math.NaN()
	}
	return sum / weight
}

// orNaN returns a largest size, NaN where none was met.
func orNaN(x float64) float64 {
	if x < 0 {
		return math.NaN()
	}
	return x
}

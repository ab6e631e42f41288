package score

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Interval is a mean over scenarios with its two-sided 95 % t-interval. Low and
// High are infinite with fewer than two scenarios, Mean is NaN with none.
type Interval struct {
	Mean, Low, High float64
	N               int
}

// MeanInterval returns the mean of the values that are not NaN with its
// t-interval of the given confidence; the values are to be independent, one a
// scenario.
func MeanInterval(values []float64, confidence float64) Interval {
	var known []float64
	for _, x := range values {
		if !math.IsNaN(x) {
			known = append(known, x)
		}
	}
	i := Interval{Mean: math.NaN(), Low: math.Inf(-1), High: math.Inf(1), N: len(known)}
	if len(known) == 0 {
		return i
	}
	i.Mean = stat.Mean(known, nil)
	if len(known) > 1 {
		_, std := stat.MeanStdDev(known, nil)
		n := float64(len(known))
		t := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: n - 1}.Quantile((1 + confidence) / 2)
		half := t * std / math.Sqrt(n)
		i.Low, i.High = i.Mean-half, i.Mean+half
	}
	return i
}

// MeanBand returns the two-sided band in which the mean of NEES (of a state of
// that dimension) or NIS (dimension 1) over independent runs lies with the given
// confidence when a filter is honest: runs times the mean is chi-square with
// runs·dimension degrees of freedom (Bar-Shalom, Li & Kirubarajan 2001,
// Estimation with Applications to Tracking and Navigation, section 5.4).
func MeanBand(dimension, runs int, confidence float64) (low, high float64) {
	tail := (1 - confidence) / 2
	c := distuv.ChiSquared{K: float64(dimension * runs)}
	return c.Quantile(tail) / float64(runs), c.Quantile(1-tail) / float64(runs)
}

// Confidence is what an estimator's stated deviations come to.
type Confidence string

// What stated deviations come to.
const (
	Overconfident  Confidence = "overconfident"  // errors are larger than stated
	Underconfident Confidence = "underconfident" // errors are smaller than stated
	Consistent     Confidence = "consistent"     // nothing shows them wrong
	Unknown        Confidence = "unknown"        // none stated, or fewer than two scenarios
)

// Honesty is whether an estimator's errors are as large as it says, over
// scenarios: an honest one has NEES and NIS of 1 and a coverage of 0.95.
type Honesty struct {
	Coverage95, NIS, NEES Interval // means over scenarios
	Verdict               Confidence
	Reasons               []string // one a figure that speaks, e.g. "overconfident: NEES 3.1 [2.7, 3.5] above 1"
}

// HonestyOf judges the scenarios with status ok; the rows are one estimator's.
func HonestyOf(results []Result) Honesty {
	var coverage, nis, nees []float64
	for i := range results {
		if m := &results[i].Metrics; results[i].Status == OK {
			coverage = append(coverage, m.Coverage95)
			nis = append(nis, m.NISMean)
			nees = append(nees, m.NEESMean)
		}
	}
	h := Honesty{Coverage95: MeanInterval(coverage, 0.95), NIS: MeanInterval(nis, 0.95), NEES: MeanInterval(nees, 0.95)}
	// A t-interval knows nothing of what a share or a square can be.
	h.Coverage95, h.NIS, h.NEES = h.Coverage95.within(0, 1), h.NIS.within(0, math.Inf(1)), h.NEES.within(0, math.Inf(1))
	told, over := false, false
	for _, f := range []struct {
		name         string
		of           Interval
		honest       float64
		above, below Confidence
	}{{"NEES", h.NEES, 1, Overconfident, Underconfident}, {"NIS", h.NIS, 1, Overconfident, Underconfident},
		{"coverage", h.Coverage95, 0.95, Underconfident, Overconfident}} {
		told = told || f.of.N > 1
		var says Confidence
		side := ""
		switch {
		case f.of.Low > f.honest:
			says, side = f.above, "above"
		case f.of.High < f.honest:
			says, side = f.below, "below"
		default:
			continue
		}
		over = over || says == Overconfident
		h.Reasons = append(h.Reasons, fmt.Sprintf("%s: %s %.3g [%.3g, %.3g] %s %g",
			says, f.name, f.of.Mean, f.of.Low, f.of.High, side, f.honest))
	}
	switch {
	case over: // the worse of the two where figures disagree
		h.Verdict = Overconfident
	case len(h.Reasons) > 0:
		h.Verdict = Underconfident
	case told:
		h.Verdict = Consistent
	default:
		h.Verdict = Unknown
	}
	return h
}

// within cuts the interval's ends to what the quantity can be.
func (i Interval) within(low, high float64) Interval {
	if i.N < 2 {
		return i
	}
	i.Low, i.High = max(i.Low, low), min(i.High, high)
	return i
}

package score

import (
	"math"
	"sort"

	"soctrial/estimator"
)

// naive recomputes every metric from stored arrays by the words of their
// definitions, with none of the accumulator's means: no running sums, no
// histogram, no streaming.
type naive struct {
	set                Settings
	timeS, soc         []float64
	est                estimator.Estimate
	weight             []float64
	endS               float64
	duration, limitedS float64
}

func (n *naive) metrics() Metrics {
	known := func(k int) bool { return !math.IsNaN(n.soc[k]) }
	settled := func(k int) bool { return n.timeS[k] >= n.timeS[0]+n.set.SettleAfterS }
	both := func(a, b func(int) bool) func(int) bool { return func(k int) bool { return a(k) && b(k) } }
	err := func(k int) float64 { return n.est.SOC[k] - n.soc[k] }
	free := func(k int) float64 { return n.est.SOCFree[k] - n.soc[k] }
	y := func(k int) float64 { return n.est.InnovationV[k] }
	s := func(k int) float64 { return n.est.InnovationStdV[k] }
	hasY := func(k int) bool { return !math.IsNaN(y(k)) }
	hasS := func(k int) bool { return hasY(k) && s(k) > 0 }
	std := func(k int) float64 { return n.est.SOCStd[k] }
	hasStd := both(known, func(k int) bool { return !math.IsNaN(std(k)) })
	size := func(f func(int) float64) func(int) float64 { return func(k int) float64 { return math.Abs(f(k)) } }
	square := func(f func(int) float64) func(int) float64 { return func(k int) float64 { return f(k) * f(k) } }
	nis := func(k int) float64 { return y(k) * y(k) / (s(k) * s(k)) }

	m := Metrics{Samples: int64(len(n.timeS)), DurationS: n.duration, LimitedS: n.limitedS}
	m.SOCRMSE = math.Sqrt(n.mean(square(err), known))
	m.SOCMAE = n.mean(size(err), known)
	m.SOCBias = n.mean(err, known)
	m.SOCMaxAbs = n.largest(size(err), known)
	m.SOCP95Abs = n.percentile(size(err), known, 0.95)
	m.SettledRMSE = math.Sqrt(n.mean(square(err), both(known, settled)))
	m.SettledMaxAbs = n.largest(size(err), both(known, settled))
	m.ConvergeS = n.converge(err, known)
	m.EndError = math.NaN()
	for k := range n.timeS {
		if known(k) {
			m.EndError = err(k)
		}
	}
	m.LowSOCMaxAbs = n.largest(size(err), both(known, func(k int) bool { return n.soc[k] < n.set.LowSOC }))
	m.SOCStepMax = n.largest(func(k int) float64 {
		return math.Abs((n.est.SOC[k] - n.est.SOC[k-1]) - (n.soc[k] - n.soc[k-1]))
	}, func(k int) bool { return k > 0 && known(k) && known(k-1) && settled(k-1) })
	m.VoltageRMSEV = math.Sqrt(n.mean(square(y), hasY))
	m.NISMean = n.mean(nis, hasS)
	m.NISInBandShare = n.mean(func(k int) float64 { return count(nis(k) <= 3.841) }, hasS)
	m.NEESMean = n.mean(func(k int) float64 { return free(k) * free(k) / (std(k) * std(k)) },
		both(hasStd, func(k int) bool { return std(k) > 0 }))
	m.Coverage95 = n.mean(func(k int) float64 { return count(math.Abs(free(k)) <= 1.96*std(k)) }, hasStd)
	return m
}

func count(is bool) float64 {
	if is {
		return 1
	}
	return 0
}

func (n *naive) mean(f func(int) float64, where func(int) bool) float64 {
	var sum, weight float64
	for k := range n.timeS {
		if where(k) {
			sum += n.weight[k] * f(k)
			weight += n.weight[k]
		}
	}
	if weight == 0 {
		return math.NaN()
	}
	return sum / weight
}

func (n *naive) largest(f func(int) float64, where func(int) bool) float64 {
	best := math.NaN()
	for k := range n.timeS {
		if where(k) && !(f(k) <= best) {
			best = f(k)
		}
	}
	return best
}

// percentile is the plain one of sorted values, (n-1)p and linear.
func (n *naive) percentile(f func(int) float64, where func(int) bool, p float64) float64 {
	var x []float64
	for k := range n.timeS {
		if where(k) {
			x = append(x, f(k))
		}
	}
	if len(x) == 0 {
		return math.NaN()
	}
	sort.Float64s(x)
	rank := p * float64(len(x)-1)
	i := int(rank)
	if i+1 == len(x) {
		return x[i]
	}
	return x[i] + (rank-float64(i))*(x[i+1]-x[i])
}

func (n *naive) converge(err func(int) float64, known func(int) bool) float64 {
	for k, t := range n.timeS {
		if !known(k) || t+n.set.ConvergeHoldS > n.endS {
			continue
		}
		stays := true
		for j := range n.timeS {
			if n.timeS[j] >= t && n.timeS[j] <= t+n.set.ConvergeHoldS && known(j) && math.Abs(err(j)) > n.set.ConvergeBand {
				stays = false
			}
		}
		if stays {
			return t - n.timeS[0]
		}
	}
	return math.NaN()
}

package roster_test

import (
	"fmt"
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"

	"soctrial/estimator"
	"soctrial/noise"
	"soctrial/plant"
	"soctrial/plant/cell"
	"soctrial/plant/record"
	"soctrial/plant/stream"
)

// What the filter is told of its noises in the consistency test. R0·currentStdA
// is an eighth of voltageStdV: the one current reading enters update and
// prediction alike, which the filter takes for two.
const (
	runs, samples            = 200, 1200
	socStd, branchStdV       = 0.05, 0.006
	voltageStdV, currentStdA = 0.004, 0.05
	r0Ohm                    = 0.01
	confidence               = 0.999
)

// instants are the samples at which the state's error is judged.
var instants = [5]int{20, 120, 400, 800, 1199}

func consistentCell() *cell.Cell {
	c := riccatiCell(2)
	c.R0 = cell.Constant(r0Ohm)
	return c
}

// noisyRun is a run of the cell from a start drawn from the filter's own P0,
// through plant and sensors as noisy as the filter is told, and the true
// states. The branches' are found from the true current by their closed form.
func noisyRun(t *testing.T, seed uint64, reading record.CurrentReading) (in record.Readings, states [][3]float64) {
	t.Helper()
	start, course := stream.New(seed, "start"), stream.New(seed, "course")
	currentA := make([]float64, samples)
	for k := range currentA {
		if currentA[k] = 6 * course.Normal(); k%30 != 0 {
			currentA[k] = currentA[k-1]
		}
	}
	x := [3]float64{0.6 + socStd*start.Normal(), branchStdV * start.Normal(), branchStdV * start.Normal()}
	sensors := noise.Sensors{SamplePeriodS: 1, Current: noise.Channel{Noise: currentStdA}, Voltage: noise.Channel{Noise: voltageStdV}, CurrentReading: reading}
	c := consistentCell()
	truth, in := follow(t, c, trace(currentA), sensors, seed, func(s *plant.Setup) { s.SOCStart, s.BranchStartV = x[0], x[1:] })
	for k := range truth.TimeS {
		x[0] = truth.SOC[k]
		states = append(states, x)
		for j, b := range c.Branches {
			rise := -math.Expm1(-1 / b.TauS.Values[0][0])
			x[1+j] += rise * (b.Ohm.Values[0][0]*truth.CurrentA[k] - x[1+j])
		}
	}
	return in, states
}

// honesty is what the runs say about a filter.
type honesty struct {
	atInstants [len(instants)]float64 // NEES of the whole state, mean over runs
	nis, nees  []float64              // means of each run
}

func judge(t *testing.T, reading record.CurrentReading, toldVoltageStdV float64) honesty {
	t.Helper()
	var h honesty
	s := estimator.Setup{Spec: estimator.Spec{Kind: "ekf", Branches: -1, SOCStd: socStd, BranchStdV: branchStdV,
		VoltageStdV: toldVoltageStdV, CurrentStdA: currentStdA}, Cell: consistentCell(), SOCStart: 0.6, PeriodS: 1}
	e := newEstimator(t, s)
	seen := e.(estimator.Inspectable)
	x, p, diff := make([]float64, 3), make([]float64, 9), mat.NewVecDense(3, nil)
	for seed := uint64(1); seed <= runs; seed++ {
		if err := e.(estimator.Resetter).Reset(s); err != nil {
			t.Fatal(err)
		}
		in, truth := noisyRun(t, seed, reading)
		nis, nees, at := 0.0, 0.0, 0
		out := estimator.MakeEstimate(1)
		for k := range samples {
			one := in.Slice(k, k+1)
			if err := e.Advance(&one, &out); err != nil {
				t.Fatal(err)
			}
			seen.State(x)
			seen.Covariance(p)
			for r := range x {
				diff.SetVec(r, x[r]-truth[k][r])
			}
			var chol mat.Cholesky
			if !chol.Factorize(mat.NewSymDense(3, p)) {
				t.Fatalf("seed %d, sample %d: covariance is not positive", seed, k)
			}
			var solved mat.VecDense
			if err := chol.SolveVecTo(&solved, diff); err != nil {
				t.Fatal(err)
			}
			e2 := mat.Dot(diff, &solved)
			y := out.InnovationV[0] / out.InnovationStdV[0]
			nis += y * y / samples
			nees += e2 / samples
			if at < len(instants) && k == instants[at] {
				h.atInstants[at] += e2 / runs
				at++
			}
		}
		h.nis, h.nees = append(h.nis, nis), append(h.nees, nees)
	}
	return h
}

// complaints lists what is not as an honest filter's would be.
func (h *honesty) complaints() (list []string) {
	const n = 3
	law := distuv.ChiSquared{K: runs * n}
	low, high := law.Quantile((1-confidence)/2)/runs, law.Quantile((1+confidence)/2)/runs
	for i, v := range h.atInstants {
		if !(v >= low && v <= high) {
			list = append(list, fmt.Sprintf("NEES at sample %d is %.3f, allowed is %.3f to %.3f", instants[i], v, low, high))
		}
	}
	student := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: runs - 1}.Quantile((1 + confidence) / 2)
	for _, c := range []struct {
		name   string
		values []float64
		want   float64
	}{{"NIS", h.nis, 1}, {"NEES", h.nees, n}} {
		mean, std := stat.MeanStdDev(c.values, nil)
		if half := student * std / math.Sqrt(runs); !(math.Abs(mean-c.want) <= half) {
			list = append(list, fmt.Sprintf("mean %s over runs is %.4f ± %.4f, which leaves out %g", c.name, mean, half, c.want))
		}
	}
	return list
}

// Consistency by Bar-Shalom, Li, Kirubarajan 2001, section 5.4: told its true
// noises the filter is honest, over 200 runs fixed beforehand; told half or
// twice the voltage's it is not, and the same test says so.
func TestConsistency(t *testing.T) {
	for _, reading := range []record.CurrentReading{record.Instant, record.IntervalMean} {
		t.Run(string(reading), func(t *testing.T) {
			honest := judge(t, reading, voltageStdV)
			for _, c := range honest.complaints() {
				t.Error(c)
			}
			for _, factor := range []float64{0.5, 2} {
				wrong := judge(t, reading, factor*voltageStdV)
				list := wrong.complaints()
				if len(list) < 5 {
					t.Errorf("told %g times the voltage's noise, only this is found amiss: %q", factor, list)
				}
			}
		})
	}
}

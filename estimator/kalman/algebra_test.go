package kalman_test

import (
	"fmt"
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"

	"soctrial/estimator"
	"soctrial/estimator/estimatortest"
	"soctrial/estimator/kalman"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

func build(t testing.TB, s estimator.Setup) estimator.Estimator {
	t.Helper()
	e, err := kalman.NewEKF(s)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

func advance(t testing.TB, e estimator.Estimator, in record.Readings) estimator.Estimate {
	t.Helper()
	out := estimator.MakeEstimate(in.Len())
	if err := e.Advance(&in, &out); err != nil {
		t.Fatal(err)
	}
	return out
}

func covariance(e estimator.Estimator) *mat.SymDense {
	seen := e.(estimator.Inspectable)
	n := len(seen.StateNames())
	p := make([]float64, n*n)
	seen.Covariance(p)
	return mat.NewSymDense(n, p)
}

func mean(e estimator.Estimator) []float64 {
	seen := e.(estimator.Inspectable)
	x := make([]float64, len(seen.StateNames()))
	seen.State(x)
	return x
}

// straightCell has an OCV of 3 V + 0.6 V·soc and everything constant, so that
// the EKF is a Kalman filter.
func straightCell(efficiency, r0 float64, branches ...[2]float64) *cell.Cell {
	c := &cell.Cell{Name: "straight", CapacityAh: 4.8, CoulombicEfficiency: efficiency, VoltageMinV: 2, VoltageMaxV: 5, TemperatureRefC: 25,
		OCV: cell.OverSOC([]float64{0, 1}, []float64{3, 3.6}), R0: cell.Constant(r0)}
	for _, b := range branches {
		tau := cell.Constant(b[1])
		c.Branches = append(c.Branches, cell.Branch{Ohm: cell.Constant(b[0]), TauS: &tau})
	}
	return c
}

// The written-out kernels and the general step are the same algebra: even
// samples with and without the period told take the one and the other.
func TestKernelsAgreeWithGeneralStep(t *testing.T) {
	rapid.Check(t, func(r *rapid.T) {
		n := rapid.IntRange(1, 3).Draw(r, "branches")
		c := estimatortest.PlainCell()
		tau3 := cell.Constant(rapid.Float64Range(1, 50).Draw(r, "tau"))
		c.Branches = append(c.Branches, cell.Branch{Ohm: cell.OverSOC([]float64{0, 0.6, 1}, []float64{0.02, 0.007, 0.01}), TauS: &tau3})[:n]
		spec := ekfSpec()
		spec.SOCStd = rapid.SampledFrom([]float64{0, 0.01, 0.3}).Draw(r, "soc_std")
		spec.CurrentStdA = rapid.SampledFrom([]float64{0, 0.02, 1}).Draw(r, "current_std")
		spec.VoltageStdV = rapid.SampledFrom([]float64{1e-4, 0.004, 0.1}).Draw(r, "voltage_std")
		reading := rapid.SampledFrom([]record.CurrentReading{"", record.Instant, record.IntervalMean}).Draw(r, "reading")
		course, err := estimatortest.Run(c, estimatortest.Options{Samples: 400, Reading: reading, Even: true, SOC: rapid.Float64Range(0.1, 1).Draw(r, "soc")},
			rapid.Uint64().Draw(r, "seed"))
		if err != nil {
			r.Fatal(err)
		}
		in := course.Readings
		estimatortest.Spoil(&in, 0.02, 0.002, rapid.Uint64().Draw(r, "noise"))
		setup := estimator.Setup{Spec: spec, Cell: c, SOCStart: 0.5, PeriodS: 1}
		kernel, general := build(t, setup), build(t, setup)
		a := advance(t, kernel, in)
		in.PeriodS = 0
		b := advance(t, general, in)
		// Rounding grows with how much more a reading knows than the start.
		tolerance := 1e-12 + 1e-13*spec.SOCStd/spec.VoltageStdV
		for k := range a.SOC {
			for _, d := range []float64{a.SOCFree[k] - b.SOCFree[k], a.SOCStd[k] - b.SOCStd[k], a.VoltagePredictedV[k] - b.VoltagePredictedV[k]} {
				if !(math.Abs(d) < tolerance) {
					r.Fatalf("sample %d: %v and %v, apart by %g", k, a.SOCFree[k], b.SOCFree[k], d)
				}
			}
		}
		var d mat.Dense
		d.Sub(covariance(kernel), covariance(general))
		if !(mat.Norm(&d, math.Inf(1)) < tolerance) {
			r.Fatalf("covariances are apart by %g", mat.Norm(&d, math.Inf(1)))
		}
	})
}

// An EKF on a straight OCV is the exact Kalman filter. Second road: the joint
// Gaussian of the last state and all voltages, written down from the noises
// and conditioned once by a dense solve, without recursion.
func TestExactPosteriorByOneDenseSolve(t *testing.T) {
	all := [][2]float64{{0.008, 20}, {0.012, 400}, {0.004, 3}, {0.01, 90}, {0.002, 1}}
	for n := 0; n <= 5; n++ {
		for _, even := range []bool{true, false} {
			t.Run(fmt.Sprintf("%d branches, even %t", n, even), func(t *testing.T) { densely(t, straightCell(0.97, 0.02, all[:n]...), even) })
		}
	}
}

func densely(t *testing.T, c *cell.Cell, even bool) {
	const samples = 60
	n := len(c.Branches)
	course, err := estimatortest.Run(c, estimatortest.Options{Samples: samples, Even: even, SOC: 0.6}, 5)
	if err != nil {
		t.Fatal(err)
	}
	in := course.Readings
	for k := range in.CurrentA {
		in.CurrentA[k] = 5 * math.Sin(float64(k)) // both signs
	}
	spec := ekfSpec()
	spec.SOCStdPerSqrtS, spec.BranchStdVPerSqrtS, spec.CurrentStdA = 2e-4, 3e-4, 0.4
	e := build(t, estimator.Setup{Spec: spec, Cell: c, SOCStart: 0.5, PeriodS: 1})
	out := advance(t, e, in)

	// x_k = Φ(k,0) x_0 + Σ_s Φ(k,s) (b_s i_(s-1) + noise_s), Φ diagonal and closed.
	dim := n + 1
	decay := func(j int, dt float64) float64 {
		if j == 0 {
			return 1
		}
		return math.Exp(-dt / c.Branches[j-1].TauS.Values[0][0])
	}
	gain := func(j int, dt float64) float64 {
		if j == 0 {
			return -dt / (3600 * c.CapacityAh)
		}
		return c.Branches[j-1].Ohm.Values[0][0] * -math.Expm1(-dt/c.Branches[j-1].TauS.Values[0][0])
	}
	sources := dim + samples*(dim+1) // x_0, then of each step: dim process noises and the current's
	std := make([]float64, sources)
	std[0] = spec.SOCStd
	for j := 1; j < dim; j++ {
		std[j] = spec.BranchStdV
	}
	to := make([]*mat.Dense, samples) // x_k from the sources, scaled to unit variance
	means := make([][]float64, samples)
	for k := range samples {
		to[k], means[k] = mat.NewDense(dim, sources, nil), make([]float64, dim)
		for j := range dim {
			start := []float64{0.5, 0, 0, 0, 0, 0}[j]
			means[k][j] = decay(j, in.TimeS[k]-in.TimeS[0]) * start
			to[k].Set(j, j, decay(j, in.TimeS[k]-in.TimeS[0])*std[j])
			for s := 1; s <= k; s++ {
				dt, since := in.TimeS[s]-in.TimeS[s-1], decay(j, in.TimeS[k]-in.TimeS[s])
				i := in.CurrentA[s-1]
				density := spec.BranchStdVPerSqrtS
				if j == 0 {
					density = spec.SOCStdPerSqrtS
					if i < 0 {
						i *= c.CoulombicEfficiency
					}
				}
				means[k][j] += since * gain(j, dt) * i
				at := dim + (s-1)*(dim+1)
				to[k].Set(j, at+j, since*density*math.Sqrt(dt))
				to[k].Set(j, at+dim, since*gain(j, dt)*spec.CurrentStdA)
			}
		}
	}
	h := mat.NewVecDense(dim, nil)
	h.SetVec(0, 0.6)
	for j := 1; j < dim; j++ {
		h.SetVec(j, -1)
	}
	seen := mat.NewDense(samples, sources, nil) // voltages from the sources
	residual := mat.NewVecDense(samples, nil)
	for k := range samples {
		var row mat.VecDense
		row.MulVec(to[k].T(), h)
		seen.SetRow(k, row.RawVector().Data)
		r0 := c.R0.Values[0][0]
		residual.SetVec(k, in.VoltageV[k]-3-mat.Dot(h, mat.NewVecDense(dim, means[k]))+r0*in.CurrentA[k])
	}
	r0 := c.R0.Values[0][0]
	var syy, sxy, prior mat.Dense
	syy.Mul(seen, seen.T())
	for k := range samples {
		syy.Set(k, k, syy.At(k, k)+spec.VoltageStdV*spec.VoltageStdV+r0*r0*spec.CurrentStdA*spec.CurrentStdA)
	}
	last := to[samples-1]
	sxy.Mul(last, seen.T())
	prior.Mul(last, last.T())
	var chol mat.Cholesky
	sym := mat.NewSymDense(samples, syy.RawMatrix().Data)
	if !chol.Factorize(sym) {
		t.Fatal("the joint covariance is not positive")
	}
	var weight, post mat.Dense
	if err := chol.SolveTo(&weight, sxy.T()); err != nil {
		t.Fatal(err)
	}
	post.Mul(&sxy, &weight)
	post.Sub(&prior, &post)
	var move mat.VecDense
	move.MulVec(weight.T(), residual)

	got, p := mean(e), covariance(e)
	for j := range dim {
		if want := means[samples-1][j] + move.AtVec(j); math.Abs(got[j]-want) > 1e-9*math.Max(1, math.Abs(want)) {
			t.Errorf("state %d is %.15g, the dense solve gives %.15g", j, got[j], want)
		}
		for q := range dim {
			scale := math.Sqrt(post.At(j, j) * post.At(q, q))
			if math.Abs(p.At(j, q)-post.At(j, q)) > 1e-9*scale {
				t.Errorf("covariance %d,%d is %.12g, the dense solve gives %.12g", j, q, p.At(j, q), post.At(j, q))
			}
		}
	}
	if s := out.SOCStd[samples-1]; math.Abs(s-math.Sqrt(post.At(0, 0))) > 1e-9*s {
		t.Errorf("stated deviation is %.12g, the dense solve gives %.12g", s, math.Sqrt(post.At(0, 0)))
	}
}

// The derivative the filter uses, seen through gain and innovation variance of
// a first update, against central differences of its own predicted voltage.
func TestDerivativesAgainstDifferences(t *testing.T) {
	c := estimatortest.RichCell()
	for _, z := range []float64{-0.05, 0.013, 0.25, 0.47, 0.77, 0.95, 1.04} { // at no knot, where the second derivative jumps
		for _, tempC := range []float64{-25, 3, 25, 55} {
			for _, i := range []float64{-80, 0, 120} {
				for _, h := range []float64{-1, 0.3} {
					spec := ekfSpec()
					spec.CurrentStdA = 0.5
					first := func(soc float64) (estimator.Estimator, estimator.Estimate) {
						in := record.MakeReadings(1)
						in.CurrentA[0], in.VoltageV[0], in.TemperatureC[0] = i, 3.3, tempC
						e := build(t, estimator.Setup{Spec: spec, Cell: c, SOCStart: soc, HysteresisStart: h})
						return e, advance(t, e, in)
					}
					const d = 1e-6
					e, out := first(z)
					_, up := first(z + d)
					_, down := first(z - d)
					want := (up.VoltagePredictedV[0] - down.VoltagePredictedV[0]) / (2 * d)
					s := out.InnovationStdV[0] * out.InnovationStdV[0]
					slope := (out.SOCFree[0] - z) / out.InnovationV[0] * s / (spec.SOCStd * spec.SOCStd)
					if math.Abs(slope-want) > 1e-7+1e-6*math.Abs(want) {
						t.Errorf("z %g, %g °C, %g A, h %g: dV/dz is %.9g, differences give %.9g", z, tempC, i, h, slope, want)
					}
					gainV := mean(e)[1] / out.InnovationV[0] * s / (spec.BranchStdV * spec.BranchStdV)
					if math.Abs(gainV+1) > 1e-9 {
						t.Errorf("z %g: dV/dv_1 is %g, want -1", z, gainV)
					}
					m, err := cell.Compile(c, cell.AsBuilt(0))
					if err != nil {
						t.Fatal(err)
					}
					var v cell.View
					v.Bind(m, tempC)
					r0 := v.R0(z)
					variance := want*want*spec.SOCStd*spec.SOCStd + 2*spec.BranchStdV*spec.BranchStdV +
						spec.VoltageStdV*spec.VoltageStdV + r0*r0*spec.CurrentStdA*spec.CurrentStdA
					if math.Abs(s-variance) > 1e-6*variance {
						t.Errorf("z %g: innovation variance is %g, want %g", z, s, variance)
					}
				}
			}
		}
	}
}

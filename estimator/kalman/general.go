package kalman

import (
	"fmt"
	"math"

	"soctrial/estimator"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// step takes sample k, whatever it is, in the general way.
func (f *EKF) step(in *record.Readings, out *estimator.Estimate, k int) {
	i := in.CurrentA[k]
	if i != i {
		i = f.heldA
	}
	if f.samples > 0 {
		dt := in.PeriodS
		if !(dt > 0) {
			dt = in.TimeS[k] - f.timeS
		}
		if dt > 0 {
			held := f.heldA
			if in.CurrentReading == record.IntervalMean {
				held = i
			}
			f.predict(held, dt)
		}
	}
	f.heldA = i
	if t := in.TemperatureC[k]; t == t && f.model.TemperatureMatters() {
		f.tempC = t
		f.view.SetTemperature(t)
	}
	f.begun(1, in.TimeS[k])
	f.update(i, in.VoltageV[k], out, k)
}

// predict moves mean and covariance by dtS seconds of currentA, parameters at
// the state and temperature before.
func (f *EKF) predict(currentA, dtS float64) {
	f.pace(dtS)
	m, n := f.model, f.n
	g := f.view.Segment(f.x[0])
	t := f.x[0] - g.Ref
	var a, b [maxStates]float64
	a[0], b[0] = 1, f.bSOC
	for j := range n {
		decay, rise := f.decay[j], f.rise[j]
		if !m.TauFixed[j] {
			decay, rise = cell.Decay(dtS, m.Tau(j, g, t))
		}
		a[1+j], b[1+j] = decay, rise*g.R[j].At(t)
		f.x[1+j] = decay*f.x[1+j] + b[1+j]*currentA
	}
	moved := currentA * f.perA[math.Float64bits(currentA)>>63]
	if m.Hysteretic {
		f.h = cell.StepHysteresis(f.h, currentA, m.Rate, moved)
	}
	f.x[0] -= moved
	for r := 0; r <= n; r++ {
		u := b[r] * f.currentVarA2
		for c := r; c <= n; c++ {
			f.p[r][c] = f.p[r][c]*(a[r]*a[c]) + u*b[c]
		}
		if r > 0 {
			f.p[r][r] += f.branchV
		}
	}
	f.p[0][0] += f.socVar
}

// update folds in the voltage reading, NaN: none, and writes estimate k unless
// the filter is lost.
func (f *EKF) update(currentA, voltageV float64, out *estimator.Estimate, k int) {
	n := f.n
	g := f.view.Segment(f.x[0])
	t := f.x[0] - g.Ref
	r0 := g.R0.At(t)
	predicted := g.OCV.At(t) - r0*currentA
	slope := g.OCV.Slope(t) - currentA*g.R0.Slope(t)
	if f.model.Hysteretic {
		predicted += g.HalfGapV.At(t) * f.h
		slope += g.HalfGapV.Slope(t) * f.h
	}
	for j := 1; j <= n; j++ {
		predicted -= f.x[j]
	}
	var c [maxStates]float64 // P Hᵀ
	for r := 0; r <= n; r++ {
		c[r] = slope * f.at(0, r)
		for j := 1; j <= n; j++ {
			c[r] -= f.at(j, r)
		}
	}
	s := slope*c[0] + (f.voltageVarV2 + r0*r0*f.currentVarA2)
	for j := 1; j <= n; j++ {
		s -= c[j]
	}
	innovation, std := voltageV-predicted, math.NaN()
	if voltageV == voltageV {
		is := 1 / s
		std = math.Sqrt(s)
		e := is * innovation
		w := is * (s*is - 2) // - K gᵀ - g Kᵀ + S K Kᵀ is w g gᵀ, with K = g/S
		for r := 0; r <= n; r++ {
			f.x[r] += c[r] * e
			for q := r; q <= n; q++ {
				f.p[r][q] += w * (c[r] * c[q])
			}
		}
	}
	seen := innovation
	if voltageV != voltageV {
		seen = predicted
	}
	if f.lose(s, seen) {
		return
	}
	out.SOC[k] = min(max(f.x[0], 0), 1)
	out.SOCFree[k] = f.x[0]
	out.SOCStd[k] = math.Sqrt(f.p[0][0])
	out.VoltagePredictedV[k] = predicted
	out.InnovationV[k] = innovation
	out.InnovationStdV[k] = std
}

// at returns an element of the covariance.
func (f *EKF) at(r, c int) float64 {
	if r > c {
		r, c = c, r
	}
	return f.p[r][c]
}

// lose finds out whether the filter can go on after the sample just counted,
// and keeps the reason if not. s is the innovation's variance, volts the
// innovation or, without a reading, the prediction: a branch that is no longer
// finite shows in it.
func (f *EKF) lose(s, volts float64) bool {
	cause := ""
	if !(s > 0) {
		cause = fmt.Sprintf("covariance not positive: variance of the innovation is %.3g V²", s)
	}
	for r := 0; r <= f.n && cause == ""; r++ {
		if v := f.p[r][r]; !(v >= 0) {
			cause = fmt.Sprintf("covariance not positive: variance of %s is %.3g", stateName(r), v)
		}
	}
	if z := f.x[0]; !(volts*volts+z*z < math.Inf(1)) && cause == "" {
		cause = fmt.Sprintf("state not finite: soc is %.3g after an innovation of %.3g V", z, volts)
	}
	if cause != "" {
		f.lost = &estimator.LostError{Sample: f.samples - 1, TimeS: f.timeS, Cause: cause}
	}
	return f.lost != nil
}

func stateName(r int) string {
	if r == 0 {
		return "soc"
	}
	return fmt.Sprintf("branch_%d_v", r)
}

// Package kalman holds the Kalman family of estimators.
//
// EKF is the extended Kalman filter on x = [soc, v_1 … v_n]: the cell's
// circuit as the model, terminal voltage as its one measurement. The noise of
// the current sensor enters both as the input noise of the prediction and,
// through R0, as noise of the measurement. The covariance is updated in Joseph
// form, which for a scalar measurement is P - K gᵀ - g Kᵀ + S K Kᵀ with
// g = P Hᵀ (Bar-Shalom, Li, Kirubarajan 2001, section 5.2).
//
// Block by block the filter picks a kernel: one written out for one, two or
// three branches of fixed time constants at one temperature, one for two
// branches with hysteresis or tables over temperature, or the general step, which is the same algebra over arrays and does everything else.
//
// The package never limits the state of charge inside the filter; only the
// reported one is. Derivatives of branch resistances and time constants over
// SOC are left out of the transition.
package kalman

import (
	"fmt"
	"math"

	"soctrial/estimator"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// kindEKF is the kind as written in an estimator file.
const kindEKF = "ekf"

const maxStates = 1 + cell.MaxBranches

// EKF is an extended Kalman filter of one cell.
type EKF struct {
	setup estimator.Setup
	model *cell.Model
	view  cell.View
	n     int // branches

	socVarPerS    float64 // process densities, squared
	branchVarPerS float64
	voltageVarV2  float64
	currentVarA2  float64

	paced
	x       [maxStates]float64
	p       [maxStates][maxStates]float64 // upper triangle
	h       float64                       // hysteresis
	heldA   float64                       // last current reading
	tempC   float64                       // last temperature reading
	timeS   float64                       // of the last sample
	samples int

	lost *estimator.LostError
}

var (
	_ estimator.Estimator   = (*EKF)(nil)
	_ estimator.Resetter    = (*EKF)(nil)
	_ estimator.Inspectable = (*EKF)(nil)
)

// NewEKF returns an EKF at its start: SOC as told, branches at rest, their
// covariance diagonal. Standard deviations of [start], [process] and the
// current must be finite and ≥ 0, that of the voltage > 0; else an error.
func NewEKF(s estimator.Setup) (estimator.Estimator, error) {
	f := new(EKF)
	if err := f.Reset(s); err != nil {
		return nil, err
	}
	return f, nil
}

// Reset implements estimator.Resetter.
func (f *EKF) Reset(s estimator.Setup) error {
	if err := validate(&s.Spec); err != nil {
		return err
	}
	if err := s.Check(); err != nil {
		return err
	}
	m, err := f.modelFor(&s)
	if err != nil {
		return fmt.Errorf("kalman: %w", err)
	}
	sp := &s.Spec
	*f = EKF{setup: s, model: m, n: m.N, h: s.HysteresisStart, tempC: m.Cell.TemperatureRefC,
		socVarPerS: sp.SOCStdPerSqrtS * sp.SOCStdPerSqrtS, branchVarPerS: sp.BranchStdVPerSqrtS * sp.BranchStdVPerSqrtS,
		voltageVarV2: sp.VoltageStdV * sp.VoltageStdV, currentVarA2: sp.CurrentStdA * sp.CurrentStdA}
	f.view.Bind(m, f.tempC)
	f.x[0] = s.SOCStart
	f.p[0][0] = sp.SOCStd * sp.SOCStd
	for j := 1; j <= f.n; j++ {
		f.p[j][j] = sp.BranchStdV * sp.BranchStdV
	}
	return nil
}

// modelFor compiles s, or keeps the present model where it is the same.
func (f *EKF) modelFor(s *estimator.Setup) (*cell.Model, error) {
	same := s.Model == nil && f.setup.Model == nil && f.model != nil && f.setup.Cell == s.Cell &&
		f.setup.PeriodS == s.PeriodS && f.setup.Spec.Branches == s.Spec.Branches
	if same {
		return f.model, nil
	}
	return s.Compile()
}

func validate(sp *estimator.Spec) error {
	for _, c := range []struct {
		key   string
		value float64
	}{
		{"start.soc_std", sp.SOCStd}, {"start.branch_std_v", sp.BranchStdV},
		{"process.soc_std_per_sqrt_s", sp.SOCStdPerSqrtS}, {"process.branch_std_v_per_sqrt_s", sp.BranchStdVPerSqrtS},
		{"measurement.current_std_a", sp.CurrentStdA},
	} {
		if !(c.value >= 0) || math.IsInf(c.value, 0) {
			return fmt.Errorf("kalman: %s is %g, allowed is a finite number ≥ 0", c.key, c.value)
		}
	}
	if !(sp.VoltageStdV > 0) || math.IsInf(sp.VoltageStdV, 0) {
		return fmt.Errorf("kalman: measurement.voltage_std_v is %g, allowed is a finite number > 0", sp.VoltageStdV)
	}
	return nil
}

// Advance implements estimator.Estimator. A missing current or temperature is
// the last one read (at first 0 A and temperature_ref_c); a missing voltage
// means no update: the estimate is the prediction, and innovation and its
// deviation are NaN. Samples at one and the same time are updates without a
// prediction between.
//
// The filter is lost when a variance is negative, when the variance of the
// innovation is not positive, or when a number is no longer finite or too
// large to be squared.
func (f *EKF) Advance(in *record.Readings, out *estimator.Estimate) error {
	if f.lost != nil {
		return f.lost
	}
	n := in.Len()
	even := in.PeriodS > 0 && f.model.AllTauFixed
	rich := f.model.Hysteretic || f.model.TemperatureMatters()
	plain := even && !rich && f.n >= 1 && f.n <= 3
	rich2 := even && rich && f.n == 2
	for k := 0; k < n && f.lost == nil; {
		if (plain || rich2) && f.samples > 0 {
			f.pace(in.PeriodS)
			var why stop
			switch {
			case rich2:
				k, why = f.runRich2(in, out, k)
			case f.n == 1:
				k, why = f.run1(in, out, k)
			case f.n == 2:
				k, why = f.run2(in, out, k)
			default:
				k, why = f.run3(in, out, k)
			}
			if k == n || why == lost {
				break
			}
			if why == leftInterval {
				continue
			}
		}
		// The first sample, one with a missing reading and one that steps over
		// a point of the tables go the general way, wherever a block begins.
		f.step(in, out, k)
		k++
	}
	if f.lost != nil {
		return f.lost
	}
	return nil
}

// paced is what a step of dtS comes to. The kernels read it from memory where
// they use it: there are not registers enough for it beside the state.
type paced struct {
	dtS     float64
	decay   [cell.MaxBranches]float64 // where the time constant is fixed
	rise    [cell.MaxBranches]float64
	both    [3][3]float64 // products of two decays, of the first three branches
	perA    [2]float64    // SOC moved by 1 A: discharge, charge
	bSOC    float64       // input gain of SOC, without coulombic efficiency
	bSOCVar float64       // times the current's variance
	socVar  float64       // process variances of one step
	branchV float64
}

// pace makes a step of dtS ready.
func (f *EKF) pace(dtS float64) {
	if dtS == f.dtS {
		return
	}
	m := f.model
	f.dtS = dtS
	f.decay, f.rise = m.Decay, m.Rise
	if dtS != m.PeriodS {
		for j := range f.n {
			if m.TauFixed[j] {
				f.decay[j], f.rise[j] = cell.Decay(dtS, m.TauS[j])
			}
		}
	}
	for r := range f.both {
		for c := range f.both {
			f.both[r][c] = f.decay[r] * f.decay[c]
		}
	}
	f.perA[0] = dtS / (3600 * m.CapacityAh)
	f.perA[1] = f.perA[0] * m.Efficiency
	f.bSOC = -f.perA[0]
	f.bSOCVar = f.bSOC * f.currentVarA2
	f.socVar, f.branchV = f.socVarPerS*dtS, f.branchVarPerS*dtS
}

// begun counts samples samples whose last was at timeS.
func (f *EKF) begun(samples int, timeS float64) {
	f.samples += samples
	f.timeS = timeS
}

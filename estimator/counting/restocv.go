package counting

import (
	"fmt"
	"math"

	"soctrial/estimator"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// RestOCV counts charge, and after a rest takes SOC from the open-circuit
// voltage.
//
// The cell rests while the current reading stays below [rest] current_below_a
// in size; the rest is long enough once current so small has flowed for after_s
// without a break. From then on every sample with a voltage reading sets SOC to
// where OCV(z, T) + M(z)·h equals the reading, h being the hysteresis carried
// from the readings. The small drop over the resistances that may remain is
// not corrected for. Of several such places within [0, 1] the one nearest to
// the present SOC is taken; where there is none, the place whose voltage comes
// nearest.
//
// The variance of SOC after that is (voltage_std_v / slope)², at most 1/12: no
// reading of a flat curve is worth less than knowing that SOC lies in [0, 1].
// While counting it grows as Coulomb's.
type RestOCV struct {
	counter
	view        cell.View
	belowA      float64
	afterS      float64
	voltageStdV float64 // 0 where not given
}

var (
	_ estimator.Estimator   = (*RestOCV)(nil)
	_ estimator.Resetter    = (*RestOCV)(nil)
	_ estimator.Inspectable = (*RestOCV)(nil)
)

// maxSOCVar is the variance of a SOC known only to lie in [0, 1].
const maxSOCVar = 1.0 / 12

// NewRestOCV returns a RestOCV at its start. [rest] current_below_a and after_s
// must be finite and > 0. soc_std, current_std_a and voltage_std_v may each be
// NaN, not given, or finite and ≥ 0; where all are NaN it states no deviation.
func NewRestOCV(s estimator.Setup) (estimator.Estimator, error) {
	r := new(RestOCV)
	if err := r.Reset(s); err != nil {
		return nil, err
	}
	return r, nil
}

// Reset implements estimator.Resetter.
func (r *RestOCV) Reset(s estimator.Setup) error {
	sp := &s.Spec
	for _, v := range []struct {
		key   string
		value float64
	}{{"rest.current_below_a", sp.RestCurrentBelowA}, {"rest.after_s", sp.RestAfterS}} {
		if !(v.value > 0) || math.IsInf(v.value, 0) {
			return fmt.Errorf("counting: %s is %g, allowed is a finite number > 0", v.key, v.value)
		}
	}
	if sp.VoltageStdV < 0 || math.IsInf(sp.VoltageStdV, 0) {
		return fmt.Errorf("counting: measurement.voltage_std_v is %g, allowed is a finite number ≥ 0, or none", sp.VoltageStdV)
	}
	if err := r.reset("rest-ocv", s); err != nil {
		return err
	}
	r.statesStd = r.statesStd || sp.VoltageStdV == sp.VoltageStdV
	r.belowA, r.afterS, r.voltageStdV = sp.RestCurrentBelowA, sp.RestAfterS, given(sp.VoltageStdV)
	r.view.Bind(r.model, r.tempC)
	return nil
}

// UnmarshalBinary implements estimator.Estimator.
func (r *RestOCV) UnmarshalBinary(state []byte) error {
	if err := r.counter.UnmarshalBinary(state); err != nil {
		return err
	}
	r.view.Bind(r.model, r.tempC)
	return nil
}

// Advance implements estimator.Estimator. Missing readings: the last current
// (at first 0 A) and temperature (at first temperature_ref_c); without a
// voltage nothing is corrected.
func (r *RestOCV) Advance(in *record.Readings, out *estimator.Estimate) error {
	if r.lost != nil {
		return r.lost
	}
	var p pace
	for k := range in.TimeS {
		before, first := r.timeS, r.samples == 0
		now, flowed := r.move(in, k, &p)
		if !(math.Abs(flowed) < r.belowA) {
			r.restS = 0
		} else if in.PeriodS > 0 && !first {
			r.restS += in.PeriodS
		} else if !first {
			r.restS += max(r.timeS-before, 0)
		}
		if !(math.Abs(now) < r.belowA) {
			r.restS = 0
		}
		if v := in.VoltageV[k]; v == v && r.restS >= r.afterS*(1-1e-12) { // sums of periods may fall short by a rounding
			r.correct(v)
		}
		if !r.write(out, k) {
			return r.lost
		}
	}
	return nil
}

// correct sets SOC to where the resting cell shows voltageV.
func (r *RestOCV) correct(voltageV float64) {
	r.view.SetTemperature(r.tempC)
	z, slope := invert(&r.view, r.h*float64(hysteretic(r.model)), voltageV, min(max(r.soc, 0), 1))
	r.soc = z
	r.socVar = maxSOCVar
	if s := r.voltageStdV / slope; s*s < maxSOCVar {
		r.socVar = s * s
	}
}

func hysteretic(m *cell.Model) int {
	if m.Hysteretic {
		return 1
	}
	return 0
}

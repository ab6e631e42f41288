package kalman

import (
	"fmt"
	"math"

	"soctrial/estimator"
)

// stateLen is how many numbers a saved state of n branches holds.
func stateLen(n int) int { return 6 + (n + 1) + (n+1)*(n+2)/2 }

// MarshalBinary implements estimator.Estimator.
func (f *EKF) MarshalBinary() ([]byte, error) {
	if f.lost != nil {
		return nil, f.lost
	}
	v := make([]float64, 0, stateLen(f.n))
	v = append(v, float64(f.n), float64(f.samples), f.timeS, f.heldA, f.tempC, f.h)
	v = append(v, f.x[:f.n+1]...)
	for r := 0; r <= f.n; r++ {
		v = append(v, f.p[r][r:f.n+1]...)
	}
	return estimator.PackState(kindEKF, v), nil
}

// UnmarshalBinary implements estimator.Estimator.
func (f *EKF) UnmarshalBinary(state []byte) error {
	v := make([]float64, stateLen(f.n))
	if err := estimator.UnpackState(kindEKF, state, v); err != nil {
		return err
	}
	if !(v[1] >= 0 && v[1] == math.Trunc(v[1]) && v[1] < 1<<53) {
		return fmt.Errorf("kalman: saved state has followed %g samples, allowed is a whole number ≥ 0", v[1])
	}
	f.samples, f.timeS, f.heldA, f.tempC, f.h = int(v[1]), v[2], v[3], v[4], v[5]
	v = v[6:]
	v = v[copy(f.x[:f.n+1], v):]
	for r := 0; r <= f.n; r++ {
		v = v[copy(f.p[r][r:f.n+1], v):]
	}
	f.view.Bind(f.model, f.tempC)
	f.lost = nil
	return nil
}

// StateNames implements estimator.Inspectable.
func (f *EKF) StateNames() []string {
	names := make([]string, f.n+1)
	for r := range names {
		names[r] = stateName(r)
	}
	return names
}

// State implements estimator.Inspectable.
func (f *EKF) State(dst []float64) { copy(dst, f.x[:f.n+1]) }

// Covariance implements estimator.Inspectable.
func (f *EKF) Covariance(dst []float64) {
	for r := 0; r <= f.n; r++ {
		for c := 0; c <= f.n; c++ {
			dst[r*(f.n+1)+c] = f.at(r, c)
		}
	}
}

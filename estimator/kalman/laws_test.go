package kalman_test

import (
	"testing"

	"soctrial/estimator"
	"soctrial/estimator/estimatortest"
	"soctrial/estimator/kalman"
)

func ekfSpec() estimator.Spec {
	return estimator.Spec{Name: "ekf", Kind: "ekf", Branches: -1, SOCStd: 0.1, BranchStdV: 0.01,
		SOCStdPerSqrtS: 1e-5, BranchStdVPerSqrtS: 1e-4, VoltageStdV: 0.004, CurrentStdA: 0.02}
}

func TestLaws(t *testing.T) {
	for n := -1; n <= 2; n++ {
		spec := ekfSpec()
		spec.Branches = n
		estimatortest.Check(t, kalman.NewEKF, spec)
	}
}

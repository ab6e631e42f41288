package counting_test

import (
	"math"
	"testing"

	"soctrial/estimator"
	"soctrial/estimator/counting"
	"soctrial/estimator/estimatortest"
)

func TestLaws(t *testing.T) {
	silent := estimator.Spec{Kind: "coulomb", Branches: -1, SOCStd: math.NaN(), CurrentStdA: math.NaN(), VoltageStdV: math.NaN(),
		RestCurrentBelowA: 0.1, RestAfterS: 30}
	stating := silent
	stating.SOCStd, stating.CurrentStdA = 0.05, 0.02
	for _, spec := range []estimator.Spec{silent, stating} {
		estimatortest.Check(t, counting.NewCoulomb, spec)
		spec.Kind = "rest-ocv"
		estimatortest.Check(t, counting.NewRestOCV, spec)
	}
}

// Package roster is the table of the estimator kinds a bench can run: the name
// an estimator file gives and the constructor behind it.
//
// The table is written out here and nowhere else; no kind enters it by being
// imported.
package roster

import (
	"fmt"
	"strings"

	"soctrial/estimator"
	"soctrial/estimator/counting"
	"soctrial/estimator/kalman"
)

// entry is one kind.
type entry struct {
	kind  string
	build func(estimator.Setup) (estimator.Estimator, error)
}

// table lists every kind, in the order they are shown.
func table() []entry {
	return []entry{
		{"ekf", kalman.NewEKF},
		{"coulomb", counting.NewCoulomb},
		{"rest-ocv", counting.NewRestOCV},
	}
}

// New builds the estimator s.Spec.Kind names. The error of an unknown kind
// lists the known ones; others are the constructor's.
func New(s estimator.Setup) (estimator.Estimator, error) {
	for _, e := range table() {
		if e.kind == s.Spec.Kind {
			return e.build(s)
		}
	}
	return nil, fmt.Errorf("roster: kind is %q, allowed is %s", s.Spec.Kind, strings.Join(Kinds(), ", "))
}

// Kinds lists the known kinds.
func Kinds() []string {
	var kinds []string
	for _, e := range table() {
		kinds = append(kinds, e.kind)
	}
	return kinds
}

package define

import (
	"fmt"
	"math"
	"slices"

	"soctrial/estimator"
)

// estimatorKey is one number of an estimator file.
type estimatorKey struct {
	section, key string
	positive     bool // > 0; else ≥ 0
	to           func(*estimator.Spec) *float64
}

func (k *estimatorKey) path() string { return k.section + "." + k.key }

func (k *estimatorKey) allowed() string {
	if k.positive {
		return "a finite number > 0"
	}
	return "a finite number ≥ 0"
}

func estimatorKeys() []estimatorKey {
	return []estimatorKey{
		{"start", "soc_std", false, func(s *estimator.Spec) *float64 { return &s.SOCStd }},
		{"start", "branch_std_v", false, func(s *estimator.Spec) *float64 { return &s.BranchStdV }},
		{"process", "soc_std_per_sqrt_s", false, func(s *estimator.Spec) *float64 { return &s.SOCStdPerSqrtS }},
		{"process", "branch_std_v_per_sqrt_s", false, func(s *estimator.Spec) *float64 { return &s.BranchStdVPerSqrtS }},
		{"measurement", "voltage_std_v", true, func(s *estimator.Spec) *float64 { return &s.VoltageStdV }},
		{"measurement", "current_std_a", false, func(s *estimator.Spec) *float64 { return &s.CurrentStdA }},
		{"rest", "current_below_a", true, func(s *estimator.Spec) *float64 { return &s.RestCurrentBelowA }},
		{"rest", "after_s", true, func(s *estimator.Spec) *float64 { return &s.RestAfterS }},
	}
}

// estimatorKind says which keys a kind takes. A number that may be left out is
// then 0, or NaN where the kind tells the two apart.
type estimatorKind struct {
	kind      string
	branches  bool // whether it follows RC branches
	needs     []string
	takes     []string
	tellsNone bool
}

// estimatorKinds is the table to extend with a new kind.
func estimatorKinds() []estimatorKind {
	return []estimatorKind{
		{kind: "ekf", branches: true, needs: []string{"start.soc_std", "measurement.voltage_std_v"},
			takes: []string{"start.branch_std_v", "process.soc_std_per_sqrt_s", "process.branch_std_v_per_sqrt_s", "measurement.current_std_a"}},
		{kind: "coulomb", takes: []string{"start.soc_std", "measurement.current_std_a"}, tellsNone: true},
		{kind: "rest-ocv", needs: []string{"rest.current_below_a", "rest.after_s"},
			takes: []string{"start.soc_std", "measurement.voltage_std_v", "measurement.current_std_a"}, tellsNone: true},
	}
}

// EstimatorKinds lists the kinds an estimator file may have.
func EstimatorKinds() []string {
	var out []string
	for _, k := range estimatorKinds() {
		out = append(out, k.kind)
	}
	return out
}

func kindOf(name string) (estimatorKind, bool) {
	for _, k := range estimatorKinds() {
		if k.kind == name {
			return k, true
		}
	}
	return estimatorKind{}, false
}

// Estimator reads an estimator. Its own cell, if it names one, is read through
// o.
func Estimator(file string, text []byte, o Openers) (*estimator.Spec, error) {
	d, t, err := parse(file, text, KindEstimator)
	if err != nil {
		return nil, err
	}
	s := &estimator.Spec{Name: nameOf(t, file), Branches: -1}
	s.Kind = t.word("kind", EstimatorKinds()...)
	s.CellFile = t.text("cell")
	if s.CellFile != "" {
		ownCell(t, s, o)
	} else if t.has("cell") {
		t.failOnce("cell", `""`, "a path beside this file, or no cell: then it is the scenario's fresh one")
	}
	k, known := kindOf(s.Kind)
	if !known { // no other key can be judged
		if !t.has("kind") {
			t.fail("kind", "nothing", "one of "+quoted(EstimatorKinds()))
		}
		return nil, d.err()
	}
	if k.branches {
		s.Branches = t.whole("branches", -1, 0)
	}
	estimatorNumbers(t, s, k)
	if s.Cell != nil && s.Branches > len(s.Cell.Branches) {
		t.fail("branches", fmt.Sprint(s.Branches), fmt.Sprintf("0 to %d, the branches of its cell", len(s.Cell.Branches)))
	}
	t.finish()
	if err := d.err(); err != nil {
		return nil, err
	}
	return s, nil
}

// ownCell reads the cell that an estimator is built on.
func ownCell(t *table, s *estimator.Spec, o Openers) {
	if o.Cell == nil {
		t.fail("cell", fmt.Sprintf("%q", s.CellFile), "no cell of its own: no file can be read from here")
		return
	}
	text, err := o.Cell(s.CellFile)
	if err == nil {
		s.Cell, err = Cell(s.CellFile, text)
	}
	if err != nil {
		t.blame("cell", err)
	}
}

// estimatorNumbers reads the sections of a kind.
func estimatorNumbers(t *table, s *estimator.Spec, kind estimatorKind) {
	sections := map[string]*table{}
	var order []string
	for _, k := range estimatorKeys() {
		needed := slices.Contains(kind.needs, k.path())
		if !needed && !slices.Contains(kind.takes, k.path()) {
			continue
		}
		if _, begun := sections[k.section]; !begun {
			sections[k.section] = estimatorSection(t, k.section)
			order = append(order, k.section)
		}
		to, sec := k.to(s), sections[k.section]
		if kind.tellsNone {
			*to = math.NaN()
		}
		if needed {
			*to = sec.needNumber(k.key, k.allowed())
		} else {
			*to = sec.number(k.key, *to)
		}
		if sec.has(k.key) && (*to < 0 || *to == 0 && k.positive) {
			sec.failOnce(k.key, number(*to), k.allowed())
		}
	}
	for _, name := range order {
		if _, isTable := t.m[name].(map[string]any); isTable || !t.has(name) { // else it is told already
			sections[name].finish()
		}
	}
}

// estimatorSection returns the table at key; one that is absent is empty, so
// that what is missing in it is told by its key.
func estimatorSection(t *table, key string) *table {
	if sec := t.table(key); sec != nil {
		return sec
	}
	return newTable(t.doc, key, nil)
}

package define

import (
	"math"
	"slices"

	"soctrial/estimator"
)

// estimatorKey is one number of an estimator file.
type estimatorKey struct {
	section, key string
	to           func(*estimator.Spec) *float64
}

func estimatorKeys() []estimatorKey {
	return []estimatorKey{
		{"start", "soc_std", func(s *estimator.Spec) *float64 { return &s.SOCStd }},
		{"start", "branch_std_v", func(s *estimator.Spec) *float64 { return &s.BranchStdV }},
		{"process", "soc_std_per_sqrt_s", func(s *estimator.Spec) *float64 { return &s.SOCStdPerSqrtS }},
		{"process", "branch_std_v_per_sqrt_s", func(s *estimator.Spec) *float64 { return &s.BranchStdVPerSqrtS }},
		{"measurement", "voltage_std_v", func(s *estimator.Spec) *float64 { return &s.VoltageStdV }},
		{"measurement", "current_std_a", func(s *estimator.Spec) *float64 { return &s.CurrentStdA }},
		{"rest", "current_below_a", func(s *estimator.Spec) *float64 { return &s.RestCurrentBelowA }},
		{"rest", "after_s", func(s *estimator.Spec) *float64 { return &s.RestAfterS }},
	}
}

// estimatorKind says which numbers a kind takes. One that is neither needed
// nor given is 0, or NaN where the kind tells the two apart.
type estimatorKind struct {
	kind      string
	needs     []string
	takes     []string
	tellsNone bool
	branches  bool
}

// estimatorKinds is the table to extend with a new kind.
func estimatorKinds() []estimatorKind {
	return []estimatorKind{
		{kind: "ekf", needs: []string{"start.soc_std", "measurement.voltage_std_v"}, branches: true,
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

// Estimator reads an estimator. Its own cell, if it names one, is read through
// o.
func Estimator(file string, text []byte, o Openers) (*estimator.Spec, error) {
	d, t, err := parse(file, text, KindEstimator)
	if err != nil {
		return nil, err
	}
	s := &estimator.Spec{Name: nameOf(t, file), Branches: -1}
	if !t.has("kind") {
		t.missing("kind", "one of "+quoted(EstimatorKinds()))
	}
	s.Kind = t.word("kind", EstimatorKinds()...)
	at := slices.IndexFunc(estimatorKinds(), func(k estimatorKind) bool { return k.kind == s.Kind })
	if at >= 0 {
		k := estimatorKinds()[at]
		if k.branches && t.has("branches") {
			if s.Branches = t.whole("branches", -1); s.Branches < 0 {
				t.fail("branches", describe(t.m["branches"]), "a whole number from 0 to the cell's")
			}
		} else if k.branches {
			t.get("branches")
		}
		readEstimatorKeys(t, s, k)
	}
	s.CellFile = t.text("cell", false)
	if s.CellFile != "" && o.Cell != nil {
		text, err := o.Cell(s.CellFile)
		if err == nil {
			s.Cell, err = Cell(s.CellFile, text)
		}
		if err != nil {
			t.fail("cell", err.Error(), "a readable cell file")
		}
	}
	if at >= 0 {
		t.finish()
	}
	if s.Cell != nil && s.Branches > len(s.Cell.Branches) {
		t.fail("branches", describe(int64(s.Branches)), "at most what the cell has")
	}
	if err := d.err(); err != nil {
		return nil, err
	}
	return s, nil
}

func readEstimatorKeys(t *table, s *estimator.Spec, kind estimatorKind) {
	sections := map[string]*table{}
	for _, k := range estimatorKeys() {
		name := k.section + "." + k.key
		needed, taken := slices.Contains(kind.needs, name), slices.Contains(kind.takes, name)
		to := k.to(s)
		if kind.tellsNone && taken {
			*to = math.NaN()
		}
		if !needed && !taken {
			continue
		}
		sec, ok := sections[k.section]
		if !ok {
			sec = t.table(k.section)
			sections[k.section] = sec
		}
		allowed := "a finite number ≥ 0"
		if needed && k.key != "soc_std" {
			allowed = "a finite number > 0"
		}
		switch {
		case sec == nil && needed:
			if !t.has(k.section) {
				t.missing(k.section, "a table with "+k.key)
			}
			continue
		case sec == nil:
			continue
		case needed:
			*to = sec.needNumber(k.key, allowed)
		default:
			*to = sec.number(k.key, *to)
		}
		if *to < 0 || *to == 0 && allowed == "a finite number > 0" && sec.has(k.key) {
			sec.fail(k.key, describe(*to), allowed)
		}
	}
	for _, sec := range sections {
		if sec != nil {
			sec.finish()
		}
	}
}

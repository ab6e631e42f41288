package job

import (
	"fmt"
	"maps"
	"slices"

	"soctrial/benches/scenario"
	"soctrial/plant/duty"
)

// checkSet holds the definitions of a set against each other: every duty is
// compiled for every cell it meets. What a user would want to know but is no
// mistake is a warning.
func checkSet(set *scenario.Set, report *Reporter) error {
	type pair struct{ duty, other string }
	withCell, withSensors := map[pair]bool{}, map[pair]bool{}
	for i := range set.Rows {
		r := &set.Rows[i]
		withCell[pair{r.Duty, r.Cell}] = true
		withSensors[pair{r.Duty, r.Sensors}] = true
	}
	ordered := func(m map[pair]bool) []pair {
		return slices.SortedFunc(maps.Keys(m), func(a, b pair) int {
			if a.duty != b.duty {
				return cmpText(a.duty, b.duty)
			}
			return cmpText(a.other, b.other)
		})
	}
	programs := map[string]*duty.Program{}
	for _, p := range ordered(withCell) {
		program, err := duty.Compile(set.Duties[p.duty], set.Cells[p.other].CapacityAh)
		if err != nil {
			return fmt.Errorf("duty %s with cell %s: %w", p.duty, p.other, err)
		}
		programs[p.duty] = program
	}
	for _, p := range ordered(withSensors) {
		for _, w := range programs[p.duty].Warnings(set.Sensors[p.other].SamplePeriodS) {
			report.warn("duty %s under sensors %s: %s", p.duty, p.other, w)
		}
	}
	return nil
}

func cmpText(a, b string) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

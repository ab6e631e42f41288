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
	for _, p := range ordered(withCell) {
		if _, err := duty.Compile(set.Duties[p.duty], set.Cells[p.other].CapacityAh); err != nil {
			return fmt.Errorf("duty %s with cell %s: %w", p.duty, p.other, err)
		}
	}
	for _, p := range ordered(withSensors) {
		periodS := set.Sensors[p.other].SamplePeriodS
		if key, pulseS, ok := shortPulse(set.Duties[p.duty].Legs, "leg", periodS); ok {
			report.warn("duty %s: %s.pulse_s is %g, shorter than the sample period %g s of sensors %s: a reading may miss the pulse, its charge is counted all the same",
				p.duty, key, pulseS, periodS, p.other)
		}
	}
	return nil
}

// shortPulse finds the first leg whose pulses are shorter than a sample period.
func shortPulse(legs []duty.Leg, at string, periodS float64) (key string, pulseS float64, ok bool) {
	for i := range legs {
		l := &legs[i]
		here := fmt.Sprintf("%s[%d]", at, i)
		if l.Kind == duty.Pulses && l.PulseS < periodS {
			return here, l.PulseS, true
		}
		if key, pulseS, ok = shortPulse(l.Legs, here+".leg", periodS); ok {
			return key, pulseS, true
		}
	}
	return "", 0, false
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

package duty

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// ValueError says that one value of a duty is not allowed. The key is that of
// the TOML file, e.g. "leg[2].leg[0].pulse_s"; indices count from 0.
type ValueError struct {
	Key     string
	Found   string
	Allowed string
}

// Error implements error.
func (e *ValueError) Error() string {
	return fmt.Sprintf("duty: %s: found %s, allowed is %s", e.Key, e.Found, e.Allowed)
}

// KeyPath returns the key the error belongs to.
func (e *ValueError) KeyPath() string { return e.Key }

func bad(key string, found any, allowed string) error {
	return &ValueError{Key: key, Found: fmt.Sprint(found), Allowed: allowed}
}

// MaxDepth is how deep groups may nest.
const MaxDepth = 8

// longestS bounds every length, so that no sum of them is infinite.
const (
	longestS = 1e12
	noLonger = "at most 1e+12 s"
)

// maxCount bounds the groups of one pulses leg, which are laid out one by one.
const maxCount = 100_000

// Validate checks every rule of a duty and returns the first breach as a
// *ValueError.
func (d *Duty) Validate() error {
	if len(d.Legs) == 0 {
		return bad("leg", "no leg", "at least one")
	}
	if d.Vehicle != nil {
		if err := d.Vehicle.validate("vehicle"); err != nil {
			return err
		}
	}
	return d.validateLegs(d.Legs, "leg", 0)
}

func (d *Duty) validateLegs(legs []Leg, key string, depth int) error {
	if depth > MaxDepth {
		return bad(key, fmt.Sprintf("groups nested %d deep", depth), fmt.Sprintf("at most %d", MaxDepth))
	}
	for i := range legs {
		at := fmt.Sprintf("%s[%d]", key, i)
		l := &legs[i]
		if err := d.validateLeg(l, at); err != nil {
			return err
		}
		if l.Kind == Group {
			if len(l.Legs) == 0 {
				return bad(at+".leg", "no leg", "at least one in a group")
			}
			if err := d.validateLegs(l.Legs, at+".leg", depth+1); err != nil {
				return err
			}
		}
	}
	return nil
}

// rule is what a number must keep.
type rule struct {
	ok      func(float64) bool
	allowed string
}

var (
	finiteNumber = rule{func(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }, "a finite number"}
	notNegative  = rule{func(v float64) bool { return v >= 0 && !math.IsInf(v, 0) }, "a finite number ≥ 0"}
	positive     = rule{func(v float64) bool { return v > 0 && !math.IsInf(v, 0) }, "a finite number > 0"}
	share        = rule{func(v float64) bool { return v >= 0 && v <= 1 }, "0 to 1"}
	aboveShare   = rule{func(v float64) bool { return v > 0 && v <= 1 }, "above 0, at most 1"}
)

// Kinds lists the kinds a leg may have.
func Kinds() []Kind {
	return []Kind{Rest, Current, Power, HoldVoltage, Pulses, Trace, Speed, Profile, Group}
}

// field is one number of a leg: its key, its value, the kinds that use it (nil:
// all) and what it must keep.
type field struct {
	key   string
	value *float64
	kinds []Kind
	rule  rule
}

func (l *Leg) numbers() []field {
	return []field{
		{"duration_s", &l.DurationS, nil, positive},
		{"until_soc", &l.UntilSOC, nil, share},
		{"until_voltage_v", &l.UntilVoltageV, nil, finiteNumber},
		{"until_current_a", &l.UntilCurrentA, nil, notNegative},
		{"until_c_rate", &l.UntilCRate, nil, notNegative},
		{"current_a", &l.CurrentA, []Kind{Current, Pulses, Profile}, finiteNumber},
		{"c_rate", &l.CRate, []Kind{Current, Pulses, Profile}, finiteNumber},
		{"power_w", &l.PowerW, []Kind{Power}, finiteNumber},
		{"voltage_v", &l.VoltageV, []Kind{HoldVoltage}, positive},
		{"pulse_s", &l.PulseS, []Kind{Pulses}, positive},
		{"rest_s", &l.RestS, []Kind{Pulses}, notNegative},
		{"return_ratio", &l.ReturnRatio, []Kind{Pulses}, notNegative},
		{"soc_step", &l.SOCStep, []Kind{Pulses}, share},
		{"step_c_rate", &l.StepCRate, []Kind{Pulses}, positive},
		{"step_rest_s", &l.StepRestS, []Kind{Pulses}, notNegative},
		{"peak_power_w", &l.PeakPowerW, []Kind{Profile}, positive},
	}
}

// NewLeg returns a leg of a kind with no number given.
func NewLeg(kind Kind) Leg {
	l := Leg{Kind: kind}
	for _, f := range l.numbers() {
		*f.value = math.NaN()
	}
	return l
}

func given(v float64) bool { return !math.IsNaN(v) }

func (d *Duty) validateLeg(l *Leg, at string) error {
	if !slices.Contains(Kinds(), l.Kind) {
		return bad(at+".kind", fmt.Sprintf("%q", string(l.Kind)), "one of "+words(Kinds()))
	}
	if l.AtLimit != "" && l.AtLimit != Cut && l.AtLimit != End {
		return bad(at+".at_limit", fmt.Sprintf("%q", string(l.AtLimit)), `"cut" or "end"`)
	}
	if l.Repeat < 0 {
		return bad(at+".repeat", l.Repeat, "a whole number ≥ 1")
	}
	for _, f := range l.numbers() {
		v := *f.value
		if !given(v) {
			continue
		}
		if f.kinds != nil && !slices.Contains(f.kinds, l.Kind) {
			return bad(at+"."+f.key, v, fmt.Sprintf("no such key in a leg of kind %q (it belongs to %s)", l.Kind, words(f.kinds)))
		}
		if !f.rule.ok(v) {
			return bad(at+"."+f.key, v, f.rule.allowed)
		}
		if v > longestS && strings.HasSuffix(f.key, "_s") {
			return bad(at+"."+f.key, v, noLonger)
		}
	}
	if l.Count != 0 && l.Kind != Pulses {
		return bad(at+".count", l.Count, `no such key but in a leg of kind "pulses"`)
	}
	if err := l.validateColumns(at); err != nil {
		return err
	}
	if l.Vehicle != nil {
		if l.Kind != Speed && (l.Kind != Profile || l.ProfileName != "nedc") {
			return bad(at+".vehicle", "a vehicle", `a vehicle only in a leg of kind "speed", or of "profile" with name "nedc"`)
		}
		if err := l.Vehicle.validate(at + ".vehicle"); err != nil {
			return err
		}
	}
	if l.ProfileName != "" && l.Kind != Profile {
		return bad(at+".name", l.ProfileName, `no such key but in a leg of kind "profile"`)
	}
	if len(l.Legs) > 0 && l.Kind != Group {
		return bad(at+".leg", fmt.Sprintf("%d legs", len(l.Legs)), `no legs but in a leg of kind "group"`)
	}
	return d.validateKind(l, at)
}

// validateKind checks what a kind must have.
func (d *Duty) validateKind(l *Leg, at string) error {
	moves := true // whether it changes the cell, so that a stop may be met
	switch l.Kind {
	case Rest:
		moves = false
	case Current:
		if err := l.oneCurrent(at); err != nil {
			return err
		}
		moves = l.CurrentA != 0 && l.CRate != 0
	case Power:
		if !given(l.PowerW) {
			return bad(at+".power_w", "nothing", "a number of W")
		}
		moves = l.PowerW != 0
	case HoldVoltage:
		if !given(l.VoltageV) {
			return bad(at+".voltage_v", "nothing", "a number of V")
		}
	case Pulses:
		return l.validatePulses(at)
	case Trace:
		if (l.TraceA == nil) == (l.TraceW == nil) {
			return bad(at, "neither or both of current_a and power_w", "time_s with one of the two, inline or by file")
		}
		return nil
	case Speed:
		if l.SpeedMps == nil {
			return bad(at+".speed_mps", "nothing", "time_s with speed_mps, inline or by file")
		}
		return d.needsVehicle(l, at)
	case Profile:
		return d.validateProfile(l, at)
	case Group:
		return nil
	}
	if !given(l.DurationS) {
		if !l.stops() {
			return bad(at+".duration_s", "nothing", "a duration, or a stop (until_…)")
		}
		if !moves {
			return bad(at+".duration_s", "nothing", "a duration: nothing flows in this leg, so its stop may never be met")
		}
	}
	return nil
}

func (l *Leg) stops() bool {
	return given(l.UntilSOC) || given(l.UntilVoltageV) || given(l.UntilCurrentA) || given(l.UntilCRate)
}

func (l *Leg) oneCurrent(at string) error {
	switch {
	case given(l.CurrentA) && given(l.CRate):
		return bad(at+".c_rate", "both current_a and c_rate", "one of the two")
	case !given(l.CurrentA) && !given(l.CRate):
		return bad(at+".current_a", "nothing", "current_a or c_rate")
	}
	return nil
}

func (l *Leg) validatePulses(at string) error {
	if err := l.oneCurrent(at); err != nil {
		return err
	}
	switch {
	case l.Count < 0 || l.Count > maxCount:
		return bad(at+".count", l.Count, fmt.Sprintf("a whole number from 1 to %d (repeat goes on beyond)", maxCount))
	case l.CurrentA == 0:
		return bad(at+".current_a", 0, "a current that is not 0")
	case l.CRate == 0:
		return bad(at+".c_rate", 0, "a rate that is not 0")
	case !given(l.PulseS):
		return bad(at+".pulse_s", "nothing", "a number of seconds > 0")
	case !given(l.RestS):
		return bad(at+".rest_s", "nothing", "a number of seconds ≥ 0")
	case given(l.SOCStep) && l.SOCStep > 0 && !given(l.StepCRate):
		return bad(at+".step_c_rate", "nothing", "a rate > 0, with soc_step")
	case given(l.StepCRate) && !given(l.SOCStep), given(l.StepRestS) && !given(l.SOCStep):
		return bad(at+".soc_step", "nothing", "a share of the capacity, with step_c_rate and step_rest_s")
	case l.SOCStep*3600/l.StepCRate > longestS: // false where neither is given
		return bad(at+".step_c_rate", l.StepCRate, "a rate that moves soc_step in "+noLonger)
	}
	return nil
}

// validateColumns checks the columns of a trace.
func (l *Leg) validateColumns(at string) error {
	if l.TimeS == nil && l.TraceA == nil && l.TraceW == nil && l.SpeedMps == nil {
		return nil
	}
	for _, c := range []struct {
		key    string
		values []float64
		kind   Kind
		rule   rule
	}{
		{"current_a", l.TraceA, Trace, finiteNumber}, {"power_w", l.TraceW, Trace, finiteNumber},
		{"speed_mps", l.SpeedMps, Speed, notNegative},
	} {
		if c.values == nil {
			continue
		}
		if l.Kind != c.kind {
			return bad(at+"."+c.key, fmt.Sprintf("%d values", len(c.values)), fmt.Sprintf("no column in a leg of kind %q", l.Kind))
		}
		if len(c.values) != len(l.TimeS) {
			return bad(at+"."+c.key, fmt.Sprintf("%d values", len(c.values)), fmt.Sprintf("as many as time_s (%d)", len(l.TimeS)))
		}
		for k, v := range c.values {
			if !c.rule.ok(v) {
				return bad(fmt.Sprintf("%s.%s[%d]", at, c.key, k), v, c.rule.allowed)
			}
		}
	}
	if l.Kind != Trace && l.Kind != Speed {
		return bad(at+".time_s", fmt.Sprintf("%d values", len(l.TimeS)), fmt.Sprintf("no column in a leg of kind %q", l.Kind))
	}
	if len(l.TimeS) < 2 {
		return bad(at+".time_s", fmt.Sprintf("%d values", len(l.TimeS)), "at least 2: the last is the end")
	}
	for k, t := range l.TimeS {
		key := fmt.Sprintf("%s.time_s[%d]", at, k)
		switch {
		case k == 0 && t != 0:
			return bad(key, t, "0: times start there")
		case !finiteNumber.ok(t):
			return bad(key, t, finiteNumber.allowed)
		case t > longestS:
			return bad(key, t, noLonger)
		case k > 0 && t < l.TimeS[k-1]:
			return bad(key, t, fmt.Sprintf("at least the one before it (%g): time does not go backward", l.TimeS[k-1]))
		case k > 0 && t == l.TimeS[k-1] && l.Kind == Speed:
			return bad(key, t, fmt.Sprintf("above the one before it (%g)", l.TimeS[k-1]))
		}
	}
	if l.TimeS[len(l.TimeS)-1] == 0 {
		return bad(at+".time_s", "a trace of no length", "an end after 0")
	}
	return nil
}

func (d *Duty) needsVehicle(l *Leg, at string) error {
	if l.Vehicle == nil && d.Vehicle == nil {
		return bad(at+".vehicle", "nothing", "a [vehicle], here or for the whole duty, to turn speed into power")
	}
	return nil
}

func (v *Vehicle) validate(at string) error {
	for _, f := range []struct {
		key   string
		value float64
		rule  rule
	}{
		{"mass_kg", v.MassKg, positive}, {"rotating_mass_kg", v.RotatingMassKg, notNegative},
		{"rolling_coefficient", v.RollingCoefficient, notNegative}, {"drag_area_m2", v.DragAreaM2, notNegative},
		{"air_density_kg_per_m3", v.AirDensityKgPerM3, positive}, {"slope", v.Slope, finiteNumber},
		{"drive_efficiency", v.DriveEfficiency, aboveShare}, {"regeneration_efficiency", v.RegenerationEfficiency, share},
		{"auxiliary_w", v.AuxiliaryW, notNegative},
	} {
		if !f.rule.ok(f.value) {
			return bad(at+"."+f.key, f.value, f.rule.allowed)
		}
	}
	if v.Series < 1 {
		return bad(at+".series", v.Series, "a whole number ≥ 1")
	}
	if v.Parallel < 1 {
		return bad(at+".parallel", v.Parallel, "a whole number ≥ 1")
	}
	return nil
}

func words(kinds []Kind) string {
	s := make([]string, len(kinds))
	for i, k := range kinds {
		s[i] = string(k)
	}
	return strings.Join(s, ", ")
}

package define

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"soctrial/plant/duty"
	"soctrial/plant/record"
)

// Trace is what a leg's file holds: times from the first sample on, and the
// one column its leg is about.
type Trace struct {
	TimeS    []float64
	CurrentA []float64 // > 0 on discharge
	PowerW   []float64
	SpeedMps []float64
}

// Openers read the files that a definition names, as written in it.
type Openers struct {
	Cell  func(file string) ([]byte, error)
	Map   func(file string) ([]byte, error)
	Trace func(file string, m *record.Map, kind duty.Kind) (*Trace, error)
}

// Duty reads a duty. Files that its legs name are read through o.
func Duty(file string, text []byte, o Openers) (*duty.Duty, error) {
	d, t, err := parse(file, text, KindDuty)
	if err != nil {
		return nil, err
	}
	out := &duty.Duty{Name: nameOf(t, file)}
	if v := t.table("vehicle"); v != nil {
		out.Vehicle = vehicle(v)
	}
	out.Legs = legs(t, o)
	t.finish()
	if err := d.err(); err != nil {
		return nil, err
	}
	if err := d.owned(out.Validate()); err != nil {
		return nil, err
	}
	return out, nil
}

func legs(t *table, o Openers) []duty.Leg {
	if !t.has("leg") {
		t.missing("leg", "a list of legs")
	}
	var out []duty.Leg
	for _, l := range t.tables("leg") {
		out = append(out, leg(l, o))
	}
	return out
}

// legNumbers are the numbers of a leg that stand under one key whatever its
// kind.
func legNumbers(l *duty.Leg) map[string]*float64 {
	return map[string]*float64{
		"duration_s": &l.DurationS, "until_soc": &l.UntilSOC, "until_voltage_v": &l.UntilVoltageV,
		"until_current_a": &l.UntilCurrentA, "until_c_rate": &l.UntilCRate, "c_rate": &l.CRate, "voltage_v": &l.VoltageV,
		"pulse_s": &l.PulseS, "rest_s": &l.RestS, "return_ratio": &l.ReturnRatio, "soc_step": &l.SOCStep,
		"step_c_rate": &l.StepCRate, "step_rest_s": &l.StepRestS, "peak_power_w": &l.PeakPowerW,
	}
}

// legKeyOrder is the order in which a leg's numbers are told and written.
func legKeyOrder() []string {
	return []string{"duration_s", "until_soc", "until_voltage_v", "until_current_a", "until_c_rate", "c_rate", "voltage_v", "pulse_s",
		"rest_s", "return_ratio", "soc_step", "step_c_rate", "step_rest_s", "peak_power_w"}
}

func leg(t *table, o Openers) duty.Leg {
	var kinds []string
	for _, k := range duty.Kinds() {
		kinds = append(kinds, string(k))
	}
	l := duty.Leg{CurrentA: math.NaN(), PowerW: math.NaN()}
	l.Kind = duty.Kind(t.needWord("kind", kinds...))
	numbers := legNumbers(&l)
	for _, k := range legKeyOrder() {
		*numbers[k] = t.number(k, math.NaN())
	}
	l.Repeat = t.whole("repeat", 0, 1)
	l.Count = t.whole("count", 0, 1)
	l.AtLimit = duty.AtLimit(t.word("at_limit", string(duty.Cut), string(duty.End)))
	l.ProfileName = t.text("name")
	l.TimeS = t.numbers("time_s")
	l.SpeedMps = t.numbers("speed_mps")
	switch l.Kind {
	case duty.Trace:
		l.TraceA, l.TraceW = t.numbers("current_a"), t.numbers("power_w")
	case "": // unknown: whether numbers or lists stand here cannot be judged
		t.get("current_a")
		t.get("power_w")
	default:
		l.CurrentA, l.PowerW = t.number("current_a", math.NaN()), t.number("power_w", math.NaN())
	}
	if v := t.table("vehicle"); v != nil {
		l.Vehicle = vehicle(v)
	}
	l.File = t.text("file")
	mapFile := t.text("map")
	switch {
	case l.File != "":
		traceFile(t, &l, mapFile, o)
	case t.has("map"):
		t.failOnce("map", fmt.Sprintf("%q", mapFile), "a map only beside a file")
	case t.has("file"):
		t.failOnce("file", `""`, "a path beside the duty's file")
	}
	if t.has("leg") {
		l.Legs = legs(t, o)
	} else {
		t.get("leg")
	}
	t.finish()
	return l
}

// traceFile reads the columns of a leg from the file it names.
func traceFile(t *table, l *duty.Leg, mapFile string, o Openers) {
	if l.Kind != duty.Trace && l.Kind != duty.Speed {
		t.fail("file", fmt.Sprintf("%q", l.File), `a file only in a leg of kind "trace" or "speed"`)
		return
	}
	for _, k := range []string{"time_s", "current_a", "power_w", "speed_mps"} {
		if t.has(k) {
			t.failOnce(k, "columns beside a file", "either inline columns or a file")
			return
		}
	}
	if o.Trace == nil {
		t.fail("file", fmt.Sprintf("%q", l.File), "columns inline: no file can be read from here")
		return
	}
	m, err := traceMap(mapFile, o)
	if err != nil {
		t.blame("map", err)
		return
	}
	trace, err := o.Trace(l.File, m, l.Kind)
	if err != nil {
		t.blame("file", err)
		return
	}
	l.TimeS = slices.Clone(trace.TimeS)
	for k := range l.TimeS {
		l.TimeS[k] -= trace.TimeS[0]
	}
	l.TraceA, l.TraceW, l.SpeedMps = trace.CurrentA, trace.PowerW, trace.SpeedMps
	if err := checkTrace(l); err != nil {
		t.blame("file", fmt.Errorf("%s: %w", l.File, err))
	}
}

func traceMap(file string, o Openers) (*record.Map, error) {
	if file == "" {
		return nil, nil
	}
	if o.Map == nil {
		return nil, fmt.Errorf("found %q, allowed is no map: no file can be read from here", file)
	}
	text, err := o.Map(file)
	if err != nil {
		return nil, err
	}
	return Map(file, text)
}

// checkTrace judges columns alone, so that a fault in them is put down to
// their file.
func checkTrace(l *duty.Leg) error {
	bare := duty.Leg{Kind: l.Kind, TimeS: l.TimeS, TraceA: l.TraceA, TraceW: l.TraceW, SpeedMps: l.SpeedMps}
	for _, x := range legNumbers(&bare) {
		*x = math.NaN()
	}
	bare.CurrentA, bare.PowerW = math.NaN(), math.NaN()
	err := (&duty.Duty{Legs: []duty.Leg{bare}, Vehicle: &duty.Vehicle{MassKg: 1, AirDensityKgPerM3: 1, DriveEfficiency: 1,
		Series: 1, Parallel: 1}}).Validate()
	var k keyed
	if errors.As(err, &k) {
		if _, rest, ok := strings.Cut(k.Error(), k.KeyPath()+": "); ok {
			if column, ok := strings.CutPrefix(k.KeyPath(), "leg[0]."); ok {
				rest = column + ": " + rest
			}
			return errors.New(rest)
		}
	}
	return err
}

func vehicle(t *table) *duty.Vehicle {
	v := &duty.Vehicle{
		MassKg:                 t.needNumber("mass_kg", "a number of kg > 0"),
		RotatingMassKg:         t.number("rotating_mass_kg", 0),
		RollingCoefficient:     t.needNumber("rolling_coefficient", "a number ≥ 0"),
		DragAreaM2:             t.needNumber("drag_area_m2", "drag coefficient times frontal area, ≥ 0"),
		AirDensityKgPerM3:      t.number("air_density_kg_per_m3", 1.2),
		Slope:                  t.number("slope", 0),
		DriveEfficiency:        t.number("drive_efficiency", 1),
		RegenerationEfficiency: t.number("regeneration_efficiency", 0),
		AuxiliaryW:             t.number("auxiliary_w", 0),
		Series:                 t.whole("series", 1, 1),
		Parallel:               t.whole("parallel", 1, 1),
	}
	t.finish()
	return v
}

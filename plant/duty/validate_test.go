package duty_test

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"soctrial/plant/duty"
)

// changed returns a leg of a kind after change.
func changed(kind duty.Kind, change func(l *duty.Leg)) duty.Leg {
	l := leg(kind)
	change(&l)
	return l
}

// good returns a leg of each kind that holds all its kind needs.
func good() map[duty.Kind]duty.Leg {
	car := &duty.Vehicle{MassKg: 900, AirDensityKgPerM3: 1.2, DriveEfficiency: 1, Series: 1, Parallel: 1}
	return map[duty.Kind]duty.Leg{
		duty.Rest:        changed(duty.Rest, func(l *duty.Leg) { l.DurationS = 5 }),
		duty.Current:     current(1, 5),
		duty.Power:       changed(duty.Power, func(l *duty.Leg) { l.PowerW, l.DurationS = 3, 5 }),
		duty.HoldVoltage: changed(duty.HoldVoltage, func(l *duty.Leg) { l.VoltageV, l.UntilCurrentA = 4, 0.1 }),
		duty.Pulses:      changed(duty.Pulses, func(l *duty.Leg) { l.CRate, l.PulseS, l.RestS = 1, 10, 40 }),
		duty.Trace:       changed(duty.Trace, func(l *duty.Leg) { l.TimeS, l.TraceA = []float64{0, 2, 2, 5}, []float64{1, 2, 3, 0} }),
		duty.Speed:       changed(duty.Speed, func(l *duty.Leg) { l.TimeS, l.SpeedMps, l.Vehicle = []float64{0, 1}, []float64{0, 1}, car }),
		duty.Profile:     changed(duty.Profile, func(l *duty.Leg) { l.ProfileName, l.PeakPowerW = "dst", 40 }),
		duty.Group:       changed(duty.Group, func(l *duty.Leg) { l.Legs = []duty.Leg{current(1, 5)} }),
	}
}

// isRefused holds an error to its place, and to saying what is allowed.
func isRefused(t *testing.T, err error, key string) {
	t.Helper()
	var v *duty.ValueError
	if !errors.As(err, &v) || v.Key != key || v.KeyPath() != key || !strings.HasPrefix(err.Error(), "duty: "+key+": found ") ||
		!strings.Contains(err.Error(), "allowed is") || v.Found == "" || v.Allowed == "" {
		t.Errorf("got %v, want an error at %s", err, key)
	}
}

func TestBadDutiesAreRefused(t *testing.T) {
	g := good()
	from := func(kind duty.Kind, change func(l *duty.Leg)) duty.Leg {
		l := g[kind]
		change(&l)
		return l
	}
	inGroup := func(l duty.Leg) duty.Leg {
		return from(duty.Group, func(o *duty.Leg) { o.Legs = []duty.Leg{current(1, 5), l} })
	}
	vehicle := func(change func(v *duty.Vehicle)) duty.Leg {
		return from(duty.Speed, func(l *duty.Leg) {
			v := *l.Vehicle
			change(&v)
			l.Vehicle = &v
		})
	}
	trace := func(times, currents []float64) duty.Leg {
		return from(duty.Trace, func(l *duty.Leg) { l.TimeS, l.TraceA = times, currents })
	}
	for name, c := range map[string]struct {
		leg duty.Leg
		key string
	}{
		"no such kind":         {duty.Leg{Kind: "pause"}, "leg[0].kind"},
		"no current":           {current(nan, 5), "leg[0].current_a"},
		"two currents":         {from(duty.Current, func(l *duty.Leg) { l.CRate = 1 }), "leg[0].c_rate"},
		"no end":               {current(1, nan), "leg[0].duration_s"},
		"rest that may last":   {from(duty.Rest, func(l *duty.Leg) { l.DurationS, l.UntilSOC = nan, 0.5 }), "leg[0].duration_s"},
		"no current that may":  {from(duty.Current, func(l *duty.Leg) { l.CurrentA, l.DurationS, l.UntilVoltageV = 0, nan, 3 }), "leg[0].duration_s"},
		"no power that may":    {from(duty.Power, func(l *duty.Leg) { l.PowerW, l.DurationS, l.UntilVoltageV = 0, nan, 3 }), "leg[0].duration_s"},
		"negative duration":    {current(1, -5), "leg[0].duration_s"},
		"no length":            {current(1, 0), "leg[0].duration_s"},
		"endless":              {current(1, math.Inf(1)), "leg[0].duration_s"},
		"infinite current":     {current(math.Inf(1), 5), "leg[0].current_a"},
		"repeat":               {from(duty.Current, func(l *duty.Leg) { l.Repeat = -1 }), "leg[0].repeat"},
		"SOC stop above 1":     {from(duty.Current, func(l *duty.Leg) { l.UntilSOC = 1.5 }), "leg[0].until_soc"},
		"current stop below 0": {from(duty.Current, func(l *duty.Leg) { l.UntilCurrentA = -1 }), "leg[0].until_current_a"},
		"at limit":             {from(duty.Current, func(l *duty.Leg) { l.AtLimit = "stop" }), "leg[0].at_limit"},
		"no power":             {from(duty.Power, func(l *duty.Leg) { l.PowerW = nan }), "leg[0].power_w"},
		"no voltage":           {from(duty.HoldVoltage, func(l *duty.Leg) { l.VoltageV = nan }), "leg[0].voltage_v"},
		"hold without end":     {from(duty.HoldVoltage, func(l *duty.Leg) { l.UntilCurrentA = nan }), "leg[0].duration_s"},
		"empty group":          {leg(duty.Group), "leg[0].leg"},
		"in a group":           {inGroup(current(1, 0)), "leg[0].leg[1].duration_s"},
		"in a group's group":   {inGroup(inGroup(from(duty.Pulses, func(l *duty.Leg) { l.PulseS = -1 }))), "leg[0].leg[1].leg[1].pulse_s"},
		"legs in a rest":       {from(duty.Rest, func(l *duty.Leg) { l.Legs = []duty.Leg{current(1, 5)} }), "leg[0].leg"},
		"count in a rest":      {from(duty.Rest, func(l *duty.Leg) { l.Count = 2 }), "leg[0].count"},
		"name in a rest":       {from(duty.Rest, func(l *duty.Leg) { l.ProfileName = "dst" }), "leg[0].name"},
		"vehicle in a rest":    {from(duty.Rest, func(l *duty.Leg) { l.Vehicle = g[duty.Speed].Vehicle }), "leg[0].vehicle"},
		"vehicle with dst":     {from(duty.Profile, func(l *duty.Leg) { l.Vehicle = g[duty.Speed].Vehicle }), "leg[0].vehicle"},
		"columns in a rest":    {from(duty.Rest, func(l *duty.Leg) { l.TimeS, l.TraceA = []float64{0, 1}, []float64{1, 1} }), "leg[0].current_a"},
		"times in a rest":      {from(duty.Rest, func(l *duty.Leg) { l.TimeS = []float64{0, 1} }), "leg[0].time_s"},
		"speed in a trace":     {from(duty.Trace, func(l *duty.Leg) { l.SpeedMps = l.TraceA }), "leg[0].speed_mps"},

		"pulses of no current":  {from(duty.Pulses, func(l *duty.Leg) { l.CurrentA, l.CRate = 0, nan }), "leg[0].current_a"},
		"pulses of no rate":     {from(duty.Pulses, func(l *duty.Leg) { l.CRate = 0 }), "leg[0].c_rate"},
		"pulses of no length":   {from(duty.Pulses, func(l *duty.Leg) { l.PulseS = nan }), "leg[0].pulse_s"},
		"pulses without rest":   {from(duty.Pulses, func(l *duty.Leg) { l.RestS = nan }), "leg[0].rest_s"},
		"negative count":        {from(duty.Pulses, func(l *duty.Leg) { l.Count = -3 }), "leg[0].count"},
		"too many pulses":       {from(duty.Pulses, func(l *duty.Leg) { l.Count = 1 << 40 }), "leg[0].count"},
		"negative return":       {from(duty.Pulses, func(l *duty.Leg) { l.ReturnRatio = -0.5 }), "leg[0].return_ratio"},
		"step without rate":     {from(duty.Pulses, func(l *duty.Leg) { l.SOCStep = 0.1 }), "leg[0].step_c_rate"},
		"rate without step":     {from(duty.Pulses, func(l *duty.Leg) { l.StepCRate = 0.1 }), "leg[0].soc_step"},
		"step rest alone":       {from(duty.Pulses, func(l *duty.Leg) { l.StepRestS = 60 }), "leg[0].soc_step"},
		"pulses without an end": {from(duty.Pulses, func(l *duty.Leg) { l.PulseS = 1e13 }), "leg[0].pulse_s"},
		"steps without an end":  {from(duty.Pulses, func(l *duty.Leg) { l.SOCStep, l.StepCRate = 0.1, 1e-300 }), "leg[0].step_c_rate"},
		"trace without an end":  {trace([]float64{0, math.Inf(1)}, []float64{1, 1}), "leg[0].time_s[1]"},
		"trace of an age":       {trace([]float64{0, 1e13}, []float64{1, 1}), "leg[0].time_s[1]"},
		"current for an age":    {current(1, 1e13), "leg[0].duration_s"},

		"speed without car": {from(duty.Speed, func(l *duty.Leg) { l.Vehicle = nil }), "leg[0].vehicle"},
		"nedc without car":  {from(duty.Profile, func(l *duty.Leg) { l.ProfileName, l.PeakPowerW = "nedc", nan }), "leg[0].vehicle"},
		"scaled nedc":       {from(duty.Profile, func(l *duty.Leg) { l.ProfileName = "nedc" }), "leg[0].peak_power_w"},
		"no speeds":         {from(duty.Speed, func(l *duty.Leg) { l.SpeedMps = nil }), "leg[0].speed_mps"},
		"backward":          {from(duty.Speed, func(l *duty.Leg) { l.SpeedMps = []float64{0, -1} }), "leg[0].speed_mps[1]"},
		"speed that jumps":  {from(duty.Speed, func(l *duty.Leg) { l.TimeS, l.SpeedMps = []float64{0, 1, 1}, []float64{0, 1, 2} }), "leg[0].time_s[2]"},
		"weightless":        {vehicle(func(v *duty.Vehicle) { v.MassKg = 0 }), "leg[0].vehicle.mass_kg"},
		"airless":           {vehicle(func(v *duty.Vehicle) { v.AirDensityKgPerM3 = nan }), "leg[0].vehicle.air_density_kg_per_m3"},
		"a perfect drive":   {vehicle(func(v *duty.Vehicle) { v.DriveEfficiency = 1.1 }), "leg[0].vehicle.drive_efficiency"},
		"regeneration":      {vehicle(func(v *duty.Vehicle) { v.RegenerationEfficiency = -0.1 }), "leg[0].vehicle.regeneration_efficiency"},
		"no cells":          {vehicle(func(v *duty.Vehicle) { v.Series = 0 }), "leg[0].vehicle.series"},
		"no strings":        {vehicle(func(v *duty.Vehicle) { v.Parallel = -1 }), "leg[0].vehicle.parallel"},

		"unknown profile":  {from(duty.Profile, func(l *duty.Leg) { l.ProfileName = "fuds" }), "leg[0].name"},
		"profile unscaled": {from(duty.Profile, func(l *duty.Leg) { l.PeakPowerW = nan }), "leg[0].peak_power_w"},
		"dst by current":   {from(duty.Profile, func(l *duty.Leg) { l.CurrentA = 3 }), "leg[0].current_a"},
		"hppc by power":    {from(duty.Profile, func(l *duty.Leg) { l.ProfileName = "hppc" }), "leg[0].peak_power_w"},
		"hppc unscaled":    {from(duty.Profile, func(l *duty.Leg) { l.ProfileName, l.PeakPowerW = "hppc", nan }), "leg[0].current_a"},

		"trace of nothing":        {trace(nil, nil), "leg[0]"},
		"trace of one":            {trace([]float64{0}, []float64{1}), "leg[0].time_s"},
		"trace from 1":            {trace([]float64{1, 2}, []float64{1, 1}), "leg[0].time_s[0]"},
		"trace backward":          {trace([]float64{0, 2, 1}, []float64{1, 1, 1}), "leg[0].time_s[2]"},
		"trace of no length":      {trace([]float64{0, 0}, []float64{1, 1}), "leg[0].time_s"},
		"trace without a value":   {trace([]float64{0, 1, 2}, []float64{1, nan, 1}), "leg[0].current_a[1]"},
		"trace without a time":    {trace([]float64{0, nan, 2}, []float64{1, 1, 1}), "leg[0].time_s[1]"},
		"trace of unlike columns": {trace([]float64{0, 1, 2}, []float64{1, 1}), "leg[0].current_a"},
		"current and power":       {from(duty.Trace, func(l *duty.Leg) { l.TraceW = l.TraceA }), "leg[0]"},
		"current beyond numbers":  {from(duty.Current, func(l *duty.Leg) { l.CurrentA, l.CRate = nan, 1e308 }), "leg[0]"},
		"speed beyond numbers":    {inGroup(from(duty.Speed, func(l *duty.Leg) { l.SpeedMps = []float64{0, 1e200} })), "leg[0].leg[1]"},
	} {
		t.Run(name, func(t *testing.T) {
			_, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{c.leg}}, 5)
			isRefused(t, err, c.key)
		})
	}
	_, err := duty.Compile(&duty.Duty{}, 5)
	isRefused(t, err, "leg")
	for _, capacityAh := range []float64{0, -1, nan, math.Inf(1)} {
		_, err = duty.Compile(&duty.Duty{Legs: []duty.Leg{current(1, 1)}}, capacityAh)
		isRefused(t, err, "capacity_ah")
	}
	_, err = duty.Compile(&duty.Duty{Legs: []duty.Leg{current(1, 1)}, Vehicle: &duty.Vehicle{}}, 5)
	isRefused(t, err, "vehicle.mass_kg")
}

// A number that a kind does not use is refused, with the kinds that do.
func TestForeignFieldsAreRefused(t *testing.T) {
	numbers := map[string]struct {
		set   func(l *duty.Leg)
		kinds []duty.Kind
	}{
		"current_a":    {func(l *duty.Leg) { l.CurrentA = 1 }, []duty.Kind{duty.Current, duty.Pulses, duty.Profile}},
		"c_rate":       {func(l *duty.Leg) { l.CRate = 1 }, []duty.Kind{duty.Current, duty.Pulses, duty.Profile}},
		"power_w":      {func(l *duty.Leg) { l.PowerW = 1 }, []duty.Kind{duty.Power}},
		"voltage_v":    {func(l *duty.Leg) { l.VoltageV = 4 }, []duty.Kind{duty.HoldVoltage}},
		"pulse_s":      {func(l *duty.Leg) { l.PulseS = 1 }, []duty.Kind{duty.Pulses}},
		"rest_s":       {func(l *duty.Leg) { l.RestS = 1 }, []duty.Kind{duty.Pulses}},
		"return_ratio": {func(l *duty.Leg) { l.ReturnRatio = 1 }, []duty.Kind{duty.Pulses}},
		"soc_step":     {func(l *duty.Leg) { l.SOCStep = 0.1 }, []duty.Kind{duty.Pulses}},
		"step_c_rate":  {func(l *duty.Leg) { l.StepCRate = 1 }, []duty.Kind{duty.Pulses}},
		"step_rest_s":  {func(l *duty.Leg) { l.StepRestS = 1 }, []duty.Kind{duty.Pulses}},
		"peak_power_w": {func(l *duty.Leg) { l.PeakPowerW = 1 }, []duty.Kind{duty.Profile}},
	}
	if len(good()) != len(duty.Kinds()) {
		t.Fatalf("%d kinds have an example here, of %d", len(good()), len(duty.Kinds()))
	}
	for kind, l := range good() {
		if err := (&duty.Duty{Legs: []duty.Leg{l}}).Validate(); err != nil {
			t.Errorf("a good leg of kind %s: %v", kind, err)
		}
		for key, n := range numbers {
			if slices.Contains(n.kinds, kind) {
				continue
			}
			bad := l
			n.set(&bad)
			err := (&duty.Duty{Legs: []duty.Leg{current(1, 1), bad}}).Validate()
			isRefused(t, err, "leg[1]."+key)
			if err != nil && !strings.Contains(err.Error(), string(n.kinds[0])) {
				t.Errorf("%v: does not say that %s belongs to %v", err, key, n.kinds)
			}
		}
	}
}

// Eight groups may lie in each other, each with all its stops; nine may not.
func TestGroupsNestEightDeep(t *testing.T) {
	deep := current(1, 1)
	for n := range duty.MaxDepth + 1 {
		if n == 0 {
			deep.UntilSOC, deep.UntilVoltageV, deep.UntilCurrentA, deep.UntilCRate = 0.1, 3, 0.2, 0.1
			continue
		}
		g := deep
		g.Kind, g.CurrentA, g.DurationS, g.Legs = duty.Group, nan, nan, []duty.Leg{deep}
		deep = g
	}
	p, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{deep}}, 5)
	if err != nil {
		t.Fatal(err)
	}
	c := p.Start()
	stops := c.Stops()
	if len(stops) != 3*(duty.MaxDepth+1) || stops[len(stops)-1].Depth != duty.MaxDepth {
		t.Errorf("%d stops, %+v", len(stops), stops)
	}
	for _, s := range stops { // 0.1 C of 5 Ah are met before 0.2 A
		if s.Quantity == duty.StopCurrent && s.Value != 0.5 {
			t.Errorf("%+v, want 0.5 A", s)
		}
	}
	if c.Next(); !c.Done() {
		t.Error("not done")
	}
	c = p.Start()
	if c.Leave(0, 0.5); !c.Done() {
		t.Error("left, and not done")
	}
	g := leg(duty.Group)
	g.Legs = []duty.Leg{deep}
	_, err = duty.Compile(&duty.Duty{Legs: []duty.Leg{g}}, 5)
	if want := "groups nested 9 deep"; err == nil || !strings.Contains(err.Error(), want) {
		t.Errorf("got %v, want %q", err, want)
	}
}

// The sides of stops: by the sign of a constant current or power, as begun for
// all else.
func TestSidesOfStops(t *testing.T) {
	for _, c := range []struct {
		leg  duty.Leg
		want duty.Side
	}{
		{current(1, 5), duty.SideFalling}, {current(-1, 5), duty.SideRising}, {current(0, 5), duty.SideAsBegun},
		{changed(duty.Current, func(l *duty.Leg) { l.CRate, l.DurationS = -0.5, 5 }), duty.SideRising},
		{changed(duty.Power, func(l *duty.Leg) { l.PowerW, l.DurationS = 3, 5 }), duty.SideFalling},
		{changed(duty.Power, func(l *duty.Leg) { l.PowerW, l.DurationS = -3, 5 }), duty.SideRising},
		{changed(duty.Power, func(l *duty.Leg) { l.PowerW, l.DurationS = 0, 5 }), duty.SideAsBegun},
		{good()[duty.HoldVoltage], duty.SideAsBegun}, {good()[duty.Rest], duty.SideAsBegun}, {good()[duty.Pulses], duty.SideAsBegun},
		{good()[duty.Trace], duty.SideAsBegun}, {good()[duty.Speed], duty.SideAsBegun}, {good()[duty.Profile], duty.SideAsBegun},
		{good()[duty.Group], duty.SideAsBegun},
	} {
		c.leg.UntilSOC = 0.5
		p, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{c.leg}}, 5)
		if err != nil {
			t.Fatal(err)
		}
		cur := p.Start()
		if s := cur.Stops()[0]; s.Side != c.want || s.Value != 0.5 || s.Quantity != duty.StopSOC || s.Leg != 1 {
			t.Errorf("%s: %+v, want side %d", fmt.Sprint(c.leg.Kind), s, c.want)
		}
	}
}

// The innermost leg that says what happens at a limit is heard.
func TestAtLimitOfTheInnermost(t *testing.T) {
	a, b := current(1, 1), current(2, 1)
	a.AtLimit = duty.Cut
	g := leg(duty.Group)
	g.Legs, g.AtLimit = []duty.Leg{a, b}, duty.End
	p, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{g, b}}, 5)
	if err != nil {
		t.Fatal(err)
	}
	c := p.Start()
	for k, want := range []duty.AtLimit{duty.Cut, duty.End, ""} {
		if got := c.AtLimit(); got != want {
			t.Errorf("leg %d: %q, want %q", k, got, want)
		}
		c.Next()
	}
}

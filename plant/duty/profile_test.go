package duty_test

import (
	"encoding/csv"
	"math"
	"os"
	"slices"
	"strconv"
	"testing"

	"soctrial/plant/duty"
	"soctrial/testdata"
)

var nan = math.NaN()

func leg(kind duty.Kind) duty.Leg { return duty.NewLeg(kind) }

func profile(name string) duty.Leg {
	l := leg(duty.Profile)
	l.ProfileName = name
	return l
}

// step is one demand as a cursor gives it.
type step struct {
	q           duty.Quantity
	value       float64
	fromS, endS float64
}

// walk lists every demand of a duty without stops.
func walk(t testing.TB, d *duty.Duty, capacityAh float64) []step {
	t.Helper()
	p, err := duty.Compile(d, capacityAh)
	if err != nil {
		t.Fatal(err)
	}
	var out []step
	at := 0.0
	for c := p.Start(); !c.Done(); c.Next() {
		m := c.Demand()
		out = append(out, step{m.Quantity, m.Value, at, m.EndS})
		at = m.EndS
	}
	return out
}

func column(t testing.TB, path string, name string) []float64 {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.FieldsPerRecord = -1
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	for c, h := range rows[0] {
		if h != name {
			continue
		}
		var out []float64
		for _, row := range rows[1:] {
			v, err := strconv.ParseFloat(row[c], 64)
			if err != nil {
				t.Fatal(err)
			}
			out = append(out, v)
		}
		return out
	}
	t.Fatalf("%s has no column %q", path, name)
	return nil
}

// The Dynamic Stress Test against its table (USABC Rev 2; testdata): steps,
// durations and powers, discharge turned positive; 360 s, a mean of exactly
// 12.5 % of the peak, charge a sixth of discharge, step 15 at full power.
func TestDynamicStressTest(t *testing.T) {
	path := testdata.Reference(t, "usabc_dst_steps.csv")
	durations, percent := column(t, path, "duration_s"), column(t, path, "power_percent_of_peak_discharge_negative")
	l := profile("dst")
	l.PeakPowerW = 40
	steps := walk(t, &duty.Duty{Legs: []duty.Leg{l}}, 5)
	if len(steps) != 20 || len(durations) != 20 {
		t.Fatalf("%d steps, %d in the table", len(steps), len(durations))
	}
	var sum, charged, discharged float64
	for k, s := range steps {
		if s.q != duty.PowerDemand || math.Abs(s.endS-s.fromS-durations[k]) > 1e-12 || math.Abs(s.value+percent[k]/100*40) > 1e-12 {
			t.Errorf("step %d: %+v, table %g s at %g %%", k+1, s, durations[k], percent[k])
		}
		e := s.value * (s.endS - s.fromS)
		sum += e
		if e < 0 {
			charged -= e
		} else {
			discharged += e
		}
	}
	if end := steps[19].endS; end != 360 || math.Abs(sum/360-0.125*40) > 1e-12 || math.Abs(charged/discharged-1.0/6) > 1e-12 {
		t.Errorf("%g s, mean %g W, charge over discharge %g", end, sum/360, charged/discharged)
	}
	if steps[14].value != 40 {
		t.Errorf("step 15 is %g W, want the full 40 W of discharge", steps[14].value)
	}
}

// The driving cycle against the regulation's operations, and at each second;
// its distance, duration and top speed (UN R83; testdata).
func TestNEDC(t *testing.T) {
	timeS, speed := duty.NEDC()
	kmh := column(t, testdata.Reference(t, "cycle_nedc_1hz.csv"), "speed_kmh")
	if len(speed) != 1181 || len(kmh) != 1181 || timeS[1180] != 1180 {
		t.Fatalf("%d speeds to %g s, %d in the table", len(speed), timeS[len(timeS)-1], len(kmh))
	}
	ops := testdata.Reference(t, "cycle_nedc_operations.csv")
	end, durations, at := column(t, ops, "end_speed_kmh"), column(t, ops, "duration_s"), 0
	for part := range 5 { // four times the urban cycle, then the other
		first, last := 0, 25
		if part == 4 {
			first, last = 25, len(end)
		}
		for k := first; k < last; k++ {
			at += int(durations[k])
			if math.Abs(speed[at]*3.6-end[k]) > 1e-9 {
				t.Errorf("operation %d ends at %d s with %g km/h, table %g", k+1, at, speed[at]*3.6, end[k])
			}
		}
	}
	if at != 1180 {
		t.Errorf("operations last %d s", at)
	}
	distance, top := 0.0, 0.0
	for k, v := range speed {
		if math.Abs(v*3.6-kmh[k]) > 5e-5 {
			t.Fatalf("%d s: %g km/h, table %g", k, v*3.6, kmh[k])
		}
		if k > 0 {
			distance += (v + speed[k-1]) / 2
		}
		top = max(top, v*3.6)
	}
	if wantM, topMps := published(t, "NEDC", "whole"); math.Abs(distance-wantM) > 1e-3*wantM || math.Abs(top-3.6*topMps) > 1e-9 {
		t.Errorf("%g m, %g km/h; published %g m, %g m/s", distance, top, wantM, topMps)
	}
}

// The hybrid pulses: durations and ratios from DOE/ID-11069 and ISO 12405
// (testdata).
func TestHybridPulses(t *testing.T) {
	path := testdata.Reference(t, "hppc_pulse_profiles.csv")
	durations, shares := column(t, path, "duration_s"), column(t, path, "relative_current_discharge_positive")
	var steps []step
	for _, name := range []string{"hppc", "iso12405-power-pulse"} {
		l := profile(name)
		l.CRate = 2
		steps = append(steps, walk(t, &duty.Duty{Legs: []duty.Leg{l}}, 5)...)
	}
	if len(steps) != len(durations) {
		t.Fatalf("%d steps, %d in the table", len(steps), len(durations))
	}
	for k, s := range steps {
		if s.endS-s.fromS != durations[k] || s.value != shares[k]*10 {
			t.Errorf("step %d: %+v, table %g s at %g", k, s, durations[k], shares[k])
		}
	}
}

// published returns the length, m, and top speed, m/s, of a whole cycle or of a
// part of it, each with its source in cycle_summary.csv.
func published(t testing.TB, cycle, part string) (distanceM, topMps float64) {
	t.Helper()
	f, err := os.Open(testdata.Reference(t, "cycle_summary.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	unit := map[string]float64{"km": 1000, "mi": 1609.344, "km/h": 1 / 3.6, "mph": 0.44704}
	for _, r := range rows {
		if r[0] == cycle && r[1] == part {
			d, err1 := strconv.ParseFloat(r[4], 64)
			v, err2 := strconv.ParseFloat(r[7], 64)
			if err1 != nil || err2 != nil || unit[r[5]] == 0 || unit[r[8]] == 0 {
				t.Fatalf("%q: %v %v", r, err1, err2)
			}
			return d * unit[r[5]], v * unit[r[8]]
		}
	}
	t.Fatalf("no %s of %s in the table", part, cycle)
	return 0, 0
}

// Published driving schedules read in place: distance and top speed against the
// published ones, and what of the kinetic energy is left over a stop-to-stop
// cycle (none) and of the drag.
func TestPublishedSpeedTraces(t *testing.T) {
	for _, c := range []struct {
		file, unit, cycle string
		toMps             float64
	}{
		{"cycle_udds_1hz.csv", "speed_mph", "UDDS", 0.44704},
		{"cycle_hwfet_1hz.csv", "speed_mph", "HWFET", 0.44704},
		{"cycle_us06_1hz.csv", "speed_mph", "US06", 0.44704},
		{"cycle_wltc_class3b_1hz.csv", "speed_kmh", "WLTC class 3b", 1 / 3.6},
	} {
		t.Run(c.file, func(t *testing.T) {
			path := testdata.Shared(t, "reference/traces/"+c.file)
			l := leg(duty.Speed)
			l.TimeS = column(t, path, "time_s")
			distance := 0.0
			for k, v := range column(t, path, c.unit) {
				l.SpeedMps = append(l.SpeedMps, v*c.toMps)
				if k > 0 {
					distance += (l.SpeedMps[k] + l.SpeedMps[k-1]) / 2
				}
			}
			wantM, topMps := published(t, c.cycle, "whole")
			if math.Abs(distance-wantM) > 1e-3*wantM || math.Abs(slices.Max(l.SpeedMps)-topMps) > 1e-9 {
				t.Errorf("%g m, at most %g m/s; published %g, %g", distance, slices.Max(l.SpeedMps), wantM, topMps)
			}
			energyOf(t, l)
		})
	}
	l := leg(duty.Speed)
	l.TimeS, l.SpeedMps = duty.NEDC()
	energyOf(t, l)
}

// energyOf drives a vehicle of nothing but mass over a cycle that begins and
// ends standing: what it took comes back. With drag, the rest is the integral
// of the drag.
func energyOf(t *testing.T, l duty.Leg) {
	t.Helper()
	v := duty.Vehicle{MassKg: 1200, RotatingMassKg: 60, AirDensityKgPerM3: 1.2, DriveEfficiency: 1, RegenerationEfficiency: 1, Series: 100, Parallel: 2}
	sum := func() (net, driven float64) {
		l.Vehicle = &v
		for _, s := range walk(t, &duty.Duty{Legs: []duty.Leg{l}}, 5) {
			e := s.value * (s.endS - s.fromS) * 200
			net += e
			driven += math.Max(e, 0)
		}
		return net, driven
	}
	if net, driven := sum(); math.Abs(net) > 1e-9*driven || driven < 1e5 {
		t.Errorf("kinetic energy: %g J left of %g J", net, driven)
	}
	v.DragAreaM2 = 0.6
	want := 0.0
	for k := 1; k < len(l.TimeS); k++ {
		mean := (l.SpeedMps[k] + l.SpeedMps[k-1]) / 2
		want += 0.5 * 1.2 * 0.6 * mean * mean * mean * (l.TimeS[k] - l.TimeS[k-1])
	}
	if net, _ := sum(); math.Abs(net-want) > 1e-9*want {
		t.Errorf("drag: %g J, want %g", net, want)
	}
}

// Road load at steady speed, by hand: m g (c_r cos + sin) + drag, through the
// drive, shared by the cells.
func TestRoadLoadAtSteadySpeed(t *testing.T) {
	v := duty.Vehicle{MassKg: 1000, RotatingMassKg: 50, RollingCoefficient: 0.01, DragAreaM2: 0.5, AirDensityKgPerM3: 1.2, Slope: 0.05,
		DriveEfficiency: 0.9, RegenerationEfficiency: 0.6, AuxiliaryW: 300, Series: 10, Parallel: 2}
	angle := math.Atan(0.05)
	force := 1000*9.80665*(0.01*math.Cos(angle)+math.Sin(angle)) + 0.5*1.2*0.5*100
	if got, want := v.PowerW(10, 10, 1), (force*10/0.9+300)/20; math.Abs(got-want) > 1e-9 {
		t.Errorf("%g W a cell, want %g", got, want)
	}
	if got := v.PowerW(0, 0, 1); got != 15 {
		t.Errorf("standing: %g W, want the auxiliaries' 15", got)
	}
	if got, want := v.PowerW(10, 0, 2), (0.6*(-1050*100/4.0+(1000*9.80665*(0.01*math.Cos(angle)+math.Sin(angle))+0.5*1.2*0.5*25)*5)+300)/20; math.Abs(got-want) > 1e-9 {
		t.Errorf("braking: %g W, want %g", got, want)
	}
}

// Every profile of the list can be run, lasts as long as listed, and is scaled
// by what is listed.
func TestProfilesLastAsListed(t *testing.T) {
	car := &duty.Vehicle{MassKg: 900, AirDensityKgPerM3: 1.2, DriveEfficiency: 1, Series: 1, Parallel: 1}
	for _, info := range duty.Profiles() {
		l := profile(info.Name)
		d := &duty.Duty{}
		switch info.Scale {
		case "peak_power_w":
			l.PeakPowerW = 40
		case "vehicle":
			d.Vehicle = car
		case "current_a or c_rate":
			l.CurrentA = -3
		default:
			t.Errorf("%s is scaled by %q", info.Name, info.Scale)
		}
		l.Repeat = 3
		d.Legs = []duty.Leg{l}
		p, err := duty.Compile(d, 5)
		if err != nil {
			t.Fatal(err)
		}
		if total, exact := p.TotalS(); !exact || total != 3*info.DurationS || info.Source == "" {
			t.Errorf("%s: three passes last %g s (%t), listed %g s; source %q", info.Name, total, exact, info.DurationS, info.Source)
		}
	}
}

// The built-in driving cycle is its speeds as a speed leg.
func TestNEDCProfileIsASpeedLeg(t *testing.T) {
	car := &duty.Vehicle{MassKg: 900, RollingCoefficient: 0.01, DragAreaM2: 0.6, AirDensityKgPerM3: 1.2, DriveEfficiency: 0.9, RegenerationEfficiency: 0.6,
		AuxiliaryW: 300, Series: 10, Parallel: 2}
	l := leg(duty.Speed)
	l.TimeS, l.SpeedMps = duty.NEDC()
	want := walk(t, &duty.Duty{Legs: []duty.Leg{l}, Vehicle: car}, 5)
	p := profile("nedc")
	p.Vehicle = car // its own goes before the duty's
	got := walk(t, &duty.Duty{Legs: []duty.Leg{p}, Vehicle: &duty.Vehicle{MassKg: 1, AirDensityKgPerM3: 1, DriveEfficiency: 1, Series: 1, Parallel: 1}}, 5)
	if len(want) != 1180 || !slices.Equal(got, want) {
		t.Errorf("%d demands, %d as a speed leg", len(got), len(want))
	}
}

// A duration cuts a pass short, or lets its last value flow on: a trace's last
// row, a vehicle's steady last speed.
func TestDurationsCutAndExtend(t *testing.T) {
	car := &duty.Vehicle{MassKg: 900, DragAreaM2: 0.5, AirDensityKgPerM3: 1.2, DriveEfficiency: 1, RegenerationEfficiency: 1, Series: 1, Parallel: 1}
	tr := leg(duty.Trace)
	tr.TimeS, tr.TraceW = []float64{0, 2, 2, 5}, []float64{1, 2, 3, 4} // of two rows at one time the last counts
	sp := leg(duty.Speed)
	sp.TimeS, sp.SpeedMps = []float64{0, 2, 4}, []float64{0, 8, 10}
	inertia := func(from, to float64) float64 {
		mean := (from + to) / 2
		return 900*(to*to-from*from)/4 + 0.5*1.2*0.5*mean*mean*mean
	}
	const w = duty.PowerDemand
	for _, c := range []struct {
		leg       duty.Leg
		durationS float64
		want      []step
	}{
		{tr, nan, []step{{w, 1, 0, 2}, {w, 3, 2, 5}}},
		{tr, 3, []step{{w, 1, 0, 2}, {w, 3, 2, 3}}},
		{tr, 2, []step{{w, 1, 0, 2}}},
		{tr, 9, []step{{w, 1, 0, 2}, {w, 3, 2, 5}, {w, 4, 5, 9}}},
		{sp, nan, []step{{w, inertia(0, 8), 0, 2}, {w, inertia(8, 10), 2, 4}}},
		{sp, 3, []step{{w, inertia(0, 8), 0, 2}, {w, inertia(8, 10), 2, 3}}},
		{sp, 7, []step{{w, inertia(0, 8), 0, 2}, {w, inertia(8, 10), 2, 4}, {w, 0.5 * 1.2 * 0.5 * 1000, 4, 7}}},
	} {
		c.leg.DurationS = c.durationS
		got := walk(t, &duty.Duty{Legs: []duty.Leg{c.leg}, Vehicle: car}, 5)
		same := func(a, b step) bool {
			return a.q == b.q && math.Abs(a.value-b.value) <= 1e-9 && a.fromS == b.fromS && a.endS == b.endS
		}
		if !slices.EqualFunc(got, c.want, same) {
			t.Errorf("%s for %g s: %+v, want %+v", c.leg.Kind, c.durationS, got, c.want)
		}
	}
}

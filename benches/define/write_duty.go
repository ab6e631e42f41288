package define

import (
	"soctrial/plant/duty"
)

// FormatDuty writes d as a duty file; reading it gives d again. A trace that
// came from a file is written inline, so that the duty stands alone.
func FormatDuty(d *duty.Duty) string {
	w := begin(KindDuty, d.Name)
	if d.Vehicle != nil {
		w.section("vehicle")
		w.vehicle(d.Vehicle)
	}
	w.legs(d.Legs, "leg")
	return w.String()
}

func (w *writer) legs(legs []duty.Leg, path string) {
	for i := range legs {
		l := &legs[i]
		w.element(path)
		w.word("kind", string(l.Kind))
		w.word("name", l.ProfileName)
		if l.Kind != duty.Trace { // there the keys are columns
			w.given("current_a", l.CurrentA)
			w.given("power_w", l.PowerW)
		}
		numbersOf := legNumbers(l)
		for _, k := range legKeyOrder() {
			w.given(k, *numbersOf[k])
		}
		w.count("count", l.Count)
		w.count("repeat", l.Repeat)
		w.word("at_limit", string(l.AtLimit))
		for _, c := range []struct {
			key    string
			values []float64
		}{{"time_s", l.TimeS}, {"current_a", l.TraceA}, {"power_w", l.TraceW}, {"speed_mps", l.SpeedMps}} {
			if c.values != nil {
				w.pair(c.key, numbers(c.values))
			}
		}
		if l.Vehicle != nil {
			w.section(path + ".vehicle")
			w.vehicle(l.Vehicle)
		}
		w.legs(l.Legs, path+".leg")
	}
}

func (w *writer) vehicle(v *duty.Vehicle) {
	w.number("mass_kg", v.MassKg)
	w.number("rotating_mass_kg", v.RotatingMassKg)
	w.number("rolling_coefficient", v.RollingCoefficient)
	w.number("drag_area_m2", v.DragAreaM2)
	w.number("air_density_kg_per_m3", v.AirDensityKgPerM3)
	w.number("slope", v.Slope)
	w.number("drive_efficiency", v.DriveEfficiency)
	w.number("regeneration_efficiency", v.RegenerationEfficiency)
	w.number("auxiliary_w", v.AuxiliaryW)
	w.count("series", v.Series)
	w.count("parallel", v.Parallel)
}

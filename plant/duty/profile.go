package duty

import (
	"fmt"
	"math"
	"strings"
)

// ProfileInfo describes a built-in published profile.
type ProfileInfo struct {
	Name      string
	DurationS float64 // one pass
	Scale     string  // the key that gives it its size
	Source    string
}

// Profiles lists the built-in profiles.
//
//   - dst: the Dynamic Stress Test, 20 steps in shares of a peak power. USABC/DOE
//     Electric Vehicle Battery Test Procedures Manual, Rev 2, DOE/ID-10479
//     (1996). The manual counts discharge negative; here it is positive.
//   - nedc: the New European Driving Cycle, four urban parts and one
//     extra-urban, linear within each operation. UN Regulation 83, Annex 4a.
//   - hppc: one pulse of the Hybrid Pulse Power Characterization test: 10 s
//     discharge, 40 s rest, 10 s charge at 0.75 of it. FreedomCAR manual,
//     DOE/ID-11069 (2003).
//   - iso12405-power-pulse: the pulse power profile of ISO 12405, clause 7.3.2:
//     18 s and, at 0.75, 102 s discharge, 40 s rest, 20 s charge at 0.75, 40 s rest.
func Profiles() []ProfileInfo {
	return []ProfileInfo{
		{"dst", 360, "peak_power_w", "USABC/DOE Electric Vehicle Battery Test Procedures Manual, Rev 2, DOE/ID-10479 (1996)"},
		{"nedc", 1180, "vehicle", "UN Regulation 83, Annex 4a"},
		{"hppc", 60, "current_a or c_rate", "FreedomCAR Battery Test Manual, DOE/ID-11069 (2003)"},
		{"iso12405-power-pulse", 220, "current_a or c_rate", "ISO 12405 series, clause 7.3.2"},
	}
}

// span is one step of a profile that is a share of something.
type span struct{ durationS, share float64 }

// dstSteps are the 20 steps of the Dynamic Stress Test, discharge positive.
func dstSteps() []span {
	return []span{{16, 0}, {28, 0.125}, {12, 0.25}, {8, -0.125}, {16, 0}, {24, 0.125}, {12, 0.25}, {8, -0.125}, {16, 0}, {24, 0.125},
		{12, 0.25}, {8, -0.125}, {16, 0}, {36, 0.125}, {8, 1}, {24, 0.625}, {8, -0.25}, {32, 0.25}, {8, -0.5}, {44, 0}}
}

func pulseSteps(name string) []span {
	if name == "hppc" {
		return []span{{10, 1}, {40, 0}, {10, -0.75}}
	}
	return []span{{18, 1}, {102, 0.75}, {40, 0}, {20, -0.75}, {40, 0}}
}

// ramp is one operation of a driving cycle: to a speed, linearly.
type ramp struct{ toKmh, durationS float64 }

// nedcOperations are the regulation's operations: an elementary urban cycle of
// 25, run four times, and an extra-urban one of 21.
func nedcOperations() []ramp {
	urban := []ramp{{0, 11}, {15, 4}, {15, 8}, {10, 2}, {0, 3}, {0, 21}, {15, 5}, {15, 2}, {32, 5}, {32, 24}, {10, 8}, {0, 3}, {0, 21},
		{15, 5}, {15, 2}, {35, 9}, {35, 2}, {50, 8}, {50, 12}, {35, 8}, {35, 13}, {32, 2}, {10, 7}, {0, 3}, {0, 7}}
	extra := []ramp{{0, 20}, {15, 5}, {15, 2}, {35, 9}, {35, 2}, {50, 8}, {50, 2}, {70, 13}, {70, 50}, {50, 8}, {50, 69}, {70, 13},
		{70, 50}, {100, 35}, {100, 30}, {120, 20}, {120, 10}, {80, 16}, {50, 8}, {0, 10}, {0, 20}}
	var all []ramp
	for range 4 {
		all = append(all, urban...)
	}
	return append(all, extra...)
}

// NEDC returns the New European Driving Cycle at each whole second, 1,181
// speeds from standstill to standstill.
func NEDC() (timeS, speedMps []float64) {
	v, at := 0.0, 0
	timeS, speedMps = append(timeS, 0), append(speedMps, 0)
	for _, r := range nedcOperations() {
		n := int(r.durationS)
		for k := 1; k <= n; k++ {
			timeS = append(timeS, float64(at+k))
			speedMps = append(speedMps, (v+(r.toKmh-v)*float64(k)/r.durationS)/3.6)
		}
		v, at = r.toKmh, at+n
	}
	return timeS, speedMps
}

func (d *Duty) validateProfile(l *Leg, at string) error {
	var names []string
	for _, p := range Profiles() {
		names = append(names, p.Name)
	}
	switch l.ProfileName {
	case "dst":
		if !given(l.PeakPowerW) {
			return bad(at+".peak_power_w", "nothing", "the peak power in W")
		}
		if given(l.CurrentA) || given(l.CRate) {
			return bad(at+".current_a", "a current", "peak_power_w alone with this profile")
		}
		return nil
	case "nedc":
		if given(l.CurrentA) || given(l.CRate) || given(l.PeakPowerW) {
			return bad(at+".peak_power_w", "a scale", "a [vehicle] alone with this profile")
		}
		return d.needsVehicle(l, at)
	case "hppc", "iso12405-power-pulse":
		if given(l.PeakPowerW) {
			return bad(at+".peak_power_w", l.PeakPowerW, "current_a or c_rate with this profile")
		}
		return l.oneCurrent(at)
	}
	return bad(at+".name", fmt.Sprintf("%q", l.ProfileName), "one of "+strings.Join(names, ", "))
}

const gravityMps2 = 9.80665 // standard acceleration of free fall, CGPM 1901

// PowerW returns the power of one cell of the pack that takes the vehicle from
// one speed to the other in dtS seconds, W, positive on discharge: kinetic
// energy and resistance at the mean speed, through the drive, and auxiliaries.
func (v *Vehicle) PowerW(fromMps, toMps, dtS float64) float64 {
	angle := math.Atan(v.Slope)
	mean := (fromMps + toMps) / 2
	force := v.MassKg*gravityMps2*(v.RollingCoefficient*math.Cos(angle)+math.Sin(angle)) +
		v.AirDensityKgPerM3*v.DragAreaM2*mean*mean/2
	wheel := (v.MassKg+v.RotatingMassKg)*(toMps*toMps-fromMps*fromMps)/(2*dtS) + force*mean
	if wheel >= 0 {
		wheel /= v.DriveEfficiency
	} else {
		wheel *= v.RegenerationEfficiency
	}
	return (wheel + v.AuxiliaryW) / float64(v.Series*v.Parallel)
}

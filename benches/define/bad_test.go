package define

import (
	"strings"
	"testing"
)

// everyLeg has a leg of every kind, in tables, arrays of tables and inline.
const everyLeg = `format = "soctrial/duty/1"
name = "every kind"
[vehicle]
mass_kg = 900
rolling_coefficient = 0.012
drag_area_m2 = 0.8
drive_efficiency = 0.85
regeneration_efficiency = 0.6
series = 96
[[leg]]
kind = "pulses"
c_rate = 1.0
pulse_s = 10.0
rest_s = 40.0
count = 9
return_ratio = 0.75
soc_step = 0.1
step_c_rate = 0.33
step_rest_s = 3600.0
[[leg]]
kind = "group"
repeat = 3
until_soc = 0.2
[[leg.leg]]
kind = "speed"
time_s = [0.0, 5.0, 9.0]
speed_mps = [
  0.0,
  4.0, # the gate
  0.0,
]
[[leg.leg]]
kind = "profile"
name = "dst"
peak_power_w = 40.0
at_limit = "cut"
[[leg.leg]]
kind = "group"
leg = [
  { kind = "rest", duration_s = 60 },
  { kind = "power", power_w = 12.5, duration_s = 60 },
]
[[leg]]
kind = "hold-voltage"
voltage_v = 4.2
until_c_rate = 0.05
[[leg]]
kind = "profile"
name = "nedc"
[leg.vehicle]
mass_kg = 500
rolling_coefficient = 0.01
drag_area_m2 = 0.5
[[leg]]
kind = "trace"
time_s = [0, 1]
power_w = [3, 0]
[[leg]]
kind = "current"
current_a = -2
duration_s = 10
`

// Every error names file, line and column, key, what was found and what is
// allowed. An edit spoils a text that is otherwise good; the message is whole.
func TestBadInput(t *testing.T) {
	texts := map[string]string{"cell": cellText, "duty": dutyText, "legs": everyLeg, "sensors": sensorsText, "estimator": estimatorText,
		"plan": planText, "map": mapText}
	for _, c := range []struct{ kind, old, replacement, want string }{
		{"cell", "4.8", "\"4.8\"",
			`f.toml:3:1: capacity_ah: found "4.8", allowed is a number`},
		{"cell", "4.8", "inf",
			`f.toml:3:1: capacity_ah: found inf, allowed is a finite number`},
		{"cell", "voltage_min_v = 2.6", "voltage_min_v = nan",
			`f.toml:5:1: voltage_min_v: found nan, allowed is a finite number`},
		{"cell", "capacity_ah = 4.8", "capacity_mah = 4800",
			`f.toml:3:1: capacity_mah: found an unknown key "capacity_mah", allowed is "capacity_ah": the nameplate capacity in Ah, > 0`},
		{"cell", "capacity_ah = 4.8", "capacity = 4.8",
			`f.toml:3:1: capacity: found an unknown key "capacity", allowed is "capacity_ah": the nameplate capacity in Ah, > 0`},
		{"cell", "capacity_ah = 4.8", "capacty_ah = 4.8",
			`f.toml:3:1: capacty_ah: found an unknown key "capacty_ah", allowed is "capacity_ah": the nameplate capacity in Ah, > 0`},
		{"cell", "voltage_min_v = 2.6", "#",
			`f.toml: voltage_min_v: found nothing, allowed is the lower voltage limit in V`},
		{"cell", "capacity_ah = 4.8", "#",
			`f.toml: capacity_ah: found nothing, allowed is the nameplate capacity in Ah, > 0`},
		{"cell", "", "colour = 1\ncoulombic_eficiency = 2\n[origin]\ncolour = 1\n",
			"f.toml:10:1: colour: found an unknown key \"colour\", allowed is one of format, name, capacity_ah, coulombic_efficiency, voltage_min_v, voltage_max_v, temperature_ref_c, interpolation, ocv, r0, branch, hysteresis, thermal, uncertainty, origin (nearest: format)\n" +
				"f.toml:11:1: coulombic_eficiency: found an unknown key \"coulombic_eficiency\", allowed is one of format, name, capacity_ah, coulombic_efficiency, voltage_min_v, voltage_max_v, temperature_ref_c, interpolation, ocv, r0, branch, hysteresis, thermal, uncertainty, origin (nearest: coulombic_efficiency)"},
		{"cell", "", "temperature_ref_k = 298.15",
			`f.toml:10:1: temperature_ref_k: found an unknown key "temperature_ref_k", allowed is "temperature_ref_c": the unit ends the name (nearest: temperature_ref_c)`},
		{"cell", "0.0, 0.1, 0.5, 1.0", "0.0, 0.5, 0.1, 1.0",
			`f.toml:7:26: ocv.soc[2]: found 0.1, allowed is above the one before it (0.5): the axis ascends`},
		{"cell", "0.0, 0.1, 0.5, 1.0", "0.0, 0.1, 0.5, 1.1",
			`f.toml:7:31: ocv.soc[3]: found 1.1, allowed is SOC from 0 to 1`},
		{"cell", "2.9, 3.42", "3.42",
			`f.toml:7:37: ocv.voltage_v: found 3 values, allowed is 4, one a SOC point`},
		{"cell", "0.062", "-0.062",
			`f.toml:8:63: r0.ohm[0][0]: found -0.062, allowed is a finite number ≥ 0`},
		{"cell", "[[0.062, 0.050], [0.031, 0.024]]", "[0.062, 0.050]",
			`f.toml:8:55: r0.ohm: found a plain list, allowed is a row a temperature, since both soc and temperature_c are given`},
		{"cell", "[[0.062, 0.050], [0.031, 0.024]]", "[[0.062, 0.050],\n   [0.031]]",
			`f.toml:9:5: r0.ohm[1]: found 1 values, allowed is 2, one a SOC point`},
		{"cell", "[[0.062, 0.050], [0.031, 0.024]]", "[[0.062, 0.050], 0.031]",
			`f.toml:8:55: r0.ohm: found numbers and rows together, allowed is either numbers or a row a temperature`},
		{"cell", "[[0.062, 0.050], [0.031, 0.024]]", "[[0.062, 0.050], [true, 0.024]]",
			`f.toml:8:79: r0.ohm[1][0]: found true, allowed is a number`},
		{"cell", "temperature_c = [0.0, 25.0], ", "",
			`f.toml:8:26: r0.ohm: found 2 rows, allowed is rows only with both soc and temperature_c beside them`},
		{"cell", "temperature_c = [0.0, 25.0]", "temperature_c = [25.0, 0.0]",
			`f.toml:8:49: r0.temperature_c[1]: found 0.0, allowed is above the one before it (25): the axis ascends`},
		{"cell", ", tau_s = 18.0", "",
			`f.toml:9:11: branch[0].tau_s: found nothing, allowed is a time constant in s, or farad in its place`},
		{"cell", "tau_s = 18.0", "tau_min = 0.3",
			`f.toml:9:26: branch[0].tau_min: found an unknown key "tau_min", allowed is "tau_s": a time constant in s, or farad in its place`},
		{"cell", "tau_s = 18.0", "tau_s = 0",
			`f.toml:9:26: branch[0].tau_s: found 0, allowed is a finite number > 0`},
		{"cell", "tau_s = 18.0", "tau_s = 18.0, farad = 1600.0",
			`f.toml:9:40: branch[0].farad: found both tau_s and farad, allowed is one of the two`},
		{"cell", "ohm = 0.011", "soc = [0, 2], ohm = 0.011",
			`f.toml:9:23: branch[0].soc[1]: found 2.0, allowed is SOC from 0 to 1`},
		{"cell", "ohm = 0.011", "ohm = []",
			`f.toml:9:13: branch[0].ohm: found a list of 0, allowed is a number, or soc or temperature_c beside the list`},
		{"cell", "ohm = 0.011", "ohm = { at = 0.011 }",
			`f.toml:9:13: branch[0].ohm: found a table, allowed is a number`},
		{"cell", "voltage_v = [2.9, 3.42, 3.71, 4.18]", "voltage_v = 3.7",
			`f.toml:7:37: ocv.voltage_v: found 3.7, allowed is a list, a voltage for each SOC point`},
		{"cell", "soc = [0.0, 0.1, 0.5, 1.0], voltage_v = [2.9, 3.42, 3.71, 4.18]", "voltage_v = [2.9, 3.42, 3.71, 4.18]",
			"f.toml:7:1: ocv.soc: found nothing, allowed is the axis of voltage_v: at least 2 ascending numbers from 0 to 1\n" +
				"f.toml:7:9: ocv.voltage_v: found a list of 4, allowed is a number, or soc or temperature_c beside the list"},
		{"cell", "voltage_v = [2.9, 3.42, 3.71, 4.18]", "voltage_v = [2.9, 3.42, 3.71, 4.18], interpolation = \"spline\"",
			`f.toml:7:74: ocv.interpolation: found "spline", allowed is one of "pchip", "linear"`},
		{"cell", "ocv = ", "x = ",
			"f.toml: ocv: found nothing, allowed is a table with soc and voltage_v\n" +
				"f.toml:7:1: x: found an unknown key \"x\", allowed is one of format, name, capacity_ah, coulombic_efficiency, voltage_min_v, voltage_max_v, temperature_ref_c, interpolation, ocv, r0, branch, hysteresis, thermal, uncertainty, origin (nearest: r0)"},
		{"cell", "branch = [{", "branch = [3, {",
			`f.toml:9:11: branch[0]: found 3, allowed is a table`},
		{"cell", "name = \"quay-sweeper-21\"", "name = \"\"",
			`f.toml:2:1: name: found "", allowed is a text that is not empty, or no name: then it is the file's stem`},
		{"cell", "name = \"quay-sweeper-21\"", "name = \"a.sha256\"",
			`f.toml:2:1: name: found "a.sha256", allowed is a name that does not end in .sha256`},
		{"cell", "", "[hysteresis]\nsoc = [0, 1]\nhalf_gap_v = [0.01, -0.01]\nrate = 3",
			`f.toml:12:21: hysteresis.half_gap_v[1]: found -0.01, allowed is a finite number ≥ 0`},
		{"cell", "", "[hysteresis]\nhalf_gap_v = 0.01",
			`f.toml:10:2: hysteresis.rate: found nothing, allowed is gamma, a finite number ≥ 0`},
		{"cell", "", "[thermal]\nheat_capacity_j_per_k = 70\nconductance_w_per_c = 0.1",
			`f.toml:12:1: thermal.conductance_w_per_c: found an unknown key "conductance_w_per_c", allowed is "conductance_w_per_k": a finite number ≥ 0`},
		{"cell", "", "[uncertainty]\nnames = [\"a\"]\ncorrelation = [[2]]",
			`f.toml:12:17: uncertainty.correlation[0][0]: found 2, allowed is a symmetric matrix of -1 to 1 with ones on the diagonal`},
		{"cell", "", "[uncertainty]\nr0 = { soc = [0, 1], ohm = [0.1, -0.1] }\nbranch = [{ omh = 0.1 }]",
			"f.toml:11:34: uncertainty.r0.ohm[1]: found -0.1, allowed is a standard error: a finite number ≥ 0, or nan where the record cannot say\n" +
				"f.toml:12:13: uncertainty.branch[0].omh: found an unknown key \"omh\", allowed is one of soc, temperature_c, interpolation, ohm, tau_s, farad (nearest: ohm)"},
		{"cell", "soctrial/cell/1", "soctrial/cell/2",
			`f.toml:1:1: format: found "soctrial/cell/2", allowed is "soctrial/cell/1"`},
		{"cell", "soctrial/cell/1", "soctrial/duty/1",
			`f.toml:1:1: format: found "soctrial/duty/1", allowed is "soctrial/cell/1"`},
		{"cell", "format = \"soctrial/cell/1\"", "format = 1",
			`f.toml:1:1: format: found 1, allowed is "soctrial/cell/1"`},
		{"cell", "format = \"soctrial/cell/1\"", "#",
			`f.toml: format: found nothing, allowed is "soctrial/cell/1"`},
		{"cell", "capacity_ah = 4.8", "capacity_ah = ",
			`f.toml:3:15: found text that is not TOML (unexpected character U+000A at start of value), allowed is TOML 1.0`},
		{"cell", "capacity_ah = 4.8", "capacity_ah = 4.8\ncapacity_ah = 4.9",
			`f.toml:4:1: capacity_ah: found text that is not TOML (key capacity_ah is already defined), allowed is TOML 1.0`},
		{"cell", "\"quay-sweeper-21\"", "\"quay\xff\"",
			`f.toml:2:13: found bytes that are not UTF-8, allowed is UTF-8 text`},
		{"duty", "\"rest\"", "\"pause\"",
			`f.toml:2:67: leg[1].kind: found "pause", allowed is one of "rest", "current", "power", "hold-voltage", "pulses", "trace", "speed", "profile", "group"`},
		{"duty", "kind = \"rest\",", "kind = \"rest\", power_w = 3.0,",
			`f.toml:2:82: leg[1].power_w: found 3, allowed is no such key in a leg of kind "rest" (it belongs to power)`},
		{"duty", "kind = \"rest\",", "",
			`f.toml:2:65: leg[1].kind: found nothing, allowed is one of "rest", "current", "power", "hold-voltage", "pulses", "trace", "speed", "profile", "group"`},
		{"duty", "kind = \"rest\", duration_s", "kind = \"rest\", duration_min",
			`f.toml:2:82: leg[1].duration_min: found an unknown key "duration_min", allowed is "duration_s": the unit ends the name (nearest: duration_s)`},
		{"duty", "c_rate = 0.5, duration_s = 1800.0", "c_rate = 0.5",
			`f.toml:2:8: leg[0].duration_s: found nothing, allowed is a duration, or a stop (until_…)`},
		{"duty", "c_rate = 0.5", "c_rate = 0.5, current_a = 2",
			`f.toml:2:28: leg[0].c_rate: found both current_a and c_rate, allowed is one of the two`},
		{"duty", "c_rate = 0.5", "current_a = [1, 2]",
			`f.toml:2:28: leg[0].current_a: found a list of 2, allowed is a number`},
		{"duty", "1800.0", "nan",
			`f.toml:2:42: leg[0].duration_s: found nan, allowed is a finite number`},
		{"duty", "1800.0", "-1",
			`f.toml:2:42: leg[0].duration_s: found -1, allowed is a finite number > 0`},
		{"duty", "[4.0, -2.0, 0.0]", "[4.0, -2.0]",
			`f.toml:3:54: leg[2].current_a: found 2 values, allowed is as many as time_s (3)`},
		{"duty", "[0.0, 10.0, 25.0]", "[0.0, 10.0, 5.0]",
			`f.toml:3:47: leg[2].time_s[2]: found 5, allowed is at least the one before it (10): time does not go backward`},
		{"duty", "[0.0, 10.0, 25.0]", "[1.0, 10.0, 25.0]",
			`f.toml:3:36: leg[2].time_s[0]: found 1, allowed is 0: times start there`},
		{"duty", "until_soc = 0.15", "until_soc = 15",
			`f.toml:3:97: leg[2].until_soc: found 15, allowed is 0 to 1`},
		{"duty", "repeat = 40", "repeat = 0",
			`f.toml:3:84: leg[2].repeat: found 0, allowed is a whole number ≥ 1`},
		{"duty", "repeat = 40", "repeat = 2.5",
			`f.toml:3:84: leg[2].repeat: found 2.5, allowed is a whole number ≥ 1`},
		{"duty", "until_soc = 0.15", "at_limit = \"stop\"",
			`f.toml:3:97: leg[2].at_limit: found "stop", allowed is one of "cut", "end"`},
		{"duty", "time_s = [0.0, 10.0, 25.0], current_a = [4.0, -2.0, 0.0]", "file = \"us06.csv\"",
			`f.toml:3:26: leg[2].file: found "us06.csv", allowed is columns inline: no file can be read from here`},
		{"duty", "time_s = [0.0, 10.0, 25.0]", "file = \"us06.csv\"",
			`f.toml:3:45: leg[2].current_a: found columns beside a file, allowed is either inline columns or a file`},
		{"duty", "time_s = [0.0, 10.0, 25.0]", "map = \"m.toml\", time_s = [0.0, 10.0, 25.0]",
			`f.toml:3:26: leg[2].map: found "m.toml", allowed is a map only beside a file`},
		{"duty", "leg = [", "legs = [",
			`f.toml:2:1: legs: found an unknown key "legs", allowed is "leg": a list of legs`},
		{"legs", "  4.0,", "  -4.0,",
			`f.toml:29:3: leg[1].leg[0].speed_mps[1]: found -4, allowed is a finite number ≥ 0`},
		{"legs", "power_w = 12.5", "power_kw = 0.0125",
			`f.toml:41:21: leg[1].leg[2].leg[1].power_kw: found an unknown key "power_kw", allowed is "power_w": the unit ends the name (nearest: power_w)`},
		{"legs", "power_w = 12.5", "powerr_w = 12.5",
			`f.toml:41:21: leg[1].leg[2].leg[1].powerr_w: found an unknown key "powerr_w", allowed is one of kind, duration_s, until_soc, until_voltage_v, until_current_a, until_c_rate, c_rate, voltage_v, pulse_s, rest_s, return_ratio, soc_step, step_c_rate, step_rest_s, peak_power_w, repeat, count, at_limit, name, time_s, speed_mps, current_a, power_w, vehicle, file, map, leg (nearest: power_w)`},
		{"legs", "mass_kg = 500", "mass_t = 0.5",
			`f.toml:51:1: leg[3].vehicle.mass_t: found an unknown key "mass_t", allowed is "mass_kg": a number of kg > 0`},
		{"legs", "drive_efficiency = 0.85", "drive_efficiency = 1.2",
			`f.toml:7:1: vehicle.drive_efficiency: found 1.2, allowed is above 0, at most 1`},
		{"legs", "series = 96", "series = 0",
			`f.toml:9:1: vehicle.series: found 0, allowed is a whole number ≥ 1`},
		{"legs", "\"dst\"", "\"hppc2\"",
			`f.toml:34:1: leg[1].leg[1].name: found "hppc2", allowed is one of dst, nedc, hppc, iso12405-power-pulse`},
		{"legs", "count = 9", "count = \"nine\"",
			`f.toml:15:1: leg[0].count: found "nine", allowed is a whole number ≥ 1`},
		{"legs", "[leg.vehicle]", "[leg.car]",
			`f.toml:50:6: leg[3].car: found an unknown key "car", allowed is one of kind, duration_s, until_soc, until_voltage_v, until_current_a, until_c_rate, c_rate, voltage_v, pulse_s, rest_s, return_ratio, soc_step, step_c_rate, step_rest_s, peak_power_w, repeat, count, at_limit, name, time_s, speed_mps, current_a, power_w, vehicle, file, map, leg (nearest: map)`},
		{"sensors", "offset_a = 0.0", "ofset_a = 0.0",
			`f.toml:3:29: current.ofset_a: found an unknown key "ofset_a", allowed is one of offset_a, gain_error, noise_a, walk_a_per_sqrt_s, offset_a_per_k, quantum_a, range_a, delay_s, dropout_share, dropout_s, stuck_share, stuck_s, every, reading (nearest: offset_a)`},
		{"sensors", "offset_a = 0.0", "offset_ma = 0.0",
			`f.toml:3:29: current.offset_ma: found an unknown key "offset_ma", allowed is "offset_a": the unit ends the name (nearest: offset_a)`},
		{"sensors", "sample_period_s", "sample_period",
			`f.toml:2:1: sample_period: found an unknown key "sample_period", allowed is "sample_period_s": a number of seconds > 0`},
		{"sensors", "sample_period_s = 1.0", "sample_period_s = 0",
			`f.toml:2:1: sample_period_s: found 0, allowed is > 0 and finite`},
		{"sensors", "noise_a = 0.02", "noise_a = -0.02",
			`f.toml:3:13: current.noise_a: found -0.02, allowed is ≥ 0 and finite`},
		{"sensors", "noise_v = 0.002", "noise_a = 0.002",
			`f.toml:4:13: voltage.noise_a: found an unknown key "noise_a", allowed is "noise_v": the unit ends the name (nearest: noise_v)`},
		{"sensors", "noise_a = 0.02", "reading = \"mean\"",
			`f.toml:3:13: current.reading: found "mean", allowed is one of "instant", "interval-mean"`},
		{"sensors", "noise_v = 0.002", "reading = \"instant\"",
			`f.toml:4:13: voltage.reading: found an unknown key "reading", allowed is one of offset_v, gain_error, noise_v, walk_v_per_sqrt_s, offset_v_per_k, quantum_v, range_v, delay_s, dropout_share, dropout_s, stuck_share, stuck_s, every (nearest: range_v)`},
		{"sensors", "noise_v = 0.002", "every = 0",
			`f.toml:4:13: voltage.every: found 0, allowed is a whole number ≥ 1`},
		{"sensors", "noise_v = 0.002", "dropout_share = 0.1",
			`f.toml:4:1: voltage.dropout_s: found nothing, allowed is > 0 where dropout_share is given`},
		{"sensors", "voltage = {", "voltage = 3 #",
			`f.toml:4:1: voltage: found 3, allowed is a table`},
		{"estimator", "\"ekf\"", "\"ukf9\"",
			`f.toml:3:1: kind: found "ukf9", allowed is one of "ekf", "coulomb", "rest-ocv"`},
		{"estimator", "kind = \"ekf\"", "#",
			`f.toml: kind: found nothing, allowed is one of "ekf", "coulomb", "rest-ocv"`},
		{"estimator", "0.004", "0.0",
			`f.toml:7:17: measurement.voltage_std_v: found 0.0, allowed is a finite number > 0`},
		{"estimator", "voltage_std_v = 0.004, ", "",
			`f.toml:7:1: measurement.voltage_std_v: found nothing, allowed is a finite number > 0`},
		{"estimator", "measurement = { voltage_std_v = 0.004, current_std_a = 0.02 }", "#",
			`f.toml: measurement.voltage_std_v: found nothing, allowed is a finite number > 0`},
		{"estimator", "branches = 2", "branches = -1",
			`f.toml:4:1: branches: found -1, allowed is a whole number ≥ 0`},
		{"estimator", "branches = 2", "cell = \"own.toml\"",
			`f.toml:4:1: cell: found "own.toml", allowed is no cell of its own: no file can be read from here`},
		{"estimator", "soc_std = 0.1", "soc_std = -0.1",
			`f.toml:5:11: start.soc_std: found -0.1, allowed is a finite number ≥ 0`},
		{"estimator", "process = {", "proces = {",
			`f.toml:6:1: proces: found an unknown key "proces", allowed is one of format, name, kind, cell, branches, start, process, measurement (nearest: process)`},
		{"estimator", "kind = \"ekf\"\nbranches = 2", "kind = \"coulomb\"",
			"f.toml:4:26: start.branch_std_v: found an unknown key \"branch_std_v\", allowed is only soc_std\n" +
				"f.toml:5:1: process: found an unknown key \"process\", allowed is one of format, name, kind, cell, start, measurement (nearest: cell)\n" +
				"f.toml:6:17: measurement.voltage_std_v: found an unknown key \"voltage_std_v\", allowed is only current_std_a"},
		{"estimator", "kind = \"ekf\"", "kind = \"rest-ocv\"",
			"f.toml: rest.current_below_a: found nothing, allowed is a finite number > 0\n" +
				"f.toml: rest.after_s: found nothing, allowed is a finite number > 0\n" +
				"f.toml:4:1: branches: found an unknown key \"branches\", allowed is one of format, name, kind, cell, start, measurement, rest (nearest: name)\n" +
				"f.toml:5:26: start.branch_std_v: found an unknown key \"branch_std_v\", allowed is only soc_std\n" +
				"f.toml:6:1: process: found an unknown key \"process\", allowed is one of format, name, kind, cell, start, measurement, rest (nearest: rest)"},
		{"plan", "current_offset_a", "current_ofset_a",
			`f.toml:9:11: vary[0].column: found "current_ofset_a", allowed is a column of a scenario set (the nearest is current_offset_a) or a name that begins with label_`},
		{"plan", "current_offset_a", "seed",
			`f.toml:9:11: vary[0].column: found "seed", allowed is a column that is not identity; cells, duties, sensors and seed of the plan set those`},
		{"plan", "\"sobol\"", "\"halton\"",
			`f.toml:7:1: draw: found "halton", allowed is one of "grid", "sobol", "latin-hypercube", "list"`},
		{"plan", "cells = [\"quay-sweeper-21.toml\"]", "",
			`f.toml: cells: found nothing, allowed is a list of at least one file`},
		{"plan", "[\"pack.toml\"]", "[]",
			`f.toml:6:1: sensors: found an empty list, allowed is a list of at least one file`},
		{"plan", "[\"pack.toml\"]", "[\"pack.toml\", 3]",
			`f.toml:6:25: sensors[1]: found 3, allowed is a text in quotes`},
		{"plan", "seed = 7", "seed = -7",
			`f.toml:3:1: seed: found -7, allowed is a whole number ≥ 0, in quotes above 9223372036854775807`},
		{"plan", "seed = 7", "seed = 18446744073709551615",
			`f.toml:3:8: found text that is not TOML (decimal number is too large to fit in a 64-bit signed integer), allowed is whole numbers up to 9223372036854775807; a larger seed stands in quotes`},
		{"plan", "seed = 7", "seed = \"many\"",
			`f.toml:3:1: seed: found "many", allowed is a whole number ≥ 0, in quotes above 9223372036854775807`},
		{"plan", "count = 256", "",
			`f.toml: count: found nothing, allowed is how many draws each cell × duty × sensors gets, a whole number ≥ 1`},
		{"plan", "between = [-0.1, 0.1]", "between = [0.1, -0.1]",
			`f.toml:9:40: vary[0].between: found [0.1 -0.1], allowed is two finite numbers, the lower first`},
		{"plan", "between = [-0.1, 0.1]", "between = [0.1]",
			`f.toml:9:40: vary[0].between: found a list of 1, allowed is two numbers, the lower first`},
		{"plan", "between = [-0.1, 0.1]", "beween = [-0.1, 0.1]",
			`f.toml:9:40: vary[0].beween: found an unknown key "beween", allowed is one of column, min, max, values, between, steps, normal, log_normal, triangular (nearest: between)`},
		{"plan", "between = [-0.1, 0.1]", "between = [-0.1, 0.1], values = [1]",
			`f.toml:9:9: vary[0]: found 2 of them, allowed is exactly one of values, between, normal, log_normal and triangular`},
		{"plan", "mean = 0.0, std = 0.1", "mean = 0.0, std = -0.1",
			`f.toml:10:62: vary[2].normal.std: found -0.1, allowed is a finite number ≥ 0`},
		{"plan", "mean = 0.0, std = 0.1", "mean = 0.0",
			`f.toml:10:39: vary[2].normal.std: found nothing, allowed is a finite number ≥ 0`},
		{"plan", "values = [1.0, 0.9, 0.8]", "values = [1.0, 0.9, \"low\"]",
			`f.toml:9:114: vary[1].values[2]: found "low", allowed is a number`},
		{"plan", "values = [1.0, 0.9, 0.8]", "values = [1.0, 0.9, -0.8]",
			`f.toml:9:114: vary[1].values[2]: found -0.8, allowed is a number > 0, which column capacity_scale holds`},
		{"plan", "at_most = 0.05", "at_most = -0.05",
			`f.toml:11:40: limit[0].at_most: found -0.05, allowed is a finite number ≥ 0: a metric's size is judged`},
		{"plan", "share = 0.95", "share = 95",
			`f.toml:11:56: limit[0].share: found 95.0, allowed is above 0, at most 1`},
		{"plan", "metric = \"settled_max_abs\", ", "",
			`f.toml:11:10: limit[0].metric: found nothing, allowed is the name of a metric`},
		{"plan", "", "[score]\nsettle_after = 60",
			`f.toml:13:1: score.settle_after: found an unknown key "settle_after", allowed is "settle_after_s": the unit ends the name (nearest: settle_after_s)`},
		{"plan", "", "[score]\nlow_soc = 1.2",
			`f.toml:13:1: score.low_soc: found 1.2, allowed is a number in [0, 1]`},
		{"map", "\"mA\"", "\"kA\"",
			`f.toml:10:1: current.unit: found "kA", allowed is one of "A", "mA"`},
		{"map", "\";\"", "\"::\"",
			`f.toml:3:1: delimiter: found "::", allowed is one character that parts values, e.g. ";" or "\t"`},
		{"map", "\";\"", "\",\"",
			`f.toml:3:1: delimiter: found ",", allowed is another character than the decimal mark`},
		{"map", "column = 4", "column = 0",
			`f.toml:9:1: current.column: found 0, allowed is a heading in quotes or a position from 1`},
		{"map", "column = 4", "#",
			`f.toml:8:2: current.column: found nothing, allowed is a heading in quotes or a position from 1`},
		{"map", "charge_positive = true", "charge_positive = \"yes\"",
			`f.toml:11:1: current.charge_positive: found "yes", allowed is true or false`},
		{"map", "column = \"U\"", "charge_positive = true\ncolumn = \"U\"",
			`f.toml:13:1: voltage.charge_positive: found an unknown key "charge_positive", allowed is one of column, unit (nearest: column)`},
		{"map", "skip_rows = 2", "skip_rows = -1",
			`f.toml:2:1: skip_rows: found -1, allowed is a whole number ≥ 0`},
		{"map", "[voltage]", "[volts]",
			`f.toml:12:2: volts: found an unknown key "volts", allowed is one of format, name, skip_rows, delimiter, decimal, time, current, voltage, temperature, soc, charge (nearest: voltage)`},
		{"map", "decimal = \",\"", "decimal = \";\"",
			`f.toml:4:1: decimal: found ";", allowed is one of ".", ","`},
		{"duty", "1800.0", "2e9999",
			`f.toml:2:55: found text that is not TOML (unable to parse float: strconv.ParseFloat: parsing "2e9999": value out of range), allowed is TOML 1.0`},
		{"plan", "draw = \"sobol\"", "draw = \"grid\"",
			`f.toml:9:9: vary[0].steps: found nothing, allowed is a whole number in [2, 10000000]`},
		{"map", "4", "99999999999",
			`f.toml:9:1: current.column: found 99999999999, allowed is a heading in quotes or a position from 1`},
		{"legs", "series = 96", "series = 99999999999",
			`f.toml:9:1: vehicle.series: found 99999999999, allowed is a whole number from 1 to 2147483647`},
	} {
		good := texts[c.kind]
		if strings.Count(good, c.old) < 1 {
			t.Errorf("%q is not in %s", c.old, c.kind)
		}
		bad := good + c.replacement
		if c.old != "" {
			bad = strings.Replace(good, c.old, c.replacement, 1)
		}
		err := readKind(c.kind, bad)
		if err == nil {
			t.Errorf("%s with %q for %q: accepted, want\n  %s", c.kind, c.replacement, c.old, c.want)
		} else if err.Error() != c.want {
			t.Errorf("%s with %q for %q:\n  %v\nwant\n  %s", c.kind, c.replacement, c.old, err, c.want)
		}
	}
}

func readKind(kind, text string) error {
	var err error
	switch kind {
	case "cell":
		_, err = Cell("f.toml", []byte(text))
	case "duty", "legs":
		_, err = Duty("f.toml", []byte(text), Openers{})
	case "sensors":
		_, err = Sensors("f.toml", []byte(text))
	case "estimator":
		_, err = Estimator("f.toml", []byte(text), Openers{})
	case "plan":
		_, err = Plan("f.toml", []byte(text))
	case "map":
		_, err = Map("f.toml", []byte(text))
	}
	return err
}

func TestGoodTextsAreRead(t *testing.T) {
	for kind, text := range map[string]string{"cell": cellText, "duty": dutyText, "legs": everyLeg, "sensors": sensorsText,
		"estimator": estimatorText, "plan": planText, "map": mapText} {
		for how, text := range map[string]string{"as it is": text, "after a byte order mark": byteOrderMark + text,
			"with lines of two ends": strings.ReplaceAll(text, "\n", "\r\n")} {
			if err := readKind(kind, text); err != nil {
				t.Errorf("%s %s: %v", kind, how, err)
			}
		}
	}
}

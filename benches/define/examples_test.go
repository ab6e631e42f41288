package define

import (
	"math"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"soctrial/benches/scenario"
	"soctrial/estimator"
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
	"soctrial/plant/record"
)

// The smallest useful example of each kind, as the design gives them.
const (
	cellText = `format = "soctrial/cell/1"
name = "quay-sweeper-21"
capacity_ah = 4.8
coulombic_efficiency = 0.9985
voltage_min_v = 2.6
voltage_max_v = 4.2
ocv = { soc = [0.0, 0.1, 0.5, 1.0], voltage_v = [2.9, 3.42, 3.71, 4.18] }
r0 = { soc = [0.0, 1.0], temperature_c = [0.0, 25.0], ohm = [[0.062, 0.050], [0.031, 0.024]] }
branch = [{ ohm = 0.011, tau_s = 18.0 }, { ohm = 0.016, tau_s = 640.0 }]
`
	dutyText = `format = "soctrial/duty/1"
leg = [{ kind = "current", c_rate = 0.5, duration_s = 1800.0 }, { kind = "rest", duration_s = 3600.0 },
       { kind = "trace", time_s = [0.0, 10.0, 25.0], current_a = [4.0, -2.0, 0.0], repeat = 40, until_soc = 0.15 }]
`
	sensorsText = `format = "soctrial/sensors/1"
sample_period_s = 1.0
current = { noise_a = 0.02, offset_a = 0.0, gain_error = 0.0, quantum_a = 0.01, range_a = 60.0 }
voltage = { noise_v = 0.002, offset_v = 0.0, quantum_v = 0.0003 }
`
	estimatorText = `format = "soctrial/estimator/1"
name = "ekf two branches"
kind = "ekf"
branches = 2
start = { soc_std = 0.1, branch_std_v = 0.01 }
process = { soc_std_per_sqrt_s = 1e-5, branch_std_v_per_sqrt_s = 1e-4 }
measurement = { voltage_std_v = 0.004, current_std_a = 0.02 }
`
	planText = `format = "soctrial/plan/1"
name = "aged and offset"
seed = 7
cells = ["quay-sweeper-21.toml"]
duties = ["rounds.toml"]
sensors = ["pack.toml"]
draw = "sobol"
count = 256
vary = [{ column = "current_offset_a", between = [-0.1, 0.1] }, { column = "capacity_scale", values = [1.0, 0.9, 0.8] },
        { column = "soc_start_error", normal = { mean = 0.0, std = 0.1 } }]
limit = [{ metric = "settled_max_abs", at_most = 0.05, share = 0.95 }]
`
	mapText = `format = "soctrial/map/1"
skip_rows = 2
delimiter = ";"
decimal = ","
[time]
column = "Test Time"
unit = "min"
[current]
column = 4
unit = "mA"
charge_positive = true
[voltage]
column = "U"
`
)

func TestDesignExamples(t *testing.T) {
	tau1, tau2 := cell.Constant(18), cell.Constant(640)
	c, err := Cell("x.toml", []byte(cellText))
	same(t, err, c, &cell.Cell{Name: "quay-sweeper-21", CapacityAh: 4.8, CoulombicEfficiency: 0.9985, VoltageMinV: 2.6, VoltageMaxV: 4.2,
		TemperatureRefC: 25, OCV: cell.OverSOC([]float64{0, 0.1, 0.5, 1}, []float64{2.9, 3.42, 3.71, 4.18}),
		R0:       cell.Table{SOC: []float64{0, 1}, TemperatureC: []float64{0, 25}, Values: [][]float64{{0.062, 0.05}, {0.031, 0.024}}},
		Branches: []cell.Branch{{Ohm: cell.Constant(0.011), TauS: &tau1}, {Ohm: cell.Constant(0.016), TauS: &tau2}}})

	d, err := Duty("quay/rounds.toml", []byte(dutyText), Openers{})
	if err != nil {
		t.Fatal(err)
	}
	if d.Name != "rounds" || len(d.Legs) != 3 || d.Legs[0].CRate != 0.5 || !math.IsNaN(d.Legs[0].CurrentA) ||
		d.Legs[2].Repeat != 40 || d.Legs[2].UntilSOC != 0.15 || d.Legs[2].TraceA[1] != -2 || d.Legs[1].Kind != duty.Rest {
		t.Errorf("duty: %+v", d)
	}

	s, err := Sensors("pack.toml", []byte(sensorsText))
	same(t, err, s, &noise.Sensors{Name: "pack", SamplePeriodS: 1, Current: noise.Channel{Noise: 0.02, Quantum: 0.01, Range: 60},
		Voltage: noise.Channel{Noise: 0.002, Quantum: 0.0003}})

	e, err := Estimator("e.toml", []byte(estimatorText), Openers{})
	same(t, err, e, &estimator.Spec{Name: "ekf two branches", Kind: "ekf", Branches: 2, SOCStd: 0.1, BranchStdV: 0.01, SOCStdPerSqrtS: 1e-5,
		BranchStdVPerSqrtS: 1e-4, VoltageStdV: 0.004, CurrentStdA: 0.02})

	p, err := Plan("p.toml", []byte(planText))
	nan := math.NaN()
	same(t, err, p, &scenario.Plan{Name: "aged and offset", Seed: 7, Cells: []string{"quay-sweeper-21.toml"}, Duties: []string{"rounds.toml"},
		Sensors: []string{"pack.toml"}, Draw: scenario.Sobol, Count: 256, Score: scenario.DefaultScore(),
		Vary: []scenario.Vary{{Column: "current_offset_a", Between: &[2]float64{-0.1, 0.1}, Min: nan, Max: nan},
			{Column: "capacity_scale", Values: []float64{1, 0.9, 0.8}, Min: nan, Max: nan},
			{Column: "soc_start_error", Normal: &scenario.Normal{Mean: 0, Std: 0.1}, Min: nan, Max: nan}},
		Limits: []scenario.Limit{{Metric: "settled_max_abs", AtMost: 0.05, Share: 0.95}}})

	m, err := Map("m.toml", []byte(mapText))
	same(t, err, m, &record.Map{SkipRows: 2, Delimiter: ";", Decimal: ",", Time: record.Column{Heading: "Test Time", Unit: "min"},
		Current: record.Column{Position: 4, Unit: "mA", ChargePositive: true}, Voltage: record.Column{Heading: "U"}})
}

func same(t *testing.T, err error, got, want any) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(want, got, cmpopts.EquateNaNs()); d != "" {
		t.Errorf("differs (-want +got):\n%s", d)
	}
}

package cell_test

import (
	"errors"
	"math"
	"strings"
	"testing"

	"soctrial/plant/cell"
)

func TestBadCellsAreRefused(t *testing.T) {
	for name, c := range map[string]struct {
		spoil func(*cell.Cell)
		key   string
	}{
		"no capacity":          {func(c *cell.Cell) { c.CapacityAh = 0 }, "capacity_ah"},
		"NaN capacity":         {func(c *cell.Cell) { c.CapacityAh = math.NaN() }, "capacity_ah"},
		"infinite capacity":    {func(c *cell.Cell) { c.CapacityAh = math.Inf(1) }, "capacity_ah"},
		"efficiency above 1":   {func(c *cell.Cell) { c.CoulombicEfficiency = 1.01 }, "coulombic_efficiency"},
		"limits turned":        {func(c *cell.Cell) { c.VoltageMaxV = 2 }, "voltage_max_v"},
		"below absolute zero":  {func(c *cell.Cell) { c.TemperatureRefC = -300 }, "temperature_ref_c"},
		"unknown join":         {func(c *cell.Cell) { c.Interpolation = "spline" }, "interpolation"},
		"one OCV point":        {func(c *cell.Cell) { c.OCV = cell.OverSOC([]float64{0.5}, []float64{3.7}) }, "ocv.soc"},
		"unsorted axis":        {func(c *cell.Cell) { c.OCV.SOC[2] = 0.01 }, "ocv.soc[2]"},
		"SOC above 1":          {func(c *cell.Cell) { c.OCV.SOC[6] = 1.2 }, "ocv.soc[6]"},
		"NaN voltage":          {func(c *cell.Cell) { c.OCV.Values[0][3] = math.NaN() }, "ocv.voltage_v[3]"},
		"lengths differ":       {func(c *cell.Cell) { c.OCV.Values[0] = c.OCV.Values[0][1:] }, "ocv.voltage_v"},
		"negative resistance":  {func(c *cell.Cell) { c.R0.Values[2][1] = -0.01 }, "r0.ohm[2][1]"},
		"rows missing":         {func(c *cell.Cell) { c.R0.Values = c.R0.Values[:2] }, "r0.ohm"},
		"temperatures turned":  {func(c *cell.Cell) { c.R0.TemperatureC[1] = -5 }, "r0.temperature_c[1]"},
		"zero time constant":   {func(c *cell.Cell) { c.Branches[0].TauS = tab(cell.Constant(0)) }, "branch[0].tau_s"},
		"no time constant":     {func(c *cell.Cell) { c.Branches[1].TauS = nil }, "branch[1].tau_s"},
		"two time constants":   {func(c *cell.Cell) { c.Branches[0].Farad = tab(cell.Constant(9)) }, "branch[0].farad"},
		"six branches":         {func(c *cell.Cell) { c.Branches = append(c.Branches, c.Branches...) }, "branch"},
		"negative half gap":    {func(c *cell.Cell) { c.Hysteresis.HalfGapV.Values[0][0] = -1e-3 }, "hysteresis.half_gap_v[0]"},
		"negative rate":        {func(c *cell.Cell) { c.Hysteresis.Rate = -1 }, "hysteresis.rate"},
		"no heat capacity":     {func(c *cell.Cell) { c.Thermal = &cell.Thermal{} }, "thermal.heat_capacity_j_per_k"},
		"negative conductance": {func(c *cell.Cell) { c.Thermal = &cell.Thermal{HeatCapacityJPerK: 9, ConductanceWPerK: -1} }, "thermal.conductance_w_per_k"},
		"slope and rows": {func(c *cell.Cell) {
			c.OCV.TemperatureC = []float64{0, 25}
			c.OCV.Values = append(c.OCV.Values, c.OCV.Values[0])
		}, "ocv.slope_v_per_k"},
		"correlation of 2": {func(c *cell.Cell) {
			c.Uncertainty = &cell.Uncertainty{Names: []string{"a"}, Correlation: [][]float64{{2}}}
		}, "uncertainty.correlation[0][0]"},
	} {
		t.Run(name, func(t *testing.T) {
			good := steep()
			if err := good.Validate(); err != nil {
				t.Fatal(err)
			}
			c.spoil(good)
			err := good.Validate()
			var v *cell.ValueError
			if !errors.As(err, &v) {
				t.Fatalf("got %v, want a ValueError", err)
			}
			if v.Key != c.key {
				t.Errorf("key %q, want %q (%v)", v.Key, c.key, err)
			}
			if !strings.Contains(err.Error(), "allowed is ") || v.Found == "" {
				t.Errorf("%q does not say what was found and what is allowed", err)
			}
		})
	}
}

func TestBadOptionsAreRefused(t *testing.T) {
	p, err := cell.Prepare(steep())
	if err != nil {
		t.Fatal(err)
	}
	for name, spoil := range map[string]func(*cell.Options){
		"period":    func(o *cell.Options) { o.PeriodS = -1 },
		"branches":  func(o *cell.Options) { o.Branches = 4 },
		"cold":      func(o *cell.Options) { o.Isothermal, o.TemperatureC = true, -274 },
		"offset":    func(o *cell.Options) { o.OCVOffsetV = math.NaN() },
		"r0 scale":  func(o *cell.Options) { o.R0Scale = -1 },
		"r scale":   func(o *cell.Options) { o.BranchRScale = math.Inf(1) },
		"tau scale": func(o *cell.Options) { o.BranchTauScale = 0 },
	} {
		o := cell.AsBuilt(1)
		spoil(&o)
		if _, err := p.Model(o); err == nil {
			t.Errorf("%s: accepted", name)
		}
	}
}

// Fewer branches: the slowest stay, the others' resistance goes to R0, so that
// the resistance to a constant current is kept.
func TestFewerBranchesKeepTheResistance(t *testing.T) {
	c := steep()
	o := cell.AsBuilt(1)
	o.Branches = 1
	v, m := view(t, c, o, 25)
	w, _ := view(t, c, cell.AsBuilt(1), 25)
	if m.N != 1 {
		t.Fatalf("%d branches", m.N)
	}
	for _, soc := range []float64{-0.1, 0, 0.2, 0.5, 0.77, 1, 1.2} {
		a, b := v.Segment(soc), w.Segment(soc)
		x, y := soc-a.Ref, soc-b.Ref
		near(t, "total", a.R0.At(x)+a.R[0].At(x), b.R0.At(y)+b.R[0].At(y)+b.R[1].At(y)+b.R[2].At(y), 1e-15)
		near(t, "kept", a.R[0].At(x), 0.016, 1e-15) // about 600 s against 18 s and 150 s
	}
}

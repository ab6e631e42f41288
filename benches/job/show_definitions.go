package job

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"soctrial/benches/define"
	"soctrial/benches/scenario"
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// cell shows a cell's figures, and its curves at the reference temperature.
func (s *Shown) cell(o *ShowOptions) error {
	c, _, err := define.ReadCell(o.Path)
	if err != nil {
		return err
	}
	m, err := cell.Compile(c, cell.AsBuilt(0))
	if err != nil {
		return err
	}
	s.Name = c.Name
	s.fact("capacity", "%g Ah", c.CapacityAh)
	s.fact("coulombic efficiency", "%g", c.CoulombicEfficiency)
	s.fact("voltage", "%g to %g V", c.VoltageMinV, c.VoltageMaxV)
	s.fact("branches", "%d", len(c.Branches))
	if h := c.Hysteresis; h != nil {
		s.fact("hysteresis", "rate %g", h.Rate)
	}
	if t := c.Thermal; t != nil {
		s.fact("thermal", "%g J/K, %g W/K to ambient", t.HeatCapacityJPerK, t.ConductanceWPerK)
	}
	head := []string{"SOC", "OCV, V", "dOCV/dSOC, V", "R0, mΩ"}
	for j := range c.Branches {
		head = append(head, fmt.Sprintf("R%d, mΩ", j+1), fmt.Sprintf("tau%d, s", j+1))
	}
	if c.Hysteresis != nil {
		head = append(head, "M, mV")
	}
	rows := [][]string{head}
	var v cell.View
	v.Bind(m, c.TemperatureRefC)
	for i := 0; i <= 10; i++ {
		z := float64(i) / 10
		u, slope := v.OCV(z)
		row := []string{fmt.Sprintf("%.1f", z), fmt.Sprintf("%.4f", u), short3(slope), short3(1000 * v.R0(z))}
		g := v.Segment(z)
		for j := range m.N {
			row = append(row, short3(1000*g.R[j].At(z-g.Ref)), short3(m.Tau(j, g, z-g.Ref)))
		}
		if c.Hysteresis != nil {
			row = append(row, short3(1000*g.HalfGapV.At(z-g.Ref)))
		}
		rows = append(rows, row)
	}
	s.Tables = append(s.Tables, ShownTable{fmt.Sprintf("At %g °C", c.TemperatureRefC), rows})
	if o.PicturePath != "" {
		return drawCell(o.PicturePath, c, m)
	}
	return nil
}

func (s *Shown) sensors(o *ShowOptions) error {
	x, _, err := define.ReadSensors(o.Path)
	if err != nil {
		return err
	}
	s.Name = x.Name
	reading := x.CurrentReading
	if reading == "" {
		reading = record.Instant
	}
	s.fact("sample period", "%g s", x.SamplePeriodS)
	s.fact("current reading", "%s", reading)
	rows := [][]string{{"channel", "key", "value"}}
	for _, ch := range []struct {
		name, unit string
		of         *noise.Channel
	}{{"current", "a", &x.Current}, {"voltage", "v", &x.Voltage}, {"temperature", "c", &x.Temperature}} {
		c := ch.of
		for _, k := range []struct {
			key   string
			value float64
		}{{"offset_" + ch.unit, c.Offset}, {"gain_error", c.GainError}, {"noise_" + ch.unit, c.Noise}, {"walk_" + ch.unit + "_per_sqrt_s", c.WalkPerSqrtS},
			{"offset_" + ch.unit + "_per_k", c.OffsetPerK}, {"quantum_" + ch.unit, c.Quantum}, {"range_" + ch.unit, c.Range}, {"delay_s", c.DelayS},
			{"dropout_share", c.DropoutShare}, {"dropout_s", c.DropoutS}, {"stuck_share", c.StuckShare}, {"stuck_s", c.StuckS}, {"every", float64(c.Every)}} {
			if k.value != 0 && !(k.key == "every" && k.value == 1) {
				rows = append(rows, []string{ch.name, k.key, short3(k.value)})
			}
		}
	}
	if len(rows) == 1 {
		s.fact("faults", "none: ideal sensors")
		return nil
	}
	s.Tables = append(s.Tables, ShownTable{"Faults", rows})
	return nil
}

func (s *Shown) estimator(o *ShowOptions) error {
	e, _, err := define.ReadEstimator(o.Path)
	if err != nil {
		return err
	}
	s.Name = e.Name
	s.fact("kind", "%s", e.Kind)
	switch {
	case e.Branches >= 0:
		s.fact("branches", "%d", e.Branches)
	default:
		s.fact("branches", "all its cell has")
	}
	if e.Cell != nil {
		s.fact("cell", "%s (%s)", e.Cell.Name, e.CellFile)
	} else {
		s.fact("cell", "the scenario's, fresh")
	}
	for _, k := range []struct {
		key   string
		value float64
	}{{"start.soc_std", e.SOCStd}, {"start.branch_std_v", e.BranchStdV}, {"process.soc_std_per_sqrt_s", e.SOCStdPerSqrtS},
		{"process.branch_std_v_per_sqrt_s", e.BranchStdVPerSqrtS}, {"measurement.voltage_std_v", e.VoltageStdV},
		{"measurement.current_std_a", e.CurrentStdA}, {"rest.current_below_a", e.RestCurrentBelowA}, {"rest.after_s", e.RestAfterS}} {
		if !math.IsNaN(k.value) && k.value != 0 {
			s.fact(k.key, "%g", k.value)
		}
	}
	return nil
}

func (s *Shown) plan(o *ShowOptions) error {
	p, _, err := define.ReadPlan(o.Path)
	if err != nil {
		return err
	}
	s.Name = p.Name
	s.fact("draw", "%s", p.Draw)
	if p.Count > 0 {
		s.fact("count", "%d in each of %d combinations", p.Count, len(p.Cells)*len(p.Duties)*len(p.Sensors))
	}
	s.fact("seed", "%d", p.Seed)
	s.fact("cells", "%s", strings.Join(p.Cells, ", "))
	s.fact("duties", "%s", strings.Join(p.Duties, ", "))
	s.fact("sensors", "%s", strings.Join(p.Sensors, ", "))
	rows := [][]string{{"column", "takes"}}
	for i := range p.Vary {
		rows = append(rows, []string{p.Vary[i].Column, takes(&p.Vary[i])})
	}
	if len(rows) > 1 {
		s.Tables = append(s.Tables, ShownTable{"Varied", rows})
	}
	s.limits(p.Limits)
	return nil
}

// takes says what a column is drawn from.
func takes(v *scenario.Vary) string {
	limited := ""
	if !math.IsNaN(v.Min) {
		limited += fmt.Sprintf(", at least %g", v.Min)
	}
	if !math.IsNaN(v.Max) {
		limited += fmt.Sprintf(", at most %g", v.Max)
	}
	var words []string
	for _, x := range v.Values {
		words = append(words, strconv.FormatFloat(x, 'g', -1, 64))
	}
	words = append(words, v.Texts...)
	switch {
	case len(words) > 8:
		return fmt.Sprintf("%d values, %s to %s%s", len(words), words[0], words[len(words)-1], limited)
	case len(words) > 0:
		return strings.Join(words, ", ") + limited
	case v.Between != nil && v.Steps > 0:
		return fmt.Sprintf("%g to %g in %d steps%s", v.Between[0], v.Between[1], v.Steps, limited)
	case v.Between != nil:
		return fmt.Sprintf("%g to %g evenly%s", v.Between[0], v.Between[1], limited)
	case v.Normal != nil:
		return fmt.Sprintf("normal, mean %g, std %g%s", v.Normal.Mean, v.Normal.Std, limited)
	case v.LogNormal != nil:
		return fmt.Sprintf("log-normal, median %g, sigma %g%s", v.LogNormal.Median, v.LogNormal.Sigma, limited)
	case v.Triangular != nil:
		return fmt.Sprintf("triangular, %g to %g, mode %g%s", v.Triangular.Low, v.Triangular.High, v.Triangular.Mode, limited)
	}
	return "-"
}

func (s *Shown) recordMap(o *ShowOptions) error {
	m, err := define.ReadMap(o.Path)
	if err != nil {
		return err
	}
	s.Name = recordName(o.Path)
	rows := [][]string{{"quantity", "column", "unit", "sign"}}
	for _, q := range []struct {
		name string
		of   record.Column
	}{{"time", m.Time}, {"current", m.Current}, {"voltage", m.Voltage}, {"temperature", m.Temperature}, {"soc", m.SOC}, {"charge", m.Charge}} {
		if !q.of.Given() {
			continue
		}
		where, sign := q.of.Heading, ""
		if where == "" {
			where = fmt.Sprintf("number %d", q.of.Position)
		}
		if q.name == "current" || q.name == "charge" {
			sign = "discharge positive"
			if q.of.ChargePositive {
				sign = "charge positive"
			}
		}
		rows = append(rows, []string{q.name, where, q.of.Unit, sign})
	}
	s.Tables = append(s.Tables, ShownTable{"Reads", rows})
	return nil
}

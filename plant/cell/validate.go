package cell

import (
	"fmt"
	"math"
)

// ValueError says that one value of a definition is not allowed. The key is
// that of the TOML file, e.g. "branch[1].ohm[2][0]"; indices count from 0.
type ValueError struct {
	Key     string
	Found   string
	Allowed string
}

// Error implements error.
func (e *ValueError) Error() string {
	return fmt.Sprintf("cell: %s: found %s, allowed is %s", e.Key, e.Found, e.Allowed)
}

// KeyPath returns the key the error belongs to.
func (e *ValueError) KeyPath() string { return e.Key }

func bad(key string, found any, allowed string) error {
	return &ValueError{Key: key, Found: fmt.Sprint(found), Allowed: allowed}
}

const absoluteZeroC = -273.15

// Validate checks every rule of a cell's definition and returns the first
// breach as a *ValueError.
func (c *Cell) Validate() error {
	switch {
	case !(c.CapacityAh > 0) || math.IsInf(c.CapacityAh, 0):
		return bad("capacity_ah", c.CapacityAh, "a finite number > 0")
	case !(c.CoulombicEfficiency > 0 && c.CoulombicEfficiency <= 1):
		return bad("coulombic_efficiency", c.CoulombicEfficiency, "> 0 and ≤ 1")
	case !finite(c.VoltageMinV):
		return bad("voltage_min_v", c.VoltageMinV, "a finite number")
	case !finite(c.VoltageMaxV) || c.VoltageMaxV <= c.VoltageMinV:
		return bad("voltage_max_v", c.VoltageMaxV, fmt.Sprintf("a finite number above voltage_min_v (%g)", c.VoltageMinV))
	case !finite(c.TemperatureRefC) || c.TemperatureRefC <= absoluteZeroC:
		return bad("temperature_ref_c", c.TemperatureRefC, "a finite number > -273.15")
	}
	if err := c.Interpolation.check("interpolation"); err != nil {
		return err
	}
	if len(c.OCV.SOC) < 2 {
		return bad("ocv.soc", fmt.Sprintf("%d points", len(c.OCV.SOC)), "at least 2 points")
	}
	if err := c.OCV.validate("ocv", "voltage_v", positive); err != nil {
		return err
	}
	if s := c.OCVSlopeVPerK; s != nil {
		if len(c.OCV.TemperatureC) > 0 {
			return bad("ocv.slope_v_per_k", "both slope_v_per_k and temperature_c", "one of the two")
		}
		if err := s.validate("ocv", "slope_v_per_k", anyNumber); err != nil {
			return err
		}
		if len(s.TemperatureC) > 0 {
			return bad("ocv.slope_v_per_k", "rows over temperature", "one value a SOC point")
		}
	}
	if err := c.R0.validate("r0", "ohm", notNegative); err != nil {
		return err
	}
	if len(c.Branches) > MaxBranches {
		return bad("branch", fmt.Sprintf("%d branches", len(c.Branches)), fmt.Sprintf("at most %d", MaxBranches))
	}
	for j := range c.Branches {
		if err := c.Branches[j].validate(fmt.Sprintf("branch[%d]", j)); err != nil {
			return err
		}
	}
	if h := c.Hysteresis; h != nil {
		if err := h.HalfGapV.validate("hysteresis", "half_gap_v", notNegative); err != nil {
			return err
		}
		if len(h.HalfGapV.TemperatureC) > 0 {
			return bad("hysteresis.temperature_c", h.HalfGapV.TemperatureC, "no temperature axis")
		}
		if !(h.Rate >= 0) || math.IsInf(h.Rate, 0) {
			return bad("hysteresis.rate", h.Rate, "a finite number ≥ 0")
		}
	}
	if t := c.Thermal; t != nil {
		if !(t.HeatCapacityJPerK > 0) || math.IsInf(t.HeatCapacityJPerK, 0) {
			return bad("thermal.heat_capacity_j_per_k", t.HeatCapacityJPerK, "a finite number > 0")
		}
		if !(t.ConductanceWPerK >= 0) || math.IsInf(t.ConductanceWPerK, 0) {
			return bad("thermal.conductance_w_per_k", t.ConductanceWPerK, "a finite number ≥ 0")
		}
	}
	if u := c.Uncertainty; u != nil {
		return u.validate()
	}
	return nil
}

func (b *Branch) validate(key string) error {
	if err := b.Ohm.validate(key, "ohm", notNegative); err != nil {
		return err
	}
	switch {
	case b.TauS != nil && b.Farad != nil:
		return bad(key+".farad", "both tau_s and farad", "one of the two")
	case b.TauS != nil:
		return b.TauS.validate(key, "tau_s", positive)
	case b.Farad != nil:
		return b.Farad.validate(key, "farad", positive)
	}
	return bad(key+".tau_s", "neither tau_s nor farad", "one of the two")
}

func (u *Uncertainty) validate() error {
	n := len(u.Names)
	if len(u.Correlation) == 0 {
		return nil
	}
	if len(u.Correlation) != n {
		return bad("uncertainty.correlation", fmt.Sprintf("%d rows", len(u.Correlation)), fmt.Sprintf("as many as names (%d)", n))
	}
	for r, row := range u.Correlation {
		key := fmt.Sprintf("uncertainty.correlation[%d]", r)
		if len(row) != n {
			return bad(key, fmt.Sprintf("%d values", len(row)), fmt.Sprintf("as many as names (%d)", n))
		}
		for k, v := range row {
			if !(v >= -1 && v <= 1) || (k == r && v != 1) || math.Abs(v-u.Correlation[k][r]) > 1e-9 {
				return bad(fmt.Sprintf("%s[%d]", key, k), v, "a symmetric matrix of -1 to 1 with ones on the diagonal")
			}
		}
	}
	return nil
}

func (i Interpolation) check(key string) error {
	switch i {
	case "", PCHIP, Linear:
		return nil
	}
	return bad(key, fmt.Sprintf("%q", string(i)), `"pchip" or "linear"`)
}

type rule struct {
	ok      func(float64) bool
	allowed string
}

var (
	anyNumber   = rule{finite, "a finite number"}
	notNegative = rule{func(v float64) bool { return v >= 0 && finite(v) }, "a finite number ≥ 0"}
	positive    = rule{func(v float64) bool { return v > 0 && finite(v) }, "a finite number > 0"}
)

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

// validate checks axes, lengths and values of the table at owner.key.
func (t *Table) validate(owner, key string, r rule) error {
	if err := t.Interpolation.check(owner + ".interpolation"); err != nil {
		return err
	}
	if err := ascending(owner+".soc", t.SOC, "SOC", 0, 1); err != nil {
		return err
	}
	if err := ascending(owner+".temperature_c", t.TemperatureC, "temperature", math.Nextafter(absoluteZeroC, 0), math.MaxFloat64); err != nil {
		return err
	}
	rows, cols := max(1, len(t.TemperatureC)), max(1, len(t.SOC))
	full := owner + "." + key
	if len(t.Values) != rows {
		return bad(full, fmt.Sprintf("%d rows", len(t.Values)), fmt.Sprintf("%d, one a temperature", rows))
	}
	for i, row := range t.Values {
		at := full
		if len(t.TemperatureC) > 0 {
			at = fmt.Sprintf("%s[%d]", full, i)
		}
		if len(row) != cols {
			return bad(at, fmt.Sprintf("%d values", len(row)), fmt.Sprintf("%d, one a SOC point", cols))
		}
		for k, v := range row {
			if !r.ok(v) {
				if len(t.SOC) > 0 {
					at = fmt.Sprintf("%s[%d]", at, k)
				}
				return bad(at, v, r.allowed)
			}
		}
	}
	return nil
}

func ascending(key string, x []float64, what string, low, high float64) error {
	for i, v := range x {
		if !(v >= low && v <= high) {
			if what == "SOC" {
				return bad(fmt.Sprintf("%s[%d]", key, i), v, "SOC from 0 to 1")
			}
			return bad(fmt.Sprintf("%s[%d]", key, i), v, "a finite number > -273.15")
		}
		if i > 0 && v <= x[i-1] {
			return bad(fmt.Sprintf("%s[%d]", key, i), v, fmt.Sprintf("above the one before it (%g): the axis ascends", x[i-1]))
		}
	}
	return nil
}

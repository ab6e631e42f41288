package counting

import (
	"soctrial/estimator"
	"soctrial/plant/record"
)

// Coulomb counts charge from the SOC it is told and uses no voltage.
type Coulomb struct{ counter }

var (
	_ estimator.Estimator   = (*Coulomb)(nil)
	_ estimator.Resetter    = (*Coulomb)(nil)
	_ estimator.Inspectable = (*Coulomb)(nil)
)

// NewCoulomb returns a counter at its start. [start] soc_std and [measurement]
// current_std_a may each be NaN, not given; where both are, it states no
// deviation, else the missing one counts as 0 and each step adds
// (dt·current_std_a/(3600 Q))² to the variance of SOC. Other values must be
// finite and ≥ 0; else an error.
func NewCoulomb(s estimator.Setup) (estimator.Estimator, error) {
	c := new(Coulomb)
	if err := c.Reset(s); err != nil {
		return nil, err
	}
	return c, nil
}

// Reset implements estimator.Resetter.
func (c *Coulomb) Reset(s estimator.Setup) error { return c.reset("coulomb", s) }

// Advance implements estimator.Estimator. A missing current is the last one
// read, at first 0 A. The count is lost when it is no longer finite.
func (c *Coulomb) Advance(in *record.Readings, out *estimator.Estimate) error {
	if c.lost != nil {
		return c.lost
	}
	var p pace
	for k := range in.TimeS {
		c.move(in, k, &p)
		if !c.write(out, k) {
			return c.lost
		}
	}
	return nil
}

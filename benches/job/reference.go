package job

import (
	"fmt"
	"math"

	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// reference is the SOC a replay is scored against, one a sample of the record;
// NaN where nobody knows.
type reference struct {
	soc  []float64
	said string // where it is from
}

// referenceOf follows SOC over the whole record.
func referenceOf(r *record.Record, c *cell.Cell, o *ReplayOptions) (reference, error) {
	ref, err := findReference(r, c, o)
	if err != nil {
		return reference{}, err
	}
	const slack = 0.02 // the counter of a good tester is off by less
	for i, z := range ref.soc {
		if z < -slack || z > 1+slack {
			o.Report.warn("the reference SOC leaves 0 to 1: it is %.3g at %.6g s; the capacity or the start is wrong, see --reference-capacity-ah and --soc-start",
				z, r.TimeS[i])
			break
		}
	}
	return ref, nil
}

func findReference(r *record.Record, c *cell.Cell, o *ReplayOptions) (reference, error) {
	start, from, err := startOf(r, c, o)
	if err != nil {
		return reference{}, err
	}
	if r.SOC != nil {
		return reference{r.SOC, "the record's own soc"}, nil
	}
	capacityAh, whose := c.CapacityAh, "the cell's"
	if !math.IsNaN(o.ReferenceCapacityAh) {
		capacityAh, whose = o.ReferenceCapacityAh, "the given"
	}
	counted := countedAh(&r.Readings, c.CoulombicEfficiency)
	if r.ChargeAh == nil {
		soc := make([]float64, len(counted))
		for i, ah := range counted {
			soc[i] = start - ah/capacityAh
		}
		return reference{soc, fmt.Sprintf("the current counted over %s %.4g Ah from SOC %.4g %s", whose, capacityAh, start, from)}, nil
	}
	soc := make([]float64, len(r.ChargeAh))
	first := math.NaN()
	last := math.NaN()
	for i, ah := range r.ChargeAh {
		if math.IsNaN(first) {
			first = ah
		}
		if !math.IsNaN(ah) {
			last = ah
		}
		soc[i] = start - (ah-first)/capacityAh
	}
	if end := counted[len(counted)-1]; math.Abs(last-first-end) > 0.05*capacityAh {
		o.Report.warn("the record's charge counter moves by %.4g Ah, its current counted makes %.4g Ah: it has gaps, or the counter begins anew somewhere",
			last-first, end)
	}
	return reference{soc, fmt.Sprintf("the record's charge counter over %s %.4g Ah from SOC %.4g %s", whose, capacityAh, start, from)}, nil
}

// startOf returns the SOC at the record's first sample and where it is from.
func startOf(r *record.Record, c *cell.Cell, o *ReplayOptions) (soc float64, from string, err error) {
	if !math.IsNaN(o.SOCStart) {
		return o.SOCStart, "as given", nil
	}
	for _, z := range r.SOC {
		if !math.IsNaN(z) {
			return z, "as recorded", nil
		}
	}
	if r.SOC != nil {
		return 0, "", fmt.Errorf("its soc holds no value")
	}
	m, err := cell.Compile(c, cell.AsBuilt(0))
	if err != nil {
		return 0, "", err
	}
	for i, u := range r.VoltageV {
		if math.IsNaN(u) {
			continue
		}
		tempC := c.TemperatureRefC
		if t := r.TemperatureC[i]; !math.IsNaN(t) {
			tempC = t
		}
		var v cell.View
		v.Bind(m, tempC)
		soc, reached := v.SOCAtOCV(u)
		if !reached {
			o.Report.warn("the record's first voltage, %.4g V, is beyond the open-circuit voltages of cell %s; its start is taken as SOC %g", u, c.Name, soc)
		}
		if a := r.CurrentA[i]; math.Abs(a) > c.CapacityAh/50 {
			o.Report.warn("the record begins under %.3g A: its first voltage is no open-circuit voltage, and the start found from it is wrong; give --soc-start", a)
		}
		return soc, fmt.Sprintf("at the OCV of its first %.4g V", u), nil
	}
	return 0, "", errNoVoltage
}

// at returns the reference at sample i, or the last one known before it.
func (r *reference) at(i int, timeS []float64) (float64, error) {
	for k := i; k >= 0; k-- {
		if z := r.soc[k]; !math.IsNaN(z) {
			return min(max(z, 0), 1), nil
		}
	}
	return 0, fmt.Errorf("no reference SOC is known up to %g s; give --soc-start or a later --from-s", timeS[i])
}

// countedAh counts the charge taken out up to each sample as the estimators
// do: an instant reading holds until the next sample, an interval mean held
// since the one before; a missing one is the last, at first 0; a charge counts by the
// coulombic efficiency.
func countedAh(r *record.Readings, efficiency float64) []float64 {
	out := make([]float64, r.Len())
	held, sum := 0.0, 0.0
	for i := range out {
		dtS := 0.0
		if i > 0 {
			dtS = r.TimeS[i] - r.TimeS[i-1]
		}
		now := r.CurrentA[i]
		if math.IsNaN(now) {
			now = held
		}
		flowed := held
		if r.CurrentReading == record.IntervalMean {
			flowed = now
		}
		if flowed < 0 {
			flowed *= efficiency
		}
		sum += flowed * dtS / 3600
		out[i], held = sum, now
	}
	return out
}

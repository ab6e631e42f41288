package define

import (
	"math"

	"soctrial/plant/cell"
)

// uncertainty reads the cell's tables a second time, as standard errors. They
// are carried along as they stand.
func uncertainty(t *table) *cell.Uncertainty {
	if t == nil {
		return nil
	}
	u := &cell.Uncertainty{Names: t.texts("names"), Tables: map[string]any{}}
	for i, x := range t.list("correlation", "rows of numbers") {
		u.Correlation = append(u.Correlation, t.toNumbers(element("correlation", i), x))
	}
	for _, k := range []string{"capacity_ah", "coulombic_efficiency"} {
		if v, ok := t.get(k); ok {
			standardError(t, k, v)
			u.Tables[k] = v
		}
	}
	for _, s := range uncertainSections() {
		v, ok := t.get(s.key)
		if !ok {
			continue
		}
		u.Tables[s.key] = v
		var of []*table
		if s.list {
			of = t.tables(s.key)
		} else if one := t.table(s.key); one != nil {
			of = append(of, one)
		}
		for _, x := range of {
			if s.axes {
				sectionOf(x)
			}
			for _, k := range s.holds {
				if v, ok := x.get(k); ok {
					standardError(x, k, v)
				}
			}
			x.finish()
		}
	}
	t.finish()
	return u
}

type uncertainSection struct {
	key        string
	list, axes bool
	holds      []string
}

func uncertainSections() []uncertainSection {
	return []uncertainSection{
		{key: "ocv", axes: true, holds: []string{"voltage_v", "slope_v_per_k"}},
		{key: "r0", axes: true, holds: []string{"ohm"}},
		{key: "branch", list: true, axes: true, holds: []string{"ohm", "tau_s", "farad"}},
		{key: "hysteresis", axes: true, holds: []string{"half_gap_v", "rate"}},
		{key: "thermal", holds: []string{"heat_capacity_j_per_k", "conductance_w_per_k"}},
	}
}

// standardError checks that v is a standard error, or lists of them.
func standardError(t *table, key string, v any) {
	const allowed = "a standard error: a finite number ≥ 0, or nan where the record cannot say"
	x := math.NaN()
	switch v := v.(type) {
	case []any:
		for i, e := range v {
			standardError(t, element(key, i), e)
		}
	case int64:
		x = float64(v)
	case float64:
		x = v
	default:
		t.fail(key, describe(v), allowed)
	}
	if math.IsInf(x, 0) || x < 0 {
		t.fail(key, number(x), allowed)
	}
}

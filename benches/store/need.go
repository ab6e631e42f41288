package store

import (
	"math"
	"strings"

	"github.com/parquet-go/parquet-go"

	"soctrial/benches/scenario"
)

// kindOf says what a column of ours holds.
func kindOf(c columnSpec) scenario.Kind {
	switch c.node.Type().Kind() {
	case parquet.Int64:
		return scenario.Int
	case parquet.ByteArray:
		return scenario.Text
	}
	return scenario.Number
}

// need reads a column that must be there, as values of one kind: whole
// numbers may come as doubles and the other way round.
func (t *table) need(name string, kind scenario.Kind, nulls bool) (*values, error) {
	return t.needIn(name, kind, nulls, 0, len(t.file.RowGroups()))
}

// needIn is need over the row groups from to to (excluded).
func (t *table) needIn(name string, kind scenario.Kind, nulls bool, from, to int) (*values, error) {
	f, ok := t.find(name)
	if !ok {
		return nil, t.errf("column %q is missing (this file has %s)", name, strings.Join(t.names(), ", "))
	}
	v, err := t.read(f, from, to)
	if err != nil {
		return nil, err
	}
	if (kind == scenario.Text) != (v.kind == scenario.Text) {
		return nil, t.errf("column %q holds %s; %ss are needed", name, f.describe(), kind)
	}
	for i := range v.null {
		if v.null[i] && !nulls {
			return nil, t.errf("column %q, row %d: found null, a %s is needed", name, i+1, kind)
		}
	}
	switch {
	case kind == v.kind:
	case kind == scenario.Number:
		v.nums = make([]float64, len(v.ints))
		for i, n := range v.ints {
			v.nums[i] = float64(n)
		}
		v.kind, v.ints = kind, nil
	default:
		v.ints = make([]int64, len(v.nums))
		for i, x := range v.nums {
			if x != math.Trunc(x) || math.Abs(x) > 1<<53 {
				return nil, t.errf("column %q, row %d: found %g, a whole number is needed", name, i+1, x)
			}
			v.ints[i] = int64(x)
		}
		v.kind, v.nums = kind, nil
	}
	return v, nil
}

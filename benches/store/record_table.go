package store

import (
	"fmt"
	"math"

	"soctrial/benches/scenario"
	"soctrial/plant/record"
)

// fromTable reads a Parquet record.
func (a *assembler) fromTable(t *table, m *record.Map, chargePositive *bool) error {
	var err error
	if a.bound, err = bind(t.names(), nil, m, chargePositive); err != nil {
		return t.errf("%w", err)
	}
	a.told.Lines = append(a.told.Lines, a.bound.lines...)
	// Row group by row group, so that one copy of the record is in memory.
	row := 0
	for g := range t.file.RowGroups() {
		n := int(t.file.Metadata().RowGroups[g].NumRows)
		var columns [roles]*values
		for r, c := range a.bound.of {
			if c == nil {
				continue
			}
			v, err := t.read(&t.fields[c.index], g, g+1)
			if err != nil {
				return err
			}
			if (v.kind == scenario.Text) != c.unit.datetime {
				return t.errf("column %q holds %s; %s", c.head, t.fields[c.index].describe(),
					map[bool]string{true: "a datetime is read from texts", false: "numbers are needed"}[c.unit.datetime])
			}
			columns[r] = v
		}
		for i := range n {
			row++
			if err := a.mend(a.tableRow(columns, i, row)); err != nil {
				return t.errf("%w", err)
			}
		}
	}
	return nil
}

func (a *assembler) tableRow(columns [roles]*values, i, line int) error {
	var row [roles]float64
	for r, v := range columns {
		switch {
		case v == nil:
		case v.isNull(i):
			row[r] = math.NaN()
		case v.kind == scenario.Text:
			x, err := a.wallClock(v.texts[i], line, "row", a.bound.of[r].head)
			if err != nil {
				return err
			}
			row[r] = x
		case v.kind == scenario.Int:
			row[r] = float64(v.ints[i])
		default:
			row[r] = v.nums[i]
		}
		if math.IsInf(row[r], 0) {
			return &rowError{fmt.Errorf("row %d, column %q: %g is not a finite number", line, a.bound.of[r].head, row[r])}
		}
	}
	return a.add(row, line, "row")
}

package store

import (
	"fmt"
	"io"
	"slices"
	"strings"

	"github.com/parquet-go/parquet-go"

	"soctrial/benches/scenario"
)

// setFormat is the format of a scenario set.
const setFormat = "soctrial/set/1"

// alwaysWritten are the columns a set of ours always has, beside the
// identity: the start and the ageing of each scenario. Others (group, drift,
// plant_substeps, sensor values) are left out where every row holds the
// default.
var alwaysWritten = []string{"soc_start", "soc_start_error", "hysteresis_start", "temperature_start_c", "ambient_c",
	"capacity_scale", "r0_scale", "branch_r_scale", "branch_tau_scale", "ocv_offset_v"}

// WriteSet writes the rows and the texts of the definitions as one set file.
// Texts are kept as metadata soctrial.<key> (cell.<name>, duty.<name>,
// sensors.<name>, plan), each with its SHA-256 beside it. Identity, start and
// ageing are always columns; any other column only where a row departs
// from its default. Labels follow, in the order in which rows first have them; a row
// without one, or whose number is NaN, has a null there.
//
// What ReadSet would refuse is refused here, before the file is touched.
func WriteSet(path string, s *scenario.Set) error { return writeSet(disk{}, path, s) }

func writeSet(d disk, path string, s *scenario.Set) error {
	if err := checkSet(s.Rows, s.Texts); err != nil {
		return fmt.Errorf("store: writing %s: %w", path, err)
	}
	for i := range s.Rows {
		if err := s.Rows[i].Validate(); err != nil {
			return fmt.Errorf("store: writing %s: row %d (scenario_id %d): %w", path, i+1, s.Rows[i].ID, err)
		}
	}
	labels, err := labelColumns(s.Rows)
	if err != nil {
		return fmt.Errorf("store: writing %s: %w", path, err)
	}
	meta := map[string]string{formatKey: setFormat}
	for k, text := range s.Texts {
		meta[prefix+k] = text
		meta[prefix+k+hashSuffix] = hashOf([]byte(text))
	}
	return d.writeFile(path, func(w io.Writer) error {
		return fencedWrite(func() error { return putSet(w, s.Rows, labels, meta) })
	})
}

// setColumn is a column of the set and how to take its value from a row.
type setColumn struct {
	spec columnSpec
	at   func(r *scenario.Row) parquet.Value
}

func putSet(w io.Writer, rows []scenario.Row, labels []setColumn, meta map[string]string) error {
	var cols []setColumn
	for _, c := range scenario.Columns() {
		if c.Required || slices.Contains(alwaysWritten, c.Name) || departs(&c, rows) {
			cols = append(cols, tableColumn(c))
		}
	}
	cols = append(cols, labels...)
	specs := make([]columnSpec, len(cols))
	for i, c := range cols {
		specs[i] = c.spec
	}
	t := newTableWriter(w, "set", specs, meta)
	for from := 0; from < len(rows); from += groupRows {
		part := rows[from:min(from+groupRows, len(rows))]
		for c := range cols {
			if err := t.column(c, len(part), func(i int) parquet.Value { return cols[c].at(&part[i]) }); err != nil {
				return err
			}
		}
		if err := t.w.Flush(); err != nil {
			return err
		}
	}
	return t.w.Close()
}

// departs tells whether any row's value is not the column's default.
func departs(c *scenario.Column, rows []scenario.Row) bool {
	for i := range rows { // by index: a row is big
		if v := c.Get(&rows[i]); v.Null != c.Default.Null || !v.Null && v != c.Default {
			return true
		}
	}
	return false
}

func tableColumn(c scenario.Column) setColumn {
	spec := map[scenario.Kind][2]func(string) columnSpec{
		scenario.Number: {doubles, nullDoubles},
		scenario.Int:    {ints, nullInts},
		scenario.Text:   {texts, nullTexts},
	}[c.Kind]
	make := spec[0]
	if !c.Required && c.Default.Null {
		make = spec[1]
	}
	return setColumn{make(c.Name), func(r *scenario.Row) parquet.Value { return parquetValue(c.Get(r)) }}
}

func parquetValue(v scenario.Value) parquet.Value {
	switch {
	case v.Null:
		return parquet.NullValue()
	case v.Kind == scenario.Int:
		return parquet.Int64Value(v.Int)
	case v.Kind == scenario.Text:
		return parquet.ByteArrayValue([]byte(v.Text))
	}
	return parquet.DoubleValue(v.Number)
}

// labelColumns lists the labels of all rows, in the order of first sight.
func labelColumns(rows []scenario.Row) ([]setColumn, error) {
	isNumber := map[string]bool{}
	var order []string
	for i := range rows {
		for j, l := range rows[i].Labels {
			was, seen := isNumber[l.Column]
			switch {
			case seen && was != l.IsNumber:
				return nil, fmt.Errorf("label %q is a text in one scenario and a number in another", l.Column)
			case slices.ContainsFunc(rows[i].Labels[:j], func(m scenario.Label) bool { return m.Column == l.Column }):
				return nil, fmt.Errorf("scenario %d: label %q stands there twice", rows[i].ID, l.Column)
			case !seen:
				if _, known := scenario.Find(l.Column); known || l.Column == "" || strings.Contains(l.Column, ",") {
					return nil, fmt.Errorf("scenario %d: a label may not be called %q", rows[i].ID, l.Column)
				}
				isNumber[l.Column] = l.IsNumber
				order = append(order, l.Column)
			}
		}
	}
	out := make([]setColumn, len(order))
	for i, name := range order {
		spec := nullTexts(name)
		if isNumber[name] {
			spec = nullDoubles(name)
		}
		out[i] = setColumn{spec, func(r *scenario.Row) parquet.Value {
			for _, l := range r.Labels {
				switch {
				case l.Column != name:
				case l.IsNumber:
					return numberOrNull(l.Number)
				default:
					return parquet.ByteArrayValue([]byte(l.Text))
				}
			}
			return parquet.NullValue()
		}}
	}
	return out, nil
}

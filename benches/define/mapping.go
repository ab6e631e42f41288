package define

import (
	"fmt"
	"slices"
	"unicode/utf8"

	"soctrial/plant/record"
)

// mapUnits are the units a column may be in, by what it holds.
func mapUnits() map[string][]string {
	return map[string][]string{
		"time":        {"s", "ms", "min", "h", "datetime"},
		"current":     {"A", "mA"},
		"voltage":     {"V", "mV"},
		"temperature": {"degC", "degF", "K"},
		"soc":         {"fraction", "percent"},
		"charge":      {"Ah", "mAh", "As"},
	}
}

// Map reads how a foreign record reads. A column is a table of its own,
// { column = "Heading" or a position from 1, unit, charge_positive }.
func Map(file string, text []byte) (*record.Map, error) {
	d, t, err := parse(file, text, KindMap)
	if err != nil {
		return nil, err
	}
	t.text("name", false)
	m := &record.Map{SkipRows: t.whole("skip_rows", 0), Delimiter: t.text("delimiter", false), Decimal: t.word("decimal", ".", ",")}
	if m.SkipRows < 0 {
		t.fail("skip_rows", fmt.Sprint(m.SkipRows), "a whole number ≥ 0")
	}
	if m.Delimiter != "" && utf8.RuneCountInString(m.Delimiter) != 1 {
		t.fail("delimiter", fmt.Sprintf("%q", m.Delimiter), `one character, e.g. ";" or "\t"`)
	}
	for _, c := range mapColumns(m) {
		if v := t.table(c.key); v != nil {
			*c.to = mapColumn(v, c.key)
			v.finish()
		}
	}
	if !m.Time.Given() && !m.Current.Given() && !m.Voltage.Given() && len(d.errs) == 0 {
		t.missing("time", "at least one of time, current and voltage")
	}
	t.finish()
	if err := d.err(); err != nil {
		return nil, err
	}
	return m, nil
}

type mapEntry struct {
	key string
	to  *record.Column
}

func mapColumns(m *record.Map) []mapEntry {
	return []mapEntry{{"time", &m.Time}, {"current", &m.Current}, {"voltage", &m.Voltage}, {"temperature", &m.Temperature},
		{"soc", &m.SOC}, {"charge", &m.Charge}}
}

func mapColumn(t *table, key string) record.Column {
	var c record.Column
	v, ok := t.get("column")
	switch v := v.(type) {
	case string:
		c.Heading = v
	case int64:
		c.Position = int(v)
	}
	if !ok {
		t.missing("column", "a heading in quotes or a position from 1")
	} else if c.Heading == "" && c.Position < 1 {
		t.fail("column", describe(v), "a heading in quotes or a position from 1")
	}
	units := mapUnits()[key]
	c.Unit = t.text("unit", false)
	if c.Unit != "" && !slices.Contains(units, c.Unit) {
		t.fail("unit", fmt.Sprintf("%q", c.Unit), "one of "+quoted(units))
	}
	if key == "current" || key == "charge" {
		if b, ok := t.get("charge_positive"); ok {
			if c.ChargePositive, ok = b.(bool); !ok {
				t.fail("charge_positive", describe(b), "true or false")
			}
		}
	}
	return c
}

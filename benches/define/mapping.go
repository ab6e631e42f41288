package define

import (
	"fmt"
	"math"
	"strings"
	"unicode"
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
	nameOf(t, file)
	m := &record.Map{SkipRows: t.whole("skip_rows", 0, 0), Delimiter: t.text("delimiter"), Decimal: t.word("decimal", ".", ",")}
	checkDelimiter(t, m)
	given := false
	for _, c := range mapColumns(m) {
		if v := t.table(c.key); v != nil {
			*c.to = mapColumn(v, c.key)
			v.finish()
		}
		given = given || t.has(c.key)
	}
	if !given {
		t.missing("time", "at least one column: time, current, voltage, temperature, soc or charge")
	}
	t.finish()
	if err := d.err(); err != nil {
		return nil, err
	}
	return m, nil
}

func checkDelimiter(t *table, m *record.Map) {
	const allowed = `one character that parts values, e.g. ";" or "\t"`
	r, size := utf8.DecodeRuneInString(m.Delimiter)
	switch {
	case m.Delimiter == "" && t.has("delimiter"), size != len(m.Delimiter):
		t.failOnce("delimiter", fmt.Sprintf("%q", m.Delimiter), allowed)
	case m.Delimiter == "":
	case unicode.IsLetter(r), unicode.IsDigit(r), strings.ContainsRune("\"\r\n+-", r):
		t.fail("delimiter", fmt.Sprintf("%q", m.Delimiter), allowed)
	case m.Delimiter == m.Decimal, r == '.' && m.Decimal == "":
		t.fail("delimiter", fmt.Sprintf("%q", m.Delimiter), "another character than the decimal mark")
	}
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
	const allowed = "a heading in quotes or a position from 1"
	var c record.Column
	v, ok := t.get("column")
	switch x := v.(type) {
	case string:
		c.Heading = x
	case int64:
		if x >= 1 && x <= math.MaxInt32 {
			c.Position = int(x)
		}
	}
	switch {
	case !ok:
		t.missing("column", allowed)
	case !c.Given():
		t.fail("column", describe(v), allowed)
	}
	c.Unit = t.word("unit", mapUnits()[key]...)
	if key == "current" || key == "charge" {
		if v, ok := t.get("charge_positive"); ok {
			if c.ChargePositive, ok = v.(bool); !ok {
				t.fail("charge_positive", describe(v), "true or false")
			}
		}
	}
	return c
}

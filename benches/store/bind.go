package store

import (
	"fmt"
	"slices"
	"strings"

	"soctrial/benches/scenario"
	"soctrial/plant/record"
)

// binding is the column that plays a role.
type binding struct {
	index int
	head  string
	unit  unit
	flip  bool // the file counts charging as positive
}

// bindings are the columns of a record by role; nil: there is none.
type bindings struct {
	of    [roles]*binding
	lines []string // what was taken for what
}

func mapColumns(m *record.Map) [roles]record.Column {
	return [roles]record.Column{m.Time, m.Current, m.Voltage, m.Temperature, m.SOC, m.Charge}
}

// headingTest returns what tells a line of headings: that it has all the
// map names or, without a map, a voltage and a current.
func headingTest(m *record.Map) func([]string) bool {
	return func(row []string) bool {
		named := false
		for _, c := range mapColumns(m) {
			if c.Heading != "" {
				if named = true; !slices.Contains(row, c.Heading) {
					return false
				}
			}
		}
		if named {
			return true
		}
		var seen [roles]bool
		for _, f := range row {
			if h := recognise(f); h.known {
				seen[h.role] = true
			}
		}
		return seen[voltageRole] && seen[currentRole]
	}
}

// bind finds the column of each role. The map rules; what it does not name of time, current and
// voltage is recognised by its heading, and so are the others where
// the map names no column at all.
func bind(heads, unitLine []string, m *record.Map, chargePositive *bool) (*bindings, error) {
	b := &bindings{}
	given := mapColumns(m)
	any := slices.ContainsFunc(given[:], record.Column.Given)
	for r := range roles {
		if !given[r].Given() {
			continue
		}
		if err := b.mapped(r, given[r], heads, unitLine); err != nil {
			return nil, err
		}
	}
	for r := range roles {
		required := r <= voltageRole
		if given[r].Given() || any && !required {
			continue
		}
		if err := b.found(r, required, heads, unitLine); err != nil {
			return nil, err
		}
	}
	for _, r := range []role{currentRole, chargeRole} {
		if c := b.of[r]; c != nil && chargePositive != nil {
			c.flip = *chargePositive
		}
	}
	b.tell(heads, any || chargePositive != nil)
	return b, nil
}

// mapped binds a role to the column the map names.
func (b *bindings) mapped(r role, c record.Column, heads, unitLine []string) error {
	at := c.Position - 1
	switch {
	case c.Position < 0 || len(heads) > 0 && at >= len(heads):
		return fmt.Errorf("map: %s is column %d, but the file has %d columns", roleNames[r], c.Position, len(heads))
	case c.Heading == "":
	case at >= 0 && (at >= len(heads) || heads[at] != c.Heading):
		return fmt.Errorf("map: %s is column %d with the heading %q, but that column's is %q", roleNames[r], c.Position, c.Heading, headAt(heads, at))
	case at < 0:
		if at = slices.Index(heads, c.Heading); at < 0 {
			return fmt.Errorf("map: %s is column %q, which the file does not have; the nearest is %q of %s",
				roleNames[r], c.Heading, scenario.Closest(c.Heading, heads), quoted(heads))
		}
		if again := slices.Index(heads[at+1:], c.Heading); again >= 0 {
			return fmt.Errorf("map: %s is column %q, but columns %d and %d both have that heading: name one by its position",
				roleNames[r], c.Heading, at+1, at+2+again)
		}
	}
	for other, o := range b.of {
		if o != nil && o.index == at {
			return fmt.Errorf("map: %s and %s are both column %q", roleNames[other], roleNames[r], headAt(heads, at))
		}
	}
	return b.set(r, at, c.Unit, c.ChargePositive, heads, unitLine)
}

// found binds a role to the one column whose heading obviously means it.
func (b *bindings) found(r role, required bool, heads, unitLine []string) error {
	var plain, native, dates []int
	for i, h := range heads {
		k := recognise(h)
		taken := slices.ContainsFunc(b.of[:], func(o *binding) bool { return o != nil && o.index == i })
		switch {
		case !k.known || k.role != r || taken:
		case k.native:
			native = append(native, i)
		case k.date:
			dates = append(dates, i)
		default:
			plain = append(plain, i)
		}
	}
	for _, some := range [][]int{native, plain, dates} {
		switch {
		case len(some) > 1:
			return fmt.Errorf("columns %d (%q) and %d (%q) both mean %s: name one of them in a map, by its position if need be",
				some[0]+1, heads[some[0]], some[1]+1, heads[some[1]], roleNames[r])
		case len(some) == 1:
			return b.set(r, some[0], recognise(heads[some[0]]).unit, false, heads, unitLine)
		}
	}
	switch {
	case !required:
		return nil
	case len(heads) == 0:
		return fmt.Errorf("the file has no headings: name %s by its position in a map", roleNames[r])
	}
	return fmt.Errorf("no column for %s among %s: call it %s, or name it in a map", roleNames[r], quoted(heads), nativeNames[r])
}

// set binds, once the unit is known: the one given, else the heading's, else
// the line of units', else our own.
func (b *bindings) set(r role, at int, unitName string, flip bool, heads, unitLine []string) error {
	h, how := headAt(heads, at), ""
	if unitName == "" {
		if k := recognise(h); k.known && k.role == r {
			unitName = k.unit
		}
	}
	if unitName == "" && at < len(unitLine) && unitLine[at] != "" {
		var ok bool
		if unitName, ok = spelledUnit(r, unitLine[at]); !ok {
			return fmt.Errorf("column %q: the line of units says %q, which is no unit of %s: name the column and its unit in a map", h, unitLine[at], roleNames[r])
		}
	}
	if unitName == "" {
		unitName, how = nativeUnits[r], ", which it does not say"
	}
	u, err := namedUnit(r, unitName)
	if err != nil {
		return err
	}
	b.of[r] = &binding{index: at, head: h, unit: u, flip: flip}
	b.lines = append(b.lines, fmt.Sprintf("%s: column %d %q in %s%s", roleNames[r], at+1, h, unitName, how))
	return nil
}

// tell adds the signs and what is not read to the lines.
func (b *bindings) tell(heads []string, told bool) {
	for _, r := range []role{currentRole, chargeRole} {
		switch c := b.of[r]; {
		case c == nil:
		case c.flip:
			b.lines = append(b.lines, roleNames[r]+": its sign is turned, since the file counts charging as positive")
		case !told:
			b.lines = append(b.lines, roleNames[r]+": taken as positive on discharge; say so if the file counts charging as positive")
		default:
			b.lines = append(b.lines, roleNames[r]+": positive on discharge")
		}
	}
	var rest []string
	for i, h := range heads {
		if h != "" && !slices.ContainsFunc(b.of[:], func(o *binding) bool { return o != nil && o.index == i }) {
			rest = append(rest, h)
		}
	}
	if rest != nil {
		b.lines = append(b.lines, "not read: "+strings.Join(rest, ", "))
	}
}

func headAt(heads []string, i int) string {
	if i >= 0 && i < len(heads) {
		return heads[i]
	}
	return ""
}

func quoted(names []string) string {
	const most = 40
	out := make([]string, 0, len(names))
	for _, n := range names[:min(most, len(names))] {
		out = append(out, fmt.Sprintf("%q", n))
	}
	if len(names) > most {
		out = append(out, "…")
	}
	return strings.Join(out, ", ")
}

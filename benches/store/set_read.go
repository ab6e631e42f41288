package store

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"unicode/utf8"

	"soctrial/benches/scenario"
)

// SetFile is what a scenario set's file holds.
type SetFile struct {
	Path   string
	Rows   []scenario.Row    // in the file's order
	Texts  map[string]string // as scenario.Set.Texts: "cell.<name>", "duty.<name>", "sensors.<name>", "plan"
	SHA256 string            // of the file's bytes, lower-case hexadecimal
	// Columns are the file's columns in its own order, Labels those of them that are
	// carried along only.
	Columns, Labels []string
}

// maxSetRows is as many scenarios as a plan may draw.
const maxSetRows = 10_000_000

// ReadSet reads a scenario set that this or any other program wrote.
//
// Columns may stand in any order. A number may have any width; a whole number
// may come as a double, a decimal is scaled. An absent column and a null stand for
// the default. A text column that is unknown, or a number whose name
// begins with label_, becomes a label (a null one is left out of its row); an
// unknown number is refused with the nearest known name. A bad value, two rows
// of one scenario_id, a definition that is named but lacking, a hash that does not match, and
// a damaged file are errors.
func ReadSet(path string) (*SetFile, error) {
	var out *SetFile
	err := withTable(path, func(t *table) error {
		var err error
		if out, err = readSet(t); err == nil {
			out.SHA256, err = t.hash()
		}
		return err
	})
	if err != nil {
		return nil, err
	}
	return out, nil
}

func readSet(t *table) (*SetFile, error) {
	if err := t.requireFormat(setFormat); err != nil {
		return nil, err
	}
	if err := t.checkHashes(); err != nil {
		return nil, err
	}
	if t.rows > maxSetRows {
		return nil, t.errf("%d scenarios; at most %d are read", t.rows, maxSetRows)
	}
	s := &SetFile{Path: t.path, Texts: map[string]string{}, Columns: t.names()}
	for key, text := range t.meta {
		name, ours := strings.CutPrefix(key, prefix)
		if ours && !strings.HasSuffix(key, hashSuffix) && isDefinition(name) {
			s.Texts[name] = text
		}
	}
	for _, c := range scenario.Columns() {
		if _, ok := t.find(c.Name); c.Required && !ok {
			return nil, t.errf("column %q is missing; a set has %s (this file has %s)", c.Name, required(), strings.Join(t.names(), ", "))
		}
	}
	// The ids first, so that any other value can be told by its scenario.
	idField, _ := t.find("scenario_id")
	ids, err := t.readAll(idField)
	if err != nil {
		return nil, err
	}
	s.Rows = make([]scenario.Row, t.rows)
	plain := scenario.DefaultRow()
	for i := range s.Rows {
		s.Rows[i] = plain
	}
	for i := range t.fields {
		if err := s.fill(t, &t.fields[i], ids); err != nil {
			return nil, err
		}
	}
	if err := checkSet(s.Rows, s.Texts); err != nil {
		return nil, t.errf("%w", err)
	}
	return s, nil
}

// fill reads one column into the rows.
func (s *SetFile) fill(t *table, f *field, ids *values) error {
	c, known := scenario.Find(f.name)
	if !known && (f.refused != "" || f.kind != scenario.Text && !strings.HasPrefix(f.name, scenario.LabelPrefix)) {
		return t.errf("column %q is unknown and holds %s: a set has known columns (the nearest is %s), texts, and numbers whose name begins with %s",
			f.name, f.describe(), scenario.Nearest(f.name), scenario.LabelPrefix)
	}
	vs, err := t.readAll(f)
	if err != nil {
		return err
	}
	if !known {
		s.Labels = append(s.Labels, f.name)
	}
	for i := range s.Rows {
		v := vs.at(i)
		if known {
			err = c.Set(&s.Rows[i], v)
		} else {
			err = addLabel(&s.Rows[i], f.name, v)
		}
		if err != nil {
			return t.errf("row %d (scenario_id %s): %w", i+1, ids.at(i), err)
		}
	}
	return nil
}

func addLabel(r *scenario.Row, name string, v scenario.Value) error {
	if v.Null {
		return nil
	}
	l := scenario.Label{Column: name, Text: v.Text, Number: v.Number, IsNumber: v.Kind != scenario.Text}
	if v.Kind == scenario.Int {
		l.Number = float64(v.Int)
		if v.Int > 1<<53 || v.Int < -1<<53 {
			return fmt.Errorf("%s: found %d, allowed is a number that a double holds exactly", name, v.Int)
		}
	}
	if l.IsNumber && (math.IsNaN(l.Number) || math.IsInf(l.Number, 0)) {
		return fmt.Errorf("%s: found %g, allowed is a finite number or a null", name, l.Number)
	}
	r.Labels = append(r.Labels, l)
	return nil
}

func required() string {
	var out []string
	for _, c := range scenario.Columns() {
		if c.Required {
			out = append(out, c.Name)
		}
	}
	return strings.Join(out, ", ")
}

// isDefinition tells whether a text is kept under this key.
func isDefinition(key string) bool {
	for _, kind := range []string{"cell.", "duty.", "sensors."} {
		if strings.HasPrefix(key, kind) {
			return true
		}
	}
	return key == "plan"
}

// checkSet checks what a set must hold, whoever wrote it, beside good values: a row,
// each id once, every definition that is named, and texts under names that can be kept.
func checkSet(rows []scenario.Row, texts map[string]string) error {
	if len(rows) == 0 {
		return errors.New("the set has no rows")
	}
	for _, key := range sortedKeys(texts) {
		_, name, _ := strings.Cut(key, ".")
		switch {
		case !isDefinition(key) || key != "plan" && name == "":
			return fmt.Errorf("a text is kept as %q; cell.<name>, duty.<name>, sensors.<name> and plan are allowed", key)
		case strings.HasSuffix(key, hashSuffix):
			return fmt.Errorf("a definition is called %q; a name may not end in %s", name, hashSuffix)
		case !utf8.ValidString(key) || !utf8.ValidString(texts[key]):
			return fmt.Errorf("the text of %q is not UTF-8", key)
		}
	}
	seen := make(map[int64]int, len(rows))
	for i := range rows {
		r := &rows[i]
		if first, twice := seen[r.ID]; twice {
			return fmt.Errorf("scenario_id %d stands in row %d and again in row %d; each may stand once", r.ID, first+1, i+1)
		}
		seen[r.ID] = i
		for _, d := range []struct{ kind, name string }{{"cell", r.Cell}, {"duty", r.Duty}, {"sensors", r.Sensors}} {
			if _, ok := texts[d.kind+"."+d.name]; !ok {
				return fmt.Errorf("row %d (scenario_id %d): %s is %q, but metadata %s%s.%s is missing (the set defines %s)",
					i+1, r.ID, d.kind, d.name, prefix, d.kind, d.name, defined(texts, d.kind))
			}
		}
	}
	return nil
}

func defined(texts map[string]string, kind string) string {
	var out []string
	for _, k := range sortedKeys(texts) {
		if name, ok := strings.CutPrefix(k, kind+"."); ok {
			out = append(out, name)
		}
	}
	if out == nil {
		return "none"
	}
	return strings.Join(out, ", ")
}

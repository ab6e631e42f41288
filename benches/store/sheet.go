package store

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"

	"soctrial/plant/record"
)

// sheet is a CSV file whose delimiter and headings have been found.
type sheet struct {
	lines     *lineReader
	ahead     []numbered // read to find the headings, not yet given
	delimiter byte
	comma     bool     // the decimal mark is a comma
	heads     []string // empty where the file has none
	units     []string // what a line of units below the headings says; nil: no such line
	notes     []string
	passed    int // blank and comment lines between the rows
	fields    [][]byte
}

type numbered struct {
	n    int
	line []byte
}

// lookAhead is how many lines are looked at for delimiter and headings.
const lookAhead = 200

// openSheet finds delimiter, decimal mark and headings. The headings are the
// first line, comment lines included, that isHeading agrees to; failing that the
// first line that is no comment, unless it is all numbers.
func openSheet(in io.Reader, m *record.Map, isHeading func([]string) bool) (*sheet, error) {
	lines, err := newLineReader(in)
	if err != nil {
		return nil, err
	}
	s := &sheet{lines: lines}
	for len(s.ahead) < lookAhead {
		line, err := lines.next()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return nil, err
		}
		if bytes.IndexByte(line, 0) >= 0 {
			return nil, fmt.Errorf("line %d holds a zero byte: this is no text file", lines.n)
		}
		if lines.n > m.SkipRows {
			s.ahead = append(s.ahead, numbered{lines.n, bytes.Clone(line)})
		}
		if lines.n > m.SkipRows+lookAhead {
			break
		}
	}
	if lines.n == 0 {
		return nil, errors.New("the file is empty")
	}
	if s.delimiter = s.findDelimiter(); m.Delimiter != "" {
		if s.delimiter = m.Delimiter[0]; len(m.Delimiter) > 1 || s.delimiter == '"' {
			return nil, fmt.Errorf("map: delimiter is %q; one ASCII character that is no quote is allowed", m.Delimiter)
		}
	}
	s.takeHeadings(isHeading)
	s.takeUnits()
	s.comma = m.Decimal == "," || m.Decimal == "" && s.findComma()
	if s.comma && s.delimiter == ',' {
		return nil, errors.New("a comma cannot be both the delimiter and the decimal mark")
	}
	return s, nil
}

// findDelimiter returns the character that cuts most lines into one and the
// same number of fields.
func (s *sheet) findDelimiter() byte {
	best, most := byte(','), 0
	for _, d := range []byte{'\t', ';', '|', ','} {
		counts := map[int]int{}
		for _, l := range s.ahead {
			if !skippable(l.line) {
				counts[len(split(l.line, d, nil))]++
			}
		}
		delete(counts, 1)
		for _, n := range counts {
			if n > most {
				best, most = d, n
			}
		}
	}
	return best
}

// row cuts a line into texts.
func (s *sheet) row(line []byte) []string {
	s.fields = split(line, s.delimiter, s.fields)
	out := make([]string, len(s.fields))
	for i, f := range s.fields {
		out[i] = text(f)
	}
	return out
}

func (s *sheet) takeHeadings(isHeading func([]string) bool) {
	for i, l := range s.ahead {
		line := l.line
		if skippable(line) { // headings may stand behind a comment mark
			line = bytes.TrimLeft(bytes.TrimLeft(line, " \t"), "#%")
		}
		if row := s.row(line); isHeading(row) {
			if i > 0 {
				s.notes = append(s.notes, fmt.Sprintf("%d lines before the headings were passed over", i))
			}
			s.heads, s.ahead = row, s.ahead[i+1:]
			return
		}
	}
	for i, l := range s.ahead {
		if skippable(l.line) {
			continue
		}
		row := s.row(l.line)
		if slices.ContainsFunc(row, func(f string) bool { return f != "" && !looksNumeric([]byte(f)) }) {
			s.heads, s.ahead = row, s.ahead[i+1:]
		}
		return
	}
}

// takeUnits takes a line of units below the headings: no number in it, and a unit
// that some role knows.
func (s *sheet) takeUnits() {
	for i, l := range s.ahead {
		if skippable(l.line) {
			continue
		}
		row := s.row(l.line)
		known := 0
		for k, f := range row {
			f = strings.Trim(f, "()[]{}<>")
			row[k] = f
			if looksNumeric([]byte(f)) {
				return
			}
			for r := range roles {
				if _, ok := spelledUnit(r, f); ok && f != "-" && f != "1" {
					known++
					break
				}
			}
		}
		if known >= 2 && len(row) <= len(s.heads) {
			s.units, s.ahead = row, s.ahead[i+1:]
			s.notes = append(s.notes, fmt.Sprintf("line %d gives the units", l.n))
		}
		return
	}
}

// findComma tells whether the numbers have decimal commas and none a point.
func (s *sheet) findComma() bool {
	if s.delimiter == ',' {
		return false
	}
	found := false
	for _, l := range s.ahead {
		if skippable(l.line) {
			continue
		}
		for _, f := range split(l.line, s.delimiter, nil) {
			if _, err := parseNumber(f, false); err == nil && bytes.IndexByte(f, '.') >= 0 {
				return false
			}
			if _, err := parseNumber(f, true); err == nil && bytes.IndexByte(f, ',') >= 0 {
				found = true
			}
		}
	}
	return found
}

// next returns the fields of the next row of data, valid until the call after,
// and its line; io.EOF at the end. An error of the row itself is a *rowError.
func (s *sheet) next() (fields [][]byte, line int, err error) {
	for {
		var b []byte
		if len(s.ahead) > 0 {
			b, line = s.ahead[0].line, s.ahead[0].n
			s.ahead = s.ahead[1:]
		} else {
			if b, err = s.lines.next(); err != nil {
				return nil, s.lines.n + 1, err
			}
			line = s.lines.n
		}
		if skippable(b) {
			s.passed++
			continue
		}
		var whole bool
		if s.fields, whole = cut(b, s.delimiter, s.fields); !whole {
			return nil, line, &rowError{fmt.Errorf("line %d: a quoted field must end in a quote before the delimiter (%q) or the line's end", line, s.delimiter)}
		}
		if len(s.heads) == 0 {
			return s.fields, line, nil
		}
		n := len(s.heads)
		if len(s.fields) < n {
			return nil, line, &rowError{fmt.Errorf("line %d has %d fields, the headings are %d", line, len(s.fields), n)}
		}
		for _, extra := range s.fields[n:] {
			if len(extra) > 0 {
				return nil, line, &rowError{fmt.Errorf("line %d has %d fields, the headings are %d (delimiter %q)", line, len(s.fields), n, s.delimiter)}
			}
		}
		return s.fields[:n], line, nil
	}
}

// rowError is wrong with one row only; a repair leaves it out.
type rowError struct{ error }

func (e *rowError) Unwrap() error { return e.error }

// number reads a field of a row.
func (s *sheet) number(field []byte, line int, head string) (float64, error) {
	x, err := parseNumber(field, s.comma)
	if err == nil {
		return x, nil
	}
	hint := ""
	if _, other := parseNumber(field, !s.comma); other == nil {
		hint = fmt.Sprintf(" (it would be with the decimal mark %q)", map[bool]string{true: ".", false: ","}[s.comma])
	}
	return 0, &rowError{fmt.Errorf("line %d, column %q: %q is not a number%s", line, head, text(field), hint)}
}

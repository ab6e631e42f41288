// Package define turns definitions that people write into values, and back:
// cells, duties, sensors, estimators, plans and maps, as strict TOML.
//
// Strict means that nothing is passed over: an unknown key, a wrong type, a
// missing unit, a number that is not finite or out of range is an error with
// file, line, key, what was found and what is allowed. All such errors of a
// file are told at once. What a value may be is decided by the package that
// owns it; this one knows where in the file its key stands.
//
// It is the only importer of the TOML library. It never guesses a unit and
// never mends a value.
package define

import (
	"bytes"
	"fmt"
	"path/filepath"
	"strings"
	"unicode/utf8"

	"github.com/pelletier/go-toml/v2"
)

// Kinds of definition files.
const (
	KindCell      = "cell"
	KindDuty      = "duty"
	KindSensors   = "sensors"
	KindEstimator = "estimator"
	KindPlan      = "plan"
	KindMap       = "map"
)

func kinds() []string {
	return []string{KindCell, KindDuty, KindSensors, KindEstimator, KindPlan, KindMap}
}

func formatOf(kind string) string { return "soctrial/" + kind + "/1" }

// maxBytes is the largest definition that is read; a long trace belongs in a
// file of its own.
const maxBytes = 256 << 20

// byteOrderMark begins the files of some editors; TOML does not count it.
const byteOrderMark = "\xef\xbb\xbf"

// Kind returns which kind of definition text is, by its format.
func Kind(file string, text []byte) (string, error) {
	d, err := decode(file, text, "a definition with a format, one of "+formats())
	if err != nil {
		return "", err
	}
	for _, k := range kinds() {
		if d.values["format"] == formatOf(k) {
			return k, nil
		}
	}
	d.badFormat("one of " + formats())
	return "", d.err()
}

func formats() string {
	var all []string
	for _, k := range kinds() {
		all = append(all, formatOf(k))
	}
	return quoted(all)
}

// document is one parsed file on its way to a value.
type document struct {
	file   string
	text   []byte
	values map[string]any
	errs   []*Error
}

// parse reads text, checks that its format is kind's, and returns its root.
func parse(file string, text []byte, kind string) (*document, *table, error) {
	d, err := decode(file, text, fmt.Sprintf("a definition that begins with format = %q", formatOf(kind)))
	if err != nil {
		return nil, nil, err
	}
	if d.values["format"] != formatOf(kind) {
		d.badFormat(fmt.Sprintf("%q", formatOf(kind)))
		return nil, nil, d.err()
	}
	root := newTable(d, "", d.values)
	root.get("format")
	return d, root, nil
}

// badFormat notes that the format is missing or not allowed.
func (d *document) badFormat(allowed string) {
	found := "nothing"
	if v, ok := d.values["format"]; ok {
		found = describe(v)
	}
	d.fail("format", found, allowed)
}

// decode reads text as TOML; allowed says what an empty file lacks.
func decode(file string, text []byte, allowed string) (*document, error) {
	if len(text) > maxBytes {
		return nil, &Error{File: file, Found: fmt.Sprintf("%d bytes", len(text)), Allowed: fmt.Sprintf("at most %d", maxBytes)}
	}
	text = bytes.TrimPrefix(text, []byte(byteOrderMark))
	d := &document{file: file, text: text}
	if len(bytes.TrimSpace(text)) == 0 {
		return nil, &Error{File: file, Found: "an empty file", Allowed: allowed}
	}
	if !utf8.Valid(text) {
		at := linesOf(text).place(validBytes(text))
		return nil, &Error{File: file, Line: at.line, Column: at.column, Found: "bytes that are not UTF-8", Allowed: "UTF-8 text"}
	}
	if err := toml.Unmarshal(text, &d.values); err != nil {
		e := &Error{File: file, Found: "text that is not TOML (" + strings.TrimPrefix(err.Error(), "toml: ") + ")", Allowed: "TOML 1.0"}
		if de, ok := err.(*toml.DecodeError); ok {
			e.Line, e.Column = de.Position()
			e.Key = strings.Join(de.Key(), ".")
		}
		if strings.Contains(err.Error(), "64-bit") {
			e.Allowed = "whole numbers up to 9223372036854775807; a larger seed stands in quotes"
		}
		return nil, e
	}
	return d, nil
}

// validBytes counts the bytes of text before the first that is not UTF-8.
func validBytes(text []byte) int {
	n := 0
	for n < len(text) {
		r, size := utf8.DecodeRune(text[n:])
		if r == utf8.RuneError && size <= 1 {
			break
		}
		n += size
	}
	return n
}

// stem is the default name of what file holds.
func stem(file string) string {
	base := filepath.Base(file)
	return strings.TrimSuffix(base, filepath.Ext(base))
}

// nameOf reads the name of a definition, its file's stem where none is given.
func nameOf(t *table, file string) string {
	name := t.text("name")
	if name == "" && t.has("name") {
		t.failOnce("name", `""`, "a text that is not empty, or no name: then it is the file's stem")
	}
	if name == "" {
		name = stem(file)
	}
	if strings.HasSuffix(name, ".sha256") {
		t.fail("name", fmt.Sprintf("%q", name), "a name that does not end in .sha256")
	}
	return name
}

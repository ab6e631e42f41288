// Package define turns definitions that people write into values, and back:
// cells, duties, sensors, estimators, plans and maps, as strict TOML.
//
// Strict means that nothing is passed over: an unknown key, a wrong type, a
// missing unit, a number that is not finite or out of range is an error with
// file, line, key, what was found and what is allowed. Values are checked by
// the packages that own them; this one knows where in the file a key stands.
//
// It is the only importer of the TOML library. It never guesses a unit and
// never mends a value.
package define

import (
	"fmt"
	"path/filepath"
	"slices"
	"sort"
	"strings"
	"unicode/utf8"

	"github.com/pelletier/go-toml/v2"
	"github.com/pelletier/go-toml/v2/unstable"
)

// Error is one thing wrong with a definition.
type Error struct {
	File    string
	Line    int // 0: nowhere in particular
	Column  int
	Key     string // e.g. "leg[2].pulse_s"
	Found   string
	Allowed string
	More    int // other errors in the same file
}

// Error implements error.
func (e *Error) Error() string {
	var b strings.Builder
	b.WriteString(e.File)
	if e.Line > 0 {
		fmt.Fprintf(&b, ":%d:%d", e.Line, max(e.Column, 1))
	}
	b.WriteString(": ")
	if e.Key != "" {
		b.WriteString(e.Key + ": ")
	}
	fmt.Fprintf(&b, "found %s, allowed is %s", e.Found, e.Allowed)
	if e.More > 0 {
		fmt.Fprintf(&b, " (and %d more)", e.More)
	}
	return b.String()
}

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

// maxBytes is the largest definition that is read; a long trace belongs in a
// file of its own.
const maxBytes = 256 << 20

// document is one parsed file on its way to a value. Its first error wins.
type document struct {
	file   string
	places map[string]place
	errs   []*Error
}

type place struct{ line, column int }

// parse reads text, checks that its format is kind's, and returns its root.
func parse(file string, text []byte, kind string) (*document, *table, error) {
	d := &document{file: file}
	switch {
	case len(text) > maxBytes:
		return nil, nil, &Error{File: file, Found: fmt.Sprintf("%d bytes", len(text)), Allowed: fmt.Sprintf("at most %d", maxBytes)}
	case len(strings.TrimSpace(string(text))) == 0:
		return nil, nil, &Error{File: file, Found: "an empty file", Allowed: fmt.Sprintf("a definition that begins with format = %q", formatOf(kind))}
	case !utf8.Valid(text):
		return nil, nil, &Error{File: file, Found: "bytes that are not UTF-8", Allowed: "UTF-8 text"}
	}
	var m map[string]any
	if err := toml.Unmarshal(text, &m); err != nil {
		e := &Error{File: file, Found: "text that is not TOML", Allowed: "TOML 1.0"}
		if de, ok := err.(*toml.DecodeError); ok {
			e.Line, e.Column = de.Position()
			e.Key = strings.Join(de.Key(), ".")
		}
		e.Found += " (" + strings.TrimPrefix(err.Error(), "toml: ") + ")"
		return nil, nil, e
	}
	d.places = locate(text)
	root := &table{doc: d, m: m, used: map[string]bool{}}
	format := root.text("format", true)
	if len(d.errs) == 0 && format != formatOf(kind) {
		d.fail("format", fmt.Sprintf("%q", format), fmt.Sprintf("%q", formatOf(kind)))
	}
	if len(d.errs) > 0 {
		return nil, nil, d.err()
	}
	return d, root, nil
}

func formatOf(kind string) string { return "soctrial/" + kind + "/1" }

// Kind returns which kind of definition text is, by its format.
func Kind(file string, text []byte) (string, error) {
	var head struct {
		Format string `toml:"format"`
	}
	if err := toml.Unmarshal(text, &head); err == nil {
		for _, k := range kinds() {
			if head.Format == formatOf(k) {
				return k, nil
			}
		}
	}
	var all []string
	for _, k := range kinds() {
		all = append(all, formatOf(k))
	}
	return "", &Error{File: file, Line: 1, Key: "format", Found: fmt.Sprintf("%q", head.Format), Allowed: "one of " + strings.Join(all, ", ")}
}

// stem is the default name of what file holds.
func stem(file string) string {
	base := filepath.Base(file)
	return strings.TrimSuffix(base, filepath.Ext(base))
}

// fail notes that the value at key is not allowed.
func (d *document) fail(key, found, allowed string) {
	e := &Error{File: d.file, Key: key, Found: found, Allowed: allowed}
	at := key
	for { // the nearest thing around it that has a place
		if p, ok := d.places[at]; ok {
			e.Line, e.Column = p.line, p.column
			break
		}
		cut := strings.LastIndexAny(at, ".[")
		if cut < 0 {
			break
		}
		at = at[:cut]
	}
	d.errs = append(d.errs, e)
}

// err returns the first error in the file, or nil.
func (d *document) err() error {
	if len(d.errs) == 0 {
		return nil
	}
	sort.SliceStable(d.errs, func(a, b int) bool { return d.errs[a].Line < d.errs[b].Line })
	first := *d.errs[0]
	first.More = len(d.errs) - 1
	return &first
}

// keyed is an error of a package that owns a value: it names the key.
type keyed interface{ KeyPath() string }

// owned gives an owner's error the file and line of its key.
func (d *document) owned(err error) error {
	if err == nil {
		return nil
	}
	k, ok := err.(keyed)
	if !ok {
		return fmt.Errorf("%s: %w", d.file, err)
	}
	key := k.KeyPath()
	msg := err.Error()
	if _, rest, ok := strings.Cut(msg, key+": "); ok {
		msg = rest
	}
	found, allowed, _ := strings.Cut(msg, ", allowed is ")
	d.errs = nil
	d.fail(key, strings.TrimPrefix(found, "found "), allowed)
	return d.err()
}

// locate indexes where each key and each element of an array stands.
func locate(text []byte) map[string]place {
	at := map[string]place{}
	var p unstable.Parser
	p.Reset(text)
	counts := map[string]int{} // elements of arrays of tables so far
	prefix := ""
	lines := lineStarts(text)
	put := func(key string, r unstable.Range) {
		if _, ok := at[key]; !ok {
			at[key] = lines.place(int(r.Offset))
		}
	}
	for p.NextExpression() {
		e := p.Expression()
		switch e.Kind {
		case unstable.Table, unstable.ArrayTable:
			path := ""
			var last unstable.Range
			for it := e.Key(); it.Next(); {
				n := it.Node()
				path = join(path, string(n.Data))
				last = n.Raw
				if c := counts[path]; c > 0 && !(it.IsLast() && e.Kind == unstable.ArrayTable) {
					path = fmt.Sprintf("%s[%d]", path, c-1)
				}
			}
			put(path, last)
			if e.Kind == unstable.ArrayTable {
				counts[path]++
				path = fmt.Sprintf("%s[%d]", path, counts[path]-1)
				for k := range counts { // arrays inside an older element begin again
					if strings.HasPrefix(k, path) {
						delete(counts, k)
					}
				}
				put(path, last)
			}
			prefix = path
		case unstable.KeyValue:
			pair(e, prefix, put)
		}
	}
	return at
}

func pair(e *unstable.Node, prefix string, put func(string, unstable.Range)) {
	path := prefix
	for it := e.Key(); it.Next(); {
		path = join(path, string(it.Node().Data))
		put(path, it.Node().Raw)
	}
	value(e.Value(), path, put)
}

func value(v *unstable.Node, path string, put func(string, unstable.Range)) {
	switch v.Kind {
	case unstable.InlineTable:
		for it := v.Children(); it.Next(); {
			pair(it.Node(), path, put)
		}
	case unstable.Array:
		i := 0
		for it := v.Children(); it.Next(); i++ {
			n := it.Node()
			if n.Kind == unstable.Comment {
				i--
				continue
			}
			at := fmt.Sprintf("%s[%d]", path, i)
			if n.Raw.Length > 0 {
				put(at, n.Raw)
			}
			value(n, at, put)
		}
	}
}

func join(path, key string) string {
	if path == "" {
		return key
	}
	return path + "." + key
}

// lineIndex holds where each line begins.
type lineIndex []int

func lineStarts(text []byte) lineIndex {
	starts := lineIndex{0}
	for i, c := range text {
		if c == '\n' {
			starts = append(starts, i+1)
		}
	}
	return starts
}

func (l lineIndex) place(offset int) place {
	line, found := slices.BinarySearch(l, offset)
	if !found {
		line--
	}
	return place{line + 1, offset - l[line] + 1}
}

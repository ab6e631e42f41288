package define

import (
	"fmt"
	"math"
	"sort"
	"strconv"
	"strings"

	"soctrial/benches/scenario"
)

// table is a TOML table that is being read. Every key that is asked for counts
// as known; finish refuses the others.
type table struct {
	doc  *document
	path string
	m    map[string]any
	used map[string]bool
	keys []string // asked for, in order
}

func (t *table) at(key string) string { return join(t.path, key) }

func (t *table) fail(key, found, allowed string) { t.doc.fail(t.at(key), found, allowed) }

// get returns the value of key and whether it is there.
func (t *table) get(key string) (any, bool) {
	if !t.used[key] {
		t.used[key] = true
		t.keys = append(t.keys, key)
	}
	v, ok := t.m[key]
	return v, ok
}

func (t *table) has(key string) bool { _, ok := t.m[key]; return ok }

// missing notes a key that has to be there; a key of the same quantity in
// another unit is pointed out.
func (t *table) missing(key, allowed string) {
	stem, _, _ := strings.Cut(key, "_")
	for k := range t.m {
		if s, _, _ := strings.Cut(k, "_"); s == stem && !t.used[k] {
			t.used[k] = true
			t.fail(k, fmt.Sprintf("the key %q", k), fmt.Sprintf("%q: %s", key, allowed))
			return
		}
	}
	t.fail(key, "nothing", allowed)
}

// number returns the number at key, def where it is absent. With NaN as
// default a caller can tell.
func (t *table) number(key string, def float64) float64 {
	v, ok := t.get(key)
	if !ok {
		return def
	}
	x, ok := t.toNumber(key, v)
	if !ok {
		return def
	}
	return x
}

func (t *table) needNumber(key, allowed string) float64 {
	if !t.has(key) {
		t.get(key)
		t.missing(key, allowed)
		return math.NaN()
	}
	return t.number(key, math.NaN())
}

func (t *table) toNumber(key string, v any) (float64, bool) {
	switch v := v.(type) {
	case float64:
		if math.IsNaN(v) || math.IsInf(v, 0) {
			t.fail(key, strings.ToLower(fmt.Sprint(v)), "a finite number")
			return 0, false
		}
		return v, true
	case int64:
		return float64(v), true
	}
	t.fail(key, describe(v), "a number")
	return 0, false
}

// whole returns the whole number at key, def where it is absent.
func (t *table) whole(key string, def int) int {
	v, ok := t.get(key)
	if !ok {
		return def
	}
	switch v := v.(type) {
	case int64:
		if v >= math.MinInt32 && v <= math.MaxInt32 {
			return int(v)
		}
	case float64:
		if v == math.Trunc(v) && math.Abs(v) < math.MaxInt32 {
			return int(v)
		}
	}
	t.fail(key, describe(v), "a whole number")
	return def
}

// text returns the text at key, "" where it is absent.
func (t *table) text(key string, required bool) string {
	v, ok := t.get(key)
	if !ok {
		if required {
			t.missing(key, "a text")
		}
		return ""
	}
	s, ok := v.(string)
	if !ok {
		t.fail(key, describe(v), "a text in quotes")
	}
	return s
}

// word returns the text at key, which must be one of words, or "" where it is
// absent.
func (t *table) word(key string, words ...string) string {
	s := t.text(key, false)
	if s == "" && !t.has(key) {
		return ""
	}
	for _, w := range words {
		if s == w {
			return s
		}
	}
	t.fail(key, fmt.Sprintf("%q", s), "one of "+quoted(words))
	return ""
}

// texts returns the list of texts at key.
func (t *table) texts(key string) []string {
	v, ok := t.get(key)
	if !ok {
		return nil
	}
	list, ok := v.([]any)
	if !ok {
		t.fail(key, describe(v), "a list of texts")
		return nil
	}
	var out []string
	for i, x := range list {
		s, ok := x.(string)
		if !ok {
			t.fail(fmt.Sprintf("%s[%d]", key, i), describe(x), "a text in quotes")
			return nil
		}
		out = append(out, s)
	}
	return out
}

// numbers returns the list of numbers at key; nil where it is absent.
func (t *table) numbers(key string) []float64 {
	v, ok := t.get(key)
	if !ok {
		return nil
	}
	return t.toNumbers(key, v)
}

func (t *table) toNumbers(key string, v any) []float64 {
	list, ok := v.([]any)
	if !ok {
		t.fail(key, describe(v), "a list of numbers")
		return nil
	}
	out := make([]float64, len(list))
	for i, x := range list {
		if out[i], ok = t.toNumber(fmt.Sprintf("%s[%d]", key, i), x); !ok {
			return nil
		}
	}
	return out
}

// table returns the table at key, or nil where it is absent.
func (t *table) table(key string) *table {
	v, ok := t.get(key)
	if !ok {
		return nil
	}
	m, ok := v.(map[string]any)
	if !ok {
		t.fail(key, describe(v), "a table")
		return nil
	}
	return &table{doc: t.doc, path: t.at(key), m: m, used: map[string]bool{}}
}

// tables returns the array of tables at key.
func (t *table) tables(key string) []*table {
	v, ok := t.get(key)
	if !ok {
		return nil
	}
	list, ok := v.([]any)
	if !ok {
		t.fail(key, describe(v), "a list of tables")
		return nil
	}
	var out []*table
	for i, x := range list {
		at := fmt.Sprintf("%s[%d]", key, i)
		m, ok := x.(map[string]any)
		if !ok {
			t.fail(at, describe(x), "a table")
			continue
		}
		out = append(out, &table{doc: t.doc, path: t.at(at), m: m, used: map[string]bool{}})
	}
	return out
}

// finish refuses every key that nobody asked for.
func (t *table) finish() {
	var unknown []string
	for k := range t.m {
		if !t.used[k] {
			unknown = append(unknown, k)
		}
	}
	sort.Strings(unknown)
	for _, k := range unknown {
		allowed := "one of " + strings.Join(t.keys, ", ")
		if len(t.keys) > 1 {
			allowed += fmt.Sprintf(" (nearest: %s)", scenario.Closest(k, t.keys))
		}
		t.fail(k, fmt.Sprintf("an unknown key %q", k), allowed)
	}
}

func quoted(words []string) string {
	out := make([]string, len(words))
	for i, w := range words {
		out[i] = strconv.Quote(w)
	}
	return strings.Join(out, ", ")
}

// describe says what a value of the wrong type is.
func describe(v any) string {
	switch v := v.(type) {
	case string:
		return fmt.Sprintf("the text %q", v)
	case bool:
		return fmt.Sprintf("%t", v)
	case []any:
		return fmt.Sprintf("a list of %d", len(v))
	case map[string]any:
		return "a table"
	case int64, float64:
		return fmt.Sprintf("the number %v", v)
	}
	return fmt.Sprintf("%v", v)
}

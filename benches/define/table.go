package define

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"soctrial/benches/scenario"
)

// table is a TOML table that is being read. Every key that is asked for counts
// as known; finish refuses the others.
type table struct {
	doc    *document
	path   string
	m      map[string]any
	keys   []string // asked for, in order
	absent []need   // asked for in vain
}

// need is a key that has to be there, and what it may hold.
type need struct{ key, allowed string }

func newTable(d *document, path string, m map[string]any) *table {
	return &table{doc: d, path: path, m: m}
}

func (t *table) at(key string) string { return join(t.path, key) }

func (t *table) fail(key, found, allowed string) { t.doc.fail(t.at(key), found, allowed) }

// blame notes that the file which key names is at fault.
func (t *table) blame(key string, cause error) { t.doc.blame(t.at(key), cause) }

// failOnce is fail, unless the key's value is already known to be wrong.
func (t *table) failOnce(key, found, allowed string) {
	at := t.at(key)
	if !slices.ContainsFunc(t.doc.errs, func(e *Error) bool { return e.Key == at }) {
		t.doc.fail(at, found, allowed)
	}
}

// get returns the value of key and whether it is there.
func (t *table) get(key string) (any, bool) {
	if !slices.Contains(t.keys, key) {
		t.keys = append(t.keys, key)
	}
	v, ok := t.m[key]
	return v, ok
}

// has tells whether key is there, without asking for it.
func (t *table) has(key string) bool { _, ok := t.m[key]; return ok }

// missing notes a key that has to be there and is not. finish tells it, with
// the key that was written in its place where there is one.
func (t *table) missing(key, allowed string) {
	t.get(key)
	t.absent = append(t.absent, need{key, allowed})
}

// finish refuses every key that nobody asked for, and tells what is missing. A
// key of the same quantity in another unit, or one mistyped, is told as such.
func (t *table) finish() {
	var unknown []string
	for k := range t.m {
		if !slices.Contains(t.keys, k) {
			unknown = append(unknown, k)
		}
	}
	slices.Sort(unknown)
	for _, n := range t.absent {
		at := slices.IndexFunc(unknown, func(k string) bool { return meant(k, n.key, t.keys) })
		if at < 0 {
			t.fail(n.key, "nothing", n.allowed)
			continue
		}
		t.fail(unknown[at], fmt.Sprintf("an unknown key %q", unknown[at]), fmt.Sprintf("%q: %s", n.key, n.allowed))
		unknown = slices.Delete(unknown, at, at+1)
	}
	for _, k := range unknown {
		found := fmt.Sprintf("an unknown key %q", k)
		if at := slices.IndexFunc(t.keys, func(known string) bool { return sameQuantity(k, known) }); at >= 0 {
			t.fail(k, found, fmt.Sprintf("%q: the unit ends the name (nearest: %s)", t.keys[at], t.keys[at]))
			continue
		}
		allowed := fmt.Sprintf("one of %s (nearest: %s)", strings.Join(t.keys, ", "), scenario.Closest(k, t.keys))
		if len(t.keys) == 1 {
			allowed = "only " + t.keys[0]
		}
		t.fail(k, found, allowed)
	}
}

// meant tells whether whoever wrote the unknown key meant this one: the same
// quantity, or one letter off in a short key and two in a longer one.
func meant(unknown, key string, known []string) bool {
	if sameQuantity(unknown, key) {
		return true
	}
	off := "??" // no key holds these: a text exactly so far away
	if len(key) <= 4 {
		off = "?"
	}
	return scenario.Closest(unknown, known) == key && scenario.Closest(unknown, []string{key, unknown + off}) == key
}

// unitWords are the words that end a name which carries a quantity.
func unitWords() []string {
	return []string{"a", "v", "ah", "ohm", "farad", "s", "c", "w", "k", "kg", "m2", "m3", "mps"}
}

// sameQuantity tells whether unknown is key with its unit missing or another.
func sameQuantity(unknown, key string) bool {
	quantity, unit := cutLast(key)
	other, _ := cutLast(unknown)
	return slices.Contains(unitWords(), unit) && (unknown == quantity || other == quantity)
}

// cutLast parts a key before its last word.
func cutLast(key string) (before, last string) {
	at := strings.LastIndexByte(key, '_')
	if at < 0 {
		return key, ""
	}
	return key[:at], key[at+1:]
}

// number returns the number at key, def where it is absent. With NaN as
// default a caller can tell.
func (t *table) number(key string, def float64) float64 {
	v, ok := t.get(key)
	if !ok {
		return def
	}
	if x, ok := t.toNumber(key, v); ok {
		return x
	}
	return def
}

// needNumber returns the number at key, which has to be there.
func (t *table) needNumber(key, allowed string) float64 {
	if !t.has(key) {
		t.missing(key, allowed)
	}
	return t.number(key, math.NaN())
}

func (t *table) toNumber(key string, v any) (float64, bool) {
	switch v := v.(type) {
	case float64:
		if math.IsNaN(v) || math.IsInf(v, 0) {
			t.fail(key, number(v), "a finite number")
			return 0, false
		}
		return v, true
	case int64:
		return float64(v), true
	}
	t.fail(key, describe(v), "a number")
	return 0, false
}

// whole returns the whole number at key, at least low; def where it is absent.
func (t *table) whole(key string, def, low int) int {
	v, ok := t.get(key)
	if !ok {
		return def
	}
	x := math.NaN()
	switch v := v.(type) {
	case int64:
		x = float64(v)
	case float64:
		x = v
	}
	allowed := fmt.Sprintf("a whole number ≥ %d", low)
	if x > math.MaxInt32 {
		allowed = fmt.Sprintf("a whole number from %d to %d", low, math.MaxInt32)
	} else if x == math.Trunc(x) && x >= float64(low) {
		return int(x)
	}
	t.fail(key, describe(v), allowed)
	return def
}

// text returns the text at key, "" where it is absent.
func (t *table) text(key string) string {
	v, ok := t.get(key)
	if !ok {
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
	v, ok := t.get(key)
	if !ok {
		return ""
	}
	if s, ok := v.(string); ok && slices.Contains(words, s) {
		return s
	}
	t.fail(key, describe(v), "one of "+quoted(words))
	return ""
}

// needWord is word where the key has to be there.
func (t *table) needWord(key string, words ...string) string {
	if !t.has(key) {
		t.missing(key, "one of "+quoted(words))
	}
	return t.word(key, words...)
}

// texts returns the list of texts at key; nil where it is absent.
func (t *table) texts(key string) []string {
	list := t.list(key, "a list of texts")
	if list == nil {
		return nil
	}
	out := make([]string, len(list))
	for i, x := range list {
		s, ok := x.(string)
		if !ok {
			t.fail(element(key, i), describe(x), "a text in quotes")
		}
		out[i] = s
	}
	return out
}

// list returns the list at key; nil where it is absent or something else.
func (t *table) list(key, allowed string) []any {
	v, ok := t.get(key)
	if !ok {
		return nil
	}
	list, ok := v.([]any)
	if !ok {
		t.fail(key, describe(v), allowed)
	}
	return list
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
		out[i], _ = t.toNumber(element(key, i), x)
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
	return newTable(t.doc, t.at(key), m)
}

// tables returns the array of tables at key.
func (t *table) tables(key string) []*table {
	var out []*table
	for i, x := range t.list(key, "a list of tables") {
		at := element(key, i)
		m, ok := x.(map[string]any)
		if !ok {
			t.fail(at, describe(x), "a table")
			continue
		}
		out = append(out, newTable(t.doc, t.at(at), m))
	}
	return out
}

func element(key string, i int) string { return key + "[" + strconv.Itoa(i) + "]" }

func quoted(words []string) string {
	out := make([]string, len(words))
	for i, w := range words {
		out[i] = strconv.Quote(w)
	}
	return strings.Join(out, ", ")
}

// describe says what a value is that is not allowed.
func describe(v any) string {
	switch v := v.(type) {
	case string:
		return strconv.Quote(v)
	case bool:
		return strconv.FormatBool(v)
	case []any:
		return fmt.Sprintf("a list of %d", len(v))
	case map[string]any:
		return "a table"
	case float64:
		return number(v)
	case int64:
		return strconv.FormatInt(v, 10)
	}
	return fmt.Sprintf("the date or time %v", v)
}

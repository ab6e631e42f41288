package define

import (
	"fmt"
	"math"
	"reflect"
	"slices"
	"strconv"
	"strings"

	"github.com/pelletier/go-toml/v2"
)

// writer builds TOML line by line.
type writer struct{ strings.Builder }

func begin(kind, name string) *writer {
	w := &writer{}
	w.pair("format", text(formatOf(kind)))
	if name != "" {
		w.pair("name", text(name))
	}
	return w
}

func (w *writer) pair(key, value string) { fmt.Fprintf(w, "%s = %s\n", key, value) }

func (w *writer) number(key string, v float64) { w.pair(key, number(v)) }

// given writes v where it was given, which NaN says it was not.
func (w *writer) given(key string, v float64) {
	if !math.IsNaN(v) {
		w.number(key, v)
	}
}

// word writes s where there is one.
func (w *writer) word(key, s string) {
	if s != "" {
		w.pair(key, text(s))
	}
}

// count writes n where there is one.
func (w *writer) count(key string, n int) {
	if n != 0 {
		w.pair(key, strconv.Itoa(n))
	}
}

func (w *writer) section(name string) { fmt.Fprintf(w, "\n[%s]\n", name) }

func (w *writer) element(name string) { fmt.Fprintf(w, "\n[[%s]]\n", name) }

// number writes v to the last bit, as a TOML float.
func number(v float64) string {
	switch {
	case math.IsNaN(v):
		return "nan"
	case math.IsInf(v, 1):
		return "inf"
	case math.IsInf(v, -1):
		return "-inf"
	}
	s := strconv.FormatFloat(v, 'g', -1, 64)
	if !strings.ContainsAny(s, ".e") {
		s += ".0"
	}
	return s
}

func numbers(v []float64) string {
	parts := make([]string, len(v))
	for i, x := range v {
		parts[i] = number(x)
	}
	return "[" + strings.Join(parts, ", ") + "]"
}

// rows writes a line a row.
func rows(v [][]float64) string {
	if len(v) == 0 {
		return "[]"
	}
	parts := make([]string, len(v))
	for i, x := range v {
		parts[i] = "\n  " + numbers(x) + ","
	}
	return "[" + strings.Join(parts, "") + "\n]"
}

func texts(v []string) string {
	parts := make([]string, len(v))
	for i, s := range v {
		parts[i] = text(s)
	}
	return "[" + strings.Join(parts, ", ") + "]"
}

// text writes s as a basic string of TOML; bytes that are not UTF-8, which
// TOML cannot hold, become U+FFFD.
func text(s string) string {
	var b strings.Builder
	b.WriteByte('"')
	for _, r := range s {
		switch {
		case r == '"' || r == '\\':
			b.WriteByte('\\')
			b.WriteRune(r)
		case r == '\n':
			b.WriteString(`\n`)
		case r == '\t':
			b.WriteString(`\t`)
		case r < ' ' || r == 0x7f:
			fmt.Fprintf(&b, `\u%04X`, r)
		default:
			b.WriteRune(r)
		}
	}
	b.WriteByte('"')
	return b.String()
}

// key writes a key, bare where TOML allows it.
func key(k string) string {
	for _, c := range k {
		if !(c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= '0' && c <= '9' || c == '_' || c == '-') {
			return text(k)
		}
	}
	if k == "" {
		return `""`
	}
	return k
}

// tree writes what is carried along unread, inline, in the order of its keys.
func (w *writer) tree(m map[string]any) {
	for _, k := range sortedKeys(reflect.ValueOf(m)) {
		w.pair(key(k), inline(m[k]))
	}
}

func sortedKeys(m reflect.Value) []string {
	var keys []string
	for _, k := range m.MapKeys() {
		keys = append(keys, k.String())
	}
	slices.Sort(keys)
	return keys
}

// inline writes v on one line: numbers, texts, truths, dates, and lists and
// maps of them, of any Go type. It panics on anything else, which TOML has no
// value for.
func inline(v any) string {
	switch v := v.(type) {
	case string:
		return text(v)
	case float64:
		return number(v)
	case toml.LocalDate, toml.LocalTime, toml.LocalDateTime:
		return fmt.Sprint(v)
	}
	x := reflect.ValueOf(v)
	switch x.Kind() {
	case reflect.Slice, reflect.Array:
		parts := make([]string, x.Len())
		for i := range parts {
			parts[i] = inline(x.Index(i).Interface())
		}
		return "[" + strings.Join(parts, ", ") + "]"
	case reflect.Map:
		parts := make([]string, 0, x.Len())
		for _, k := range sortedKeys(x) {
			parts = append(parts, key(k)+" = "+inline(x.MapIndex(reflect.ValueOf(k).Convert(x.Type().Key())).Interface()))
		}
		if len(parts) == 0 {
			return "{}"
		}
		return "{ " + strings.Join(parts, ", ") + " }"
	case reflect.Bool, reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64,
		reflect.Uint8, reflect.Uint16, reflect.Uint32:
		return fmt.Sprint(v)
	case reflect.Float32:
		return number(x.Float())
	case reflect.String:
		return text(x.String())
	}
	b, err := toml.Marshal(map[string]any{"k": v}) // a date with its zone
	if err != nil {
		panic(fmt.Sprintf("define: a %T has no place in a definition: %v", v, err))
	}
	return strings.TrimSpace(strings.TrimPrefix(string(b), "k = "))
}

package store

import (
	"fmt"
	"io"
	"maps"
	"math"
	"reflect"
	"slices"
	"strings"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/compress"
	"github.com/parquet-go/parquet-go/encoding"
)

// columnSpec is a column to write.
type columnSpec struct {
	name string
	node parquet.Node
}

// The kinds of column we write. A nullable number is null where it is NaN, a nullable text
// where it is empty unless its writer says otherwise. Texts and ids repeat
// from row to row and are kept in a dictionary.
func doubles(name string) columnSpec {
	return columnSpec{name, parquet.Leaf(parquet.DoubleType)}
}
func nullDoubles(name string) columnSpec {
	return columnSpec{name, parquet.Optional(parquet.Leaf(parquet.DoubleType))}
}
func nullFloats(name string) columnSpec {
	return columnSpec{name, parquet.Optional(parquet.Leaf(parquet.FloatType))}
}
func ints(name string) columnSpec {
	return columnSpec{name, parquet.Leaf(parquet.Int64Type)}
}
func nullInts(name string) columnSpec {
	return columnSpec{name, parquet.Optional(parquet.Leaf(parquet.Int64Type))}
}
func texts(name string) columnSpec {
	return columnSpec{name, parquet.Encoded(parquet.String(), &parquet.RLEDictionary)}
}
func nullTexts(name string) columnSpec {
	return columnSpec{name, parquet.Optional(parquet.Encoded(parquet.String(), &parquet.RLEDictionary))}
}
func repeated(c columnSpec) columnSpec {
	return columnSpec{c.name, parquet.Encoded(c.node, &parquet.RLEDictionary)}
}

// ordered is a group whose columns keep the order they are given in; the
// library's own group sorts them by name.
type ordered []columnSpec

func (ordered) ID() int                     { return 0 }
func (o ordered) String() string            { return strings.Join(o.names(), " ") }
func (ordered) Type() parquet.Type          { return parquet.Group{}.Type() }
func (ordered) Optional() bool              { return false }
func (ordered) Repeated() bool              { return false }
func (ordered) Required() bool              { return true }
func (ordered) Leaf() bool                  { return false }
func (ordered) Encoding() encoding.Encoding { return nil }
func (ordered) Compression() compress.Codec { return nil }
func (o ordered) GoType() reflect.Type      { return reflect.TypeFor[map[string]any]() }
func (o ordered) Fields() []parquet.Field {
	out := make([]parquet.Field, len(o))
	for i, c := range o {
		out[i] = orderedField{c.node, c.name}
	}
	return out
}
func (o ordered) names() []string {
	out := make([]string, len(o))
	for i, c := range o {
		out[i] = c.name
	}
	return out
}

type orderedField struct {
	parquet.Node
	name string
}

func (f orderedField) Name() string                      { return f.name }
func (f orderedField) Value(reflect.Value) reflect.Value { return reflect.Value{} }

// groupRows is how many rows of a set or of results stand in one row group.
const groupRows = 1 << 14

// tableWriter writes flat columns in row groups.
type tableWriter struct {
	w     *parquet.GenericWriter[any]
	specs []columnSpec
	chunk []parquet.Value
}

// newTableWriter begins a table with metadata, which is written in the order of its keys.
func newTableWriter(w io.Writer, name string, specs []columnSpec, meta map[string]string) *tableWriter {
	pw := parquet.NewGenericWriter[any](w,
		parquet.NewSchema(name, ordered(specs)),
		parquet.CreatedBy("soctrial", "1", ""),
		parquet.Compression(&parquet.Snappy),
		parquet.DataPageVersion(1), // which every reader knows
		parquet.DataPageStatistics(false),
	)
	for _, k := range slices.Sorted(maps.Keys(meta)) {
		pw.SetKeyValueMetadata(k, meta[k])
	}
	return &tableWriter{w: pw, specs: specs}
}

// chunkLen is how many values are handed to the library at once.
const chunkLen = 1024

// put writes n values of column c into the current row group, fill by fill.
func (t *tableWriter) put(c, n int, fill func(chunk []parquet.Value, from int)) error {
	if t.chunk == nil {
		t.chunk = make([]parquet.Value, chunkLen)
	}
	to := t.w.ColumnWriters()[c]
	for from := 0; from < n; from += chunkLen {
		chunk := t.chunk[:min(chunkLen, n-from)]
		fill(chunk, from)
		if _, err := to.WriteRowValues(chunk); err != nil {
			return fmt.Errorf("column %s: %w", t.specs[c].name, err)
		}
	}
	return nil
}

// column writes n values of column c.
func (t *tableWriter) column(c, n int, at func(i int) parquet.Value) error {
	level := t.level(c)
	return t.put(c, n, func(chunk []parquet.Value, from int) {
		for i := range chunk {
			if v := at(from + i); v.IsNull() {
				chunk[i] = v.Level(0, 0, c)
			} else {
				chunk[i] = v.Level(0, level, c)
			}
		}
	})
}

// numbers writes n values of the nullable column c: x as far as it goes and
// where it is a number, else null.
func (t *tableWriter) numbers(c, n int, x []float64, thin bool) error {
	level, null := t.level(c), parquet.NullValue().Level(0, 0, c)
	return t.put(c, n, func(chunk []parquet.Value, from int) {
		have := x[min(from, len(x)):]
		for i := range chunk {
			switch {
			case i >= len(have) || math.IsNaN(have[i]):
				chunk[i] = null
			case thin:
				chunk[i] = parquet.FloatValue(float32(have[i])).Level(0, level, c)
			default:
				chunk[i] = parquet.DoubleValue(have[i]).Level(0, level, c)
			}
		}
	})
}

// level is the definition level of a value of column c that is there.
func (t *tableWriter) level(c int) int {
	if t.specs[c].node.Optional() {
		return 1
	}
	return 0
}

// numberOrNull returns x, or null where it is NaN.
func numberOrNull(x float64) parquet.Value {
	if math.IsNaN(x) {
		return parquet.NullValue()
	}
	return parquet.DoubleValue(x)
}

// textOrNull returns s, or null where it is empty.
func textOrNull(s string) parquet.Value {
	if s == "" {
		return parquet.NullValue()
	}
	return parquet.ByteArrayValue([]byte(s))
}

func sortedKeys[V any](m map[string]V) []string { return slices.Sorted(maps.Keys(m)) }

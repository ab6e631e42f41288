package store

import (
	"errors"
	"fmt"
	"io"
	"math/big"
	"unicode/utf8"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/format"

	"soctrial/benches/scenario"
)

// values is one column in memory, a value a row: in the slice of its kind, with
// a zero value where null says that nothing stands.
type values struct {
	kind  scenario.Kind
	nums  []float64
	ints  []int64
	texts []string
	null  []bool // nil: none
}

// isNull tells whether nothing stands in row i.
func (v *values) isNull(i int) bool { return v.null != nil && v.null[i] }

// at returns what stands in row i. A NaN is a value, not a null.
func (v *values) at(i int) scenario.Value {
	switch {
	case v.isNull(i):
		return scenario.NullValue(v.kind)
	case v.kind == scenario.Int:
		return scenario.IntValue(v.ints[i])
	case v.kind == scenario.Text:
		return scenario.TextValue(v.texts[i])
	}
	return scenario.Value{Kind: scenario.Number, Number: v.nums[i]}
}

func (v *values) len() int { return max(len(v.nums), len(v.ints), len(v.texts)) }

// read returns the whole column; the row groups from to to (excluded) only.
func (t *table) read(f *field, from, to int) (*values, error) {
	if f.refused != "" {
		return nil, t.errf("column %q holds %s; plain numbers or texts are read", f.name, f.refused)
	}
	r := &columnReader{t: t, f: f, out: &values{kind: f.kind}, known: map[string]string{}}
	for g := from; g < to; g++ {
		if err := r.group(g); err != nil {
			return nil, err
		}
	}
	return r.out, nil
}

// readAll is read over all row groups.
func (t *table) readAll(f *field) (*values, error) { return t.read(f, 0, len(t.file.RowGroups())) }

type columnReader struct {
	t     *table
	f     *field
	out   *values
	known map[string]string // texts seen, so that equal ones share memory
	work  values            // one page or dictionary, decoded
	// entries is the dictionary that work holds; nil: a page.
	entries parquet.Dictionary
}

func (r *columnReader) group(g int) error {
	if err := r.t.checkChunk(g, r.f); err != nil {
		return err
	}
	pages := r.t.file.RowGroups()[g].ColumnChunks()[r.f.leaf].Pages()
	defer pages.Close()
	before, rows := r.out.len(), int(r.t.file.Metadata().RowGroups[g].NumRows)
	for r.out.len()-before < rows {
		p, err := pages.ReadPage()
		if errors.Is(err, io.EOF) {
			break
		}
		if err == nil {
			err = r.page(p)
			parquet.Release(p)
		}
		if err != nil {
			return r.t.errf("column %q, at or after row %d: %w", r.f.name, r.out.len(), err)
		}
	}
	if n := r.out.len() - before; n != rows {
		return r.t.errf("column %q, row group %d: the file is damaged: %d values for %d rows", r.f.name, g, n, rows)
	}
	return nil
}

var errPage = errors.New("the file is damaged: a page contradicts its header")

// page appends one page.
func (r *columnReader) page(p parquet.Page) error {
	present := int(p.NumValues())
	levels := p.DefinitionLevels()
	if r.f.optional {
		if len(levels) != present {
			return errPage
		}
		present = 0
		for _, l := range levels {
			if l > 1 {
				return errPage
			}
			present += int(l)
		}
	} else {
		levels = nil
	}
	data := p.Data()
	if d := p.Dictionary(); d != nil {
		indexes := data.Int32()
		if d != r.entries {
			entries := d.Page().Data()
			if err := r.decode(&entries); err != nil {
				return err
			}
			r.entries = d
		}
		return r.spread(indexes, len(indexes), present, levels)
	}
	r.entries = nil
	if err := r.decode(&data); err != nil {
		return err
	}
	return r.spread(nil, r.work.len(), present, levels)
}

// spread appends the decoded values, looked up by index where there are
// indexes, and zero values where the levels say null.
func (r *columnReader) spread(indexes []int32, have, present int, levels []byte) error {
	if have != present {
		return errPage
	}
	w, out := &r.work, r.out
	if levels != nil && present < len(levels) && out.null == nil {
		out.null = make([]bool, out.len(), out.len()+len(levels))
	}
	var err error
	switch out.kind {
	case scenario.Int:
		out.ints, err = place(out.ints, w.ints, indexes, levels)
	case scenario.Text:
		out.texts, err = place(out.texts, w.texts, indexes, levels)
	default:
		out.nums, err = place(out.nums, w.nums, indexes, levels)
	}
	if out.null != nil && err == nil {
		for _, l := range levels {
			out.null = append(out.null, l == 0)
		}
		for len(out.null) < out.len() {
			out.null = append(out.null, false)
		}
	}
	return err
}

func place[T any](dst, from []T, indexes []int32, levels []byte) ([]T, error) {
	if indexes == nil && levels == nil {
		return append(dst, from...), nil
	}
	var zero T
	next := 0
	one := func() error {
		i := next
		if next++; indexes != nil {
			i = int(indexes[i])
		}
		if i < 0 || i >= len(from) {
			return errPage
		}
		dst = append(dst, from[i])
		return nil
	}
	if levels == nil {
		for range indexes {
			if err := one(); err != nil {
				return dst, err
			}
		}
		return dst, nil
	}
	for _, l := range levels {
		if l == 0 {
			dst = append(dst, zero)
		} else if err := one(); err != nil {
			return dst, err
		}
	}
	return dst, nil
}

// decode makes plain values of a page's or a dictionary's data.
func (r *columnReader) decode(data values8) error {
	w := &r.work
	w.nums, w.ints, w.texts = w.nums[:0], w.ints[:0], w.texts[:0]
	switch r.f.physical {
	case format.Double:
		w.nums = append(w.nums, data.Double()...)
	case format.Float:
		for _, x := range data.Float() {
			w.nums = append(w.nums, float64(x))
		}
	case format.Int32:
		for _, x := range data.Int32() {
			n := int64(x)
			if r.f.unsigned {
				n = int64(uint32(x))
			}
			r.whole(n)
		}
	case format.Int64:
		for _, n := range data.Int64() {
			if n < 0 && r.f.unsigned && r.f.name != seedColumn {
				return fmt.Errorf("%d is beyond 63 bits", uint64(n))
			}
			r.whole(n)
		}
	case format.ByteArray:
		bytes, ends := data.ByteArray()
		for i := 0; i+1 < len(ends); i++ {
			if ends[i] > ends[i+1] || int(ends[i+1]) > len(bytes) {
				return errPage
			}
			if err := r.bytes(bytes[ends[i]:ends[i+1]]); err != nil {
				return err
			}
		}
	case format.FixedLenByteArray:
		bytes, size := data.FixedLenByteArray()
		if size != r.f.length || len(bytes)%size != 0 {
			return errPage
		}
		for i := 0; i < len(bytes); i += size {
			if err := r.bytes(bytes[i : i+size]); err != nil {
				return err
			}
		}
	}
	return nil
}

// values8 is the part of the library's typed values that is used here.
type values8 interface {
	Double() []float64
	Float() []float32
	Int32() []int32
	Int64() []int64
	ByteArray() ([]byte, []uint32)
	FixedLenByteArray() ([]byte, int)
}

// seedColumn holds 64 bits: an unsigned seed keeps its bits in an int64.
const seedColumn = "seed"

// whole adds a whole number, or the mantissa of a decimal.
func (r *columnReader) whole(n int64) {
	if r.out.kind == scenario.Int {
		r.work.ints = append(r.work.ints, n)
		return
	}
	r.work.nums = append(r.work.nums, scaled(big.NewInt(n), r.f.scale))
}

// bytes adds a text, the mantissa of a decimal, or a half-precision number.
func (r *columnReader) bytes(b []byte) error {
	switch {
	case r.f.decimal:
		return r.decimal(b)
	case r.f.half:
		r.work.nums = append(r.work.nums, half(b))
		return nil
	}
	s, ok := r.known[string(b)]
	if !ok {
		if !utf8.Valid(b) {
			return errors.New("a text is not UTF-8")
		}
		s = string(b)
		r.known[s] = s
	}
	r.work.texts = append(r.work.texts, s)
	return nil
}

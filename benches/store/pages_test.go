package store

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/klauspost/compress/zstd"
	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/compress"
	"github.com/parquet-go/parquet-go/format"
)

// streamed packs by zstd without a content size, in several blocks, as
// streaming writers do.
type streamed struct{ compress.Codec }

func (streamed) Encode(dst, src []byte) ([]byte, error) {
	b := bytes.NewBuffer(dst[:0])
	w, err := zstd.NewWriter(b)
	if err != nil {
		return nil, err
	}
	_, e1 := w.Write(src[:len(src)/2])
	e2 := w.Flush()
	_, e3 := w.Write(src[len(src)/2:])
	err = errors.Join(e1, e2, e3, w.Close())
	return b.Bytes(), err
}

// Every encoding and compression, pages of any size, dictionaries that are
// given up half-way: the same values.
func TestEncodings(t *testing.T) {
	type row struct {
		named
		SOC  float64  `parquet:"soc_start"`
		Site string   `parquet:"site,dict"`
		Week int64    `parquet:"label_week,delta"`
		Note string   `parquet:"note,delta"`
		OCV  *float64 `parquet:"ocv_offset_v,optional,dict"`
		R0   float32  `parquet:"r0_scale,split"`
	}
	rows := make([]row, 3000)
	rng := rand.New(rand.NewPCG(4, 2))
	for i := range rows {
		rows[i] = row{named: one(float64(i)), SOC: rng.Float64(), Site: fmt.Sprint("quay ", rng.Uint64()), Week: int64(rng.Uint32()),
			Note: fmt.Sprint(rng.Uint32N(9), " rounds"), R0: rng.Float32()}
		if i%3 > 0 {
			x := rng.NormFloat64()
			rows[i].OCV = &x
		}
	}
	for name, options := range map[string][]parquet.WriterOption{
		"plain":           {parquet.Compression(&parquet.Uncompressed)},
		"snappy":          {parquet.Compression(&parquet.Snappy)},
		"gzip, old pages": {parquet.Compression(&parquet.Gzip), parquet.DataPageVersion(1)},
		"brotli":          {parquet.Compression(&parquet.Brotli)},
		"zstd":            {parquet.Compression(&parquet.Zstd), parquet.DataPageVersion(1)},
		"zstd, no size":   {parquet.Compression(streamed{&parquet.Zstd})},
		"small pages":     {parquet.Compression(&parquet.Gzip), parquet.PageBufferSize(257), parquet.MaxRowsPerRowGroup(777)},
		"dictionary lost": {parquet.Compression(&parquet.Zstd), parquet.PageBufferSize(4000), parquet.DictionaryMaxBytes(1000)},
	} {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "set.parquet")
			err := WriteFile(path, func(w io.Writer) error {
				p := parquet.NewGenericWriter[row](w, options...)
				for k, v := range setMeta() {
					p.SetKeyValueMetadata(k, v)
				}
				for from := 0; from < len(rows); from += 500 {
					if _, err := p.Write(rows[from : from+500]); err != nil {
						return err
					}
				}
				return p.Close()
			})
			if err != nil {
				t.Fatal(err)
			}
			s, err := ReadSet(path)
			if err != nil {
				t.Fatal(err)
			}
			for i, want := range rows {
				got, ocv := s.Rows[i], 0.0
				if want.OCV != nil {
					ocv = *want.OCV
				}
				if got.ID != int64(i) || got.SOCStart != want.SOC || got.OCVOffsetV != ocv || got.R0Scale != float64(want.R0) ||
					got.Labels[0].Text != want.Site || got.Labels[1].Number != float64(want.Week) || got.Labels[2].Text != want.Note {
					t.Fatalf("row %d: read %+v, written %+v", i, got, want)
				}
			}
		})
	}
}

// bomb packs a page together with far more than the page's header states.
type bomb struct{ compress.Codec }

func (b bomb) Encode(dst, src []byte) ([]byte, error) {
	return b.Codec.Encode(dst, append(bytes.Clone(src), make([]byte, 1<<20)...))
}

// A page that unpacks to more than it states is refused before it is unpacked.
func TestPagesBeyondTheirSize(t *testing.T) {
	for name, codec := range map[string]compress.Codec{"snappy": &parquet.Snappy, "gzip": &parquet.Gzip, "zstd": &parquet.Zstd, "zstd, no size": streamed{&parquet.Zstd}} {
		path := filepath.Join(t.TempDir(), "set.parquet")
		err := WriteFile(path, func(w io.Writer) error {
			p := parquet.NewGenericWriter[named](w, parquet.Compression(bomb{codec}))
			for k, v := range setMeta() {
				p.SetKeyValueMetadata(k, v)
			}
			_, err := p.Write([]named{one(1)})
			return errors.Join(err, p.Close())
		})
		if err != nil {
			t.Fatal(err)
		}
		if _, err := ReadSet(path); err == nil || !strings.Contains(err.Error(), "a page does not unpack to the size it states") {
			t.Errorf("%s: %v", name, err)
		}
	}
}

type float16 struct{ parquet.Type }

func (float16) LogicalType() *format.LogicalType {
	return &format.LogicalType{Value: new(format.Float16Type)}
}

// Half-precision numbers, by the worked examples of IEEE 754 binary16 (from memory).
func TestHalfPrecision(t *testing.T) {
	for bits, want := range map[uint16]float64{0x0000: 0, 0x3c00: 1, 0xc000: -2, 0x7bff: 65504, 0x0400: 0x1p-14, 0x0001: 0x1p-24,
		0x3555: 0.333251953125, 0x7c00: math.Inf(1), 0xfc00: math.Inf(-1)} {
		if got := half([]byte{byte(bits), byte(bits >> 8)}); got != want {
			t.Errorf("%04x: read %g, stands for %g", bits, got, want)
		}
	}
	if got := half([]byte{1, 0x7c}); !math.IsNaN(got) {
		t.Errorf("7c01: read %g, stands for NaN", got)
	}
	path := filepath.Join(t.TempDir(), "set.parquet")
	specs := []columnSpec{ints("scenario_id"), ints("seed"), texts("cell"), texts("duty"), texts("sensors"),
		{"ocv_offset_v", parquet.Leaf(float16{parquet.FixedLenByteArrayType(2)})}}
	row := []parquet.Value{parquet.Int64Value(1), parquet.Int64Value(2), parquet.ByteArrayValue([]byte("sweeper")), parquet.ByteArrayValue([]byte("rounds")),
		parquet.ByteArrayValue([]byte("pack")), parquet.FixedLenByteArrayValue([]byte{0x55, 0xb5})}
	err := WriteFile(path, func(w io.Writer) error {
		p := newTableWriter(w, "set", specs, setMeta())
		for c, v := range row {
			if err := p.column(c, 1, func(int) parquet.Value { return v }); err != nil {
				return err
			}
		}
		return p.w.Close()
	})
	if err != nil {
		t.Fatal(err)
	}
	if s, err := ReadSet(path); err != nil || s.Rows[0].OCVOffsetV != -0.333251953125 {
		t.Errorf("%+v %v", s, err)
	}
}

// Bytes of results and traces flipped, every one: an error that names the
// file, or rows; never a panic.
func TestFlippedBytes(t *testing.T) {
	results := func(t *table) error { return second2(readResults(t)) }
	traces := func(t *table) error {
		held, err := listTraces(t)
		for _, k := range held {
			if _, err := readTrace(t, k.ScenarioID, k.Estimator); err != nil {
				return err
			}
		}
		return err
	}
	for name, f := range map[string]struct {
		whole []byte
		read  func(*table) error
	}{"results.parquet": {smallResults(t), results}, "traces.parquet": {smallTraces(t), traces}} {
		for at := range f.whole {
			b := bytes.Clone(f.whole)
			b[at] ^= 0xff
			err := withInput(name, bytes.NewReader(b), int64(len(b)), tight, f.read)
			if err != nil && !strings.HasPrefix(err.Error(), "store: "+name+": ") {
				t.Fatalf("%s, byte %d: %v", name, at, err)
			}
		}
	}
}

func second2[A, B any](_ A, _ B, err error) error { return err }

// An empty set is nothing to run; empty results and traces are parts of a run
// that was interrupted at once.
func TestNoRows(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "set.parquet")
	if err := WriteSet(path, sweeperSet(0)); err == nil || !strings.Contains(err.Error(), path+": the set has no rows") {
		t.Error(err)
	}
	if left, err := os.ReadDir(dir); err != nil || len(left) != 0 {
		t.Errorf("left %v %v", left, err)
	}
	path = filepath.Join(dir, "traces.parquet")
	w, err := NewTraceWriter(path, false, TraceMeta{})
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	if held, err := ListTraces(path); err != nil || len(held) != 0 {
		t.Error(held, err)
	}
	if _, err := ReadTraces(path, 1, "ekf"); err == nil || !strings.Contains(err.Error(), "the file holds none") {
		t.Error(err)
	}
}

package store

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"os"
	"runtime/debug"
	"slices"
	"strings"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/format"
)

// bounds limit what a file may ask for before it is believed.
type bounds struct {
	rows      int64 // of the whole table
	pageBytes int64 // of one page, unpacked
}

// usual bounds: more rows than any bench runs or traces in one file, and a
// page sixteen times the size common writers stop at.
var usual = bounds{rows: 1 << 31, pageBytes: 1 << 28}

// table is an open Parquet file of flat columns.
type table struct {
	path   string
	file   *parquet.File
	input  io.ReaderAt
	size   int64
	limit  bounds
	unpack unpacker
	rows   int64
	fields []field // in the file's order
	meta   map[string]string
}

// errf is an error about the file.
func (t *table) errf(f string, args ...any) error {
	return fmt.Errorf("store: %s: %w", t.path, fmt.Errorf(f, args...))
}

// fenced runs f and turns a panic of the Parquet library, or a fault in its
// assembly, into an error about the file at path. Damaged headers cause both.
func fenced(path string, f func() error) (err error) {
	defer debug.SetPanicOnFault(debug.SetPanicOnFault(true))
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("store: %s: the file is damaged: %v", path, r)
		}
	}()
	return f()
}

// fencedWrite is fenced for writing.
func fencedWrite(f func() error) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("the Parquet library cannot write this: %v", r)
		}
	}()
	return f()
}

// withTable opens the file at path, runs f inside the fence and closes it.
func withTable(path string, f func(*table) error) error {
	in, err := os.Open(path)
	if err != nil {
		return fmt.Errorf("store: %w", err)
	}
	defer in.Close()
	info, err := in.Stat()
	if err != nil {
		return fmt.Errorf("store: %w", err)
	}
	if info.IsDir() {
		return fmt.Errorf("store: %s is a folder; a Parquet file is needed", path)
	}
	return withInput(path, in, info.Size(), usual, f)
}

// withInput is withTable on bytes that are open already.
func withInput(path string, in io.ReaderAt, size int64, limit bounds, f func(*table) error) error {
	return fenced(path, func() error {
		t, err := openTable(path, in, size, limit)
		if err != nil {
			return err
		}
		return f(t)
	})
}

const magic = "PAR1"

// openTable reads the footer, and refuses a file whose parts contradict each other.
func openTable(path string, in io.ReaderAt, size int64, limit bounds) (*table, error) {
	t := &table{path: path, input: in, size: size, limit: limit, meta: map[string]string{}}
	if size == 0 {
		return nil, t.errf("the file is empty; a Parquet file is needed")
	}
	var head [4]byte
	if _, err := in.ReadAt(head[:], 0); size < 12 || err != nil || string(head[:]) != magic {
		return nil, t.errf("not a Parquet file: it begins with %q, a Parquet file with %q", head[:min(size, 4)], magic)
	}
	var tail [8]byte
	if _, err := in.ReadAt(tail[:], size-8); err != nil {
		return nil, t.errf("%w", err)
	}
	length := int64(binary.LittleEndian.Uint32(tail[:4]))
	if string(tail[4:]) != magic || length > size-12 {
		return nil, t.errf("the Parquet file is truncated or damaged: it does not end as one")
	}
	footer := make([]byte, length)
	if _, err := in.ReadAt(footer, size-8-length); err != nil {
		return nil, t.errf("%w", err)
	}
	if n, err := skim(footer); err != nil || n != len(footer) {
		return nil, t.errf("the file is damaged: its footer cannot be read")
	}
	file, err := parquet.OpenFile(in, size, parquet.SkipPageIndex(true), parquet.SkipBloomFilters(true), parquet.ReadBufferSize(1<<16))
	if err != nil {
		return nil, t.errf("the file is damaged: %w", err)
	}
	t.file = file
	if err := t.readSchema(file.Metadata()); err != nil {
		return nil, err
	}
	for _, kv := range file.Metadata().KeyValueMetadata {
		if _, twice := t.meta[kv.Key]; twice && strings.HasPrefix(kv.Key, prefix) {
			return nil, t.errf("metadata %s stands there twice", kv.Key)
		}
		t.meta[kv.Key] = kv.Value
	}
	return t, nil
}

// readSchema lists the columns and holds what the schema, the row groups and
// the column chunks say against each other: in a damaged file they differ.
func (t *table) readSchema(m *format.FileMetaData) error {
	leaf := 0
	for at := 1; at < len(m.Schema); {
		f := newField(&m.Schema[at], leaf)
		if slices.ContainsFunc(t.fields, func(g field) bool { return g.name == f.name }) {
			return t.errf("two columns are called %q", f.name)
		}
		end, leaves := subtree(m.Schema, at)
		t.fields = append(t.fields, f)
		at, leaf = end, leaf+leaves
	}
	for g := range m.RowGroups {
		rg := &m.RowGroups[g]
		if rg.NumRows < 0 || len(rg.Columns) != leaf {
			return t.errf("the file is damaged: row group %d has %d columns, the schema %d", g, len(rg.Columns), leaf)
		}
		t.rows += rg.NumRows
		if t.rows < 0 || t.rows > t.limit.rows {
			return t.errf("more than %d rows", t.limit.rows)
		}
	}
	if t.rows != m.NumRows {
		return t.errf("the file is damaged: it says %d rows, its row groups hold %d", m.NumRows, t.rows)
	}
	return nil
}

// subtree returns where the element after at's whole subtree stands, and how
// many leaves it has.
func subtree(s []format.SchemaElement, at int) (end, leaves int) {
	for open := 1; open > 0 && at < len(s); at++ {
		children := 0
		if n := s[at].NumChildren; n.Valid {
			children = int(n.V)
		}
		if children == 0 {
			leaves++
		}
		open += children - 1
	}
	return at, leaves
}

// find returns the column called name.
func (t *table) find(name string) (*field, bool) {
	for i := range t.fields {
		if t.fields[i].name == name {
			return &t.fields[i], true
		}
	}
	return nil, false
}

// names lists the columns.
func (t *table) names() []string {
	out := make([]string, len(t.fields))
	for i := range t.fields {
		out[i] = t.fields[i].name
	}
	return out
}

// prefix begins every metadata key of ours, hashSuffix ends that of a hash.
const (
	prefix     = "soctrial."
	hashSuffix = ".sha256"
	formatKey  = prefix + "format"
)

// requireFormat refuses a file of another kind, or one that names none.
func (t *table) requireFormat(want string) error {
	switch have, ok := t.meta[formatKey]; {
	case !ok:
		return t.errf("metadata %s is missing; it must be %q (a program that writes such a file sets it as key-value metadata)", formatKey, want)
	case have != want:
		return t.errf("metadata %s is %q; %q is needed here", formatKey, have, want)
	}
	return nil
}

// checkHashes holds each of our texts against the hash beside it.
func (t *table) checkHashes() error {
	for _, key := range sortedKeys(t.meta) {
		of, isHash := strings.CutSuffix(key, hashSuffix)
		if !isHash || !strings.HasPrefix(key, prefix) || key == setHashKey {
			continue
		}
		text, ok := t.meta[of]
		if !ok {
			return t.errf("metadata %s is the hash of %s, which is missing", key, of)
		}
		if want, have := strings.ToLower(strings.TrimSpace(t.meta[key])), hashOf([]byte(text)); want != have {
			return t.errf("metadata %s has the hash %s, but %s says %s: the text was changed or damaged after it was hashed", of, have, key, want)
		}
	}
	return nil
}

// hashOf returns the SHA-256 of b in lower-case hexadecimal.
func hashOf(b []byte) string {
	h := sha256.Sum256(b)
	return hex.EncodeToString(h[:])
}

// hash returns the SHA-256 of the file's bytes.
func (t *table) hash() (string, error) {
	h := sha256.New()
	if n, err := io.Copy(h, io.NewSectionReader(t.input, 0, t.size)); err != nil || n != t.size {
		return "", t.errf("%w", errors.Join(err, io.ErrUnexpectedEOF))
	}
	return hex.EncodeToString(h.Sum(nil)), nil
}

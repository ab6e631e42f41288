package store

import (
	"bytes"
	"errors"
	"io"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"syscall"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"soctrial/benches/score"
)

// smallSet is the bytes of a set that uses every kind of column.
func smallSet(t testing.TB) []byte {
	t.Helper()
	s := sweeperSet(3)
	s.Rows[0].Group, s.Rows[1].Override[0], s.Rows[2].CurrentReading = "aged", 0.5, "interval-mean"
	path := filepath.Join(t.TempDir(), "set.parquet")
	if err := WriteSet(path, s); err != nil {
		t.Fatal(err)
	}
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func smallResults(t testing.TB) []byte {
	t.Helper()
	path := filepath.Join(t.TempDir(), "results.parquet")
	m := score.Nothing()
	m.SOCRMSE, m.Samples = 0.01, 3600
	rows := []score.Result{{ScenarioID: 1, Cell: "sweeper", Duty: "rounds", Sensors: "pack", Estimator: "ekf", Status: score.OK, Metrics: m},
		{ScenarioID: 2, Cell: "sweeper", Duty: "rounds", Sensors: "pack", Estimator: "ekf", Status: score.Failed, Reason: "power", Metrics: score.Nothing()}}
	if err := WriteResults(path, rows, someMeta()); err != nil {
		t.Fatal(err)
	}
	b, _ := os.ReadFile(path)
	return b
}

func smallTraces(t testing.TB) []byte {
	t.Helper()
	path := filepath.Join(t.TempDir(), "traces.parquet")
	w, err := NewTraceWriter(path, false, TraceMeta{})
	if err != nil {
		t.Fatal(err)
	}
	if err := errors.Join(w.Append(1, "ekf", 0, someTrace(0, 9, 0)), w.Close()); err != nil {
		t.Fatal(err)
	}
	b, _ := os.ReadFile(path)
	return b
}

// tight bounds keep a test's memory small whatever a file asks for.
var tight = bounds{rows: 1 << 16, pageBytes: 1 << 20}

func setOf(b []byte) (s *SetFile, err error) {
	err = withInput("set.parquet", bytes.NewReader(b), int64(len(b)), tight, func(t *table) (err error) {
		s, err = readSet(t)
		return err
	})
	return s, err
}

// A bit of every byte of a small file flipped: an error that names the file, or
// the same content. Never a panic and never another content, but for the one
// thing that nothing in a Parquet file says twice: the key of a text.
func TestFlippedBits(t *testing.T) {
	whole := smallSet(t)
	want, err := setOf(whole)
	if err != nil {
		t.Fatal(err)
	}
	refused := 0
	for at := range whole {
		for _, bit := range []int{at % 8} { // a bit a byte, each kind of bit in turn
			b := bytes.Clone(whole)
			b[at] ^= 1 << bit
			got, err := setOf(b)
			if err != nil {
				refused++
				if !strings.HasPrefix(err.Error(), "store: set.parquet: ") {
					t.Fatalf("byte %d bit %d: %v", at, bit, err)
				}
				continue
			}
			if d := cmp.Diff(want.Rows, got.Rows, cmpopts.EquateNaNs()); d != "" {
				t.Fatalf("byte %d (%q) bit %d: read as another set\n%s", at, whole[max(0, at-8):at+8], bit, d)
			}
			for k, text := range got.Texts {
				if was, ok := want.Texts[k]; ok && was != text {
					t.Fatalf("byte %d bit %d: text %s changed", at, bit, k)
				}
			}
		}
	}
	t.Logf("%d of %d flips refused, the others changed nothing", refused, len(whole))
}

func TestTruncated(t *testing.T) {
	for name, whole := range map[string][]byte{"set": smallSet(t), "results": smallResults(t), "traces": smallTraces(t)} {
		for n := range len(whole) {
			err := withInput("x", bytes.NewReader(whole[:n]), int64(n), tight, func(*table) error { return nil })
			if err == nil {
				t.Fatalf("%s cut to %d of %d bytes was opened", name, n, len(whole))
			}
		}
	}
}

func TestNotParquet(t *testing.T) {
	for _, c := range []struct{ content, want string }{
		{"", "the file is empty"},
		{"PAR", "not a Parquet file"},
		{"time_s,current_a,voltage_v\n", `not a Parquet file: it begins with "time"`},
		{"PAR1 and then nothing of it", "truncated or damaged"},
	} {
		path := put(t, "x.parquet", c.content)
		for read, err := range map[string]error{
			"set":     second(ReadSet(path)),
			"traces":  second(ListTraces(path)),
			"results": func() error { _, _, err := ReadResults(path); return err }(),
		} {
			if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), path) {
				t.Errorf("%s of %q: %v", read, c.content, err)
			}
		}
	}
	dir := t.TempDir()
	if _, err := ReadSet(dir); err == nil || !strings.Contains(err.Error(), "is a folder") {
		t.Error(err)
	}
	if _, err := ReadSet(filepath.Join(dir, "absent")); !errors.Is(err, os.ErrNotExist) {
		t.Error(err)
	}
}

func second[T any](_ T, err error) error { return err }

// full is a disk with room for some bytes only.
type full struct {
	w    io.Writer
	room int
}

var errFull = errors.New("no space left on device")

func (f *full) Write(b []byte) (int, error) {
	n := min(len(b), f.room)
	f.room -= n
	if n, err := f.w.Write(b[:n]); err != nil || n < len(b) {
		return n, errFull
	}
	return n, nil
}

// A disk that fills up at any byte leaves the old file and nothing else.
func TestDiskFull(t *testing.T) {
	s := sweeperSet(3)
	for name, write := range map[string]func(disk, string) error{
		"set.parquet":     func(d disk, path string) error { return writeSet(d, path, s) },
		"results.parquet": func(d disk, path string) error { return writeResults(d, path, nil, someMeta()) },
		"traces.parquet": func(d disk, path string) error {
			w, err := newTraceWriter(d, path, false, TraceMeta{})
			if err != nil {
				return err
			}
			return errors.Join(w.Append(1, "ekf", 0, someTrace(0, 99, 0)), w.Close())
		},
	} {
		dir := t.TempDir()
		path := filepath.Join(dir, name)
		if err := write(disk{}, path); err != nil {
			t.Fatal(err)
		}
		whole, _ := os.ReadFile(path)
		if err := os.WriteFile(path, []byte("old"), 0o644); err != nil {
			t.Fatal(err)
		}
		for _, room := range []int{0, 1, len(whole) / 2, len(whole) - 1} {
			err := write(disk{through: func(w io.Writer) io.Writer { return &full{w, room} }}, path)
			if !errors.Is(err, errFull) || !strings.Contains(err.Error(), path) {
				t.Errorf("%s with room for %d: %v", name, room, err)
			}
			left, _ := os.ReadDir(dir)
			old, _ := os.ReadFile(path)
			if len(left) != 1 || string(old) != "old" {
				t.Errorf("%s with room for %d: left %v, file %q", name, room, left, old)
			}
		}
		if err := write(disk{through: func(w io.Writer) io.Writer { return &full{w, len(whole)} }}, path); err != nil {
			t.Errorf("%s with room enough: %v", name, err)
		}
		if info, _ := os.Stat(path); info.Mode().Perm() != 0o644 {
			t.Errorf("%s has mode %v", name, info.Mode())
		}
	}
}

func TestNoPlaceToWrite(t *testing.T) {
	dir := t.TempDir()
	nothing := func(io.Writer) error { return nil }
	if err := WriteFile(dir, nothing); err == nil || !strings.Contains(err.Error(), "is a folder") {
		t.Error(err)
	}
	if err := WriteFile(filepath.Join(dir, "absent", "x"), nothing); !errors.Is(err, os.ErrNotExist) || !strings.Contains(err.Error(), "cannot write "+dir) {
		t.Error(err)
	}
	// /proc takes no files, whoever asks; a folder without the right to write
	// does not stop root, as whom tests may run.
	if err := WriteFile("/proc/soctrial.parquet", nothing); err == nil || !strings.Contains(err.Error(), "cannot write /proc/soctrial.parquet") {
		t.Error(err)
	}
	locked := filepath.Join(dir, "locked")
	if err := os.Mkdir(locked, 0o500); err != nil {
		t.Fatal(err)
	}
	err := WriteFile(filepath.Join(locked, "x"), nothing)
	if os.Geteuid() == 0 {
		if err != nil {
			t.Error(err)
		}
	} else if !errors.Is(err, os.ErrPermission) {
		t.Error(err)
	}
}

// A folder that cannot be synced is no failure of the file in it; a disk that
// fails is.
func TestCannotSync(t *testing.T) {
	for err, want := range map[error]bool{syscall.EINVAL: true, syscall.ENOTSUP: true, syscall.EACCES: true, syscall.EIO: false, syscall.ENOSPC: false} {
		if got := cannotSync(errors.Join(&os.PathError{Op: "sync", Path: ".", Err: err}, nil)); got != want {
			t.Errorf("%v: passed over is %v", err, got)
		}
	}
}

// A panic while writing leaves nothing behind either.
func TestPanicWhileWriting(t *testing.T) {
	dir := t.TempDir()
	func() {
		defer func() {
			if recover() == nil {
				t.Error("the panic was swallowed")
			}
		}()
		WriteFile(filepath.Join(dir, "x"), func(io.Writer) error { panic("half-way") })
	}()
	if left, _ := os.ReadDir(dir); len(left) != 0 {
		t.Errorf("left %v", left)
	}
}

func TestMetricFieldsStandInOrder(t *testing.T) {
	var m score.Metrics
	v := reflect.ValueOf(&m).Elem()
	if v.NumField() != len(metricFields(&m)) || v.NumField() != len(score.MetricNames()) {
		t.Fatal("a metric is missing here")
	}
	for i, p := range metricFields(&m) {
		if p == nil {
			m.Samples = int64(i)
			continue
		}
		*p = float64(i)
	}
	for i, name := range score.MetricNames() {
		if got, _ := m.Value(name); got != float64(i) {
			t.Errorf("%s stands at %g, not %d", name, got, i)
		}
	}
}

package job

import (
	"cmp"
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"time"

	"soctrial/benches/score"
	"soctrial/benches/store"
)

// Finished rows wait this long, or until there are this many, before they are
// written as a part: a part costs a few milliseconds and a sync of the disk.
const (
	partEvery = 5 * time.Second
	partRows  = 20_000
)

// ledger keeps the finished rows of a run: in memory all of them, on disk as
// parts until they become one file.
type ledger struct {
	folder    *folder
	meta      store.ResultsMeta // what the run is
	total     int
	perRow    int // results a scenario
	rows      map[int64][]score.Result
	pending   []score.Result
	lastWrite time.Time
	nextPart  int
	partRows  int
	now       func() time.Time
}

// readLedger returns the rows an incomplete run left in dir, or why the run
// that is there cannot go on as the one meta describes.
func readLedger(dir string, meta store.ResultsMeta, perRow int) (map[int64][]score.Result, int, error) {
	entries, err := os.ReadDir(filepath.Join(dir, partsDir))
	unfinished := err == nil
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return nil, 0, err
	}
	next := 1
	var files []string
	for _, e := range entries {
		if n, ok := partNumber(e.Name()); ok {
			next = max(next, n+1)
			files = append(files, filepath.Join(dir, partsDir, e.Name()))
		}
	}
	whole := filepath.Join(dir, ResultsFile)
	if _, err := os.Stat(whole); err == nil {
		files = append(files, whole)
	}
	rows := map[int64][]score.Result{}
	for _, path := range files {
		results, found, err := store.ReadResults(path)
		if err != nil {
			return nil, 0, fmt.Errorf("what it holds does not read: %w", err)
		}
		if found.Complete {
			return nil, 0, errors.New("holds a complete run")
		}
		if err := sameRun(meta, found); err != nil {
			return nil, 0, err
		}
		byRow := map[int64][]score.Result{}
		for _, r := range results {
			byRow[r.ScenarioID] = append(byRow[r.ScenarioID], r)
		}
		for id, of := range byRow {
			if len(of) != perRow {
				return nil, 0, fmt.Errorf("%s has %d results of scenario %d, a part of this run has %d", path, len(of), id, perRow)
			}
			rows[id] = of
		}
		unfinished = true
	}
	if !unfinished {
		return nil, 0, errors.New("holds no unfinished run")
	}
	return rows, next, nil
}

// sameRun says in what the run that was found differs from this one.
func sameRun(mine, found store.ResultsMeta) error {
	if mine.SetSHA256 != found.SetSHA256 {
		return errors.New("holds results of another set")
	}
	for _, d := range []struct {
		what        string
		mine, found map[string]string
	}{{"estimator", mine.EstimatorFiles, found.EstimatorFiles}, {"setting", mine.Settings, found.Settings},
		{"program's", map[string]string{"version": mine.Version}, map[string]string{"version": found.Version}}} {
		keys := map[string]bool{}
		for k := range d.mine {
			keys[k] = true
		}
		for k := range d.found {
			keys[k] = true
		}
		for _, k := range slices.Sorted(maps.Keys(keys)) {
			a, inMine := d.mine[k]
			b, inFound := d.found[k]
			if a != b || inMine != inFound {
				return fmt.Errorf("holds an unfinished run whose %s %s is another", d.what, k)
			}
		}
	}
	return nil
}

func partName(n int) string { return fmt.Sprintf("part-%06d.parquet", n) }

func partNumber(name string) (int, bool) {
	var digits string
	if _, err := fmt.Sscanf(name, "part-%6s.parquet", &digits); err != nil {
		return 0, false
	}
	n, err := strconv.Atoi(digits)
	return n, err == nil && partName(n) == name
}

// add takes one finished scenario in and writes a part when it is time.
func (l *ledger) add(results []score.Result) error {
	l.rows[results[0].ScenarioID] = results
	l.pending = append(l.pending, results...)
	if len(l.pending) < l.partRows && l.now().Sub(l.lastWrite) < partEvery {
		return nil
	}
	return l.flush()
}

// flush writes what waits as one part.
func (l *ledger) flush() error {
	l.lastWrite = l.now()
	if len(l.pending) == 0 {
		return nil
	}
	if err := os.MkdirAll(l.folder.parts(), 0o755); err != nil {
		return wrong(err)
	}
	path := filepath.Join(l.folder.parts(), partName(l.nextPart))
	if err := store.WriteResults(path, l.pending, l.withState(false)); err != nil {
		return wrong(err)
	}
	l.nextPart++
	l.pending = l.pending[:0]
	return nil
}

// withState is the metadata with how far the run came.
func (l *ledger) withState(complete bool) store.ResultsMeta {
	m := l.meta
	m.Complete, m.Finished, m.Total = complete, int64(len(l.rows)), int64(l.total)
	return m
}

// ordered returns all rows by scenario, and by estimator as they were run.
func (l *ledger) ordered() []score.Result {
	out := make([]score.Result, 0, len(l.rows)*l.perRow)
	for _, id := range slices.SortedFunc(maps.Keys(l.rows), cmp.Compare[int64]) {
		out = append(out, l.rows[id]...)
	}
	return out
}

// close writes results.parquet from all there is.
func (l *ledger) close(complete bool) error {
	return wrong(store.WriteResults(l.folder.path(ResultsFile), l.ordered(), l.withState(complete)))
}

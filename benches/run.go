// Package benches runs scenarios: each row of a set through plant, sensors and
// every estimator, block by block, to one result a row and estimator.
//
// A scenario's truth and readings are made once and every estimator is fed the
// very same ones, so that differences between estimators are not differences of
// luck. Results are a function of the row alone: the number of workers, the
// order in which they finish and the length of a block change nothing.
//
// The package opens no file and reads no clock; whoever calls it may hand in
// one. A panic in one scenario becomes a failed row and the bench goes on.
package benches

import (
	"context"
	"fmt"
	"runtime"
	"sync"
	"sync/atomic"

	"soctrial/benches/scenario"
	"soctrial/benches/score"
	"soctrial/estimator"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

// BlockLen is how many samples go through the chain at once: long enough to
// spread the cost of a call, short enough that all columns stay in the nearest
// caches.
const BlockLen = 256

// Job is a bench to run.
type Job struct {
	Set        *scenario.Set
	Estimators []estimator.Spec
	Build      func(estimator.Setup) (estimator.Estimator, error)
	Workers    int                 // 0: as many as there are processors
	Done       func(id int64) bool // rows to leave out; nil: none
	Nanotime   func() int64        // a clock to measure each estimator's cost with; nil: costs are 0
}

// Finished is one scenario that has been run.
type Finished struct {
	Index   int            // of the row in the set
	Results []score.Result // one an estimator, in the job's order
	Costs   []Cost         // one an estimator
	Notices []string       // what the plant has to tell
}

// Cost is what an estimator's arithmetic took.
type Cost struct {
	Samples int64
	Nanos   int64
}

// Run runs the job. It calls emit once a finished scenario, from one goroutine
// at a time, in the order they finish, and stops at emit's first error. When
// ctx ends it drops what is half-way and returns ctx's error.
func Run(ctx context.Context, j Job, emit func(Finished) error) error {
	shared, err := j.prepare()
	if err != nil {
		return err
	}
	workers := j.Workers
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	ctx, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)
	var next atomic.Int64
	var lock sync.Mutex
	var all sync.WaitGroup
	for range min(workers, max(1, len(j.Set.Rows))) {
		all.Go(func() {
			w := newWorker(&j, shared)
			for ctx.Err() == nil {
				at := int(next.Add(1)) - 1
				if at >= len(j.Set.Rows) {
					return
				}
				if j.Done != nil && j.Done(j.Set.Rows[at].ID) {
					continue
				}
				f, whole := w.run(ctx, at, nil)
				if !whole {
					return
				}
				lock.Lock()
				if ctx.Err() == nil {
					if err := emit(f); err != nil {
						cancel(err)
					}
				}
				lock.Unlock()
			}
		})
	}
	all.Wait()
	if ctx.Err() != nil {
		return context.Cause(ctx)
	}
	return nil
}

// Trace runs one row of the set again and hands every block to sink.
func Trace(ctx context.Context, j Job, index int, sink func(Block) error) error {
	shared, err := j.prepare()
	if err != nil {
		return err
	}
	w := newWorker(&j, shared)
	_, whole := w.run(ctx, index, sink)
	if w.sinkErr != nil {
		return w.sinkErr
	}
	if !whole {
		return context.Cause(ctx)
	}
	return nil
}

// shared is what all workers read: definitions made ready once.
type shared struct {
	cells    map[string]*cell.Prepared
	own      []*cell.Prepared // an estimator's own cell; nil: the scenario's
	programs map[programKey]*duty.Program
	score    score.Settings
}

type programKey struct{ duty, cell string }

func (j *Job) prepare() (*shared, error) {
	s := &shared{cells: map[string]*cell.Prepared{}, programs: map[programKey]*duty.Program{}}
	s.score = scoreSettings(j.Set.Score)
	for name, c := range j.Set.Cells {
		p, err := cell.Prepare(c)
		if err != nil {
			return nil, fmt.Errorf("cell %s: %w", name, err)
		}
		s.cells[name] = p
	}
	for i := range j.Estimators {
		e := &j.Estimators[i]
		if e.Cell == nil {
			s.own = append(s.own, nil)
			continue
		}
		p, err := cell.Prepare(e.Cell)
		if err != nil {
			return nil, fmt.Errorf("estimator %s: %w", e.Name, err)
		}
		s.own = append(s.own, p)
	}
	for i := range j.Set.Rows {
		r := &j.Set.Rows[i]
		key := programKey{r.Duty, r.Cell}
		if _, ok := s.programs[key]; ok {
			continue
		}
		c, d, sen := j.Set.Cells[r.Cell], j.Set.Duties[r.Duty], j.Set.Sensors[r.Sensors]
		if c == nil || d == nil || sen == nil {
			return nil, fmt.Errorf("scenario %d: cell %q, duty %q or sensors %q is not in the set", r.ID, r.Cell, r.Duty, r.Sensors)
		}
		p, err := duty.Compile(d, c.CapacityAh)
		if err != nil {
			return nil, fmt.Errorf("duty %s with cell %s: %w", r.Duty, r.Cell, err)
		}
		s.programs[key] = p
	}
	return s, nil
}

func scoreSettings(s scenario.ScoreSettings) score.Settings {
	return score.Settings{SettleAfterS: s.SettleAfterS, ConvergeBand: s.ConvergeBand, ConvergeHoldS: s.ConvergeHoldS, LowSOC: s.LowSOC}
}

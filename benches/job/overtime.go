package job

import (
	"context"
	"fmt"
	"math"
	"runtime"
	"slices"
	"sync"
	"time"

	"soctrial/benches"
	"soctrial/benches/roster"
	"soctrial/benches/scenario"
	"soctrial/benches/score"
)

// OverTimeOptions is one call of ErrorsOverTime.
type OverTimeOptions struct {
	SetPath        string
	EstimatorPaths []string // at least one
	EveryS         float64  // an error is kept every so many seconds, > 0
	Workers        int      // 0: as many as there are processors
	Report         Reporter
}

// OverTime is how the size of one estimator's error goes over time on one cell
// under one duty: percentiles over the scenarios that still run, fractions of
// SOC. A lost estimator is infinitely wrong from there on.
type OverTime struct {
	Cell, Duty, Estimator  string
	Scenarios              int // of this cell and duty
	TimeS                  []float64
	P50, P90, P95, Largest []float64
}

// fewestRunning is the least share of the scenarios that must still run
// for percentiles to be told: those that last longest are not like the rest.
const fewestRunning = 0.5

// ErrorsOverTime runs every scenario of a set again and says how the errors
// spread over scenarios at each time: for each cell and duty, in the order of
// the set, each estimator as given.
func ErrorsOverTime(ctx context.Context, o OverTimeOptions) ([]OverTime, error) {
	if !(o.EveryS > 0) {
		return nil, wrongf("errors over time: found every %g s, allowed is > 0", o.EveryS)
	}
	in, err := loadRun(&RunOptions{SetPath: o.SetPath, EstimatorPaths: o.EstimatorPaths, Workers: o.Workers})
	if err != nil {
		return nil, err
	}
	errs, err := followAll(ctx, in, &o)
	if err != nil {
		return nil, err
	}
	var out []OverTime
	for _, kind := range kindsOf(in.set) {
		for e := range in.specs {
			t := OverTime{Cell: kind[0], Duty: kind[1], Estimator: in.specs[e].Name}
			var mine [][]float64
			for i := range in.set.Rows {
				if r := &in.set.Rows[i]; r.Cell == t.Cell && r.Duty == t.Duty {
					mine = append(mine, errs[i][e])
				}
			}
			t.fold(mine, o.EveryS)
			out = append(out, t)
		}
	}
	return out, nil
}

// followAll returns |error| by row, estimator and multiple of EveryS.
func followAll(ctx context.Context, in *runInputs, o *OverTimeOptions) ([][][]float64, error) {
	j := benches.Job{Set: in.set, Estimators: in.specs, Build: roster.New}
	errs := make([][][]float64, len(in.set.Rows))
	workers := o.Workers
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	ctx, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)
	began := time.Now()
	rows := make(chan int)
	var lock sync.Mutex
	var all sync.WaitGroup
	done, samples := 0, int64(0)
	for range workers {
		all.Go(func() {
			for i := range rows {
				of, n, err := follow(ctx, j, i, o.EveryS)
				lock.Lock()
				errs[i], done, samples = of, done+1, samples+n
				if err != nil {
					cancel(fmt.Errorf("scenario %d: %w", in.set.Rows[i].ID, err))
				} else {
					o.Report.progress(Progress{Stage: "errors", Done: done, Total: len(errs), Samples: samples, Elapsed: time.Since(began)})
				}
				lock.Unlock()
			}
		})
	}
	for i := range errs {
		if ctx.Err() != nil {
			break
		}
		rows <- i
	}
	close(rows)
	all.Wait()
	if err := context.Cause(ctx); err != nil {
		if err == context.Canceled {
			err = ErrInterrupted
		}
		return nil, err
	}
	return errs, nil
}

// follow runs one row and keeps an error every everyS seconds.
func follow(ctx context.Context, j benches.Job, index int, everyS float64) (errs [][]float64, samples int64, err error) {
	errs = make([][]float64, len(j.Estimators))
	next := 0.0
	err = benches.Trace(ctx, j, index, func(b benches.Block) error {
		for k, t := range b.Truth.TimeS {
			if t < next*everyS-1e-9 {
				continue
			}
			next = math.Floor(t/everyS+1e-9) + 1
			for e := range errs {
				x := math.Inf(1)
				if k < b.Estimates[e].Len() {
					x = math.Abs(b.Estimates[e].SOC[k] - b.Truth.SOC[k])
				}
				errs[e] = append(errs[e], x)
			}
		}
		samples += int64(len(b.Truth.TimeS) * len(errs))
		return nil
	})
	return errs, samples, err
}

// fold takes percentiles over scenarios at each time.
func (t *OverTime) fold(errs [][]float64, everyS float64) {
	t.Scenarios = len(errs)
	for k := 0; ; k++ {
		var at []float64
		for _, of := range errs {
			if k < len(of) {
				at = append(at, of[k])
			}
		}
		if len(at) == 0 || float64(len(at)) < fewestRunning*float64(len(errs)) {
			return
		}
		slices.Sort(at)
		t.TimeS = append(t.TimeS, float64(k)*everyS)
		t.P50, t.P90, t.P95 = append(t.P50, score.Percentile(at, 0.5)), append(t.P90, score.Percentile(at, 0.9)), append(t.P95, score.Percentile(at, 0.95))
		t.Largest = append(t.Largest, at[len(at)-1])
	}
}

// kindsOf lists the pairs of cell and duty in a set, in its order.
func kindsOf(s *scenario.Set) [][2]string {
	var out [][2]string
	for i := range s.Rows {
		if kind := [2]string{s.Rows[i].Cell, s.Rows[i].Duty}; !slices.Contains(out, kind) {
			out = append(out, kind)
		}
	}
	return out
}

package job

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"time"

	"soctrial/benches"
	"soctrial/benches/roster"
	"soctrial/benches/scenario"
	"soctrial/benches/score"
)

// RunOptions is one call of run.
type RunOptions struct {
	SetPath        string
	EstimatorPaths []string // at least one
	OutDir         string
	PlanPath       string // its [score] and [[limit]] in place of the set's; empty: the set's own
	Workers        int    // 0: as many as there are processors
	Traces         string // none, all, worst:K or scenario ids with commas between; empty: none
	ThinTraces     bool
	Force          bool
	Version        string // of the program, into the metadata
	Report         Reporter

	partRows int // finished rows that make a part; 0: the usual number
}

// Outcome is what a run, or a replay, came to.
type Outcome struct {
	Dir       string // where the files are
	Name      string // of the set or the record
	Set       *scenario.Set
	Results   []score.Result // scenario by scenario, estimators in the order they were given
	Judged    []score.Judgement
	Costs     map[string]benches.Cost // an estimator's arithmetic
	Complete  bool
	Finished  int // scenarios
	Total     int
	Reference string // replay: what the score was taken against
	Elapsed   time.Duration
}

// Broken tells whether a limit failed or cannot be told.
func (o *Outcome) Broken() bool {
	return slices.ContainsFunc(o.Judged, func(j score.Judgement) bool { return j.Verdict != score.Pass })
}

// Run runs a scenario set through estimators and writes results, traces and
// timings into a folder. The same call into an incomplete folder continues it,
// and ends with the same bytes as a run that was never broken off. Where ctx
// ends first, what is finished is written and the error is ErrInterrupted,
// beside an Outcome.
func Run(ctx context.Context, o RunOptions) (*Outcome, error) {
	began := time.Now()
	in, err := loadRun(&o)
	if err != nil {
		return nil, err
	}
	pick, err := parseTraces(o.Traces, in.set)
	if err != nil {
		return nil, err
	}
	var rows map[int64][]score.Result
	next := 1
	resumes := func(dir string) error {
		sum, err := fileHash(filepath.Join(dir, SetFile))
		if err == nil && sum != in.meta.SetSHA256 {
			return errors.New("holds results of another set")
		}
		found, n, err := readLedger(dir, in.meta, len(in.specs))
		if err == nil {
			rows, next = found, n
		}
		return err
	}
	f, err := openFolder(o.OutDir, o.Force, resumes, func(dir string) error {
		return writeBytes(filepath.Join(dir, SetFile), in.setBytes)
	})
	if err != nil {
		return nil, err
	}
	defer f.close()
	if rows == nil {
		rows = make(map[int64][]score.Result, len(in.set.Rows))
	}
	l := &ledger{folder: f, meta: in.meta, total: len(in.set.Rows), perRow: len(in.specs), rows: rows, nextPart: next,
		partRows: cmp.Or(o.partRows, partRows), now: time.Now, lastWrite: began}
	l.pending = make([]score.Result, 0, min(l.total*l.perRow, l.partRows+l.perRow))
	r := &running{o: &o, in: in, ledger: l, began: began, costs: make([]benches.Cost, len(in.specs)), found: len(rows)}
	if r.found > 0 {
		o.Report.warn("continuing %s: %d of %d scenarios were finished already", o.OutDir, r.found, l.total)
	}
	return r.toEnd(ctx, pick)
}

// running is a run under way.
type running struct {
	o      *RunOptions
	in     *runInputs
	ledger *ledger
	began  time.Time
	costs  []benches.Cost
	found  int // scenarios finished before

	samples int64
	notices notices
}

func (r *running) job() benches.Job {
	began := r.began
	return benches.Job{Set: r.in.set, Estimators: r.in.specs, Build: roster.New, Workers: r.o.Workers,
		Nanotime: func() int64 { return int64(time.Since(began)) }}
}

// toEnd runs what is left, traces what is asked and writes all.
func (r *running) toEnd(ctx context.Context, pick tracePick) (*Outcome, error) {
	l := r.ledger
	j := r.job()
	had := make(map[int64]bool, len(l.rows))
	for id := range l.rows {
		had[id] = true
	}
	j.Done = func(id int64) bool { return had[id] }
	err := benches.Run(ctx, j, r.take)
	stopped := err != nil && ctx.Err() != nil && errors.Is(err, context.Cause(ctx))
	if err != nil && !stopped {
		return nil, errors.Join(r.explain(err), l.flush())
	}
	r.notices.tell(&r.o.Report)
	results := l.ordered()
	if !stopped {
		switch err = r.traces(ctx, pick, results); {
		case err == nil:
		case ctx.Err() != nil && errors.Is(err, context.Cause(ctx)):
			stopped = true
		default:
			return nil, errors.Join(err, l.flush())
		}
	}
	if err := r.closeAll(!stopped); err != nil {
		return nil, errors.Join(err, l.flush())
	}
	out := &Outcome{Dir: l.folder.shown(r.o.OutDir), Name: r.in.name, Set: r.in.set, Results: results, Costs: r.byName(),
		Complete: !stopped, Finished: len(l.rows), Total: l.total, Elapsed: time.Since(r.began)}
	if out.Judged, err = score.Judge(limitsOf(r.in.set), results, samplingOf(r.in.set)); err != nil {
		return nil, wrong(err)
	}
	if stopped {
		return out, ErrInterrupted
	}
	return out, nil
}

// take books one finished scenario.
func (r *running) take(f benches.Finished) error {
	for i, c := range f.Costs {
		r.costs[i].Samples += c.Samples
		r.costs[i].Nanos += c.Nanos
		r.samples += c.Samples
	}
	r.notices.add(r.in.set.Rows[f.Index].ID, f.Notices)
	if err := r.ledger.add(f.Results); err != nil {
		return err
	}
	r.o.Report.progress(Progress{Stage: "scenarios", Done: len(r.ledger.rows), Total: r.ledger.total, Found: r.found,
		Samples: r.samples, Elapsed: time.Since(r.began)})
	return nil
}

// closeAll writes the files of the end, the results last.
func (r *running) closeAll(complete bool) error {
	l := r.ledger
	if err := r.writeTiming(); err != nil {
		return wrong(err)
	}
	if err := l.close(complete); err != nil {
		return err
	}
	if !complete {
		return wrong(os.RemoveAll(l.folder.parts()))
	}
	return wrong(l.folder.finish())
}

func (r *running) byName() map[string]benches.Cost {
	m := map[string]benches.Cost{}
	for i, s := range r.in.specs {
		m[s.Name] = r.costs[i]
	}
	return m
}

// explain adds to an error of the bench what only this run knows.
func (r *running) explain(err error) error {
	if _, ok := errors.AsType[*Error](err); ok {
		return err
	}
	return fmt.Errorf("run %s: %w", r.o.SetPath, err)
}

func (o *RunOptions) workers() int {
	if o.Workers > 0 {
		return o.Workers
	}
	return runtime.GOMAXPROCS(0)
}

// limitsOf and samplingOf say a set's limits and draws as scores know them.
func limitsOf(s *scenario.Set) []score.Limit {
	var out []score.Limit
	for _, l := range s.Limits {
		out = append(out, score.Limit{Metric: l.Metric, AtMost: l.AtMost, Share: l.Share, Group: l.Group, Estimator: l.Estimator})
	}
	return out
}

func samplingOf(s *scenario.Set) score.Sampling {
	counted := s.Draw == scenario.Grid || s.Draw == scenario.List
	return score.Sampling{Counted: counted, Draw: s.Draws()}
}

package benches

import (
	"context"
	"fmt"
	"math"

	"soctrial/benches/scenario"
	"soctrial/benches/score"
	"soctrial/estimator"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// ReplayJob is a recorded test to run estimators on.
type ReplayJob struct {
	Record     *record.Readings // time, current, voltage, temperature as the estimators are to read them
	Reference  []float64        // true SOC a sample, or NaN where nobody knows; as long as Record
	Cell       *cell.Cell       // for estimators without their own
	Name       string           // of the record, for result rows
	Estimators []estimator.Spec
	Build      func(estimator.Setup) (estimator.Estimator, error)
	Nanotime   func() int64

	SOCStart        float64 // true SOC at the first sample, [0, 1]
	SOCStartError   float64 // told minus true
	HysteresisStart float64
	Score           scenario.ScoreSettings
}

// ReplayBlock is a stretch of a replay, as a sink sees it.
type ReplayBlock struct {
	First     int
	Readings  record.Readings
	Reference []float64
	Estimates []estimator.Estimate // one an estimator; shorter from where it was lost
}

// Replay runs every estimator over the record and scores it against the
// reference, each mean weighted by the interval a sample stands for. Results
// carry scenario 0. It hands every block to sink, unless that is nil.
func Replay(ctx context.Context, j ReplayJob, sink func(ReplayBlock) error) ([]score.Result, []Cost, error) {
	n := j.Record.Len()
	switch {
	case n == 0:
		return nil, nil, fmt.Errorf("replay: record %s has no samples", j.Name)
	case len(j.Reference) != n:
		return nil, nil, fmt.Errorf("replay: %d samples but %d reference values", n, len(j.Reference))
	case !(j.SOCStart >= 0 && j.SOCStart <= 1):
		return nil, nil, fmt.Errorf("replay: SOC at the start is %g, allowed is 0 to 1", j.SOCStart)
	}
	seats, err := j.seats()
	if err != nil {
		return nil, nil, err
	}
	for at := 0; at < n; at += BlockLen {
		if ctx.Err() != nil {
			return nil, nil, context.Cause(ctx)
		}
		to := min(at+BlockLen, n)
		readings := j.Record.Slice(at, to)
		b := ReplayBlock{First: at, Readings: readings, Reference: j.Reference[at:to]}
		for i := range seats {
			s := &seats[i]
			if err := s.follow(&readings, j.Nanotime); err != nil {
				return nil, nil, fmt.Errorf("replay: estimator %s: %w", j.Estimators[i].Name, err)
			}
			e := s.out.Slice(0, s.used)
			if s.used > 0 {
				s.acc.AddReference(readings.TimeS[:s.used], b.Reference[:s.used], &e)
			}
			b.Estimates = append(b.Estimates, e)
		}
		if sink != nil {
			if err := sink(b); err != nil {
				return nil, nil, err
			}
		}
	}
	return j.results(seats)
}

func (j *ReplayJob) seats() ([]seat, error) {
	settings := scoreSettings(j.Score)
	settings.WeightByInterval = true
	seats := make([]seat, len(j.Estimators))
	told := min(max(j.SOCStart+j.SOCStartError, 0), 1)
	for i := range seats {
		spec := j.Estimators[i]
		believed := spec.Cell
		if believed == nil {
			believed = j.Cell
		}
		if believed == nil {
			return nil, fmt.Errorf("replay: estimator %s has no cell of its own and none was given", spec.Name)
		}
		o := cell.AsBuilt(0)
		o.Branches = spec.Branches
		m, err := cell.Compile(believed, o)
		if err != nil {
			return nil, fmt.Errorf("replay: estimator %s: %w", spec.Name, err)
		}
		s := &seats[i]
		s.out = estimator.MakeEstimate(BlockLen)
		s.acc.Reset(settings)
		s.est, err = j.Build(estimator.Setup{Spec: spec, Cell: believed, Model: m, SOCStart: told, HysteresisStart: j.HysteresisStart})
		if err != nil {
			return nil, fmt.Errorf("replay: estimator %s: %w", spec.Name, err)
		}
	}
	return seats, nil
}

func (j *ReplayJob) results(seats []seat) ([]score.Result, []Cost, error) {
	var results []score.Result
	var costs []Cost
	t := j.Record.TimeS
	for i := range seats {
		s := &seats[i]
		s.acc.SetDuration(t[len(t)-1]-t[0], math.NaN())
		r := score.Result{Duty: j.Name, Estimator: j.Estimators[i].Name, Status: score.OK, Metrics: s.acc.Metrics()}
		if believed := j.Estimators[i].Cell; believed != nil {
			r.Cell = believed.Name
		} else {
			r.Cell = j.Cell.Name
		}
		if s.lost != "" {
			r.Status, r.Reason = score.Lost, s.lost
		}
		results = append(results, r)
		costs = append(costs, s.cost)
	}
	return results, costs, nil
}

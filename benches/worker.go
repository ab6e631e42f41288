package benches

import (
	"context"
	"errors"
	"fmt"
	"math"

	"soctrial/benches/score"
	"soctrial/estimator"
	"soctrial/noise"
	"soctrial/plant"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// Block is a stretch of one scenario as all of the chain saw it. It is valid
// until the sink returns.
type Block struct {
	First     int64 // sample the block begins at
	Truth     plant.Truth
	Readings  record.Readings
	Estimates []estimator.Estimate // one an estimator; shorter, or empty, from where it was lost
}

// worker runs one scenario at a time and keeps its memory between them.
type worker struct {
	job    *Job
	shared *shared

	plant    plant.Plant
	chain    noise.Chain
	truth    plant.Truth
	readings record.Readings
	block    Block // the present stretch; fields, so that nothing is allocated a block
	seats    []seat
	models   map[modelKey]*cell.Model
	sinkErr  error
}

// seat is one estimator at work.
type seat struct {
	est      estimator.Estimator
	out      estimator.Estimate
	view     estimator.Estimate // of out, as long as the block
	acc      score.Accumulator
	lost     string
	used     int // samples of the present block that were estimated
	cost     Cost
	unusable bool // gave up or panicked: to be built anew
}

type modelKey struct {
	cell     *cell.Prepared
	branches int
	periodS  float64
}

func newWorker(j *Job, s *shared) *worker {
	w := &worker{job: j, shared: s, truth: plant.MakeTruth(BlockLen), readings: record.MakeReadings(BlockLen),
		seats: make([]seat, len(j.Estimators)), models: map[modelKey]*cell.Model{}}
	for i := range w.seats {
		w.seats[i].out = estimator.MakeEstimate(BlockLen)
	}
	return w
}

// run runs row at. It reports false where ctx ended first.
func (w *worker) run(ctx context.Context, at int, sink func(Block) error) (f Finished, whole bool) {
	f.Index = at
	reason, whole := w.guarded(ctx, at, sink)
	if !whole {
		return f, false
	}
	row := &w.job.Set.Rows[at]
	var outcome plant.Outcome
	if reason == "" {
		outcome = w.plant.Outcome()
	}
	f.Notices = outcome.Notices
	for i := range w.seats {
		s := &w.seats[i]
		r := score.Result{ScenarioID: row.ID, Seed: row.Seed, Cell: row.Cell, Duty: row.Duty, Sensors: row.Sensors, Group: row.Group,
			Estimator: w.job.Estimators[i].Name, Status: score.OK, Reason: outcome.Reason}
		switch {
		case reason != "":
			r.Status, r.Reason, r.Metrics = score.Failed, reason, score.Nothing()
		case s.lost != "":
			r.Status, r.Reason = score.Lost, s.lost
			r.Metrics = s.acc.Metrics()
		default:
			r.Metrics = s.acc.Metrics()
			if m := &r.Metrics; !finite(m.SOCRMSE) || !finite(m.SOCMaxAbs) {
				r.Status, r.Reason, r.Metrics = score.Failed, "a state of charge or its estimate was not a finite number", score.Nothing()
			}
		}
		f.Results = append(f.Results, r)
		f.Costs = append(f.Costs, s.cost)
	}
	return f, true
}

// guarded runs the row and turns a panic into a reason.
func (w *worker) guarded(ctx context.Context, at int, sink func(Block) error) (reason string, whole bool) {
	defer func() {
		if e := recover(); e != nil {
			reason, whole = fmt.Sprintf("panic: %v", e), true
			for i := range w.seats {
				w.seats[i].unusable = true
			}
		}
	}()
	if err := w.begin(at); err != nil {
		return err.Error(), true
	}
	return w.follow(ctx, sink)
}

// begin sets plant, sensors and estimators to the start of row at.
func (w *worker) begin(at int) error {
	row := &w.job.Set.Rows[at]
	prepared := w.shared.cells[row.Cell]
	sensors := row.Override.Apply(*w.job.Set.Sensors[row.Sensors])
	if row.CurrentReading != "" {
		sensors.CurrentReading = record.CurrentReading(row.CurrentReading)
	}
	setup := plant.Setup{Cell: prepared, Duty: w.shared.programs[programKey{row.Duty, row.Cell}], PeriodS: sensors.SamplePeriodS,
		Substeps: row.PlantSubsteps, Seed: row.Seed, SOCStart: row.SOCStart, HysteresisStart: row.HysteresisStart,
		TemperatureStartC: row.TemperatureStartC, AmbientC: row.AmbientC, CapacityScale: row.CapacityScale, R0Scale: row.R0Scale,
		BranchRScale: row.BranchRScale, BranchTauScale: row.BranchTauScale, OCVOffsetV: row.OCVOffsetV, R0DriftPerH: row.R0DriftPerH,
		CapacityDriftPerH: row.CapacityDriftPerH, R0WalkPerSqrtH: row.R0WalkPerSqrtH}
	if err := w.plant.Reset(setup); err != nil {
		return err
	}
	if err := w.chain.Reset(noise.Setup{Sensors: sensors, Seed: row.Seed, TemperatureRefC: prepared.Cell.TemperatureRefC}); err != nil {
		return err
	}
	told := min(max(row.SOCStart+row.SOCStartError, 0), 1)
	for i := range w.seats {
		if err := w.seat(i, prepared, told, row.HysteresisStart, sensors.SamplePeriodS); err != nil {
			return err
		}
	}
	return nil
}

// seat puts estimator i at its start.
func (w *worker) seat(i int, scenarioCell *cell.Prepared, told, hysteresis, periodS float64) error {
	s, spec := &w.seats[i], &w.job.Estimators[i]
	believed := w.shared.own[i]
	if believed == nil {
		believed = scenarioCell
	}
	key := modelKey{believed, spec.Branches, periodS}
	m := w.models[key]
	if m == nil {
		o := cell.AsBuilt(periodS)
		o.Branches = spec.Branches
		var err error
		if m, err = believed.Model(o); err != nil {
			return fmt.Errorf("estimator %s: %w", spec.Name, err)
		}
		w.models[key] = m
	}
	setup := estimator.Setup{Spec: *spec, Cell: believed.Cell, Model: m, SOCStart: told, HysteresisStart: hysteresis, PeriodS: periodS}
	s.lost, s.used, s.cost = "", 0, Cost{}
	s.acc.Reset(w.shared.score)
	again, ok := s.est.(estimator.Resetter)
	if ok && !s.unusable {
		return again.Reset(setup)
	}
	est, err := w.job.Build(setup)
	if err != nil {
		return err
	}
	s.est, s.unusable = est, false
	return nil
}

// follow takes the scenario to its end, block by block.
func (w *worker) follow(ctx context.Context, sink func(Block) error) (reason string, whole bool) {
	var first int64
	for {
		if ctx.Err() != nil {
			return "", false
		}
		n := w.plant.Next(&w.truth)
		truth, readings := &w.block.Truth, &w.block.Readings
		*truth, *readings = w.truth.Slice(0, n), w.readings.Slice(0, n)
		if n > 0 {
			w.chain.Read(truth, readings)
			for i := range w.seats {
				if err := w.advance(&w.seats[i], truth, readings); err != nil {
					return err.Error(), true
				}
			}
			if sink != nil {
				if err := w.pass(sink, first, *truth, *readings); err != nil {
					w.sinkErr = err
					return "", false
				}
			}
		}
		first += int64(n)
		if n < BlockLen {
			break
		}
	}
	outcome := w.plant.Outcome()
	if first == 0 {
		return orNothing(outcome.Reason), true
	}
	for i := range w.seats {
		w.seats[i].acc.SetDuration(outcome.EndS, outcome.LimitedS)
	}
	return "", true
}

// advance takes one estimator through a block and scores it.
func (w *worker) advance(s *seat, truth *plant.Truth, readings *record.Readings) error {
	if err := s.follow(readings, w.job.Nanotime); err != nil {
		return err
	}
	if s.used > 0 {
		s.view = s.out.Slice(0, s.used)
		if s.used < truth.Len() {
			t := truth.Slice(0, s.used)
			truth = &t
		}
		s.acc.Add(truth, &s.view)
	}
	return nil
}

// follow takes the estimator through a block. It notes where one is lost; any
// other error is returned.
func (s *seat) follow(readings *record.Readings, nanotime func() int64) error {
	s.used = 0
	if s.lost != "" {
		return nil
	}
	n := readings.Len()
	s.view = s.out.Slice(0, n)
	var began int64
	if nanotime != nil {
		began = nanotime()
	}
	err := s.est.Advance(readings, &s.view)
	if nanotime != nil {
		s.cost.Nanos += nanotime() - began
	}
	s.used = n
	if err != nil {
		var lost *estimator.LostError
		if !errors.As(err, &lost) {
			return err
		}
		s.lost, s.unusable = lost.Error(), true
		s.used = lost.Sample - int(s.cost.Samples)
	}
	s.cost.Samples += int64(s.used)
	return nil
}

func (w *worker) pass(sink func(Block) error, first int64, truth plant.Truth, readings record.Readings) error {
	b := Block{First: first, Truth: truth, Readings: readings}
	for i := range w.seats {
		b.Estimates = append(b.Estimates, w.seats[i].out.Slice(0, w.seats[i].used))
	}
	return sink(b)
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

func orNothing(reason string) string {
	if reason == "" {
		return "it asks for nothing"
	}
	return reason
}

package job

import (
	"context"
	"errors"
	"fmt"
	"math"
	"path/filepath"
	"strings"
	"time"

	"soctrial/benches"
	"soctrial/benches/define"
	"soctrial/benches/roster"
	"soctrial/benches/scenario"
	"soctrial/benches/score"
	"soctrial/benches/store"
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// ReplayOptions is one call of replay. NaN marks a number that was not given.
type ReplayOptions struct {
	RecordPath     string
	CellPath       string
	EstimatorPaths []string // at least one
	OutDir         string
	Force          bool

	MapPath        string // how the record reads; empty: found by its headings
	ChargePositive bool   // the record counts charging as positive
	Repair         bool   // take samples whose time runs backward out

	SOCStart            float64 // at the record's first sample; NaN: see Replay
	SOCStartError       float64 // told minus true, where the replay begins
	FromS               float64 // the replay begins at the first sample from here on; NaN: the first
	ReferenceCapacityAh float64 // NaN: the cell's
	SensorsPath         string  // faults to put on the readings; empty: none
	Seed                uint64  // of those faults
	PlanPath            string  // its [score] and [[limit]]; empty: the usual ones, no limits

	Traces     string // none or all; empty: all
	ThinTraces bool
	Version    string
	Report     Reporter
}

// replayID is the scenario a replay's rows belong to.
const replayID = 0

// Replay runs estimators over a recorded test and writes results, traces and
// timings into a folder.
//
// The record's first sample starts at SOCStart, else at the record's own first
// SOC, else where the cell's open-circuit voltage is the record's first voltage. From
// there the reference goes on over the whole record: the record's own SOC,
// else its charge counter over ReferenceCapacityAh, else its current counted.
// With FromS the replay begins later, from the reference there.
func Replay(ctx context.Context, o ReplayOptions) (*Outcome, error) {
	began := time.Now()
	in, err := loadReplay(&o)
	if err != nil {
		return nil, err
	}
	f, err := scratchFolder(o.OutDir, o.Force)
	if err != nil {
		return nil, err
	}
	defer f.drop()
	sink, closeTraces, err := in.traces(f, &o)
	if err != nil {
		return nil, err
	}
	defer closeTraces(false)
	j := in.job
	j.Nanotime = func() int64 { return int64(time.Since(began)) }
	results, costs, err := benches.Replay(ctx, j, sink)
	if ctx.Err() != nil {
		return nil, fmt.Errorf("%w; nothing was written", ErrInterrupted)
	}
	if err != nil {
		return nil, wrongf("%s: %w", o.RecordPath, err)
	}
	for i := range results {
		results[i].Seed = o.Seed
	}
	if err := closeTraces(true); err != nil {
		return nil, wrong(err)
	}
	out := &Outcome{Dir: filepath.Clean(o.OutDir), Name: j.Name, Set: in.set, Results: results, Costs: map[string]benches.Cost{},
		Complete: true, Finished: 1, Total: 1, Reference: in.reference.said, Elapsed: time.Since(began)}
	t := Timing{Format: timingFormat, Version: o.Version, Workers: 1, Runs: 1, StartedAt: began.UTC().Format(timeFormat),
		ElapsedS: out.Elapsed.Seconds(), Scenarios: 1}
	for i, s := range j.Estimators {
		out.Costs[s.Name] = costs[i]
		t.Estimators = append(t.Estimators, costOf(s.Name, costs[i]))
	}
	if err := writeTiming(f.path(TimingFile), &t); err != nil {
		return nil, wrong(err)
	}
	in.meta.Complete, in.meta.Finished, in.meta.Total = true, 1, 1
	if err := store.WriteResults(f.path(ResultsFile), results, in.meta); err != nil {
		return nil, wrong(err)
	}
	if err := f.finish(); err != nil {
		return nil, wrong(err)
	}
	if out.Judged, err = score.Judge(limitsOf(in.set), results, score.Sampling{Counted: true}); err != nil {
		return nil, wrong(err)
	}
	return out, nil
}

// replayInputs is all that a replay reads, ready to run.
type replayInputs struct {
	job       benches.ReplayJob
	set       *scenario.Set // no rows: what a summary needs
	meta      store.ResultsMeta
	reference reference
}

func loadReplay(o *ReplayOptions) (*replayInputs, error) {
	if err := o.validate(); err != nil {
		return nil, err
	}
	c, _, err := define.ReadCell(o.CellPath)
	if err != nil {
		return nil, wrong(err)
	}
	specs, texts, err := loadEstimators(o.EstimatorPaths)
	if err != nil {
		return nil, err
	}
	for i := range specs {
		believed := c
		if specs[i].Cell != nil {
			believed = specs[i].Cell
		}
		if err := checkSpec(&specs[i], believed, &o.Report); err != nil {
			return nil, wrongf("%s with cell %s: %w", o.EstimatorPaths[i], believed.Name, err)
		}
	}
	set := &scenario.Set{Score: scenario.DefaultScore(), Draw: scenario.List}
	if err := usePlan(set, o.PlanPath); err != nil {
		return nil, err
	}
	warnOfLimits(set.Limits, specs, &o.Report)
	rec, hash, err := loadRecord(o)
	if err != nil {
		return nil, err
	}
	ref, err := referenceOf(rec, c, o)
	if err != nil {
		return nil, wrongf("%s: %w", o.RecordPath, err)
	}
	in := &replayInputs{set: set, reference: ref}
	in.meta = store.ResultsMeta{Version: o.Version, EstimatorFiles: map[string]string{}, Settings: settingsOf(set)}
	addEstimators(&in.meta, specs, texts)
	readings := rec.Readings
	if o.SensorsPath != "" {
		if readings, err = in.disturb(&readings, c, o); err != nil {
			return nil, err
		}
	}
	from, err := firstFrom(rec.TimeS, o.FromS)
	if err != nil {
		return nil, wrongf("%s: %w", o.RecordPath, err)
	}
	readings = readings.Slice(from, readings.Len())
	start, err := ref.at(from, rec.TimeS)
	if err != nil {
		return nil, wrongf("%s: %w", o.RecordPath, err)
	}
	in.meta.Settings["record.sha256"] = hash
	in.meta.Settings["cell"] = define.FormatCell(c)
	in.meta.Settings["reference"] = ref.said
	in.meta.Settings["soc_start"] = number(start)
	in.meta.Settings["soc_start_error"] = number(o.SOCStartError)
	in.meta.Settings["from_s"] = number(readings.TimeS[0])
	in.job = benches.ReplayJob{Record: &readings, Reference: ref.soc[from:], Cell: c, Name: rec.Name, Estimators: specs,
		Build: roster.New, SOCStart: start, SOCStartError: o.SOCStartError, Score: set.Score}
	return in, nil
}

func (o *ReplayOptions) validate() error {
	switch {
	case !math.IsNaN(o.SOCStart) && !(o.SOCStart >= 0 && o.SOCStart <= 1):
		return wrongf("--soc-start: found %g, allowed is a number in [0, 1]", o.SOCStart)
	case !(o.SOCStartError >= -1 && o.SOCStartError <= 1):
		return wrongf("--soc-start-error: found %g, allowed is a number in [-1, 1]", o.SOCStartError)
	case math.IsInf(o.FromS, 0):
		return wrongf("--from-s: found %g, allowed is a finite number", o.FromS)
	case !math.IsNaN(o.ReferenceCapacityAh) && !(o.ReferenceCapacityAh > 0 && !math.IsInf(o.ReferenceCapacityAh, 0)):
		return wrongf("--reference-capacity-ah: found %g, allowed is a finite number > 0", o.ReferenceCapacityAh)
	case o.Traces != "" && o.Traces != "all" && o.Traces != "none":
		return wrongf("--traces: found %q, allowed in a replay is all or none", o.Traces)
	}
	return nil
}

// disturb puts the faults of a sensors file on the readings.
func (in *replayInputs) disturb(r *record.Readings, c *cell.Cell, o *ReplayOptions) (record.Readings, error) {
	s, text, err := define.ReadSensors(o.SensorsPath)
	if err != nil {
		return record.Readings{}, wrong(err)
	}
	chain, err := noise.NewChain(noise.Setup{Sensors: *s, Seed: o.Seed, TemperatureRefC: c.TemperatureRefC})
	if err != nil {
		return record.Readings{}, wrongf("%s: %w", o.SensorsPath, err)
	}
	out := record.MakeReadings(r.Len())
	chain.Disturb(r, &out)
	in.meta.Settings["sensors"], in.meta.Settings["seed"] = text, fmt.Sprint(o.Seed)
	return out, nil
}

// firstFrom returns the first sample at or after fromS.
func firstFrom(timeS []float64, fromS float64) (int, error) {
	if math.IsNaN(fromS) {
		return 0, nil
	}
	for i, t := range timeS {
		if t >= fromS {
			return i, nil
		}
	}
	return 0, fmt.Errorf("--from-s: found %g, allowed is at most %g, the time of the last sample", fromS, timeS[len(timeS)-1])
}

// traces returns where a replay's blocks go, and how to end that: keeping the
// file, or dropping it.
func (in *replayInputs) traces(f *folder, o *ReplayOptions) (func(benches.ReplayBlock) error, func(keep bool) error, error) {
	if o.Traces == "none" {
		return nil, func(bool) error { return nil }, nil
	}
	w, err := store.NewTraceWriter(f.path(TracesFile), o.ThinTraces, store.TraceMeta{Version: o.Version})
	if err != nil {
		return nil, nil, wrong(err)
	}
	sink := func(b benches.ReplayBlock) error {
		for e := range b.Estimates {
			c := traceOf(&b.Readings, &b.Estimates[e])
			c.SOCTrue = b.Reference
			if err := w.Append(replayID, in.job.Estimators[e].Name, int64(b.First), c); err != nil {
				return err
			}
		}
		return nil
	}
	return sink, func(keep bool) error {
		if keep {
			return w.Close()
		}
		w.Abort()
		return nil
	}, nil
}

// usePlan puts a plan's [score] and [[limit]] in place of the set's.
func usePlan(set *scenario.Set, path string) error {
	if path == "" {
		return nil
	}
	p, text, err := define.ReadPlan(path)
	if err != nil {
		return wrong(err)
	}
	if err := scenario.CheckLimits(p.Limits, score.MetricNames()); err != nil {
		return wrong(define.At(path, []byte(text), err))
	}
	set.Score, set.Limits = p.Score, p.Limits
	return nil
}

// recordName is how results call a record.
func recordName(path string) string {
	base := filepath.Base(path)
	return strings.TrimSuffix(base, filepath.Ext(base))
}

// errNoVoltage says that a start cannot be looked up.
var errNoVoltage = errors.New("no sample has a voltage to look its open-circuit voltage up by; give --soc-start")

package main

import (
	"context"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"slices"
	"strings"

	"soctrial/benches/demo"
	"soctrial/benches/job"
	"soctrial/benches/picture"
	"soctrial/benches/score"
	"soctrial/benches/store"
)

// pictures draws what one step shows: its cells and duties, tracked scenarios,
// errors over time and the distribution of the worst.
func (d *demoRun) pictures(ctx context.Context, step demo.Step, out *job.Outcome) error {
	if err := d.drawDefinitions(step); err != nil {
		return err
	}
	for _, t := range step.Tracks {
		if err := d.drawTrack(step, t, out); err != nil {
			return err
		}
	}
	for _, cell := range cellsOf(out.Results) {
		if err := d.drawWorst(step, cell, out); err != nil {
			return err
		}
	}
	return d.drawOverTime(ctx, step, out)
}

// draw writes one picture as PNG and SVG.
func (d *demoRun) draw(name, what string, draw func(io.Writer, picture.Format) error) error {
	for _, format := range []picture.Format{picture.PNG, picture.SVG} {
		path := d.at(filepath.Join(demoPictures, name+"."+string(format)))
		if err := store.WriteFile(path, func(w io.Writer) error { return draw(w, format) }); err != nil {
			return err
		}
	}
	d.pictured = append(d.pictured, madeFile{name, what})
	return nil
}

func (d *demoRun) drawDefinitions(step demo.Step) error {
	for _, file := range step.Pictured {
		name := strings.TrimSuffix(file, ".toml")
		var kind string
		for _, format := range []picture.Format{picture.PNG, picture.SVG} {
			shown, err := job.Show(job.ShowOptions{Path: d.at(filepath.Join(demoDefinitions, file)),
				PicturePath: d.at(filepath.Join(demoPictures, name+"."+string(format)))})
			if err != nil {
				return ofJob(err)
			}
			kind = shown.Kind
		}
		d.pictured = append(d.pictured, madeFile{name, "the " + kind})
	}
	return nil
}

func (d *demoRun) drawTrack(step demo.Step, t demo.Track, out *job.Outcome) error {
	at := slices.IndexFunc(out.Results, func(r score.Result) bool { return r.ScenarioID == t.ScenarioID })
	if at < 0 {
		return toolError{fmt.Errorf("demo: set %s has no scenario %d to draw", step.Name, t.ScenarioID)}
	}
	r := &out.Results[at]
	cols := picture.TrackColumns{Title: fmt.Sprintf("Scenario %d: cell %s, duty %s", r.ScenarioID, r.Cell, r.Duty),
		Note: t.What + conditions(out, t.ScenarioID) + ". Current is positive on discharge."}
	path := d.at(filepath.Join(step.Name, job.TracesFile))
	for k := at; k < len(out.Results) && out.Results[k].ScenarioID == t.ScenarioID; k++ {
		tr, err := store.ReadTraces(path, t.ScenarioID, out.Results[k].Estimator)
		if err != nil {
			return err
		}
		if k == at {
			cols.TimeS, cols.SOCTrue, cols.CurrentA = tr.TimeS, tr.SOCTrue, tr.CurrentTrueA
		}
		e := picture.Estimate{Name: tr.Estimator, SOC: tr.SOC, SOCStd: tr.SOCStd, InnovationV: tr.InnovationV, InnovationStdV: tr.InnovationStdV}
		if tr.Estimator != step.Limit[1] { // three bands over each other hide each other
			e.SOCStd = nil
		}
		cols.Estimates = append(cols.Estimates, e)
	}
	return d.draw(t.File, fmt.Sprintf("scenario %d, %s", t.ScenarioID, t.What),
		func(w io.Writer, f picture.Format) error { return picture.Track(w, f, cols) })
}

// conditions says under which conditions a scenario ran.
func conditions(out *job.Outcome, id int64) string {
	for i := range out.Set.Rows {
		if r := &out.Set.Rows[i]; r.ID == id {
			return fmt.Sprintf(": %.0f °C, capacity × %.2f, R0 × %.2f, told %+.0f %% SOC at the start", r.AmbientC, r.CapacityScale, r.R0Scale,
				math.Round(100*r.SOCStartError)+0)
		}
	}
	return ""
}

// limitOf finds the limit that a step's pictures show; NaN where there is
// none.
func limitOf(step demo.Step, out *job.Outcome) (atMost, share float64) {
	for _, j := range out.Judged {
		if j.Limit.Metric == step.Limit[0] && j.Estimator == step.Limit[1] {
			return j.Limit.AtMost, j.Limit.Share
		}
	}
	return math.NaN(), math.NaN()
}

func (d *demoRun) drawWorst(step demo.Step, cell string, out *job.Outcome) error {
	atMost, share := limitOf(step, out)
	cols := picture.DistributionColumns{Title: "Worst errors: set " + step.Name + ", cell " + cell, Quantity: "Largest |SOC error| after settling", Unit: "%",
		AtMost: 100 * atMost, Share: share}
	for i := range out.Results {
		r := &out.Results[i]
		if r.Cell != cell {
			continue
		}
		k := slices.IndexFunc(cols.Estimators, func(s picture.Scenarios) bool { return s.Name == r.Estimator })
		if k < 0 {
			k, cols.Estimators = len(cols.Estimators), append(cols.Estimators, picture.Scenarios{Name: r.Estimator})
		}
		x := 100 * r.Metrics.SettledMaxAbs
		if r.Status != score.OK {
			x = math.Inf(1)
		}
		cols.Estimators[k].Values = append(cols.Estimators[k].Values, x)
	}
	cols.Note = fmt.Sprintf("%d scenarios, the same for each estimator", len(cols.Estimators[0].Values))
	return d.draw("worst-"+cell, "worst errors: share of scenarios below each",
		func(w io.Writer, f picture.Format) error { return picture.WorstErrors(w, f, cols) })
}

// everyS is how often errors over time are looked at.
const everyS = 30

func (d *demoRun) drawOverTime(ctx context.Context, step demo.Step, out *job.Outcome) error {
	o := job.OverTimeOptions{SetPath: d.at(step.Name + ".parquet"), EveryS: everyS, Workers: d.workers}
	for _, e := range step.Estimators {
		o.EstimatorPaths = append(o.EstimatorPaths, d.at(filepath.Join(demoDefinitions, e)))
	}
	p := newProgress(d.err)
	o.Report = job.Reporter{Progress: p.show}
	all, err := job.ErrorsOverTime(ctx, o)
	p.done()
	if err != nil {
		return ofJob(err)
	}
	atMost, _ := limitOf(step, out)
	for from := 0; from < len(all); {
		kind := all[from]
		cols := picture.ErrorColumns{Title: fmt.Sprintf("Errors over time: set %s, cell %s, duty %s", step.Name, kind.Cell, kind.Duty), Limit: atMost,
			Note: fmt.Sprintf("percentiles over those of %d scenarios that still run, every %d s, up to where half of them do", kind.Scenarios, everyS)}
		for ; from < len(all) && all[from].Cell == kind.Cell && all[from].Duty == kind.Duty; from++ {
			t := &all[from]
			cols.Estimators = append(cols.Estimators, picture.ErrorPercentiles{Name: t.Estimator, TimeS: t.TimeS, P50: t.P50, P90: t.P90, P95: t.P95, Largest: t.Largest})
		}
		if err := d.draw("errors-"+kind.Cell+"-"+kind.Duty, "errors over time: percentiles of scenarios",
			func(w io.Writer, f picture.Format) error { return picture.ErrorsOverTime(w, f, cols) }); err != nil {
			return err
		}
	}
	return nil
}

// cellsOf lists the cells of results in their order.
func cellsOf(results []score.Result) []string {
	var out []string
	for i := range results {
		if !slices.Contains(out, results[i].Cell) {
			out = append(out, results[i].Cell)
		}
	}
	return out
}

package job

import (
	"context"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"slices"

	"soctrial/benches"
	"soctrial/benches/picture"
	"soctrial/benches/roster"
	"soctrial/benches/score"
	"soctrial/benches/store"
)

// gridPoints is how many times over the longest duty errors are compared at.
const gridPoints = 240

// errorsOverTime runs a set once more and returns, for each estimator,
// percentiles over scenarios of |SOC error| at evenly spaced times: the error
// at the first sample from each time on. A scenario that has ended, or an
// estimator that was lost, is not among them from there on.
func errorsOverTime(ctx context.Context, in *runInputs) ([]picture.ErrorPercentiles, error) {
	endS := 0.0
	for _, r := range in.longest {
		endS = max(endS, r)
	}
	stepS := endS / gridPoints
	errs := make([][][]float64, len(in.specs)) // estimator, time, scenario
	for e := range errs {
		errs[e] = make([][]float64, gridPoints+1)
	}
	j := benches.Job{Set: in.set, Estimators: in.specs, Build: roster.New}
	for i := range in.set.Rows {
		next := make([]int, len(in.specs))
		err := benches.Trace(ctx, j, i, func(b benches.Block) error {
			for e := range b.Estimates {
				for k := range b.Estimates[e].SOC {
					at := next[e]
					if at > gridPoints || b.Truth.TimeS[k] < float64(at)*stepS {
						continue
					}
					errs[e][at] = append(errs[e][at], math.Abs(b.Estimates[e].SOC[k]-b.Truth.SOC[k]))
					next[e]++
				}
			}
			return nil
		})
		if err != nil {
			return nil, err
		}
	}
	var out []picture.ErrorPercentiles
	for e, spec := range in.specs {
		p := picture.ErrorPercentiles{Name: spec.Name}
		for at, x := range errs[e] {
			if len(x) == 0 {
				continue
			}
			slices.Sort(x)
			p.TimeS = append(p.TimeS, float64(at)*stepS)
			p.P50 = append(p.P50, score.Percentile(x, 0.5))
			p.P90 = append(p.P90, score.Percentile(x, 0.9))
			p.P95 = append(p.P95, score.Percentile(x, 0.95))
			p.Largest = append(p.Largest, x[len(x)-1])
		}
		out = append(out, p)
	}
	return out, nil
}

// DrawRun draws a finished run into dir, each picture as PNG and SVG, their
// names beginning with name: the worst scenario that was traced, errors over
// time and the distribution of worst errors. It returns the PNG files.
func DrawRun(ctx context.Context, o RunOptions, out *Outcome, dir, name string) ([]string, error) {
	in, err := loadRun(&RunOptions{SetPath: o.SetPath, EstimatorPaths: o.EstimatorPaths, PlanPath: o.PlanPath})
	if err != nil {
		return nil, err
	}
	for i := range out.Results {
		if x := out.Results[i].Metrics.DurationS; x == x {
			in.longest = append(in.longest, x)
		}
	}
	var drawn []string
	both := func(kind string, draw func(path string) error) error {
		for _, ending := range []string{".svg", ".png"} {
			path := filepath.Join(dir, name+"-"+kind+ending)
			if err := draw(path); err != nil {
				return err
			}
			if ending == ".png" {
				drawn = append(drawn, path)
			}
		}
		return nil
	}
	percentiles, err := errorsOverTime(ctx, in)
	if ctx.Err() != nil {
		return nil, ErrInterrupted
	}
	if err != nil {
		return nil, fmt.Errorf("errors over time: %w", err)
	}
	cols := picture.ErrorColumns{Title: fmt.Sprintf("%s: SOC error over %d scenarios", name, out.Finished), Estimators: percentiles, Limit: math.NaN(),
		Note: "Percentiles over the scenarios that still run at each time."}
	for _, l := range in.set.Limits {
		if l.Metric == MetricSettledMaxAbs && l.Group == "" {
			cols.Limit = l.AtMost
			break
		}
	}
	if err := both("errors", func(path string) error {
		return drawTo(path, func(w io.Writer, f picture.Format) error { return picture.ErrorsOverTime(w, f, cols) })
	}); err != nil {
		return nil, err
	}
	if err := both("worst", func(path string) error { return drawResults(path, out) }); err != nil {
		return nil, err
	}
	traces := filepath.Join(out.Dir, TracesFile)
	keys, err := store.ListTraces(traces)
	if err != nil { // none were asked for
		return drawn, nil
	}
	worst := worstTraced(out, keys)
	if err := both("track", func(path string) error { return drawTraces(path, traces, worst) }); err != nil {
		return nil, err
	}
	return drawn, nil
}

// worstTraced returns the traces of the worst of the traced scenarios.
func worstTraced(out *Outcome, keys []store.TraceKey) []store.TraceKey {
	for _, i := range score.Worst(out.Results, "", MetricSettledMaxAbs, len(out.Results)) {
		id := out.Results[i].ScenarioID
		of := slices.DeleteFunc(slices.Clone(keys), func(k store.TraceKey) bool { return k.ScenarioID != id })
		if len(of) > 0 {
			return of
		}
	}
	return keys
}

package job

import (
	"context"
	"fmt"
	"slices"
	"strconv"
	"strings"
	"time"

	"soctrial/benches"
	"soctrial/benches/scenario"
	"soctrial/benches/score"
	"soctrial/benches/store"
	"soctrial/estimator"
	"soctrial/plant/record"
)

// tracePick is which scenarios are traced.
type tracePick struct {
	all   bool
	worst int
	ids   []int64
}

func (p tracePick) none() bool { return !p.all && p.worst == 0 && len(p.ids) == 0 }

// parseTraces reads none, all, worst:K or ids with commas between.
func parseTraces(s string, set *scenario.Set) (tracePick, error) {
	const allowed = "none, all, worst:K or scenario ids with commas between"
	switch {
	case s == "" || s == "none":
		return tracePick{}, nil
	case s == "all":
		return tracePick{all: true}, nil
	case strings.HasPrefix(s, "worst:"):
		k, err := strconv.Atoi(strings.TrimPrefix(s, "worst:"))
		if err != nil || k < 1 {
			return tracePick{}, wrongf("--traces: found %q, allowed is %s, K ≥ 1", s, allowed)
		}
		return tracePick{worst: k}, nil
	}
	var p tracePick
	for _, word := range strings.Split(s, ",") {
		id, err := strconv.ParseInt(strings.TrimSpace(word), 10, 64)
		if err != nil {
			return p, wrongf("--traces: found %q, allowed is %s", s, allowed)
		}
		if !slices.ContainsFunc(set.Rows, func(r scenario.Row) bool { return r.ID == id }) {
			return p, wrongf("--traces: found scenario %d, which is not in the set", id)
		}
		p.ids = append(p.ids, id)
	}
	return p, nil
}

// indices returns which rows of the set to trace, in scenario order. The worst
// are those with the largest settled_max_abs of any estimator; where runs are
// too short to settle, with the largest soc_rmse.
func (p tracePick) indices(set *scenario.Set, results []score.Result) []int {
	chosen := map[int64]bool{}
	for _, id := range p.ids {
		chosen[id] = true
	}
	if p.worst > 0 {
		for _, metric := range []string{MetricSettledMaxAbs, MetricSOCRMSE} {
			for _, i := range score.Worst(results, "", metric, len(results)) {
				if len(chosen) < p.worst {
					chosen[results[i].ScenarioID] = true
				}
			}
		}
	}
	var at []int
	for i := range set.Rows {
		if p.all || chosen[set.Rows[i].ID] {
			at = append(at, i)
		}
	}
	slices.SortFunc(at, func(a, b int) int {
		if set.Rows[a].ID < set.Rows[b].ID {
			return -1
		}
		return 1
	})
	return at
}

// traces runs the chosen scenarios a second time and writes what they did.
func (r *running) traces(ctx context.Context, pick tracePick, results []score.Result) error {
	if pick.none() {
		return nil
	}
	set, at := r.in.set, pick.indices(r.in.set, results)
	w, err := store.NewTraceWriter(r.ledger.folder.path(TracesFile), r.o.ThinTraces, store.TraceMeta{SetSHA256: r.in.meta.SetSHA256, Version: r.o.Version})
	if err != nil {
		return wrong(err)
	}
	defer w.Abort()
	j := r.job()
	began := time.Now()
	var samples int64
	for n, i := range at {
		id := set.Rows[i].ID
		err := benches.Trace(ctx, j, i, func(b benches.Block) error {
			for e := range b.Estimates {
				c := traceOf(&b.Readings, &b.Estimates[e])
				t := &b.Truth
				c.CurrentTrueA, c.VoltageTrueV, c.TemperatureTrueC, c.SOCTrue = t.CurrentA, t.VoltageV, t.TemperatureC, t.SOC
				if err := w.Append(id, r.in.specs[e].Name, b.First, c); err != nil {
					return wrong(err)
				}
			}
			samples += int64(b.Readings.Len()) * int64(len(b.Estimates))
			return nil
		})
		if err != nil {
			return fmt.Errorf("tracing scenario %d: %w", id, err)
		}
		r.o.Report.progress(Progress{Stage: "traces", Done: n + 1, Total: len(at), Samples: samples, Elapsed: time.Since(began)})
	}
	return wrong(w.Close())
}

// traceOf is what an estimator read and made of it.
func traceOf(r *record.Readings, e *estimator.Estimate) *store.TraceColumns {
	return &store.TraceColumns{TimeS: r.TimeS, CurrentA: r.CurrentA, VoltageV: r.VoltageV, TemperatureC: r.TemperatureC, SOC: e.SOC,
		SOCStd: e.SOCStd, VoltagePredictedV: e.VoltagePredictedV, InnovationV: e.InnovationV, InnovationStdV: e.InnovationStdV}
}

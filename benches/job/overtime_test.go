package job

import (
	"context"
	"math"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"soctrial/benches/score"
	"soctrial/benches/store"
)

// TestErrorsOverTimeAgreeWithTraces takes the same percentiles by another road:
// from the traces file of every scenario.
func TestErrorsOverTimeAgreeWithTraces(t *testing.T) {
	w := newWorkplace(t, map[string]string{"plan.toml": strings.Replace(planText, "count = 64", "count = 8", 1)})
	set, est := w.path("set.parquet"), []string{w.path("ekf.toml"), w.path("coulomb.toml")}
	drawn, err := Draw(DrawOptions{PlanPath: w.path("plan.toml"), OutPath: set})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Run(context.Background(), RunOptions{SetPath: set, EstimatorPaths: est, OutDir: w.path("out"), Traces: "all"}); err != nil {
		t.Fatal(err)
	}
	for _, workers := range []int{1, 3} {
		got, err := ErrorsOverTime(context.Background(), OverTimeOptions{SetPath: set, EstimatorPaths: est, EveryS: 60, Workers: workers})
		if err != nil {
			t.Fatal(err)
		}
		if len(got) != 2 {
			t.Fatalf("%d courses, want one an estimator", len(got))
		}
		for _, g := range got {
			if g.Cell != "quay-sweeper" || g.Duty != "rounds" || g.Scenarios != 8 || len(g.TimeS) != 15 {
				t.Fatalf("cell %q, duty %q, %d scenarios, %d times; want quay-sweeper, rounds, 8 and 15", g.Cell, g.Duty, g.Scenarios, len(g.TimeS))
			}
			at := make([][]float64, len(g.TimeS))
			for _, r := range drawn.Rows {
				tr, err := store.ReadTraces(filepath.Join(w.path("out"), TracesFile), r.ID, g.Estimator)
				if err != nil {
					t.Fatal(err)
				}
				for k, s := range tr.TimeS {
					if math.Mod(s, 60) == 0 {
						at[int(s)/60] = append(at[int(s)/60], math.Abs(tr.SOC[k]-tr.SOCTrue[k]))
					}
				}
			}
			for k, all := range at {
				slices.Sort(all)
				if g.TimeS[k] != 60*float64(k) || g.P50[k] != score.Percentile(all, 0.5) || g.P90[k] != score.Percentile(all, 0.9) ||
					g.P95[k] != score.Percentile(all, 0.95) || g.Largest[k] != all[len(all)-1] {
					t.Errorf("%s at %g s: %g, %g, %g, %g are not the traces' percentiles", g.Estimator, g.TimeS[k], g.P50[k], g.P90[k], g.P95[k], g.Largest[k])
				}
			}
		}
	}
}

func TestErrorsOverTimeRefuses(t *testing.T) {
	w := newWorkplace(t, nil)
	set := w.path("set.parquet")
	if _, err := Draw(DrawOptions{PlanPath: w.path("plan.toml"), OutPath: set}); err != nil {
		t.Fatal(err)
	}
	for name, o := range map[string]OverTimeOptions{
		"no interval":  {SetPath: set, EstimatorPaths: []string{w.path("ekf.toml")}},
		"no estimator": {SetPath: set, EveryS: 60},
		"no set":       {SetPath: w.path("nowhere.parquet"), EstimatorPaths: []string{w.path("ekf.toml")}, EveryS: 60},
	} {
		if _, err := ErrorsOverTime(context.Background(), o); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	_, err := ErrorsOverTime(ctx, OverTimeOptions{SetPath: set, EstimatorPaths: []string{w.path("ekf.toml")}, EveryS: 60})
	if err != ErrInterrupted {
		t.Errorf("interrupted: %v, want %v", err, ErrInterrupted)
	}
}

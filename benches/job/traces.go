package job

import (
	"context"
	"slices"
	"strconv"
	"strings"

	"soctrial/benches/scenario"
	"soctrial/benches/score"
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

func (r *running) traces(ctx context.Context, pick tracePick, results []score.Result) error {
	return nil
}

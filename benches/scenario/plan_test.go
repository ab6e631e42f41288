package scenario

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
)

func TestPlansAreRefused(t *testing.T) {
	normal := func(column string, mean, std float64) Vary {
		v := vary(column)
		v.Normal = &Normal{mean, std}
		return v
	}
	two := values("soc_start", 1)
	two.Between = &[2]float64{0, 1}
	upside := between("soc_start", 0.2, 0.4, 0)
	upside.Min, upside.Max = 1, 0
	texts := vary("soc_start")
	texts.Texts = []string{"full"}
	many := make([]Vary, 65)
	for i := range many {
		many[i] = between(fmt.Sprintf("label_%d", i), 0, 1, 0)
	}
	for _, tt := range []struct {
		name string
		plan Plan
		key  string
		want string
	}{
		{"no draw", Plan{}, "draw", "grid, sobol, latin-hypercube or list"},
		{"no count", Plan{Draw: Sobol}, "count", "found 0"},
		{"huge count", Plan{Draw: LatinHypercube, Count: maxRows}, "count", "4 combinations"},
		{"mistyped column", Plan{Draw: Sobol, Count: 4, Vary: []Vary{between("current_ofset_a", 0, 1, 0)}}, "vary[0].column", "nearest is current_offset_a"},
		{"no column", Plan{Draw: Sobol, Count: 4, Vary: []Vary{between("", 0, 1, 0)}}, "vary[0].column", "found nothing"},
		{"identity", Plan{Draw: Grid, Vary: []Vary{values("seed", 1)}}, "vary[0].column", "identity"},
		{"the draw's label", Plan{Draw: Grid, Vary: []Vary{values("label_draw", 1)}}, "vary[0].column", "numbers the draws"},
		{"column twice", Plan{Draw: Grid, Vary: []Vary{values("soc_start", 1), values("soc_start", 0.5)}}, "vary[1].column", "a second time"},
		{"two forms", Plan{Draw: Sobol, Count: 4, Vary: []Vary{two}}, "vary[0]", "exactly one"},
		{"no form", Plan{Draw: Sobol, Count: 4, Vary: []Vary{vary("soc_start")}}, "vary[0]", "exactly one"},
		{"text for numbers", Plan{Draw: Grid, Vary: []Vary{texts}}, "vary[0]", "another kind"},
		{"numbers for text", Plan{Draw: Grid, Vary: []Vary{values("group", 1)}}, "vary[0]", "another kind"},
		{"empty values", Plan{Draw: Grid, Vary: []Vary{values("soc_start", []float64{}...)}}, "vary[0].values", "an empty list"},
		{"NaN value", Plan{Draw: Grid, Vary: []Vary{values("soc_start", math.NaN())}}, "vary[0].values", "finite"},
		{"value out of range", Plan{Draw: Grid, Vary: []Vary{values("soc_start", 1.5)}}, "vary[0]", "soc_start = 1.5 in draw 1"},
		{"fraction of a substep", Plan{Draw: List, Vary: []Vary{values("plant_substeps", 1.5)}}, "vary[0]", "whole number"},
		{"distribution of whole numbers", Plan{Draw: Sobol, Count: 4, Vary: []Vary{between("voltage_every", 1, 3, 0)}}, "vary[0]", "whole numbers"},
		{"grid of a distribution", Plan{Draw: Grid, Vary: []Vary{normal("soc_start_error", 0, 0.1)}}, "vary[0]", "between with steps"},
		{"grid without steps", Plan{Draw: Grid, Vary: []Vary{between("soc_start", 0, 1, 0)}}, "vary[0].steps", "found 0"},
		{"steps in a sample", Plan{Draw: Sobol, Count: 4, Vary: []Vary{between("soc_start", 0, 1, 3)}}, "vary[0].steps", "found 3"},
		{"list of a range", Plan{Draw: List, Vary: []Vary{between("soc_start", 0, 1, 0)}}, "vary[0]", "list"},
		{"list of two lengths", Plan{Draw: List, Vary: []Vary{values("soc_start", 1), values("r0_scale", 1, 2)}}, "vary[1].values", "found 2 values"},
		{"count beside a grid", Plan{Draw: Grid, Count: 5, Vary: []Vary{values("soc_start", 1, 0.5)}}, "count", "found 5"},
		{"range upside down", Plan{Draw: Sobol, Count: 4, Vary: []Vary{between("soc_start", 1, 0, 0)}}, "vary[0].between", "lower first"},
		{"negative std", Plan{Draw: Sobol, Count: 4, Vary: []Vary{normal("soc_start_error", 0, -1)}}, "vary[0].normal", "std ≥ 0"},
		{"draws beyond the column", Plan{Draw: Sobol, Count: 64, Vary: []Vary{normal("soc_start_error", 0, 5)}}, "vary[0]", "min and max limit a draw"},
		{"min above max", Plan{Draw: Sobol, Count: 4, Vary: []Vary{upside}}, "vary[0].min", "min ≤ max"},
		{"too many columns", Plan{Draw: Sobol, Count: 4, Vary: many}, "vary", "at most 64"},
		{"settling before the start", Plan{Draw: Grid, Score: ScoreSettings{SettleAfterS: -1}}, "score.settle_after_s", "found -1"},
		{"limit on no group", Plan{Draw: Grid, Limits: []Limit{{Group: "aged"}}}, "limit[0].group", `found "aged"`},
	} {
		_, err := Draw(&tt.plan, yard())
		var bad *ValueError
		if !errors.As(err, &bad) {
			t.Errorf("%s: got %v, want a refusal", tt.name, err)
			continue
		}
		if bad.KeyPath() != tt.key || !strings.Contains(err.Error(), tt.want) {
			t.Errorf("%s: got key %q, %v; want %q, %q", tt.name, bad.KeyPath(), err, tt.key, tt.want)
		}
	}
	if _, err := Draw(&Plan{Draw: Grid}, Definitions{}); err == nil {
		t.Error("a plan without cells was drawn")
	}
}

func TestCheckLimits(t *testing.T) {
	metrics := []string{"soc_rmse", "settled_max_abs"}
	good := Limit{Metric: "soc_rmse", AtMost: 0.02, Share: 1}
	if err := CheckLimits([]Limit{good}, metrics); err != nil {
		t.Error(err)
	}
	for want, spoil := range map[string]func(*Limit){
		"limit[0].metric: found \"soc_rms\"": func(l *Limit) { l.Metric = "soc_rms" },
		"limit[0].at_most: found NaN":        func(l *Limit) { l.AtMost = math.NaN() },
		"limit[0].at_most: found -1":         func(l *Limit) { l.AtMost = -1 },
		"limit[0].share: found 0":            func(l *Limit) { l.Share = 0 },
		"limit[0].share: found 95":           func(l *Limit) { l.Share = 95 },
	} {
		l := good
		spoil(&l)
		if err := CheckLimits([]Limit{l}, metrics); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q", err, want)
		}
	}
}

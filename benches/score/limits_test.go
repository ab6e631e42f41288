package score

import (
	"math"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// Closed forms: all met, none met, the classic 3 of 10 as R's binom.test prints it
// (from memory), and no draws at all.
func TestClopperPearsonClosedForms(t *testing.T) {
	for _, tt := range []struct {
		met, n              int
		low, high, tolerate float64
	}{
		{0, 0, 0, 1, 0},
		{20, 20, math.Pow(0.025, 1.0/20), 1, 1e-12},
		{0, 20, 0, 1 - math.Pow(0.025, 1.0/20), 1e-12},
		{256, 256, math.Pow(0.025, 1.0/256), 1, 1e-12},
		{3, 10, 0.06673951, 0.65245285, 5e-9},
		{1, 1, 0.025, 1, 1e-12},
	} {
		low, high := ClopperPearson(tt.met, tt.n, 0.95)
		if math.Abs(low-tt.low) > tt.tolerate || math.Abs(high-tt.high) > tt.tolerate {
			t.Errorf("%d of %d: [%.9f, %.9f], want [%.9f, %.9f]", tt.met, tt.n, low, high, tt.low, tt.high)
		}
	}
}

// The interval by its own definition: at either end the binomial tail, summed
// term by term, is what half the rest of the confidence leaves.
func TestClopperPearsonTails(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 400).Draw(t, "n")
		k := rapid.IntRange(0, n).Draw(t, "met")
		low, high := ClopperPearson(k, n, 0.95)
		tail := func(p float64, from, to int) float64 {
			sum := 0.0
			for i := from; i <= to; i++ {
				a, _ := math.Lgamma(float64(n + 1))
				b, _ := math.Lgamma(float64(i + 1))
				c, _ := math.Lgamma(float64(n - i + 1))
				sum += math.Exp(a - b - c + float64(i)*math.Log(p) + float64(n-i)*math.Log1p(-p))
			}
			return sum
		}
		if k > 0 && math.Abs(tail(low, k, n)-0.025) > 1e-8 {
			t.Errorf("P(X ≥ %d) at %g is %g", k, low, tail(low, k, n))
		}
		if k < n && math.Abs(tail(high, 0, k)-0.025) > 1e-8 {
			t.Errorf("P(X ≤ %d) at %g is %g", k, high, tail(high, 0, k))
		}
	})
}

// rowsOf makes results whose settled_max_abs are the sizes given.
func rowsOf(sizes ...float64) []Result {
	out := make([]Result, len(sizes))
	for i, x := range sizes {
		m := Nothing()
		m.SettledMaxAbs, m.ConvergeS, m.SOCBias = x, x, -x
		out[i] = Result{ScenarioID: int64(i + 1), Estimator: "ekf", Status: OK, Metrics: m}
	}
	return out
}

func repeat(x float64, n int) []float64 {
	out := make([]float64, n)
	for i := range out {
		out[i] = x
	}
	return out
}

func TestJudge(t *testing.T) {
	limit := Limit{Metric: "settled_max_abs", AtMost: 0.05, Share: 0.95}
	with := func(change func(*Limit)) Limit { l := limit; change(&l); return l }
	good, bad, null := 0.05, 0.0501, math.NaN()
	spoil := func(rows []Result, s Status, n int) []Result {
		for i := range n {
			rows[i].Status = s
		}
		return rows
	}
	pairs := map[int64]int64{} // two scenarios a draw
	for i := range int64(200) {
		pairs[i+1] = (i + 2) / 2
	}
	for _, tt := range []struct {
		name                   string
		limit                  Limit
		rows                   []Result
		how                    Sampling
		verdict                Verdict
		met, notMet, undecided int
		why                    string
	}{
		// 0.025^(1/n) ≥ 0.95 from n = 72 on.
		{"72 of 72 show 0.95", limit, rowsOf(repeat(good, 72)...), Sampling{}, Pass, 72, 0, 0, "72 of 72"},
		{"71 of 71 do not", limit, rowsOf(repeat(good, 71)...), Sampling{}, CannotTell, 71, 0, 0, "more scenarios"},
		{"half of 100", limit, rowsOf(append(repeat(good, 50), repeat(bad, 50)...)...), Sampling{}, Fail, 50, 50, 0, "50 of 100"},
		{"counted", limit, rowsOf(append(repeat(good, 19), bad)...), Sampling{Counted: true}, Pass, 19, 1, 0, "19 of 20"},
		{"counted below", limit, rowsOf(append(repeat(good, 18), bad, bad)...), Sampling{Counted: true}, Fail, 18, 2, 0, "18 of 20"},
		{"counted, all of all", with(func(l *Limit) { l.Share = 1 }), rowsOf(good, good), Sampling{Counted: true}, Pass, 2, 0, 0, ""},
		{"a share of 1 from draws", with(func(l *Limit) { l.Share = 1 }), rowsOf(repeat(good, 5000)...), Sampling{}, CannotTell, 5000, 0, 0, "share of 1"},
		{"a share of 1 refuted", with(func(l *Limit) { l.Share = 1 }), rowsOf(append(repeat(good, 99), bad)...), Sampling{}, Fail, 99, 1, 0, ""},
		{"null: too short", limit, rowsOf(append(repeat(good, 99), null)...), Sampling{}, CannotTell, 99, 0, 1, "null in 1"},
		{"null: too short, counted", limit, rowsOf(append(repeat(good, 99), null)...), Sampling{Counted: true}, CannotTell, 99, 0, 1, "null in 1"},
		{"null converge_s is not met", Limit{Metric: "converge_s", AtMost: 600, Share: 0.5}, rowsOf(append(repeat(good, 99), null)...), Sampling{Counted: true}, Pass, 99, 1, 0, ""},
		{"lost is not met", limit, spoil(rowsOf(repeat(good, 100)...), Lost, 60), Sampling{}, Fail, 40, 60, 0, ""},
		{"failed is not met", limit, spoil(rowsOf(repeat(null, 100)...), Failed, 100), Sampling{}, Fail, 0, 100, 0, ""},
		{"draws of two count as one", limit, rowsOf(repeat(good, 142)...), Sampling{Draw: pairs}, CannotTell, 71, 0, 0, ""},
		{"a draw needs all its rows", limit, rowsOf(append(repeat(good, 199), bad)...), Sampling{Draw: pairs}, CannotTell, 99, 1, 0, "0.9455 to 0.9997"},
		{"a bias counts by its size", Limit{Metric: "soc_bias", AtMost: 0.01, Share: 0.5}, rowsOf(repeat(bad, 20)...), Sampling{}, Fail, 0, 20, 0, ""},
		{"no such group", with(func(l *Limit) { l.Group = "aged" }), rowsOf(good), Sampling{}, CannotTell, 0, 0, 0, "no scenario"},
		{"no such estimator", with(func(l *Limit) { l.Estimator = "none" }), rowsOf(good), Sampling{}, CannotTell, 0, 0, 0, "no scenario"},
	} {
		got, err := Judge([]Limit{tt.limit}, tt.rows, tt.how)
		if err != nil || len(got) != 1 {
			t.Fatalf("%s: %v, %v", tt.name, got, err)
		}
		j := got[0]
		if j.Verdict != tt.verdict || j.Met != tt.met || j.NotMet != tt.notMet || j.Undecided != tt.undecided || !strings.Contains(j.Why, tt.why) {
			t.Errorf("%s: got %+v", tt.name, j)
		}
	}
	if _, err := Judge([]Limit{{Metric: "soc_rms"}}, rowsOf(good), Sampling{}); err == nil || !strings.Contains(err.Error(), "soc_rms") {
		t.Errorf("an unknown metric: %v", err)
	}
}

// A limit without an estimator is judged for each by itself, one with a group
// only on that group.
func TestJudgeEachEstimatorAndGroup(t *testing.T) {
	rows := rowsOf(repeat(0.01, 10)...)
	for i := range rows {
		if i%2 == 1 {
			rows[i].Estimator, rows[i].Metrics.SettledMaxAbs = "coulomb", 0.2
		}
		if i < 4 {
			rows[i].Group = "aged"
		}
	}
	got, err := Judge([]Limit{{Metric: "settled_max_abs", AtMost: 0.05, Share: 0.9, Group: "aged"}}, rows, Sampling{Counted: true})
	if err != nil {
		t.Fatal(err)
	}
	if len(got) != 2 || got[0].Estimator != "ekf" || got[0].Verdict != Pass || got[0].Met != 2 ||
		got[1].Estimator != "coulomb" || got[1].Verdict != Fail || got[1].NotMet != 2 {
		t.Errorf("got %+v", got)
	}
}

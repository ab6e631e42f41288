package store

import (
	"math"
	"os"
	"path/filepath"
	"reflect"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"pgregory.net/rapid"

	"soctrial/benches/score"
)

func resultGen(id int64, estimator string) *rapid.Generator[score.Result] {
	return rapid.Custom(func(t *rapid.T) score.Result {
		text := rapid.StringN(0, 20, -1)
		r := score.Result{ScenarioID: id, Seed: rapid.Uint64().Draw(t, "seed"), Cell: "sweeper", Duty: text.Draw(t, "duty"),
			Sensors: "pack", Group: text.Draw(t, "group"), Estimator: estimator, Reason: text.Draw(t, "reason"),
			Status: rapid.SampledFrom([]score.Status{score.OK, score.Lost, score.Failed}).Draw(t, "status")}
		number := rapid.OneOf(rapid.Float64(), rapid.Just(math.NaN()), rapid.Just(0.0))
		// Field by field, so that a metric the store forgets comes back wrong.
		m := reflect.ValueOf(&r.Metrics).Elem()
		for i := range m.NumField() {
			if f := m.Field(i); f.Kind() == reflect.Float64 {
				f.SetFloat(number.Draw(t, m.Type().Field(i).Name))
			} else {
				f.SetInt(rapid.Int64Min(0).Draw(t, m.Type().Field(i).Name))
			}
		}
		return r
	})
}

func someMeta() ResultsMeta {
	return ResultsMeta{SetSHA256: hashOf([]byte("set")), Version: "0.1", Complete: true, Finished: 3, Total: 7,
		EstimatorFiles: map[string]string{"ekf two branches": "kind = \"ekf\"\n", "coulomb": "kind = \"coulomb\"\n"},
		Settings:       map[string]string{"settle_after_s": "600", "low_soc": "0.2"}}
}

func TestResultsRoundTrip(t *testing.T) {
	path := filepath.Join(t.TempDir(), "results.parquet")
	rapid.Check(t, func(t *rapid.T) {
		var rows []score.Result
		for i := range rapid.IntRange(0, 30).Draw(t, "rows") {
			rows = append(rows, resultGen(int64(i/2), []string{"ekf", "coulomb"}[i%2]).Draw(t, "row"))
		}
		meta := someMeta()
		if err := WriteResults(path, rows, meta); err != nil {
			t.Fatal(err)
		}
		one, _ := os.ReadFile(path)
		got, gotMeta, err := ReadResults(path)
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(rows, got, cmpopts.EquateNaNs(), cmpopts.EquateEmpty()); d != "" {
			t.Fatal(d)
		}
		if d := cmp.Diff(meta, gotMeta); d != "" {
			t.Fatal(d)
		}
		if err := WriteResults(path, rows, meta); err != nil {
			t.Fatal(err)
		}
		if two, _ := os.ReadFile(path); string(one) != string(two) {
			t.Fatal("bytes differ between two writes of one run")
		}
	})
}

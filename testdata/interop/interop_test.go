package interop

import (
	"database/sql"
	"fmt"
	"math"
	"path/filepath"
	"strings"
	"testing"

	_ "github.com/duckdb/duckdb-go/v2"

	"soctrial/benches/scenario"
	"soctrial/benches/score"
	"soctrial/benches/store"
)

func duck(t *testing.T) *sql.DB {
	t.Helper()
	db, err := sql.Open("duckdb", "")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { db.Close() })
	return db
}

// query returns all rows as DuckDB gives them, and the names of their columns.
func query(t *testing.T, db *sql.DB, q string) ([]map[string]any, []string) {
	t.Helper()
	rows, err := db.Query(q)
	if err != nil {
		t.Fatalf("%v\n%s", err, q)
	}
	defer rows.Close()
	names, err := rows.Columns()
	if err != nil {
		t.Fatal(err)
	}
	var out []map[string]any
	for rows.Next() {
		cells := make([]any, len(names))
		at := make([]any, len(names))
		for i := range cells {
			at[i] = &cells[i]
		}
		if err := rows.Scan(at...); err != nil {
			t.Fatal(err)
		}
		row := map[string]any{}
		for i, n := range names {
			row[n] = cells[i]
		}
		out = append(out, row)
	}
	if err := rows.Err(); err != nil {
		t.Fatal(err)
	}
	return out, names
}

// same compares a value of ours with one of DuckDB's, bit by bit.
func same(t *testing.T, where string, ours any, theirs any) {
	t.Helper()
	if x, ok := ours.(float64); ok && math.IsNaN(x) {
		ours = nil
	}
	if ours != theirs {
		t.Errorf("%s: we wrote %v (%T), DuckDB reads %v (%T)", where, ours, ours, theirs, theirs)
	}
}

func metadata(t *testing.T, db *sql.DB, path string) map[string]string {
	t.Helper()
	rows, _ := query(t, db, fmt.Sprintf("SELECT decode(key) AS k, decode(value) AS v FROM parquet_kv_metadata('%s')", path))
	out := map[string]string{}
	for _, r := range rows {
		out[r["k"].(string)] = r["v"].(string)
	}
	return out
}

func texts() map[string]string {
	return map[string]string{"cell.sweeper": "format = \"soctrial/cell/1\"\n# 4.8 Ah, °C\n", "duty.rounds": "format = \"soctrial/duty/1\"\n",
		"sensors.pack": "format = \"soctrial/sensors/1\"\n", "plan": "format = \"soctrial/plan/1\"\n"}
}

func TestSetIsReadBack(t *testing.T) {
	db, path := duck(t), filepath.Join(t.TempDir(), "set.parquet")
	s := &scenario.Set{Texts: texts()}
	for i := range 20000 {
		r := scenario.DefaultRow()
		r.ID, r.Seed, r.Cell, r.Duty, r.Sensors = int64(i), uint64(i)*0x9e3779b97f4a7c15, "sweeper", "rounds", "pack"
		r.SOCStart, r.SOCStartError = 1/float64(i+1), 0.1/float64(i+1)
		if i%3 == 0 {
			r.Group, r.TemperatureStartC, r.Override[0], r.Override[12] = fmt.Sprint("aged ", i%5), 25, -1/float64(i+7), 2
			r.CurrentReading = "interval-mean"
			r.Labels = []scenario.Label{{Column: "site", Text: "quay №" + fmt.Sprint(i%2)}, {Column: "label_draw", Number: float64(i), IsNumber: true}}
		}
		s.Rows = append(s.Rows, r)
	}
	if err := store.WriteSet(path, s); err != nil {
		t.Fatal(err)
	}
	got, names := query(t, db, fmt.Sprintf("SELECT * FROM '%s'", path))
	if len(got) != len(s.Rows) {
		t.Fatalf("DuckDB reads %d rows of %d", len(got), len(s.Rows))
	}
	known := map[string]scenario.Column{}
	for _, c := range scenario.Columns() {
		known[c.Name] = c
	}
	for i := range s.Rows {
		r := &s.Rows[i]
		for _, name := range names {
			where := fmt.Sprintf("row %d, %s", i, name)
			c, ok := known[name]
			if !ok {
				continue
			}
			v := c.Get(r)
			switch {
			case v.Null:
				same(t, where, nil, got[i][name])
			case v.Kind == scenario.Int:
				same(t, where, v.Int, got[i][name])
			case v.Kind == scenario.Text:
				same(t, where, v.Text, got[i][name])
			default:
				same(t, where, v.Number, got[i][name])
			}
		}
		if i%3 == 0 {
			same(t, "site", r.Labels[0].Text, got[i]["site"])
			same(t, "label_draw", r.Labels[1].Number, got[i]["label_draw"])
		} else {
			same(t, "site", nil, got[i]["site"])
		}
		if t.Failed() {
			t.FailNow()
		}
	}
	kv := metadata(t, db, path)
	for key, text := range s.Texts {
		if kv["soctrial."+key] != text {
			t.Errorf("metadata %s reads %q", key, kv["soctrial."+key])
		}
	}
	if kv["soctrial.format"] != "soctrial/set/1" {
		t.Error(kv["soctrial.format"])
	}
}

func TestResultsAreReadBack(t *testing.T) {
	db, path := duck(t), filepath.Join(t.TempDir(), "results.parquet")
	var rows []score.Result
	for i := range 500 {
		r := score.Result{ScenarioID: int64(i), Seed: math.MaxUint64 - uint64(i), Cell: "sweeper", Duty: "rounds", Sensors: "pack",
			Estimator: "ekf two branches", Status: score.OK, Metrics: score.Nothing()}
		r.Metrics.SOCRMSE, r.Metrics.EndError, r.Metrics.Samples = 1/float64(i+3), -1/float64(i+5), int64(i)
		r.Metrics.LimitedS = 0 // a zero is not a null
		if i%2 == 1 {
			r.Status, r.Reason, r.Group = score.Lost, "sample 7: covariance not positive", "aged"
		}
		rows = append(rows, r)
	}
	meta := store.ResultsMeta{SetSHA256: strings.Repeat("a", 64), Version: "test", Complete: false, Finished: 500, Total: 501,
		EstimatorFiles: map[string]string{"ekf two branches": "kind = \"ekf\"\n"}}
	if err := store.WriteResults(path, rows, meta); err != nil {
		t.Fatal(err)
	}
	got, _ := query(t, db, fmt.Sprintf("SELECT * FROM '%s'", path))
	if len(got) != len(rows) {
		t.Fatalf("DuckDB reads %d rows of %d", len(got), len(rows))
	}
	orNull := func(s string) any {
		if s == "" {
			return nil
		}
		return s
	}
	for i := range rows {
		r, g := &rows[i], got[i]
		same(t, "scenario_id", r.ScenarioID, g["scenario_id"])
		same(t, "seed", int64(r.Seed), g["seed"])
		same(t, "estimator", r.Estimator, g["estimator"])
		same(t, "status", string(r.Status), g["status"])
		same(t, "reason", orNull(r.Reason), g["reason"])
		same(t, "group", orNull(r.Group), g["group"])
		for k, name := range score.MetricNames() {
			if name == "samples" {
				same(t, name, r.Metrics.Samples, g[name])
			} else {
				same(t, name, r.Metrics.Values()[k], g[name])
			}
		}
	}
	kv := metadata(t, db, path)
	if kv["soctrial.set.sha256"] != meta.SetSHA256 || kv["soctrial.complete"] != "false" || kv["soctrial.estimator.ekf two branches"] != "kind = \"ekf\"\n" {
		t.Error(kv)
	}
}

func TestTracesAreReadBack(t *testing.T) {
	for _, thin := range []bool{false, true} {
		db, path := duck(t), filepath.Join(t.TempDir(), "traces.parquet")
		w, err := store.NewTraceWriter(path, thin, store.TraceMeta{})
		if err != nil {
			t.Fatal(err)
		}
		const n, blocks = 256, 300
		value := func(k, column int) float64 {
			if (k+column)%11 == 0 {
				return math.NaN()
			}
			return float64(column) - 1/float64(k+1)
		}
		for b := range blocks {
			var c store.TraceColumns
			for i := range n {
				k := b*n + i
				c.TimeS, c.SOC, c.VoltageV = append(c.TimeS, 0.1*float64(k)), append(c.SOC, value(k, 1)), append(c.VoltageV, value(k, 2))
			}
			if err := w.Append(42, "ekf", int64(b*n), &c); err != nil {
				t.Fatal(err)
			}
		}
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		got, names := query(t, db, fmt.Sprintf("SELECT * FROM '%s'", path))
		want := "scenario_id estimator sample time_s current_true_a voltage_true_v temperature_true_c soc_true current_a voltage_v " +
			"temperature_c soc soc_std voltage_predicted_v innovation_v innovation_std_v"
		if strings.Join(names, " ") != want || len(got) != n*blocks {
			t.Fatalf("%d rows of %v", len(got), names)
		}
		for k, g := range got {
			same(t, "sample", int64(k), g["sample"])
			same(t, "time_s", 0.1*float64(k), g["time_s"])
			same(t, "soc_true", nil, g["soc_true"])
			for column, name := range map[int]string{1: "soc", 2: "voltage_v"} {
				if x := value(k, column); !thin || math.IsNaN(x) {
					same(t, name, x, g[name])
				} else {
					same(t, name, float32(x), g[name])
				}
			}
			if t.Failed() {
				t.FailNow()
			}
		}
	}
}

package interop

import (
	"crypto/sha256"
	"fmt"
	"math"
	"path/filepath"
	"strings"
	"testing"

	"soctrial/benches/store"
)

// written makes a set with DuckDB: the rows of a SELECT, with metadata.
func written(t *testing.T, selected, options string, drop ...string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "foreign.parquet")
	kv := map[string]string{"soctrial.format": "soctrial/set/1"}
	for k, v := range texts() {
		kv["soctrial."+k] = v
	}
	kv["soctrial.cell.sweeper.sha256"] = fmt.Sprintf("%x", sha256.Sum256([]byte(kv["soctrial.cell.sweeper"])))
	for _, d := range drop {
		key, value, replace := strings.Cut(d, "=")
		if delete(kv, key); replace {
			kv[key] = value
		}
	}
	var pairs []string
	for k, v := range kv {
		pairs = append(pairs, fmt.Sprintf("'%s': '%s'", k, strings.ReplaceAll(v, "'", "''")))
	}
	q := fmt.Sprintf("COPY (%s) TO '%s' (FORMAT parquet%s, KV_METADATA {%s})", selected, path, options, strings.Join(pairs, ", "))
	if _, err := duck(t).Exec(q); err != nil {
		t.Fatalf("%v\n%s", err, q)
	}
	return path
}

const identity = "'rounds' AS duty, 'pack' AS sensors, 'sweeper' AS cell, i AS scenario_id, 7*i AS seed"

// Columns in another order, every width of number, decimals of every
// physical type, nulls, extra text and label_ columns, a whole number as a
// double: all read right, whatever the compression and the pages.
func TestForeignSet(t *testing.T) {
	rows := `SELECT
		'quay ' || (i % 3) AS site,
		CAST(i / 100000 AS FLOAT) AS soc_start_error,
		CASE WHEN i % 2 = 0 THEN NULL ELSE CAST(i % 50 AS TINYINT) END AS ambient_c,
		CAST(i % 7 AS UTINYINT) AS label_week, CAST(1 + i % 3 AS USMALLINT) AS plant_substeps,
		CAST(0.5 AS DECIMAL(4,2)) AS soc_start,
		CAST(1 + i AS DECIMAL(18,5)) / 1000 AS r0_scale,
		CAST(i AS DECIMAL(38,3)) + 0.125 AS branch_r_scale,
		CAST(i AS DECIMAL(9,3)) + 1.5 AS branch_tau_scale,
		CAST(-3 AS SMALLINT) AS current_offset_a,
		CASE WHEN i = 1 THEN NULL ELSE CAST(2 AS INTEGER) END AS voltage_every,
		NULL AS capacity_scale,
		CAST(i AS DOUBLE) AS scenario_id, CAST(18446744073709551615 - i AS UBIGINT) AS seed,
		'pack' AS sensors, CASE WHEN i % 2 = 0 THEN NULL ELSE 'aged' END AS "group", 'rounds' AS duty, 'sweeper' AS cell
		FROM range(1, 5001) AS r(i)`
	for _, options := range []string{"", ", COMPRESSION zstd", ", COMPRESSION gzip", ", COMPRESSION brotli",
		", COMPRESSION uncompressed", ", COMPRESSION zstd, ROW_GROUP_SIZE 2048, PARQUET_VERSION v2", ", PARQUET_VERSION v1, DICTIONARY_SIZE_LIMIT 1"} {
		t.Run(options, func(t *testing.T) {
			s, err := store.ReadSet(written(t, rows, options))
			if err != nil {
				t.Fatal(err)
			}
			if len(s.Rows) != 5000 {
				t.Fatalf("%d rows", len(s.Rows))
			}
			for k := range s.Rows {
				r, i := &s.Rows[k], int64(k+1)
				ambient, group, every := 25.0, "", 2.0
				if i%2 == 1 {
					ambient, group = float64(i%50), "aged"
				}
				if i == 1 {
					every = math.NaN()
				}
				for name, pair := range map[string][2]any{
					"scenario_id": {r.ID, i}, "seed": {r.Seed, uint64(math.MaxUint64) - uint64(i)}, "cell": {r.Cell, "sweeper"},
					"soc_start": {r.SOCStart, 0.5}, "soc_start_error": {r.SOCStartError, float64(float32(float64(i) / 100000))},
					"ambient_c": {r.AmbientC, ambient}, "group": {r.Group, group}, "plant_substeps": {r.PlantSubsteps, int(1 + i%3)},
					"r0_scale": {r.R0Scale, float64(i+1) / 1000}, "branch_r_scale": {r.BranchRScale, float64(i) + 0.125},
					"branch_tau_scale": {r.BranchTauScale, float64(i) + 1.5}, "capacity_scale": {r.CapacityScale, 1.0},
					"current_offset_a": {r.Override[0], -3.0},
				} {
					if pair[0] != pair[1] {
						t.Fatalf("scenario %d, %s: read %v, DuckDB wrote %v", i, name, pair[0], pair[1])
					}
				}
				if got := r.Override[13+12]; got != every && !(got != got && every != every) {
					t.Fatalf("scenario %d, voltage_every: read %v, DuckDB wrote %v", i, got, every)
				}
				if len(r.Labels) != 2 || r.Labels[0].Text != fmt.Sprint("quay ", i%3) || r.Labels[1].Number != float64(i%7) {
					t.Fatalf("scenario %d: labels %+v", i, r.Labels)
				}
			}
		})
	}
}

// What cannot be read right is refused, with file, column and reason.
func TestForeignSetRefused(t *testing.T) {
	from := " FROM range(1, 4) AS r(i)"
	for _, c := range []struct {
		name, columns string
		drop          []string
		want          string
	}{
		{"truth values", identity + ", true AS soc_start", nil, `column "soc_start" holds truth values`},
		{"time stamps", identity + ", TIMESTAMP '2026-01-01' AS ambient_c", nil, `column "ambient_c" holds TIMESTAMP`},
		{"dates", identity + ", DATE '2026-01-01' AS ambient_c", nil, `column "ambient_c" holds DATE values`},
		{"lists", identity + ", [1.0, 2.0] AS soc_start", nil, `column "soc_start" holds nested values`},
		{"nested", identity + ", {'x': 1.0} AS soc_start", nil, `column "soc_start" holds nested values`},
		{"nested, unknown", identity + ", {'x': 1.0} AS extra", nil, `column "extra" is unknown and holds nested values`},
		{"texts for numbers", identity + ", 'full' AS soc_start", nil, `soc_start: found "full"`},
		{"unknown number", identity + ", 0.1 AS current_ofset_a", nil, `column "current_ofset_a" is unknown and holds numbers: a set has known columns (the nearest is current_offset_a)`},
		{"beyond the range", identity + ", CAST(i AS DOUBLE) AS soc_start", nil, "row 2 (scenario_id 2): scenario: soc_start: found 2, allowed is a number in [0, 1]"},
		{"not a number", identity + ", CAST('nan' AS DOUBLE) AS soc_start", nil, "soc_start: found NaN"},
		{"infinite", identity + ", CAST('inf' AS DOUBLE) AS ocv_offset_v", nil, "ocv_offset_v: found +Inf"},
		{"a fraction of an id", strings.Replace(identity, "i AS scenario_id", "i + 0.5 AS scenario_id", 1), nil, "scenario_id: found 1.5"},
		{"an id twice", strings.Replace(identity, "i AS scenario_id", "5 AS scenario_id", 1), nil, "scenario_id 5 stands in row 1 and again in row 2"},
		{"no seed", strings.Replace(identity, "AS seed", "AS label_seed", 1), nil, `column "seed" is missing`},
		{"a null cell", strings.Replace(identity, "'sweeper' AS cell", "CASE WHEN i = 2 THEN NULL ELSE 'sweeper' END AS cell", 1), nil, "row 2 (scenario_id 2): scenario: cell: found nothing"},
		{"another cell", strings.Replace(identity, "'sweeper' AS cell", "'tug' AS cell", 1), nil, `cell is "tug", but metadata soctrial.cell.tug is missing (the set defines sweeper)`},
		{"no format", identity, []string{"soctrial.format"}, "metadata soctrial.format is missing"},
		{"another format", identity, []string{"soctrial.format=soctrial/set/2"}, `metadata soctrial.format is "soctrial/set/2"`},
		{"a changed text", identity, []string{"soctrial.cell.sweeper=changed"}, "metadata soctrial.cell.sweeper has the hash"},
		{"no text", identity, []string{"soctrial.duty.rounds"}, `duty is "rounds", but metadata soctrial.duty.rounds is missing`},
		{"negative scale", identity + ", -0.5 AS capacity_scale", nil, "capacity_scale: found -0.5"},
		{"no substeps", identity + ", 0 AS plant_substeps", nil, "plant_substeps: found 0"},
		{"full dropout", identity + ", 1.0 AS current_dropout_share", nil, "current_dropout_share: found 1"},
	} {
		t.Run(c.name, func(t *testing.T) {
			path := written(t, "SELECT "+c.columns+from, ", COMPRESSION zstd", c.drop...)
			s, err := store.ReadSet(path)
			if err == nil {
				t.Fatalf("read as %+v", s.Rows)
			}
			if !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), path) {
				t.Errorf("got  %v\nwant %s", err, c.want)
			}
		})
	}
	t.Run("LZ4", func(t *testing.T) {
		if _, err := store.ReadSet(written(t, "SELECT "+identity+from, ", COMPRESSION lz4_raw")); err == nil || !strings.Contains(err.Error(), "compressed by LZ4") {
			t.Error(err)
		}
	})
	t.Run("no rows", func(t *testing.T) {
		if _, err := store.ReadSet(written(t, "SELECT "+identity+from+" WHERE i > 9", "")); err == nil || !strings.Contains(err.Error(), "no rows") {
			t.Error(err)
		}
	})
}

// A vehicle's record as a database exports it: scaled decimals, small
// numbers, a null, its own names and units.
func TestForeignRecord(t *testing.T) {
	path := written(t, `SELECT CAST(100 * i AS INTEGER) AS "Time [ms]", CAST(i AS DECIMAL(9,3)) / 4 AS "Current(A)",
		CASE WHEN i = 2 THEN NULL ELSE CAST(3400 + i AS USMALLINT) END AS "Voltage(mV)", CAST(25 AS TINYINT) AS "Temp_degC", 'run' AS mode
		FROM range(0, 3000) AS r(i)`, ", COMPRESSION zstd, ROW_GROUP_SIZE 2048")
	r, told, err := store.ReadRecord(path, store.RecordOptions{})
	if err != nil {
		t.Fatal(err)
	}
	if r.Len() != 3000 {
		t.Fatalf("%d rows; %v", r.Len(), told)
	}
	for i := range 3000 {
		volts := (3400 + float64(i)) / 1000
		if i == 2 {
			volts = math.NaN()
		}
		if v := r.VoltageV[i]; v != volts && !(v != v && volts != volts) || r.TimeS[i] != float64(100*i)/1000 ||
			r.CurrentA[i] != float64(i)/4 || r.TemperatureC[i] != 25 {
			t.Fatalf("row %d: %g s %g A %g V %g °C", i, r.TimeS[i], r.CurrentA[i], v, r.TemperatureC[i])
		}
	}
}

package store

import (
	"bytes"
	"errors"
	"io"
	"maps"
	"math"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/parquet-go/parquet-go"

	"soctrial/benches/scenario"
	"soctrial/benches/score"
)

// named is the identity of a row, as another program's struct would have it.
type named struct {
	Duty    string  `parquet:"duty"`
	ID      float64 `parquet:"scenario_id"`
	Seed    int32   `parquet:"seed"`
	Sensors string  `parquet:"sensors"`
	Cell    string  `parquet:"cell"`
}

func one(id float64) named {
	return named{Duty: "rounds", ID: id, Seed: 7, Sensors: "pack", Cell: "sweeper"}
}

// foreign writes rows as another program would, with metadata.
func foreign[T any](t *testing.T, meta map[string]string, rows ...T) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "foreign.parquet")
	err := WriteFile(path, func(w io.Writer) error {
		p := parquet.NewGenericWriter[T](w)
		for _, k := range sortedKeys(meta) {
			p.SetKeyValueMetadata(k, meta[k])
		}
		_, err := p.Write(rows)
		return errors.Join(err, p.Close())
	})
	if err != nil {
		t.Fatal(err)
	}
	return path
}

// setMeta is the metadata of a whole set, with changes: a key with "" is left out.
func setMeta(changes ...string) map[string]string {
	m := map[string]string{formatKey: setFormat}
	for k, v := range sweeperTexts() {
		m[prefix+k] = v
	}
	for i := 0; i < len(changes); i += 2 {
		if m[changes[i]] = changes[i+1]; changes[i+1] == "" {
			delete(m, changes[i])
		}
	}
	return m
}

func TestForeignSetRefused(t *testing.T) {
	type with[T any] struct {
		named
		X T `parquet:"soc_start"`
	}
	type ofset struct {
		named
		X float32 `parquet:"current_ofset_a"`
	}
	type wideLabel struct {
		named
		X int64 `parquet:"label_x"`
	}
	rows := []named{one(1), one(2)}
	badUTF := one(1)
	badUTF.Duty = "\xff"
	for name, c := range map[string]struct{ path, want string }{
		"no format":            {foreign(t, setMeta(formatKey, ""), rows...), `metadata soctrial.format is missing; it must be "soctrial/set/1"`},
		"format of results":    {foreign(t, setMeta(formatKey, resultsFormat), rows...), `metadata soctrial.format is "soctrial/results/1"; "soctrial/set/1" is needed`},
		"no text":              {foreign(t, setMeta("soctrial.cell.sweeper", ""), rows...), `cell is "sweeper", but metadata soctrial.cell.sweeper is missing (the set defines none)`},
		"hash of another text": {foreign(t, setMeta("soctrial.plan.sha256", hashOf(nil)), rows...), "metadata soctrial.plan has the hash"},
		"hash of no text":      {foreign(t, setMeta("soctrial.cell.tug.sha256", hashOf(nil)), rows...), "is the hash of soctrial.cell.tug, which is missing"},
		"an id twice":          {foreign(t, setMeta(), one(4), one(5), one(4)), "scenario_id 4 stands in row 1 and again in row 3"},
		"half an id":           {foreign(t, setMeta(), one(4.5)), "row 1 (scenario_id 4.5): scenario: scenario_id: found 4.5, allowed is a whole number ≥ 0"},
		"an id beyond doubles": {foreign(t, setMeta(), one(1e17)), "scenario_id: found 1e+17"},
		"no identity":          {foreign(t, setMeta(), struct{ X float64 }{}), `column "scenario_id" is missing; a set has scenario_id, seed, cell, duty, sensors (this file has X)`},
		"no rows":              {foreign[named](t, setMeta()), "the set has no rows"},
		"truth values":         {foreign(t, setMeta(), with[bool]{one(1), true}), `column "soc_start" holds truth values; plain numbers or texts are read`},
		"lists":                {foreign(t, setMeta(), with[[]float64]{one(1), []float64{1}}), `column "soc_start" holds lists`},
		"nested":               {foreign(t, setMeta(), with[struct{ Y float64 }]{named: one(1)}), `column "soc_start" holds nested values`},
		"time stamps":          {foreign(t, setMeta(), with[time.Time]{one(1), time.Unix(0, 0)}), `column "soc_start" holds TIMESTAMP`},
		"bytes":                {foreign(t, setMeta(), with[[4]byte]{named: one(1)}), `column "soc_start" holds bytes`},
		"text for a number":    {foreign(t, setMeta(), with[string]{one(1), "full"}), `soc_start: found "full", allowed is a number in [0, 1]`},
		"beyond the range":     {foreign(t, setMeta(), with[int8]{one(3), 2}), "row 1 (scenario_id 3): scenario: soc_start: found 2, allowed is a number in [0, 1]"},
		"NaN":                  {foreign(t, setMeta(), with[float64]{one(3), math.NaN()}), "soc_start: found NaN"},
		"unknown number":       {foreign(t, setMeta(), ofset{one(1), 0.5}), `column "current_ofset_a" is unknown and holds numbers: a set has known columns (the nearest is current_offset_a), texts, and numbers whose name begins with label_`},
		"label beyond doubles": {foreign(t, setMeta(), wideLabel{one(1), 1<<53 + 1}), "label_x: found 9007199254740993"},
		"not UTF-8":            {foreign(t, setMeta(), badUTF), `column "duty", at or after row 0: a text is not UTF-8`},
	} {
		s, err := ReadSet(c.path)
		if err == nil {
			t.Errorf("%s: read as %+v", name, s.Rows)
		} else if !strings.HasPrefix(err.Error(), "store: "+c.path+": ") || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: got %v\nwant %s", name, err, c.want)
		}
	}
}

// Decimals are scaled whatever they are kept as, unsigned numbers keep their
// size, and the seed its bits.
func TestForeignNumbers(t *testing.T) {
	type row struct {
		Duty    string   `parquet:"duty,dict"`
		ID      uint16   `parquet:"scenario_id"`
		Seed    uint64   `parquet:"seed"`
		Sensors string   `parquet:"sensors,zstd"`
		Cell    string   `parquet:"cell,dict,gzip"`
		SOC     int32    `parquet:"soc_start,decimal(3:9)"`
		R0      int64    `parquet:"r0_scale,decimal(1:18),optional"`
		BranchR [3]byte  `parquet:"branch_r_scale,decimal(2:6)"`
		OCV     [3]byte  `parquet:"ocv_offset_v,decimal(4:6)"`
		Ambient *float32 `parquet:"ambient_c,optional,dict"`
		Ids     uint64   `parquet:"label_wide"`
		Every   float64  `parquet:"current_every,split"`
	}
	cold := float32(-10.5)
	rows := []row{
		{"rounds", 65535, math.MaxUint64, "pack", "sweeper", 875, 12, [3]byte{0, 1, 0}, [3]byte{0xff, 0xff, 0xfe}, &cold, 1 << 53, 2},
		{"rounds", 1, 1 << 63, "pack", "sweeper", 0, 0, [3]byte{0, 0, 1}, [3]byte{0, 0, 0}, nil, 3, 1},
	}
	s, err := ReadSet(foreign(t, setMeta(), rows...))
	if err != nil {
		t.Fatal(err)
	}
	a, b := s.Rows[0], s.Rows[1]
	for i, pair := range [][2]any{
		{a.ID, int64(65535)}, {a.Seed, uint64(math.MaxUint64)}, {b.Seed, uint64(1 << 63)}, {a.SOCStart, 0.875}, {a.R0Scale, 1.2}, {b.R0Scale, 1.0},
		{a.BranchRScale, 2.56}, {b.BranchRScale, 0.01}, {a.OCVOffsetV, -0.0002}, {a.AmbientC, -10.5}, {b.AmbientC, 25.0},
		{a.Override[12], 2.0}, {a.Labels[0].Number, float64(1 << 53)},
	} {
		if pair[0] != pair[1] {
			t.Errorf("%d: read %v, written %v", i, pair[0], pair[1])
		}
	}
	// An unsigned number beyond 63 bits belongs in a seed only.
	rows[1].Ids = 1 << 63
	if _, err := ReadSet(foreign(t, setMeta(), rows...)); err == nil || !strings.Contains(err.Error(), `"label_wide", at or after row 0: 9223372036854775808 is beyond 63 bits`) {
		t.Error(err)
	}
}

// What could not be read back is not written, and an old file stays.
func TestSetNotWritten(t *testing.T) {
	for want, spoil := range map[string]func(*scenario.Set){
		"soc_start: found 2":                    func(s *scenario.Set) { s.Rows[1].SOCStart = 2 },
		"scenario_id 1 stands in row 1":         func(s *scenario.Set) { s.Rows[1].ID = 1 },
		`cell is "tug", but metadata`:           func(s *scenario.Set) { s.Rows[1].Cell = "tug" },
		"a name may not end in .sha256":         func(s *scenario.Set) { s.Texts["cell.x.sha256"] = "" },
		`a text is kept as "map.x"`:             func(s *scenario.Set) { s.Texts["map.x"] = "" },
		`label "label_x" is a text in one`:      labels("label_x", "label_x", true),
		`a label may not be called "duty"`:      labels("duty", "", false),
		`label "site" stands there twice`:       func(s *scenario.Set) { s.Rows[0].Labels = []scenario.Label{{Column: "site"}, {Column: "site"}} },
		"x: found an unknown column of numbers": labels("x", "", true),
		`the text of "plan" is not UTF-8`:       func(s *scenario.Set) { s.Texts["plan"] = "\xff" },
	} {
		s := sweeperSet(2)
		spoil(s)
		path := put(t, "set.parquet", "old")
		if err := WriteSet(path, s); err == nil || !strings.Contains(err.Error(), want) || !strings.Contains(err.Error(), path) {
			t.Errorf("got %v, want %s", err, want)
		}
		if _, err := ReadSet(path); err == nil || !strings.Contains(err.Error(), `begins with "old`) {
			t.Errorf("%s: the old file is gone: %v", want, err)
		}
	}
}

// labels puts a label in the first row and one in the second.
func labels(first, second string, numbers bool) func(*scenario.Set) {
	return func(s *scenario.Set) {
		s.Rows[0].Labels = []scenario.Label{{Column: first, IsNumber: numbers && second == ""}}
		if second != "" {
			s.Rows[1].Labels = []scenario.Label{{Column: second, IsNumber: numbers}}
		}
	}
}

func TestResultsRefused(t *testing.T) {
	whole := smallResults(t)
	for name, c := range map[string]struct {
		from, to string // of one length: the file is changed in place
		want     string
	}{
		"a metric less":   {"soc_mae", "soc_mea", `column "soc_mea", row group 0`},
		"another format":  {"soctrial/results/1", "soctrial/results/2", `"soctrial/results/1" is needed`},
		"changed text":    {`kind = "ekf"`, `kind = "ukf"`, "has the hash"},
		"no truth value":  {"true", "tree", `metadata soctrial.complete is "tree"; true or false is needed`},
		"settings broken": {`{"low_soc"`, `("low_soc"`, "a JSON object of texts is needed"},
	} {
		b := bytes.Replace(whole, []byte(c.from), []byte(c.to), 1)
		if name == "a metric less" { // in the schema as in the column's chunk
			b, c.want = bytes.ReplaceAll(whole, []byte(c.from), []byte(c.to)), `column "soc_mae" is missing`
		}
		err := withInput("results.parquet", bytes.NewReader(b), int64(len(b)), usual, func(t *table) error {
			_, _, err := readResults(t)
			return err
		})
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: got %v, want %s", name, err, c.want)
		}
	}
	m := score.Nothing()
	row := score.Result{ScenarioID: 1, Estimator: "ekf", Status: score.OK, Metrics: m}
	path := filepath.Join(t.TempDir(), "results.parquet")
	if err := WriteResults(path, []score.Result{row, row}, someMeta()); err != nil {
		t.Fatal(err)
	}
	if _, _, err := ReadResults(path); err == nil || !strings.Contains(err.Error(), `scenario 1 with estimator "ekf" stands there a second time`) {
		t.Error(err)
	}
	row.Status = "fine"
	if err := WriteResults(path, []score.Result{row}, someMeta()); err == nil || !strings.Contains(err.Error(), `status is "fine"`) {
		t.Error(err)
	}
	named := someMeta()
	named.EstimatorFiles = maps.Clone(named.EstimatorFiles)
	named.EstimatorFiles["a.sha256"] = ""
	if err := WriteResults(path, nil, named); err == nil || !strings.Contains(err.Error(), "may not be empty or end in .sha256") {
		t.Error(err)
	}
}

func TestTracesRefused(t *testing.T) {
	path := put(t, "traces.parquet", string(smallTraces(t)))
	if _, err := ReadTraces(path, 1, "coulomb"); err == nil || !strings.Contains(err.Error(), `no trace of scenario 1 with estimator "coulomb"; the file holds 1 with "ekf"`) {
		t.Error(err)
	}
	if _, err := ReadTraces(put(t, "set.parquet", string(smallSet(t))), 1, "ekf"); err == nil || !strings.Contains(err.Error(), `"soctrial/traces/1" is needed`) {
		t.Error(err)
	}
	// Another program may mix the rows; a sample that stands there twice is refused.
	type row struct {
		TimeS     float64 `parquet:"time_s"`
		Sample    int32   `parquet:"sample"`
		Estimator string  `parquet:"estimator"`
		ID        int64   `parquet:"scenario_id"`
		A         float32 `parquet:"current_true_a"`
		B         float32 `parquet:"voltage_true_v"`
		C         float32 `parquet:"temperature_true_c"`
		D         float32 `parquet:"soc_true"`
		E         float32 `parquet:"current_a"`
		F         float32 `parquet:"voltage_v"`
		G         float32 `parquet:"temperature_c"`
		H         float64 `parquet:"soc"`
		I         float32 `parquet:"soc_std"`
		J         float32 `parquet:"voltage_predicted_v"`
		K         float32 `parquet:"innovation_v"`
		L         float32 `parquet:"innovation_std_v"`
	}
	meta := map[string]string{formatKey: tracesFormat}
	mixed := []row{{TimeS: 2, Sample: 2, Estimator: "ekf", ID: 1, H: 0.2}, {TimeS: 0, Estimator: "ekf", ID: 1, H: 0.1}, {TimeS: 1, Sample: 1, Estimator: "ekf", ID: 1, H: 0.3}}
	got, err := ReadTraces(foreign(t, meta, mixed...), 1, "ekf")
	if err != nil || got.TimeS[2] != 2 || got.SOC[0] != 0.1 || got.SOC[2] != 0.2 {
		t.Errorf("%+v %v", got, err)
	}
	mixed[1].Sample = 2
	if _, err := ReadTraces(foreign(t, meta, mixed...), 1, "ekf"); err == nil || !strings.Contains(err.Error(), "sample 2 stands there twice") {
		t.Error(err)
	}
}

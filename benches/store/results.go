package store

import (
	"encoding/json"
	"fmt"
	"io"
	"strconv"
	"strings"

	"github.com/parquet-go/parquet-go"

	"soctrial/benches/score"
)

// resultsFormat is the format of results.
const resultsFormat = "soctrial/results/1"

// ResultsMeta says what results belong to. It holds only what can change a
// number: no date, path or number of workers.
type ResultsMeta struct {
	SetSHA256      string            // of the set file's bytes
	EstimatorFiles map[string]string // name → TOML text
	Version        string            // of the tool
	Settings       map[string]string
	Complete       bool  // every (scenario, estimator) of the run is there
	Finished       int64 // scenarios finished
	Total          int64 // scenarios asked for
}

// The metadata of results, beside the format.
const (
	setHashKey      = prefix + "set.sha256"
	estimatorPrefix = prefix + "estimator."
	versionKey      = prefix + "version"
	settingsKey     = prefix + "settings" // a JSON object of texts
	completeKey     = prefix + "complete" // true or false
	finishedKey     = prefix + "finished"
	totalKey        = prefix + "total"
)

// identityTexts are the text columns of results before the metrics, and which
// of them are null where they are empty.
var identityTexts = []struct {
	name string
	null bool
	at   func(*score.Result) *string
}{
	{"cell", false, func(r *score.Result) *string { return &r.Cell }},
	{"duty", false, func(r *score.Result) *string { return &r.Duty }},
	{"sensors", false, func(r *score.Result) *string { return &r.Sensors }},
	{"group", true, func(r *score.Result) *string { return &r.Group }},
	{"estimator", false, func(r *score.Result) *string { return &r.Estimator }},
	{"status", false, func(r *score.Result) *string { return (*string)(&r.Status) }},
	{"reason", true, func(r *score.Result) *string { return &r.Reason }},
}

// samplesMetric is the one metric that is a count.
const samplesMetric = "samples"

// WriteResults writes one row a (scenario, estimator), in the order given: identity,
// status, reason, then every metric of score.MetricNames. A NaN metric and an
// empty group or reason are null. Parts of a run are written with it too.
func WriteResults(path string, rows []score.Result, meta ResultsMeta) error {
	return writeResults(disk{}, path, rows, meta)
}

func writeResults(d disk, path string, rows []score.Result, meta ResultsMeta) error {
	for i := range rows {
		if err := checkStatus(&rows[i]); err != nil {
			return fmt.Errorf("store: writing %s: row %d: %w", path, i+1, err)
		}
	}
	kv, err := meta.encode()
	if err != nil {
		return fmt.Errorf("store: writing %s: %w", path, err)
	}
	return d.writeFile(path, func(w io.Writer) error {
		return fencedWrite(func() error { return putResults(w, rows, kv) })
	})
}

func (m *ResultsMeta) encode() (map[string]string, error) {
	settings, err := json.Marshal(m.Settings) // keys sorted
	if err != nil {
		return nil, err
	}
	if m.Settings == nil {
		settings = []byte("{}")
	}
	kv := map[string]string{
		formatKey: resultsFormat, setHashKey: m.SetSHA256, versionKey: m.Version, settingsKey: string(settings),
		completeKey: strconv.FormatBool(m.Complete), finishedKey: strconv.FormatInt(m.Finished, 10), totalKey: strconv.FormatInt(m.Total, 10),
	}
	for name, text := range m.EstimatorFiles {
		if name == "" || strings.HasSuffix(name, hashSuffix) {
			return nil, fmt.Errorf("an estimator is called %q; a name may not be empty or end in %s", name, hashSuffix)
		}
		kv[estimatorPrefix+name] = text
		kv[estimatorPrefix+name+hashSuffix] = hashOf([]byte(text))
	}
	return kv, nil
}

func checkStatus(r *score.Result) error {
	switch r.Status {
	case score.OK, score.Lost, score.Failed:
		return nil
	}
	return fmt.Errorf("scenario %d, estimator %q: status is %q; ok, lost and failed are allowed", r.ScenarioID, r.Estimator, r.Status)
}

func resultSpecs() []columnSpec {
	specs := []columnSpec{ints("scenario_id"), ints(seedColumn)}
	for _, c := range identityTexts {
		if c.null {
			specs = append(specs, nullTexts(c.name))
		} else {
			specs = append(specs, texts(c.name))
		}
	}
	for _, name := range score.MetricNames() {
		if name == samplesMetric {
			specs = append(specs, ints(name))
		} else {
			specs = append(specs, nullDoubles(name))
		}
	}
	return specs
}

func putResults(w io.Writer, rows []score.Result, meta map[string]string) error {
	t := newTableWriter(w, "results", resultSpecs(), meta)
	metrics := score.MetricNames()
	for from := 0; from < len(rows); from += groupRows {
		part := rows[from:min(from+groupRows, len(rows))]
		numbers := make([][]float64, len(part))
		for i := range part {
			numbers[i] = part[i].Metrics.Values()
		}
		at := func(c, i int) parquet.Value {
			r := &part[i]
			switch m := c - 2 - len(identityTexts); {
			case c == 0:
				return parquet.Int64Value(r.ScenarioID)
			case c == 1:
				return parquet.Int64Value(int64(r.Seed))
			case m < 0:
				text := identityTexts[c-2]
				if text.null {
					return textOrNull(*text.at(r))
				}
				return parquet.ByteArrayValue([]byte(*text.at(r)))
			case metrics[m] == samplesMetric:
				return parquet.Int64Value(r.Metrics.Samples)
			default:
				return numberOrNull(numbers[i][m])
			}
		}
		for c := range t.specs {
			if err := t.column(c, len(part), func(i int) parquet.Value { return at(c, i) }); err != nil {
				return err
			}
		}
		if err := t.w.Flush(); err != nil {
			return err
		}
	}
	return t.w.Close()
}

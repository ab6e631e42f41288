package store

import (
	"encoding/json"
	"math"
	"strconv"
	"strings"

	"soctrial/benches/score"
)

// ReadResults reads results back, in the file's order. Every column that
// WriteResults writes must be there; others are passed over. A null metric is
// NaN. A (scenario, estimator) that stands there twice is refused.
func ReadResults(path string) ([]score.Result, ResultsMeta, error) {
	var rows []score.Result
	var meta ResultsMeta
	err := withTable(path, func(t *table) (err error) {
		rows, meta, err = readResults(t)
		return err
	})
	if err != nil {
		return nil, ResultsMeta{}, err
	}
	return rows, meta, nil
}

func readResults(t *table) ([]score.Result, ResultsMeta, error) {
	var meta ResultsMeta
	if err := t.requireFormat(resultsFormat); err != nil {
		return nil, meta, err
	}
	if err := meta.decode(t); err != nil {
		return nil, meta, err
	}
	columns := make([]*values, 0, len(resultSpecs()))
	for _, spec := range resultSpecs() {
		v, err := t.need(spec.name, kindOf(spec), spec.node.Optional())
		if err != nil {
			return nil, meta, err
		}
		columns = append(columns, v)
	}
	rows := make([]score.Result, t.rows)
	type pair struct {
		id   int64
		name string
	}
	seen := make(map[pair]bool, len(rows))
	for i := range rows {
		r := &rows[i]
		r.ScenarioID, r.Seed = columns[0].ints[i], uint64(columns[1].ints[i])
		for c, text := range identityTexts {
			*text.at(r) = columns[2+c].texts[i]
		}
		if err := checkStatus(r); err != nil {
			return nil, meta, t.errf("row %d: %w", i+1, err)
		}
		if key := (pair{r.ScenarioID, r.Estimator}); seen[key] {
			return nil, meta, t.errf("row %d: scenario %d with estimator %q stands there a second time", i+1, r.ScenarioID, r.Estimator)
		} else {
			seen[key] = true
		}
		numbers := metricFields(&r.Metrics)
		for m, name := range score.MetricNames() {
			v := columns[2+len(identityTexts)+m]
			switch {
			case name == samplesMetric:
				r.Metrics.Samples = v.ints[i]
			case v.isNull(i):
				*numbers[m] = math.NaN()
			default:
				*numbers[m] = v.nums[i]
			}
		}
	}
	return rows, meta, nil
}

// metricFields lists the fields in the order of score.MetricNames; the count of
// samples is nil.
func metricFields(m *score.Metrics) [19]*float64 {
	return [...]*float64{&m.SOCRMSE, &m.SOCMAE, &m.SOCBias, &m.SOCMaxAbs, &m.SOCP95Abs, &m.SettledRMSE,
		&m.SettledMaxAbs, &m.ConvergeS, &m.EndError, &m.LowSOCMaxAbs, &m.SOCStepMax, &m.VoltageRMSEV,
		&m.NISMean, &m.NISInBandShare, &m.NEESMean, &m.Coverage95, nil, &m.DurationS, &m.LimitedS}
}

// decode reads the metadata of results.
func (m *ResultsMeta) decode(t *table) error {
	if err := t.checkHashes(); err != nil {
		return err
	}
	m.EstimatorFiles = map[string]string{}
	for key, text := range t.meta {
		if name, ok := strings.CutPrefix(key, estimatorPrefix); ok && !strings.HasSuffix(key, hashSuffix) {
			m.EstimatorFiles[name] = text
		}
	}
	m.SetSHA256, m.Version = t.meta[setHashKey], t.meta[versionKey]
	bad := func(key, allowed string) error {
		return t.errf("metadata %s is %q; %s is needed", key, t.meta[key], allowed)
	}
	if err := json.Unmarshal([]byte(t.meta[settingsKey]), &m.Settings); err != nil {
		return bad(settingsKey, "a JSON object of texts")
	}
	var err error
	if m.Complete, err = strconv.ParseBool(t.meta[completeKey]); err != nil {
		return bad(completeKey, "true or false")
	}
	if m.Finished, err = strconv.ParseInt(t.meta[finishedKey], 10, 64); err != nil {
		return bad(finishedKey, "a whole number")
	}
	if m.Total, err = strconv.ParseInt(t.meta[totalKey], 10, 64); err != nil {
		return bad(totalKey, "a whole number")
	}
	return nil
}

package main

import (
	"encoding/json"
	"io"
	"math"

	"soctrial/benches/job"
	"soctrial/benches/score"
)

// maybe is a number, or null where there is none.
type maybe float64

// MarshalJSON writes null for what is not a finite number.
func (m maybe) MarshalJSON() ([]byte, error) {
	x := float64(m)
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return []byte("null"), nil
	}
	return json.Marshal(x)
}

func printJSON(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	return e.Encode(v)
}

// outcomeDoc is what run, replay and show print with --json; metrics go by
// their names in results.parquet.
type outcomeDoc struct {
	Format     string         `json:"format"` // soctrial/summary/1
	Name       string         `json:"name"`
	Complete   bool           `json:"complete"`
	Finished   int            `json:"finished"`
	Scenarios  int            `json:"scenarios"`
	Reference  string         `json:"reference,omitempty"`
	Estimators []estimatorDoc `json:"estimators"`
	Limits     []limitDoc     `json:"limits"`
	Worst      []worstDoc     `json:"worst"`
}

type estimatorDoc struct {
	Estimator   string               `json:"estimator"`
	OK          int                  `json:"ok"`
	Lost        int                  `json:"lost"`
	Failed      int                  `json:"failed"`
	Reasons     map[string]int       `json:"reasons"`
	Verdict     string               `json:"honesty"`
	Evidence    []string             `json:"honesty_reasons"`
	Means       map[string]meanDoc   `json:"means"`
	NsPerSample maybe                `json:"ns_per_sample"`
	Metrics     map[string]spreadDoc `json:"metrics"`
}

type meanDoc struct {
	Mean maybe `json:"mean"`
	Low  maybe `json:"low_95"`
	High maybe `json:"high_95"`
	N    int   `json:"n"`
}

type spreadDoc struct {
	Median maybe `json:"median"`
	P95    maybe `json:"p95"`
	Worst  maybe `json:"worst"`
	N      int   `json:"n"`
	Null   int   `json:"null"`
}

type limitDoc struct {
	Metric    string   `json:"metric"`
	AtMost    float64  `json:"at_most"`
	Share     float64  `json:"share"`
	Group     string   `json:"group,omitempty"`
	Estimator string   `json:"estimator"`
	Verdict   string   `json:"verdict"`
	Met       int      `json:"met"`
	NotMet    int      `json:"not_met"`
	Undecided int      `json:"undecided"`
	ShareMet  maybe    `json:"share_met"`
	Low       maybe    `json:"low_95"`
	High      maybe    `json:"high_95"`
	Why       string   `json:"why"`
	Because   []string `json:"because"`
	Worst     maybe    `json:"worst"`
	WorstID   int64    `json:"worst_scenario_id"`
}

type worstDoc struct {
	ScenarioID int64    `json:"scenario_id"`
	Estimator  string   `json:"estimator"`
	Status     string   `json:"status"`
	Metric     string   `json:"metric"`
	Value      maybe    `json:"value"`
	Special    []string `json:"special"`
}

func outcomeJSON(o *job.Outcome) outcomeDoc {
	s := o.Summary()
	d := outcomeDoc{Format: "soctrial/summary/1", Name: o.Name, Complete: o.Complete, Finished: o.Finished, Scenarios: o.Total,
		Reference: o.Reference, Estimators: []estimatorDoc{}, Limits: []limitDoc{}, Worst: []worstDoc{}}
	for _, e := range s.Estimators {
		x := estimatorDoc{Estimator: e.Estimator, OK: e.OK, Lost: e.Lost, Failed: e.Failed, Reasons: map[string]int{},
			Verdict: string(e.Honesty.Verdict), Evidence: texts(e.Honesty.Reasons), NsPerSample: maybe(e.NsPerSample),
			Means: map[string]meanDoc{"coverage_95": mean(e.Honesty.Coverage95), "nis_mean": mean(e.Honesty.NIS),
				"nees_mean": mean(e.Honesty.NEES)}, Metrics: map[string]spreadDoc{}}
		for _, r := range e.Reasons {
			x.Reasons[r.Text] = r.Count
		}
		for _, m := range e.Spreads {
			x.Metrics[m.Metric] = spreadDoc{maybe(m.Median), maybe(m.P95), maybe(m.Worst), m.N, m.Null}
		}
		d.Estimators = append(d.Estimators, x)
	}
	for _, l := range s.Limits {
		x := limitDoc{Metric: l.Limit.Metric, AtMost: l.Limit.AtMost, Share: l.Limit.Share, Group: l.Limit.Group, Estimator: l.Estimator,
			Verdict: string(l.Verdict), Met: l.Met, NotMet: l.NotMet, Undecided: l.Undecided, ShareMet: maybe(l.Share), Low: maybe(l.Low),
			High: maybe(l.High), Why: l.Why, Because: []string{}, Worst: maybe(l.Worst), WorstID: l.WorstID}
		for _, c := range l.Because {
			x.Because = append(x.Because, c.String())
		}
		d.Limits = append(d.Limits, x)
	}
	for _, w := range s.Worst {
		x := worstDoc{ScenarioID: w.Result.ScenarioID, Estimator: w.Result.Estimator, Status: string(w.Result.Status),
			Metric: s.WorstBy, Value: maybe(w.Value), Special: []string{}}
		for _, p := range w.Special {
			x.Special = append(x.Special, p.String())
		}
		d.Worst = append(d.Worst, x)
	}
	return d
}

func mean(i score.Interval) meanDoc {
	return meanDoc{maybe(i.Mean), maybe(i.Low), maybe(i.High), i.N}
}

func texts(t []string) []string {
	if t == nil {
		return []string{}
	}
	return t
}

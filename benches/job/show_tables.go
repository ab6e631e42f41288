package job

import (
	"fmt"
	"maps"
	"math"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"soctrial/benches"
	"soctrial/benches/define"
	"soctrial/benches/scenario"
	"soctrial/benches/score"
	"soctrial/benches/store"
)

func showSet(o *ShowOptions) (*Shown, error) {
	f, err := store.ReadSet(o.Path)
	if err != nil {
		return nil, wrong(err)
	}
	set, err := parseSet(f)
	if err != nil {
		return nil, wrong(err)
	}
	s := &Shown{Kind: "set", Name: recordName(o.Path)}
	s.fact("scenarios", "%d", len(set.Rows))
	if set.Draw != "" {
		draws := set.Draws()
		s.fact("drawn by", "%s, %s", set.Draw, counted(len(distinct(draws))+len(set.Rows)-len(draws), "draw"))
	}
	s.fact("cells", "%s", strings.Join(slices.Sorted(maps.Keys(set.Cells)), ", "))
	s.fact("duties", "%s", strings.Join(slices.Sorted(maps.Keys(set.Duties)), ", "))
	s.fact("sensors", "%s", strings.Join(slices.Sorted(maps.Keys(set.Sensors)), ", "))
	s.fact("score", "settled after %g s, converged within %g for %g s, low below SOC %g",
		set.Score.SettleAfterS, set.Score.ConvergeBand, set.Score.ConvergeHoldS, set.Score.LowSOC)
	s.fact("sha256", "%s", f.SHA256)
	s.columns(set)
	s.limits(set.Limits)
	return s, nil
}

// counted is n of something, in words.
func counted(n int, of string) string {
	if n == 1 {
		return "1 " + of
	}
	return fmt.Sprintf("%d %ss", n, of)
}

// labelsOf returns the set's labels as columns, but for the draws' numbers.
func labelsOf(set *scenario.Set) []score.Column {
	var out []score.Column
	at := map[string]int{}
	for i := range set.Rows {
		for _, l := range set.Rows[i].Labels {
			if l.Column == scenario.LabelPrefix+"draw" {
				continue
			}
			k, seen := at[l.Column]
			if !seen {
				k = len(out)
				at[l.Column] = k
				out = append(out, score.Column{Name: l.Column})
			}
			if l.IsNumber {
				out[k].Numbers = append(out[k].Numbers, l.Number)
			} else {
				out[k].Texts = append(out[k].Texts, l.Text)
			}
		}
	}
	return out
}

func distinct(m map[int64]int64) map[int64]bool {
	out := map[int64]bool{}
	for _, v := range m {
		out[v] = true
	}
	return out
}

// columns shows each column that differs between scenarios with its range, and
// those that depart from their default alike in all.
func (s *Shown) columns(set *scenario.Set) {
	vary := [][]string{{"column", "least", "median", "most", "values"}}
	alike := [][]string{{"column", "in every scenario"}}
	columns, _ := columnsOf(set)
	for _, c := range append(columns, labelsOf(set)...) {
		if c.Texts != nil {
			words := slices.Compact(slices.Sorted(slices.Values(c.Texts)))
			switch {
			case len(words) > 1:
				shown := words
				if len(shown) > 3 {
					shown = shown[:3]
				}
				vary = append(vary, []string{c.Name, strings.Join(shown, ", "), "", "", strconv.Itoa(len(words))})
			case len(words) == 1 && words[0] != "":
				alike = append(alike, []string{c.Name, words[0]})
			}
			continue
		}
		var x []float64
		for _, v := range c.Numbers {
			if !math.IsNaN(v) {
				x = append(x, v)
			}
		}
		slices.Sort(x)
		if len(x) == 0 {
			continue
		}
		different := len(slices.Compact(slices.Clone(x)))
		known, found := scenario.Find(c.Name)
		switch {
		case different > 1 || len(x) < len(c.Numbers):
			vary = append(vary, []string{c.Name, short3(x[0]), short3(score.Percentile(x, 0.5)), short3(x[len(x)-1]), strconv.Itoa(different)})
		case !found || known.Default.Null || x[0] != known.Default.Number && known.Kind == scenario.Number || known.Kind == scenario.Int && x[0] != float64(known.Default.Int):
			alike = append(alike, []string{c.Name, short3(x[0])})
		}
	}
	if len(vary) > 1 {
		s.Tables = append(s.Tables, ShownTable{"Columns that vary", vary})
	}
	if len(alike) > 1 {
		s.Tables = append(s.Tables, ShownTable{"The same in all", alike})
	}
}

func (s *Shown) limits(limits []scenario.Limit) {
	if len(limits) == 0 {
		return
	}
	rows := [][]string{{"limit on", "at most", "share", "group", "estimator"}}
	for _, l := range limits {
		rows = append(rows, []string{l.Metric, short3(l.AtMost), short3(l.Share), orAll(l.Group), orAll(l.Estimator)})
	}
	s.Tables = append(s.Tables, ShownTable{"Limits", rows})
}

func orAll(s string) string {
	if s == "" {
		return "all"
	}
	return s
}

// showResults reads results back into what run printed of them.
func showResults(o *ShowOptions) (*Shown, error) {
	rows, meta, err := store.ReadResults(o.Path)
	if err != nil {
		return nil, wrong(err)
	}
	dir := filepath.Dir(o.Path)
	out := &Outcome{Dir: "", Name: filepath.Base(dir), Results: rows, Costs: map[string]benches.Cost{}, Complete: meta.Complete,
		Finished: int(meta.Finished), Total: int(meta.Total), Reference: meta.Settings["reference"]}
	var sampling score.Sampling
	setPath := filepath.Join(dir, SetFile)
	if sum, err := fileHash(setPath); err == nil && sum == meta.SetSHA256 {
		if out.Set, _, err = loadSet(setPath); err != nil {
			return nil, err
		}
		sampling = samplingOf(out.Set)
	}
	if out.Reference != "" {
		sampling.Counted = true
	}
	limits, err := limitsFrom(o.Path, meta.Settings["limits"])
	if err != nil {
		return nil, wrong(err)
	}
	if out.Judged, err = score.Judge(limitsOf(&scenario.Set{Limits: limits}), rows, sampling); err != nil {
		return nil, wrongf("%s: %w", o.Path, err)
	}
	if t, err := ReadTiming(filepath.Join(dir, TimingFile)); err == nil {
		for _, e := range t.Estimators {
			out.Costs[e.Name] = benches.Cost{Samples: e.Samples, Nanos: int64(e.ElapsedS * 1e9)}
		}
	}
	if o.PicturePath != "" {
		if err := drawResults(o.PicturePath, out); err != nil {
			return nil, err
		}
	}
	return &Shown{Kind: "results", Name: out.Name, Outcome: out}, nil
}

// limitsFrom reads the limits that results were judged by, which their
// settings keep as the [[limit]] tables of a plan.
func limitsFrom(path, text string) ([]scenario.Limit, error) {
	if text == "" {
		return nil, nil
	}
	frame := "format = \"soctrial/plan/1\"\ncells = [\"-\"]\nduties = [\"-\"]\nsensors = [\"-\"]\ndraw = \"list\"\n"
	p, err := define.Plan(path+" (limits in soctrial.settings)", []byte(frame+text))
	if err != nil {
		return nil, err
	}
	return p.Limits, nil
}

func showTraces(o *ShowOptions) (*Shown, error) {
	keys, err := store.ListTraces(o.Path)
	if err != nil {
		return nil, wrong(err)
	}
	s := &Shown{Kind: "traces", Name: recordName(o.Path)}
	rows := [][]string{{"scenario", "estimator", "samples"}}
	var samples int64
	for _, k := range keys {
		samples += k.Samples
		rows = append(rows, []string{strconv.FormatInt(k.ScenarioID, 10), k.Estimator, strconv.FormatInt(k.Samples, 10)})
	}
	s.fact("traces", "%d, %d samples in all", len(keys), samples)
	const most = 40
	if len(rows) > most+1 {
		rows = append(rows[:most+1], []string{"…", fmt.Sprintf("and %d more", len(keys)-most), ""})
	}
	s.Tables = append(s.Tables, ShownTable{"Traces", rows})
	if o.PicturePath != "" {
		return s, drawTraces(o.PicturePath, o.Path, o.Scenario, keys)
	}
	return s, nil
}

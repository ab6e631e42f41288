package store

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"soctrial/benches/scenario"
)

// Trace is all that a file holds of one estimator on one scenario.
type Trace struct {
	ScenarioID   int64
	Estimator    string
	Sample       []int64 // ascending
	TraceColumns         // NaN where the file has a null
}

// TraceKey names one trace of a file.
type TraceKey struct {
	ScenarioID int64
	Estimator  string
	Samples    int64
}

// ListTraces says which traces the file holds, in the order in which they
// begin in it.
func ListTraces(path string) ([]TraceKey, error) {
	var out []TraceKey
	err := withTable(path, func(t *table) (err error) {
		out, err = listTraces(t)
		return err
	})
	if err != nil {
		return nil, err
	}
	return out, nil
}

func listTraces(t *table) ([]TraceKey, error) {
	if err := t.requireFormat(tracesFormat); err != nil {
		return nil, err
	}
	var out []TraceKey
	type key struct {
		id   int64
		name string
	}
	at := map[key]int{}
	for g := range t.file.RowGroups() {
		ids, names, err := t.traceKeys(g)
		if err != nil {
			return nil, err
		}
		for i := range ids {
			k := key{ids[i], names[i]}
			n, ok := at[k]
			if !ok {
				n = len(out)
				at[k] = n
				out = append(out, TraceKey{ScenarioID: k.id, Estimator: k.name})
			}
			out[n].Samples++
		}
	}
	return out, nil
}

// traceKeys reads what each row of a row group belongs to.
func (t *table) traceKeys(g int) ([]int64, []string, error) {
	ids, err := t.needIn("scenario_id", scenario.Int, false, g, g+1)
	if err != nil {
		return nil, nil, err
	}
	names, err := t.needIn("estimator", scenario.Text, false, g, g+1)
	if err != nil {
		return nil, nil, err
	}
	return ids.ints, names.texts, nil
}

// ReadTraces reads the trace of one estimator on one scenario. A trace the file
// does not hold is an error that names those it does.
func ReadTraces(path string, scenarioID int64, estimator string) (*Trace, error) {
	var out *Trace
	err := withTable(path, func(t *table) (err error) {
		out, err = readTrace(t, scenarioID, estimator)
		return err
	})
	if err != nil {
		return nil, err
	}
	return out, nil
}

func readTrace(t *table, id int64, estimator string) (*Trace, error) {
	if err := t.requireFormat(tracesFormat); err != nil {
		return nil, err
	}
	out := &Trace{ScenarioID: id, Estimator: estimator}
	var rows []int // wanted, within the row group
	for g := range t.file.RowGroups() {
		ids, names, err := t.traceKeys(g)
		if err != nil {
			return nil, err
		}
		rows = rows[:0]
		for i := range ids {
			if ids[i] == id && names[i] == estimator {
				rows = append(rows, i)
			}
		}
		if len(rows) == 0 {
			continue
		}
		if err := out.add(t, g, rows); err != nil {
			return nil, err
		}
	}
	if len(out.Sample) == 0 {
		return nil, t.errf("no trace of scenario %d with estimator %q%s", id, estimator, t.heldTraces())
	}
	return out, out.order(t)
}

// add appends some rows of a row group.
func (tr *Trace) add(t *table, g int, rows []int) error {
	samples, err := t.needIn("sample", scenario.Int, false, g, g+1)
	if err != nil {
		return err
	}
	for _, i := range rows {
		tr.Sample = append(tr.Sample, samples.ints[i])
	}
	for _, c := range traceColumns() {
		v, err := t.needIn(c.name, scenario.Number, c.name != "time_s", g, g+1)
		if err != nil {
			return err
		}
		dst := c.at(&tr.TraceColumns)
		for _, i := range rows {
			x := v.nums[i]
			if v.isNull(i) {
				x = math.NaN()
			}
			*dst = append(*dst, x)
		}
	}
	return nil
}

// order puts the samples in ascending order, should another program have
// mixed them, and refuses one that stands there twice.
func (tr *Trace) order(t *table) error {
	if !slices.IsSorted(tr.Sample) {
		by := make([]int, len(tr.Sample))
		for i := range by {
			by[i] = i
		}
		slices.SortFunc(by, func(a, b int) int { return cmp.Compare(tr.Sample[a], tr.Sample[b]) })
		was := *tr
		tr.Sample = gather(was.Sample, by)
		for _, c := range traceColumns() {
			*c.at(&tr.TraceColumns) = gather(*c.at(&was.TraceColumns), by)
		}
	}
	for i := 1; i < len(tr.Sample); i++ {
		if tr.Sample[i] == tr.Sample[i-1] {
			return t.errf("scenario %d, estimator %q: sample %d stands there twice", tr.ScenarioID, tr.Estimator, tr.Sample[i])
		}
	}
	return nil
}

func gather[T any](from []T, by []int) []T {
	out := make([]T, len(by))
	for i, k := range by {
		out[i] = from[k]
	}
	return out
}

// heldTraces lists the traces of the file for a message.
func (t *table) heldTraces() string {
	held, err := listTraces(t)
	if err != nil || len(held) == 0 {
		return "; the file holds none"
	}
	const most = 8
	var out []string
	for _, k := range held[:min(most, len(held))] {
		out = append(out, fmt.Sprintf("%d with %q", k.ScenarioID, k.Estimator))
	}
	if len(held) > most {
		out = append(out, "…")
	}
	return "; the file holds " + strings.Join(out, ", ")
}

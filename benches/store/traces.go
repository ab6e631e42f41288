package store

import (
	"fmt"

	"github.com/parquet-go/parquet-go"
)

// tracesFormat is the format of traces.
const tracesFormat = "soctrial/traces/1"

// TraceColumns are consecutive samples of one estimator on one scenario,
// columns of the length of TimeS. A column may be nil (nothing is known of it, such as the
// truth in a replay) or shorter (an estimator that was lost): what is not
// there is null, and so is a NaN.
type TraceColumns struct {
	TimeS             []float64 // s from the start
	CurrentTrueA      []float64 // > 0 on discharge
	VoltageTrueV      []float64
	TemperatureTrueC  []float64
	SOCTrue           []float64
	CurrentA          []float64 // as read
	VoltageV          []float64
	TemperatureC      []float64
	SOC               []float64 // reported, in [0, 1]
	SOCStd            []float64
	VoltagePredictedV []float64
	InnovationV       []float64
	InnovationStdV    []float64
}

// traceColumn is one column of numbers of a trace.
type traceColumn struct {
	name string
	at   func(*TraceColumns) *[]float64
}

func traceColumns() []traceColumn {
	return []traceColumn{
		{"time_s", func(t *TraceColumns) *[]float64 { return &t.TimeS }},
		{"current_true_a", func(t *TraceColumns) *[]float64 { return &t.CurrentTrueA }},
		{"voltage_true_v", func(t *TraceColumns) *[]float64 { return &t.VoltageTrueV }},
		{"temperature_true_c", func(t *TraceColumns) *[]float64 { return &t.TemperatureTrueC }},
		{"soc_true", func(t *TraceColumns) *[]float64 { return &t.SOCTrue }},
		{"current_a", func(t *TraceColumns) *[]float64 { return &t.CurrentA }},
		{"voltage_v", func(t *TraceColumns) *[]float64 { return &t.VoltageV }},
		{"temperature_c", func(t *TraceColumns) *[]float64 { return &t.TemperatureC }},
		{"soc", func(t *TraceColumns) *[]float64 { return &t.SOC }},
		{"soc_std", func(t *TraceColumns) *[]float64 { return &t.SOCStd }},
		{"voltage_predicted_v", func(t *TraceColumns) *[]float64 { return &t.VoltagePredictedV }},
		{"innovation_v", func(t *TraceColumns) *[]float64 { return &t.InnovationV }},
		{"innovation_std_v", func(t *TraceColumns) *[]float64 { return &t.InnovationStdV }},
	}
}

// TraceMeta says what traces belong to.
type TraceMeta struct {
	SetSHA256 string // of the set file's bytes; empty: not from a set
	Version   string // of the tool
}

// TraceWriter writes traces row group by row group, in memory that does not
// grow with them. The file appears at Close and only there.
type TraceWriter struct {
	path    string
	pending *pending
	table   *tableWriter
	columns []traceColumn
	thin    bool
	rows    int // in the current row group
	err     error
}

// traceGroupRows is how many rows stand in one row group of traces.
const traceGroupRows = 1 << 16

// NewTraceWriter begins the traces file at path: scenario_id, estimator,
// sample, then the columns of TraceColumns, as doubles; thin keeps them as 32-bit
// numbers, but for time_s, whose differences would drown in 24 bits. The caller ends it with
// Close or Abort.
func NewTraceWriter(path string, thin bool, meta TraceMeta) (*TraceWriter, error) {
	return newTraceWriter(disk{}, path, thin, meta)
}

func newTraceWriter(d disk, path string, thin bool, meta TraceMeta) (*TraceWriter, error) {
	p, err := d.create(path)
	if err != nil {
		return nil, err
	}
	w := &TraceWriter{path: path, pending: p, columns: traceColumns(), thin: thin}
	specs := []columnSpec{repeated(ints("scenario_id")), texts("estimator"), ints("sample"), doubles("time_s")}
	for _, c := range w.columns[1:] {
		if thin {
			specs = append(specs, nullFloats(c.name))
		} else {
			specs = append(specs, nullDoubles(c.name))
		}
	}
	kv := map[string]string{formatKey: tracesFormat, versionKey: meta.Version}
	if meta.SetSHA256 != "" {
		kv[setHashKey] = meta.SetSHA256
	}
	w.table = newTableWriter(p, "traces", specs, kv)
	return w, nil
}

// Append adds the samples from first on of one scenario and estimator. The
// columns are free again when it returns. After an error only Abort is of use.
func (w *TraceWriter) Append(scenarioID int64, estimator string, first int64, c *TraceColumns) error {
	if w.err == nil {
		if err := fencedWrite(func() error { return w.add(scenarioID, estimator, first, c) }); err != nil {
			w.err = w.pending.failed(err)
		}
	}
	return w.err
}

func (w *TraceWriter) add(id int64, estimator string, first int64, c *TraceColumns) error {
	n := len(c.TimeS)
	for _, col := range w.columns {
		if have := len(*col.at(c)); have > n {
			return fmt.Errorf("scenario %d, estimator %q: column %s has %d samples, time_s %d", id, estimator, col.name, have, n)
		}
	}
	name := parquet.ByteArrayValue([]byte(estimator))
	fixed := []func(i int) parquet.Value{
		func(int) parquet.Value { return parquet.Int64Value(id) },
		func(int) parquet.Value { return name },
		func(i int) parquet.Value { return parquet.Int64Value(first + int64(i)) },
		func(i int) parquet.Value { return parquet.DoubleValue(c.TimeS[i]) },
	}
	for at, f := range fixed {
		if err := w.table.column(at, n, f); err != nil {
			return err
		}
	}
	for k, col := range w.columns[1:] {
		if err := w.table.numbers(len(fixed)+k, n, *col.at(c), w.thin); err != nil {
			return err
		}
	}
	if w.rows += n; w.rows >= traceGroupRows {
		w.rows = 0
		return w.table.w.Flush()
	}
	return nil
}

// Close puts the file in place, or removes what was written and says why it
// could not. A second Close does nothing.
func (w *TraceWriter) Close() error {
	defer w.Abort()
	if w.err != nil || w.pending.file == nil {
		return w.err
	}
	if err := fencedWrite(w.table.w.Close); err != nil {
		w.err = w.pending.failed(err)
		return w.err
	}
	w.err = w.pending.commit()
	return w.err
}

// Abort removes what was written; after Close it does nothing.
func (w *TraceWriter) Abort() { w.pending.abort() }

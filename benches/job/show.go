package job

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"soctrial/benches/define"
	"soctrial/benches/store"
)

// Shown is what a file of ours holds, for a person to read. Results carry an
// Outcome as a run has it; other kinds carry facts and tables.
type Shown struct {
	Kind    string // set, results, traces, cell, duty, sensors, estimator, plan, map, record, timing
	Name    string
	Facts   []Fact
	Tables  []ShownTable
	Outcome *Outcome
}

// Fact is one line: what and how much, with its unit.
type Fact struct{ Name, Value string }

// ShownTable is a table whose first row holds the headings.
type ShownTable struct {
	Title string
	Rows  [][]string
}

func (s *Shown) fact(name, format string, args ...any) {
	s.Facts = append(s.Facts, Fact{name, fmt.Sprintf(format, args...)})
}

// ShowOptions is one call of show.
type ShowOptions struct {
	Path           string // a file, or a results folder
	MapPath        string // how a record reads
	ChargePositive bool
	Repair         bool
	PicturePath    string // a .png or .svg to draw into; empty: none
	Scenario       int64  // whose traces to draw; negative: the first in the file
	Force          bool   // replace a picture that exists
}

// Show reads any file of ours, or a record, and says what it holds.
func Show(o ShowOptions) (*Shown, error) {
	info, err := os.Stat(o.Path)
	if err != nil {
		return nil, wrong(err)
	}
	if info.IsDir() {
		o.Path = filepath.Join(o.Path, ResultsFile)
	}
	if o.PicturePath != "" {
		if err := mayWrite(o.PicturePath, o.Force); err != nil {
			return nil, err
		}
	}
	switch strings.ToLower(filepath.Ext(o.Path)) {
	case ".toml":
		return showDefinition(&o)
	case ".json":
		return showTiming(&o)
	case ".parquet":
		return showParquet(&o)
	}
	return showRecord(&o)
}

func showParquet(o *ShowOptions) (*Shown, error) {
	kind, err := store.Kind(o.Path)
	if err != nil {
		return nil, wrong(err)
	}
	switch kind {
	case "soctrial/set/1":
		if o.PicturePath != "" {
			return nil, noPicture("set")
		}
		return showSet(o)
	case "soctrial/results/1":
		return showResults(o)
	case "soctrial/traces/1":
		return showTraces(o)
	}
	return showRecord(o)
}

func showDefinition(o *ShowOptions) (*Shown, error) {
	text, err := os.ReadFile(o.Path)
	if err != nil {
		return nil, wrong(err)
	}
	kind, err := define.Kind(o.Path, text)
	if err != nil {
		return nil, wrong(err)
	}
	s := &Shown{Kind: kind}
	switch kind {
	case define.KindCell:
		err = s.cell(o)
	case define.KindDuty:
		err = s.duty(o)
	case define.KindSensors:
		err = s.sensors(o)
	case define.KindEstimator:
		err = s.estimator(o)
	case define.KindPlan:
		err = s.plan(o)
	case define.KindMap:
		err = s.recordMap(o)
	}
	if err != nil {
		return nil, wrong(err)
	}
	if o.PicturePath != "" && kind != define.KindCell && kind != define.KindDuty {
		return nil, noPicture(kind)
	}
	return s, nil
}

// noPicture says what can be drawn.
func noPicture(kind string) error {
	return wrongf("--picture: found a file of kind %s, allowed is a cell, a duty, results, traces or a record", kind)
}

func showTiming(o *ShowOptions) (*Shown, error) {
	t, err := ReadTiming(o.Path)
	if err != nil {
		return nil, err
	}
	if t.Format != timingFormat {
		return nil, wrongf("%s: format is %q, allowed is %q", o.Path, t.Format, timingFormat)
	}
	s := &Shown{Kind: "timing", Name: recordName(o.Path)}
	s.fact("scenarios", "%d", t.Scenarios)
	s.fact("time", "%.3g s on %d workers, in %d runs", t.ElapsedS, t.Workers, t.Runs)
	rows := [][]string{{"estimator", "samples", "s", "ns/sample"}}
	for _, e := range t.Estimators {
		ns := "-"
		if e.NsPerSample != nil {
			ns = short3(*e.NsPerSample)
		}
		rows = append(rows, []string{e.Name, strconv.FormatInt(e.Samples, 10), short3(e.ElapsedS), ns})
	}
	s.Tables = append(s.Tables, ShownTable{"Cost of each estimator", rows})
	return s, nil
}

// short3 shows a number to at most four digits, and nothing for NaN.
func short3(x float64) string {
	if math.IsNaN(x) {
		return "-"
	}
	return strconv.FormatFloat(x, 'g', 4, 64)
}

// duration says a time in the unit a person would.
func duration(s float64) string {
	switch {
	case math.IsInf(s, 0) || math.IsNaN(s):
		return "open"
	case s < 600:
		return fmt.Sprintf("%.4g s", s)
	case s < 36000:
		return fmt.Sprintf("%.4g s (%.3g min)", s, s/60)
	}
	return fmt.Sprintf("%.4g s (%.3g h)", s, s/3600)
}

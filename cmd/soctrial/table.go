package main

import (
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
	"unicode/utf8"

	"github.com/jedib0t/go-pretty/v6/table"
	"github.com/jedib0t/go-pretty/v6/text"

	"soctrial/benches/job"
	"soctrial/benches/score"
)

// lineWidth is what every table and text fits into.
const lineWidth = 80

// style is how text may look where it goes.
type style struct{ colour bool }

// styleFor allows colour only on a terminal, and not where NO_COLOR is set
// (no-color.org).
func styleFor(w io.Writer) style {
	if c, ok := w.(*checked); ok {
		w = c.w
	}
	_, asked := os.LookupEnv("NO_COLOR")
	return style{colour: isTerminal(w) && !asked}
}

func (s style) paint(word string, c text.Color) string {
	if !s.colour {
		return word
	}
	return text.Colors{c, text.Bold}.Sprint(word)
}

// grid renders rows of cells, the first column to the left and all others to
// the right, the first row as headings.
func grid(rows [][]string, leftToo ...int) string { return spaced(rows, " ", leftToo) }

// spaced is grid with that much space between columns.
func spaced(rows [][]string, space string, leftToo []int) string {
	t := table.NewWriter()
	t.SetStyle(table.Style{Name: "plain", Box: table.StyleBoxLight, Format: table.FormatOptions{},
		Options: table.Options{SeparateHeader: true}})
	st := t.Style()
	st.Box.PaddingLeft, st.Box.PaddingRight = "", space
	var configs []table.ColumnConfig
	for c := range rows[0] {
		align := text.AlignRight
		if c == 0 {
			align = text.AlignLeft
		}
		for _, l := range leftToo {
			if l == c {
				align = text.AlignLeft
			}
		}
		configs = append(configs, table.ColumnConfig{Number: c + 1, Align: align, AlignHeader: align})
	}
	t.SetColumnConfigs(configs)
	for i, r := range rows {
		row := table.Row{}
		for _, x := range r {
			row = append(row, x)
		}
		if i == 0 {
			t.AppendHeader(row)
		} else {
			t.AppendRow(row)
		}
	}
	var b strings.Builder
	for line := range strings.Lines(t.Render()) {
		b.WriteString(strings.TrimRight(line, " \n") + "\n")
	}
	return b.String()
}

// summaryText is what a person reads of a run, 80 columns wide.
func summaryText(o *job.Outcome, st style) string {
	s := o.Summary()
	var b strings.Builder
	wrapped(&b, "", headline(o, len(s.Estimators)))
	b.WriteString("\n")
	if o.Reference != "" {
		b.WriteString(replayTable(o, s))
		writeReasons(&b, s)
		writeLimits(&b, s, st)
		return b.String()
	}
	b.WriteString(errorTable(s))
	b.WriteString("\n")
	b.WriteString(honestyTable(s))
	writeReasons(&b, s)
	writeLimits(&b, s, st)
	writeWorst(&b, s)
	return b.String()
}

func headline(o *job.Outcome, estimators int) string {
	name := strings.TrimSuffix(o.Name, ".parquet")
	if o.Reference != "" {
		return fmt.Sprintf("%s: replay of %.4g s, %s. Reference SOC: %s.", name, o.Results[0].Metrics.DurationS,
			counted(estimators, "estimator"), o.Reference)
	}
	state := ""
	if !o.Complete {
		state = fmt.Sprintf(", INCOMPLETE: %d of %d", o.Finished, o.Total)
	}
	line := fmt.Sprintf("%s: %s × %s%s", name, counted(o.Finished, "scenario"), counted(estimators, "estimator"), state)
	if o.Elapsed > 0 {
		line += fmt.Sprintf(" in %.1f s", o.Elapsed.Seconds())
	}
	return line
}

// nameWidth is how much of an estimator's name a table shows.
const nameWidth = 17

func short(name string) string {
	if utf8.RuneCountInString(name) <= nameWidth {
		return name
	}
	r := []rune(name)
	head := (nameWidth - 1) / 2
	return string(r[:head]) + "…" + string(r[len(r)-(nameWidth-1-head):])
}

// errorTable shows how wrong each estimator is.
func errorTable(s *job.Summary) string {
	rows := [][]string{{"error, % SOC", "median", "p95", "worst", "", "median", "p95", "worst", "", "median", "p95", "never"}}
	for _, e := range s.Estimators {
		row := []string{short(e.Estimator)}
		for _, m := range []string{job.MetricSettledMaxAbs, job.MetricSOCRMSE} {
			x, _ := e.Spread(m)
			row = append(row, percent(x.Median), percent(x.P95), percent(x.Worst), "")
		}
		c, _ := e.Spread(job.MetricConverge)
		rows = append(rows, append(row, seconds(c.Median), seconds(c.P95), strconv.Itoa(c.Null)))
	}
	body := grid(rows)
	// A second line of headings, over the columns they belong to.
	first, _, _ := strings.Cut(body, "\n")
	at := []int{}
	for i := 0; i < len(first); {
		k := strings.Index(first[i:], "median")
		if k < 0 {
			break
		}
		at = append(at, i+k)
		i += k + 1
	}
	over := ""
	for i, word := range []string{"max, settled", "RMSE", "converges, s"} {
		over += strings.Repeat(" ", max(1, at[i]-utf8.RuneCountInString(over))) + word
	}
	return over + "\n" + body
}

// replayTable shows each estimator on the one record.
func replayTable(o *job.Outcome, s *job.Summary) string {
	rows := [][]string{{"error, % SOC", "RMSE", "bias", "max", "late", "end", "conv s", "U mV", "NIS", "cover", "ns"}}
	for i := range o.Results {
		r := &o.Results[i]
		m := &r.Metrics
		rows = append(rows, []string{short(r.Estimator), percent(m.SOCRMSE), percent(m.SOCBias), percent(m.SOCMaxAbs), percent(m.SettledMaxAbs),
			percent(m.EndError), seconds(m.ConvergeS), figure(1000 * m.VoltageRMSEV), figure(m.NISMean), figure(100 * m.Coverage95),
			figure(s.Estimators[i].NsPerSample)})
	}
	return grid(rows) + "late: largest after settling; conv: converged after; U: RMS of voltage minus\n" +
		"prediction; cover: % of the time within 1.96 stated deviations; ns: a sample\n"
}

// honestyTable shows whether each estimator knows how wrong it is, how its
// runs ended and what a sample costs it.
func honestyTable(s *job.Summary) string {
	rows := [][]string{{"does it know?", "coverage 95 %", "NIS", "verdict", "ok", "lost", "failed", "ns"}}
	for _, e := range s.Estimators {
		h := e.Honesty
		rows = append(rows, []string{short(e.Estimator), interval(h.Coverage95), figure(h.NIS.Mean), verdict(h.Verdict),
			strconv.Itoa(e.OK), strconv.Itoa(e.Lost), strconv.Itoa(e.Failed), figure(e.NsPerSample)})
	}
	return grid(rows, 1, 3)
}

func verdict(c score.Confidence) string {
	if c == score.Unknown {
		return "says nothing"
	}
	return string(c)
}

// interval shows a mean over scenarios with its 95 % interval.
func interval(i score.Interval) string {
	if i.N == 0 {
		return "-"
	}
	if math.IsInf(i.Low, 0) {
		return fmt.Sprintf("%.2f", i.Mean)
	}
	return fmt.Sprintf("%.2f [%.2f, %.2f]", i.Mean, i.Low, i.High)
}

// writeReasons says what makes the verdicts, and why runs ended.
func writeReasons(b *strings.Builder, s *job.Summary) {
	for _, e := range s.Estimators {
		for _, r := range e.Honesty.Reasons {
			wrapped(b, "  "+short(e.Estimator)+": ", r)
		}
	}
	const most = 3
	var told []string
	for _, e := range s.Estimators {
		for i, r := range e.Reasons {
			if i == most {
				told = append(told, fmt.Sprintf("%s: %d other reasons", e.Estimator, len(e.Reasons)-most))
				break
			}
			told = append(told, fmt.Sprintf("%s: %d × %s", e.Estimator, r.Count, reasonWords(r.Text)))
		}
	}
	if len(told) > 0 {
		b.WriteString("\nEnded early, lost or failed\n")
		for _, t := range told {
			wrapped(b, "  ", t)
		}
	}
}

// reasonWords puts the plant's short reasons into words.
func reasonWords(reason string) string {
	switch reason {
	case "power":
		return "power: more was asked than the cell can give"
	case "voltage_min_v":
		return "voltage_min_v: the cell met its lower voltage limit"
	case "soc_zero":
		return "soc_zero: the cell was empty"
	}
	return reason
}

// writeLimits shows each limit, its share and why it does not hold.
func writeLimits(b *strings.Builder, s *job.Summary, st style) {
	if len(s.Limits) == 0 {
		return
	}
	b.WriteString("\nLimits\n")
	for _, l := range s.Limits {
		of := ""
		if l.Limit.Group != "" {
			of = ", group " + l.Limit.Group
		}
		var line strings.Builder
		wrapped(&line, fmt.Sprintf("  %-11s  ", verdictWord(l.Verdict)), fmt.Sprintf("|%s| ≤ %g in %.4g %% of scenarios%s: %s",
			l.Limit.Metric, l.Limit.AtMost, 100*l.Limit.Share, of, l.Estimator))
		b.WriteString(strings.Replace(line.String(), verdictWord(l.Verdict), st.verdict(l.Verdict), 1))
		wrapped(b, "               ", l.Why)
		if l.Verdict == score.Pass {
			continue
		}
		if !math.IsNaN(l.Worst) {
			fmt.Fprintf(b, "               worst %.4g in scenario %d\n", l.Worst, l.WorstID)
		}
		for _, c := range l.Because {
			wrapped(b, "               why: ", c.String())
		}
	}
}

func verdictWord(v score.Verdict) string {
	if v == score.Fail {
		return "FAIL"
	}
	return string(v)
}

// verdict paints a verdict.
func (s style) verdict(v score.Verdict) string {
	colour := map[score.Verdict]text.Color{score.Pass: text.FgGreen, score.Fail: text.FgRed, score.CannotTell: text.FgYellow}
	return s.paint(verdictWord(v), colour[v])
}

// writeWorst shows the worst scenarios and what is special about them.
func writeWorst(b *strings.Builder, s *job.Summary) {
	if len(s.Worst) == 0 {
		return
	}
	fmt.Fprintf(b, "\nWorst by %s\n", s.WorstBy)
	for _, w := range s.Worst {
		value := percent(w.Value) + " %"
		if w.Result.Status == score.Lost {
			value = "lost"
		}
		var special []string
		for _, x := range w.Special {
			special = append(special, x.String())
		}
		what := strings.Join(special, "; ")
		if what == "" {
			what = strings.Join([]string{w.Result.Cell, w.Result.Duty}, ", ")
		}
		head := fmt.Sprintf("  %5d %-*s %7s  ", w.Result.ScenarioID, nameWidth, short(w.Result.Estimator), value)
		wrapped(b, head, what)
	}
}

// wrapped writes words after head, further lines set in under them.
func wrapped(b *strings.Builder, head, words string) {
	indent := strings.Repeat(" ", utf8.RuneCountInString(head))
	line := head
	for i, w := range strings.Fields(words) {
		if i > 0 && utf8.RuneCountInString(line)+1+utf8.RuneCountInString(w) > lineWidth {
			b.WriteString(strings.TrimRight(line, " ") + "\n")
			line = indent + w
			continue
		}
		if i > 0 {
			line += " "
		}
		line += w
	}
	b.WriteString(strings.TrimRight(line, " ") + "\n")
}

// percent shows a fraction of SOC in percent.
func percent(x float64) string {
	if math.IsNaN(x) {
		return "-"
	}
	return strconv.FormatFloat(100*x, 'f', 2, 64)
}

func seconds(x float64) string {
	if math.IsNaN(x) {
		return "-"
	}
	return strconv.FormatFloat(x, 'f', 0, 64)
}

// figure shows three digits.
func figure(x float64) string {
	switch {
	case math.IsNaN(x):
		return "-"
	case math.Abs(x) >= 1e6 || x != 0 && math.Abs(x) < 1e-3:
		return fmt.Sprintf("%.2e", x)
	case math.Abs(x) >= 100:
		return strconv.FormatFloat(x, 'f', 0, 64)
	}
	return fmt.Sprintf("%.3g", x)
}

package main

import (
	"fmt"
	"strings"
	"unicode/utf8"

	"github.com/spf13/cobra"

	"soctrial/benches/job"
)

func showCommand(s streams) *cobra.Command {
	var o job.ShowOptions
	var asJSON bool
	cmd := &cobra.Command{
		Use:   "show FILE",
		Short: "Say what a file holds",
		Long: `show reads any file of ours, or a record, and says what it holds: a set's
columns and their ranges, the table of results, which traces there are, a cell's
curves, a duty's legs, what a record spans. A results folder shows its results.

--picture draws it too, where there is something to draw.`,
		Example: `  soctrial show quay-sweeper-21.toml --picture cell.png
  soctrial show aged.parquet
  soctrial show aged/results.parquet --json
  soctrial show monday.csv --charge-positive`,
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			o.Path = args[0]
			shown, err := job.Show(o)
			if err != nil {
				return ofJob(err)
			}
			switch {
			case asJSON && shown.Outcome != nil:
				err = printJSON(s.out, outcomeJSON(shown.Outcome))
			case asJSON:
				err = printJSON(s.out, shownJSON(shown))
			case shown.Outcome != nil:
				_, err = fmt.Fprint(s.out, summaryText(shown.Outcome, styleFor(s.out)))
			default:
				_, err = fmt.Fprint(s.out, shownText(shown))
			}
			if err != nil {
				return toolError{err}
			}
			if o.PicturePath != "" && !asJSON {
				fmt.Fprintf(s.out, "\nPicture in %s\n", o.PicturePath)
			}
			return nil
		},
	}
	f := cmd.Flags()
	f.StringVar(&o.PicturePath, "picture", "", "draw it into this .png or .svg")
	f.Int64Var(&o.Scenario, "scenario", -1, "whose traces to draw; else the first")
	f.StringVar(&o.MapPath, "map", "", "how a record's columns read")
	f.BoolVar(&o.ChargePositive, "charge-positive", false, "the record counts charging as positive")
	f.BoolVar(&o.Repair, "repair", false, "leave a record's samples out whose time runs backward")
	f.BoolVar(&o.Force, "force", false, "replace a picture that exists")
	f.BoolVar(&asJSON, "json", false, "print JSON for programs")
	return cmd
}

// shownText is what a person reads of a file.
func shownText(s *job.Shown) string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s %s\n\n", s.Kind, s.Name)
	width := 0
	for _, f := range s.Facts {
		width = max(width, utf8.RuneCountInString(f.Name))
	}
	for _, f := range s.Facts {
		wrapped(&b, f.Name+strings.Repeat(" ", width-utf8.RuneCountInString(f.Name)+2), f.Value)
	}
	for _, t := range s.Tables {
		fmt.Fprintf(&b, "\n%s\n", t.Title)
		b.WriteString(spaced(t.Rows, "  ", leftColumns(t.Rows)))
	}
	return b.String()
}

// leftColumns finds the columns that hold words.
func leftColumns(rows [][]string) []int {
	var out []int
	for c := range rows[0] {
		for _, r := range rows[1:] {
			if r[c] != "" && !strings.ContainsAny(r[c][:1], "0123456789-+") {
				out = append(out, c)
				break
			}
		}
	}
	return out
}

type shownDoc struct {
	Format string              `json:"format"` // soctrial/show/1
	Kind   string              `json:"kind"`
	Name   string              `json:"name"`
	Facts  map[string]string   `json:"facts"`
	Tables map[string][]rowDoc `json:"tables"`
}

// rowDoc is one row of a table, by heading.
type rowDoc map[string]string

func shownJSON(s *job.Shown) shownDoc {
	d := shownDoc{Format: "soctrial/show/1", Kind: s.Kind, Name: s.Name, Facts: map[string]string{}, Tables: map[string][]rowDoc{}}
	for _, f := range s.Facts {
		if before := d.Facts[f.Name]; before != "" {
			f.Value = before + "; " + f.Value
		}
		d.Facts[f.Name] = f.Value
	}
	for _, t := range s.Tables {
		rows := []rowDoc{}
		for _, r := range t.Rows[1:] {
			row := rowDoc{}
			for c, x := range r {
				row[t.Rows[0][c]] = x
			}
			rows = append(rows, row)
		}
		d.Tables[t.Title] = rows
	}
	return d
}

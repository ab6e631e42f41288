package main

import (
	"errors"
	"fmt"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"soctrial/benches/job"
)

func runCommand(s streams) *cobra.Command {
	o := job.RunOptions{Version: version()}
	var asJSON bool
	cmd := &cobra.Command{
		Use:   "run SET.parquet -e EST.toml... -o DIR",
		Short: "Run estimators over a scenario set",
		Long: `run takes every scenario of a set through cell, sensors and each estimator, and
prints how wrong they were, whether they knew, and whether the limits hold.

DIR gets results.parquet (a row a scenario and estimator), set.parquet (the
set, byte for byte), timing.json and, when asked, traces.parquet. Results are
the same bytes for any number of workers.

Ctrl-C writes what is finished; the same call again goes on from there, also
after a crash. Any other folder that exists is refused without --force, which
builds beside it and swaps at the end.

Exit status: 0 done, 1 a limit failed or cannot be told, 2 the input or the
call is wrong, 3 the tool failed, 130 interrupted.

` + caution,
		Example: `  # the quay sweeper's two filters on the same readings
  soctrial run aged.parquet -e ekf.toml -e coulomb.toml -o aged

  # traces of the five worst scenarios, and tonight's limits
  soctrial run aged.parquet -e ekf.toml -o aged --traces worst:5 \
    --plan nightly.toml`,
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			o.SetPath = args[0]
			p := newProgress(s.err)
			o.Report = p.reporter()
			out, err := job.Run(cmd.Context(), o)
			p.done()
			if out != nil {
				if err := printOutcome(s, out, asJSON); err != nil {
					return toolError{err}
				}
			}
			if errors.Is(err, job.ErrInterrupted) && out != nil {
				return fmt.Errorf("%w with %d of %d scenarios finished and written to %s; the same command continues",
					err, out.Finished, out.Total, out.Dir)
			}
			if err != nil {
				return ofJob(err)
			}
			if out.Broken() {
				return errLimit
			}
			return nil
		},
	}
	f := cmd.Flags()
	f.StringArrayVarP(&o.EstimatorPaths, "estimator", "e", nil, "an estimator's file; may repeat (required)")
	f.StringVarP(&o.OutDir, "output", "o", "", "the results' folder (required)")
	f.StringVar(&o.PlanPath, "plan", "", "a plan whose [score] and [[limit]] rule")
	f.IntVar(&o.Workers, "workers", 0, "scenarios at once; 0: as many as processors")
	f.StringVar(&o.Traces, "traces", "none", "none, all, worst:K or ids")
	f.BoolVar(&o.ThinTraces, "thin-traces", false, "traces in single precision")
	f.BoolVar(&o.Force, "force", false, "replace the folder if it exists")
	f.BoolVar(&asJSON, "json", false, "print JSON for programs")
	cmd.MarkFlagRequired("estimator")
	cmd.MarkFlagRequired("output")
	return cmd
}

// printOutcome prints the summary of a run or replay.
func printOutcome(s streams, o *job.Outcome, asJSON bool) error {
	if asJSON {
		return printJSON(s.out, outcomeJSON(o))
	}
	fmt.Fprint(s.out, summaryText(o, styleFor(s.out)))
	if o.Dir != "" {
		fmt.Fprintf(s.out, "\nWritten to %s\n", strings.TrimSuffix(o.Dir, string(filepath.Separator)))
	}
	return nil
}

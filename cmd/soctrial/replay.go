package main

import (
	"math"

	"github.com/spf13/cobra"

	"soctrial/benches/job"
)

func replayCommand(s streams) *cobra.Command {
	o := job.ReplayOptions{Version: version()}
	var asJSON bool
	cmd := &cobra.Command{
		Use:   "replay RECORD --cell CELL.toml -e EST.toml... -o DIR",
		Short: "Run estimators on a recorded test",
		Long: `replay feeds a recorded test (CSV or Parquet) to estimators and scores them
against the best reference the record has: its own SOC; else its charge counter
over --reference-capacity-ah; else its current, counted. The table says which.

The record's first sample starts at --soc-start, else at its own first SOC, else
where the cell's open-circuit voltage is its first voltage. Estimators are told
that start plus --soc-start-error. With --from-s they begin later in the record,
from the reference there.

Obvious headings and units are recognised and told; others need a --map.

` + caution,
		Example: `  # what the filters make of the quay sweeper's Monday round
  soctrial replay monday.csv --cell pack.toml -e ekf.toml -o monday

  # started in the middle, ten percent wrong, with a current sensor that is off
  soctrial replay monday.csv --cell pack.toml -e ekf.toml -o wrong \
      --from-s 1800 --soc-start-error -0.1 --sensors offset.toml`,
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			o.RecordPath = args[0]
			o.Report = reporter(s)
			out, err := job.Replay(cmd.Context(), o)
			if err != nil {
				return ofJob(err)
			}
			if err := printOutcome(s, out, asJSON); err != nil {
				return toolError{err}
			}
			if out.Broken() {
				return errLimit
			}
			return nil
		},
	}
	f := cmd.Flags()
	f.StringVar(&o.CellPath, "cell", "", "the cell's file (required)")
	f.StringArrayVarP(&o.EstimatorPaths, "estimator", "e", nil, "an estimator's file; may repeat (required)")
	f.StringVarP(&o.OutDir, "output", "o", "", "the results' folder (required)")
	f.StringVar(&o.MapPath, "map", "", "how the record's columns read")
	f.BoolVar(&o.ChargePositive, "charge-positive", false, "the record counts charging as positive")
	f.BoolVar(&o.Repair, "repair", false, "leave samples out whose time runs backward")
	f.Float64Var(&o.SOCStart, "soc-start", math.NaN(), "SOC at the first sample")
	f.Float64Var(&o.SOCStartError, "soc-start-error", 0, "told minus true SOC at the start")
	f.Float64Var(&o.FromS, "from-s", math.NaN(), "begin at this time, s")
	f.Float64Var(&o.ReferenceCapacityAh, "reference-capacity-ah", math.NaN(), "behind the reference SOC; else the cell's")
	f.StringVar(&o.SensorsPath, "sensors", "", "sensors whose faults are added")
	f.Uint64Var(&o.Seed, "seed", 1, "of the added faults")
	f.StringVar(&o.PlanPath, "plan", "", "a plan whose [score] and [[limit]] rule")
	f.StringVar(&o.Traces, "traces", "all", "all or none")
	f.BoolVar(&o.ThinTraces, "thin-traces", false, "traces in single precision")
	f.BoolVar(&o.Force, "force", false, "replace the folder if it exists")
	f.BoolVar(&asJSON, "json", false, "print JSON for programs")
	for _, name := range []string{"cell", "estimator", "output"} {
		cmd.MarkFlagRequired(name)
	}
	for _, name := range []string{"soc-start", "from-s", "reference-capacity-ah"} {
		f.Lookup(name).DefValue = "0" // so that none is told: not NaN, which means nothing to a reader
	}
	return cmd
}

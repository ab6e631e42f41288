package main

import (
	"fmt"

	"github.com/spf13/cobra"

	"soctrial/benches/job"
)

func drawCommand(s streams) *cobra.Command {
	o := job.DrawOptions{Report: reporter(s)}
	cmd := &cobra.Command{
		Use:   "draw PLAN.toml -o SET.parquet",
		Short: "Turn a plan into a scenario set",
		Long: `draw resolves a plan into a scenario set: one row a scenario, nothing left to
draw, with every definition it names inside the file. The same plan gives the
same set.

The files a plan names lie beside it. They are checked against each other: a
duty must go with every cell it meets.`,
		Example: `  # 256 scenarios of the quay sweeper's pack, aged and with offset sensors
  soctrial draw aged.toml -o aged.parquet
  soctrial show aged.parquet`,
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			o.PlanPath = args[0]
			set, err := job.Draw(o)
			if err != nil {
				return ofJob(err)
			}
			fmt.Fprintf(s.out, "%s: %d scenarios of %s, %s and %s\n", o.OutPath, len(set.Rows),
				counted(len(set.Cells), "cell"), counted(len(set.Duties), "duty"), counted(len(set.Sensors), "sensor set"))
			return nil
		},
	}
	cmd.Flags().StringVarP(&o.OutPath, "output", "o", "", "the set's file (required)")
	cmd.Flags().BoolVar(&o.Force, "force", false, "replace the file if it exists")
	cmd.MarkFlagRequired("output")
	return cmd
}

func counted(n int, what string) string {
	switch {
	case n == 1:
		return "1 " + what
	case what == "duty":
		what = "duties"
	default:
		what += "s"
	}
	return fmt.Sprintf("%d %s", n, what)
}

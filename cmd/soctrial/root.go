package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"runtime/debug"
	"syscall"

	"github.com/spf13/cobra"

	"soctrial/benches/job"
)

// Exit statuses.
const (
	statusDone        = 0
	statusLimit       = 1
	statusInput       = 2
	statusTool        = 3
	statusInterrupted = 130
)

// caution stands in the help of every command that gives figures.
const caution = `Estimates from simulation do not certify a battery system. Over-charge,
over-discharge and short circuit can cause fire; limits, protection and tests
on real cells belong to licensed practice, the cell maker's data sheet and
local codes.`

// errLimit ends a command whose results are printed and whose limits do not
// all hold.
var errLimit = errors.New("a limit failed or cannot be told")

// toolError is a failure that is not the caller's.
type toolError struct{ error }

func (e toolError) Unwrap() error { return e.error }

// streams is where a command prints.
type streams struct {
	out, err io.Writer
}

// run is the program: arguments in, an exit status out.
func run(args []string, stdout, stderr io.Writer) (status int) {
	defer func() {
		if p := recover(); p != nil {
			fmt.Fprintf(stderr, "soctrial: the tool failed: %v\n%s", p, debug.Stack())
			status = statusTool
		}
	}()
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	go func() { // a second signal kills at once
		<-ctx.Done()
		stop()
	}()
	out := &checked{w: stdout}
	root := rootCommand(streams{out, stderr})
	root.SetArgs(args)
	root.SetOut(out)
	root.SetErr(stderr)
	err := root.ExecuteContext(ctx)
	if out.err != nil {
		err = toolError{fmt.Errorf("writing to standard output: %w", out.err)}
	}
	status = statusOf(err)
	if err != nil && status != statusLimit {
		fmt.Fprintln(stderr, "soctrial:", err)
	}
	return status
}

// statusOf tells the exit status of an error.
func statusOf(err error) int {
	_, tool := errors.AsType[toolError](err)
	switch {
	case err == nil:
		return statusDone
	case errors.Is(err, job.ErrInterrupted), errors.Is(err, context.Canceled):
		return statusInterrupted
	case errors.Is(err, errLimit):
		return statusLimit
	case tool:
		return statusTool
	}
	return statusInput
}

// ofJob marks what a job returned: its own mistakes are the tool's.
func ofJob(err error) error {
	_, wrong := errors.AsType[*job.Error](err)
	if err == nil || wrong || errors.Is(err, job.ErrInterrupted) {
		return err
	}
	return toolError{err}
}

// checked remembers the first write that failed.
type checked struct {
	w   io.Writer
	err error
}

func (c *checked) Write(b []byte) (int, error) {
	n, err := c.w.Write(b)
	if err != nil && c.err == nil {
		c.err = err
	}
	return n, err
}

func rootCommand(s streams) *cobra.Command {
	root := &cobra.Command{
		Use:   "soctrial",
		Short: "Prove a state-of-charge estimator before any hardware is at stake",
		Long: `soctrial is the bench on which a battery-management engineer proves a
state-of-charge estimator: it simulates a cell under a duty, reads it through
sensors that lie, runs estimators on the readings and says how wrong they were
and whether they knew.

` + caution,
		Example: `  soctrial demo                                     # the whole job once
  soctrial draw aged.toml -o aged.parquet           # a plan becomes scenarios
  soctrial run aged.parquet -e ekf.toml -o aged     # estimators on all of them
  soctrial show aged/results.parquet                # what came out, again`,
		Version:       version(),
		SilenceUsage:  true,
		SilenceErrors: true,
		Args:          cobra.NoArgs,
		RunE:          func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	root.SetVersionTemplate("soctrial {{.Version}}\n")
	root.CompletionOptions.HiddenDefaultCmd = true
	for _, c := range commands(s) {
		root.AddCommand(c)
	}
	return root
}

// commands lists the commands in the order of the job.
func commands(s streams) []*cobra.Command {
	return []*cobra.Command{demoCommand(s), drawCommand(s), runCommand(s), replayCommand(s), showCommand(s)}
}

// version is what the Go tool stamped into the binary.
func version() string {
	info, ok := debug.ReadBuildInfo()
	if !ok || info.Main.Version == "" {
		return "unknown"
	}
	return info.Main.Version
}

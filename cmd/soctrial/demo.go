package main

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"soctrial/benches/demo"
	"soctrial/benches/job"
	"soctrial/benches/score"
)

// Where a demo folder keeps what.
const (
	demoDefinitions = "definitions"
	demoPictures    = "pictures"
)

func demoCommand(s streams) *cobra.Command {
	d := demoRun{streams: s}
	cmd := &cobra.Command{
		Use:   "demo [-o DIR]",
		Short: "Do the whole job once, from definitions of its own",
		Long: `demo does the whole job once: it writes definitions, draws scenario sets, runs
three estimators over them, prints the tables and draws pictures. The works
department of Oskerhaven, an invented harbour town, tries estimators for its
electric quay sweeper on a cell with a steep and one with a flat open-circuit
voltage; a published cell follows.

DIR gets definitions to change, sets, results, traces of a few scenarios, and
pictures. A folder that exists is refused without --force. Some limits fail on
purpose: the exit status is 0 all the same.

` + caution,
		Example: `  soctrial demo
  soctrial demo -o tryout`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error { return d.run(cmd.Context()) },
	}
	f := cmd.Flags()
	f.StringVarP(&d.dir, "output", "o", "demo-out", "the demo's folder")
	f.IntVar(&d.workers, "workers", 0, "scenarios at once; 0: as many as processors")
	f.BoolVar(&d.force, "force", false, "replace the folder if an earlier demo made it")
	return cmd
}

// demoRun is one demo on its way.
type demoRun struct {
	streams
	dir     string
	workers int
	force   bool

	work     string // where it is built; becomes dir at the end
	files    []madeFile
	pictured []madeFile
	commands []string
}

// madeFile is a file of the demo and what it shows.
type madeFile struct{ name, what string }

func (d *demoRun) run(ctx context.Context) error {
	began := time.Now()
	d.dir = filepath.Clean(d.dir)
	if err := d.begin(); err != nil {
		return err
	}
	defer os.RemoveAll(d.work) // what is left of a demo that did not end
	if err := d.writeDefinitions(); err != nil {
		return err
	}
	for _, step := range demo.Steps() {
		if err := d.step(ctx, step); err != nil {
			return err
		}
	}
	if err := d.finish(); err != nil {
		return err
	}
	d.tell(time.Since(began))
	return nil
}

// begin refuses a folder it may not write, and makes one beside it to work in.
func (d *demoRun) begin() error {
	switch info, err := os.Stat(d.dir); {
	case errors.Is(err, fs.ErrNotExist):
	case err != nil:
		return err
	case !info.IsDir():
		return fmt.Errorf("output %s is a file, allowed is a folder that does not exist yet", d.dir)
	case !d.force:
		return fmt.Errorf("output folder %s exists; give another -o, or --force to replace it", d.dir)
	default:
		if err := d.mayReplace(); err != nil {
			return err
		}
	}
	parent := filepath.Dir(d.dir)
	if err := os.MkdirAll(parent, 0o755); err != nil {
		return err
	}
	var err error
	if d.work, err = os.MkdirTemp(parent, "."+filepath.Base(d.dir)+".*"); err != nil {
		return err
	}
	if err := os.Chmod(d.work, 0o755); err != nil {
		return err
	}
	return errors.Join(os.Mkdir(filepath.Join(d.work, demoDefinitions), 0o755), os.Mkdir(filepath.Join(d.work, demoPictures), 0o755))
}

// mayReplace lets --force replace nothing but what an earlier demo made.
func (d *demoRun) mayReplace() error {
	entries, err := os.ReadDir(d.dir)
	if err != nil {
		return err
	}
	made := map[string]bool{demoDefinitions: true, demoPictures: true}
	for _, step := range demo.Steps() {
		made[step.Name], made[step.Name+".parquet"] = true, true
	}
	for _, e := range entries {
		if !made[e.Name()] {
			return fmt.Errorf("output folder %s holds %s, which no demo makes; give another -o", d.dir, e.Name())
		}
	}
	return nil
}

func (d *demoRun) writeDefinitions() error {
	files, err := demo.Files()
	if err != nil {
		return toolError{err}
	}
	for _, f := range files {
		if err := os.WriteFile(filepath.Join(d.work, demoDefinitions, f.Name), []byte(f.Text), 0o644); err != nil {
			return err
		}
	}
	return nil
}

// step draws, runs and shows one set.
func (d *demoRun) step(ctx context.Context, step demo.Step) error {
	d.heading(step)
	plan, set := filepath.Join(demoDefinitions, step.Plan), step.Name+".parquet"
	drawn, err := job.Draw(job.DrawOptions{PlanPath: d.at(plan), OutPath: d.at(set), Report: reporter(d.streams)})
	if err != nil {
		return ofJob(err)
	}
	o := job.RunOptions{SetPath: d.at(set), OutDir: d.at(step.Name), Workers: d.workers, Version: version()}
	words := []string{"soctrial", "run", d.shown(set)}
	for _, e := range step.Estimators {
		path := filepath.Join(demoDefinitions, e)
		o.EstimatorPaths = append(o.EstimatorPaths, d.at(path))
		words = append(words, "-e", d.shown(path))
	}
	var ids []string
	for _, t := range step.Tracks {
		ids = append(ids, fmt.Sprint(t.ScenarioID))
	}
	o.Traces = strings.Join(ids, ",")
	p := newProgress(d.err)
	o.Report = p.reporter()
	out, err := job.Run(ctx, o)
	p.done()
	if err != nil {
		return ofJob(err)
	}
	fmt.Fprintln(d.out, summaryText(out, styleFor(d.out)))
	d.remark(step, out)
	d.made(set, fmt.Sprintf("the set: %d scenarios and their definitions", len(drawn.Rows)))
	d.made(filepath.Join(step.Name, job.ResultsFile), "a row a scenario and estimator")
	d.made(filepath.Join(step.Name, job.TracesFile), "every sample of scenarios "+strings.Join(ids, ", "))
	words = append(words, "--traces", o.Traces, "-o", d.shown(step.Name), "--force")
	d.commands = append(d.commands, fmt.Sprintf("soctrial draw %s -o %s --force", d.shown(plan), d.shown(set)), strings.Join(words, " "))
	return d.pictures(ctx, step, out)
}

func (d *demoRun) heading(step demo.Step) {
	fmt.Fprintf(d.out, "%s\n\n", strings.Repeat("━", lineWidth))
	d.say(step.About)
	fmt.Fprintln(d.out)
}

// remark says that a limit fails on purpose.
func (d *demoRun) remark(step demo.Step, out *job.Outcome) {
	failed := 0
	for _, j := range out.Judged {
		if j.Verdict != score.Pass {
			failed++
		}
	}
	if failed == 0 || step.MeantFail == "" {
		return
	}
	verb := "limits do"
	if failed == 1 {
		verb = "limit does"
	}
	d.say(fmt.Sprintf("%d %s not hold, and this demo means to show it: %s. In a run of yours the exit status would be 1.", failed, verb, step.MeantFail))
	fmt.Fprintln(d.out)
}

// say prints words in lines.
func (d *demoRun) say(words string) {
	var b strings.Builder
	wrapped(&b, "", words)
	fmt.Fprint(d.out, b.String())
}

// finish puts the demo in its place.
func (d *demoRun) finish() error {
	old := filepath.Join(filepath.Dir(d.dir), "."+filepath.Base(d.dir)+".replaced")
	err := os.Rename(d.dir, old)
	standing := err == nil
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	if err := os.Rename(d.work, d.dir); err != nil {
		if standing {
			return errors.Join(err, os.Rename(old, d.dir))
		}
		return err
	}
	if standing {
		return os.RemoveAll(old)
	}
	return nil
}

// tell says where everything lies and how to go on.
func (d *demoRun) tell(took time.Duration) {
	fmt.Fprintf(d.out, "%s\n\nWritten to %s in %.1f s\n\n", strings.Repeat("━", lineWidth), d.dir, took.Seconds())
	rows := [][]string{{"file", "what it holds"}, {demoDefinitions + "/", "every definition, to be changed"}}
	for _, f := range d.files {
		rows = append(rows, []string{f.name, f.what})
	}
	fmt.Fprintln(d.out, grid(rows, 1))
	rows = [][]string{{demoPictures + "/*.png and *.svg", "what it shows"}}
	for _, f := range d.pictured {
		rows = append(rows, []string{f.name, f.what})
	}
	fmt.Fprint(d.out, grid(rows, 1))
	fmt.Fprintf(d.out, "\nChange a file in %s, then repeat a step:\n", d.shown(demoDefinitions))
	for _, c := range d.commands {
		d.command(c)
	}
	fmt.Fprintln(d.out, "\nLook at any file:")
	d.command("soctrial show " + d.shown(filepath.Join(demoDefinitions, "quay-sweeper-21.toml")) + " --picture cell.png")
	fmt.Fprintf(d.out, "\n%s\n", caution)
}

// command prints a command in lines that a shell takes together.
func (d *demoRun) command(c string) {
	line := " "
	for _, w := range strings.Fields(c) {
		if len(line)+1+len(w) > lineWidth-2 && len(line) > 4 {
			fmt.Fprintln(d.out, line+" \\")
			line = "   "
		}
		line += " " + w
	}
	fmt.Fprintln(d.out, line)
}

func (d *demoRun) at(name string) string    { return filepath.Join(d.work, name) }
func (d *demoRun) shown(name string) string { return filepath.Join(d.dir, name) }
func (d *demoRun) made(name, what string)   { d.files = append(d.files, madeFile{name, what}) }

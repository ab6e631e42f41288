package main

import (
	"bytes"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"
)

// call runs the program in this process.
func call(t *testing.T, want int, args ...string) (stdout, stderr string) {
	t.Helper()
	var out, err bytes.Buffer
	if got := run(args, &out, &err); got != want {
		t.Fatalf("soctrial %s: exit status %d, asked is %d\n%s", strings.Join(args, " "), got, want, err.String())
	}
	return out.String(), err.String()
}

// Ctrl-C ends a run with status 130, tells how to go on, and the same command
// does, to the same bytes.
func TestInterruptAndContinue(t *testing.T) {
	dir := t.TempDir()
	if err := os.CopyFS(dir, os.DirFS(filepath.Join("testdata", "files"))); err != nil {
		t.Fatal(err)
	}
	in := func(name string) string { return filepath.Join(dir, name) }
	plan, err := os.ReadFile(in("aged.toml"))
	if err != nil {
		t.Fatal(err)
	}
	many := strings.Replace(string(plan), "count = 48", "count = 3000", 1)
	many = many[:strings.Index(many, "limit =")]
	if err := os.WriteFile(in("many.toml"), []byte(many), 0o644); err != nil {
		t.Fatal(err)
	}
	call(t, statusDone, "draw", in("many.toml"), "-o", in("many.parquet"))
	args := []string{"run", in("many.parquet"), "-e", in("ekf.toml"), "-o", in("broken")}
	go func() { // the folder stands once signals are caught
		for range 2000 {
			if _, err := os.Stat(in("broken")); err == nil {
				syscall.Kill(os.Getpid(), syscall.SIGINT)
				return
			}
			time.Sleep(time.Millisecond)
		}
	}()
	out, told := call(t, statusInterrupted, args...)
	if !strings.Contains(told, "of 3000 scenarios finished and written to "+in("broken")+"; the same command continues") {
		t.Errorf("told %q", told)
	}
	if !strings.Contains(out, "INCOMPLETE") {
		t.Errorf("printed %q, which does not say that it is incomplete", out)
	}
	call(t, statusDone, "show", in("broken"))
	first := told
	_, told = call(t, statusDone, args...)
	// On a slow machine the signal may come before the first scenario is done.
	if !strings.Contains(first, " 0 of 3000 ") && !strings.Contains(told, "scenarios were finished already") {
		t.Errorf("told %q after %q", told, first)
	}
	call(t, statusDone, "run", in("many.parquet"), "-e", in("ekf.toml"), "-o", in("whole"), "--workers", "1")
	a, errA := os.ReadFile(in("broken/results.parquet"))
	b, errB := os.ReadFile(in("whole/results.parquet"))
	if errA != nil || errB != nil || !bytes.Equal(a, b) {
		t.Errorf("continued and whole results differ (%v, %v)", errA, errB)
	}
}

// failing is an output that cannot be written.
type failing struct{}

func (failing) Write([]byte) (int, error) { return 0, syscall.EPIPE }

// What cannot be printed is the tool's failure, not success.
func TestOutputThatCannotBeWritten(t *testing.T) {
	var told bytes.Buffer
	if got := run([]string{"show", filepath.Join("testdata", "files", "ekf.toml")}, failing{}, &told); got != statusTool {
		t.Errorf("exit status %d, asked is %d", got, statusTool)
	}
	if !strings.Contains(told.String(), "soctrial: writing to standard output") {
		t.Errorf("told %q", told.String())
	}
}

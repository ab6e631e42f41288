package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"flag"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"unicode/utf8"

	"github.com/rogpeppe/go-internal/testscript"
)

var update = flag.Bool("update", false, "write what the scripts printed into them")

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"soctrial": main})
}

// Each script is a story: its files, what is called, what is printed. The
// definitions of testdata/files lie in every one's folder.
func TestScripts(t *testing.T) {
	testscript.Run(t, testscript.Params{
		Dir:           filepath.Join("testdata", "script"),
		UpdateScripts: *update,
		Setup: func(e *testscript.Env) error {
			return os.CopyFS(e.WorkDir, os.DirFS(filepath.Join("testdata", "files")))
		},
		Cmds: map[string]func(*testscript.TestScript, bool, []string){
			"exits":    exits,
			"replace":  replaceBytes,
			"truncate": truncateFile,
			"json":     checkJSON,
			"narrow":   checkWidth,
		},
	})
}

// exits STATUS ARG... runs soctrial and compares its exit status.
func exits(ts *testscript.TestScript, _ bool, args []string) {
	want, err := strconv.Atoi(args[0])
	ts.Check(err)
	got := 0
	if err := ts.Exec("soctrial", args[1:]...); err != nil {
		exit, ok := errors.AsType[*exec.ExitError](err)
		if !ok {
			ts.Check(err)
		}
		got = exit.ExitCode()
	}
	if got != want {
		ts.Fatalf("exit status %d, asked is %d\n%s", got, want, ts.ReadFile("stderr"))
	}
}

// replace FILE OLD NEW changes bytes in place; both texts are of one length.
func replaceBytes(ts *testscript.TestScript, _ bool, args []string) {
	if len(args) != 3 || len(args[1]) != len(args[2]) {
		ts.Fatalf("usage: replace file old new, of one length")
	}
	path := ts.MkAbs(args[0])
	data, err := os.ReadFile(path)
	ts.Check(err)
	if !bytes.Contains(data, []byte(args[1])) {
		ts.Fatalf("%s does not hold %q", args[0], args[1])
	}
	ts.Check(os.WriteFile(path, bytes.ReplaceAll(data, []byte(args[1]), []byte(args[2])), 0o644))
}

// truncate FILE LESS takes that many bytes off the end.
func truncateFile(ts *testscript.TestScript, _ bool, args []string) {
	path := ts.MkAbs(args[0])
	info, err := os.Stat(path)
	ts.Check(err)
	less, err := strconv.ParseInt(args[1], 10, 64)
	ts.Check(err)
	ts.Check(os.Truncate(path, info.Size()-less))
}

// json FILE KEY... VALUE follows keys and indices to a value and compares its
// JSON text.
func checkJSON(ts *testscript.TestScript, neg bool, args []string) {
	var v any
	ts.Check(json.Unmarshal([]byte(ts.ReadFile(args[0])), &v))
	for _, key := range args[1 : len(args)-1] {
		switch x := v.(type) {
		case map[string]any:
			var ok bool
			if v, ok = x[key]; !ok {
				ts.Fatalf("no key %q", key)
			}
		case []any:
			i, err := strconv.Atoi(key)
			ts.Check(err)
			if i >= len(x) {
				ts.Fatalf("no element %d of %d", i, len(x))
			}
			v = x[i]
		default:
			ts.Fatalf("%q of a plain value", key)
		}
	}
	text, err := json.Marshal(v)
	ts.Check(err)
	want := args[len(args)-1]
	if same := strings.Trim(string(text), `"`) == want; same == neg {
		ts.Fatalf("%v is %s, asked is %s (negated: %v)", args[1:len(args)-1], text, want, neg)
	}
}

// narrow FILE holds no line over 80 columns.
func checkWidth(ts *testscript.TestScript, _ bool, args []string) {
	for line := range strings.Lines(ts.ReadFile(args[0])) {
		if n := utf8.RuneCountInString(strings.TrimRight(line, "\n")); n > lineWidth {
			ts.Fatalf("%d columns: %s", n, line)
		}
	}
}

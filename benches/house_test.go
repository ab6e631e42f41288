package benches_test

import (
	"encoding/json"
	"go/ast"
	"go/parser"
	"go/token"
	"io/fs"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"
)

// module is the path every package of this project begins with.
const module = "soctrial"

// rooms says what each package may import of this module, and why the walls
// around it stand. A path that ends in /... also covers what lies beneath.
var rooms = []struct {
	room    string
	imports string
	because string
}{
	{"plant/stream", "", "chance belongs to a name, not to a place"},
	{"plant/cell", "", "a cell is what it is, whoever runs it"},
	{"plant/duty", "", "what is asked does not depend on what it is asked of"},
	{"plant/record", "", "columns in memory know no files and no cell"},
	{"plant", "plant/cell plant/duty plant/stream", "what happened does not depend on how it was read"},
	{"noise", "plant plant/record plant/stream", "a sensor sees the truth and never an estimate"},
	{"estimator", "plant/cell plant/record", "a filter may know the cell, never the simulator that holds the truth"},
	{"estimator/estimatortest", "estimator plant/cell plant/record plant plant/duty plant/stream noise", "laws are tried on simulated cells, in tests only"},
	{"estimator/...", "estimator plant/cell plant/record", "a filter may not know which fault was injected"},
	{"benches/scenario", "plant/cell plant/duty plant/stream noise", "a row names definitions; it runs nothing"},
	{"benches/score", "plant plant/record estimator", "a score sees truth and estimates, nothing else"},
	{"benches/define", "plant/cell plant/duty plant/record noise estimator benches/scenario", "the one place where TOML becomes values"},
	{"benches/store", "plant/record benches/scenario benches/score", "the one place where Parquet becomes values; definitions travel as text"},
	{"benches/picture", "", "a picture takes plain columns"},
	{"benches/roster", "estimator estimator/...", "the one table of kinds"},
	{"benches/demo", "benches/define", "the demo is definitions; commands run them"},
	{"benches/job", "benches benches/define benches/store benches/roster benches/scenario benches/score benches/picture plant/... plant noise estimator", "what commands call"},
	{"benches", "plant plant/cell plant/duty plant/record noise estimator benches/scenario benches/score", "the runner knows no files and no terminal"},
	{"cmd/soctrial", "benches/...", "a command is flags in, one call, text out"},
}

// outside says which outside packages only one room may import.
var outside = []struct{ path, room, because string }{
	{"github.com/pelletier/go-toml/v2", "benches/define", "strict reading with file, line and key lives in one place"},
	{"github.com/parquet-go/parquet-go", "benches/store", "its panics and silent zeros are fenced in one place"},
	{"gonum.org/v1/plot", "benches/picture", "one look for all pictures"},
	{"github.com/spf13/cobra", "cmd/soctrial", "flags belong to commands"},
	{"github.com/vbauerster/mpb/v8", "cmd/soctrial", "terminals belong to commands"},
	{"github.com/jedib0t/go-pretty/v6", "cmd/soctrial", "tables belong to commands"},
}

// pure rooms do no I/O and read no clock.
var pure = []string{"plant", "noise", "estimator", "benches/scenario", "benches/score", "benches/compare"}

var notPure = []string{"os", "os/exec", "io/ioutil", "log", "log/slog", "net", "net/http", "time", "path/filepath", "syscall", "math/rand"}

type pkg struct {
	ImportPath   string
	Dir          string
	Doc          string
	GoFiles      []string
	Imports      []string
	TestImports  []string
	XTestImports []string
}

func packages(t *testing.T) []pkg {
	t.Helper()
	out, err := exec.Command("go", "list", "-json=ImportPath,Dir,Doc,GoFiles,Imports,TestImports,XTestImports", module+"/...").Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	var all []pkg
	for dec := json.NewDecoder(strings.NewReader(string(out))); dec.More(); {
		var p pkg
		if err := dec.Decode(&p); err != nil {
			t.Fatal(err)
		}
		all = append(all, p)
	}
	if len(all) < 10 {
		t.Fatalf("only %d packages listed", len(all))
	}
	return all
}

func local(path string) (string, bool) {
	return strings.CutPrefix(path, module+"/")
}

func covers(pattern, path string) bool {
	if under, ok := strings.CutSuffix(pattern, "/..."); ok {
		return strings.HasPrefix(path, under+"/")
	}
	return pattern == path
}

func TestWalls(t *testing.T) {
	for _, p := range packages(t) {
		name, ok := local(p.ImportPath)
		if !ok {
			continue
		}
		at := slices.IndexFunc(rooms, func(r struct{ room, imports, because string }) bool { return covers(r.room, name) })
		if at < 0 {
			t.Errorf("%s has no walls: give it a row in rooms, with the reason", name)
			continue
		}
		r := rooms[at]
		allowed := strings.Fields(r.imports)
		for _, imp := range p.Imports {
			dep, mine := local(imp)
			if mine && !slices.ContainsFunc(allowed, func(a string) bool { return covers(a, dep) }) {
				t.Errorf("%s imports %s: %s", name, dep, r.because)
			}
			if slices.ContainsFunc(pure, func(u string) bool { return name == u || u != "benches" && strings.HasPrefix(name, u+"/") }) &&
				name != "estimator/estimatortest" && slices.Contains(notPure, imp) {
				t.Errorf("%s imports %s: core packages do no I/O, read no clock and own no global chance", name, imp)
			}
			for _, o := range outside {
				if (imp == o.path || strings.HasPrefix(imp, o.path+"/")) && name != o.room {
					t.Errorf("%s imports %s, which only %s may: %s", name, imp, o.room, o.because)
				}
			}
			if dep == "testdata" && name != "estimator/estimatortest" {
				t.Errorf("%s imports testdata outside a test", name)
			}
		}
		for _, imp := range append(p.TestImports, p.XTestImports...) {
			dep, _ := local(imp)
			if strings.HasPrefix(name, "estimator") && name != "estimator/estimatortest" && (dep == "plant" || dep == "noise") {
				t.Errorf("tests of %s import %s: laws that need a simulator live in estimatortest", name, dep)
			}
		}
	}
}

func TestEveryPackageSaysWhatItIsFor(t *testing.T) {
	for _, p := range packages(t) {
		if len(p.GoFiles) > 0 && len(strings.TrimSpace(p.Doc)) < 40 {
			t.Errorf("%s has no package comment: say what the room is for and what it refuses", p.ImportPath)
		}
	}
}

// quantity words that must carry a unit where they end an exported field's or
// parameter's name; the units follow the design's list.
var bare = regexp.MustCompile(`(Current|Voltage|Temperature|Period|Duration|Capacity|Resistance|Power|Speed|Mass|Charge|Energy)$`)

func TestQuantitiesCarryTheirUnit(t *testing.T) {
	numeric := map[string]bool{"float64": true, "[]float64": true, "*float64": true, "[][]float64": true}
	for _, p := range packages(t) {
		for _, file := range p.GoFiles {
			f, err := parser.ParseFile(token.NewFileSet(), filepath.Join(p.Dir, file), nil, 0)
			if err != nil {
				t.Fatal(err)
			}
			ast.Inspect(f, func(n ast.Node) bool {
				field, ok := n.(*ast.Field)
				if !ok || !numeric[typeName(field.Type)] {
					return true
				}
				for _, name := range field.Names {
					word := strings.ToUpper(name.Name[:1]) + name.Name[1:]
					if bare.MatchString(word) {
						t.Errorf("%s/%s: %s is a number without its unit in its name", p.ImportPath, file, name.Name)
					}
				}
				return true
			})
		}
	}
}

func typeName(e ast.Expr) string {
	switch e := e.(type) {
	case *ast.Ident:
		return e.Name
	case *ast.StarExpr:
		return "*" + typeName(e.X)
	case *ast.ArrayType:
		if e.Len == nil {
			return "[]" + typeName(e.Elt)
		}
	}
	return "?"
}

// Nothing of the records and traces that lie beside the project is in it.
func TestNothingBorrowedIsKept(t *testing.T) {
	names := []string{"cell-a-25degC", "cell-b-25C", "cell-b-c15", "cycle_udds_1hz", "cycle_hwfet_1hz", "cycle_us06_1hz", "cycle_wltc_class3b_1hz"}
	err := filepath.WalkDir("..", func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() && d.Name() == ".git" {
			return fs.SkipDir
		}
		for _, n := range names {
			if strings.HasPrefix(d.Name(), n) {
				t.Errorf("%s is kept here: it is to be read in place", path)
			}
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}

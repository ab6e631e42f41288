package job

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
)

// Names of what lies in a results folder.
const (
	ResultsFile = "results.parquet"
	TracesFile  = "traces.parquet"
	SetFile     = "set.parquet"
	TimingFile  = "timing.json"
	partsDir    = "parts"
)

// folder is an output folder at work. Files are written to work, which is the
// asked folder itself or, where old results are to be replaced, one beside it
// that takes the old one's place at the end.
type folder struct {
	asked, work string
	replaces    bool
	lock        *os.File
}

func (f *folder) path(name string) string { return filepath.Join(f.work, name) }
func (f *folder) parts() string           { return filepath.Join(f.work, partsDir) }

// openFolder makes dir ready for a run. resumes tells whether the folder at a
// path holds an incomplete run that is the same as this one, or says why not;
// begin fills a new folder with what a run keeps beside its results.
func openFolder(dir string, force bool, resumes func(path string) error, begin func(path string) error) (*folder, error) {
	dir = filepath.Clean(dir)
	f := &folder{asked: dir, work: dir}
	info, err := os.Stat(dir)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		err = f.create(begin)
	case err != nil:
		return nil, wrong(err)
	case !info.IsDir():
		return nil, wrongf("output %s is a file, allowed is a folder that does not exist yet", dir)
	case force:
		err = f.beside(resumes, begin)
	default:
		if why := resumes(dir); why != nil {
			return nil, wrongf("output folder %s exists and %w; give another -o, or --force to replace it", dir, why)
		}
	}
	if err != nil {
		return nil, wrong(err)
	}
	if err := f.hold(); err != nil {
		return nil, wrong(err)
	}
	return f, nil
}

// create makes the working folder appear with all that begin puts into it.
func (f *folder) create(begin func(string) error) error {
	parent := filepath.Dir(f.work)
	if err := os.MkdirAll(parent, 0o755); err != nil {
		return err
	}
	temp, err := os.MkdirTemp(parent, "."+filepath.Base(f.work)+".*")
	if err != nil {
		return err
	}
	defer os.RemoveAll(temp) // gone already where all went well
	if err := os.Chmod(temp, 0o755); err != nil {
		return err
	}
	if err := os.Mkdir(filepath.Join(temp, partsDir), 0o755); err != nil {
		return err
	}
	if err := begin(temp); err != nil {
		return err
	}
	return os.Rename(temp, f.work)
}

// beside sets up the folder that will replace the asked one.
func (f *folder) beside(resumes, begin func(string) error) error {
	if err := f.mayReplace(); err != nil {
		return err
	}
	f.replaces = true
	f.work = filepath.Join(filepath.Dir(f.asked), "."+filepath.Base(f.asked)+".unfinished")
	_, err := os.Stat(f.work)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return f.create(begin)
	case err != nil:
		return err
	case resumes(f.work) == nil:
		return nil
	}
	if foreign, err := foreignIn(f.work); err != nil || len(foreign) > 0 {
		return fmt.Errorf("folder %s is in the way of --force and holds %s, which no run wrote; move it away", f.work, strings.Join(foreign, ", "))
	}
	if err := os.RemoveAll(f.work); err != nil {
		return err
	}
	return f.create(begin)
}

// mayReplace refuses to move a folder that somebody stands in.
func (f *folder) mayReplace() error {
	abs, err := filepath.Abs(f.asked)
	if err != nil {
		return err
	}
	if abs, err = filepath.EvalSymlinks(abs); err != nil {
		return err
	}
	here, err := os.Getwd()
	if err != nil {
		return err
	}
	if here, err = filepath.EvalSymlinks(here); err != nil {
		return err
	}
	inside, err := filepath.Rel(abs, here)
	if err == nil && inside != ".." && !strings.HasPrefix(inside, ".."+string(filepath.Separator)) {
		return fmt.Errorf("--force would replace %s, which is or holds the folder this command runs in; give another -o", f.asked)
	}
	f.asked = abs
	return nil
}

// foreignIn names what no run puts into a results folder.
func foreignIn(dir string) ([]string, error) {
	entries, err := os.ReadDir(dir)
	if err != nil {
		return nil, err
	}
	var out []string
	for _, e := range entries {
		if !slices.Contains([]string{ResultsFile, TracesFile, SetFile, TimingFile, partsDir}, e.Name()) && !isTemp(e.Name()) {
			out = append(out, e.Name())
		}
	}
	return out, nil
}

// isTemp tells a file that was being written when its program was killed.
func isTemp(name string) bool {
	return strings.HasPrefix(name, ".") && strings.HasSuffix(name, ".part")
}

// scratchFolder makes a folder beside dir that takes its place at the end, for
// a job that is not continued. A folder that stands at dir is refused, unless it
// is to be replaced.
func scratchFolder(dir string, force bool) (*folder, error) {
	dir = filepath.Clean(dir)
	f := &folder{asked: dir, replaces: true}
	info, err := os.Stat(dir)
	switch {
	case errors.Is(err, fs.ErrNotExist):
	case err != nil:
		return nil, wrong(err)
	case !info.IsDir():
		return nil, wrongf("output %s is a file, allowed is a folder that does not exist yet", dir)
	case !force:
		return nil, wrongf("output folder %s exists; give another -o, or --force to replace it", dir)
	default:
		if err := f.mayReplace(); err != nil {
			return nil, wrong(err)
		}
	}
	parent := filepath.Dir(f.asked)
	if err := os.MkdirAll(parent, 0o755); err != nil {
		return nil, wrong(err)
	}
	if f.work, err = os.MkdirTemp(parent, "."+filepath.Base(f.asked)+".*"); err != nil {
		return nil, wrong(err)
	}
	return f, wrong(os.Chmod(f.work, 0o755))
}

// drop removes a scratch folder that did not become the asked one.
func (f *folder) drop() {
	if f.replaces {
		os.RemoveAll(f.work)
	}
}

// finish removes the parts and, where the folder is another than the asked one,
// takes that one's place; what no run wrote there is carried over.
func (f *folder) finish() error {
	if err := os.RemoveAll(f.parts()); err != nil || !f.replaces {
		return err
	}
	old := filepath.Join(filepath.Dir(f.asked), "."+filepath.Base(f.asked)+".replaced")
	if _, err := os.Stat(old); err == nil {
		return fmt.Errorf("folder %s is left from a swap that was broken off; the new results stay in %s until it is moved away", old, f.work)
	}
	err := os.Rename(f.asked, old)
	standing := err == nil
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	if err := os.Rename(f.work, f.asked); err != nil {
		if standing {
			return errors.Join(err, os.Rename(old, f.asked))
		}
		return err
	}
	f.work, f.replaces = f.asked, false
	if !standing {
		return nil
	}
	foreign, err := foreignIn(old)
	if err != nil {
		return err
	}
	for _, name := range foreign {
		if err := os.Rename(filepath.Join(old, name), filepath.Join(f.asked, name)); err != nil {
			return err
		}
	}
	return os.RemoveAll(old)
}

// shown is where the files are, in the words of who asked for them.
func (f *folder) shown(asked string) string {
	if f.replaces {
		return f.work
	}
	return filepath.Clean(asked)
}

// close lets another run have the folder.
func (f *folder) close() {
	if f.lock != nil {
		f.lock.Close()
	}
}

package store

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"syscall"
)

// disk is where files are made. through, where set, stands between every write
// and the file: tests put a full disk there.
type disk struct {
	through func(io.Writer) io.Writer
}

// WriteFile makes the file at path from what write puts into w. The file
// appears whole or not at all: it is written under a temporary name in the same
// folder, synced, made readable to all (0644), renamed, and the folder synced. On any
// failure, a panic of write included, the temporary file is removed and a
// file that stood at path before is left as it was.
func WriteFile(path string, write func(w io.Writer) error) error {
	return disk{}.writeFile(path, write)
}

func (d disk) writeFile(path string, write func(w io.Writer) error) error {
	f, err := d.create(path)
	if err != nil {
		return err
	}
	defer f.abort() // does nothing once the file is in place
	if err := write(f); err != nil {
		return f.failed(err)
	}
	return f.commit()
}

// pending is a file that does not stand at its path yet.
type pending struct {
	path string
	file *os.File // nil once committed or aborted
	buf  *bufio.Writer
}

func (d disk) create(path string) (*pending, error) {
	if info, err := os.Stat(path); err == nil && info.IsDir() {
		return nil, fmt.Errorf("store: %s is a folder; a file is to be written there", path)
	}
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*.part")
	if err != nil {
		var at *fs.PathError
		if errors.As(err, &at) {
			err = at.Err
		}
		return nil, fmt.Errorf("store: cannot write %s: %w", path, err)
	}
	var w io.Writer = f
	if d.through != nil {
		w = d.through(f)
	}
	return &pending{path: path, file: f, buf: bufio.NewWriterSize(w, 1<<18)}, nil
}

// Write implements io.Writer.
func (p *pending) Write(b []byte) (int, error) { return p.buf.Write(b) }

// commit puts the file in place; whatever fails leaves nothing behind.
func (p *pending) commit() error {
	defer p.abort()
	err := p.buf.Flush()
	if err == nil {
		err = p.file.Chmod(0o644)
	}
	if err == nil {
		err = p.file.Sync()
	}
	if err == nil {
		err = p.file.Close()
	}
	if err == nil {
		err = os.Rename(p.file.Name(), p.path)
	}
	if err != nil {
		return p.failed(err)
	}
	p.file = nil
	return syncFolder(filepath.Dir(p.path))
}

// failed says that writing failed, without the temporary name, which means
// nothing to who asked for the file.
func (p *pending) failed(err error) error {
	var at *fs.PathError
	var link *os.LinkError
	switch {
	case errors.As(err, &at) && p.file != nil && at.Path == p.file.Name():
		err = at.Err
	case errors.As(err, &link):
		err = link.Err
	}
	return fmt.Errorf("store: writing %s: %w", p.path, err)
}

// abort removes the temporary file if it still stands.
func (p *pending) abort() {
	if p.file == nil {
		return
	}
	p.file.Close()
	os.Remove(p.file.Name())
	p.file = nil
}

// syncFolder makes a rename in the folder last.
func syncFolder(dir string) error {
	d, err := os.Open(dir)
	if err == nil {
		err = errors.Join(d.Sync(), d.Close())
	}
	if err != nil && !cannotSync(err) {
		return fmt.Errorf("store: syncing folder %s: %w", dir, err)
	}
	return nil
}

// cannotSync tells whether the system, the file system or the rights to the
// folder (write without read) rule out that a folder is synced. The file stands whole by
// then, and lasts as long as that system says.
func cannotSync(err error) bool {
	return errors.Is(err, errors.ErrUnsupported) || errors.Is(err, syscall.EINVAL) || errors.Is(err, fs.ErrPermission)
}

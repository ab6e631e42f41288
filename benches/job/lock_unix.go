//go:build unix

package job

import (
	"fmt"
	"os"
	"syscall"
)

// hold keeps other runs out of the folder for as long as this one lives; the
// kernel lets go when the process ends, however it does.
func (f *folder) hold() error {
	d, err := os.Open(f.work)
	if err != nil {
		return err
	}
	if err := syscall.Flock(int(d.Fd()), syscall.LOCK_EX|syscall.LOCK_NB); err != nil {
		d.Close()
		return fmt.Errorf("output folder %s is being written by another run (%w)", f.work, err)
	}
	f.lock = d
	return nil
}

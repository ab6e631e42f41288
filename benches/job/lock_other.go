//go:build !unix

package job

// hold does nothing where a folder cannot be locked.
func (f *folder) hold() error { return nil }

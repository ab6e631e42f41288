// Package testdata finds the figures that tests check against: published
// reference figures kept in this folder with their sources, and bench records
// and traces that lie beside the project and are read in place, never copied.
//
// Only tests import it.
package testdata

import (
	"os"
	"path/filepath"
	"runtime"
	"testing"
)

// Reference returns the path of a published reference file kept in
// testdata/reference.
func Reference(t testing.TB, name string) string {
	t.Helper()
	path := filepath.Join(root(), "testdata", "reference", name)
	if _, err := os.Stat(path); err != nil {
		t.Fatalf("testdata: %v", err)
	}
	return path
}

// Shared returns the path of a file beside the project: below $SOCTRIAL_SHARED
// where that is set, else below ../shared. Where the file is absent the test is
// skipped with a message, or fails when SOCTRIAL_REQUIRE_SHARED is 1.
func Shared(t testing.TB, name string) string {
	t.Helper()
	dir := os.Getenv("SOCTRIAL_SHARED")
	if dir == "" {
		dir = filepath.Join(root(), "..", "shared")
	}
	path := filepath.Join(dir, filepath.FromSlash(name))
	if _, err := os.Stat(path); err != nil {
		if os.Getenv("SOCTRIAL_REQUIRE_SHARED") == "1" {
			t.Fatalf("testdata: %s is required here but absent: %v", name, err)
		}
		t.Skipf("testdata: %s is not beside the project (set SOCTRIAL_SHARED); this check did not run", name)
	}
	return path
}

// root is the module's folder, found from this file's own place.
func root() string {
	_, file, _, _ := runtime.Caller(0)
	return filepath.Dir(filepath.Dir(file))
}

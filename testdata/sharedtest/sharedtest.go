// Package sharedtest gives tests the published tables and real files of the
// folder shared that stands beside the checkout.
package sharedtest

import (
	"os"
	"path/filepath"
	"testing"
)

// Path is the place of a file or folder of shared; the test is skipped where it
// is absent.
func Path(t testing.TB, name string) string {
	t.Helper()
	dir, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	for ; dir != filepath.Dir(dir); dir = filepath.Dir(dir) {
		if _, err := os.Stat(filepath.Join(dir, "go.mod")); err != nil {
			continue
		}
		path := filepath.Join(dir, "..", "shared", filepath.FromSlash(name))
		if _, err := os.Stat(path); err != nil {
			t.Skipf("shared/%s is not beside the checkout: %v", name, err)
		}
		return path
	}
	t.Skip("no go.mod above the test")
	return ""
}

// Read is the content of a file of shared; the test is skipped where it is
// absent.
func Read(t testing.TB, name string) []byte {
	t.Helper()
	b, err := os.ReadFile(Path(t, name))
	if err != nil {
		t.Fatal(err)
	}
	return b
}

package localpg

import (
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func TestAttachFindsTheClusterOfAnotherEpitally(t *testing.T) {
	t.Parallel()
	// The longer path puts the socket elsewhere, which Attach has to find too.
	for _, name := range []string{"short", strings.Repeat("long", 25)} {
		t.Run(name[:5], func(t *testing.T) {
			t.Parallel()
			dir := filepath.Join(t.TempDir(), name)
			if url, ok := Attach(dir); ok {
				t.Fatalf("attached to a missing folder: %s", url)
			}
			cmd, url := startHelper(t, dir)
			got, ok := Attach(dir)
			if !ok || got != url {
				t.Fatalf("attached to %q (%v), want %q", got, ok, url)
			}
			execute(t, got, "CREATE TABLE kept AS SELECT 1 AS a")
			if err := cmd.Process.Kill(); err != nil {
				t.Fatal(err)
			}
			cmd.Wait() // its error is the kill
			if url, ok := Attach(dir); ok {
				t.Fatalf("attached to the folder of a killed Epitally: %s", url)
			}
			start(t, dir) // ends what is left of it
		})
	}
}

// Attach looks at the lock for a moment, which must not refuse a Start.
func TestAttachDoesNotDisturbStart(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	looking, done := make(chan struct{}), make(chan struct{})
	stop, cancel := context.WithCancel(t.Context())
	go func() {
		defer close(done)
		for first := true; stop.Err() == nil; first = false {
			lockHeld(filepath.Join(dir, lockName))
			if first {
				close(looking)
			}
		}
	}()
	<-looking
	for range 200 {
		f, err := lock(t.Context(), filepath.Join(dir, lockName), dir)
		if err != nil {
			t.Fatal(err)
		}
		f.Close()
	}
	cancel()
	<-done
}

func TestEnsureDatabaseAndSettings(t *testing.T) {
	t.Parallel()
	c := startWith(t, Options{DataDir: t.TempDir(), Throwaway: true, Settings: map[string]string{
		"work_mem":         "7MB",
		"listen_addresses": "*", // where it listens is not for the caller
	}})
	for range 2 { // there already: nothing to do
		if err := c.EnsureDatabase(t.Context(), `second "one"`); err != nil {
			t.Fatal(err)
		}
	}
	url := c.URL(`second "one"`)
	execute(t, url, "DO $$ BEGIN ASSERT current_setting('work_mem') = '7MB' AND current_setting('listen_addresses') = ''; END $$")
}

func TestALogOverItsLimitBeginsAnew(t *testing.T) {
	t.Parallel()
	path := filepath.Join(t.TempDir(), "postgres.log")
	if err := limitLog(path, 10); err != nil {
		t.Fatalf("no log yet: %v", err)
	}
	f, err := os.OpenFile(path, os.O_CREATE|os.O_WRONLY|os.O_APPEND, 0o600) // as a running server holds it
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	for _, step := range []struct{ write, now, before string }{
		{"0123456789", "0123456789", ""}, // at the limit
		{"abc", "", "3456789abc"},        // over it: the last ten bytes stay
		{"new", "new", "3456789abc"},
	} {
		if _, err := f.WriteString(step.write); err != nil {
			t.Fatal(err)
		}
		if err := limitLog(path, 10); err != nil {
			t.Fatal(err)
		}
		now, _ := os.ReadFile(path)
		before, _ := os.ReadFile(path + ".1") // missing reads as ""
		if string(now) != step.now || string(before) != step.before {
			t.Errorf("after %q: log %q, before it %q; want %q, %q", step.write, now, before, step.now, step.before)
		}
	}
}

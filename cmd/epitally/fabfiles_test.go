package main

import (
	"bytes"
	"compress/gzip"
	"context"
	"crypto/sha256"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/klauspost/compress/zstd"

	"epitally/analytics/simfab"
)

// goldenFab is the digest of all files of the fab of seed 1 with 24 wafers. It
// changes only when the demo fab is meant to change.
const goldenFab = "4e336efcae76b74d"

func TestFabFilesAreTheSameEveryTime(t *testing.T) {
	t.Parallel()
	first, second := growFab(t, 24), growFab(t, 24)
	a, b := digestFolder(t, first), digestFolder(t, second)
	if a != b {
		t.Errorf("two runs of one seed differ: %s and %s", a, b)
	}
	if a != goldenFab {
		t.Errorf("the files' digest is %s, want %s: if the fab was meant to change, write the new one here", a, goldenFab)
	}
}

func growFab(t *testing.T, wafers int) string {
	t.Helper()
	dir := t.TempDir()
	calls, last := 0, 0
	err := writeFab(t.Context(), simfab.New(simfab.Config{Seed: 1, Wafers: wafers}), dir, func(done, total int) {
		calls, last = calls+1, done
		if total != wafers {
			t.Errorf("progress says %d wafers in all, want %d", total, wafers)
		}
	})
	if err != nil {
		t.Fatal(err)
	}
	if calls != wafers || last != wafers {
		t.Errorf("progress was told %d times, last of %d wafers; want %d", calls, last, wafers)
	}
	return dir
}

func digestFolder(t *testing.T, dir string) string {
	t.Helper()
	h := sha256.New()
	err := fs.WalkDir(os.DirFS(dir), ".", func(name string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		text, err := readUnpacked(filepath.Join(dir, name))
		fmt.Fprintf(h, "%s %d %x\n", name, len(text), sha256.Sum256(text))
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return fmt.Sprintf("%x", h.Sum(nil))[:16]
}

// readUnpacked gives a file's content without its compression, so that a digest
// does not depend on the version of the packer.
func readUnpacked(path string) ([]byte, error) {
	text, err := os.ReadFile(path)
	switch {
	case err != nil:
		return nil, err
	case strings.HasSuffix(path, ".gz"):
		z, err := gzip.NewReader(bytes.NewReader(text))
		if err != nil {
			return nil, err
		}
		return io.ReadAll(z)
	case strings.HasSuffix(path, ".zst"):
		z, err := zstd.NewReader(nil)
		if err != nil {
			return nil, err
		}
		defer z.Close()
		return z.DecodeAll(text, nil)
	}
	return text, nil
}

func TestFabFolderHoldsOnlyWholeFilesAndTheTruth(t *testing.T) {
	t.Parallel()
	dir := growFab(t, 24)
	var hidden []string
	kinds := map[string]int{}
	err := fs.WalkDir(os.DirFS(dir), ".", func(name string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		if strings.HasPrefix(d.Name(), ".") {
			hidden = append(hidden, name)
			return nil
		}
		kinds[filepath.Dir(name)]++
		kinds[filepath.Ext(name)]++
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	if len(hidden) != 1 || hidden[0] != truthFile {
		t.Errorf("hidden files %v, want only %s", hidden, truthFile)
	}
	if kinds["pl"] != 24 || kinds["probe"] != 24 || kinds["runs"] != 4 {
		t.Errorf("files per folder %v, want 24 in pl and probe, 4 in runs", kinds)
	}
	for _, ext := range []string{".gz", ".zst", ".txt"} {
		if kinds[ext] == 0 {
			t.Errorf("no %s file among %v: the demo should use every way in", ext, kinds)
		}
	}
	text, err := os.ReadFile(filepath.Join(dir, truthFile))
	if err != nil {
		t.Fatal(err)
	}
	var truth simfab.Truth
	if err := json.Unmarshal(text, &truth); err != nil {
		t.Fatal(err)
	}
	if len(truth.Wafers) != 24 || len(truth.Reactors) != 4 {
		t.Errorf("the truth tells of %d wafers and %d reactors, want 24 and 4", len(truth.Wafers), len(truth.Reactors))
	}
}

func TestWriteFabStopsWhenTold(t *testing.T) {
	t.Parallel()
	ctx, cancel := context.WithCancel(t.Context())
	err := writeFab(ctx, simfab.New(simfab.Config{Seed: 1, Wafers: 40}), t.TempDir(), func(done, _ int) {
		if done == 2 {
			cancel()
		}
	})
	if !errors.Is(err, context.Canceled) {
		t.Errorf("error %v, want context cancelled", err)
	}
}

func TestAppendDecimal(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		k        int32
		decimals int
		point    byte
		want     string
	}{
		{45237, 2, '.', "452.37"}, {5, 3, '.', "0.005"}, {0, 2, '.', "0.00"}, {-5, 2, '.', "-0.05"},
		{12, 0, '.', "12"}, {0, 0, '.', "0"}, {45511, 2, ',', "455,11"}, {2147483647, 1, '.', "214748364.7"},
	} {
		if got := string(appendDecimal(nil, c.k, c.decimals, c.point)); got != c.want {
			t.Errorf("%d with %d decimals is written %q, want %q", c.k, c.decimals, got, c.want)
		}
	}
}

func BenchmarkWriteFab(b *testing.B) {
	dir := b.TempDir()
	b.ReportAllocs()
	for b.Loop() {
		f := simfab.New(simfab.Config{Seed: 1, Wafers: 20})
		if err := writeFab(b.Context(), f, dir, nil); err != nil {
			b.Fatal(err)
		}
	}
}

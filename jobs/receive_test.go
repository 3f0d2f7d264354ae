package jobs

import (
	"context"
	"errors"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"epitally/analytics"
)

func TestReceive(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	f, err := OpenFolder(dir, 0, time.Now)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	for _, want := range []string{"one.csv.gz", "one (2).csv.gz", "one (3).csv.gz"} {
		got, err := f.Receive(t.Context(), "one.csv.gz", strings.NewReader("text"), 100)
		if err != nil || got != want {
			t.Errorf("%q %v, want %q", got, err, want)
		}
		if text, err := os.ReadFile(filepath.Join(dir, want)); err != nil || string(text) != "text" {
			t.Errorf("%s holds %q, %v", want, text, err)
		}
	}
	gone, cancel := context.WithCancel(t.Context())
	cancel()
	for _, c := range []struct {
		ctx     context.Context
		name    string
		content io.Reader
		kind    error
	}{
		{t.Context(), "../out.csv", strings.NewReader("x"), analytics.ErrInvalid},
		{t.Context(), "a/b.csv", strings.NewReader("x"), analytics.ErrInvalid},
		{t.Context(), `a\b.csv`, strings.NewReader("x"), analytics.ErrInvalid},
		{t.Context(), ".hidden", strings.NewReader("x"), analytics.ErrInvalid},
		{t.Context(), "", strings.NewReader("x"), analytics.ErrInvalid},
		{t.Context(), "loaded", strings.NewReader("x"), analytics.ErrInvalid},
		{t.Context(), "a\x00b", strings.NewReader("x"), analytics.ErrInvalid},
		{t.Context(), "a\x1b[31m", strings.NewReader("x"), analytics.ErrInvalid},
		{t.Context(), strings.Repeat("a", 201), strings.NewReader("x"), analytics.ErrInvalid},
		{t.Context(), "empty.csv", strings.NewReader(""), analytics.ErrInvalid},
		{t.Context(), "large.csv", strings.NewReader(strings.Repeat("x", 101)), analytics.ErrTooLarge},
		{gone, "broken.csv", strings.NewReader("x"), context.Canceled},
	} {
		if got, err := f.Receive(c.ctx, c.name, c.content, 100); !errors.Is(err, c.kind) {
			t.Errorf("%q: %q, %v; want %v", c.name, got, err, c.kind)
		}
	}
	files := 0
	fs.WalkDir(os.DirFS(dir), ".", func(_ string, d fs.DirEntry, _ error) error {
		if !d.IsDir() {
			files++
		}
		return nil
	})
	if files != 3 {
		t.Errorf("%d files lie in the folder, want the three received", files)
	}
}

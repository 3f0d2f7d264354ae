package web

import (
	"io/fs"
	"os"
	"path/filepath"
	"testing"
)

func TestGalleryRendersEveryPage(t *testing.T) {
	t.Parallel()
	dir := os.Getenv("GALLERY_DIR") // set to look at the pages, after a build
	var assets fs.FS
	if dir == "" {
		assets = fakeAssets()
	}
	files, err := Gallery(assets)
	if err != nil {
		t.Fatal(err)
	}
	for name, b := range files {
		if len(b) == 0 {
			t.Errorf("%s is empty", name)
		}
		if dir == "" {
			continue
		}
		path := filepath.Join(dir, name)
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, b, 0o644); err != nil {
			t.Fatal(err)
		}
	}
}

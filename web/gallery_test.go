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
	p, err := NewPages(assets)
	if err != nil {
		t.Fatal(err)
	}
	if dir == "" {
		dir = t.TempDir()
	}
	if err := p.WriteGallery(dir); err != nil {
		t.Fatal(err)
	}
	for _, g := range galleryPages() {
		if info, err := os.Stat(filepath.Join(dir, g.name+".html")); err != nil || info.Size() == 0 {
			t.Errorf("%s was not written: %v", g.name, err)
		}
	}
}

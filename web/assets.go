package web

import (
	"crypto/sha256"
	"embed"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"mime"
	"net/http"
	"path"
	"strconv"
	"strings"
)

//go:embed all:dist
var built embed.FS

// neededAssets are what `npm run build` makes.
var neededAssets = []string{"app.js", "charts.js", "first.js", "style.css", "icon.svg"}

// assetSet is the built files in memory, under one checksum over all of them.
type assetSet struct {
	sum   string
	files map[string][]byte
}

func readAssets(from fs.FS) (*assetSet, error) {
	if from == nil {
		sub, err := fs.Sub(built, "dist")
		if err != nil {
			return nil, err
		}
		from = sub
	}
	set := &assetSet{files: make(map[string][]byte, len(neededAssets))}
	h := sha256.New()
	for _, name := range neededAssets {
		b, err := fs.ReadFile(from, name)
		if errors.Is(err, fs.ErrNotExist) {
			return nil, fmt.Errorf("page asset %s is missing from the binary: run `make build`", name)
		}
		if err != nil {
			return nil, fmt.Errorf("page asset %s: %w", name, err)
		}
		set.files[name] = b
		fmt.Fprintf(h, "%s %d\n", name, len(b))
		h.Write(b)
	}
	set.sum = hex.EncodeToString(h.Sum(nil))[:16]
	return set, nil
}

// ServeHTTP answers /assets/{checksum}/{file}. A checksum of an older build is
// answered with the present file, but not to be kept.
func (s *assetSet) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	sum, name, _ := strings.Cut(strings.TrimPrefix(r.URL.Path, "/assets/"), "/")
	b, ok := s.files[name]
	if !ok || (r.Method != http.MethodGet && r.Method != http.MethodHead) {
		http.NotFound(w, r)
		return
	}
	h := w.Header()
	h.Set("Content-Type", mime.TypeByExtension(path.Ext(name)))
	h.Set("X-Content-Type-Options", "nosniff")
	if sum == s.sum {
		h.Set("Cache-Control", "public, max-age=31536000, immutable")
		h.Set("ETag", strconv.Quote(s.sum))
		if r.Header.Get("If-None-Match") == strconv.Quote(s.sum) {
			w.WriteHeader(http.StatusNotModified)
			return
		}
	} else {
		h.Set("Cache-Control", "no-store")
	}
	if r.Method == http.MethodGet {
		_, _ = w.Write(b) // a reader who went away is no fault of ours
	}
}

package web

import (
	"bytes"
	"embed"
	"fmt"
	"html/template"
	"io"
	"io/fs"
	"net/http"
	"strings"
)

//go:embed templates
var templateFiles embed.FS

// pageNames are the pages there are; each is templates/NAME.html.
var pageNames = []string{"wafers", "wafer", "bins", "bin", "loads", "load", "error"}

// Pages renders pages and serves the assets they use. It is safe for use by
// several goroutines.
type Pages struct {
	views  map[string]*template.Template
	assets *assetSet
	failed []byte // the pre-rendered page of an internal error
}

// NewPages parses every template and reads the built assets: from assets, or
// from those embedded in the binary when it is nil. Assets that were never built
// are an error that says how to build them.
func NewPages(assets fs.FS) (*Pages, error) {
	set, err := readAssets(assets)
	if err != nil {
		return nil, err
	}
	return newPages(set, "/assets/"+set.sum+"/")
}

// newPages makes Pages whose asset URLs begin with prefix.
func newPages(set *assetSet, prefix string) (*Pages, error) {
	p := &Pages{views: make(map[string]*template.Template, len(pageNames)), assets: set}
	funcs := templateFuncs()
	funcs["asset"] = func(name string) (string, error) {
		if _, ok := set.files[name]; !ok {
			return "", fmt.Errorf("asset %s is not built", name)
		}
		return prefix + name, nil
	}
	for _, name := range pageNames {
		t, err := template.New("base.html").Funcs(funcs).
			ParseFS(templateFiles, "templates/base.html", "templates/parts/*.html", "templates/"+name+".html")
		if err != nil {
			return nil, fmt.Errorf("page %s: %w", name, err)
		}
		p.views[name] = t
	}
	var err error
	if p.failed, err = p.bytes("error", NewErrorPage(http.StatusInternalServerError, "")); err != nil {
		return nil, err
	}
	return p, nil
}

// Render writes the page called name. Nothing is written when it fails.
func (p *Pages) Render(w io.Writer, name string, page any) error {
	b, err := p.bytes(name, page)
	if err != nil {
		return err
	}
	_, err = w.Write(b)
	return err
}

// RenderPart writes one named template of a page, for a script to put in place.
func (p *Pages) RenderPart(w io.Writer, name, part string, data any) error {
	view, ok := p.views[name]
	if !ok {
		return fmt.Errorf("there is no page %q: use one of %s", name, strings.Join(pageNames, ", "))
	}
	var b bytes.Buffer
	if err := view.ExecuteTemplate(&b, part, data); err != nil {
		return fmt.Errorf("page %s, part %s: %w", name, part, err)
	}
	_, err := w.Write(b.Bytes())
	return err
}

func (p *Pages) bytes(name string, page any) ([]byte, error) {
	view, ok := p.views[name]
	if !ok {
		return nil, fmt.Errorf("there is no page %q: use one of %s", name, strings.Join(pageNames, ", "))
	}
	var b bytes.Buffer
	if err := view.ExecuteTemplate(&b, "base.html", page); err != nil {
		return nil, fmt.Errorf("page %s: %w", name, err)
	}
	return b.Bytes(), nil
}

// Error gives the page of an error: status is an HTTP status, detail what was
// wrong and what to do, for a person. The detail of a 5xx is not shown, and a
// page that cannot be rendered becomes the pre-rendered one, so it never fails.
func (p *Pages) Error(status int, detail string) []byte {
	if status >= http.StatusInternalServerError && status != http.StatusServiceUnavailable {
		return p.failed
	}
	b, err := p.bytes("error", NewErrorPage(status, detail))
	if err != nil {
		return p.failed
	}
	return b
}

// Assets serves /assets/{checksum}/{file}.
func (p *Pages) Assets() http.Handler { return p.assets }

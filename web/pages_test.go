package web

import (
	"bytes"
	"encoding/json"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/PuerkitoBio/goquery"
)

// fakeAssets stands for a build, so that page tests need none.
func fakeAssets() fstest.MapFS {
	m := fstest.MapFS{}
	for _, name := range neededAssets {
		m[name] = &fstest.MapFile{Data: []byte("/* " + name + " */")}
	}
	return m
}

func renderDoc(t *testing.T, name string, page any) *goquery.Document {
	t.Helper()
	p, err := NewPages(fakeAssets())
	if err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := p.Render(&b, name, page); err != nil {
		t.Fatal(err)
	}
	doc, err := goquery.NewDocumentFromReader(&b)
	if err != nil {
		t.Fatal(err)
	}
	return doc
}

func TestEveryPageBeginsWithItsFinding(t *testing.T) {
	t.Parallel()
	for _, g := range galleryPages() {
		doc := renderDoc(t, g.view, g.page)
		first := doc.Find("main").Children().First()
		if id, _ := first.Attr("id"); id != "finding" || strings.TrimSpace(first.Text()) == "" {
			t.Errorf("%s: main begins with %q", g.name, first.Text())
		}
		// The pages' security policy forbids these.
		if n := doc.Find("[style], style, [onclick], [onchange], [onload]").Length(); n > 0 {
			t.Errorf("%s: %d inline styles or handlers", g.name, n)
		}
		doc.Find("script").Each(func(_ int, s *goquery.Selection) {
			if kind, _ := s.Attr("type"); kind == "application/json" {
				if !json.Valid([]byte(s.Text())) {
					t.Errorf("%s: a data block is not JSON", g.name)
				}
			} else if _, ok := s.Attr("src"); !ok {
				t.Errorf("%s: inline script", g.name)
			}
		})
		doc.Find("img, figure > div.chart").Each(func(_ int, s *goquery.Selection) {
			alt, label := s.AttrOr("alt", ""), s.AttrOr("aria-label", "")
			if alt == "" && label == "" {
				t.Errorf("%s: a picture without words", g.name)
			}
		})
		doc.Find("select, input[type=search]").Each(func(_ int, s *goquery.Selection) {
			if id := s.AttrOr("id", ""); s.ParentsFiltered("label").Length() == 0 && doc.Find("label[for="+id+"]").Length() == 0 {
				t.Errorf("%s: field %s has no label", g.name, s.AttrOr("name", ""))
			}
		})
		if n := doc.Find("h1").Length(); n > 1 {
			t.Errorf("%s: %d first headings", g.name, n)
		}
	}
}

func TestWaferNamesCannotInject(t *testing.T) {
	t.Parallel()
	in := cannedWafer()
	const evil = `"><script>alert(1)</script><img src=x onerror=alert(2)>`
	in.Wafer, in.Growth.Lot = evil, evil
	in.Spec.Cells[0].Name = `</script><script>alert(3)</script>`
	in.Measurement.Notices = []string{evil}
	in.Measurement.Facts = map[string]string{evil: evil}
	doc := renderDoc(t, "wafer", NewWaferPage(in))
	doc.Find("script").Each(func(_ int, s *goquery.Selection) {
		if _, src := s.Attr("src"); !src && s.AttrOr("type", "") != "application/json" {
			t.Errorf("a script came in: %s", s.Text())
		}
	})
	if n := doc.Find("img[onerror], img[src=x]").Length(); n > 0 {
		t.Error("an element came in")
	}
	var data MapData
	if err := json.Unmarshal([]byte(doc.Find("#map-data").Text()), &data); err != nil {
		t.Fatal(err)
	}
	if data.Wafer != evil || data.Bins.Cells[0].Name != in.Spec.Cells[0].Name {
		t.Errorf("names changed on their way: %q, %q", data.Wafer, data.Bins.Cells[0].Name)
	}
	if got := doc.Find("#finding strong").First().Text(); got != evil {
		t.Errorf("the finding names %q", got)
	}
}

func TestWaferPageShowsItsParts(t *testing.T) {
	t.Parallel()
	in := cannedWafer()
	doc := renderDoc(t, "wafer", NewWaferPage(in))
	for _, want := range []string{
		"#map-canvas[tabindex='0']", "#readout", "#legend", "select[name=measurement] option[selected]", "select[name=quantity]", "select[name=specification]",
		"input[name=view][value=quantity][checked]", "figure[data-chart=histogram] details table", "figure[data-chart=radial] a[download]", "figure[data-chart=bins] figcaption",
		"noscript", ".stats tbody tr", "a[href='/wafers?lot=K-0412']",
	} {
		if doc.Find(want).Length() == 0 {
			t.Errorf("nothing matches %s", want)
		}
	}
	if got := doc.Find(".stats tbody tr").Length(); got != len(in.Planes) {
		t.Errorf("%d rows of figures, want %d", got, len(in.Planes))
	}
	in.View = "bins"
	doc = renderDoc(t, "wafer", NewWaferPage(in))
	if doc.Find(".bin-legend li").Length() == 0 || doc.Find("#legend").Length() > 0 {
		t.Error("the bin view has not the legend of bins alone")
	}
}

func TestWaferPageSaysWhatIsNotKnown(t *testing.T) {
	t.Parallel()
	in := cannedWafer()
	in.Growth, in.Spec = Growth{}, nil
	layout := *in.Measurement.Layout
	layout.Assumed = true
	in.Measurement.Layout, in.Measurement.Current = &layout, false
	notices := renderDoc(t, "wafer", NewWaferPage(in)).Find(".notice").Text()
	for _, want := range []string{"in no run sheet", "outline is assumed", "not the current one"} {
		if !strings.Contains(notices, want) {
			t.Errorf("no notice says %q: %s", want, notices)
		}
	}
	doc := renderDoc(t, "wafer", NewWaferPage(WaferInput{Wafer: "K-1"}))
	if doc.Find("canvas").Length() > 0 || !strings.Contains(doc.Find("main").Text(), "epitally load") {
		t.Error("an unmeasured wafer does not say how to load, or shows a map")
	}
}

func TestAssetsMustBeBuilt(t *testing.T) {
	t.Parallel()
	_, err := NewPages(fstest.MapFS{})
	if err == nil || !strings.Contains(err.Error(), "make build") {
		t.Errorf("error %v does not say how to build", err)
	}
}

func TestAssetsAreKeptByChecksum(t *testing.T) {
	t.Parallel()
	p, err := NewPages(fakeAssets())
	if err != nil {
		t.Fatal(err)
	}
	get := func(path string) *httptest.ResponseRecorder {
		w := httptest.NewRecorder()
		p.Assets().ServeHTTP(w, httptest.NewRequest(http.MethodGet, path, nil))
		return w
	}
	now := get("/assets/" + p.assets.sum + "/app.js")
	if now.Code != 200 || !strings.Contains(now.Header().Get("Cache-Control"), "immutable") || !strings.HasPrefix(now.Header().Get("Content-Type"), "text/javascript") {
		t.Errorf("present asset: %d %v", now.Code, now.Header())
	}
	if old := get("/assets/0000/app.js"); old.Code != 200 || old.Header().Get("Cache-Control") != "no-store" {
		t.Errorf("older checksum: %d %v", old.Code, old.Header())
	}
	if none := get("/assets/" + p.assets.sum + "/../secret"); none.Code != 404 {
		t.Errorf("unknown asset: %d", none.Code)
	}
}

func TestErrorPages(t *testing.T) {
	t.Parallel()
	p, err := NewPages(fakeAssets())
	if err != nil {
		t.Fatal(err)
	}
	if b := string(p.Error(404, "There is no wafer <K>.")); !strings.Contains(b, "no wafer &lt;K&gt;") {
		t.Error("a 404 does not show its detail, escaped")
	}
	if b := string(p.Error(500, "password in a driver error")); strings.Contains(b, "password") || !strings.Contains(b, "could not make this page") {
		t.Error("a 500 shows detail or says nothing")
	}
	if b := string(p.Error(503, "")); !strings.Contains(b, "database does not answer") {
		t.Error("a 503 does not say what is away")
	}
}

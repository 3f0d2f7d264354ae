package api

import (
	"encoding/csv"
	"encoding/json"
	"fmt"
	"net/http"
	"net/url"
	"strings"
	"testing"

	"github.com/PuerkitoBio/goquery"

	"epitally/analytics/colour"
	"epitally/web"
)

// page gets a page and parses it.
func page(t *testing.T, f *fixture, target string, status int) *goquery.Document {
	t.Helper()
	w := do(f, request(http.MethodGet, target, ""))
	if w.Code != status {
		t.Fatalf("%s: status %d, want %d: %s", target, w.Code, status, w.Body)
	}
	if kind := w.Header().Get("Content-Type"); !strings.HasPrefix(kind, "text/html") {
		t.Fatalf("%s: %s, want a page", target, kind)
	}
	doc, err := goquery.NewDocumentFromReader(w.Body)
	if err != nil {
		t.Fatal(err)
	}
	return doc
}

func text(s *goquery.Selection) string {
	return strings.Join(strings.Fields(strings.ReplaceAll(s.Text(), "\u202f", " ")), " ")
}

func TestWafersPageListsAndFilters(t *testing.T) {
	t.Parallel()
	f := setup(t)
	all := page(t, f, "/wafers", 200)
	if n := all.Find("table.wafers tbody tr").Length(); n != 2 {
		t.Errorf("%d wafers listed, want 2", n)
	}
	if got := text(all.Find("#finding")); !strings.HasPrefix(got, "2 wafers: 1 on colour; of 1 it cannot be told") {
		t.Errorf("finding %q", got)
	}
	one := page(t, f, "/wafers?reactor=Heron&run=204", 200)
	rows := one.Find("table.wafers tbody tr")
	if rows.Length() != 1 || !strings.Contains(text(rows), "Heron 204, pocket 3") || !strings.Contains(text(rows), "layout dies") {
		t.Errorf("filtered rows: %s", text(rows))
	}
	if src := rows.Find("img").AttrOr("src", ""); !strings.Contains(src, "small-map.png?quantity="+dominant) {
		t.Errorf("small map %q", src)
	}
	if chosen := one.Find("select[name=reactor] option[selected]").AttrOr("value", ""); chosen != "Heron" {
		t.Errorf("the form shows reactor %q", chosen)
	}
	if got := text(page(t, f, "/wafers?lot=none", 200).Find("#finding")); !strings.HasPrefix(got, "No wafer fits this filter") {
		t.Errorf("finding of an empty filter %q", got)
	}
	w := do(f, request(http.MethodGet, "/wafers?q=k-1", ""))
	if w.Code != 303 || w.Header().Get("Location") != "/wafers/K-1" {
		t.Errorf("a search for a whole name: %d to %q", w.Code, w.Header().Get("Location"))
	}
	page(t, f, "/wafers?run=many", 400)
	page(t, f, "/wafers?cursor=nonsense", 400)
}

func TestWaferPageBinsNow(t *testing.T) {
	t.Parallel()
	f := setup(t)
	doc := page(t, f, fmt.Sprintf("/wafers/K-1?measurement=%d&view=bins", f.id), 200)
	var data web.MapData
	if err := json.Unmarshal([]byte(doc.Find("#map-data").Text()), &data); err != nil {
		t.Fatal(err)
	}
	if data.View != "bins" || data.Bins == nil || data.Bins.Spec != "harbour-blue" || len(data.Quantities) != 2 {
		t.Fatalf("map data %+v", data)
	}
	stored, err := f.store.Tallies(t.Context(), f.id)
	if err != nil || len(stored) != 1 {
		t.Fatalf("tallies %v, %v", stored, err)
	}
	for i, cell := range stored[0].Cells {
		if data.Bins.Cells[i].Dies != cell.Dies || data.Bins.Cells[i].Name != cell.Name {
			t.Errorf("cell %d is %+v, the stored tally has %+v", i, data.Bins.Cells[i], cell)
		}
	}
	want := strings.ReplaceAll(web.Percent(stored[0].Good, stored[0].Denominator), "\u202f", " ")
	if got := text(doc.Find("#finding")); !strings.Contains(got, want+" of ") || !strings.Contains(got, "harbour-blue v1") {
		t.Errorf("finding %q lacks %s", got, want)
	}
	// Every address the page leads its script and its reader to is answered.
	addresses := []string{data.Grid, data.Bins.URL, data.Quantities[0].Plane}
	doc.Find("a[download], main a[href], noscript img").Each(func(_ int, s *goquery.Selection) {
		addresses = append(addresses, s.AttrOr("href", s.AttrOr("src", "")))
	})
	for _, a := range addresses {
		if w := do(f, request(http.MethodGet, a, "")); a == "" || w.Code != 200 {
			t.Errorf("%q: status %d", a, w.Code)
		}
	}
}

func TestWaferPageOfAnOddName(t *testing.T) {
	t.Parallel()
	f := setup(t)
	doc := page(t, f, "/wafers/"+url.PathEscape(oddName), 200)
	if got := doc.Find("#finding strong").First().Text(); got != oddName {
		t.Errorf("the finding names %q", got)
	}
	notices := text(doc.Find(".notice"))
	for _, want := range []string{"in no run sheet", "assumed"} {
		if !strings.Contains(notices, want) {
			t.Errorf("notices %q lack %q", notices, want)
		}
	}
	// It may be binned under any specification of its kind all the same.
	doc = page(t, f, "/wafers/"+url.PathEscape(oddName)+"?specification=harbour-blue", 200)
	if !strings.Contains(text(doc.Find("#finding")), "measured dies sell under harbour-blue v1") {
		t.Errorf("finding %q", text(doc.Find("#finding")))
	}
}

func TestPagesThatAreNotThere(t *testing.T) {
	t.Parallel()
	f := setup(t)
	for target, want := range map[string]string{
		"/wafers/K-404":                             "K-404",
		"/wafers/K-1?measurement=999":               "999",
		"/wafers/K-1?specification=none":            "none",
		"/bins/none":                                "none",
		"/bins/harbour-blue?version=9":              "harbour-blue",
		"/loads/999":                                "999",
		"/loads/abc":                                "abc",
		"/wafers/K-1/charts/pie.csv":                "pie",
		"/wafers/K-1/charts/radial.csv?quantity=xx": "xx",
	} {
		if got := text(page(t, f, target, 404).Find("main")); !strings.Contains(got, want) {
			t.Errorf("%s: %q does not name %q", target, got, want)
		}
	}
	page(t, f, "/wafers/K-1?specification=harbour-blue&version=x", 400)
	page(t, f, "/bins/harbour-blue?version=x", 400)
}

func TestSpecificationAndLoadPages(t *testing.T) {
	t.Parallel()
	f := setup(t)
	list := page(t, f, "/bins", 200)
	if got := text(list.Find("#finding")); !strings.HasPrefix(got, "1 specification stored; under harbour-blue v1 the last 1 wafer yielded") {
		t.Errorf("finding %q", got)
	}
	doc := page(t, f, "/bins/harbour-blue", 200)
	for want, n := range map[string]int{"figure[data-chart=yields]": 1, "pre.document": 1} {
		if got := doc.Find(want).Length(); got != n {
			t.Errorf("%s: %d, want %d", want, got, n)
		}
	}
	body := text(doc.Find("main"))
	for _, want := range []string{"452.5, 455, 457.5", "W1", "open", "Dominant wavelength"} {
		if !strings.Contains(body, want) {
			t.Errorf("the page of a specification lacks %q", want)
		}
	}
	loads := page(t, f, "/loads?state=stored", 200)
	href, _ := loads.Find("table.loads tbody a").First().Attr("href")
	if got := text(page(t, f, href, 200).Find("#finding")); !strings.Contains(got, "is stored") {
		t.Errorf("finding of a load %q", got)
	}
}

func TestChartsAsCSV(t *testing.T) {
	t.Parallel()
	f := setup(t)
	for _, target := range []string{"histogram.csv?quantity=" + dominant, "radial.csv?quantity=" + voltage, "bins.csv?specification=harbour-blue"} {
		w := do(f, request(http.MethodGet, fmt.Sprintf("/wafers/K-1/charts/%s&measurement=%d", target, f.id), ""))
		rows, err := csv.NewReader(w.Body).ReadAll()
		if w.Code != 200 || err != nil || len(rows) < 2 {
			t.Errorf("%s: status %d, %d rows, %v", target, w.Code, len(rows), err)
		}
	}
	w := do(f, request(http.MethodGet, "/bins/harbour-blue/yields.csv", ""))
	if rows, err := csv.NewReader(w.Body).ReadAll(); err != nil || len(rows) != 2 || rows[1][0] != "K-1" {
		t.Errorf("yields: %v, %v", rows, err)
	}
}

// TestSuspectMeasurementsAreShown stores a measurement whose flux is in the wrong
// unit, and one whose flux changed alone, and looks at their pages.
func TestSuspectMeasurementsAreShown(t *testing.T) {
	t.Parallel()
	f := setup(t)
	suspect := probeOf(t, "K-9", noon, f.grid, f.layout)
	suspect.Derived.Suspects = []colour.Suspect{{Kind: colour.QuantumAboveOne, Says: "300 of 301 dies: more photons come out than electrons go in", LikelyCause: "the unit of flux", Dies: 300, Of: 301}}
	suspect.Derived.DerivedFrom = map[string]string{voltage: "nothing at all"}
	f.put(t, suspect)
	w := do(f, request("GET", "/wafers/K-9", ""))
	d, err := goquery.NewDocumentFromReader(w.Body)
	if err != nil || w.Code != http.StatusOK {
		t.Fatalf("%d %v", w.Code, err)
	}
	if text := d.Find(".suspect").Text(); !strings.Contains(text, "more photons come out than electrons go in") || !strings.Contains(text, "Look first at the unit of flux") {
		t.Errorf("%q", text)
	}
	if text := d.Find("table.stats").Text(); !strings.Contains(text, "computed from nothing at all") {
		t.Errorf("the figures do not say what was computed: %q", text)
	}
	sound := do(f, request("GET", "/wafers/K-1", ""))
	if page, err := goquery.NewDocumentFromReader(sound.Body); err != nil || page.Find(".suspect").Length() != 0 {
		t.Errorf("a sound measurement is suspect: %v", err)
	}
}

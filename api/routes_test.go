package api

import (
	"encoding/csv"
	"fmt"
	"net/http"
	"net/url"
	"strings"
	"sync"
	"testing"
)

// targets is one good address per operation.
func (f *fixture) targets() map[string]string {
	one := fmt.Sprintf("/api/v1/measurements/%d", f.id)
	hash := f.grid.Hash()
	return map[string]string{
		"alive": "/healthz", "ready": "/readyz", "describe": "/api/v1/openapi.json",
		"listWafers":              "/api/v1/wafers?reactor=Heron&run=204&state=on+colour&limit=1&lot=",
		"getWafer":                "/api/v1/wafers/" + url.PathEscape(oddName),
		"getMeasurement":          one,
		"listSummaries":           one + "/summaries",
		"listTallies":             one + "/tallies",
		"getTally":                one + "/tally?specification=harbour-blue",
		"getBins":                 one + "/bins?specification=harbour-blue&version=1",
		"getSubstrateMap":         one + "/substrate-map.xml?specification=harbour-blue",
		"getPlane":                one + "/planes/" + dominant,
		"listDies":                one + "/dies?quantities=" + voltage,
		"getDie":                  one + "/dies/-3/4?specification=harbour-blue&version=1",
		"getMap":                  one + "/map.png?quantity=" + dominant + "&size=64&theme=dark",
		"getSmallMap":             one + "/small-map.png?quantity=" + dominant,
		"getGrid":                 fmt.Sprintf("/api/v1/grids/%x", hash),
		"listSpecifications":      "/api/v1/specifications",
		"getSpecification":        "/api/v1/specifications/harbour-blue",
		"getSpecificationVersion": "/api/v1/specifications/harbour-blue/versions/1",
		"listQuantities":          "/api/v1/quantities",
		"listProducts":            "/api/v1/products",
		"listRecipes":             "/api/v1/recipes",
		"listRuns":                "/api/v1/runs?reactor=Heron&limit=10",
		"listProfiles":            "/api/v1/profiles",
		"listSources":             "/api/v1/sources?state=stored&limit=2",
		"getSource":               "/api/v1/sources/1",
	}
}

func withQuery(target, query string) string {
	if strings.Contains(target, "?") {
		return target + "&" + query
	}
	return target + "?" + query
}

// Every GET of the table answers in every form the document promises, to HEAD as
// to GET, with 304 where it is tagged, and refuses a parameter it does not have.
func TestEveryGetAnswersAsDocumented(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	targets := f.targets()
	for _, r := range f.routes() {
		if r.method != http.MethodGet {
			continue
		}
		target, ok := targets[r.id]
		if !ok {
			t.Errorf("operation %s has no test", r.id)
			continue
		}
		for i, a := range r.answers {
			var header []string
			if i > 0 {
				header = []string{"Accept", a.media}
			}
			w := k.get(t, target, header...)
			if got, _, _ := strings.Cut(w.Header().Get("Content-Type"), ";"); got != a.media || w.Body.Len() == 0 {
				t.Errorf("%s: %d bytes of %s, want %s", target, w.Body.Len(), got, a.media)
			}
			if r.tagged {
				checkTag(t, k, target, w.Header().Get("ETag"), header)
			}
			checkHead(t, f, target, w.Header(), header)
		}
		p := k.problem(t, request("GET", withQuery(target, "colour=red"), ""), http.StatusBadRequest)
		if len(p.Errors) != 1 || p.Errors[0].Key != "colour" || p.Errors[0].Remedy == "" {
			t.Errorf("%s: unknown parameter: %+v", r.id, p)
		}
	}
}

func checkTag(t *testing.T, k *contract, target, tag string, header []string) {
	t.Helper()
	if !strings.HasPrefix(tag, `"`) {
		t.Errorf("%s: ETag %q is not strong", target, tag)
	}
	w := k.call(t, request("GET", target, "", append([]string{"If-None-Match", `"other", W/` + tag}, header...)...))
	if w.Code != http.StatusNotModified || w.Body.Len() != 0 || w.Header().Get("ETag") != tag {
		t.Errorf("%s: %d with %d bytes for the ETag it gave; want 304 and none", target, w.Code, w.Body.Len())
	}
}

func checkHead(t *testing.T, h http.Handler, target string, want http.Header, header []string) {
	t.Helper()
	w := do(h, request("HEAD", target, "", header...))
	if w.Code != http.StatusOK || w.Body.Len() != 0 {
		t.Errorf("HEAD %s: %d with %d bytes", target, w.Code, w.Body.Len())
	}
	for _, name := range []string{"Content-Type", "ETag", "Cache-Control", "Content-Disposition"} {
		if got := w.Header().Get(name); got != want.Get(name) {
			t.Errorf("HEAD %s: %s %q, GET has %q", target, name, got, want.Get(name))
		}
	}
}

// What is kept is kept for as long as its address names it.
func TestCacheLifetimes(t *testing.T) {
	t.Parallel()
	f := setup(t)
	targets := f.targets()
	for id, want := range map[string]string{"getGrid": keepContent, "getPlane": keepNumber, "getBins": keepNumber, "getMap": askAgain,
		"getSmallMap": smallMapKeep, "listWafers": "no-cache"} {
		if got := do(f, request("GET", targets[id], "")).Header().Get("Cache-Control"); got != want {
			t.Errorf("%s: Cache-Control %q, want %q", id, got, want)
		}
	}
	latest := fmt.Sprintf("/api/v1/measurements/%d/bins?specification=harbour-blue", f.id)
	if got := do(f, request("GET", latest, "")).Header().Get("Cache-Control"); got != askAgain {
		t.Errorf("bins under the latest version: %q; it changes", got)
	}
}

func TestTablesAreRectangular(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	for id, target := range f.targets() {
		target = withQuery(target, "format=csv")
		if !strings.HasPrefix(id, "list") || id == "listProfiles" {
			continue
		}
		rows, err := csv.NewReader(k.get(t, target).Body).ReadAll() // refuses rows of another length
		if err != nil || len(rows) < 2 {
			t.Errorf("%s: %d rows, %v", target, len(rows), err)
		}
	}
}

func TestWaferListPagesByCursor(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	first := k.get(t, "/api/v1/wafers?limit=1")
	page := decoded[wafersOut](t, first)
	if page.Total != 2 || len(page.Rows) != 1 || page.Rows[0].Wafer.Name != oddName || page.Next == "" {
		t.Fatalf("first page: total %d, %d rows, next %q; want the newest of 2", page.Total, len(page.Rows), page.Next)
	}
	link := first.Header().Get("Link")
	next, rel, _ := strings.Cut(strings.TrimPrefix(link, "<"), ">")
	if rel != `; rel="next"` {
		t.Fatalf("Link %q", link)
	}
	page = decoded[wafersOut](t, k.get(t, next))
	if len(page.Rows) != 1 || page.Rows[0].Wafer.Name != "K-1" || page.Next != "" {
		t.Errorf("second page: %+v", page)
	}
	row := page.Rows[0]
	if row.Tally == nil || row.Tally.Spec != "harbour-blue" || row.Main == nil || row.Main.Quantity.Name != dominant || *row.Wafer.Run != 204 {
		t.Errorf("row: %+v", row)
	}
}

func TestWaferNamesMayHoldAnyPrintableCharacter(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	got := decoded[waferDetailOut](t, k.get(t, "/api/v1/wafers/"+url.PathEscape(oddName)))
	if got.Wafer.Name != oddName || len(got.Measurements) != 1 || !got.Measurements[0].Layout.Assumed {
		t.Errorf("%+v", got.Wafer)
	}
	p := k.problem(t, request("GET", "/api/v1/wafers/a%2Fb", ""), http.StatusNotFound)
	if !strings.Contains(p.Detail, `"a/b"`) || !strings.Contains(p.Detail, "/api/v1/wafers?q=") {
		t.Errorf("detail %q names neither the wafer nor what to do", p.Detail)
	}
}

func TestTheDocumentSaysWhatEveryParameterIs(t *testing.T) {
	t.Parallel()
	f := setup(t)
	seen := map[string]bool{}
	for _, r := range f.routes() {
		if r.summary == "" || seen[r.id] || len(r.answers) == 0 {
			t.Errorf("%s %s: id %q, summary %q", r.method, r.path, r.id, r.summary)
		}
		seen[r.id] = true
		inPath := 0
		for _, p := range r.params {
			if p.doc == "" || p.name == "" {
				t.Errorf("%s: parameter %q is not described", r.id, p.name)
			}
			if p.in == "path" {
				inPath++
				if !strings.Contains(r.path, "{"+p.name+"}") {
					t.Errorf("%s has no {%s}", r.path, p.name)
				}
			}
		}
		if inPath != strings.Count(r.path, "{") {
			t.Errorf("%s: %d of its parameters are read", r.path, inPath)
		}
	}
}

// Encoders, parsed specifications and their tables are shared between requests.
func TestManyReadersAtOnce(t *testing.T) {
	t.Parallel()
	f := setup(t)
	one := fmt.Sprintf("/api/v1/measurements/%d", f.put(t, probeOf(t, "K-2", noon, square(60), f.layout)))
	targets := []string{one + "/bins?specification=harbour-blue", one + "/tally?specification=harbour-blue", one + "/planes/" + dominant, one + "/dies"}
	want := make([]string, len(targets))
	for i, target := range targets {
		want[i] = do(f, request("GET", target, "")).Body.String()
	}
	var wait sync.WaitGroup
	for worker := range 8 {
		wait.Go(func() {
			for i := range 12 {
				k := (worker + i) % len(targets)
				w := do(f, request("GET", targets[k], "", "Accept-Encoding", []string{"zstd", "gzip", ""}[i%3]))
				if got := string(plain(t, w)); got != want[k] {
					t.Errorf("%s: %d bytes, alone %d", targets[k], len(got), len(want[k]))
				}
			}
		})
	}
	wait.Wait()
}

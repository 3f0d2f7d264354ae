package api

import (
	"image/png"
	"net/http"
	"net/http/httptest"
	"net/url"
	"strconv"
	"strings"
	"testing"

	"github.com/PuerkitoBio/goquery"
)

func tryRequest(document, query string) *http.Request {
	return request("POST", "/api/v1/specifications/trial"+query, document, "Content-Type", mediaYAML)
}

func TestSpecificationsAreTried(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	got := decoded[trialOut](t, k.call(t, tryRequest(fixtureSpec, "")))
	tally := decoded[rebinnedOut](t, k.get(t, "/api/v1/measurements/"+strconv.FormatInt(f.id, 10)+"/tally?specification=harbour-blue"))
	// The specification is for products of which only K-1 is.
	if got.Wafers != 1 || got.Good != tally.Good || got.Denominator != tally.Denominator || got.RiskWafers != 0 {
		t.Errorf("%+v; the tally has %d good of %d", got, tally.Good, tally.Denominator)
	}
	for i, c := range tally.Cells {
		if got.Cells[i].Name != c.Name || got.Cells[i].Dies != c.Dies {
			t.Errorf("cell %+v, tally %+v", got.Cells[i], c)
		}
	}
	uncertain := strings.Replace(fixtureSpec, "products", "uncertainty: {dominant_wavelength_nm: 0.2}\nproducts", 1)
	got = decoded[trialOut](t, k.call(t, tryRequest(uncertain, "?measurements="+strconv.FormatInt(f.id, 10)+","+strconv.FormatInt(f.odd, 10))))
	if got.Wafers != 2 || got.RiskWafers != 2 || got.Cells[0].WronglyAccepted == nil || *got.Cells[0].WronglyAccepted <= 0 || *got.Cells[0].WronglyAccepted > 0.2 || *got.Cells[0].Confident >= 1 {
		t.Errorf("with an uncertainty: %+v", got)
	}
	if got = decoded[trialOut](t, k.call(t, tryRequest(uncertain, "?risks=no"))); got.RiskWafers != 0 {
		t.Errorf("risks=no: %+v", got)
	}
	narrow := strings.Replace(fixtureSpec, "457.5]", "455.005, 480]", 1)
	narrow = strings.Replace(narrow, "sellable: [W1, W2]", "prices: {W1: 0.5}", 1)
	got = decoded[trialOut](t, k.call(t, tryRequest(narrow, "")))
	var kinds []string
	for _, finding := range got.Findings {
		kinds = append(kinds, finding.Kind)
	}
	if strings.Join(kinds, " ") != "too fine empty" || got.Value != 0.5*float64(got.Cells[0].Dies) {
		t.Errorf("findings %v, value %g of %d dies", got.Findings, got.Value, got.Cells[0].Dies)
	}
	k.problem(t, tryRequest("specification: x\n", ""), http.StatusBadRequest)
	k.problem(t, tryRequest(fixtureSpec, "?measurements=x"), http.StatusBadRequest)
	k.problem(t, tryRequest(fixtureSpec, "?measurements=99999"), http.StatusNotFound)
	k.problem(t, tryRequest(fixtureSpec, "?last=501"), http.StatusBadRequest)
}

// TestEditedSpecificationsAreDrawn asks for what the editor of the page asks for.
func TestEditedSpecificationsAreDrawn(t *testing.T) {
	t.Parallel()
	f := setup(t)
	send := func(query, document string) *httptest.ResponseRecorder {
		return do(f, request("POST", "/bins/harbour-blue/trial?measurements="+strconv.FormatInt(f.id, 10)+query, document, "Content-Type", mediaYAML))
	}
	shown := func(w *httptest.ResponseRecorder) *goquery.Document {
		d, err := goquery.NewDocumentFromReader(w.Body)
		if err != nil || w.Code != http.StatusOK {
			t.Fatalf("%d %v", w.Code, err)
		}
		return d
	}
	d := shown(send("", fixtureSpec))
	if n := d.Find("svg.binplot .handle").Length(); n != 3 { // one an edge
		t.Errorf("%d handles", n)
	}
	moves, _ := d.Find("svg.binplot .handle").First().Attr("data-moves")
	if !strings.HasPrefix(moves, "8:57:5:x:452.5") { // where 452.5 stands in the document
		t.Errorf("the first edge moves %q", moves)
	}
	if text := d.Find(".verdict").Text(); !strings.Contains(text, "On the last 1 wafer") || !strings.Contains(text, "sell") {
		t.Errorf("%q", text)
	}
	d = shown(send("&before=10&quick=yes&boxes="+url.QueryEscape("plot-a0:400,500,0,1"), fixtureSpec))
	if left, _ := d.Find("svg.binplot").Attr("data-left"); left != "400" {
		t.Errorf("the plot begins at %s, not where it was held", left)
	}
	if text := d.Find(".verdict").Text(); !strings.Contains(text, "before the change") {
		t.Errorf("%q", text)
	}
	if w := send("", "specification: x\nkind: pl\ncolour: red\n"); w.Code != http.StatusBadRequest || !strings.Contains(w.Header().Get("Content-Type"), mediaProblem) || !strings.Contains(w.Body.String(), "line 3") {
		t.Errorf("a faulty document: %d %s", w.Code, w.Body)
	}
	escaped := strings.Replace(fixtureSpec, "axis: W", "axis: W.1", 1)
	escaped = strings.Replace(escaped, "sellable: [W1, W2]", "sellable: all", 1)
	if d = shown(send("", escaped)); d.Find("svg.binplot script").Length() > 0 {
		t.Error("a script in the picture")
	}
}

func TestDensityIsDrawn(t *testing.T) {
	t.Parallel()
	f := setup(t)
	page := do(f, request("GET", "/bins/harbour-blue", ""))
	d, err := goquery.NewDocumentFromReader(page.Body)
	if err != nil || page.Code != http.StatusOK {
		t.Fatalf("%d %v", page.Code, err)
	}
	address, ok := d.Find("svg.binplot image").First().Attr("href")
	if !ok {
		t.Fatal("no picture of the dies behind the cells")
	}
	w := do(f, request("GET", address, ""))
	img, err := png.Decode(w.Body)
	if err != nil {
		t.Fatalf("%d: %v", w.Code, err)
	}
	inked := 0
	for y := range img.Bounds().Dy() {
		for x := range img.Bounds().Dx() {
			if _, _, _, a := img.At(x, y).RGBA(); a > 0 {
				inked++
			}
		}
	}
	if inked == 0 {
		t.Error("the picture of the dies is empty")
	}
	if again := do(f, request("GET", address, "", "If-None-Match", w.Header().Get("ETag"))); again.Code != http.StatusNotModified {
		t.Errorf("asked again: %d", again.Code)
	}
	for _, bad := range []string{"", "?x=cie_x&space=xy&box=0,1,0,1&size=10,10&measurements=1", "?x=cie_x&space=own&box=0,1,0&size=10,10&measurements=1",
		"?x=cie_x&space=own&box=0,1,0,NaN&size=10,10&measurements=1", "?x=cie_x&space=own&box=0,1,0,1&size=10,99999&measurements=1", "?x=cie_x&space=own&box=0,1,0,1&size=10,10&measurements=x"} {
		if w := do(f, request("GET", "/bins/density.png"+bad, "")); w.Code != http.StatusBadRequest {
			t.Errorf("%q: %d", bad, w.Code)
		}
	}
}

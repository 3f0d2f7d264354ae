package api

import (
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"

	"github.com/PuerkitoBio/goquery"
	"github.com/labstack/echo/v4"

	"epitally/analytics"
)

func TestBadRequestsAreRefusedWithTheirPlace(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	one := fmt.Sprintf("/api/v1/measurements/%d", f.id)
	for _, c := range []struct {
		target string
		status int
		key    string // of the fault; "" = no fault inside
		says   string // part of the detail
	}{
		{"/api/v1/wafers?limit=0", 400, "limit", "use 1 to 500"},
		{"/api/v1/wafers?limit=ten", 400, "limit", `"ten" is not a whole number`},
		{"/api/v1/wafers?limit=501", 400, "limit", "501 is out of range"},
		{"/api/v1/wafers?limit=99999999999999999999", 400, "limit", "use 1 to 500"},
		{"/api/v1/wafers?state=blue", 400, "state", "on colour, short"},
		{"/api/v1/wafers?lot=a&lot=b", 400, "lot", "give it once"},
		{"/api/v1/wafers?q=%00", 400, "q", "control characters"},
		{"/api/v1/wafers?q=%ff", 400, "q", "UTF-8"},
		{"/api/v1/wafers?q=" + strings.Repeat("a", 301), 400, "q", "at most 300"},
		{"/api/v1/wafers?q=%zz", 400, "", "percent-encoded"},
		{"/api/v1/wafers?cursor=nonsense", 400, "", "cursor"},
		{"/api/v1/wafers?format=xml", 400, "format", "json, csv"},
		{"/api/v1/wafers/none", 404, "", `no wafer "none"`},
		{"/api/v1/measurements/0", 400, "id", "use 1 or more"},
		{"/api/v1/measurements/x", 400, "id", "whole number"},
		{"/api/v1/measurements/999", 404, "", "no measurement 999"},
		{"/api/v1/measurements/999/summaries", 404, "", "no measurement 999"},
		{"/api/v1/measurements/999/tallies", 404, "", "no measurement 999"},
		{one + "/tally", 400, "specification", "is needed"},
		{one + "/tally?specification=none", 404, "", `no specification "none"`},
		{one + "/bins?specification=harbour-blue&version=7", 404, "", "no version 7"},
		{one + "/planes/fwhm_nm", 404, "", `no quantity "fwhm_nm"`},
		{one + "/dies?quantities=fwhm_nm", 404, "", `no quantity "fwhm_nm"`},
		{one + "/dies?quantities=" + voltage + "," + voltage, 400, "quantities", "twice"},
		{one + "/dies/99/0", 404, "", "no die (99, 0)"},
		{one + "/dies/40000/0", 400, "x", "out of range"},
		{one + "/dies/0/0?version=1", 400, "version", "specification=NAME"},
		{one + "/map.png", 400, "quantity", "either"},
		{one + "/map.png?quantity=" + voltage + "&specification=harbour-blue", 400, "quantity", "either"},
		{one + "/map.png?quantity=" + voltage + "&size=5000", 400, "size", "32 to 4096"},
		{one + "/map.png?quantity=" + voltage + "&scale=deviation", 400, "scale", "no target"},
		{one + "/map.png?quantity=" + voltage + "&version=1", 400, "version", "specification"},
		{one + "/map.png?specification=harbour-blue&scale=magnitude", 400, "scale", "bins"},
		{one + "/small-map.png", 400, "quantity", "is needed"},
		{one + "/small-map.png?quantity=fwhm_nm", 404, "", "fwhm_nm"},
		{"/api/v1/grids/zz", 400, "", "SHA-256"},
		{"/api/v1/grids/" + strings.Repeat("0", 64), 404, "", "no die grid"},
		{"/api/v1/specifications/none", 404, "", "no specification"},
		{"/api/v1/specifications/harbour-blue/versions/2", 404, "", "no version 2"},
		{"/api/v1/runs?limit=1001", 400, "limit", "1 to 1000"},
		{"/api/v1/sources?state=lost", 400, "state", "waiting, reading"},
		{"/api/v1/sources?cursor=nonsense", 400, "", "cursor"},
		{"/api/v1/sources/999", 404, "", "no source 999"},
	} {
		p := k.problem(t, request("GET", c.target, ""), c.status)
		key := ""
		if len(p.Errors) > 0 {
			key = p.Errors[0].Key
		}
		if key != c.key || !strings.Contains(p.Detail, c.says) {
			t.Errorf("%s: key %q, detail %q; want key %q and %q", c.target, key, p.Detail, c.key, c.says)
		}
	}
}

func TestWhatIsNotThereIsAProblem(t *testing.T) {
	t.Parallel()
	f := setup(t)
	p := problemIn(t, do(f, request("GET", "/api/v1/nothing", "")), http.StatusNotFound)
	if p.Instance != "/api/v1/nothing" || !strings.Contains(p.Detail, "openapi.json") {
		t.Errorf("%+v", p)
	}
	w := do(f, request("DELETE", "/api/v1/wafers", ""))
	p = problemIn(t, w, http.StatusMethodNotAllowed)
	if !strings.Contains(w.Header().Get("Allow"), "GET") || !strings.Contains(p.Detail, "GET") {
		t.Errorf("Allow %q, detail %q", w.Header().Get("Allow"), p.Detail)
	}
}

func TestPagesAnswerErrorsAsPages(t *testing.T) {
	t.Parallel()
	f := setup(t)
	w := do(f, request("GET", "/no/such/<b>page</b>", ""))
	doc, err := goquery.NewDocumentFromReader(w.Body)
	if err != nil || w.Code != http.StatusNotFound || !strings.HasPrefix(w.Header().Get("Content-Type"), "text/html") {
		t.Fatalf("%d %s %v", w.Code, w.Header().Get("Content-Type"), err)
	}
	if !strings.Contains(doc.Find("title").Text(), "404") || doc.Find("main b").Length() != 0 {
		t.Errorf("title %q; elements of the address in the page: %d", doc.Find("title").Text(), doc.Find("main b").Length())
	}
}

// withRoute adds a route that fails, to a server of its own.
func withRoute(t *testing.T, log io.Writer, h echo.HandlerFunc) *Server {
	t.Helper()
	s := newServer(t, setup(t).store, slog.New(slog.NewTextHandler(log, nil)))
	s.echo.GET("/api/v1/failing", h)
	return s
}

func TestInternalErrorsAreLoggedAndNotTold(t *testing.T) {
	t.Parallel()
	for name, h := range map[string]echo.HandlerFunc{
		"error": func(echo.Context) error { return errors.New("secret detail") },
		"panic": func(echo.Context) error { panic("secret detail") },
	} {
		var log strings.Builder
		w := do(withRoute(t, &log, h), request("GET", "/api/v1/failing", "", "X-Request-Id", "mine-7"))
		p := problemIn(t, w, http.StatusInternalServerError)
		if strings.Contains(w.Body.String(), "secret") || p.RequestID != "mine-7" || w.Header().Get("X-Request-Id") != "mine-7" {
			t.Errorf("%s: %s", name, w.Body)
		}
		if !strings.Contains(log.String(), "secret detail") || !strings.Contains(log.String(), "request_id=mine-7") || !strings.Contains(log.String(), "status=500") {
			t.Errorf("%s: the log does not tell: %s", name, log.String())
		}
	}
}

// A reader must be able to tell an answer that broke off from a whole one.
func TestAnAnswerThatBreaksOffIsCut(t *testing.T) {
	t.Parallel()
	s := withRoute(t, io.Discard, func(c echo.Context) error {
		c.Response().Header().Set("Content-Type", mediaCSV)
		_, _ = io.WriteString(c.Response(), strings.Repeat("1,2\n", 1000))
		return fmt.Errorf("the database went away: %w", analytics.ErrUnavailable)
	})
	server := httptest.NewServer(s)
	defer server.Close()
	for _, coding := range []string{"identity", "gzip"} {
		r, err := http.NewRequestWithContext(t.Context(), "GET", server.URL+"/api/v1/failing", nil)
		if err != nil {
			t.Fatal(err)
		}
		r.Header.Set("Accept-Encoding", coding)
		answer, err := server.Client().Do(r)
		if err == nil {
			_, err = io.ReadAll(answer.Body)
			answer.Body.Close()
		}
		if err == nil {
			t.Errorf("%s: the broken answer reads as whole", coding)
		}
	}
}

func TestErrorKindsHaveTheirStatus(t *testing.T) {
	t.Parallel()
	for kind, want := range map[error]int{analytics.ErrNotFound: 404, analytics.ErrInvalid: 400, analytics.ErrConflict: 409, analytics.ErrDuplicate: 409,
		analytics.ErrTooLarge: 413, analytics.ErrUnavailable: 503, &analytics.Fault{Problem: "x"}: 400, &analytics.Fault{Problem: "x", Kind: analytics.ErrTooLarge}: 413,
		io.ErrUnexpectedEOF: 500} {
		if got := statusOf(fmt.Errorf("wrapped: %w", kind)); got != want {
			t.Errorf("%v: %d, want %d", kind, got, want)
		}
	}
	if got := withoutCause(fmt.Errorf("wafer x: %w: %w", analytics.ErrNotFound, errors.New("no rows"))); got != "wafer x: not found" {
		t.Errorf("%q; the driver's words must not be told", got)
	}
}

func TestWithoutADatabaseOnlyHealthAnswers(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	f.store.Close()
	k.get(t, "/healthz")
	w := k.call(t, request("GET", "/readyz", ""))
	if problemIn(t, w, http.StatusServiceUnavailable); w.Header().Get("Retry-After") == "" {
		t.Error("no Retry-After")
	}
}

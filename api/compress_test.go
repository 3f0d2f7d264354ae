package api

import (
	"bytes"
	"fmt"
	"io"
	"net/http/httptest"
	"strings"
	"testing"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
)

// plain undoes the compression of an answer; nil when that fails.
func plain(t *testing.T, w *httptest.ResponseRecorder) []byte {
	t.Helper()
	var in io.Reader = w.Body
	var err error
	switch coding := w.Header().Get("Content-Encoding"); coding {
	case "zstd":
		var d *zstd.Decoder
		if d, err = zstd.NewReader(in); err == nil {
			defer d.Close()
			in = d
		}
	case "gzip":
		in, err = gzip.NewReader(in)
	case "":
	default:
		err = fmt.Errorf("Content-Encoding %q", coding)
	}
	var b []byte
	if err == nil {
		b, err = io.ReadAll(in)
	}
	if err != nil {
		t.Error(err) // not Fatal: called from goroutines too
		return nil
	}
	return b
}

func TestAnswersAreCompressedByWhatTheReaderTakes(t *testing.T) {
	t.Parallel()
	f := setup(t)
	big := fmt.Sprintf("/api/v1/measurements/%d/dies", f.id)
	want := do(f, request("GET", big, "")).Body.Bytes()
	for accept, coding := range map[string]string{"": "", "identity": "", "br": "", "gzip": "gzip", "zstd": "zstd", "gzip, deflate, br, zstd": "zstd",
		"gzip;q=1, zstd;q=0.5": "gzip", "zstd;q=0": "", "gzip;q=0, *": "zstd", "GZIP": "gzip", "gzip;q=nonsense": ""} {
		w := do(f, request("GET", big, "", "Accept-Encoding", accept))
		if got := w.Header().Get("Content-Encoding"); got != coding {
			t.Errorf("Accept-Encoding %q: %q, want %q", accept, got, coding)
		}
		small := w.Body.Len() < len(want)
		if got := plain(t, w); !bytes.Equal(got, want) || small != (coding != "") {
			t.Errorf("Accept-Encoding %q: %d bytes, another answer than the plain one", accept, len(got))
		}
		if vary := strings.Join(w.Header().Values("Vary"), ", "); !strings.Contains(vary, "Accept-Encoding") {
			t.Errorf("Vary %q", vary)
		}
	}
}

func TestCompressedPlaneKeepsItsTagWeakly(t *testing.T) {
	t.Parallel()
	f := setup(t)
	m := probeOf(t, "K-2", noon, square(40), fixtureLayout())
	at := fmt.Sprintf("/api/v1/measurements/%d/planes/%s", f.put(t, m), dominant)
	whole := do(f, request("GET", at, ""))
	w := do(f, request("GET", at, "", "Accept-Encoding", "zstd"))
	if w.Header().Get("ETag") != "W/"+whole.Header().Get("ETag") || w.Header().Get("Content-Length") != "" {
		t.Errorf("ETag %q, plain %q; Content-Length %q", w.Header().Get("ETag"), whole.Header().Get("ETag"), w.Header().Get("Content-Length"))
	}
	if !bytes.Equal(plain(t, w), whole.Body.Bytes()) {
		t.Error("another plane")
	}
	if again := do(f, request("GET", at, "", "If-None-Match", w.Header().Get("ETag"))); again.Code != 304 {
		t.Errorf("%d for the weak ETag", again.Code)
	}
}

func TestTinyAnswersAndProblemsStayPlain(t *testing.T) {
	t.Parallel()
	f := setup(t)
	for _, target := range []string{"/healthz", "/api/v1/wafers/none"} {
		if w := do(f, request("GET", target, "", "Accept-Encoding", "zstd")); w.Header().Get("Content-Encoding") != "" || w.Body.Len() == 0 {
			t.Errorf("%s: %d bytes as %q", target, w.Body.Len(), w.Header().Get("Content-Encoding"))
		}
	}
}

func TestFormatFollowsAcceptUnlessNamed(t *testing.T) {
	t.Parallel()
	f := setup(t)
	for accept, want := range map[string]string{"": mediaJSON, "*/*": mediaJSON, "text/csv": mediaCSV, "text/*": mediaCSV, "application/xml": mediaJSON,
		"text/csv;q=0.5, application/json": mediaJSON, "application/json;q=0, */*": mediaCSV, "text/html,application/xhtml+xml,*/*;q=0.8": mediaJSON} {
		if got := do(f, request("GET", "/api/v1/quantities", "", "Accept", accept)).Header().Get("Content-Type"); got != want {
			t.Errorf("Accept %q: %s, want %s", accept, got, want)
		}
	}
	if got := do(f, request("GET", "/api/v1/quantities?format=json", "", "Accept", "text/csv")).Header().Get("Content-Type"); got != mediaJSON {
		t.Errorf("format=json under Accept: text/csv: %s", got)
	}
}

func TestEveryAnswerIsGuarded(t *testing.T) {
	t.Parallel()
	f := setup(t)
	for _, target := range []string{"/healthz", "/api/v1/wafers", "/api/v1/none", "/none", "/bins"} {
		h := do(f, request("GET", target, "")).Header()
		if h.Get("Content-Security-Policy") != policy || h.Get("X-Content-Type-Options") != "nosniff" || h.Get("Referrer-Policy") != "same-origin" || h.Get("X-Request-Id") != "r-1" {
			t.Errorf("%s: %v", target, h)
		}
	}
}

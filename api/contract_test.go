package api

import (
	"bytes"
	"encoding/json"
	"io"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"

	"github.com/getkin/kin-openapi/openapi3"
	"github.com/getkin/kin-openapi/openapi3filter"
	"github.com/getkin/kin-openapi/routers"
	"github.com/getkin/kin-openapi/routers/legacy"
)

// contract holds answers to the OpenAPI document that the server itself serves.
type contract struct {
	router routers.Router
	h      http.Handler
}

func newContract(t testing.TB, h http.Handler) *contract {
	t.Helper()
	w := do(h, request("GET", "/api/v1/openapi.json", ""))
	doc, err := openapi3.NewLoader().LoadFromData(w.Body.Bytes())
	if err != nil {
		t.Fatal(err)
	}
	if err := doc.Validate(t.Context()); err != nil {
		t.Fatal(err)
	}
	// Clients must take new keys; these tests must not, or a key could be sent that
	// the document does not tell of.
	closed := false
	for _, schema := range doc.Components.Schemas {
		if len(schema.Value.Properties) > 0 {
			schema.Value.AdditionalProperties = openapi3.AdditionalProperties{Has: &closed}
		}
	}
	router, err := legacy.NewRouter(doc)
	if err != nil {
		t.Fatal(err)
	}
	return &contract{router, h}
}

// asText decodes bodies that the document only says are text or bytes.
func asText(body io.Reader, _ http.Header, _ *openapi3.SchemaRef, _ openapi3filter.EncodingFn) (any, error) {
	b, err := io.ReadAll(body)
	return string(b), err
}

func init() {
	for _, media := range append([]string{"text/csv", mediaPNG, mediaPlane, mediaGrid}, documentMedia...) {
		openapi3filter.RegisterBodyDecoder(media, asText)
	}
}

// call answers a request and holds the answer to the document. The request is
// held to it too when the answer is a success.
func (k *contract) call(t testing.TB, r *http.Request) *httptest.ResponseRecorder {
	t.Helper()
	body, err := io.ReadAll(r.Body)
	if err != nil {
		t.Fatal(err)
	}
	r.Body = io.NopCloser(bytes.NewReader(body))
	w := do(k.h, r)
	r.Body = io.NopCloser(bytes.NewReader(body))
	route, params, err := k.router.FindRoute(r)
	if err != nil {
		t.Fatalf("%s %s is not in the document: %v", r.Method, r.URL, err)
	}
	input := &openapi3filter.RequestValidationInput{Request: r, PathParams: params, Route: route,
		Options: &openapi3filter.Options{IncludeResponseStatus: true}}
	if w.Code < 300 {
		if err := openapi3filter.ValidateRequest(t.Context(), input); err != nil {
			t.Errorf("%s %s: accepted against the document: %v", r.Method, r.URL, err)
		}
	}
	answered := &openapi3filter.ResponseValidationInput{RequestValidationInput: input, Status: w.Code, Header: w.Header(),
		Body: io.NopCloser(bytes.NewReader(w.Body.Bytes())), Options: input.Options}
	if err := openapi3filter.ValidateResponse(t.Context(), answered); err != nil {
		t.Errorf("%s %s: the answer breaks the document: %v", r.Method, r.URL, err)
	}
	return w
}

// get is call for GET that must succeed.
func (k *contract) get(t testing.TB, target string, header ...string) *httptest.ResponseRecorder {
	t.Helper()
	w := k.call(t, request("GET", target, "", header...))
	if w.Code != http.StatusOK {
		t.Fatalf("GET %s: %d %s", target, w.Code, w.Body)
	}
	return w
}

// problem is call for a request that must be refused with status; it gives the
// problem.
func (k *contract) problem(t testing.TB, r *http.Request, status int) problemOut {
	t.Helper()
	return problemIn(t, k.call(t, r), status)
}

func problemIn(t testing.TB, w *httptest.ResponseRecorder, status int) problemOut {
	t.Helper()
	var p problemOut
	if w.Code != status || w.Header().Get("Content-Type") != mediaProblem {
		t.Fatalf("%d %s, want a problem of %d: %s", w.Code, w.Header().Get("Content-Type"), status, w.Body)
	}
	if err := json.Unmarshal(w.Body.Bytes(), &p); err != nil {
		t.Fatal(err)
	}
	if p.Status != status || p.Detail == "" || p.RequestID == "" || strings.Contains(p.Detail, "SQLSTATE") {
		t.Errorf("problem %+v", p)
	}
	return p
}

// decoded is the JSON of an answer.
func decoded[T any](t testing.TB, w *httptest.ResponseRecorder) T {
	t.Helper()
	var v T
	if err := json.Unmarshal(w.Body.Bytes(), &v); err != nil {
		t.Fatalf("%v: %.200s", err, w.Body)
	}
	return v
}

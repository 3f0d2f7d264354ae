package api

import (
	"net/http"
	"slices"
	"strings"
	"testing"
)

func postSpec(document string, header ...string) *http.Request {
	return request("POST", "/api/v1/specifications", document, append([]string{"Content-Type", mediaYAML}, header...)...)
}

func TestStoringSpecifications(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	second := strings.Replace(fixtureSpec, "457.5]", "458]", 1)
	for _, step := range []struct {
		name, document string
		status         int
		version        int
	}{
		{"the latest again", fixtureSpec, http.StatusOK, 1},
		{"a new version", second, http.StatusCreated, 2},
		{"that again", second, http.StatusOK, 2},
		{"back to the first", fixtureSpec, http.StatusCreated, 3},
		{"and to the second", second, http.StatusCreated, 4},
	} {
		w := k.call(t, postSpec(step.document))
		got := decoded[specDetailOut](t, w)
		if w.Code != step.status || got.Version != step.version || !got.Latest || got.Document != step.document || len(got.Versions) != step.version {
			t.Fatalf("%s: %d, version %d of %v; want %d and %d", step.name, w.Code, got.Version, got.Versions, step.status, step.version)
		}
		at := w.Header().Get("Location")
		if kept := k.get(t, at, "Accept", mediaYAML); kept.Body.String() != step.document {
			t.Errorf("%s: the document at %s is not the one sent", step.name, at)
		}
	}
	got := decoded[specDetailOut](t, k.get(t, "/api/v1/specifications/harbour-blue"))
	if !slices.Equal(got.Quantities, []string{dominant, voltage}) || got.Cells[0] != (cellOut{"W1", "sellable"}) || !slices.Equal(got.Versions, []int{4, 3, 2, 1}) {
		t.Errorf("%v %v %v", got.Quantities, got.Cells, got.Versions)
	}
	sources := decoded[sourcesOut](t, k.get(t, "/api/v1/sources"))
	if src := sources.Rows[0]; src.Format != "specification" || !strings.Contains(src.Name, "harbour-blue") || !src.SeenAt.Equal(noon) {
		t.Errorf("newest source: %+v; want the specification's", src)
	}
}

func TestBadDocumentsAreRefused(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	p := k.problem(t, postSpec("specification: x\nkind: pl\ncolour: red\n"), http.StatusBadRequest)
	if len(p.Errors) != 1 || p.Errors[0].Line != 3 || p.Errors[0].Column != 1 || p.Errors[0].Key != "colour" {
		t.Errorf("an unknown key on line 3: %+v", p.Errors)
	}
	k.problem(t, postSpec(""), http.StatusBadRequest)
	k.problem(t, postSpec(strings.Repeat("#", maxBody+1)), http.StatusRequestEntityTooLarge)
	chunked := postSpec(strings.Repeat("#", maxBody+1))
	chunked.ContentLength = -1
	k.problem(t, chunked, http.StatusRequestEntityTooLarge)
	k.problem(t, postSpec(fixtureSpec, "Content-Encoding", "gzip"), http.StatusUnsupportedMediaType)
	for _, media := range []string{"", "text/plain", "application/x-www-form-urlencoded", "multipart/form-data"} {
		p := k.problem(t, postSpec(fixtureSpec, "Content-Type", media), http.StatusUnsupportedMediaType)
		if !strings.Contains(p.Detail, mediaYAML) {
			t.Errorf("%q: %q does not say what to send", media, p.Detail)
		}
	}
	k.problem(t, postSpec(fixtureSpec, "Sec-Fetch-Site", "cross-site"), http.StatusForbidden)
	if got := decoded[specDetailOut](t, k.get(t, "/api/v1/specifications/harbour-blue")); got.Version != 1 {
		t.Errorf("version %d; a refused document was stored", got.Version)
	}
}

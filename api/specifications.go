package api

import (
	"errors"
	"fmt"
	"io"
	"mime"
	"net/http"
	"net/url"
	"slices"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/db"
)

type tableParams struct {
	Format string `query:"format" enum:"json,csv" doc:"overrides the Accept header"`
}

type specsOut struct {
	Rows []db.Spec `json:"rows"`
}

func wireSpec(sp db.Spec) db.Spec {
	sp.Products = full(sp.Products)
	return sp
}

func (s *Server) listSpecs(c echo.Context, p tableParams) error {
	all, err := s.store.Specs(c.Request().Context())
	if err != nil {
		return err
	}
	return answerTable(c, p.Format, specsOut{mapped(all, wireSpec)}, func() table {
		t := table{columns: []string{"specification", "version", "title", "kind", "products", "stored_at"}}
		for _, sp := range all {
			t.add(sp.Name, sp.Version, sp.Title, sp.Kind, strings.Join(sp.Products, " "), sp.StoredAt.In(s.zone))
		}
		return t
	})
}

// specDetailOut is one version with what it means.
type specDetailOut struct {
	db.Spec
	Versions   []int     `json:"versions" doc:"every version there is, newest first"`
	Quantities []string  `json:"quantities" doc:"what a measurement needs to be binned under it"`
	Cells      []cellOut `json:"cells" doc:"what the codes of its bins stand for; the code is the index"`
}

// specFormats are the forms of one specification: JSON, or its document as given.
type specFormats struct {
	Format string `query:"format" enum:"json,yaml" doc:"overrides the Accept header"`
}

type specParams struct {
	specFormats
	Name string `path:"name" doc:"the specification's name"`
}

func (s *Server) getSpec(c echo.Context, p specParams) error {
	sp, err := s.specNamed(c.Request().Context(), p.Name, 0)
	if err != nil {
		return err
	}
	return s.answerSpec(c, http.StatusOK, chooseFormat(c, p.Format, "json", "yaml"), sp)
}

type specVersionParams struct {
	specParams
	Version int `path:"version" min:"1" max:"2000000000" doc:"counts from 1"`
}

func (s *Server) getSpecVersion(c echo.Context, p specVersionParams) error {
	sp, err := s.specNamed(c.Request().Context(), p.Name, p.Version)
	if err != nil {
		return err
	}
	format := chooseFormat(c, p.Format, "json", "yaml")
	// The JSON also tells of other versions, so only the document may be kept.
	keep, parts := askAgain, []any{sp.ID, sp.Version, sp.StoredAt.UnixNano(), format}
	if format == "yaml" {
		keep = keepNumber
	} else {
		latest, err := s.specNamed(c.Request().Context(), p.Name, 0)
		if err != nil {
			return err
		}
		parts = append(parts, latest.ID)
	}
	if unchanged(c, tagOf(parts...), keep) {
		return notModified(c)
	}
	return s.answerSpec(c, http.StatusOK, format, sp)
}

func (s *Server) answerSpec(c echo.Context, status int, format string, sp *db.Spec) error {
	if format == "yaml" {
		return c.Blob(status, mediaYAML, []byte(sp.Document))
	}
	parsed, err := s.specs.parse(sp)
	if err != nil {
		return err
	}
	versions, err := s.store.SpecVersions(c.Request().Context(), sp.Name)
	if err != nil {
		return err
	}
	return answerJSON(c, status, mediaJSON, specDetailOut{Spec: wireSpec(*sp), Versions: mapped(versions, func(v db.Spec) int { return v.Version }),
		Quantities: parsed.Quantities(), Cells: mapped(parsed.Cells(), wireCell)})
}

type publishParams struct {
	Author string `query:"author" doc:"who publishes the version"`
	Reason string `query:"reason" doc:"why"`
}

// storeSpec stores the document of the body as a new version. The document that
// is the latest version already is answered with 200 and that version.
func (s *Server) storeSpec(c echo.Context, p publishParams) error {
	document, err := readDocument(c)
	if err != nil {
		return err
	}
	parsed, err := binning.Parse(document)
	if err != nil {
		return err
	}
	stored, fresh, err := s.putSpec(c, parsed, document, p)
	if err != nil {
		return err
	}
	status := http.StatusOK
	if fresh {
		status = http.StatusCreated
	}
	c.Response().Header().Set("Location", "/api/v1/specifications/"+url.PathEscape(stored.Name)+"/versions/"+strconv.Itoa(stored.Version))
	return s.answerSpec(c, status, "json", stored)
}

// putSpec stores a specification as a load of its own, so that the list of
// sources tells where it came from.
func (s *Server) putSpec(c echo.Context, parsed *binning.Spec, document []byte, p publishParams) (stored *db.Spec, fresh bool, err error) {
	ctx := c.Request().Context()
	before, err := s.store.Spec(ctx, parsed.Name, 0)
	switch {
	case errors.Is(err, analytics.ErrNotFound):
	case err != nil:
		return nil, false, err
	case before.Document == string(document):
		return before, false, nil
	}
	load, err := s.store.BeginLoad(ctx)
	if err != nil {
		return nil, false, err
	}
	defer load.Rollback(ctx)
	put, err := load.PutSpec(ctx, db.NewSpec(parsed, string(document), p.Author, p.Reason))
	if err != nil {
		return nil, false, err
	}
	hash := hexSHA256(document)
	switch _, err := s.store.SourceByHash(ctx, hash); {
	case err == nil:
		// Going back to an earlier version's document is no second load of a file,
		// which the hash is there to refuse.
		hash = ""
	case !errors.Is(err, analytics.ErrNotFound):
		return nil, false, err
	}
	now := s.now()
	if _, err = load.Commit(ctx, db.Source{Name: "API: specification " + parsed.Name, SHA256: hash, Bytes: int64(len(document)),
		Format: "specification", State: db.SourceStored, SeenAt: now, StoredAt: &now, Offset: -1}); err != nil {
		return nil, false, err
	}
	// Read again: what the store says of it now is what is answered.
	stored, err = s.store.Spec(ctx, put.Name, put.Version)
	return stored, true, err
}

// documentMedia are the types a YAML document is sent as. They are not among
// those that a page of another site may send unasked.
var documentMedia = []string{mediaYAML, "text/yaml", "application/x-yaml", "text/x-yaml"}

// readDocument reads a YAML body.
func readDocument(c echo.Context) ([]byte, error) {
	r := c.Request()
	media, _, err := mime.ParseMediaType(r.Header.Get("Content-Type"))
	if err != nil || !slices.Contains(documentMedia, media) {
		return nil, echo.NewHTTPError(http.StatusUnsupportedMediaType, fmt.Sprintf("the body is sent as %q; send a YAML document as Content-Type: %s", r.Header.Get("Content-Type"), mediaYAML))
	}
	if coding := r.Header.Get("Content-Encoding"); coding != "" && coding != "identity" {
		return nil, echo.NewHTTPError(http.StatusUnsupportedMediaType, fmt.Sprintf("the body is encoded as %q; send it as it is", coding))
	}
	document, err := io.ReadAll(r.Body)
	var over *http.MaxBytesError
	switch {
	case errors.As(err, &over):
		return nil, fmt.Errorf("the body is over %d bytes: send a shorter document: %w", over.Limit, analytics.ErrTooLarge)
	case err != nil:
		return nil, fmt.Errorf("the body broke off (%v): send it again: %w", err, analytics.ErrInvalid)
	}
	return document, nil
}

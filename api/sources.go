package api

import (
	"crypto/sha256"
	"encoding/hex"
	"net/http"

	"github.com/labstack/echo/v4"

	"epitally/db"
)

func hexSHA256(b []byte) string {
	sum := sha256.Sum256(b)
	return hex.EncodeToString(sum[:])
}

type sourcesParams struct {
	tableParams
	State  string `query:"state" enum:"waiting,reading,stored,refused" doc:"only sources of this state"`
	Limit  int    `query:"limit" min:"1" max:"500" default:"50" doc:"sources per page"`
	Cursor string `query:"cursor" doc:"next of the page before"`
}

// sourceOut is db.Source as it is sent.
type sourceOut struct{ db.Source }

type sourcesOut struct {
	Rows []sourceOut `json:"rows"`
	Next string      `json:"next" doc:"cursor of the next page; empty at the end"`
}

func wireSource(src db.Source) sourceOut {
	src.Notices = full(src.Notices)
	return sourceOut{src}
}

func (s *Server) listSources(c echo.Context, p sourcesParams) error {
	rows, next, err := s.store.Sources(c.Request().Context(), p.State, p.Limit, p.Cursor)
	if err != nil {
		return err
	}
	linkNext(c, next)
	return answerTable(c, p.Format, sourcesOut{mapped(rows, wireSource), next}, func() table {
		t := table{columns: []string{"id", "name", "state", "format", "bytes", "sha256", "profile", "seen_at", "stored_at", "wafers", "dies",
			"reason", "line", "column", "offset"}}
		for _, src := range rows {
			t.add(src.ID, src.Name, src.State, src.Format, src.Bytes, src.SHA256, src.Profile, src.SeenAt.In(s.zone), inZone(src.StoredAt, s.zone),
				src.Wafers, src.Dies, src.Reason, src.Line, src.Column, src.Offset)
		}
		return t
	})
}

type sourceParams struct {
	ID int64 `path:"id" min:"1" doc:"the source's number"`
}

func (s *Server) getSource(c echo.Context, p sourceParams) error {
	src, err := s.store.Source(c.Request().Context(), p.ID)
	if err != nil {
		return missing(err, "there is no source %d: /api/v1/sources lists them", p.ID)
	}
	return answerJSON(c, http.StatusOK, mediaJSON, wireSource(*src))
}

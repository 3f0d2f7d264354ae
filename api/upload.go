package api

import (
	"context"
	"fmt"
	"io"
	"net/http"
	"time"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
)

// Receiver takes uploaded files where the scan of the drop folder finds them.
type Receiver interface {
	Receive(ctx context.Context, name string, r io.Reader, limit int64) (stored string, err error)
}

// Uploads says where uploaded files go.
type Uploads struct {
	To    Receiver
	Limit int64  // bytes of one file
	Scan  func() // is called when a file has come in; returns at once
}

// uploadPath is the one address whose body may be long.
const uploadPath = "/api/v1/sources"

// uploadTime is how long one upload may take.
const uploadTime = time.Hour

type uploadParams struct {
	Name string `query:"name" required:"true" doc:"the file's name"`
}

type uploadOut struct {
	Name string `json:"source" doc:"the name it has in the drop folder; its line on the Loads page bears it"`
}

// uploadSource streams the body into the drop folder.
func (s *Server) uploadSource(c echo.Context, p uploadParams) error {
	if s.uploads == nil {
		return fmt.Errorf("this server has no drop folder to take uploads: %w", analytics.ErrUnavailable)
	}
	// A tester's line may be slow; what the server allows requests is too short.
	_ = http.NewResponseController(c.Response()).SetReadDeadline(s.now().Add(uploadTime))
	stored, err := s.uploads.To.Receive(c.Request().Context(), p.Name, c.Request().Body, s.uploads.Limit)
	if err != nil {
		return err
	}
	s.uploads.Scan()
	return answerJSON(c, http.StatusAccepted, mediaJSON, uploadOut{stored})
}

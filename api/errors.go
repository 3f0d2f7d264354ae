package api

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net/http"
	"strings"
	"syscall"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
)

// statuses says which HTTP status an error kind is answered with. The first row
// that matches counts; what matches none is an internal error.
var statuses = []struct {
	kind   error
	status int
}{
	{analytics.ErrNotFound, http.StatusNotFound},
	{analytics.ErrTooLarge, http.StatusRequestEntityTooLarge},
	{analytics.ErrDuplicate, http.StatusConflict},
	{analytics.ErrConflict, http.StatusConflict},
	{analytics.ErrInvalid, http.StatusBadRequest},
	{analytics.ErrUnavailable, http.StatusServiceUnavailable},
	{context.DeadlineExceeded, http.StatusServiceUnavailable},
	{context.Canceled, http.StatusServiceUnavailable}, // ours, not the reader's: the server stops
}

// statusGone is logged when the reader went away before the answer; nothing is
// sent. No standard status says it; 499 is in common use.
const statusGone = 499

// retrySeconds is what a 503 asks the reader to wait.
const retrySeconds = "5"

// answerError is the one place where errors become answers.
func (s *Server) answerError(err error, c echo.Context) {
	if readerGone(err, c) {
		if !c.Response().Committed {
			c.Response().Status = statusGone
		}
		return
	}
	p := s.problemOf(err, c)
	if p.Status >= http.StatusInternalServerError {
		s.log.LogAttrs(c.Request().Context(), slog.LevelError, "request failed", slog.Any("error", err),
			slog.String("uri", c.Request().URL.RequestURI()), slog.String("request_id", requestID(c)))
	}
	if c.Response().Committed {
		// Part of the answer is out. Cutting the connection is the only way left
		// to tell the reader that it is not whole.
		panic(http.ErrAbortHandler)
	}
	h := c.Response().Header()
	for _, name := range []string{"Content-Disposition", "Content-Length", "ETag", "Link"} {
		h.Del(name)
	}
	h.Set("Cache-Control", "no-store")
	if p.Status == http.StatusServiceUnavailable {
		h.Set("Retry-After", retrySeconds)
	}
	if isPage(c.Request().URL.Path) {
		_ = c.HTMLBlob(p.Status, s.pages.Error(p.Status, p.Detail)) // a reader who went away is no fault of ours
		return
	}
	_ = answerJSON(c, p.Status, mediaProblem, p)
}

// readerGone says whether the error is only that nobody reads the answer.
func readerGone(err error, c echo.Context) bool {
	if c.Request().Context().Err() != nil {
		return true
	}
	// The connection of the reader, since the store's is analytics.ErrUnavailable.
	return !errors.Is(err, analytics.ErrUnavailable) && (errors.Is(err, syscall.EPIPE) || errors.Is(err, syscall.ECONNRESET))
}

func statusOf(err error) int {
	var he *echo.HTTPError
	if errors.As(err, &he) {
		return he.Code
	}
	for _, row := range statuses {
		if errors.Is(err, row.kind) {
			return row.status
		}
	}
	return http.StatusInternalServerError
}

// detailOf says what was wrong and what to do now. What went wrong inside the
// server is not told.
func detailOf(err error, status int, c echo.Context) string {
	var he *echo.HTTPError
	switch {
	case status == http.StatusServiceUnavailable:
		return "The database does not answer just now. Nothing is lost; try again in a few seconds."
	case status >= http.StatusInternalServerError:
		return fmt.Sprintf("The server could not answer. Nothing is lost; its log tells more under request id %s.", requestID(c))
	case errors.As(err, &he):
		return routingDetail(he, c)
	}
	return withoutCause(err)
}

// routingDetail words what the router refused.
func routingDetail(he *echo.HTTPError, c echo.Context) string {
	path := c.Request().URL.Path
	switch text, ok := he.Message.(string); {
	case he == echo.ErrNotFound && isPage(path):
		return fmt.Sprintf("There is no page %s.", path)
	case he == echo.ErrNotFound:
		return fmt.Sprintf("There is nothing at %s; /api/v1/openapi.json lists every address.", path)
	case he == echo.ErrMethodNotAllowed:
		return fmt.Sprintf("%s is not answered at %s; use %s.", c.Request().Method, path, c.Response().Header().Get("Allow"))
	case ok:
		return text
	}
	return http.StatusText(he.Code)
}

// withoutCause is the error's message up to the kind of package analytics that
// it wraps: what stands behind is the database driver's.
func withoutCause(err error) string {
	text := err.Error()
	for _, row := range statuses {
		if kind := row.kind.Error(); errors.Is(err, row.kind) {
			if before, _, ok := strings.Cut(text, kind); ok {
				return before + kind
			}
		}
	}
	return text
}

// invalidParam is a fault of the parameter called name.
func invalidParam(name, remedy, problem string, args ...any) error {
	return &analytics.Fault{Key: name, Problem: fmt.Sprintf(problem, args...), Remedy: remedy}
}

// missing words a not-found error of the store, and leaves other errors alone.
func missing(err error, format string, args ...any) error {
	if errors.Is(err, analytics.ErrNotFound) {
		return fmt.Errorf("%s: %w", fmt.Sprintf(format, args...), analytics.ErrNotFound)
	}
	return err
}

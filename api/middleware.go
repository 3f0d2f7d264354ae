package api

import (
	"context"
	"fmt"
	"log/slog"
	"net/http"
	"regexp"
	"runtime/debug"
	"strings"
	"time"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
)

// maxBody is the largest request body in bytes: a specification document's limit
// and a little more, so that its own message is the one that is read.
const maxBody = 1<<20 + 1<<12

const headerRequestID = "X-Request-Id"

var idRule = regexp.MustCompile(`^[A-Za-z0-9._-]{1,64}$`)

// policy lets a page load and connect to nothing but this server, run no inline
// script and sit in no frame.
const policy = "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; connect-src 'self'; " +
	"font-src 'self'; form-action 'self'; frame-ancestors 'none'; base-uri 'none'"

// headWriter drops the body of an answer to HEAD.
type headWriter struct{ http.ResponseWriter }

func (h headWriter) Write(b []byte) (int, error) { return len(b), nil }

type headKey struct{}

// headAsGet makes a GET of HEAD whose answer's body is dropped, so that every
// address that answers GET answers HEAD. It comes before routing.
func headAsGet(w http.ResponseWriter, r *http.Request) (http.ResponseWriter, *http.Request) {
	if r.Method != http.MethodHead {
		return w, r
	}
	get := r.WithContext(context.WithValue(r.Context(), headKey{}, true))
	get.Method = http.MethodGet
	return headWriter{w}, get
}

func isHead(c echo.Context) bool { return c.Request().Context().Value(headKey{}) != nil }

// identify gives every request an id: its own when that is well formed.
func (s *Server) identify(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) error {
		id := c.Request().Header.Get(headerRequestID)
		if !idRule.MatchString(id) {
			id = s.newID()
		}
		c.Response().Header().Set(headerRequestID, id)
		return next(c)
	}
}

func requestID(c echo.Context) string { return c.Response().Header().Get(headerRequestID) }

// logAccess writes one line per request. Health checks are logged at debug level.
func (s *Server) logAccess(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) error {
		begun := s.now()
		defer func() {
			r, level := c.Request(), slog.LevelInfo
			if r.URL.Path == "/healthz" || r.URL.Path == "/readyz" {
				level = slog.LevelDebug
			}
			method := r.Method
			if isHead(c) {
				method = http.MethodHead
			}
			s.log.LogAttrs(r.Context(), level, "request",
				slog.String("method", method), slog.String("uri", r.URL.RequestURI()), slog.Int("status", c.Response().Status),
				slog.Int64("bytes", c.Response().Size), slog.Float64("ms", float64(s.now().Sub(begun))/float64(time.Millisecond)),
				slog.String("remote", r.RemoteAddr), slog.String("request_id", requestID(c)))
		}()
		return next(c)
	}
}

func secure(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) error {
		h := c.Response().Header()
		h.Set("Content-Security-Policy", policy)
		h.Set("X-Content-Type-Options", "nosniff")
		h.Set("Referrer-Policy", "same-origin")
		h.Set("Cache-Control", "no-cache")
		return next(c)
	}
}

// catch answers the errors and the panics of everything inside it, so that they
// pass through compression and the log like any answer.
func (s *Server) catch(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) (err error) {
		defer func() {
			if p := recover(); p != nil {
				if p == http.ErrAbortHandler {
					panic(p)
				}
				err = fmt.Errorf("panic: %v\n%s", p, debug.Stack())
			}
			if err != nil {
				s.answerError(err, c)
				err = nil
			}
		}()
		return next(c)
	}
}

// guard bounds the body and refuses what a page of another site sends.
func (s *Server) guard(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) error {
		r := c.Request()
		if err := s.crossOrigin.Check(r); err != nil {
			return echo.NewHTTPError(http.StatusForbidden, "this request comes from a page of another site; send it from this server's own pages or from a program")
		}
		limit := int64(maxBody)
		if s.uploads != nil && c.Path() == uploadPath {
			limit = s.uploads.Limit
		}
		if r.ContentLength > limit {
			return fmt.Errorf("the body has %d bytes; send at most %d: %w", r.ContentLength, limit, analytics.ErrTooLarge)
		}
		if r.Body != nil && r.Body != http.NoBody {
			r.Body = http.MaxBytesReader(c.Response(), r.Body, limit+1)
		}
		return next(c)
	}
}

// isPage says whether people rather than programs read what stands at path.
func isPage(path string) bool {
	return !strings.HasPrefix(path, "/api/") && path != "/api" && path != "/healthz" && path != "/readyz"
}

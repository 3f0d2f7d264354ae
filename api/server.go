package api

import (
	"crypto/rand"
	"errors"
	"fmt"
	"log/slog"
	"net/http"
	"time"

	"github.com/labstack/echo/v4"
	"github.com/prometheus/client_golang/prometheus"

	"epitally/db"
	"epitally/web"
)

// Config is what a Server needs.
type Config struct {
	Store     *db.Store
	Pages     *web.Pages
	Logger    *slog.Logger     // nil = none
	Now       func() time.Time // nil = the system's clock
	Zone      *time.Location   // the fab's; nil = UTC
	RequestID func() string    // names a request that bears no id of its own; nil = random
	Uploads   *Uploads         // nil = none are taken
	// Metrics takes and gives the server's figures at /metrics; nil = they are not served.
	Metrics    *prometheus.Registry
	DropFolder string // where the fab's files are dropped, for people; "" = not said
}

// Server answers HTTP requests. It holds *db.Store itself rather than an
// interface of its own: handlers use nearly every reading method of it.
type Server struct {
	echo    *echo.Echo
	store   *db.Store
	pages   *web.Pages
	log     *slog.Logger
	now     func() time.Time
	zone    *time.Location
	newID   func() string
	drop    string
	press   *compressor
	specs   specCache
	chosen  selections
	uploads *Uploads
	// document is the OpenAPI document, and documentTag its strong ETag.
	document    []byte
	documentTag string
	crossOrigin *http.CrossOriginProtection
}

// New makes a Server. Nothing listens yet: it is an http.Handler.
func New(c Config) (*Server, error) {
	if c.Store == nil || c.Pages == nil {
		return nil, errors.New("api: Store and Pages are needed")
	}
	s := &Server{store: c.Store, pages: c.Pages, log: c.Logger, now: c.Now, zone: c.Zone, newID: c.RequestID, drop: c.DropFolder, uploads: c.Uploads,
		press: newCompressor(), crossOrigin: http.NewCrossOriginProtection()}
	if s.log == nil {
		s.log = slog.New(slog.DiscardHandler)
	}
	if s.now == nil {
		s.now = time.Now
	}
	if s.zone == nil {
		s.zone = time.UTC
	}
	if s.newID == nil {
		s.newID = rand.Text
	}
	s.echo = echo.New()
	s.echo.HideBanner, s.echo.HidePort = true, true
	s.echo.HTTPErrorHandler = s.answerError
	s.echo.Use(s.identify, s.logAccess)
	if c.Metrics != nil {
		m, err := newRequestMetrics(c.Metrics)
		if err != nil {
			return nil, fmt.Errorf("api: %w", err)
		}
		s.echo.Use(m.observe(s.now))
	}
	s.echo.Use(secure, s.press.middleware, s.catch, s.guard)
	if err := s.registerRoutes(); err != nil {
		return nil, fmt.Errorf("api: %w", err)
	}
	s.registerPages(s.echo)
	if c.Metrics != nil {
		registerMetrics(s.echo, c.Metrics)
	}
	return s, nil
}

// ServeHTTP implements http.Handler.
func (s *Server) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	s.echo.ServeHTTP(headAsGet(w, r))
}

func (s *Server) registerRoutes() error {
	routes := s.routes()
	document, err := openAPI(routes)
	if err != nil {
		return err
	}
	s.document, s.documentTag = document, tagOf(string(document))
	for _, r := range routes {
		s.echo.Add(r.method, echoPath(r.path), r.handle)
	}
	return nil
}

package api

import (
	"net/http"
	"strconv"
	"time"

	"github.com/labstack/echo/v4"
	"github.com/prometheus/client_golang/prometheus"
	"github.com/prometheus/client_golang/prometheus/promhttp"
)

// requestMetrics times the requests by route, so that a wafer's name never becomes
// a label.
type requestMetrics struct {
	took *prometheus.HistogramVec
}

func newRequestMetrics(r prometheus.Registerer) (*requestMetrics, error) {
	m := &requestMetrics{took: prometheus.NewHistogramVec(prometheus.HistogramOpts{Name: "epitally_request_seconds",
		Help: "How long requests took, by route, method and status.", Buckets: []float64{0.001, 0.005, 0.02, 0.05, 0.1, 0.25, 0.5, 1, 5, 30}},
		[]string{"route", "method", "status"})}
	return m, r.Register(m.took)
}

// observe is the middleware.
func (m *requestMetrics) observe(now func() time.Time) echo.MiddlewareFunc {
	return func(next echo.HandlerFunc) echo.HandlerFunc {
		return func(c echo.Context) error {
			begun := now()
			err := next(c)
			route := c.Path()
			if route == "" {
				route = "none"
			}
			m.took.WithLabelValues(route, method(c.Request().Method), strconv.Itoa(c.Response().Status)).Observe(now().Sub(begun).Seconds())
			return err
		}
	}
}

// method keeps invented methods from becoming labels.
func method(name string) string {
	switch name {
	case http.MethodGet, http.MethodPost, http.MethodPut, http.MethodDelete, http.MethodHead, http.MethodOptions:
		return name
	}
	return "other"
}

// registerMetrics serves what is gathered in the text format of Prometheus.
func registerMetrics(e *echo.Echo, g prometheus.Gatherer) {
	e.GET("/metrics", echo.WrapHandler(promhttp.HandlerFor(g, promhttp.HandlerOpts{})))
}

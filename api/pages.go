package api

import (
	"bytes"
	"fmt"
	"net/http"
	"net/url"
	"strings"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/web"
)

// registerPages adds the pages, the charts' CSV and the assets.
func (s *Server) registerPages(e *echo.Echo) {
	e.GET("/", func(c echo.Context) error { return c.Redirect(http.StatusFound, "/wafers") })
	e.GET("/wafers", s.pageWafers)
	e.GET("/wafers/:wafer", s.pageWafer)
	e.GET("/wafers/:wafer/charts/:chart", s.pageWaferChart)
	e.GET("/bins", s.pageSpecs)
	e.GET("/bins/density.png", s.getDensity)
	e.GET("/bins/:spec", s.pageSpec)
	e.POST("/bins/:spec/trial", s.tryEdited)
	e.GET("/bins/:spec/yields.csv", s.pageSpecYields)
	e.GET("/loads", s.pageLoads)
	e.GET("/loads/:id", s.pageLoad)
	e.GET("/assets/*", echo.WrapHandler(s.pages.Assets()))
}

// render answers with a page, whole or not at all.
func (s *Server) render(c echo.Context, name string, page any) error {
	var b bytes.Buffer
	if err := s.pages.Render(&b, name, page); err != nil {
		return err
	}
	return c.HTMLBlob(http.StatusOK, b.Bytes())
}

// base fills what every page has beyond its finding.
func (s *Server) base(c echo.Context, b web.Base) web.Base {
	b.URL = c.Request().URL.RequestURI()
	b.MadeAt = web.Moment(s.now(), s.zone)
	return b
}

// answerChart answers with a chart's table.
func answerChart(c echo.Context, chart *web.Chart, name string) error {
	if chart == nil {
		return fmt.Errorf("there are no values to chart: %w", analytics.ErrNotFound)
	}
	var b bytes.Buffer
	if err := chart.Table.WriteCSV(&b); err != nil {
		return err
	}
	c.Response().Header().Set("Content-Disposition", "attachment; filename*=UTF-8''"+url.PathEscape(name))
	return c.Blob(http.StatusOK, "text/csv; charset=utf-8", b.Bytes())
}

// pathText is a path parameter with its escapes undone: echo matches on the raw
// path where there is one, and then leaves them in.
func pathText(c echo.Context, name string) string {
	text := c.Param(name)
	if c.Request().URL.RawPath == "" {
		return text
	}
	if plain, err := url.PathUnescape(text); err == nil {
		return plain
	}
	return text
}

// listURL is path with the parameters that are set.
func listURL(path string, pairs ...string) string {
	v := url.Values{}
	for i := 0; i+1 < len(pairs); i += 2 {
		if pairs[i+1] != "" {
			v.Set(pairs[i], pairs[i+1])
		}
	}
	if len(v) == 0 {
		return path
	}
	return path + "?" + v.Encode()
}

// queryText is a query parameter without blanks around it.
func queryText(c echo.Context, name string) string { return strings.TrimSpace(c.QueryParam(name)) }

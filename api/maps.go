package api

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"net/http"
	"slices"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/db"
	"epitally/web"
)

// paintVersion goes into the ETags of pictures; it counts up when the same
// numbers are painted differently.
const paintVersion = 1

type mapParams struct {
	measurementParams
	Quantity string `query:"quantity" doc:"the quantity to paint; give this or a specification"`
	Spec     string `query:"specification" doc:"paint the bins under this stored specification"`
	Version  int    `query:"version" min:"1" max:"2000000000" doc:"its version; else the latest"`
	Size     int    `query:"size" min:"32" max:"4096" default:"640" doc:"pixels along each side"`
	Theme    string `query:"theme" enum:"light,dark" default:"light" doc:"the ground it is painted on"`
	Scale    string `query:"scale" enum:"deviation,magnitude" doc:"deviation from the recipe's target, or the value itself; else as is usual for the quantity"`
}

func (s *Server) getMap(c echo.Context, p mapParams) error {
	ctx := c.Request().Context()
	switch {
	case (p.Quantity == "") == (p.Spec == ""):
		return invalidParam("quantity", "give either quantity=NAME or specification=NAME", "and specification say what to paint, and one of them is needed")
	case p.Spec == "" && p.Version > 0:
		return invalidParam("version", "add specification=NAME instead of quantity", "names a version of no specification")
	case p.Spec != "" && p.Scale != "":
		return invalidParam("scale", "leave it out", "does not apply to bins")
	}
	m, err := s.measurement(ctx, p.ID)
	if err != nil {
		return err
	}
	if p.Spec != "" {
		return s.binMap(c, p, m)
	}
	return s.quantityMap(c, p, m)
}

func (s *Server) binMap(c echo.Context, p mapParams, m *db.Measurement) error {
	ctx := c.Request().Context()
	spec, err := s.specNamed(ctx, p.Spec, p.Version)
	if err != nil {
		return err
	}
	if unchanged(c, mapTag(m, p, spec.ID, spec.Version, spec.StoredAt.UnixNano()), askAgain) {
		return notModified(c)
	}
	b, err := s.bin(ctx, m, spec)
	if err != nil {
		return err
	}
	return s.answerMap(c, m, web.MapPicture{Codes: b.codes, Cells: b.cells, Target: math.NaN(), Size: p.Size, Dark: p.Theme == "dark"})
}

func (s *Server) quantityMap(c echo.Context, p mapParams, m *db.Measurement) error {
	ctx := c.Request().Context()
	sum, err := s.summaryOf(ctx, m, p.Quantity)
	if err != nil {
		return err
	}
	target := web.ScaleTarget(sum.Quantity, sum.Summary.Target)
	switch {
	case p.Scale == "magnitude":
		target = math.NaN()
	case p.Scale == "deviation" && math.IsNaN(sum.Summary.Target):
		return invalidParam("scale", "use magnitude, or state a target in the recipe", "cannot be deviation: %s has no target on this wafer", p.Quantity)
	case p.Scale == "deviation":
		target = sum.Summary.Target
	}
	low, high := web.ScaleRange(sum.Summary, sum.Quantity, target)
	// The layout and the target may still change, so the picture is asked for
	// again; what it is made from is all in the tag.
	if unchanged(c, mapTag(m, p, low, high, target), askAgain) {
		return notModified(c)
	}
	planes, err := s.store.Planes(ctx, m, p.Quantity)
	if err != nil {
		return err
	}
	return s.answerMap(c, m, web.MapPicture{Plane: &planes[0], Low: low, High: high, Target: target, Size: p.Size, Dark: p.Theme == "dark"})
}

func mapTag(m *db.Measurement, p mapParams, parts ...any) string {
	return tagOf(append(append(identity(m), paintVersion, *m.Layout, p), parts...)...)
}

func (s *Server) summaryOf(ctx context.Context, m *db.Measurement, name string) (*db.Summary, error) {
	if _, err := quantityIn(m, name); err != nil {
		return nil, err
	}
	all, err := s.store.Summaries(ctx, m.ID)
	if err != nil {
		return nil, err
	}
	i := slices.IndexFunc(all, func(s db.Summary) bool { return s.Quantity.Name == name })
	if i < 0 {
		return nil, fmt.Errorf("measurement %d has no summary of %s yet: ask again in a minute: %w", m.ID, name, analytics.ErrNotFound)
	}
	return &all[i], nil
}

func (s *Server) answerMap(c echo.Context, m *db.Measurement, picture web.MapPicture) error {
	grid, err := s.store.Grid(c.Request().Context(), m.GridHash)
	if err != nil {
		return err
	}
	picture.Grid, picture.Layout = grid, m.Layout
	var b bytes.Buffer
	if err := web.PaintMap(&b, picture); err != nil {
		return err
	}
	return c.Blob(http.StatusOK, mediaPNG, b.Bytes())
}

type smallMapParams struct {
	measurementParams
	Quantity string `query:"quantity" required:"true" doc:"the quantity painted"`
	Theme    string `query:"theme" enum:"light,dark" default:"light" doc:"the ground it is painted for"`
}

// smallMapKeep lets a list of wafers be turned over without asking for its maps
// again.
const smallMapKeep = "private, max-age=60"

func (s *Server) getSmallMap(c echo.Context, p smallMapParams) error {
	ctx := c.Request().Context()
	m, q, err := s.measured(ctx, p.ID, p.Quantity)
	if err != nil {
		return err
	}
	wafer, err := s.store.Wafer(ctx, m.Wafer)
	if err != nil {
		return err
	}
	target := math.NaN()
	for _, t := range wafer.Targets {
		if t.Quantity == q.Name {
			target = web.ScaleTarget(q, t.Value)
		}
	}
	small, err := s.store.SmallMap(ctx, m.ID, q.Name)
	if err != nil {
		return missing(err, "measurement %d has no small map of %s yet: ask again in a minute", m.ID, q.Name)
	}
	if unchanged(c, tagOf(append(identity(m), paintVersion, p, target, small.Low, small.High, *m.Layout)...), smallMapKeep) {
		return notModified(c)
	}
	var b bytes.Buffer
	picture := web.SmallPicture{Size: small.Size, Cells: small.Cells, Low: small.Low, High: small.High, Target: target, Dark: p.Theme == "dark"}
	if err := web.PaintSmallMap(&b, picture); err != nil {
		return err
	}
	return c.Blob(http.StatusOK, mediaPNG, b.Bytes())
}

package api

import (
	"context"
	"fmt"
	"net/http"
	"strings"
	"sync"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/analytics/wafermap"
	"epitally/db"
)

// specCacheSize bounds the parsed specifications kept. Each keeps binning tables
// of some hundred kilobytes per quantity between uses.
const specCacheSize = 32

// specCache keeps parsed specification versions, which never change.
type specCache struct {
	mu     sync.Mutex
	parsed map[int64]*binning.Spec // by db.Spec.ID
}

func (k *specCache) parse(stored *db.Spec) (*binning.Spec, error) {
	k.mu.Lock()
	spec := k.parsed[stored.ID]
	k.mu.Unlock()
	if spec != nil {
		return spec, nil
	}
	spec, err := binning.Parse([]byte(stored.Document))
	if err != nil {
		return nil, analytics.WithSource(err, fmt.Sprintf("specification %s version %d", stored.Name, stored.Version))
	}
	k.mu.Lock()
	defer k.mu.Unlock()
	if k.parsed == nil || len(k.parsed) >= specCacheSize {
		k.parsed = map[int64]*binning.Spec{}
	}
	k.parsed[stored.ID] = spec
	return spec, nil
}

// binned is a measurement binned under one specification.
type binned struct {
	spec    *binning.Spec
	cells   []binning.Cell
	counts  []int    // dies per cell, of those that count
	codes   []uint16 // per die of the grid, index into cells
	tally   db.Tally
	notices []string
	// confident is the sellable dies that conform with 95 % confidence; −1 when no
	// uncertainty is known.
	confident int
}

// bin bins the dies of a measurement now, from its planes, under a stored
// specification.
func (s *Server) bin(ctx context.Context, m *db.Measurement, stored *db.Spec) (*binned, error) {
	spec, err := s.specs.parse(stored)
	if err != nil {
		return nil, err
	}
	return s.binUnder(ctx, m, spec, stored.Version)
}

// binUnder bins under a parsed specification; version 0 = one that is not stored.
func (s *Server) binUnder(ctx context.Context, m *db.Measurement, spec *binning.Spec, version int) (*binned, error) {
	have, lacking := m.Split(spec)
	var planes []wafermap.Plane
	var err error
	if len(have) > 0 { // none named would mean all
		if planes, err = s.store.Planes(ctx, m, have...); err != nil {
			return nil, err
		}
	}
	grid, err := s.store.Grid(ctx, m.GridHash)
	if err != nil {
		return nil, err
	}
	b := &binned{spec: spec, cells: spec.Cells(), codes: make([]uint16, grid.Len())}
	b.counts = make([]int, len(b.cells))
	if err := spec.Bin(b.codes, b.counts, binning.PickPlanes(spec, planes), m.Layout.Counted(grid)); err != nil {
		return nil, err
	}
	b.tally = db.NewTallyOf(spec.Name, version, b.cells, b.counts, m.Layout)
	b.tally.MeasurementID = m.ID
	if err := s.addRisks(ctx, b, m, planes, grid); err != nil {
		return nil, err
	}
	b.notices = notices(m, spec, lacking, &b.tally)
	return b, nil
}

func notices(m *db.Measurement, spec *binning.Spec, lacking []string, t *db.Tally) []string {
	out := []string{}
	if spec.Kind != m.Kind {
		out = append(out, fmt.Sprintf("Specification %s is for %s measurements; this one is a %s measurement.", spec.Name, spec.Kind, m.Kind))
	}
	if len(lacking) > 0 {
		out = append(out, fmt.Sprintf("This measurement has no %s, which %s needs, so all of its dies are untested.", strings.Join(lacking, " and no "), spec.Name))
	}
	if !t.OverLayout {
		out = append(out, fmt.Sprintf("No layout is known for this wafer, so the yield is over its %d measured dies.", t.Denominator))
	}
	return out
}

// addRisks works out what the uncertainty of the specification or the station does
// to the bins.
func (s *Server) addRisks(ctx context.Context, b *binned, m *db.Measurement, planes []wafermap.Plane, g *wafermap.Grid) error {
	b.confident = -1
	u, err := s.store.StationUncertainty(ctx, m.Station)
	if err != nil || !b.spec.Uncertain(u) {
		return err
	}
	c, err := b.spec.Conformity(b.codes, binning.PickPlanes(b.spec, planes), m.Layout.Counted(g), u, binning.Confidence)
	if err != nil {
		return err
	}
	b.tally.AddRisks(c)
	b.confident = 0
	for i, n := range c.Confident {
		if b.cells[i].Class == binning.Sellable {
			b.confident += n
		}
	}
	return nil
}

type binParams struct {
	measurementParams
	Spec    string `query:"specification" required:"true" doc:"name of a stored specification"`
	Version int    `query:"version" min:"1" max:"2000000000" doc:"its version; else the latest"`
}

// specNamed finds a stored specification; version 0 = the latest.
func (s *Server) specNamed(ctx context.Context, name string, version int) (*db.Spec, error) {
	spec, err := s.store.Spec(ctx, name, version)
	if version > 0 {
		return spec, missing(err, "there is no version %d of specification %q: /api/v1/specifications/NAME lists its versions", version, name)
	}
	return spec, missing(err, "there is no specification %q: /api/v1/specifications lists them", name)
}

// binAsked finds the measurement and the specification, and bins.
func (s *Server) binAsked(ctx context.Context, p binParams) (*binned, error) {
	m, err := s.measurement(ctx, p.ID)
	if err != nil {
		return nil, err
	}
	spec, err := s.specNamed(ctx, p.Spec, p.Version)
	if err != nil {
		return nil, err
	}
	return s.bin(ctx, m, spec)
}

type tallyParams struct {
	binParams
	Format string `query:"format" enum:"json,csv" doc:"overrides the Accept header"`
}

func (s *Server) getTally(c echo.Context, p tallyParams) error {
	b, err := s.binAsked(c.Request().Context(), p.binParams)
	if err != nil {
		return err
	}
	return answerTally(c, p.Format, b)
}

func answerTally(c echo.Context, format string, b *binned) error {
	return answerTable(c, format, rebinnedOut{wireTally(b.tally), b.notices}, func() table { return talliesTable(b.tally) })
}

func (s *Server) makeTally(c echo.Context, p measurementTableParams) error {
	ctx := c.Request().Context()
	document, err := readDocument(c)
	if err != nil {
		return err
	}
	m, err := s.measurement(ctx, p.ID)
	if err != nil {
		return err
	}
	spec, err := binning.Parse(document)
	if err != nil {
		return err
	}
	b, err := s.binUnder(ctx, m, spec, 0)
	if err != nil {
		return err
	}
	return answerTally(c, p.Format, b)
}

type binsParams struct {
	binParams
	Format string `query:"format" enum:"plane,json" doc:"overrides the Accept header"`
}

type binsOut struct {
	Spec    string    `json:"specification"`
	Version int       `json:"version"`
	Cells   []cellOut `json:"cells"`
	Codes   []uint16  `json:"codes" doc:"per die in the grid's order: index into cells"`
}

type cellOut struct {
	Name  string `json:"name" doc:"bin, reject reason or untested"`
	Class string `json:"class" doc:"sellable, unsellable, reject or untested"`
}

func wireCell(cell binning.Cell) cellOut { return cellOut{cell.Name, cell.Class.String()} }

func (s *Server) getBins(c echo.Context, p binsParams) error {
	ctx := c.Request().Context()
	m, err := s.measurement(ctx, p.ID)
	if err != nil {
		return err
	}
	spec, err := s.specNamed(ctx, p.Spec, p.Version)
	if err != nil {
		return err
	}
	format := chooseFormat(c, p.Format, "plane", "json")
	keep := askAgain // what the latest version is changes
	if p.Version > 0 {
		keep = keepNumber
	}
	if unchanged(c, tagOf(append(identity(m), spec.ID, spec.Version, spec.StoredAt.UnixNano(), format)...), keep) {
		return notModified(c)
	}
	b, err := s.bin(ctx, m, spec)
	if err != nil {
		return err
	}
	if format == "json" {
		return answerJSON(c, http.StatusOK, mediaJSON, binsOut{spec.Name, spec.Version, mapped(b.cells, wireCell), b.codes})
	}
	return answerPlane(c, codesPlane(b.codes))
}

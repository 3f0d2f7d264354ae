package api

import (
	"context"
	"slices"

	"epitally/analytics/binning"
	"epitally/analytics/uniformity"
	"epitally/db"
)

// pageBinned is a measurement binned for a page.
type pageBinned struct {
	cells  []binning.Cell
	counts []int    // dies that count, per cell
	codes  []uint16 // per die of the grid
	tally  db.Tally
}

// binForPage bins a measurement under a specification from its planes. A
// document that cannot be read is an *analytics.Fault.
func (s *Server) binForPage(ctx context.Context, m *db.Measurement, stored *db.Spec) (*pageBinned, error) {
	spec, err := binning.Parse([]byte(stored.Document))
	if err != nil {
		return nil, err
	}
	grid, err := s.store.Grid(ctx, m.GridHash)
	if err != nil {
		return nil, err
	}
	var needed []string
	for _, q := range m.Quantities {
		if slices.Contains(spec.Quantities(), q.Name) {
			needed = append(needed, q.Name)
		}
	}
	b := &pageBinned{cells: spec.Cells(), counts: make([]int, len(spec.Cells())), codes: make([]uint16, grid.Len())}
	picked := binning.PickPlanes(spec, nil)
	if len(needed) > 0 { // none named would read them all
		planes, err := s.store.Planes(ctx, m, needed...)
		if err != nil {
			return nil, err
		}
		picked = binning.PickPlanes(spec, planes)
	}
	include := uniformity.NewFrame(grid, m.Layout).Include()
	if err := spec.Bin(b.codes, b.counts, picked, include); err != nil {
		return nil, err
	}
	b.tally = db.NewTallyOf(stored.Name, stored.Version, b.cells, b.counts, m.Layout)
	return b, nil
}

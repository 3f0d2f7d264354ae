package api

import (
	"context"

	"epitally/analytics/binning"
)

// mostOverlapWafers bounds the wafers on which dies in overlaps are counted.
const mostOverlapWafers = 20

// findings checks a specification, also against the dies it was tried on.
func (s *Server) findings(ctx context.Context, t *trial, list []chosen) ([]binning.Finding, error) {
	found := t.spec.Check()
	if t.spec.HasOverlaps(found) {
		for i := range list[:min(len(list), mostOverlapWafers)] {
			m := &list[i].Measurement
			have, lacking := parts(m, t.spec)
			if len(lacking) > 0 {
				continue
			}
			planes, err := s.store.Planes(ctx, m, have...)
			if err != nil {
				return nil, err
			}
			t.spec.CountOverlaps(found, binning.PickPlanes(t.spec, planes), list[i].include)
		}
	}
	return append(found, t.spec.CheckEmpty(t.counts, t.wafers)...), nil
}

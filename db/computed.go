package db

import (
	"context"
	"slices"

	"epitally/analytics/colour"
	"epitally/analytics/derive"
	"epitally/analytics/wafermap"
)

// addComputed adds the planes among the quantities that were not measured but are
// computed from measured ones.
func (s *Store) addComputed(ctx context.Context, m *Measurement, found map[string]wafermap.Plane, quantities []string) error {
	var wanted []string
	for _, q := range quantities {
		if m.DerivedFrom[q] != "" {
			wanted = append(wanted, q)
		}
	}
	if len(wanted) == 0 {
		return nil
	}
	// What others are computed from may be computed itself, as the photon's
	// wavelength of an efficiency: all of it is at hand then.
	sources, err := s.measured(ctx, m, derive.Needs())
	if err != nil {
		return err
	}
	src := derive.Source{DriveCurrentMA: m.DriveCurrentMA}
	for _, p := range sources {
		src.Planes = append(src.Planes, p)
	}
	if src.Model, err = s.colourModel(ctx, m.WaferID); err != nil {
		return err
	}
	d, _ := s.derivers.Get().(*derive.Deriver)
	if d == nil {
		d = &derive.Deriver{}
	}
	defer s.derivers.Put(d)
	if slices.Contains(wanted, derive.QuantumEfficiency) && !slices.Contains(wanted, derive.Dominant) && m.DerivedFrom[derive.Dominant] != "" {
		wanted = append(wanted, derive.Dominant)
	}
	result, err := d.Compute(src, wanted...)
	if err != nil {
		return err
	}
	for _, p := range result.Planes {
		found[p.Quantity] = p
	}
	return nil
}

// colourModel is how the dominant wavelength of a wafer's recipe follows from the
// peak; nil = by the default line model.
func (s *Store) colourModel(ctx context.Context, waferID int64) (model *colour.PeakModel, err error) {
	err = s.pool.QueryRow(ctx, `
		SELECT rc.colour_model FROM wafer w LEFT JOIN run ru ON ru.id = w.run_id LEFT JOIN recipe rc ON rc.id = coalesce(w.recipe_id, ru.recipe_id)
		WHERE w.id = $1`, waferID).Scan(&model)
	return model, err
}

// eachComputed serves the measurements for which one of the quantities has to be
// computed, and gives back the others.
func (s *Store) eachComputed(ctx context.Context, ids []int64, quantities []string, fn func(int64, []StoredPlane) error) (rest []int64, err error) {
	derivable := slices.DeleteFunc(slices.Clone(quantities), func(q string) bool { return !slices.Contains(derive.Names(), q) })
	if len(derivable) == 0 {
		return ids, nil
	}
	ms, err := s.collectMeasurements(ctx, `
		JOIN measurement_key k ON k.id = m.id AND k.wafer_id = m.wafer_id AND k.measured_at = m.measured_at
		WHERE k.id = ANY ($1) AND m.derived_from ?| $2 ORDER BY m.id`, ids, derivable)
	if err != nil {
		return nil, err
	}
	rest = ids
	for i := range ms {
		m := &ms[i]
		planes, err := s.encoded(ctx, m, quantities)
		if err != nil {
			return nil, err
		}
		if err := fn(m.ID, planes); err != nil {
			return nil, err
		}
		rest = slices.DeleteFunc(slices.Clone(rest), func(id int64) bool { return id == m.ID })
	}
	return rest, nil
}

// encoded gives the planes as they would be stored, N = 0 for those there are not.
func (s *Store) encoded(ctx context.Context, m *Measurement, quantities []string) ([]StoredPlane, error) {
	found, err := s.measured(ctx, m, quantities)
	if err != nil {
		return nil, err
	}
	if err := s.addComputed(ctx, m, found, quantities); err != nil {
		return nil, err
	}
	planes := make([]StoredPlane, len(quantities))
	for i, q := range quantities {
		if p, ok := found[q]; ok {
			if planes[i], err = EncodePlane(&p); err != nil {
				return nil, err
			}
		}
	}
	return planes, nil
}

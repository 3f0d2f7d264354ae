package db

import (
	"context"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"slices"

	"github.com/jackc/pgx/v5"

	"epitally/analytics"
	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

const selectMeasurement = `
	SELECT m.id, m.wafer_id, w.name, m.kind, m.station, m.measured_at, m.drive_current_ma, m.dies, m.remeasured, m.is_current,
		m.source_id, g.hash, m.source_layout, m.facts, m.notices, m.derived_from, m.suspects,
		ARRAY(SELECT s.quantity FROM summary s WHERE s.wafer_id = m.wafer_id AND s.measurement_id = m.id AND s.measured_at = m.measured_at),
		la.name, la.wafer_diameter_mm, la.die_pitch_x_mm, la.die_pitch_y_mm, la.edge_exclusion_mm,
		la.mark, la.mark_angle_deg, la.x_axis, la.y_axis, la.centre_x, la.centre_y
	FROM measurement m
	JOIN wafer w ON w.id = m.wafer_id
	JOIN die_grid g ON g.id = m.grid_id
	LEFT JOIN product p ON p.id = w.product_id
	LEFT JOIN layout la ON la.id = p.layout_id`

func (s *Store) scanMeasurement(row pgx.Row, declared declaredQuantities) (Measurement, error) {
	var m Measurement
	var wt waferTargets
	var hash, layout, facts, origins, suspects []byte
	var names []string
	into := []any{&m.ID, &m.WaferID, &m.Wafer, &m.Kind, &m.Station, &m.MeasuredAt, &m.DriveCurrentMA, &m.Dies, &m.Remeasured, &m.Current,
		&m.SourceID, &hash, &layout, &facts, &m.Notices, &origins, &suspects, &names}
	if err := row.Scan(append(into, wt.into()[12:]...)...); err != nil {
		return m, err
	}
	m.GridHash = hex.EncodeToString(hash)
	if err := json.Unmarshal(facts, &m.Facts); err != nil {
		return m, err
	}
	if err := errors.Join(json.Unmarshal(origins, &m.DerivedFrom), json.Unmarshal(suspects, &m.Suspects)); err != nil {
		return m, err
	}
	if m.Layout = wt.wafer().Layout; m.Layout == nil {
		m.Layout = &wafermap.Layout{}
		if err := json.Unmarshal(layout, m.Layout); err != nil {
			return m, err
		}
		m.Layout.Assumed = true
	} else {
		m.LayoutDies = s.layoutDies(m.Layout)
	}
	for _, name := range names {
		m.Quantities = append(m.Quantities, declared.find(name))
	}
	quantity.Sort(m.Quantities)
	return m, nil
}

// layoutDies counts once per layout.
func (s *Store) layoutDies(l *wafermap.Layout) int {
	s.mu.Lock()
	defer s.mu.Unlock()
	n, ok := s.counted[*l]
	if !ok {
		if len(s.counted) > 1000 {
			clear(s.counted)
		}
		n = l.Dies()
		s.counted[*l] = n
	}
	return n
}

// Measurements lists a wafer's measurements, newest first.
func (s *Store) Measurements(ctx context.Context, waferID int64) (ms []Measurement, err error) {
	defer wrap(&err, "measurements of wafer %d", waferID)
	return s.collectMeasurements(ctx, ` WHERE m.wafer_id = $1 ORDER BY m.measured_at DESC, m.id DESC`, waferID)
}

// Measurement finds one by its number.
func (s *Store) Measurement(ctx context.Context, id int64) (m *Measurement, err error) {
	defer wrap(&err, "measurement %d", id)
	declared, err := s.declared(ctx)
	if err != nil {
		return nil, err
	}
	at, err := keyOf(ctx, s.pool, id)
	if err != nil {
		return nil, err
	}
	found, err := s.scanMeasurement(s.pool.QueryRow(ctx, selectMeasurement+
		` WHERE m.wafer_id = $1 AND m.id = $2 AND m.measured_at = $3`, at.wafer, at.id, at.measuredAt), declared)
	if err != nil {
		return nil, err
	}
	return &found, nil
}

// Selection says which wafers a specification is looked at with.
type Selection struct {
	Kind     string
	Products []string // none = of any product
	Lot      string   // "" = of any lot
	Last     int      // so many of the newest
}

// SelectMeasurements lists current measurements, newest first.
func (s *Store) SelectMeasurements(ctx context.Context, sel Selection) (ms []Measurement, err error) {
	defer wrap(&err, "the last %d measurements of kind %q", sel.Last, sel.Kind)
	products := sel.Products
	if products == nil {
		products = []string{}
	}
	return s.collectMeasurements(ctx, `
		WHERE m.is_current AND m.kind = $1 AND ($2::text[] = '{}' OR p.name = ANY ($2)) AND ($4 = '' OR lower(w.lot) = lower($4))
		ORDER BY m.measured_at DESC, m.id DESC LIMIT $3`, sel.Kind, products, sel.Last, sel.Lot)
}

// MeasurementsByID lists measurements by their numbers, newest first; a number
// that is not known is analytics.ErrNotFound.
func (s *Store) MeasurementsByID(ctx context.Context, ids []int64) (ms []Measurement, err error) {
	defer wrap(&err, "%d measurements", len(ids))
	ms, err = s.collectMeasurements(ctx, `
		JOIN measurement_key k ON k.id = m.id AND k.wafer_id = m.wafer_id AND k.measured_at = m.measured_at
		WHERE k.id = ANY ($1) ORDER BY m.measured_at DESC, m.id DESC`, ids)
	if err != nil {
		return nil, err
	}
	for _, id := range ids {
		if !slices.ContainsFunc(ms, func(m Measurement) bool { return m.ID == id }) {
			return nil, fmt.Errorf("there is no measurement %d: %w", id, analytics.ErrNotFound)
		}
	}
	return ms, nil
}

func (s *Store) collectMeasurements(ctx context.Context, where string, args ...any) ([]Measurement, error) {
	declared, err := s.declared(ctx)
	if err != nil {
		return nil, err
	}
	rows, err := s.pool.Query(ctx, selectMeasurement+where, args...)
	if err != nil {
		return nil, err
	}
	ms, err := pgx.CollectRows(rows, func(row pgx.CollectableRow) (Measurement, error) { return s.scanMeasurement(row, declared) })
	if ms == nil {
		ms = []Measurement{}
	}
	return ms, err
}

// Summaries lists a measurement's summaries in display order.
func (s *Store) Summaries(ctx context.Context, measurementID int64) (out []Summary, err error) {
	defer wrap(&err, "summaries of measurement %d", measurementID)
	declared, err := s.declared(ctx)
	if err != nil {
		return nil, err
	}
	at, err := keyOf(ctx, s.pool, measurementID)
	if err != nil {
		return nil, err
	}
	rows, err := s.pool.Query(ctx, `
		SELECT quantity, figures FROM summary
		WHERE wafer_id = $1 AND measurement_id = $2 AND measured_at = $3`, at.wafer, at.id, at.measuredAt)
	if err != nil {
		return nil, err
	}
	byName := map[string]Summary{}
	var qs []quantity.Quantity
	var name string
	var figures []byte
	if _, err := pgx.ForEachRow(rows, []any{&name, &figures}, func() error {
		one := Summary{MeasurementID: measurementID, Quantity: declared.find(name)}
		qs = append(qs, one.Quantity)
		err := json.Unmarshal(figures, &one.Summary)
		byName[name] = one
		return err
	}); err != nil {
		return nil, err
	}
	quantity.Sort(qs)
	out = make([]Summary, len(qs))
	for i, q := range qs {
		out[i] = byName[q.Name]
	}
	return out, nil
}

// SmallMap reads the small map of one quantity.
func (s *Store) SmallMap(ctx context.Context, measurementID int64, quantityName string) (m *SmallMap, err error) {
	defer wrap(&err, "small map of %s of measurement %d", quantityName, measurementID)
	at, err := keyOf(ctx, s.pool, measurementID)
	if err != nil {
		return nil, err
	}
	m = &SmallMap{Quantity: quantity.Quantity{Name: quantityName}}
	err = s.pool.QueryRow(ctx, `
		SELECT size, low, high, cells FROM small_map
		WHERE wafer_id = $1 AND measurement_id = $2 AND measured_at = $3 AND quantity = $4`,
		at.wafer, at.id, at.measuredAt, quantityName).Scan(&m.Size, &m.Low, &m.High, &m.Cells)
	if err != nil {
		return nil, err
	}
	if q, ok := quantity.Lookup(quantityName); ok {
		m.Quantity = q
	}
	return m, nil
}

// declaredQuantities finds any quantity by name.
type declaredQuantities map[string]quantity.Quantity

func (d declaredQuantities) find(name string) quantity.Quantity {
	if q, ok := quantity.Lookup(name); ok {
		return q
	}
	if q, ok := d[name]; ok {
		return q
	}
	return quantity.Quantity{Name: name, Label: name, Declared: true}
}

func (s *Store) declared(ctx context.Context) (declaredQuantities, error) {
	rows, err := s.pool.Query(ctx, `SELECT name, label, unit, resolution FROM quantity`)
	if err != nil {
		return nil, err
	}
	d := declaredQuantities{}
	var name, label, unit string
	var resolution float64
	_, err = pgx.ForEachRow(rows, []any{&name, &label, &unit, &resolution}, func() error {
		q, err := quantity.Declare(name, label, unit, resolution)
		if err == nil { // a name built in since it was declared is the built-in one
			d[name] = q
		}
		return nil
	})
	return d, err
}

// Quantities lists every quantity, built-in and declared, in display order.
func (s *Store) Quantities(ctx context.Context) (qs []quantity.Quantity, err error) {
	defer wrap(&err, "quantities")
	declared, err := s.declared(ctx)
	if err != nil {
		return nil, err
	}
	qs = quantity.Builtin()
	for _, q := range declared {
		qs = append(qs, q)
	}
	quantity.Sort(qs)
	return qs, nil
}

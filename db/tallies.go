package db

import (
	"context"
	"encoding/json"

	"github.com/jackc/pgx/v5"
)

// tallyTargets are where a row of a tally goes; all nil when there is none.
type tallyTargets struct {
	spec                                     *string
	version, dies, tested, good, denominator *int
	overLayout                               *bool
	cells                                    []byte
}

func (t *tallyTargets) into() []any {
	return []any{&t.spec, &t.version, &t.dies, &t.tested, &t.good, &t.denominator, &t.overLayout, &t.cells}
}

func (t *tallyTargets) tally(measurement int64) (*Tally, error) {
	if t.spec == nil {
		return nil, nil
	}
	out := &Tally{MeasurementID: measurement, Spec: *t.spec, Version: *t.version, Dies: *t.dies, Tested: *t.tested,
		Good: *t.good, Denominator: *t.denominator, OverLayout: *t.overLayout}
	return out, json.Unmarshal(t.cells, &out.Cells)
}

// Tallies lists the stored tallies of a measurement under the newest version of
// each specification that it was tallied under.
func (s *Store) Tallies(ctx context.Context, measurementID int64) (tallies []Tally, err error) {
	defer wrap(&err, "tallies of measurement %d", measurementID)
	at, err := keyOf(ctx, s.pool, measurementID)
	if err != nil {
		return nil, err
	}
	rows, err := s.pool.Query(ctx, `
		SELECT DISTINCT ON (sp.name) sp.name, sp.version, t.dies, t.tested, t.good, t.denominator, t.over_layout, t.cells
		FROM tally t JOIN spec sp ON sp.id = t.spec_id
		WHERE t.wafer_id = $1 AND t.measurement_id = $2 AND t.measured_at = $3 ORDER BY sp.name, sp.version DESC`, at.wafer, at.id, at.measuredAt)
	if err != nil {
		return nil, err
	}
	tallies, err = pgx.CollectRows(rows, func(row pgx.CollectableRow) (Tally, error) {
		var t tallyTargets
		if err := row.Scan(t.into()...); err != nil {
			return Tally{}, err
		}
		out, err := t.tally(measurementID)
		if err != nil {
			return Tally{}, err
		}
		return *out, nil
	})
	if tallies == nil {
		tallies = []Tally{}
	}
	return tallies, err
}

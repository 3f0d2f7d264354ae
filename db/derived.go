package db

import (
	"context"
	"encoding/json"
	"math"

	"github.com/jackc/pgx/v5"
)

// queueDerived queues the inserts of everything derived from one measurement,
// one statement a table.
func queueDerived(batch *pgx.Batch, at rowKey, d Derived) error {
	qs := d.quantities()
	var names, figures []string
	var n []int32
	var mean, median, sd, robust, target []*float64
	for i := range d.Summaries {
		s := &d.Summaries[i]
		text, err := json.Marshal(s)
		if err != nil {
			return err
		}
		names, figures, n = append(names, qs[i].Name), append(figures, string(text)), append(n, int32(s.N))
		mean, median, sd = append(mean, orNull(s.Mean)), append(median, orNull(s.Median)), append(sd, orNull(s.SD))
		robust, target = append(robust, orNull(s.RobustSD)), append(target, orNull(s.Target))
	}
	batch.Queue(`
		INSERT INTO summary (wafer_id, measurement_id, measured_at, quantity, n, mean, median, sd, robust_sd, target, figures)
		SELECT $1, $2, $3, u.* FROM unnest($4::text[], $5::int[], $6::float8[], $7::float8[], $8::float8[], $9::float8[], $10::float8[], $11::jsonb[]) u`,
		at.wafer, at.id, at.measuredAt, names, n, mean, median, sd, robust, target, figures)
	queueSmallMaps(batch, at, d.SmallMaps)
	return queueTallies(batch, at, d.Tallies)
}

func queueSmallMaps(batch *pgx.Batch, at rowKey, maps []SmallMap) {
	var names []string
	var size []int32
	var low, high []float64
	var cells [][]byte
	for _, m := range maps {
		names, size, cells = append(names, m.Quantity.Name), append(size, int32(m.Size)), append(cells, m.Cells)
		low, high = append(low, zeroForNaN(m.Low)), append(high, zeroForNaN(m.High)) // no value at all: no cell is painted
	}
	batch.Queue(`
		INSERT INTO small_map (wafer_id, measurement_id, measured_at, quantity, size, low, high, cells)
		SELECT $1, $2, $3, u.* FROM unnest($4::text[], $5::int[], $6::float8[], $7::float8[], $8::bytea[]) u`,
		at.wafer, at.id, at.measuredAt, names, size, low, high, cells)
}

func queueTallies(batch *pgx.Batch, at rowKey, tallies []NewTally) error {
	for _, t := range tallies {
		cells, err := json.Marshal(t.Tally.Cells)
		if err != nil {
			return err
		}
		batch.Queue(`
			INSERT INTO tally (wafer_id, measurement_id, measured_at, spec_id, dies, tested, good, denominator, over_layout, cells)
			VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10)`,
			at.wafer, at.id, at.measuredAt, t.SpecID, t.Tally.Dies, t.Tally.Tested, t.Tally.Good, t.Tally.Denominator, t.Tally.OverLayout, cells)
	}
	return nil
}

func orNull(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}

func zeroForNaN(v float64) float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return 0
	}
	return v
}

// StaleMeasurements gives up to limit measurements whose derived numbers wait
// to be made again.
func (s *Store) StaleMeasurements(ctx context.Context, limit int) (ids []int64, err error) {
	defer wrap(&err, "stale measurements")
	rows, err := s.pool.Query(ctx, `SELECT id FROM measurement WHERE stale ORDER BY id DESC LIMIT $1`, limit)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, pgx.RowTo[int64])
}

// ReplaceDerived stores derived numbers anew and clears the stale mark. Small
// maps, which depend on the layout, are replaced too. Tallies of older versions
// of a specification stay.
func (s *Store) ReplaceDerived(ctx context.Context, measurementID int64, d Derived) (err error) {
	defer wrap(&err, "replace derived numbers of measurement %d", measurementID)
	return s.inTx(ctx, func(tx pgx.Tx) error {
		at, err := keyOf(ctx, tx, measurementID)
		if err != nil {
			return err
		}
		specs := make([]int64, len(d.Tallies))
		for i, t := range d.Tallies {
			specs[i] = t.SpecID
		}
		batch := &pgx.Batch{}
		for _, table := range []string{"summary", "small_map"} {
			batch.Queue(`DELETE FROM `+table+` WHERE wafer_id = $1 AND measurement_id = $2 AND measured_at = $3`, at.wafer, at.id, at.measuredAt)
		}
		batch.Queue(`DELETE FROM tally WHERE wafer_id = $1 AND measurement_id = $2 AND measured_at = $3
			AND (spec_id = ANY ($4) OR spec_id IN (SELECT id FROM spec WHERE latest))`, at.wafer, at.id, at.measuredAt, specs)
		if err := queueDerived(batch, at, d); err != nil {
			return err
		}
		batch.Queue(`
			UPDATE measurement SET stale = false, state = $4, main_quantity = $5, derived_from = $6, suspects = $7
			WHERE wafer_id = $1 AND id = $2 AND measured_at = $3`,
			at.wafer, at.id, at.measuredAt, d.State, d.mainQuantity(), d.origins(), d.doubts())
		return tx.SendBatch(ctx, batch).Close()
	})
}

func keyOf(ctx context.Context, q querier, id int64) (at rowKey, err error) {
	at.id = id
	err = q.QueryRow(ctx, `SELECT wafer_id, measured_at FROM measurement_key WHERE id = $1`, id).Scan(&at.wafer, &at.measuredAt)
	return at, err
}

// querier is a pool or a transaction.
type querier interface {
	Query(ctx context.Context, sql string, args ...any) (pgx.Rows, error)
	QueryRow(ctx context.Context, sql string, args ...any) pgx.Row
}

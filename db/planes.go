package db

import (
	"bufio"
	"context"
	"encoding/hex"
	"fmt"
	"io"
	"math"
	"strconv"

	"github.com/jackc/pgx/v5"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

// keptGrids bounds the grids held in memory; the wafers a person looks at share few.
const keptGrids = 8

// Grid reads a measurement's die grid by the hexadecimal hash of its content.
// The grid is shared: do not change it.
func (s *Store) Grid(ctx context.Context, hash string) (g *wafermap.Grid, err error) {
	defer wrap(&err, "die grid %s", hash)
	s.mu.Lock()
	g, ok := s.decoded[hash]
	s.mu.Unlock()
	if ok {
		return g, nil
	}
	runs, err := s.GridRuns(ctx, hash)
	if err != nil {
		return nil, err
	}
	if g, err = wafermap.GridFromRuns(runs); err != nil {
		return nil, err
	}
	s.mu.Lock()
	if len(s.decoded) >= keptGrids {
		clear(s.decoded)
	}
	s.decoded[hash] = g
	s.mu.Unlock()
	return g, nil
}

// GridRuns reads a die grid as the runs it is stored as.
func (s *Store) GridRuns(ctx context.Context, hash string) (runs []wafermap.Run, err error) {
	defer wrap(&err, "die grid %s", hash)
	key, err := hex.DecodeString(hash)
	if err != nil || len(key) != 32 {
		return nil, fmt.Errorf("%q is not a SHA-256 in hexadecimal: %w", hash, analytics.ErrInvalid)
	}
	var data []byte
	if err := s.pool.QueryRow(ctx, `SELECT runs FROM die_grid WHERE hash = $1`, key).Scan(&data); err != nil {
		return nil, err
	}
	return wafermap.DecodeRuns(data)
}

// Planes reads the named planes of one measurement in the order asked, computing
// those that were not measured; none named = all, in display order. A missing one
// is analytics.ErrNotFound.
func (s *Store) Planes(ctx context.Context, m *Measurement, quantities ...string) (planes []wafermap.Plane, err error) {
	defer wrap(&err, "planes of measurement %d", m.ID)
	if len(quantities) == 0 {
		for _, q := range m.Quantities {
			quantities = append(quantities, q.Name)
		}
	}
	found, err := s.measured(ctx, m, quantities)
	if err != nil {
		return nil, err
	}
	if err := s.addComputed(ctx, m, found, quantities); err != nil {
		return nil, err
	}
	planes = make([]wafermap.Plane, len(quantities))
	for i, q := range quantities {
		p, ok := found[q]
		if !ok {
			return nil, fmt.Errorf("quantity %q is not among the measured ones: %w", q, analytics.ErrNotFound)
		}
		planes[i] = p
	}
	return planes, nil
}

// measured reads those of the named planes that are stored.
func (s *Store) measured(ctx context.Context, m *Measurement, quantities []string) (map[string]wafermap.Plane, error) {
	rows, err := s.pool.Query(ctx, selectPlane+` AND quantity = ANY ($4)`, m.WaferID, m.ID, m.MeasuredAt, quantities)
	if err != nil {
		return nil, err
	}
	found := map[string]wafermap.Plane{}
	var name string
	var sp StoredPlane
	if _, err := pgx.ForEachRow(rows, []any{&name, &sp.Encoding, &sp.Base, &sp.Resolution, &sp.N, (*pgxBytes)(&sp.Data)}, func() error {
		p, err := DecodePlane(name, sp)
		found[name] = p
		return err
	}); err != nil {
		return nil, err
	}
	return found, nil
}

const selectPlane = `
	SELECT quantity, encoding, base, resolution, n, data FROM plane
	WHERE wafer_id = $1 AND measurement_id = $2 AND measured_at = $3`

// pgxBytes takes a bytea without copying it out of the connection's buffer: it
// is valid only until the next row.
type pgxBytes []byte

// ScanBytes implements pgtype.BytesScanner.
func (b *pgxBytes) ScanBytes(v []byte) error {
	*b = v
	return nil
}

// StoredPlane reads one plane without decoding it, for the page; one that was not
// measured is computed.
func (s *Store) StoredPlane(ctx context.Context, m *Measurement, quantity string) (sp *StoredPlane, err error) {
	defer wrap(&err, "plane %s of measurement %d", quantity, m.ID)
	if m.DerivedFrom[quantity] != "" {
		planes, err := s.Planes(ctx, m, quantity)
		if err != nil {
			return nil, err
		}
		made, err := EncodePlane(&planes[0])
		return &made, err
	}
	sp = &StoredPlane{}
	err = s.pool.QueryRow(ctx, `
		SELECT encoding, base, resolution, n, data FROM plane
		WHERE wafer_id = $1 AND measurement_id = $2 AND measured_at = $3 AND quantity = $4`, m.WaferID, m.ID, m.MeasuredAt, quantity).
		Scan(&sp.Encoding, &sp.Base, &sp.Resolution, &sp.N, &sp.Data)
	return sp, err
}

// EachStoredPlanes streams the named quantities of many measurements in one
// query, one call of fn per measurement with the planes in the order of
// quantities (N = 0 where it has none), those that were not measured computed. The
// planes are valid only during fn.
func (s *Store) EachStoredPlanes(ctx context.Context, measurementIDs []int64, quantities []string, fn func(measurement int64, planes []StoredPlane) error) (err error) {
	defer wrap(&err, "planes of %d measurements", len(measurementIDs))
	if measurementIDs, err = s.eachComputed(ctx, measurementIDs, quantities, fn); err != nil || len(measurementIDs) == 0 {
		return err
	}
	// One row a measurement with its planes as columns: a row's bytes then lie
	// together in the connection's buffer and none has to be copied aside.
	sql, args := eachSQL(measurementIDs, quantities)
	rows, err := s.pool.Query(ctx, sql, args...)
	if err != nil {
		return err
	}
	defer rows.Close()
	planes := make([]StoredPlane, len(quantities))
	var id int64
	into := []any{&id}
	type scanned struct {
		encoding         *int16
		base, resolution *float64
		n                *int32
	}
	heads := make([]scanned, len(quantities))
	for i := range planes {
		into = append(into, &heads[i].encoding, &heads[i].base, &heads[i].resolution, &heads[i].n, (*pgxBytes)(&planes[i].Data))
	}
	for rows.Next() {
		if err := rows.Scan(into...); err != nil {
			return err
		}
		for i, h := range heads {
			data := planes[i].Data
			planes[i] = StoredPlane{}
			if h.encoding != nil {
				planes[i] = StoredPlane{Encoding: wafermap.Encoding(*h.encoding), Base: *h.base, Resolution: *h.resolution, N: int(*h.n), Data: data}
			}
		}
		if err := fn(id, planes); err != nil {
			return err
		}
	}
	return rows.Err()
}

func eachSQL(ids []int64, quantities []string) (string, []any) {
	columns, joins, args := "", "", []any{ids}
	for i, q := range quantities {
		args = append(args, q)
		columns += fmt.Sprintf(", p%d.encoding, p%d.base, p%d.resolution, p%d.n, p%d.data", i, i, i, i, i)
		joins += fmt.Sprintf(" LEFT JOIN plane p%d ON p%d.wafer_id = k.wafer_id AND p%d.measurement_id = k.id AND p%d.measured_at = k.measured_at AND p%d.quantity = $%d", i, i, i, i, i, len(args))
	}
	return "SELECT k.id" + columns + " FROM measurement_key k" + joins + " WHERE k.id = ANY ($1)", args
}

// WriteDiesCSV streams every die of a measurement: x, y, the quantities, with
// the decimals the source wrote. An empty field is no value.
func (s *Store) WriteDiesCSV(ctx context.Context, w io.Writer, m *Measurement, quantities ...string) error {
	g, err := s.Grid(ctx, m.GridHash)
	if err != nil {
		return err
	}
	planes, err := s.Planes(ctx, m, quantities...)
	if err != nil {
		return err
	}
	out := bufio.NewWriterSize(w, 64<<10)
	out.WriteString("x,y")
	for i := range planes {
		out.WriteString("," + planes[i].Quantity)
	}
	out.WriteByte('\n')
	var row []byte
	for d := range g.X {
		row = strconv.AppendInt(row[:0], int64(g.X[d]), 10)
		row = strconv.AppendInt(append(row, ','), int64(g.Y[d]), 10)
		for i := range planes {
			row = AppendValue(append(row, ','), &planes[i], d)
		}
		if _, err := out.Write(append(row, '\n')); err != nil {
			return err
		}
	}
	return out.Flush()
}

// AppendValue appends the value of die i as text with the plane's own decimals,
// nothing for no value.
func AppendValue(b []byte, p *wafermap.Plane, i int) []byte {
	v := p.Value(i)
	switch {
	case math.IsNaN(v):
		return b
	case p.Encoding == wafermap.Float32:
		return strconv.AppendFloat(b, v, 'g', -1, 32)
	case p.Encoding == wafermap.Float64:
		return strconv.AppendFloat(b, v, 'g', -1, 64)
	}
	return strconv.AppendFloat(b, v, 'f', max(0, -p.Exponent), 64)
}

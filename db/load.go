package db

import (
	"context"
	"encoding/hex"
	"errors"
	"fmt"
	"slices"
	"sync"
	"time"

	"github.com/jackc/pgx/v5"

	"epitally/analytics"
	"epitally/analytics/colour"
	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
)

// Load is one source being stored: one transaction, all or nothing. Its methods
// may be called from several goroutines; they take turns.
type Load struct {
	store *Store
	mu    sync.Mutex
	tx    pgx.Tx

	sourceID int64
	ids      []int64            // measurement numbers taken ahead
	wafers   map[string]int64   // wafers met
	grids    map[[32]byte]int64 // grids made or found; the store learns them at the commit
	specs    map[specsKey][]Spec
	targets  map[string][]Target
	stations map[string]map[string]float64 // their uncertainties
	shares   bool                          // documents are held
	declared map[string]bool
	taken    int
}

type specsKey struct{ product, kind, day string }

// BeginLoad opens the transaction.
func (s *Store) BeginLoad(ctx context.Context) (l *Load, err error) {
	defer wrap(&err, "begin load")
	tx, err := s.pool.Begin(ctx)
	if err != nil {
		return nil, err
	}
	l = &Load{store: s, tx: tx, wafers: map[string]int64{}, grids: map[[32]byte]int64{},
		specs: map[specsKey][]Spec{}, targets: map[string][]Target{}, stations: map[string]map[string]float64{}, declared: map[string]bool{}}
	// A large file is many short statements and some long ones; a load is bounded
	// by its caller's context instead.
	if err := tx.QueryRow(ctx, `SELECT set_config('statement_timeout', '0', true), nextval('source_id_seq')`).Scan(nil, &l.sourceID); err != nil {
		tx.Rollback(context.WithoutCancel(ctx))
		return nil, err
	}
	return l, nil
}

// WaferContext is what binning and summaries need to know of a wafer before it
// is stored: layout and targets by its product and recipe, and the latest
// version of every spec of the product and the measurement kind. A wafer never
// seen gives a Wafer with only its name.
type WaferContext struct {
	Wafer       Wafer
	Specs       []Spec
	Uncertainty map[string]float64 // the station's, by quantity
}

// WaferContext reads inside the load's transaction. It locks the wafer, so that
// two loads of one wafer agree on which measurement is current.
func (l *Load) WaferContext(ctx context.Context, wafer, kind, station string, measuredAt time.Time) (c *WaferContext, err error) {
	defer wrap(&err, "wafer %s", wafer)
	l.mu.Lock()
	defer l.mu.Unlock()
	if !l.shares {
		if _, err := l.tx.Exec(ctx, shareDocuments); err != nil {
			return nil, err
		}
		l.shares = true
	}
	c = &WaferContext{Wafer: Wafer{Name: wafer}}
	if c.Uncertainty, err = l.stationUncertainty(ctx, station); err != nil {
		return nil, err
	}
	w, err := scanWafer(l.tx.QueryRow(ctx, selectWafer+` WHERE w.name = $1 FOR NO KEY UPDATE OF w`, wafer))
	if errors.Is(err, pgx.ErrNoRows) {
		return c, nil
	}
	if err != nil {
		return nil, err
	}
	l.wafers[wafer] = w.ID
	if w.Targets, err = l.targetsOf(ctx, w.Recipe); err != nil {
		return nil, err
	}
	c.Wafer = *w
	key := specsKey{w.Product, kind, dayOf(measuredAt)}
	specs, ok := l.specs[key]
	if !ok {
		if specs, err = specsFor(ctx, l.tx, w.Product, kind, key.day); err != nil {
			return nil, err
		}
		l.specs[key] = specs
	}
	c.Specs = specs
	return c, nil
}

func (l *Load) stationUncertainty(ctx context.Context, station string) (map[string]float64, error) {
	u, ok := l.stations[station]
	if ok {
		return u, nil
	}
	u, err := stationUncertainty(ctx, l.tx, station)
	if err == nil {
		l.stations[station] = u
	}
	return u, err
}

func (l *Load) targetsOf(ctx context.Context, recipe string) ([]Target, error) {
	if t, ok := l.targets[recipe]; ok || recipe == "" {
		return t, nil
	}
	t, err := targetsOf(ctx, l.tx, recipe)
	if err == nil {
		l.targets[recipe] = t
	}
	return t, err
}

// NewMeasurement is a measurement to store with everything derived from it.
type NewMeasurement struct {
	Wafer, Lot, Kind, Station string
	MeasuredAt                time.Time
	DriveCurrentMA            *float64
	Facts                     map[string]string
	Notices                   []string
	SourceLayout              *wafermap.Layout // as the source stated it, or nil
	Grid                      *wafermap.Grid
	Planes                    []wafermap.Plane
	Quantities                []quantity.Quantity
	Remeasured                int
	Derived                   Derived
}

// Derived is what is computed once at load: a summary and a small map per
// plane, a tally per spec version.
type Derived struct {
	Summaries []uniformity.Summary // one per small map, in their order
	SmallMaps []SmallMap           // one per quantity, measured ones first, then computed ones
	Tallies   []NewTally
	State     string // colour state word

	DerivedFrom map[string]string // per computed quantity: what it was computed from
	Suspects    []colour.Suspect
}

// quantities are those of all planes, measured and computed.
func (d *Derived) quantities() []quantity.Quantity {
	qs := make([]quantity.Quantity, len(d.SmallMaps))
	for i, m := range d.SmallMaps {
		qs[i] = m.Quantity
	}
	return qs
}

func (d *Derived) origins() map[string]string {
	if d.DerivedFrom == nil {
		return map[string]string{}
	}
	return d.DerivedFrom
}

func (d *Derived) doubts() []colour.Suspect {
	if d.Suspects == nil {
		return []colour.Suspect{}
	}
	return d.Suspects
}

// NewTally is a tally of the spec version SpecID.
type NewTally struct {
	SpecID int64
	Tally  Tally
}

// PutMeasurement stores one measurement and makes it current for its wafer and
// kind when it is the newest by measurement time. It creates the wafer when no
// run sheet has named it, and the partitions of its month when missing.
func (l *Load) PutMeasurement(ctx context.Context, m *NewMeasurement) (id int64, err error) {
	defer wrap(&err, "store %s of wafer %s", m.Kind, m.Wafer)
	if err := m.Grid.Check(); err != nil {
		return 0, err
	}
	if err := l.store.ensureMonth(ctx, m.MeasuredAt); err != nil {
		return 0, err
	}
	planes, err := newPlaneRows(m.Planes, m.Grid.Len())
	if err != nil {
		return 0, err
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	waferID, err := l.waferID(ctx, m.Wafer, m.Lot)
	if err != nil {
		return 0, err
	}
	gridID, err := l.gridID(ctx, m.Grid)
	if err != nil {
		return 0, err
	}
	if id, err = l.nextID(ctx); err != nil {
		return 0, err
	}
	at := rowKey{wafer: waferID, id: id, measuredAt: m.MeasuredAt.UTC()}
	batch := &pgx.Batch{}
	l.queueMeasurement(batch, at, m, gridID)
	planes.queue(batch, at)
	if err := queueDerived(batch, at, m.Derived); err != nil {
		return 0, err
	}
	l.queueDeclared(batch, m.Quantities)
	return id, l.tx.SendBatch(ctx, batch).Close()
}

// rowKey leads every row of one measurement.
type rowKey struct {
	wafer, id  int64
	measuredAt time.Time
}

func (l *Load) waferID(ctx context.Context, name, lot string) (id int64, err error) {
	if id, ok := l.wafers[name]; ok && lot == "" {
		return id, nil
	}
	err = l.tx.QueryRow(ctx, `
		INSERT INTO wafer AS w (name, lot) VALUES ($1, $2)
		ON CONFLICT (name) DO UPDATE SET lot = CASE WHEN w.lot = '' THEN excluded.lot ELSE w.lot END -- a run sheet's lot stays
		RETURNING id`, name, lot).Scan(&id)
	l.wafers[name] = id
	return id, err
}

func (l *Load) gridID(ctx context.Context, g *wafermap.Grid) (id int64, err error) {
	runs := wafermap.EncodeRuns(g.Runs())
	hash := g.Hash()
	if id, ok := l.grids[hash]; ok {
		return id, nil
	}
	l.store.mu.Lock()
	id, ok := l.store.grids[hash]
	l.store.mu.Unlock()
	if !ok {
		err = l.tx.QueryRow(ctx, `
			WITH made AS (INSERT INTO die_grid (hash, n, runs) VALUES ($1, $2, $3) ON CONFLICT ON CONSTRAINT die_grid_hash DO NOTHING RETURNING id)
			SELECT id FROM made UNION ALL SELECT id FROM die_grid WHERE hash = $1 LIMIT 1`, hash[:], g.Len(), runs).Scan(&id)
		if errors.Is(err, pgx.ErrNoRows) { // another load made it since this statement's snapshot
			err = l.tx.QueryRow(ctx, `SELECT id FROM die_grid WHERE hash = $1`, hash[:]).Scan(&id)
		}
		if err != nil {
			return 0, err
		}
	}
	l.grids[hash] = id
	return id, nil
}

// nextID takes measurement numbers ahead, more at a time the larger the source.
func (l *Load) nextID(ctx context.Context) (int64, error) {
	if len(l.ids) == 0 {
		l.taken = min(2*l.taken+1, 64)
		rows, err := l.tx.Query(ctx, `SELECT nextval('measurement_id_seq') FROM generate_series(1, $1)`, l.taken)
		if err != nil {
			return 0, err
		}
		if l.ids, err = pgx.CollectRows(rows, pgx.RowTo[int64]); err != nil {
			return 0, err
		}
	}
	id := l.ids[0]
	l.ids = l.ids[1:]
	return id, nil
}

func (l *Load) queueMeasurement(batch *pgx.Batch, at rowKey, m *NewMeasurement, gridID int64) {
	layout := m.SourceLayout
	if layout == nil || layout.Assumed {
		assumed := wafermap.AssumeLayout(m.Grid, layout)
		layout = &assumed
	}
	facts, notices := m.Facts, m.Notices
	if facts == nil {
		facts = map[string]string{}
	}
	if notices == nil {
		notices = []string{}
	}
	batch.Queue(`
		UPDATE measurement SET is_current = false
		WHERE wafer_id = $1 AND kind = $2 AND is_current AND measured_at <= $3`, at.wafer, m.Kind, at.measuredAt)
	batch.Queue(`
		INSERT INTO measurement (wafer_id, id, measured_at, kind, station, drive_current_ma, dies, remeasured,
			is_current, state, main_quantity, source_id, grid_id, source_layout, facts, notices, derived_from, suspects)
		SELECT $1, $2, $3, $4, $5, $6, $7, $8,
			NOT EXISTS (SELECT FROM measurement WHERE wafer_id = $1 AND kind = $4 AND is_current), $9, $10, $11, $12, $13, $14, $15, $16, $17`,
		at.wafer, at.id, at.measuredAt, m.Kind, m.Station, m.DriveCurrentMA, m.Grid.Len(), m.Remeasured,
		m.Derived.State, m.Derived.mainQuantity(), l.sourceID, gridID, layout, facts, notices, m.Derived.origins(), m.Derived.doubts())
	batch.Queue(`INSERT INTO measurement_key (id, wafer_id, measured_at) VALUES ($1, $2, $3)`, at.id, at.wafer, at.measuredAt)
	batch.Queue(`
		UPDATE wafer SET last_measured_at = $2, last_measurement_id = $3
		WHERE id = $1 AND (last_measured_at IS NULL OR last_measured_at <= $2)`, at.wafer, at.measuredAt, at.id)
}

// mainQuantity is what lists show of a measurement: the dominant wavelength that
// was measured, else the peak, else the dominant wavelength that was computed,
// else its first quantity.
func (d *Derived) mainQuantity() string {
	qs := d.quantities()
	has := func(name string) bool {
		return slices.ContainsFunc(qs, func(q quantity.Quantity) bool { return q.Name == name })
	}
	const dominant, peak = "dominant_wavelength_nm", "peak_wavelength_nm"
	switch {
	case has(dominant) && d.DerivedFrom[dominant] == "":
		return dominant
	case has(peak):
		return peak
	case has(dominant):
		return dominant
	case len(qs) == 0:
		return ""
	}
	return qs[0].Name
}

// planeRows are the planes of one measurement as arrays, so that they go in one
// statement.
type planeRows struct {
	quantity         []string
	encoding, n      []int32
	base, resolution []float64
	data             [][]byte
}

func newPlaneRows(planes []wafermap.Plane, dies int) (*planeRows, error) {
	r := &planeRows{}
	for i := range planes {
		s, err := EncodePlane(&planes[i])
		if err != nil {
			return nil, err
		}
		if s.N != dies {
			return nil, fmt.Errorf("plane %s has %d values for a grid of %d dies: %w", planes[i].Quantity, s.N, dies, analytics.ErrInvalid)
		}
		r.quantity, r.encoding, r.n = append(r.quantity, planes[i].Quantity), append(r.encoding, int32(s.Encoding)), append(r.n, int32(s.N))
		r.base, r.resolution, r.data = append(r.base, s.Base), append(r.resolution, s.Resolution), append(r.data, s.Data)
	}
	return r, nil
}

func (r *planeRows) queue(batch *pgx.Batch, at rowKey) {
	batch.Queue(`
		INSERT INTO plane (wafer_id, measurement_id, measured_at, quantity, encoding, base, resolution, n, data)
		SELECT $1, $2, $3, u.quantity, u.encoding, u.base, u.resolution, u.n, u.data
		FROM unnest($4::text[], $5::int[], $6::float8[], $7::float8[], $8::int[], $9::bytea[]) u (quantity, encoding, base, resolution, n, data)`,
		at.wafer, at.id, at.measuredAt, r.quantity, r.encoding, r.base, r.resolution, r.n, r.data)
}

func (l *Load) queueDeclared(batch *pgx.Batch, qs []quantity.Quantity) {
	for _, q := range qs {
		if q.Declared && !l.declared[q.Name] {
			l.declared[q.Name] = true
			batch.Queue(upsertQuantity, q.Name, q.Label, q.Unit, q.Resolution)
		}
	}
}

const upsertQuantity = `
	INSERT INTO quantity (name, label, unit, resolution) VALUES ($1, $2, $3, $4)
	ON CONFLICT (name) DO UPDATE SET label = excluded.label, unit = excluded.unit, resolution = excluded.resolution
	WHERE (quantity.label, quantity.unit, quantity.resolution) IS DISTINCT FROM (excluded.label, excluded.unit, excluded.resolution)`

// Commit records the source as stored and commits. src.SHA256 stored before
// gives analytics.ErrDuplicate (naming the earlier source and when) and rolls
// back.
func (l *Load) Commit(ctx context.Context, src Source) (id int64, err error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	src.ID, src.State = l.sourceID, SourceStored
	err = insertSource(ctx, l.tx, src)
	if err == nil {
		err = l.tx.Commit(ctx)
	}
	if err = translate(err); err != nil {
		l.tx.Rollback(context.WithoutCancel(ctx))
		if errors.Is(err, analytics.ErrDuplicate) {
			return 0, l.store.explainDuplicate(ctx, src, err)
		}
		return 0, fmt.Errorf("commit source %s: %w", src.Name, err)
	}
	l.store.mu.Lock()
	for hash, id := range l.grids {
		l.store.grids[hash] = id
	}
	l.store.mu.Unlock()
	return src.ID, nil
}

func (s *Store) explainDuplicate(ctx context.Context, src Source, err error) error {
	earlier, find := s.SourceByHash(ctx, src.SHA256)
	if find != nil {
		return err
	}
	return fmt.Errorf("%s: the same bytes were stored as source %d (%s) on %s; nothing is stored twice: %w",
		src.Name, earlier.ID, earlier.Name, earlier.StoredAt.UTC().Format("2006-01-02 15:04:05 UTC"), analytics.ErrDuplicate)
}

// Rollback gives the load up; harmless after Commit.
func (l *Load) Rollback(ctx context.Context) {
	l.mu.Lock()
	defer l.mu.Unlock()
	l.tx.Rollback(ctx) // its error says only that the transaction is over
}

func hashBytes(hexHash string) ([]byte, error) {
	if hexHash == "" {
		return nil, nil
	}
	b, err := hex.DecodeString(hexHash)
	if err != nil || len(b) != 32 {
		return nil, fmt.Errorf("%q is not a SHA-256 in hexadecimal: %w", hexHash, analytics.ErrInvalid)
	}
	return b, nil
}

package db

import (
	"context"
	"encoding/base64"
	"encoding/json"
	"errors"
	"fmt"
	"regexp"
	"strconv"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

// selectWafer reads a wafer with what is known of its growth; scanWafer is its
// other half. The recipe of the wafer itself wins over its run's.
const selectWafer = `
	SELECT w.id, w.name, w.lot,
		coalesce(re.name, ''), ru.number, ru.grown_at,
		coalesce(nullif(w.carrier, ''), ru.carrier, ''), w.ring, w.pocket,
		coalesce(rc.name, ''), coalesce(p.name, ''), rc.colour_model,
		la.name, la.wafer_diameter_mm, la.die_pitch_x_mm, la.die_pitch_y_mm, la.edge_exclusion_mm,
		la.mark, la.mark_angle_deg, la.x_axis, la.y_axis, la.centre_x, la.centre_y` + fromWafer

const fromWafer = `
	FROM wafer w
	LEFT JOIN run ru ON ru.id = w.run_id
	LEFT JOIN reactor re ON re.id = ru.reactor_id
	LEFT JOIN recipe rc ON rc.id = coalesce(w.recipe_id, ru.recipe_id)
	LEFT JOIN product p ON p.id = w.product_id
	LEFT JOIN layout la ON la.id = p.layout_id`

// waferTargets are where a row of selectWafer goes.
type waferTargets struct {
	w                                     Wafer
	name, mark, xAxis, yAxis              *string
	diameter, px, py, edge, angle, cx, cy *float64
}

func (t *waferTargets) into() []any {
	return []any{&t.w.ID, &t.w.Name, &t.w.Lot, &t.w.Reactor, &t.w.Run, &t.w.GrownAt, &t.w.Carrier, &t.w.Ring, &t.w.Pocket,
		&t.w.Recipe, &t.w.Product, &t.w.Colour, &t.name, &t.diameter, &t.px, &t.py, &t.edge, &t.mark, &t.angle, &t.xAxis, &t.yAxis, &t.cx, &t.cy}
}

func (t *waferTargets) wafer() *Wafer {
	if t.name != nil {
		t.w.Layout = &wafermap.Layout{Name: *t.name, WaferDiameterMM: *t.diameter, DiePitchXMM: *t.px, DiePitchYMM: *t.py,
			EdgeExclusionMM: *t.edge, Mark: *t.mark, MarkAngleDeg: *t.angle, XAxis: *t.xAxis, YAxis: *t.yAxis, CentreX: *t.cx, CentreY: *t.cy}
	}
	t.w.Targets = []Target{}
	return &t.w
}

func scanWafer(row pgx.Row) (*Wafer, error) {
	var t waferTargets
	if err := row.Scan(t.into()...); err != nil {
		return nil, err
	}
	return t.wafer(), nil
}

// Wafer finds a wafer by name.
func (s *Store) Wafer(ctx context.Context, name string) (w *Wafer, err error) {
	defer wrap(&err, "wafer %q", name)
	if w, err = scanWafer(s.pool.QueryRow(ctx, selectWafer+` WHERE w.name = $1`, name)); err != nil {
		return nil, err
	}
	w.Targets, err = targetsOf(ctx, s.pool, w.Recipe)
	return w, err
}

func targetsOf(ctx context.Context, q querier, recipe string) ([]Target, error) {
	rows, err := q.Query(ctx, `
		SELECT t.quantity, t.value, t.value_window
		FROM recipe_target t JOIN recipe r ON r.id = t.recipe_id
		WHERE r.name = $1 ORDER BY t.quantity`, recipe)
	if err != nil {
		return nil, err
	}
	ts, err := pgx.CollectRows(rows, pgx.RowToStructByPos[Target])
	if ts == nil {
		ts = []Target{}
	}
	return ts, err
}

// listQuery gathers the parts of the wafers list's SQL.
type listQuery struct {
	where []string
	args  []any
}

func (q *listQuery) arg(v any) string {
	q.args = append(q.args, v)
	return "$" + strconv.Itoa(len(q.args))
}

func (q *listQuery) and(format string, v any) {
	q.where = append(q.where, strings.ReplaceAll(format, "?", q.arg(v)))
}

func (q *listQuery) clause() string {
	if len(q.where) == 0 {
		return ""
	}
	return " WHERE " + strings.Join(q.where, " AND ")
}

// runSearch is "204" or "Heron 204".
var runSearch = regexp.MustCompile(`^(?:(.+?)\s+)?(\d{1,9})$`)

func newListQuery(f WaferFilter) *listQuery {
	q := &listQuery{}
	if search := strings.TrimSpace(f.Search); search != "" {
		prefix := q.arg(escapeLike(strings.ToLower(search)) + "%")
		match := "lower(w.name) LIKE " + prefix + " OR lower(w.lot) LIKE " + prefix
		if m := runSearch.FindStringSubmatch(search); m != nil {
			match += " OR (ru.number = " + q.arg(m[2]) + "::int"
			if m[1] != "" {
				match += " AND lower(re.name) = " + q.arg(strings.ToLower(m[1]))
			}
			match += ")"
		}
		q.where = append(q.where, "("+match+")")
	}
	for _, c := range []struct{ sql, value string }{
		{"w.lot = ?", f.Lot}, {"re.name = ?", f.Reactor}, {"rc.name = ?", f.Recipe}, {"p.name = ?", f.Product},
	} {
		if c.value != "" {
			q.and(c.sql, c.value)
		}
	}
	if f.Run != 0 {
		q.and("ru.number = ?", f.Run)
	}
	switch f.State {
	case "":
	case "unmeasured":
		q.where = append(q.where, "m.id IS NULL")
	default:
		q.and("m.state = ?", f.State)
	}
	if f.Kind != "" && f.State != "unmeasured" {
		q.where = append(q.where, "m.id IS NOT NULL")
	}
	return q
}

func escapeLike(s string) string {
	return strings.NewReplacer(`\`, `\\`, `%`, `\%`, `_`, `\_`).Replace(s)
}

// joinMeasurement is the measurement a line of the list is about: the current
// one of the kind asked for, else the newest of any kind.
func (q *listQuery) joinMeasurement(kind string) string {
	if kind == "" {
		return ` LEFT JOIN measurement m ON m.wafer_id = w.id AND m.id = w.last_measurement_id AND m.measured_at = w.last_measured_at`
	}
	return ` LEFT JOIN measurement m ON m.wafer_id = w.id AND m.is_current AND m.kind = ` + q.arg(kind)
}

const (
	defaultLimit = 50
	maxLimit     = 500
)

func limitOf(n int) (int, error) {
	switch {
	case n == 0:
		return defaultLimit, nil
	case n < 1 || n > maxLimit:
		return 0, fmt.Errorf("limit %d is not between 1 and %d: %w", n, maxLimit, analytics.ErrInvalid)
	}
	return n, nil
}

// Wafers lists wafers, newest measurement first, wafers without one last. Bad
// cursors and limits are analytics.ErrInvalid.
func (s *Store) Wafers(ctx context.Context, f WaferFilter) (page *WaferPage, err error) {
	defer wrap(&err, "list wafers")
	limit, err := limitOf(f.Limit)
	if err != nil {
		return nil, err
	}
	page = &WaferPage{Rows: []WaferRow{}}
	q := newListQuery(f)
	join := q.joinMeasurement(f.Kind)
	if err := s.pool.QueryRow(ctx, `SELECT count(*)`+fromWafer+join+q.clause(), q.args...).Scan(&page.Total); err != nil {
		return nil, err
	}
	if f.Cursor != "" {
		if err := q.after(f.Cursor); err != nil {
			return nil, err
		}
	}
	sql := q.rowsSQL(join, f.Spec) + ` ORDER BY m.measured_at DESC NULLS LAST, w.id DESC LIMIT ` + q.arg(limit+1)
	rows, err := s.pool.Query(ctx, sql, q.args...)
	if err != nil {
		return nil, err
	}
	declared, err := s.declared(ctx)
	if err != nil {
		rows.Close()
		return nil, err
	}
	page.Rows, err = pgx.CollectRows(rows, func(row pgx.CollectableRow) (WaferRow, error) { return scanWaferRow(row, declared) })
	if err != nil {
		return nil, err
	}
	if len(page.Rows) > limit {
		page.Rows = page.Rows[:limit]
		page.Next = cursorOf(page.Rows[limit-1])
	}
	return page, s.fillTargets(ctx, page.Rows)
}

// StateCounts counts the wafers that a filter selects by their colour state;
// wafers without a target count under "". Cursor and Limit do not matter.
func (s *Store) StateCounts(ctx context.Context, f WaferFilter) (counts map[string]int, err error) {
	defer wrap(&err, "count wafers by state")
	q := newListQuery(f)
	join := q.joinMeasurement(f.Kind)
	return countsBy(s.pool.Query(ctx, `SELECT coalesce(m.state, 'unmeasured'), count(*)`+fromWafer+join+q.clause()+` GROUP BY 1`, q.args...))
}

// rowsSQL joins the one summary and the one tally that a line shows.
func (q *listQuery) rowsSQL(join, spec string) string {
	sql := strings.Replace(selectWafer, fromWafer, `,
		m.id, m.kind, m.station, m.measured_at, m.drive_current_ma, m.dies, m.remeasured, m.is_current, m.source_id, m.state,
		s.quantity, s.figures, t.name, t.version, t.dies, t.tested, t.good, t.denominator, t.over_layout, t.cells`+fromWafer, 1) + join + `
	LEFT JOIN summary s ON s.wafer_id = w.id AND s.measurement_id = m.id AND s.measured_at = m.measured_at AND s.quantity = m.main_quantity
	LEFT JOIN LATERAL (
		SELECT sp.name, sp.version, ta.* FROM tally ta JOIN spec sp ON sp.id = ta.spec_id
		WHERE ta.wafer_id = w.id AND ta.measurement_id = m.id AND ta.measured_at = m.measured_at`
	if spec != "" {
		sql += ` AND sp.name = ` + q.arg(spec)
	}
	return sql + ` ORDER BY sp.name, sp.version DESC LIMIT 1) t ON true` + q.clause()
}

func scanWaferRow(row pgx.CollectableRow, declared declaredQuantities) (WaferRow, error) {
	var wt waferTargets
	var m struct {
		id, source           *int64
		kind, station, state *string
		at                   *time.Time
		drive                *float64
		dies, remeasured     *int
		current              *bool
	}
	var quantityName *string
	var figures []byte
	var t tallyTargets
	into := append(wt.into(), &m.id, &m.kind, &m.station, &m.at, &m.drive, &m.dies, &m.remeasured, &m.current, &m.source, &m.state, &quantityName, &figures)
	if err := row.Scan(append(into, t.into()...)...); err != nil {
		return WaferRow{}, err
	}
	r := WaferRow{Wafer: *wt.wafer(), State: "unmeasured"}
	if m.id == nil {
		return r, nil
	}
	r.State = *m.state
	r.Measurement = &Measurement{ID: *m.id, WaferID: r.Wafer.ID, Wafer: r.Wafer.Name, Kind: *m.kind, Station: *m.station, MeasuredAt: *m.at,
		DriveCurrentMA: m.drive, Dies: *m.dies, Remeasured: *m.remeasured, Current: *m.current, SourceID: *m.source}
	if quantityName != nil {
		r.Main = &Summary{MeasurementID: *m.id, Quantity: declared.find(*quantityName)}
		if err := json.Unmarshal(figures, &r.Main.Summary); err != nil {
			return r, err
		}
	}
	var err error
	r.Tally, err = t.tally(*m.id)
	return r, err
}

// fillTargets reads the targets of the recipes of one page in one query.
func (s *Store) fillTargets(ctx context.Context, rows []WaferRow) error {
	names := map[string][]Target{}
	for _, r := range rows {
		names[r.Wafer.Recipe] = nil
	}
	list := make([]string, 0, len(names))
	for n := range names {
		list = append(list, n)
	}
	found, err := s.pool.Query(ctx, `
		SELECT r.name, t.quantity, t.value, t.value_window
		FROM recipe r JOIN recipe_target t ON t.recipe_id = r.id WHERE r.name = ANY ($1) ORDER BY r.name, t.quantity`, list)
	if err != nil {
		return err
	}
	var recipe string
	var t Target
	if _, err := pgx.ForEachRow(found, []any{&recipe, &t.Quantity, &t.Value, &t.Window}, func() error {
		names[recipe] = append(names[recipe], t)
		return nil
	}); err != nil {
		return err
	}
	for i := range rows {
		if ts := names[rows[i].Wafer.Recipe]; ts != nil {
			rows[i].Wafer.Targets = ts
		}
	}
	return nil
}

// A cursor is the last line's place in the order: its time in microseconds (or
// "-" for a wafer without a measurement) and its wafer.
func cursorOf(r WaferRow) string {
	at := "-"
	if r.Measurement != nil {
		at = strconv.FormatInt(r.Measurement.MeasuredAt.UnixMicro(), 10)
	}
	return base64.RawURLEncoding.EncodeToString([]byte(at + "," + strconv.FormatInt(r.Wafer.ID, 10)))
}

var errCursor = errors.New("the cursor was not given by this list; start without one")

func (q *listQuery) after(cursor string) error {
	text, err := base64.RawURLEncoding.DecodeString(cursor)
	at, idText, found := strings.Cut(string(text), ",")
	id, idErr := strconv.ParseInt(idText, 10, 64)
	if err != nil || !found || idErr != nil {
		return fmt.Errorf("%w: %w", errCursor, analytics.ErrInvalid)
	}
	if at == "-" {
		q.and("m.measured_at IS NULL AND w.id < ?", id)
		return nil
	}
	micro, err := strconv.ParseInt(at, 10, 64)
	if err != nil {
		return fmt.Errorf("%w: %w", errCursor, analytics.ErrInvalid)
	}
	when, wafer := q.arg(time.UnixMicro(micro).UTC()), q.arg(id)
	q.where = append(q.where, fmt.Sprintf("(m.measured_at IS NULL OR (m.measured_at, w.id) < (%s, %s))", when, wafer))
	return nil
}

// FilterChoices lists what the wafers list can be filtered by.
func (s *Store) FilterChoices(ctx context.Context) (c *FilterChoices, err error) {
	defer wrap(&err, "filter choices")
	c = &FilterChoices{States: []string{"on colour", "short", "long", "mixed", "unmeasured"}}
	err = s.pool.QueryRow(ctx, `
		SELECT ARRAY(SELECT lot FROM (SELECT lot, max(id) AS newest FROM wafer WHERE lot <> '' GROUP BY lot ORDER BY newest DESC LIMIT 200) l),
			ARRAY(SELECT name FROM reactor ORDER BY name),
			ARRAY(SELECT name FROM recipe ORDER BY name),
			ARRAY(SELECT name FROM product ORDER BY name),
			ARRAY(SELECT name FROM spec WHERE latest ORDER BY name),
			ARRAY(SELECT DISTINCT kind FROM measurement WHERE is_current ORDER BY kind)`).
		Scan(&c.Lots, &c.Reactors, &c.Recipes, &c.Products, &c.Specs, &c.Kinds)
	return c, err
}

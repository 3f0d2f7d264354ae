package db

import (
	"context"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"

	"epitally/analytics/colour"
	"epitally/analytics/quantity"
)

// NewRunSheetRow is where one wafer grew.
type NewRunSheetRow struct {
	Wafer, Lot, Reactor, Carrier, Ring, Pocket, Recipe, Product string
	Run                                                         int
	GrownAt                                                     *time.Time
}

// PutRunSheet stores rows; a wafer named again takes the newer facts, and keeps
// what the newer row leaves empty. It marks the wafers' measurements stale.
func (l *Load) PutRunSheet(ctx context.Context, rows []NewRunSheetRow) (err error) {
	defer wrap(&err, "store run sheet of %d wafers", len(rows))
	l.mu.Lock()
	defer l.mu.Unlock()
	batch := &pgx.Batch{}
	batch.Queue(lockDocuments)
	wafers := make([]string, len(rows))
	for i, r := range rows {
		wafers[i] = r.Wafer
		queueNames(batch, r)
		if r.Reactor != "" && r.Run > 0 {
			batch.Queue(`
				INSERT INTO run AS ru (reactor_id, number, recipe_id, carrier, grown_at)
				SELECT re.id, $2, (SELECT id FROM recipe WHERE name = $3), $4, $5 FROM reactor re WHERE re.name = $1
				ON CONFLICT (reactor_id, number) DO UPDATE SET
					recipe_id = coalesce(excluded.recipe_id, ru.recipe_id),
					carrier = coalesce(nullif(excluded.carrier, ''), ru.carrier),
					grown_at = coalesce(excluded.grown_at, ru.grown_at)
				WHERE (ru.recipe_id, ru.carrier, ru.grown_at) IS DISTINCT FROM (coalesce(excluded.recipe_id, ru.recipe_id),
					coalesce(nullif(excluded.carrier, ''), ru.carrier), coalesce(excluded.grown_at, ru.grown_at))`,
				r.Reactor, r.Run, r.Recipe, r.Carrier, r.GrownAt)
		}
		batch.Queue(`
			INSERT INTO wafer AS w (name, lot, run_id, carrier, ring, pocket, recipe_id, product_id)
			VALUES ($1, $2, (SELECT ru.id FROM run ru JOIN reactor re ON re.id = ru.reactor_id WHERE re.name = $3 AND ru.number = $4),
				$5, $6, $7, (SELECT id FROM recipe WHERE name = $8), (SELECT id FROM product WHERE name = $9))
			ON CONFLICT (name) DO UPDATE SET
				lot = coalesce(nullif(excluded.lot, ''), w.lot), run_id = coalesce(excluded.run_id, w.run_id),
				carrier = coalesce(nullif(excluded.carrier, ''), w.carrier), ring = coalesce(nullif(excluded.ring, ''), w.ring),
				pocket = coalesce(nullif(excluded.pocket, ''), w.pocket), recipe_id = coalesce(excluded.recipe_id, w.recipe_id),
				product_id = coalesce(excluded.product_id, w.product_id)`,
			r.Wafer, r.Lot, r.Reactor, r.Run, r.Carrier, r.Ring, r.Pocket, r.Recipe, r.Product)
	}
	batch.Queue(`UPDATE measurement SET stale = true WHERE wafer_id IN (SELECT id FROM wafer WHERE name = ANY ($1))`, wafers)
	clear(l.specs)
	return l.tx.SendBatch(ctx, batch).Close()
}

// queueNames makes the reactor, recipe and product that a row names.
func queueNames(batch *pgx.Batch, r NewRunSheetRow) {
	for _, n := range []struct{ table, name string }{{"reactor", r.Reactor}, {"recipe", r.Recipe}, {"product", r.Product}} {
		if n.name != "" {
			batch.Queue(`INSERT INTO `+n.table+` (name) SELECT $1 WHERE NOT EXISTS (SELECT FROM `+n.table+` WHERE name = $1) ON CONFLICT (name) DO NOTHING`, n.name)
		}
	}
}

// Catalogue is what a fab declares by hand: layouts (inside products), recipes
// and quantities.
type Catalogue struct {
	Products   []Product
	Recipes    []Recipe
	Quantities []quantity.Quantity
	Stations   []Station
}

// Station is what one station's readings are worth.
type Station struct {
	Name        string
	Uncertainty map[string]float64 // standard uncertainty of one reading by quantity, in its unit
}

// PutCatalogue inserts or updates and marks measurements of changed products,
// recipes and stations stale.
func (l *Load) PutCatalogue(ctx context.Context, c Catalogue) (err error) {
	defer wrap(&err, "store catalogue")
	l.mu.Lock()
	defer l.mu.Unlock()
	batch := &pgx.Batch{}
	batch.Queue(lockDocuments)
	var products, recipes, stations []string
	for _, p := range c.Products {
		if err := p.Layout.Validate(); err != nil {
			return err
		}
		products = append(products, p.Name)
		queueProduct(batch, p)
	}
	for _, r := range c.Recipes {
		recipes = append(recipes, r.Name)
		queueRecipe(batch, r)
	}
	for _, st := range c.Stations {
		stations = append(stations, st.Name)
		batch.Queue(`DELETE FROM station_uncertainty WHERE station = $1`, st.Name)
		for q, u := range st.Uncertainty {
			batch.Queue(`INSERT INTO station_uncertainty (station, quantity, standard_uncertainty) VALUES ($1, $2, $3)`, st.Name, q, u)
		}
	}
	for _, q := range c.Quantities {
		batch.Queue(upsertQuantity, q.Name, q.Label, q.Unit, q.Resolution)
	}
	batch.Queue(`
		UPDATE measurement m SET stale = true
		FROM wafer w LEFT JOIN run ru ON ru.id = w.run_id
		WHERE w.id = m.wafer_id AND (w.product_id IN (SELECT id FROM product WHERE name = ANY ($1))
			OR m.station = ANY ($3)
			OR coalesce(w.recipe_id, ru.recipe_id) IN (SELECT id FROM recipe WHERE name = ANY ($2)))`, products, recipes, stations)
	clear(l.targets)
	clear(l.stations)
	return l.tx.SendBatch(ctx, batch).Close()
}

func queueProduct(batch *pgx.Batch, p Product) {
	a := p.Layout
	if a.Name == "" {
		a.Name = p.Name
	}
	batch.Queue(`
		INSERT INTO layout (name, wafer_diameter_mm, die_pitch_x_mm, die_pitch_y_mm, edge_exclusion_mm, mark, mark_angle_deg, x_axis, y_axis, centre_x, centre_y)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11)
		ON CONFLICT (name) DO UPDATE SET wafer_diameter_mm = excluded.wafer_diameter_mm, die_pitch_x_mm = excluded.die_pitch_x_mm,
			die_pitch_y_mm = excluded.die_pitch_y_mm, edge_exclusion_mm = excluded.edge_exclusion_mm, mark = excluded.mark,
			mark_angle_deg = excluded.mark_angle_deg, x_axis = excluded.x_axis, y_axis = excluded.y_axis,
			centre_x = excluded.centre_x, centre_y = excluded.centre_y`,
		a.Name, a.WaferDiameterMM, a.DiePitchXMM, a.DiePitchYMM, a.EdgeExclusionMM, a.Mark, a.MarkAngleDeg, a.XAxis, a.YAxis, a.CentreX, a.CentreY)
	batch.Queue(`
		INSERT INTO product (name, layout_id) SELECT $1, id FROM layout WHERE name = $2
		ON CONFLICT (name) DO UPDATE SET layout_id = excluded.layout_id`, p.Name, a.Name)
}

func queueRecipe(batch *pgx.Batch, r Recipe) {
	batch.Queue(`INSERT INTO recipe (name, colour_model) VALUES ($1, $2) ON CONFLICT (name) DO UPDATE SET colour_model = excluded.colour_model`, r.Name, r.Colour)
	batch.Queue(`DELETE FROM recipe_target WHERE recipe_id = (SELECT id FROM recipe WHERE name = $1)`, r.Name)
	for _, t := range r.Targets {
		batch.Queue(`INSERT INTO recipe_target (recipe_id, quantity, value, value_window) SELECT id, $2, $3, $4 FROM recipe WHERE name = $1`,
			r.Name, t.Quantity, t.Value, t.Window)
	}
}

// StationUncertainty reads what a station says of its readings: the standard
// uncertainty by quantity. A station that says nothing has none.
func (s *Store) StationUncertainty(ctx context.Context, station string) (u map[string]float64, err error) {
	defer wrap(&err, "uncertainties of station %q", station)
	return stationUncertainty(ctx, s.pool, station)
}

func stationUncertainty(ctx context.Context, q querier, station string) (map[string]float64, error) {
	rows, err := q.Query(ctx, `SELECT quantity, standard_uncertainty FROM station_uncertainty WHERE station = $1`, station)
	if err != nil {
		return nil, err
	}
	out := map[string]float64{}
	var name string
	var u float64
	_, err = pgx.ForEachRow(rows, []any{&name, &u}, func() error { out[name] = u; return nil })
	return out, err
}

// Products lists products that a catalogue has described, by name.
func (s *Store) Products(ctx context.Context) (out []Product, err error) {
	defer wrap(&err, "products")
	rows, err := s.pool.Query(ctx, `
		SELECT p.name, la.name, la.wafer_diameter_mm, la.die_pitch_x_mm, la.die_pitch_y_mm, la.edge_exclusion_mm,
			la.mark, la.mark_angle_deg, la.x_axis, la.y_axis, la.centre_x, la.centre_y
		FROM product p JOIN layout la ON la.id = p.layout_id ORDER BY p.name`)
	if err != nil {
		return nil, err
	}
	out, err = pgx.CollectRows(rows, func(row pgx.CollectableRow) (p Product, err error) {
		a := &p.Layout
		err = row.Scan(&p.Name, &a.Name, &a.WaferDiameterMM, &a.DiePitchXMM, &a.DiePitchYMM, &a.EdgeExclusionMM,
			&a.Mark, &a.MarkAngleDeg, &a.XAxis, &a.YAxis, &a.CentreX, &a.CentreY)
		return p, err
	})
	if out == nil {
		out = []Product{}
	}
	return out, err
}

// Recipes lists recipes with their targets, by name.
func (s *Store) Recipes(ctx context.Context) (out []Recipe, err error) {
	defer wrap(&err, "recipes")
	rows, err := s.pool.Query(ctx, `
		SELECT r.name, r.colour_model, coalesce(t.quantity, ''), coalesce(t.value, 0), coalesce(t.value_window, 0)
		FROM recipe r LEFT JOIN recipe_target t ON t.recipe_id = r.id ORDER BY r.name, t.quantity`)
	if err != nil {
		return nil, err
	}
	out = []Recipe{}
	var name string
	var model *colour.PeakModel
	var t Target
	_, err = pgx.ForEachRow(rows, []any{&name, &model, &t.Quantity, &t.Value, &t.Window}, func() error {
		if len(out) == 0 || out[len(out)-1].Name != name {
			out = append(out, Recipe{Name: name, Targets: []Target{}, Colour: model})
		}
		if t.Quantity != "" {
			last := &out[len(out)-1]
			last.Targets = append(last.Targets, t)
		}
		return nil
	})
	return out, err
}

// Runs lists growth runs of a reactor ("" = all), newest first.
func (s *Store) Runs(ctx context.Context, reactor string, limit int) (out []GrowthRun, err error) {
	defer wrap(&err, "runs")
	if limit, err = limitOf(limit); err != nil {
		return nil, err
	}
	rows, err := s.pool.Query(ctx, `
		SELECT re.name, ru.number, coalesce(rc.name, ''), ru.carrier, ru.grown_at, (SELECT count(*) FROM wafer w WHERE w.run_id = ru.id)::int
		FROM run ru JOIN reactor re ON re.id = ru.reactor_id LEFT JOIN recipe rc ON rc.id = ru.recipe_id
		WHERE $1 = '' OR re.name = $1 ORDER BY ru.grown_at DESC NULLS LAST, ru.number DESC, re.name LIMIT $2`, reactor, limit)
	if err != nil {
		return nil, fmt.Errorf("runs of %q: %w", reactor, err)
	}
	out, err = pgx.CollectRows(rows, pgx.RowToStructByPos[GrowthRun])
	if out == nil {
		out = []GrowthRun{}
	}
	return out, err
}

package db

import (
	"context"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"

	"epitally/analytics/binning"
)

// Complaint is something that is wrong in a database.
type Complaint struct {
	Check  string `json:"check"`  // which look found it
	Says   string `json:"says"`   // what is wrong, with its numbers and where
	Remedy string `json:"remedy"` // what to do
	Count  int    `json:"count"`  // how many rows it concerns
}

// Examination is what an examination of a database looks at and tells.
type Examination struct {
	Planes   bool                  // decode every plane: long, but the only way to know
	Now      time.Time             // for the partitions that must exist
	Progress func(done, total int) // planes decoded; nil = nobody
	Begins   func(check string)    // a check begins; nil = nobody
	found    []Complaint
	store    *Store
}

// partitionsAhead is how many months the server makes partitions ahead.
const partitionsAhead = 1

// Examine looks through the database for what should not be and says what to do.
// It changes nothing. An error means that it could not look.
func (s *Store) Examine(ctx context.Context, e Examination) (found []Complaint, err error) {
	defer wrap(&err, "examine the database")
	e.store = s
	for _, check := range []struct {
		name string
		run  func(context.Context) error
	}{
		{"orphans", e.orphans}, {"current measurements", e.currents}, {"partitions", e.partitions},
		{"counts", e.counts}, {"documents", e.documents}, {"planes", e.planes},
	} {
		if check.name == "planes" && !e.Planes {
			continue
		}
		if e.Begins != nil {
			e.Begins(check.name)
		}
		if err := check.run(ctx); err != nil {
			return nil, fmt.Errorf("%s: %w", check.name, err)
		}
	}
	return e.found, nil
}

func (e *Examination) complain(check string, count int, remedy, says string, args ...any) {
	if count > 0 {
		e.found = append(e.found, Complaint{check, fmt.Sprintf(says, args...), remedy, count})
	}
}

// count asks for a number of rows and one example of them.
func (e *Examination) count(ctx context.Context, sql string, args ...any) (n int, example string, err error) {
	err = e.store.pool.QueryRow(ctx, `SELECT count(*), coalesce(min(example), '') FROM (`+sql+`) rows`, args...).Scan(&n, &example)
	return n, example, err
}

// orphans looks for rows whose measurement is gone, and measurements that lack
// what belongs to them.
func (e *Examination) orphans(ctx context.Context) error {
	const restore = "restore the database from a backup taken before; rows were deleted by hand"
	for _, table := range []string{"plane", "summary", "small_map", "tally"} {
		n, example, err := e.count(ctx, `
			SELECT t.measurement_id::text AS example FROM `+table+` t
			WHERE NOT EXISTS (SELECT FROM measurement m WHERE m.wafer_id = t.wafer_id AND m.id = t.measurement_id AND m.measured_at = t.measured_at)`)
		if err != nil {
			return err
		}
		e.complain("orphans", n, restore, "%d rows of %s belong to no measurement, as to number %s", n, table, example)
	}
	for _, look := range []struct{ sql, says string }{
		{`SELECT m.id::text AS example FROM measurement m WHERE NOT EXISTS (SELECT FROM measurement_key k WHERE k.id = m.id AND k.wafer_id = m.wafer_id AND k.measured_at = m.measured_at)`,
			"%d measurements cannot be found by their number, as %s"},
		{`SELECT k.id::text AS example FROM measurement_key k WHERE NOT EXISTS (SELECT FROM measurement m WHERE m.wafer_id = k.wafer_id AND m.id = k.id AND m.measured_at = k.measured_at)`,
			"%d numbers lead to no measurement, as %s"},
		{`SELECT m.id::text AS example FROM measurement m WHERE NOT EXISTS (SELECT FROM plane p WHERE p.wafer_id = m.wafer_id AND p.measurement_id = m.id AND p.measured_at = m.measured_at)`,
			"%d measurements have no plane, as %s"},
		{`SELECT m.id::text AS example FROM measurement m WHERE NOT EXISTS (SELECT FROM source s WHERE s.id = m.source_id)`,
			"%d measurements came from no source, as %s"},
		{`SELECT m.id::text AS example FROM measurement m WHERE NOT EXISTS (SELECT FROM die_grid g WHERE g.id = m.grid_id)`,
			"%d measurements have no die grid, as %s"},
		{`SELECT m.id::text AS example FROM measurement m WHERE NOT EXISTS (SELECT FROM wafer w WHERE w.id = m.wafer_id)`,
			"%d measurements are of no wafer, as %s"},
	} {
		n, example, err := e.count(ctx, look.sql)
		if err != nil {
			return err
		}
		e.complain("orphans", n, restore, look.says, n, example)
	}
	return nil
}

// currents looks for wafers of which none or several measurements of a kind are
// current, and for derived numbers that wait.
func (e *Examination) currents(ctx context.Context) error {
	n, example, err := e.count(ctx, `
		SELECT min(w.name) || ' (' || m.kind || ')' AS example FROM measurement m LEFT JOIN wafer w ON w.id = m.wafer_id
		GROUP BY m.wafer_id, m.kind HAVING count(*) FILTER (WHERE m.is_current) <> 1`)
	if err != nil {
		return err
	}
	e.complain("current measurements", n, "load the newest file of the wafer again under another name, or restore a backup",
		"%d times not exactly one measurement of a kind is current, as of wafer %s", n, example)
	n, example, err = e.count(ctx, `SELECT id::text AS example FROM measurement WHERE stale`)
	if err != nil {
		return err
	}
	e.complain("current measurements", n, "let a server run: it brings them up to date with the next scan",
		"%d measurements wait for their derived numbers, as %s", n, example)
	return nil
}

// partitions looks for months without partitions: those that data is in and those
// that will soon be needed.
func (e *Examination) partitions(ctx context.Context) error {
	first := time.Date(e.Now.UTC().Year(), e.Now.UTC().Month(), 1, 0, 0, 0, 0, time.UTC)
	for ahead := range partitionsAhead + 1 {
		month := first.AddDate(0, ahead, 0).Format("2006_01")
		var missing []string
		rows, err := e.store.pool.Query(ctx, `
			SELECT parent || '_' || $1 FROM unnest(ARRAY['measurement', 'plane', 'summary', 'small_map', 'tally']) parent
			WHERE to_regclass(parent || '_' || $1) IS NULL ORDER BY 1`, month)
		if err != nil {
			return err
		}
		if missing, err = pgx.CollectRows(rows, pgx.RowTo[string]); err != nil {
			return err
		}
		e.complain("partitions", len(missing), "start the server: it makes the partitions it needs", "the partitions %v are missing", missing)
	}
	return nil
}

// counts holds the numbers of dies to one another.
func (e *Examination) counts(ctx context.Context) error {
	const reload = "load the measurement's file again from its folder of loaded files, under another name"
	for _, look := range []struct{ sql, says string }{
		{`SELECT p.measurement_id::text || ' ' || p.quantity AS example FROM plane p
			JOIN measurement m ON m.wafer_id = p.wafer_id AND m.id = p.measurement_id AND m.measured_at = p.measured_at WHERE p.n <> m.dies`,
			"%d planes have another number of dies than their measurement, as %s"},
		{`SELECT m.id::text AS example FROM measurement m JOIN die_grid g ON g.id = m.grid_id WHERE g.n <> m.dies`,
			"%d measurements have another number of dies than their grid, as %s"},
		{`SELECT t.measurement_id::text AS example FROM tally t
			WHERE t.dies <> (SELECT coalesce(sum((c ->> 'dies')::bigint), 0) FROM jsonb_array_elements(t.cells) c)`,
			"the bins of %d tallies do not add up to their dies, as of measurement %s"},
	} {
		n, example, err := e.count(ctx, look.sql)
		if err != nil {
			return err
		}
		e.complain("counts", n, reload, look.says, n, example)
	}
	return nil
}

// documents reads every specification that is in use.
func (e *Examination) documents(ctx context.Context) error {
	specs, err := e.store.Specs(ctx)
	if err != nil {
		return err
	}
	for _, sp := range specs {
		if _, err := binning.Parse([]byte(sp.Document)); err != nil {
			e.complain("documents", 1, "publish a mended version on its page or load its file again", "specification %s version %d cannot be read: %v", sp.Name, sp.Version, err)
		}
	}
	return nil
}

// planes decodes every plane there is.
func (e *Examination) planes(ctx context.Context) error {
	var total int
	if err := e.store.pool.QueryRow(ctx, `SELECT count(*) FROM plane`).Scan(&total); err != nil {
		return err
	}
	rows, err := e.store.pool.Query(ctx, `SELECT measurement_id, quantity, encoding, base, resolution, n, data FROM plane`)
	if err != nil {
		return err
	}
	var id int64
	var name string
	var sp StoredPlane
	done, bad := 0, 0
	first := ""
	_, err = pgx.ForEachRow(rows, []any{&id, &name, &sp.Encoding, &sp.Base, &sp.Resolution, &sp.N, (*pgxBytes)(&sp.Data)}, func() error {
		p, err := DecodePlane(name, sp)
		if err == nil {
			err = p.Validate()
		}
		if err != nil {
			if bad++; first == "" {
				first = fmt.Sprintf("%s of measurement %d: %v", name, id, err)
			}
		}
		if done++; e.Progress != nil {
			e.Progress(done, total)
		}
		return nil
	})
	e.complain("planes", bad, "load the measurements' files again from their folder of loaded files, under another name", "%d planes cannot be decoded, as %s", bad, first)
	return err
}

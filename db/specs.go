package db

import (
	"context"
	"errors"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"epitally/analytics/binning"
)

const selectSpec = `
	SELECT id, name, version, title, kind, products, document, stored_at, latest, author, reason,
		coalesce(valid_from::text, ''), coalesce(valid_until::text, '')
	FROM spec`

func collectSpecs(rows pgx.Rows, err error) ([]Spec, error) {
	if err != nil {
		return nil, err
	}
	specs, err := pgx.CollectRows(rows, pgx.RowToStructByPos[Spec])
	if specs == nil {
		specs = []Spec{}
	}
	return specs, err
}

// Specs lists the latest version of every spec by name.
func (s *Store) Specs(ctx context.Context) (specs []Spec, err error) {
	defer wrap(&err, "specifications")
	return collectSpecs(s.pool.Query(ctx, selectSpec+` WHERE latest ORDER BY name`))
}

// Spec finds one; version 0 = the latest.
func (s *Store) Spec(ctx context.Context, name string, version int) (spec *Spec, err error) {
	defer wrap(&err, "specification %q version %d", name, version)
	rows, err := s.pool.Query(ctx, selectSpec+` WHERE name = $1 AND (version = $2 OR ($2 = 0 AND latest))`, name, version)
	if err != nil {
		return nil, err
	}
	one, err := pgx.CollectExactlyOneRow(rows, pgx.RowToStructByPos[Spec])
	return &one, err
}

// SpecVersions lists every version of a spec, newest first.
func (s *Store) SpecVersions(ctx context.Context, name string) (specs []Spec, err error) {
	defer wrap(&err, "versions of specification %q", name)
	return collectSpecs(s.pool.Query(ctx, selectSpec+` WHERE name = $1 ORDER BY version DESC`, name))
}

// SpecsFor lists, of every spec that bins measurements of a kind of a product's
// wafers, the newest version that is in force on the day of measurement.
func (s *Store) SpecsFor(ctx context.Context, product, kind string, measuredAt time.Time) (specs []Spec, err error) {
	defer wrap(&err, "specifications of product %q", product)
	return specsFor(ctx, s.pool, product, kind, dayOf(measuredAt))
}

// dayOf is the date that a specification's validity is asked for, as binning.Spec
// reads it.
func dayOf(t time.Time) string { return t.UTC().Format(time.DateOnly) }

func specsFor(ctx context.Context, q querier, product, kind, day string) ([]Spec, error) {
	return collectSpecs(q.Query(ctx, `WITH in_force AS (
		SELECT DISTINCT ON (name) * FROM spec
		WHERE coalesce(valid_from <= $3::date, true) AND coalesce(valid_until >= $3::date, true)
		ORDER BY name, version DESC)`+strings.Replace(selectSpec, "FROM spec", "FROM in_force", 1)+`
		WHERE kind = $2 AND $1 = ANY (products) ORDER BY name`, product, kind, day))
}

// PutSpec stores document as the next version of its spec, or answers the
// existing version when the document is the same as the latest. It marks
// measurements of its products and kind stale. All of s is used
// but ID, Version, StoredAt and Latest.
func (l *Load) PutSpec(ctx context.Context, s Spec) (out Spec, err error) {
	defer wrap(&err, "store specification %q", s.Name)
	l.mu.Lock()
	defer l.mu.Unlock()
	// Versions stored at once take turns too, so that their numbers have no gap.
	if _, err := l.tx.Exec(ctx, lockDocuments); err != nil {
		return out, err
	}
	rows, err := l.tx.Query(ctx, selectSpec+` WHERE name = $1 AND latest`, s.Name)
	if err != nil {
		return out, err
	}
	latest, err := pgx.CollectExactlyOneRow(rows, pgx.RowToStructByPos[Spec])
	if err != nil && !errors.Is(err, pgx.ErrNoRows) {
		return out, err
	}
	if latest.Document == s.Document {
		return latest, nil
	}
	if s.Products == nil {
		s.Products = []string{}
	}
	batch := &pgx.Batch{}
	batch.Queue(`UPDATE spec SET latest = false WHERE name = $1 AND latest`, s.Name)
	batch.Queue(`
		INSERT INTO spec (name, version, title, kind, products, document, latest, author, reason, valid_from, valid_until)
		VALUES ($1, $2, $3, $4, $5, $6, true, $7, $8, nullif($9, '')::date, nullif($10, '')::date)`,
		s.Name, latest.Version+1, s.Title, s.Kind, s.Products, s.Document, s.Author, s.Reason, s.ValidFrom, s.ValidUntil)
	batch.Queue(`
		UPDATE measurement m SET stale = true
		FROM wafer w JOIN product p ON p.id = w.product_id
		WHERE w.id = m.wafer_id AND m.kind = $1 AND p.name = ANY ($2)`, s.Kind, append(s.Products, latest.Products...))
	if err := l.tx.SendBatch(ctx, batch).Close(); err != nil {
		return out, err
	}
	clear(l.specs)
	rows, err = l.tx.Query(ctx, selectSpec+` WHERE name = $1 AND latest`, s.Name)
	if err != nil {
		return out, err
	}
	return pgx.CollectExactlyOneRow(rows, pgx.RowToStructByPos[Spec])
}

// SpecYield is one wafer's stored yield under a spec's latest version.
type SpecYield struct {
	Wafer       string    `json:"wafer"`
	Lot         string    `json:"lot"`
	MeasuredAt  time.Time `json:"measured_at"`
	Good        int       `json:"good"`
	Denominator int       `json:"denominator"`
}

// SpecYields lists current measurements tallied under a spec, newest first.
func (s *Store) SpecYields(ctx context.Context, name string, limit int) (yields []SpecYield, err error) {
	defer wrap(&err, "yields under specification %q", name)
	rows, err := s.pool.Query(ctx, `
		SELECT w.name, w.lot, m.measured_at, t.good, t.denominator
		FROM spec sp
		JOIN tally t ON t.spec_id = sp.id
		JOIN measurement m ON m.wafer_id = t.wafer_id AND m.id = t.measurement_id AND m.measured_at = t.measured_at AND m.is_current
		JOIN wafer w ON w.id = m.wafer_id
		WHERE sp.name = $1 AND sp.latest ORDER BY m.measured_at DESC, m.id DESC LIMIT $2`, name, limit)
	if err != nil {
		return nil, err
	}
	yields, err = pgx.CollectRows(rows, pgx.RowToStructByPos[SpecYield])
	if yields == nil {
		yields = []SpecYield{}
	}
	return yields, err
}

// PutProfile stores a reading profile by name, a new version when it changed.
func (l *Load) PutProfile(ctx context.Context, name, document string) (err error) {
	defer wrap(&err, "store reading profile %q", name)
	l.mu.Lock()
	defer l.mu.Unlock()
	_, err = l.tx.Exec(ctx, `
		WITH latest AS (SELECT version, document FROM reading_profile WHERE name = $1 ORDER BY version DESC LIMIT 1)
		INSERT INTO reading_profile (name, version, document)
		SELECT $1, coalesce((SELECT version FROM latest), 0) + 1, $2
		WHERE (SELECT document FROM latest) IS DISTINCT FROM $2`, name, document)
	return err
}

// Profiles lists the latest version of every reading profile by name.
func (s *Store) Profiles(ctx context.Context) (ps []Profile, err error) {
	defer wrap(&err, "reading profiles")
	rows, err := s.pool.Query(ctx, `SELECT DISTINCT ON (name) name, version, document, stored_at FROM reading_profile ORDER BY name, version DESC`)
	if err != nil {
		return nil, err
	}
	ps, err = pgx.CollectRows(rows, pgx.RowToStructByPos[Profile])
	if ps == nil {
		ps = []Profile{}
	}
	return ps, err
}

// NewSpec is what of a parsed document is stored; the author and the reason are
// the publisher's, "" for a file that came by the drop folder.
func NewSpec(parsed *binning.Spec, document, author, reason string) Spec {
	day := func(t time.Time) string {
		if t.IsZero() {
			return ""
		}
		return t.Format(time.DateOnly)
	}
	return Spec{Name: parsed.Name, Title: parsed.Title, Kind: parsed.Kind, Products: parsed.Products, Document: document,
		Author: author, Reason: reason, ValidFrom: day(parsed.ValidFrom), ValidUntil: day(parsed.ValidUntil)}
}

package db

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"net"
	"sync"
	"syscall"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"epitally/analytics"
	"epitally/analytics/wafermap"
	"epitally/migrations"
)

// Config says which database and how many connections.
type Config struct {
	URL      string // postgres:// URL or keyword string
	MaxConns int    // 0 = 8
}

// Store is everything that speaks SQL. Its methods may be called from any
// number of goroutines.
type Store struct {
	pool *pgxpool.Pool

	mu       sync.Mutex
	months   map[string]bool           // months whose partitions are known to exist
	grids    map[[32]byte]int64        // committed grids by hash
	derivers sync.Pool                 // of *derive.Deriver
	decoded  map[string]*wafermap.Grid // a few grids in memory, by hex hash
	counted  map[wafermap.Layout]int   // dies inside the edge exclusion
}

// Open connects, refuses a schema that is older or newer than this binary's
// (after Migrate it never is), and checks server version and LZ4.
func Open(ctx context.Context, c Config) (s *Store, err error) {
	defer wrap(&err, "open database")
	config, err := pgxpool.ParseConfig(c.URL)
	if err != nil {
		return nil, fmt.Errorf("%w: %w", err, analytics.ErrInvalid)
	}
	config.MaxConns = 8
	if c.MaxConns > 0 {
		config.MaxConns = int32(c.MaxConns)
	}
	config.MaxConnIdleTime = 5 * time.Minute
	config.ConnConfig.RuntimeParams["application_name"] = "epitally"
	// A query that runs this long is a fault, not a wait; loads set their own.
	config.ConnConfig.RuntimeParams["statement_timeout"] = "60s"
	pool, err := pgxpool.NewWithConfig(ctx, config)
	if err != nil {
		return nil, err
	}
	s = &Store{pool: pool, months: map[string]bool{}, grids: map[[32]byte]int64{},
		decoded: map[string]*wafermap.Grid{}, counted: map[wafermap.Layout]int{}}
	if err := s.check(ctx); err != nil {
		pool.Close()
		return nil, err
	}
	return s, nil
}

// Close gives every connection back.
func (s *Store) Close() { s.pool.Close() }

// Ping answers analytics.ErrUnavailable when the database does not.
func (s *Store) Ping(ctx context.Context) error {
	if err := s.pool.Ping(ctx); err != nil {
		if ctx.Err() != nil && !errors.Is(err, context.DeadlineExceeded) {
			return err
		}
		return fmt.Errorf("the database does not answer: %w: %w", analytics.ErrUnavailable, err)
	}
	return nil
}

func (s *Store) check(ctx context.Context) error {
	var version int
	var lz4 bool
	err := s.pool.QueryRow(ctx, `
		SELECT current_setting('server_version_num')::int / 10000,
		       EXISTS (SELECT FROM pg_settings WHERE name = 'default_toast_compression' AND 'lz4' = ANY (enumvals))`).Scan(&version, &lz4)
	if err != nil {
		return err
	}
	if version < 15 {
		return fmt.Errorf("PostgreSQL %d is too old; 15 or newer is needed: %w", version, analytics.ErrInvalid)
	}
	if !lz4 {
		return fmt.Errorf("this PostgreSQL was built without LZ4, which planes are compressed with; install the distribution's own build: %w", analytics.ErrInvalid)
	}
	var schema int64
	err = s.pool.QueryRow(ctx, `SELECT coalesce(max(version_id), 0) FROM goose_db_version WHERE is_applied`).Scan(&schema)
	if err != nil {
		return fmt.Errorf("the database has no schema of Epitally yet; it is made at the first start: %w", err)
	}
	switch want := newestMigration(); {
	case schema < want:
		return fmt.Errorf("the schema is at %d, this binary needs %d: start the server once to bring it up: %w", schema, want, analytics.ErrConflict)
	case schema > want:
		return fmt.Errorf("the schema is at %d, newer than this binary (%d): use the newer binary: %w", schema, want, analytics.ErrConflict)
	}
	return nil
}

// newestMigration is the number of the last embedded migration.
func newestMigration() int64 {
	names, _ := fs.Glob(migrations.FS, "*.sql") // the pattern is well formed
	return int64(len(names))                    // make lint holds the numbers to 1, 2, …
}

// EnsurePartitions makes the monthly partitions of measurement, plane, … that
// cover [from, to].
func (s *Store) EnsurePartitions(ctx context.Context, from, to time.Time) (err error) {
	defer wrap(&err, "make partitions %s to %s", from.UTC().Format("2006-01"), to.UTC().Format("2006-01"))
	from = from.UTC()
	for month := time.Date(from.Year(), from.Month(), 1, 0, 0, 0, 0, time.UTC); !month.After(to); month = month.AddDate(0, 1, 0) {
		if err := s.ensureMonth(ctx, month); err != nil {
			return err
		}
	}
	return nil
}

// ensureMonth works on a connection of its own, so that a partition stands
// whatever becomes of the load that needed it.
func (s *Store) ensureMonth(ctx context.Context, at time.Time) error {
	month := at.UTC().Format("2006-01")
	s.mu.Lock()
	known := s.months[month]
	s.mu.Unlock()
	if known {
		return nil
	}
	if year := at.UTC().Year(); year < 1980 || year > 2100 {
		return fmt.Errorf("measured at %s: the year is not between 1980 and 2100; check the station's clock: %w", at.UTC().Format(time.RFC3339), analytics.ErrInvalid)
	}
	if _, err := s.pool.Exec(ctx, `SELECT ensure_month($1::date)`, month+"-01"); err != nil {
		return err
	}
	s.mu.Lock()
	s.months[month] = true
	s.mu.Unlock()
	return nil
}

// inTx runs fn in a read-write transaction.
func (s *Store) inTx(ctx context.Context, fn func(pgx.Tx) error) error {
	return pgx.BeginFunc(ctx, s.pool, fn)
}

// brokenOff reports whether the connection ended under a query.
func brokenOff(err error) bool {
	return errors.Is(err, io.EOF) || errors.Is(err, io.ErrUnexpectedEOF) || errors.Is(err, net.ErrClosed) ||
		errors.Is(err, syscall.EPIPE) || errors.Is(err, syscall.ECONNRESET)
}

// Documents (run sheets, catalogues, specifications) and what is derived under
// them take turns: whoever derives holds this lock shared until it has stored,
// so that a document that marks measurements stale sees every one of them.
const (
	lockDocuments  = `SELECT pg_advisory_xact_lock(hashtext('epitally.documents'))`
	shareDocuments = `SELECT pg_advisory_xact_lock_shared(hashtext('epitally.documents'))`
)

// HoldDocuments keeps documents as they are while fn derives numbers under them
// and stores these.
func (s *Store) HoldDocuments(ctx context.Context, fn func() error) (err error) {
	defer wrap(&err, "hold documents")
	return s.inTx(ctx, func(tx pgx.Tx) error {
		if _, err := tx.Exec(ctx, shareDocuments); err != nil {
			return err
		}
		return fn()
	})
}

// Package dbtest gives every test a real database of its own, in one call.
//
// A package's TestMain calls Main, which starts one private PostgreSQL for the
// test process and migrates a template once; New and URL then clone it. A clone
// and its removal take about 0.3 s on two cores, whichever way PostgreSQL copies.
// Without PostgreSQL's server programs tests fail and say what to install: they
// never skip.
package dbtest

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"sync/atomic"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"epitally/db"
	"epitally/db/localpg"
)

const template = "epitally_template"

// cluster is the one server of this test process: set by Main before any test
// runs, never after.
var cluster *localpg.Cluster

var made atomic.Int64

// Main runs a package's tests with a server beside them, and exits.
func Main(m *testing.M) { os.Exit(Run(m)) }

// Run is Main for a package that has more to do after its tests.
func Run(m *testing.M) (code int) {
	dir, err := os.MkdirTemp("", "epitally-test-")
	if err != nil {
		return fail(err)
	}
	defer os.RemoveAll(dir)
	if err := os.Chmod(dir, 0o711); err != nil { // the server's account passes through
		return fail(err)
	}
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	cluster, err = localpg.Start(ctx, localpg.Options{
		DataDir:   filepath.Join(dir, "postgres"),
		Database:  template,
		Throwaway: true,
		// A test for each core, each with a pool of its own.
		Settings: map[string]string{"max_connections": strconv.Itoa(50 + 10*runtime.GOMAXPROCS(0))},
	})
	if err != nil {
		return fail(err)
	}
	defer cluster.Stop(context.Background())
	if err := db.Migrate(ctx, cluster.URL(template)); err != nil {
		return fail(err)
	}
	// A database with a connection, autovacuum's included, cannot be cloned.
	if err := execute(ctx, "ALTER DATABASE "+template+" ALLOW_CONNECTIONS false"); err != nil {
		return fail(err)
	}
	return m.Run()
}

func fail(err error) int {
	fmt.Fprintln(os.Stderr, "these tests need a database:", err)
	return 1
}

// New gives a store on a migrated database of the test's own, dropped when the
// test ends.
func New(t testing.TB) *db.Store {
	t.Helper()
	store, err := db.Open(t.Context(), db.Config{URL: URL(t)})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(store.Close)
	return store
}

// URL gives the address of a migrated database of the test's own, dropped when
// the test ends.
func URL(t testing.TB) string {
	t.Helper()
	return create(t, " TEMPLATE "+template)
}

// EmptyURL gives the address of a database without a schema.
func EmptyURL(t testing.TB) string {
	t.Helper()
	return create(t, " TEMPLATE template0")
}

func create(t testing.TB, options string) string {
	t.Helper()
	if cluster == nil {
		t.Fatal("dbtest: the package's TestMain does not call dbtest.Main")
	}
	name := fmt.Sprintf("test_%d", made.Add(1))
	admin(t, "CREATE DATABASE "+name+options)
	t.Cleanup(func() { admin(t, "DROP DATABASE "+name+" WITH (FORCE)") })
	return cluster.URL(name)
}

// admin runs one statement on a connection that belongs to no test.
func admin(t testing.TB, sql string) {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	if err := execute(ctx, sql); err != nil {
		t.Fatalf("dbtest: %v", err)
	}
}

func execute(ctx context.Context, sql string) error {
	conn, err := pgx.Connect(ctx, cluster.URL("postgres"))
	if err != nil {
		return err
	}
	defer conn.Close(ctx)
	if _, err := conn.Exec(ctx, sql); err != nil {
		return fmt.Errorf("%s: %w", sql, err)
	}
	return nil
}

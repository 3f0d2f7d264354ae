package localpg

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"io/fs"
	"log/slog"
	"maps"
	"net/url"
	"os"
	"path/filepath"
	"sync"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"

	"epitally/analytics"
)

const (
	superuser       = "epitally"
	defaultDatabase = "epitally"
	serverName      = "server" // the cluster itself, in the data folder
	pidName         = "postmaster.pid"
	lockName        = "lock"
	socketPrefix    = "epitally-socket-"
	socketFile      = ".s.PGSQL.5432"
	// maxSocketPath is what the shortest sun_path of the supported systems holds,
	// the closing zero not counted: 104 on macOS, 108 on Linux.
	maxSocketPath = 103
	pollEvery     = 10 * time.Millisecond
	// giveUpAfter bounds the attempts of Start when the server ends as it starts:
	// time enough for the last processes of a killed server to notice.
	giveUpAfter = 5 * time.Second
	// duplicateDatabase is the SQLSTATE of a name that is taken.
	duplicateDatabase = "42P04"
)

// Options say where the cluster lies and how it runs.
type Options struct {
	// DataDir holds everything: the cluster, its socket, its log and the lock. It
	// is made when missing.
	DataDir string
	Logger  *slog.Logger // nil = silent
	// Database is made when missing; "" = "epitally".
	Database string
	// Settings are PostgreSQL's, by name, over those this package gives; where the
	// server listens stays. nil = none.
	Settings map[string]string
	// Throwaway trades durability for speed; for tests only.
	Throwaway bool
}

// Cluster is a running private PostgreSQL. It starts its server again whenever
// that dies, until Stop.
type Cluster struct {
	dir, serverDir, socketDir string
	programs                  Programs
	account                   account
	blocked                   bool // the account needs help to pass the folders above dir
	throwaway                 bool
	extra                     map[string]string // Options.Settings
	log                       *slog.Logger
	lock                      *os.File

	mu      sync.Mutex
	process *os.Process   // nil while none runs
	exits   int           // servers that ended unasked
	stop    chan struct{} // closed when Stop begins
	done    chan struct{} // closed when the supervisor has ended
	once    sync.Once
	stopped error
}

// Start makes the cluster in o.DataDir when there is none, ends what a killed
// Epitally left running there, starts the server and returns when it answers.
// Another Epitally at work in the folder is ErrInUse; no server programs is
// analytics.ErrNotFound.
func Start(ctx context.Context, o Options) (_ *Cluster, err error) {
	defer func() {
		if err != nil {
			err = fmt.Errorf("private PostgreSQL: %w", err)
		}
	}()
	c, err := newCluster(ctx, o)
	if err != nil {
		return nil, err
	}
	defer func() {
		if err != nil {
			c.release()
		}
	}()
	if err = c.prepare(ctx); err != nil {
		return nil, err
	}
	if err = c.endLeftOver(ctx); err != nil {
		return nil, err
	}
	// Only now: a server that is still ending removes files under the walk.
	if err = c.account.own(c.serverDir); err != nil {
		return nil, err
	}
	go c.supervise()
	if err = c.awaitReady(ctx); err == nil {
		err = c.EnsureDatabase(ctx, cmp.Or(o.Database, defaultDatabase))
	}
	if err != nil {
		c.Stop(context.WithoutCancel(ctx))
		return nil, err
	}
	return c, nil
}

// newCluster finds programs and account, makes the folders and takes the lock.
func newCluster(ctx context.Context, o Options) (*Cluster, error) {
	c := &Cluster{throwaway: o.Throwaway, extra: maps.Clone(o.Settings), log: o.Logger, stop: make(chan struct{}), done: make(chan struct{})}
	if c.log == nil {
		c.log = slog.New(slog.DiscardHandler)
	}
	var err error
	if c.programs, err = Find(); err != nil {
		return nil, err
	}
	if c.account, err = serverAccount(); err != nil {
		return nil, err
	}
	if err := c.makeDataDir(o.DataDir); err != nil {
		return nil, err
	}
	if folder := c.account.blockedAt(c.dir); folder != "" {
		if c.blocked = true; passCapability() == 0 {
			return nil, fmt.Errorf("the account %s, which the server programs run as, may not pass through %s: "+
				"choose a data folder elsewhere with --data (/var/lib/epitally, say), or let it pass with chmod o+x %s: %w",
				c.account.name, folder, folder, analytics.ErrUnavailable)
		}
	}
	if c.lock, err = lock(ctx, filepath.Join(c.dir, lockName), c.dir); err != nil {
		return nil, err
	}
	if err := c.makeSocketDir(); err != nil {
		c.release()
		return nil, err
	}
	return c, nil
}

// makeDataDir makes the folder and finds its real path.
func (c *Cluster) makeDataDir(dir string) (err error) {
	if dir == "" {
		return fmt.Errorf("no data folder is named: name one with --data: %w", analytics.ErrInvalid)
	}
	if dir, err = filepath.Abs(dir); err == nil {
		err = os.MkdirAll(dir, 0o700)
	}
	if err == nil {
		dir, err = filepath.EvalSymlinks(dir)
	}
	if err == nil {
		err = c.account.makeDir(dir)
	}
	if errors.Is(err, fs.ErrPermission) {
		return fmt.Errorf("data folder %s must belong to this account (%w): start Epitally as the folder's owner or as root, "+
			"or choose another folder with --data: %w", dir, err, analytics.ErrUnavailable)
	}
	c.dir, c.serverDir = dir, filepath.Join(dir, serverName)
	return err
}

// makeSocketDir puts the socket beside the cluster, or, where that path is too
// long for a socket, into a private temporary folder.
func (c *Cluster) makeSocketDir() (err error) {
	c.socketDir = filepath.Join(c.dir, "socket")
	if len(filepath.Join(c.socketDir, socketFile)) > maxSocketPath {
		temp := os.TempDir()
		if len(temp) > maxSocketPath/2 {
			temp = "/tmp"
		}
		if c.socketDir, err = os.MkdirTemp(temp, socketPrefix); err != nil {
			return err
		}
	}
	return c.account.makeDir(c.socketDir)
}

// URL addresses one database of the cluster.
func (c *Cluster) URL(dbname string) string { return urlOf(c.socketDir, dbname) }

func urlOf(socketDir, dbname string) string {
	u := url.URL{Scheme: "postgres", User: url.User(superuser), Path: "/" + dbname,
		RawQuery: url.Values{"host": {socketDir}, "port": {"5432"}, "sslmode": {"disable"}}.Encode()}
	return u.String()
}

// answers says whether a server answers at a socket.
func (c *Cluster) answers(ctx context.Context, socketDir string) error {
	ctx, cancel := context.WithTimeout(ctx, 5*time.Second)
	defer cancel()
	conn, err := pgx.Connect(ctx, urlOf(socketDir, "postgres"))
	if err != nil {
		return err
	}
	return conn.Close(ctx)
}

// awaitReady returns when the server answers. A server that recovers from a
// crash may take its time, within the context; one that ends again and again
// may not.
func (c *Cluster) awaitReady(ctx context.Context) error {
	begun := time.Now()
	tick := time.NewTicker(pollEvery)
	defer tick.Stop()
	socket := filepath.Join(c.socketDir, socketFile)
	for {
		c.mu.Lock()
		exits := c.exits
		c.mu.Unlock()
		if exits > 0 && time.Since(begun) > giveUpAfter {
			return fmt.Errorf("the server ends as it starts; its log %s says: %s: %w", c.logPath(), c.logTail(), analytics.ErrUnavailable)
		}
		if _, err := os.Lstat(socket); err == nil && c.answers(ctx, c.socketDir) == nil {
			return nil
		}
		select {
		case <-tick.C:
		case <-ctx.Done():
			return fmt.Errorf("waiting for the server to answer: %w", ctx.Err())
		}
	}
}

// EnsureDatabase makes a database of that name when there is none.
func (c *Cluster) EnsureDatabase(ctx context.Context, name string) error {
	conn, err := pgx.Connect(ctx, c.URL("postgres"))
	if err != nil {
		return err
	}
	defer conn.Close(ctx)
	var one int
	err = conn.QueryRow(ctx, "SELECT 1 FROM pg_database WHERE datname = $1", name).Scan(&one)
	if errors.Is(err, pgx.ErrNoRows) {
		_, err = conn.Exec(ctx, "CREATE DATABASE "+pgx.Identifier{name}.Sanitize())
		var refused *pgconn.PgError
		if errors.As(err, &refused) && refused.Code == duplicateDatabase {
			err = nil // another process was first
		}
	}
	return err
}

// release gives the folder back.
func (c *Cluster) release() {
	if c.socketDir != "" && filepath.Dir(c.socketDir) != c.dir {
		os.RemoveAll(c.socketDir)
	}
	if c.lock != nil {
		c.lock.Close()
	}
}

package localpg

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"time"

	"github.com/jackc/pgx/v5/pgconn"

	"epitally/analytics"
)

// How long a server left over has to end by itself: after a fast, and then an
// immediate, shutdown request.
const (
	fastLimit      = 30 * time.Second
	immediateLimit = 10 * time.Second
)

// pidFile is what PostgreSQL writes to postmaster.pid.
type pidFile struct {
	pid       int
	socketDir string
	rest      string // everything after the first line
}

func readPidFile(path string) (*pidFile, error) {
	text, err := os.ReadFile(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	first, rest, _ := strings.Cut(string(text), "\n")
	pid, err := strconv.Atoi(strings.TrimSpace(first))
	if err != nil || pid == 0 {
		return &pidFile{rest: rest}, nil // torn: no process to look for
	}
	f := &pidFile{pid: max(pid, -pid), rest: rest} // negative: a single-user server
	if lines := strings.Split(rest, "\n"); len(lines) > 3 {
		f.socketDir = lines[3]
	}
	return f, nil
}

// endLeftOver ends a server that an earlier, killed process left running in this
// folder, so that the one started next is this process's own child with this
// binary's settings. The lock is held: nobody else manages it. A pid file whose
// number now belongs to some other process is defused, and what a killed server
// leaves of its socket is cleared away.
func (c *Cluster) endLeftOver(ctx context.Context) error {
	if err := c.endServer(ctx); err != nil {
		return err
	}
	// The socket's lock file names a process too, and no server runs now.
	for _, name := range []string{socketFile, socketFile + ".lock"} {
		if err := os.Remove(filepath.Join(c.socketDir, name)); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
	}
	return nil
}

func (c *Cluster) endServer(ctx context.Context) error {
	path := filepath.Join(c.serverDir, pidName)
	f, err := readPidFile(path)
	if err != nil || f == nil {
		return err
	}
	if strings.Contains(filepath.Base(f.socketDir), socketPrefix) && f.socketDir != c.socketDir {
		defer os.RemoveAll(f.socketDir) // a temporary folder of the killed process
	}
	if f.pid == 0 || !alive(f.pid) {
		return nil // PostgreSQL itself sees that the file is stale
	}
	runs, known := runsIn(f.pid, c.serverDir)
	if !known {
		runs = f.socketDir != "" && c.listens(ctx, f.socketDir)
	}
	if !runs {
		// The number was given to another process since. PostgreSQL would take that
		// for a running server, but it takes its parent's number, ours, for stale.
		// The rest stays: it tells of shared memory that may still be in use.
		c.log.Info("the database's process number belongs to another process now", "process", f.pid)
		return os.WriteFile(path, []byte(strconv.Itoa(os.Getpid())+"\n"+f.rest), 0o600)
	}
	c.log.Info("ending the database server of an Epitally that was killed", "process", f.pid)
	for _, step := range []struct {
		signal syscall.Signal
		limit  time.Duration
	}{{syscall.SIGINT, fastLimit}, {syscall.SIGQUIT, immediateLimit}} {
		if err := syscall.Kill(f.pid, step.signal); errors.Is(err, syscall.EPERM) {
			return fmt.Errorf("the database server left in %s (process %d) belongs to another account: end it, or start Epitally as that account: %w",
				c.dir, f.pid, analytics.ErrConflict)
		}
		if gone(ctx, f.pid, step.limit) {
			return nil
		}
	}
	if ctx.Err() != nil {
		return ctx.Err()
	}
	return fmt.Errorf("the database server left in %s (process %d) does not end: end it by hand: %w", c.dir, f.pid, analytics.ErrConflict)
}

// listens reports whether there is a server at a socket, even one that refuses
// connections because it still recovers.
func (c *Cluster) listens(ctx context.Context, socketDir string) bool {
	err := c.answers(ctx, socketDir)
	var refusal *pgconn.PgError
	return err == nil || errors.As(err, &refusal)
}

// gone waits until process pid, which need not be a child, has ended.
func gone(ctx context.Context, pid int, limit time.Duration) bool {
	ctx, cancel := context.WithTimeout(ctx, limit)
	defer cancel()
	tick := time.NewTicker(pollEvery)
	defer tick.Stop()
	for alive(pid) && !zombie(pid) {
		select {
		case <-tick.C:
		case <-ctx.Done():
			return false
		}
	}
	return true
}

// zombie reports whether pid has ended and only waits for its parent to notice.
func zombie(pid int) bool {
	text, err := os.ReadFile(fmt.Sprintf("/proc/%d/stat", pid))
	if err != nil {
		return false
	}
	_, after, found := strings.Cut(string(text), ") ")
	return found && strings.HasPrefix(after, "Z")
}

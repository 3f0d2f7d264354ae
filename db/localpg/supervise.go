package localpg

import (
	"context"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"syscall"
	"time"
)

// Waits before a server that died is started again.
const (
	firstWait = 50 * time.Millisecond
	longWait  = 5 * time.Second
	// steadyAfter is how long a server must have run for the wait to begin anew.
	steadyAfter = time.Minute
	maxLogBytes = 8 << 20
)

// supervise keeps a server running until Stop.
func (c *Cluster) supervise() {
	defer close(c.done)
	// The kernel sends its signal when the thread that started the server ends,
	// so this goroutine keeps that thread for as long as the server runs.
	runtime.LockOSThread()
	defer runtime.UnlockOSThread()
	wait := firstWait
	for {
		begun := time.Now()
		err := c.runOnce()
		select {
		case <-c.stop:
			return
		default:
		}
		c.mu.Lock()
		c.exits++
		c.mu.Unlock()
		if time.Since(begun) > steadyAfter {
			wait = firstWait
		}
		c.log.Error("the database server ended unasked and is started again", "error", err, "wait", wait, "log", c.logPath())
		timer := time.NewTimer(wait)
		select {
		case <-c.stop:
			timer.Stop()
			return
		case <-timer.C:
		}
		wait = min(2*wait, longWait)
		// Its process number may have been given away meanwhile.
		if err := c.endLeftOver(context.Background()); err != nil {
			c.log.Error("the database server cannot be started again yet", "error", err)
		}
	}
}

// runOnce starts a server and returns when it has ended.
func (c *Cluster) runOnce() error {
	log, err := c.openLog()
	if err != nil {
		return err
	}
	defer log.Close()
	args := []string{"-D", c.serverDir}
	for _, s := range c.settings() {
		args = append(args, "-c", s)
	}
	cmd := exec.Command(c.programs.path("postgres"), args...)
	c.dress(cmd)
	cmd.Stdout, cmd.Stderr = log, log
	c.mu.Lock()
	select {
	case <-c.stop:
		c.mu.Unlock()
		return nil
	default:
	}
	err = cmd.Start()
	if err == nil {
		c.process = cmd.Process
	}
	c.mu.Unlock()
	if err != nil {
		return fmt.Errorf("start %s: %w", cmd.Path, err)
	}
	err = cmd.Wait()
	c.mu.Lock()
	c.process = nil
	c.mu.Unlock()
	return err
}

// settings are given at each start. Memory is modest, for a server beside other
// programs; a commit is durable.
func (c *Cluster) settings() []string {
	s := []string{
		"listen_addresses=",
		"port=5432", // only names the socket
		"unix_socket_directories=" + c.socketDir,
		"unix_socket_permissions=0700",
		"cluster_name=epitally",
		"max_connections=100",
		"shared_buffers=128MB",
		"work_mem=16MB",
		"wal_compression=lz4",
		"max_wal_size=1GB",
		"checkpoint_timeout=15min",
		"random_page_cost=1.1", // data folders lie on solid-state disks
		"jit=off",              // compiling takes longer than any query here
		"timezone=UTC",
		"log_timezone=UTC",
		"log_min_messages=warning",
		"log_line_prefix=%m [%p] ",
	}
	if c.throwaway {
		return append(s, "fsync=off", "synchronous_commit=off", "full_page_writes=off")
	}
	return append(s, "fsync=on", "synchronous_commit=on", "full_page_writes=on")
}

func (c *Cluster) logPath() string { return filepath.Join(c.dir, "postgres.log") }

// openLog appends to the server's log, which begins anew when it has grown large.
func (c *Cluster) openLog() (*os.File, error) {
	if info, err := os.Stat(c.logPath()); err == nil && info.Size() > maxLogBytes {
		if err := os.Rename(c.logPath(), c.logPath()+".1"); err != nil {
			return nil, err
		}
	}
	return os.OpenFile(c.logPath(), os.O_CREATE|os.O_WRONLY|os.O_APPEND, 0o600)
}

func (c *Cluster) logTail() string {
	text, err := os.ReadFile(c.logPath())
	if err != nil {
		return err.Error()
	}
	return lastLines(string(text))
}

// Stop asks the server for a fast shutdown, and for an immediate one when ctx
// ends first, and gives the folder back. A second call waits for the first.
func (c *Cluster) Stop(ctx context.Context) error {
	c.once.Do(func() {
		c.mu.Lock()
		close(c.stop)
		c.mu.Unlock()
		c.signal(syscall.SIGINT)
		timer := time.NewTimer(fastLimit)
		defer timer.Stop()
		select {
		case <-c.done:
		case <-ctx.Done():
			c.stopped = c.force()
		case <-timer.C:
			c.stopped = c.force()
		}
		c.release()
	})
	return c.stopped
}

// force ends a server that did not stop in time. What was committed stays: it
// recovers at the next start.
func (c *Cluster) force() error {
	c.signal(syscall.SIGQUIT)
	timer := time.NewTimer(immediateLimit)
	defer timer.Stop()
	select {
	case <-c.done:
	case <-timer.C:
		c.signal(syscall.SIGKILL)
		<-c.done
	}
	return fmt.Errorf("private PostgreSQL in %s did not stop in time and was ended; it recovers at the next start", c.dir)
}

func (c *Cluster) signal(s syscall.Signal) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.process != nil {
		c.process.Signal(s) // it may have ended just now, which is what is wanted
	}
}

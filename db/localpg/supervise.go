package localpg

import (
	"context"
	"fmt"
	"maps"
	"os/exec"
	"runtime"
	"slices"
	"sync"
	"syscall"
	"time"
)

// Waits before a server that died is started again.
const (
	firstWait = 50 * time.Millisecond
	longWait  = 5 * time.Second
	// steadyAfter is how long a server must have run for the wait to begin anew.
	steadyAfter = time.Minute
)

// supervise keeps a server running until Stop.
func (c *Cluster) supervise() {
	defer close(c.done)
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	go func() { <-c.stop; cancel() }() // it returns only after a Stop
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
		if err := c.endLeftOver(ctx); err != nil {
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
	ended := make(chan struct{})
	var watch sync.WaitGroup
	watch.Go(func() { c.watchLog(ended) })
	err = cmd.Wait()
	close(ended)
	watch.Wait()
	c.mu.Lock()
	c.process = nil
	c.mu.Unlock()
	return err
}

// settings are given at each start. Memory is modest, for a server beside other
// programs; a commit is durable.
func (c *Cluster) settings() []string {
	s := []string{
		"max_connections=100",
		"shared_buffers=64MB",
		"work_mem=16MB",
		"wal_compression=lz4",
		"default_toast_compression=lz4",
		"max_wal_size=1GB",
		"checkpoint_timeout=15min",
		"autovacuum=on",
		"max_logical_replication_workers=0", // one process less; nothing replicates
		"random_page_cost=1.1",              // data folders lie on solid-state disks
		"jit=off",                           // compiling takes longer than any query here
		"timezone=UTC",
		"log_timezone=UTC",
		"log_min_messages=warning",
		"log_line_prefix=%m [%p] ",
	}
	if c.throwaway {
		s = append(s, "fsync=off", "synchronous_commit=off", "full_page_writes=off")
	} else {
		s = append(s, "fsync=on", "synchronous_commit=on", "full_page_writes=on")
	}
	// Of two values for one name, PostgreSQL takes the later.
	for _, name := range slices.Sorted(maps.Keys(c.extra)) {
		s = append(s, name+"="+c.extra[name])
	}
	return append(s,
		"listen_addresses=",
		"port=5432", // only names the socket
		"unix_socket_directories="+c.socketDir,
		"unix_socket_permissions=0700",
		"cluster_name=epitally")
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

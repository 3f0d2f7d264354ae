package main

import (
	"bufio"
	"context"
	"fmt"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"time"
)

// measureServer starts the built command on the data folder that now exists,
// and takes how long until it is ready and what it holds when idle.
func (b *bench) measureServer(ctx context.Context) error {
	bin, err := binary()
	if err != nil {
		return err
	}
	const address = "127.0.0.1:8629"
	cmd := exec.CommandContext(ctx, bin, "serve", "--data", b.dir, "--drop", filepath.Join(b.dir, "drop"), "--listen", address)
	cmd.Cancel = func() error { return cmd.Process.Signal(syscall.SIGTERM) }
	start := time.Now()
	if err := cmd.Start(); err != nil {
		return err
	}
	defer func() {
		cmd.Process.Signal(syscall.SIGTERM)
		cmd.Wait()
	}()
	if err := until(ctx, 20*time.Second, func() bool {
		answer, err := http.Get("http://" + address + "/readyz")
		if err != nil {
			return false
		}
		answer.Body.Close()
		return answer.StatusCode == http.StatusOK
	}); err != nil {
		return err
	}
	b.under("server ready on an existing data folder", time.Since(start).Seconds(), "s", 3)
	select { // let the first scan and the start-up garbage pass
	case <-time.After(5 * time.Second):
	case <-ctx.Done():
		return ctx.Err()
	}
	server, err := memoryMB(cmd.Process.Pid, "Rss")
	if err != nil {
		return err
	}
	database, err := b.databaseMemoryMB()
	if err != nil {
		return err
	}
	b.under("resident memory idle, server and its private PostgreSQL", server+database, "MB", 150)
	say("of which the server %.0f MB, PostgreSQL %.0f MB (shared pages counted once)", server, database)
	return nil
}

func until(ctx context.Context, limit time.Duration, ready func() bool) error {
	ctx, cancel := context.WithTimeout(ctx, limit)
	defer cancel()
	tick := time.NewTicker(10 * time.Millisecond)
	defer tick.Stop()
	for !ready() {
		select {
		case <-ctx.Done():
			return fmt.Errorf("not ready within %s: %w", limit, ctx.Err())
		case <-tick.C:
		}
	}
	return nil
}

// databaseMemoryMB adds the proportional set sizes of the private PostgreSQL's
// processes, so that the buffers they share count once.
func (b *bench) databaseMemoryMB() (total float64, err error) {
	text, err := os.ReadFile(filepath.Join(b.dir, "postgres", "postmaster.pid"))
	if err != nil {
		matches, _ := filepath.Glob(filepath.Join(b.dir, "postgres", "*", "postmaster.pid"))
		if len(matches) == 0 {
			return 0, err
		}
		if text, err = os.ReadFile(matches[0]); err != nil {
			return 0, err
		}
	}
	postmaster, _, _ := strings.Cut(string(text), "\n")
	pids := []string{strings.TrimSpace(postmaster)}
	processes, err := filepath.Glob("/proc/[0-9]*/stat")
	if err != nil {
		return 0, err
	}
	for _, p := range processes {
		stat, err := os.ReadFile(p)
		if err != nil {
			continue
		}
		fields := strings.Fields(string(stat[strings.LastIndexByte(string(stat), ')')+1:]))
		if len(fields) > 1 && fields[1] == pids[0] {
			pids = append(pids, filepath.Base(filepath.Dir(p)))
		}
	}
	for _, pid := range pids {
		n, err := strconv.Atoi(pid)
		if err != nil {
			return 0, err
		}
		if mb, err := memoryMB(n, "Pss"); err == nil {
			total += mb
		}
	}
	return total, nil
}

// memoryMB reads a line of the kernel's summary of a process's memory.
func memoryMB(pid int, line string) (float64, error) {
	file, err := os.Open(fmt.Sprintf("/proc/%d/smaps_rollup", pid))
	if err != nil {
		return 0, err
	}
	defer file.Close()
	for s := bufio.NewScanner(file); s.Scan(); {
		fields := strings.Fields(s.Text())
		if len(fields) > 1 && fields[0] == line+":" {
			kb, err := strconv.ParseFloat(fields[1], 64)
			return kb * 1024 / 1e6, err
		}
	}
	return 0, fmt.Errorf("process %d: no %s in its memory summary", pid, line)
}

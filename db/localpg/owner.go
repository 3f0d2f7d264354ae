//go:build unix

package localpg

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"strconv"
	"strings"
	"syscall"
	"time"

	"epitally/analytics"
)

func ownerOf(info fs.FileInfo) (uid, gid uint32) {
	if s, ok := info.Sys().(*syscall.Stat_t); ok {
		return s.Uid, s.Gid
	}
	return 0, 0
}

// alive reports whether there is a process pid, of whatever account.
func alive(pid int) bool {
	err := syscall.Kill(pid, 0)
	return err == nil || errors.Is(err, syscall.EPERM)
}

// ErrInUse is what Start returns when another Epitally is at work in the data
// folder. It is an analytics.ErrConflict; Attach finds that one's database.
var ErrInUse = fmt.Errorf("in use: %w", analytics.ErrConflict)

// lockPatience outlasts an Attach that looks at the lock at that very moment.
const lockPatience = 250 * time.Millisecond

// lock takes the data folder for this process until the file is closed, which
// the kernel does for a process that is killed. Another one at work there is
// ErrInUse.
func lock(ctx context.Context, path, dataDir string) (*os.File, error) {
	f, err := os.OpenFile(path, os.O_CREATE|os.O_RDWR, 0o600)
	if err != nil {
		return nil, err
	}
	tick := time.NewTicker(pollEvery)
	defer tick.Stop()
	for begun := time.Now(); ; {
		err = syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB)
		if !errors.Is(err, syscall.EWOULDBLOCK) || time.Since(begun) > lockPatience {
			break
		}
		select {
		case <-tick.C:
		case <-ctx.Done():
			f.Close()
			return nil, ctx.Err()
		}
	}
	if errors.Is(err, syscall.EWOULDBLOCK) {
		text := make([]byte, 32)
		n, _ := f.Read(text) // the number helps; its absence does no harm
		f.Close()
		return nil, fmt.Errorf("data folder %s is in use by another Epitally (process %s): stop that one, or choose another folder with --data: %w",
			dataDir, strings.TrimSpace(string(text[:n])), ErrInUse)
	}
	if err == nil {
		err = f.Truncate(0)
	}
	if err == nil {
		_, err = f.WriteString(strconv.Itoa(os.Getpid()) + "\n")
	}
	if err != nil {
		f.Close()
		return nil, fmt.Errorf("lock %s: %w", path, err)
	}
	return f, nil
}

// lockHeld reports whether a live process holds the lock.
func lockHeld(path string) bool {
	f, err := os.Open(path)
	if err != nil {
		return false
	}
	defer f.Close() // gives the lock back, should it have been free
	err = syscall.Flock(int(f.Fd()), syscall.LOCK_SH|syscall.LOCK_NB)
	return errors.Is(err, syscall.EWOULDBLOCK)
}

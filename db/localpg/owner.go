//go:build unix

package localpg

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"strconv"
	"strings"
	"syscall"

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

// lock takes the data folder for this process until the file is closed, which
// the kernel does for a process that is killed. Another one at work there is
// analytics.ErrConflict.
func lock(path, dataDir string) (*os.File, error) {
	f, err := os.OpenFile(path, os.O_CREATE|os.O_RDWR, 0o600)
	if err != nil {
		return nil, err
	}
	err = syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB)
	if errors.Is(err, syscall.EWOULDBLOCK) {
		text := make([]byte, 32)
		n, _ := f.Read(text) // the number helps; its absence does no harm
		f.Close()
		return nil, fmt.Errorf("data folder %s is in use by another Epitally (process %s): stop that one, or choose another folder with --data: %w",
			dataDir, strings.TrimSpace(string(text[:n])), analytics.ErrConflict)
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

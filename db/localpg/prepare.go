package localpg

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"

	"epitally/analytics"
)

const makingPrefix = "server.making-"

// prepare leaves a whole cluster of the programs' version in serverDir.
func (c *Cluster) prepare(ctx context.Context) error {
	leftovers, _ := filepath.Glob(filepath.Join(c.dir, makingPrefix+"*")) // the pattern is well formed
	for _, path := range leftovers {
		os.RemoveAll(path) // a killed initdb's; a failure shows at the rename
	}
	text, err := os.ReadFile(filepath.Join(c.serverDir, "PG_VERSION"))
	if errors.Is(err, fs.ErrNotExist) {
		if entries, err := os.ReadDir(c.serverDir); err == nil && len(entries) > 0 {
			return fmt.Errorf("%s holds something that is not a database: move it away, or choose another folder with --data: %w", c.serverDir, analytics.ErrConflict)
		}
		return c.initialise(ctx)
	}
	if err != nil {
		return err
	}
	major, err := strconv.Atoi(strings.TrimSpace(string(text)))
	if err != nil {
		return fmt.Errorf("%s/PG_VERSION reads %q, which is no version: restore the folder from a backup: %w", c.serverDir, text, analytics.ErrInvalid)
	}
	if major != c.programs.Major {
		if c.programs, err = findMajor(major); err != nil {
			return fmt.Errorf("data folder %s: %w", c.dir, err)
		}
	}
	return nil
}

// initialise makes the cluster under another name and renames it when it is
// whole, so that a kill in between leaves nothing that looks like a cluster.
func (c *Cluster) initialise(ctx context.Context) error {
	making, err := os.MkdirTemp(c.dir, makingPrefix)
	if err != nil {
		return err
	}
	defer os.RemoveAll(making) // gone after the rename
	if err := c.account.makeDir(making); err != nil {
		return err
	}
	args := []string{"--pgdata", making, "--username", superuser, "--encoding", "UTF8", "--locale", "C",
		"--auth", "trust", // the socket lies in a folder of mode 0700
		"--data-checksums"}
	if c.throwaway {
		args = append(args, "--no-sync")
	}
	// The kernel's signal at our death is tied to the thread that starts initdb.
	runtime.LockOSThread()
	defer runtime.UnlockOSThread()
	cmd := exec.CommandContext(ctx, c.programs.path("initdb"), args...)
	c.dress(cmd)
	if out, err := cmd.CombinedOutput(); err != nil {
		return fmt.Errorf("initdb in %s: %w: %s", c.dir, err, lastLines(string(out)))
	}
	os.Remove(c.serverDir) // an empty folder would be in the way
	if err := os.Rename(making, c.serverDir); err != nil {
		return err
	}
	return syncDir(c.dir)
}

func syncDir(path string) error {
	d, err := os.Open(path)
	if err != nil {
		return err
	}
	defer d.Close()
	return d.Sync()
}

// dress gives a server program its account, its environment and a working
// folder that every account may pass.
func (c *Cluster) dress(cmd *exec.Cmd) {
	cmd.Dir = "/"
	cmd.Env = []string{"LC_ALL=C", "TZ=UTC", "PATH=" + c.programs.Dir + ":/usr/bin:/bin",
		// glibc would give the memory of every plane back to the system and fault it
		// in again for the next one; 32 MB a connection may stay.
		"MALLOC_MMAP_THRESHOLD_=33554432", "MALLOC_TRIM_THRESHOLD_=33554432"}
	cmd.SysProcAttr = attributes(c.account, c.blocked)
}

func lastLines(text string) string {
	lines := strings.Split(strings.TrimSpace(text), "\n")
	return strings.Join(lines[max(0, len(lines)-5):], "; ")
}

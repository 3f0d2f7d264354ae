package localpg

import (
	"fmt"
	"io/fs"
	"os"
	"os/user"
	"path/filepath"
	"strconv"

	"epitally/analytics"
)

// account is who the server programs run as.
type account struct {
	uid, gid uint32
	name     string
	switched bool // not the account of this process
}

// serverAccount is this process's account, or an unprivileged one for root,
// whom PostgreSQL refuses.
func serverAccount() (account, error) {
	if os.Geteuid() != 0 {
		return account{uid: uint32(os.Geteuid()), gid: uint32(os.Getegid())}, nil
	}
	for _, name := range []string{"postgres", "nobody"} {
		u, err := user.Lookup(name)
		if err != nil {
			continue
		}
		uid, errU := strconv.ParseUint(u.Uid, 10, 32)
		gid, errG := strconv.ParseUint(u.Gid, 10, 32)
		if errU != nil || errG != nil || uid == 0 {
			continue
		}
		return account{uid: uint32(uid), gid: uint32(gid), name: name, switched: true}, nil
	}
	return account{}, fmt.Errorf("PostgreSQL does not run as root, and this machine has neither an account postgres nor nobody: "+
		"make one of them, or start Epitally as another account: %w", analytics.ErrUnavailable)
}

// own gives path and all below it to the account. It changes only what does not
// belong to it yet.
func (a account) own(path string) error {
	if !a.switched {
		return nil
	}
	return filepath.WalkDir(path, func(p string, entry fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		info, err := entry.Info()
		if err != nil {
			return err
		}
		if uid, _ := ownerOf(info); uid == a.uid {
			return nil
		}
		return os.Lchown(p, int(a.uid), int(a.gid))
	})
}

// makeDir makes a folder of mode 0700 that belongs to the account.
func (a account) makeDir(path string) error {
	if err := os.MkdirAll(path, 0o700); err != nil {
		return err
	}
	if a.switched {
		if err := os.Lchown(path, int(a.uid), int(a.gid)); err != nil {
			return err
		}
	}
	return os.Chmod(path, 0o700)
}

// blockedAt is the first folder on the way to path, path itself included, that
// the account may not pass through, "" when it may pass all.
func (a account) blockedAt(path string) string {
	if !a.switched {
		return ""
	}
	blocked := ""
	for dir := path; ; dir = filepath.Dir(dir) {
		if info, err := os.Stat(dir); err == nil && !a.mayPass(info) {
			blocked = dir
		}
		if dir == filepath.Dir(dir) {
			return blocked
		}
	}
}

func (a account) mayPass(info fs.FileInfo) bool {
	uid, gid := ownerOf(info)
	mode := info.Mode().Perm()
	switch {
	case uid == a.uid:
		return mode&0o100 != 0
	case gid == a.gid:
		return mode&0o010 != 0
	}
	return mode&0o001 != 0
}

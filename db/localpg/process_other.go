//go:build unix && !linux

package localpg

import (
	"syscall"
)

// attributes make a server program run as the account, in a process group of
// its own so that Ctrl-C reaches only Epitally.
func attributes(a account, _ bool) *syscall.SysProcAttr {
	attr := &syscall.SysProcAttr{Setpgid: true}
	if a.switched {
		attr.Credential = &syscall.Credential{Uid: a.uid, Gid: a.gid}
	}
	return attr
}

// passCapability: only Linux can let an account pass closed folders.
func passCapability() int { return 0 }

func runsIn(int, string) (runs, known bool) { return false, false }

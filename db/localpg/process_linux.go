package localpg

import (
	"fmt"
	"os"
	"strconv"
	"strings"
	"syscall"
)

// Capabilities of capabilities(7) that pass closed folders. The first is the
// weaker: it reads and passes, but does not write.
const (
	capDACOverride   = 1
	capDACReadSearch = 2
)

// attributes make a server program run as the account, in a process group of
// its own so that Ctrl-C reaches only Epitally, and ask the kernel to stop it
// when this process is killed. A blocked account gets the capability to pass
// folders, when this process has it to give.
func attributes(a account, blocked bool) *syscall.SysProcAttr {
	attr := &syscall.SysProcAttr{Setpgid: true, Pdeathsig: syscall.SIGINT}
	if a.switched {
		attr.Credential = &syscall.Credential{Uid: a.uid, Gid: a.gid}
	}
	if blocked {
		if c := passCapability(); c != 0 {
			attr.AmbientCaps = []uintptr{uintptr(c)}
		}
	}
	return attr
}

// passCapability is the weakest capability this process may give that passes
// closed folders, 0 when it has none.
func passCapability() int {
	effective := capabilities()
	for _, c := range []int{capDACReadSearch, capDACOverride} {
		if effective>>c&1 == 1 {
			return c
		}
	}
	return 0
}

// capabilities is the effective and bounding set of this process.
func capabilities() uint64 {
	text, err := os.ReadFile("/proc/self/status")
	if err != nil {
		return 0
	}
	sets := ^uint64(0)
	for _, line := range strings.Split(string(text), "\n") {
		for _, key := range []string{"CapPrm:", "CapEff:", "CapBnd:"} {
			if value, ok := strings.CutPrefix(line, key); ok {
				set, err := strconv.ParseUint(strings.TrimSpace(value), 16, 64)
				if err != nil {
					return 0
				}
				sets &= set
			}
		}
	}
	return sets
}

// runsIn reports whether process pid is alive, and a postgres at work in folder
// dir. known is false when this system cannot tell.
func runsIn(pid int, dir string) (runs, known bool) {
	cwd, err := os.Readlink(fmt.Sprintf("/proc/%d/cwd", pid))
	if os.IsNotExist(err) {
		return false, true
	}
	if err != nil { // of another account: ask the socket
		return false, false
	}
	name, _ := os.ReadFile(fmt.Sprintf("/proc/%d/comm", pid))
	return cwd == dir && strings.HasPrefix(string(name), "postgres"), true
}

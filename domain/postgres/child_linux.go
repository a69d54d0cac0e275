package postgres

import (
	"fmt"
	"os"
	"strings"
	"syscall"
)

// initialLocales are tried in order for a new cluster.
var initialLocales = []string{"C.UTF-8", "C"}

// dieWithParent has the kernel send the server an immediate shutdown when this program dies.
func dieWithParent(attr *syscall.SysProcAttr) { attr.Pdeathsig = syscall.SIGQUIT }

// isPostmaster reports whether the process is a PostgreSQL server on the data folder: such a server works in its data
// folder. A process that has ended and waits for its parent to take note has no working folder any more.
func isPostmaster(_ Programs, data string, pid int) bool {
	name, err := os.ReadFile(fmt.Sprintf("/proc/%d/comm", pid))
	if err != nil {
		return false
	}
	if n := strings.TrimSpace(string(name)); n != "postgres" && n != "postmaster" {
		return false
	}
	at, err := os.Stat(fmt.Sprintf("/proc/%d/cwd", pid))
	if err != nil {
		return false
	}
	want, err := os.Stat(data)
	return err == nil && os.SameFile(at, want)
}

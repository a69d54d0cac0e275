//go:build unix && !linux

package postgres

import (
	"os/exec"
	"strconv"
	"strings"
	"syscall"
)

// initialLocales are tried in order for a new cluster.
var initialLocales = []string{"C.UTF-8", "C"}

// dieWithParent does nothing: these systems have no such signal. The next Start stops what a killed program left.
func dieWithParent(*syscall.SysProcAttr) {}

// isPostmaster reports whether the process is a PostgreSQL server on the data folder, by its command line.
func isPostmaster(_ Programs, data string, pid int) bool {
	out, err := exec.Command("ps", "-o", "command=", "-p", strconv.Itoa(pid)).Output()
	return err == nil && strings.Contains(string(out), "postgres") && strings.Contains(string(out), data)
}

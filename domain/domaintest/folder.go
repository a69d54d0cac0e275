package domaintest

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"syscall"
	"time"
)

const (
	basePrefix = "lampward-test-"
	baseAge    = 2 * time.Hour // longer than any run of tests
)

// baseFolder makes the folder that holds all this test binary writes. It first removes those of runs that were killed.
var baseFolder = sync.OnceValues(func() (string, error) {
	parent := memoryFolder()
	if parent == "" {
		parent = os.TempDir()
	}
	if err := sweep(parent, time.Now()); err != nil {
		return "", err
	}
	base, err := os.MkdirTemp(parent, fmt.Sprintf("%s%d-", basePrefix, os.Getpid()))
	if err != nil {
		return "", err
	}
	run.base = base
	return base, os.Chmod(base, 0o711) // the server's account passes through
})

// sweep removes from dir the folders of test binaries that were killed: old, named for a process that is no more, and
// this user's to remove.
func sweep(dir string, now time.Time) error {
	paths, err := filepath.Glob(filepath.Join(dir, basePrefix+"*"))
	if err != nil {
		return err
	}
	for _, path := range paths {
		name, _, ok := strings.Cut(strings.TrimPrefix(filepath.Base(path), basePrefix), "-")
		pid, err := strconv.Atoi(name)
		if !ok || err != nil || alive(pid) {
			continue
		}
		info, err := os.Stat(path)
		if err != nil || now.Sub(info.ModTime()) < baseAge {
			continue // gone meanwhile, or too young to judge
		}
		if err := os.RemoveAll(path); err != nil && !errors.Is(err, os.ErrPermission) {
			return fmt.Errorf("remove the folder of a killed test run: %w", err)
		}
	}
	return nil
}

// alive reports whether a process may still exist.
func alive(pid int) bool {
	p, err := os.FindProcess(pid)
	if err != nil {
		return false
	}
	return !errors.Is(p.Signal(syscall.Signal(0)), os.ErrProcessDone)
}

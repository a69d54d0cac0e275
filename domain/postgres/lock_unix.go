//go:build unix

package postgres

import (
	"errors"
	"os"
	"syscall"
)

// tryLock takes an exclusive lock on the open file, and reports whether it was free.
func tryLock(f *os.File) (bool, error) {
	err := syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB)
	if errors.Is(err, syscall.EWOULDBLOCK) {
		return false, nil
	}
	return err == nil, err
}

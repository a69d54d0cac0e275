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

// unlock frees the lock itself. Closing the file would not be enough: a process that this program forks at that moment
// holds the file, and with it the lock, until it becomes the program it is to run.
func unlock(f *os.File) error { return syscall.Flock(int(f.Fd()), syscall.LOCK_UN) }

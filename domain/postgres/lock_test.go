//go:build unix

package postgres

import (
	"errors"
	"os/exec"
	"path/filepath"
	"sync"
	"testing"
)

func TestLockIsFreeOnceReleased(t *testing.T) {
	t.Parallel()
	path := filepath.Join(t.TempDir(), "lock")
	// Programs started meanwhile must not carry the lock on.
	var group sync.WaitGroup
	stop := make(chan struct{})
	defer group.Wait()
	defer close(stop)
	for range 4 {
		group.Go(func() {
			for {
				select {
				case <-stop:
					return
				default:
				}
				if err := exec.Command("true").Run(); err != nil {
					t.Error(err)
					return
				}
			}
		})
	}
	for i := range 3000 {
		lock, err := lockFolder(path)
		if err != nil {
			t.Fatalf("after %d releases: %v", i, err)
		}
		if second, err := lockFolder(path); !errors.Is(err, ErrInUse) {
			second.release()
			t.Fatalf("a second lock is given: %v", err)
		}
		if err := lock.release(); err != nil {
			t.Fatal(err)
		}
	}
}

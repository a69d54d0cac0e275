package postgres

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"
)

// folderLock is held by the program that runs a folder's server. The system frees it when the program ends, however
// it ends, so it can never be stale; the process id in it is for people.
type folderLock struct{ file *os.File }

// lockFolder takes the lock, or fails with ErrInUse and says who has it.
func lockFolder(path string) (*folderLock, error) {
	file, err := os.OpenFile(path, os.O_CREATE|os.O_RDWR, 0o600)
	if err != nil {
		return nil, fmt.Errorf("lock the data folder: %w", err)
	}
	taken, err := tryLock(file)
	if err != nil {
		return nil, errors.Join(fmt.Errorf("lock the data folder: %w", err), file.Close())
	}
	if !taken {
		holder := ""
		if content, err := io.ReadAll(io.LimitReader(file, 32)); err == nil && len(content) > 0 {
			holder = " (process " + strings.TrimSpace(string(content)) + ")"
		}
		err := fmt.Errorf("%w%s: stop that one, or give this one another folder than %s",
			ErrInUse, holder, filepath.Dir(path))
		return nil, errors.Join(err, file.Close())
	}
	if err := file.Truncate(0); err != nil {
		return nil, errors.Join(err, file.Close())
	}
	if _, err := file.WriteAt([]byte(strconv.Itoa(os.Getpid())+"\n"), 0); err != nil {
		return nil, errors.Join(err, file.Close())
	}
	return &folderLock{file}, nil
}

// release frees the lock. The file stays: were it removed, two programs could each hold a lock on a file of the name.
func (l *folderLock) release() error { return errors.Join(unlock(l.file), l.file.Close()) }

//go:build unix

package postgres

import (
	"errors"
	"fmt"
	"os"
	"os/user"
	"path/filepath"
	"strconv"
	"syscall"
)

// account is who the server runs as.
type account struct {
	drop     bool // this program is root, and the server is not to be
	name     string
	uid, gid uint32
}

// serverAccount returns the account for the server: this program's own; or, for root, which PostgreSQL refuses, the
// owner of the data folder if it exists, else postgres, else nobody.
func serverAccount(data string) (account, error) {
	if !runningAsRoot() {
		return account{}, nil
	}
	if info, err := os.Stat(data); err == nil {
		owner := info.Sys().(*syscall.Stat_t)
		if owner.Uid == 0 {
			return account{}, fmt.Errorf("%s belongs to root, as whom PostgreSQL does not run: give it to postgres "+
				"(chown -R postgres %s)", data, data)
		}
		return account{true, accountName(owner.Uid), owner.Uid, owner.Gid}, nil
	} else if !errors.Is(err, os.ErrNotExist) {
		return account{}, err
	}
	for _, name := range []string{"postgres", "nobody"} {
		u, err := user.Lookup(name)
		if err != nil {
			continue
		}
		uid, err := strconv.ParseUint(u.Uid, 10, 32)
		if err != nil {
			return account{}, fmt.Errorf("account %s: %w", name, err)
		}
		gid, err := strconv.ParseUint(u.Gid, 10, 32)
		if err != nil {
			return account{}, fmt.Errorf("account %s: %w", name, err)
		}
		return account{true, name, uint32(uid), uint32(gid)}, nil
	}
	return account{}, errors.New("PostgreSQL does not run as root, and this machine has neither an account " +
		"postgres nor nobody: start this program as another user")
}

func accountName(uid uint32) string {
	if u, err := user.LookupId(strconv.FormatUint(uint64(uid), 10)); err == nil {
		return u.Username
	}
	return "user " + strconv.FormatUint(uint64(uid), 10)
}

// own gives the files to the server's account.
func (a account) own(paths ...string) error {
	if !a.drop {
		return nil
	}
	for _, path := range paths {
		if err := os.Chown(path, int(a.uid), int(a.gid)); err != nil {
			return err
		}
	}
	return nil
}

// canReach checks by their modes that the account may pass through dir and every folder above it.
func (a account) canReach(dir string) error {
	if !a.drop {
		return nil
	}
	for at := dir; ; at = filepath.Dir(at) {
		info, err := os.Stat(at)
		if err != nil {
			return err
		}
		owner := info.Sys().(*syscall.Stat_t)
		pass := os.FileMode(0o001)
		if owner.Uid == a.uid {
			pass = 0o100
		} else if owner.Gid == a.gid {
			pass = 0o010
		}
		if info.Mode()&pass == 0 {
			return fmt.Errorf("the database server runs as %s, who may not enter %s (mode %04o) on the way to %s: "+
				"give another folder, such as /var/lib/lampward", a.name, at, info.Mode().Perm(), dir)
		}
		if at == filepath.Dir(at) {
			return nil
		}
	}
}

// Package postgres opens and migrates the database, and runs a private PostgreSQL server of its own: the default
// store of a fresh installation and of every test.
package postgres

import (
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"sort"
	"strconv"
	"strings"
)

// OldestMajor is the oldest PostgreSQL major version the program's SQL runs on.
const OldestMajor = 15

// ErrNoPrograms is returned, wrapped, by Find where no usable PostgreSQL programs are installed. The wrapping error
// says in one line per system how to get them.
var ErrNoPrograms = errors.New("no PostgreSQL server programs found on this machine")

// getPrograms says how the programs are had on each system.
const getPrograms = `
  Debian, Ubuntu:    apt-get install postgresql
  Fedora, Red Hat:   dnf install postgresql-server
  Alpine:            apk add postgresql
  macOS (Homebrew):  brew install postgresql@17
  Windows (winget):  winget install PostgreSQL.PostgreSQL.17
or set LAMPWARD_DATABASE_URL to a server that runs already`

// Programs is one installation of the PostgreSQL server programs.
type Programs struct {
	Dir   string // absolute folder that holds initdb, postgres and pg_ctl
	Major int    // major version, such as 15
}

// Path returns the absolute path of the named program, such as "initdb".
func (p Programs) Path(name string) string {
	if runtime.GOOS == "windows" {
		name += ".exe"
	}
	return filepath.Join(p.Dir, name)
}

// Find returns the newest PostgreSQL server programs on this machine, from the PATH and from the usual places of
// Debian, Red Hat, Alpine, Homebrew and Windows installations. Of two of one major version the one in the PATH wins.
// It fails with ErrNoPrograms where there are none, or only versions before OldestMajor.
func Find() (Programs, error) {
	return find(searchDirs())
}

// FindMajor is Find for exactly one major version, as a data folder made by that version needs.
func FindMajor(major int) (Programs, error) {
	for _, p := range installed(searchDirs()) {
		if p.Major == major {
			return p, nil
		}
	}
	return Programs{}, fmt.Errorf("%w: version %d is needed", ErrNoPrograms, major)
}

func find(dirs []string) (Programs, error) {
	found := installed(dirs)
	if len(found) == 0 {
		return Programs{}, fmt.Errorf("%w; install version %d or newer:%s", ErrNoPrograms, OldestMajor, getPrograms)
	}
	if newest := found[0]; newest.Major >= OldestMajor {
		return newest, nil
	}
	return Programs{}, fmt.Errorf("%w: version %d in %s is too old; install version %d or newer:%s",
		ErrNoPrograms, found[0].Major, found[0].Dir, OldestMajor, getPrograms)
}

// searchDirs lists the folders that may hold the programs, those of the PATH first.
func searchDirs() []string {
	var dirs []string
	for _, name := range []string{"postgres", "initdb"} {
		// An entry of the PATH is often a link to one program; all of them are beside its target.
		if path, err := exec.LookPath(name); err == nil {
			if real, err := filepath.EvalSymlinks(path); err == nil {
				dirs = append(dirs, filepath.Dir(real))
			}
			dirs = append(dirs, filepath.Dir(path))
		}
	}
	for _, pattern := range places[runtime.GOOS] {
		// The only error Glob has is a malformed pattern; these are constants that a test reads.
		matches, _ := filepath.Glob(pattern)
		dirs = append(dirs, matches...)
	}
	return dirs
}

// places are the usual folders of each system's packages.
var places = map[string][]string{
	"linux": {
		"/usr/lib/postgresql/*/bin", // Debian, Ubuntu
		"/usr/pgsql-*/bin",          // Red Hat, packages of the PostgreSQL project
		"/usr/libexec/postgresql*",  // Alpine
		"/usr/lib/postgresql*/bin",  // openSUSE, Gentoo
		"/usr/local/pgsql/bin",      // built from source
		"/usr/bin",                  // Red Hat and Arch, the system's own packages
		"/home/linuxbrew/.linuxbrew/opt/postgresql@*/bin",
	},
	"darwin": {
		"/opt/homebrew/opt/postgresql@*/bin",
		"/usr/local/opt/postgresql@*/bin",
		"/opt/homebrew/opt/postgresql/bin",
		"/usr/local/opt/postgresql/bin",
		"/Library/PostgreSQL/*/bin",
		"/Applications/Postgres.app/Contents/Versions/*/bin",
		"/opt/local/lib/postgresql*/bin",
	},
	"freebsd": {"/usr/local/bin"},
	"windows": {`C:\Program Files\PostgreSQL\*\bin`},
}

// installed returns the complete installations among dirs, the newest major version first and otherwise in order.
func installed(dirs []string) []Programs {
	var found []Programs
	seen := map[string]bool{}
	for _, dir := range dirs {
		dir, err := filepath.Abs(dir)
		if err != nil || seen[dir] {
			continue
		}
		seen[dir] = true
		if p, err := inspect(dir); err == nil {
			found = append(found, p)
		}
	}
	sort.SliceStable(found, func(i, j int) bool { return found[i].Major > found[j].Major })
	return found
}

// inspect reads the version of the installation in dir.
func inspect(dir string) (Programs, error) {
	p := Programs{Dir: dir}
	for _, name := range []string{"initdb", "postgres", "pg_ctl"} {
		if info, err := os.Stat(p.Path(name)); err != nil {
			return Programs{}, err
		} else if info.IsDir() {
			return Programs{}, fmt.Errorf("%s is a folder", p.Path(name))
		}
	}
	out, err := exec.Command(p.Path("postgres"), "--version").Output()
	if err != nil {
		return Programs{}, fmt.Errorf("%s --version: %w", p.Path("postgres"), err)
	}
	p.Major, err = parseMajor(string(out))
	return p, err
}

// parseMajor reads the major version off the output of "postgres --version", such as "postgres (PostgreSQL) 15.14
// (Debian 15.14-0+deb12u1)", "postgres (PostgreSQL) 18beta1" or "postgres (PostgreSQL) 17devel".
func parseMajor(out string) (int, error) {
	_, rest, ok := strings.Cut(out, "(PostgreSQL)")
	rest = strings.TrimSpace(rest)
	end := 0
	for end < len(rest) && rest[end] >= '0' && rest[end] <= '9' {
		end++
	}
	major, err := strconv.Atoi(rest[:end])
	if !ok || err != nil {
		return 0, fmt.Errorf("not a PostgreSQL version: %q", strings.TrimSpace(out))
	}
	return major, nil
}

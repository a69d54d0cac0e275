package postgres

import (
	"errors"
	"path/filepath"
	"runtime"
)

// DefaultDir returns where the private server keeps its data unless told otherwise: under the user's data folder, or,
// for root, whose home other accounts may not enter, under the system's. The function given reads the environment.
func DefaultDir(getenv func(string) string) (string, error) {
	return defaultDir(runtime.GOOS, runningAsRoot(), getenv)
}

func defaultDir(system string, root bool, getenv func(string) string) (string, error) {
	home := getenv("HOME")
	switch {
	case system == "windows" && getenv("LOCALAPPDATA") != "":
		return filepath.Join(getenv("LOCALAPPDATA"), "lampward", "database"), nil
	case system == "windows":
	case system == "darwin" && root:
		return "/usr/local/var/lampward/database", nil
	case root:
		return "/var/lib/lampward/database", nil
	case system == "darwin" && home != "":
		return filepath.Join(home, "Library", "Application Support", "lampward", "database"), nil
	case filepath.IsAbs(getenv("XDG_DATA_HOME")): // a relative one is to be ignored, says the XDG specification
		return filepath.Join(getenv("XDG_DATA_HOME"), "lampward", "database"), nil
	case home != "":
		return filepath.Join(home, ".local", "share", "lampward", "database"), nil
	}
	return "", errors.New("no home folder in the environment: say where the database is to be kept")
}

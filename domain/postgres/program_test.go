package postgres

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
)

func TestParseMajor(t *testing.T) {
	t.Parallel()
	// Lines as the programs of the named systems print them.
	for out, want := range map[string]int{
		"postgres (PostgreSQL) 15.14 (Debian 15.14-0+deb12u1)\n":     15,
		"postgres (PostgreSQL) 17.5 (Homebrew)\n":                    17,
		"postgres (PostgreSQL) 16.9\n":                               16,
		"postgres (PostgreSQL) 18beta1\n":                            18,
		"postgres (PostgreSQL) 19devel\n":                            19,
		"postgres (PostgreSQL) 9.6.24\n":                             9,
		"postgres (PostgreSQL) 16.4 (Ubuntu 16.4-1.pgdg22.04+1)\r\n": 16,
	} {
		if got, err := parseMajor(out); got != want || err != nil {
			t.Errorf("parseMajor(%q) = %d, %v, want %d", out, got, err, want)
		}
	}
	for _, out := range []string{"", "15.14", "postgres (PostgreSQL)", "postgres (PostgreSQL) devel", "postgres (PostgreSQL) 99999999999999999999"} {
		if got, err := parseMajor(out); err == nil {
			t.Errorf("parseMajor(%q) = %d, want an error", out, got)
		}
	}
}

// install makes a folder of programs that tell the version.
func install(t *testing.T, dir, version string) string {
	t.Helper()
	if err := os.MkdirAll(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	script := fmt.Sprintf("#!/bin/sh\necho 'postgres (PostgreSQL) %s'\n", version)
	for _, name := range []string{"postgres", "initdb", "pg_ctl"} {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(script), 0o755); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

// Not parallel: a process forked by another test while a program is written here would make it busy to run.
func TestFindTakesTheNewest(t *testing.T) {
	if runtime.GOOS == "windows" {
		t.Log("programs of the test are shell scripts; nothing to test here")
		return
	}
	dir := t.TempDir()
	at := func(name string) string { return filepath.Join(dir, name) }
	nine, fifteen := install(t, at("9.6"), "9.6.24"), install(t, at("15"), "15.14")
	seventeen, other := install(t, at("17"), "17.5 (Homebrew)"), install(t, at("other17"), "17.1")
	broken := install(t, at("18"), "18.0")
	if err := os.Remove(filepath.Join(broken, "initdb")); err != nil { // the client's package alone
		t.Fatal(err)
	}
	for _, tt := range []struct {
		dirs []string
		want Programs
	}{
		{[]string{fifteen}, Programs{fifteen, 15}},
		{[]string{nine, fifteen, seventeen}, Programs{seventeen, 17}},
		{[]string{broken, other, fifteen, seventeen}, Programs{other, 17}},
	} {
		if got, err := find(tt.dirs); got != tt.want || err != nil {
			t.Errorf("find(%v) = %v, %v, want %v", tt.dirs, got, err, tt.want)
		}
	}
	for _, tt := range []struct {
		dirs  []string
		words []string
	}{
		{nil, []string{"Debian", "Red Hat", "Homebrew", "Windows", "LAMPWARD_DATABASE_URL"}},
		{[]string{broken, at("absent")}, []string{"apt-get install postgresql"}},
		{[]string{nine}, []string{"version 9 in " + nine + " is too old", "Debian"}},
	} {
		got, err := find(tt.dirs)
		if !errors.Is(err, ErrNoPrograms) {
			t.Errorf("find(%v) = %v, %v, want ErrNoPrograms", tt.dirs, got, err)
			continue
		}
		for _, w := range tt.words {
			if !strings.Contains(err.Error(), w) {
				t.Errorf("find(%v) does not say %q: %v", tt.dirs, w, err)
			}
		}
	}
}

func TestFindOnThisMachine(t *testing.T) {
	t.Parallel()
	got, err := Find()
	if err != nil {
		t.Fatal(err)
	}
	if got.Major < OldestMajor || !filepath.IsAbs(got.Dir) {
		t.Errorf("Find = %+v", got)
	}
	if same, err := FindMajor(got.Major); same != got || err != nil {
		t.Errorf("FindMajor(%d) = %v, %v, want %v", got.Major, same, err, got)
	}
	if p, err := FindMajor(9); !errors.Is(err, ErrNoPrograms) {
		t.Errorf("FindMajor(9) = %v, %v", p, err)
	}
}

func TestPlacesAreWellFormed(t *testing.T) {
	t.Parallel()
	for system, patterns := range places {
		for _, pattern := range patterns {
			if _, err := filepath.Match(pattern, "/x"); err != nil {
				t.Errorf("%s: %s: %v", system, pattern, err)
			}
		}
	}
}

//go:build unix

// Package deploy_test runs what is deployed: the scripts against a real server, and the files against what the program
// offers.
package deploy_test

import (
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"lampward/domain/domaintest"
	"lampward/domain/postgres"
)

func TestMain(m *testing.M) { domaintest.Main(m) }

// site is a server whose log is archived, the backups of it, and the scripts, in a folder all may enter.
type site struct {
	dir    string
	server *postgres.Server
	owner  *syscall.Stat_t // of the server's data
}

// newSite starts a server that archives its log with archive-wal.sh.
func newSite(t *testing.T) site {
	t.Helper()
	s := site{dir: domaintest.Folder(t)}
	// The checked-out scripts may lie where the server's account cannot reach.
	for _, name := range []string{"archive-wal.sh", "backup.sh", "restore.sh"} {
		content, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(s.path(name), content, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	for _, name := range []string{"backup", "backup/wal"} {
		if err := os.Mkdir(s.path(name), 0o700); err != nil {
			t.Fatal(err)
		}
	}
	var err error
	s.server, err = postgres.Start(t.Context(), postgres.Options{
		Dir: s.path("server"),
		Settings: map[string]string{
			"archive_mode":    "on",
			"archive_command": fmt.Sprintf(`sh "%s" "%%p" "%%f" "%s"`, s.path("archive-wal.sh"), s.path("backup/wal")),
			"autovacuum":      "off", // its work in the background would fill segments of its own
		},
	})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.server.Close() }) // says that the server ended on its own where the test killed it
	info, err := os.Stat(s.server.DataDir())
	if err != nil {
		t.Fatal(err)
	}
	s.owner = info.Sys().(*syscall.Stat_t)
	for _, name := range []string{"backup", "backup/wal"} {
		if err := os.Chown(s.path(name), int(s.owner.Uid), int(s.owner.Gid)); err != nil {
			t.Fatal(err)
		}
	}
	s.do(t, `CREATE TABLE kept (n int PRIMARY KEY)`)
	return s
}

func (s site) path(name string) string { return filepath.Join(s.dir, name) }

// do runs SQL on the server.
func (s site) do(t *testing.T, sql string) {
	t.Helper()
	ask[any](t, s.server.URL(), "WITH nothing AS (SELECT) SELECT NULL FROM nothing", sql)
}

// ask runs the statements before it and returns what the query answers.
func ask[T any](t *testing.T, url, query string, before ...string) (answer T) {
	t.Helper()
	conn, err := pgx.Connect(t.Context(), url)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(context.Background())
	for _, sql := range before {
		if _, err := conn.Exec(t.Context(), sql); err != nil {
			t.Fatalf("%s: %v", sql, err)
		}
	}
	if err := conn.QueryRow(t.Context(), query).Scan(&answer); err != nil {
		t.Fatalf("%s: %v", query, err)
	}
	return answer
}

// script runs one of the scripts and returns what it says.
func (s site) script(t *testing.T, name string, arguments ...string) (string, error) {
	t.Helper()
	cmd := exec.CommandContext(t.Context(), "bash", append([]string{s.path(name)}, arguments...)...)
	cmd.Env = append(os.Environ(), "LAMPWARD_DATABASE_URL="+s.server.URL(), "PGBIN="+s.server.Programs().Dir)
	cmd.Dir = s.dir
	out, err := cmd.CombinedOutput()
	if strings.Contains(string(out), strings.TrimSpace(read(t, s.path("server/password")))) {
		t.Errorf("%s tells the password:\n%s", name, out)
	}
	return string(out), err
}

func (s site) mustScript(t *testing.T, name string, arguments ...string) string {
	t.Helper()
	out, err := s.script(t, name, arguments...)
	if err != nil {
		t.Fatalf("%s: %v\n%s", name, err, out)
	}
	return out
}

// archived finishes the segment of the log being written, and waits until it is in the archive.
func (s site) archived(t *testing.T) {
	t.Helper()
	name := ask[string](t, s.server.URL(), `SELECT pg_walfile_name(pg_switch_wal())`)
	limit := time.After(time.Minute)
	tick := time.NewTicker(20 * time.Millisecond)
	defer tick.Stop()
	for {
		if _, err := os.Stat(s.path("backup/wal/" + name + ".gz")); err == nil {
			return
		}
		select {
		case <-tick.C:
		case <-limit:
			t.Fatalf("segment %s was not archived in a minute; the server's log:\n%s", name, read(t, s.server.LogFile()))
		}
	}
}

func read(t *testing.T, path string) string {
	t.Helper()
	content, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return string(content)
}

// open starts a server on a restored data folder and returns how many rows there are, and whether any is missing from
// 1 on.
func (s site) open(t *testing.T, name string) (rows, highest int) {
	t.Helper()
	dir := s.path(name)
	if err := os.WriteFile(filepath.Join(dir, "password"), []byte(read(t, s.path("server/password"))), 0o600); err != nil {
		t.Fatal(err)
	}
	restored, err := postgres.Start(t.Context(), postgres.Options{Dir: dir})
	if err != nil {
		t.Fatal(err)
	}
	rows = ask[int](t, restored.URL(), `SELECT count(*)::int FROM kept`)
	highest = ask[int](t, restored.URL(), `SELECT coalesce(max(n), 0) FROM kept`)
	ask[int](t, restored.URL(), `SELECT 1`, `INSERT INTO kept VALUES (-1)`) // it takes writes
	if err := restored.Close(); err != nil {
		t.Error(err)
	}
	return rows, highest
}

func TestRestore(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.do(t, `INSERT INTO kept SELECT generate_series(1, 1000)`)
	out := s.mustScript(t, "backup.sh", s.path("backup"))
	if !strings.Contains(out, "kept "+s.path("backup/base-")) {
		t.Errorf("the backup says:\n%s", out)
	}
	s.do(t, `INSERT INTO kept SELECT generate_series(1001, 2000)`)
	moment := ask[string](t, s.server.URL(), `SELECT clock_timestamp()::text`)
	s.archived(t)
	s.do(t, `INSERT INTO kept SELECT generate_series(2001, 3000)`)
	s.archived(t)
	s.do(t, `INSERT INTO kept SELECT generate_series(3001, 4000)`) // in a segment that is never archived
	if err := syscall.Kill(s.server.PID(), syscall.SIGKILL); err != nil {
		t.Fatal(err)
	}
	<-s.server.Done()

	t.Run("with the lost server's log", func(t *testing.T) {
		// Stands where the program does; it opens the database by the URL it is given.
		program := s.path("verify")
		script := "#!/bin/sh\necho \"asked to $*\"\n" + s.server.Programs().Path("psql") +
			" -XAtc \"SELECT 'rows at verification: ' || count(*) FROM kept\" \"$LAMPWARD_DATABASE_URL\"\n"
		if err := os.WriteFile(program, []byte(script), 0o755); err != nil {
			t.Fatal(err)
		}
		out := s.mustScript(t, "restore.sh", "--from", s.path("backup"), "--to", s.path("whole/data"),
			"--old-wal", filepath.Join(s.server.DataDir(), "pg_wal"), "--lampward", program)
		for _, want := range []string{"asked to audit verify", "rows at verification: 4000", "is ready"} {
			if !strings.Contains(out, want) {
				t.Errorf("the restore does not say %q:\n%s", want, out)
			}
		}
		if rows, highest := s.open(t, "whole"); rows != 4000 || highest != 4000 {
			t.Errorf("%d rows up to %d, want all 4000", rows, highest)
		}
	})
	t.Run("from the archive alone", func(t *testing.T) {
		s.mustScript(t, "restore.sh", "--from", s.path("backup"), "--to", s.path("archive/data"))
		if rows, highest := s.open(t, "archive"); rows != 3000 || highest != 3000 {
			t.Errorf("%d rows up to %d, want the 3000 that were archived", rows, highest)
		}
	})
	t.Run("to a moment", func(t *testing.T) {
		s.mustScript(t, "restore.sh", "--from", s.path("backup"), "--to", s.path("moment/data"), "--until", moment)
		if rows, highest := s.open(t, "moment"); rows != 2000 || highest != 2000 {
			t.Errorf("%d rows up to %d, want the 2000 from before %s", rows, highest, moment)
		}
	})
	t.Run("to a moment after the last record", func(t *testing.T) {
		out, err := s.script(t, "restore.sh", "--from", s.path("backup"), "--to", s.path("future/data"), "--until", "2999-01-01")
		if err == nil || !strings.Contains(out, "before configured recovery target was reached") {
			t.Errorf("%v\n%s", err, out)
		}
	})
	t.Run("a program that finds fault fails the restore", func(t *testing.T) {
		out, err := s.script(t, "restore.sh", "--from", s.path("backup"), "--to", s.path("fault/data"), "--lampward", "/bin/false")
		if err == nil || strings.Contains(out, "is ready") {
			t.Errorf("%v\n%s", err, out)
		}
	})

	segments, err := filepath.Glob(s.path("backup/wal/0*.gz"))
	if err != nil || len(segments) < 3 {
		t.Fatalf("segments %v, %v", segments, err)
	}
	second := segments[len(segments)-2] // holds rows 1001 to 2000
	content := read(t, second)
	t.Run("a damaged segment", func(t *testing.T) {
		if err := os.WriteFile(second, []byte(content[:len(content)/2]), 0o600); err != nil {
			t.Fatal(err)
		}
		out, err := s.script(t, "restore.sh", "--from", s.path("backup"), "--to", s.path("damaged/data"))
		if err == nil || !strings.Contains(out, "could not restore file") {
			t.Errorf("%v\n%s", err, out)
		}
	})
	t.Run("a missing segment", func(t *testing.T) {
		if err := os.Remove(second); err != nil {
			t.Fatal(err)
		}
		out, err := s.script(t, "restore.sh", "--from", s.path("backup"), "--to", s.path("missing/data"))
		if err == nil || !strings.Contains(out, "a segment between them is missing") {
			t.Errorf("%v\n%s", err, out)
		}
	})
	t.Run("a damaged base", func(t *testing.T) {
		bases, err := filepath.Glob(s.path("backup/base-*/global/pg_filenode.map"))
		if err != nil || len(bases) != 1 {
			t.Fatalf("%v, %v", bases, err)
		}
		if err := os.WriteFile(bases[0], []byte("x"), 0o600); err != nil {
			t.Fatal(err)
		}
		out, err := s.script(t, "restore.sh", "--from", s.path("backup"), "--to", s.path("base/data"))
		if err == nil || !strings.Contains(out, "pg_filenode.map") {
			t.Errorf("%v\n%s", err, out)
		}
	})
}

func TestBackupKeepsWhatWasAskedFor(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	// Two from before, by their names; the oldest goes.
	s.mustScript(t, "backup.sh", s.path("backup"))
	made, err := filepath.Glob(s.path("backup/base-*"))
	if err != nil || len(made) != 1 {
		t.Fatalf("%v, %v", made, err)
	}
	older, oldest := s.path("backup/base-20250102T030405Z"), s.path("backup/base-20250101T030405Z")
	if err := os.Rename(made[0], oldest); err != nil {
		t.Fatal(err)
	}
	s.archived(t)
	s.do(t, `INSERT INTO kept SELECT generate_series(1, 1000)`)
	s.archived(t)
	before, err := filepath.Glob(s.path("backup/wal/" + strings.Repeat("?", 24) + ".gz"))
	if err != nil {
		t.Fatal(err)
	}
	s.mustScript(t, "backup.sh", s.path("backup"), "2")
	if made, err = filepath.Glob(s.path("backup/base-*")); err != nil || len(made) != 2 {
		t.Fatalf("%v, %v, want both", made, err)
	}
	if err := os.Rename(made[1], older); err != nil { // made is in order, and the oldest is first
		t.Fatal(err)
	}
	s.mustScript(t, "backup.sh", s.path("backup"), "2")
	if _, err := os.Stat(oldest); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the oldest of three is kept of 2: %v", err)
	}
	if _, err := os.Stat(older); err != nil {
		t.Errorf("the second of three is not kept of 2: %v", err)
	}
	// The segments from before the second base went with the first.
	for _, path := range before[:2] {
		if _, err := os.Stat(path); !errors.Is(err, os.ErrNotExist) {
			t.Errorf("%s is kept, which no base needs: %v", path, err)
		}
	}
	s.mustScript(t, "restore.sh", "--from", s.path("backup"), "--to", s.path("restored/data"), "--base", filepath.Base(older))
	if rows, _ := s.open(t, "restored"); rows != 1000 {
		t.Errorf("%d rows from the older base, want 1000", rows)
	}
}

func TestArchiveRefusesOtherContent(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	archive := filepath.Join(dir, "wal")
	if err := os.Mkdir(archive, 0o700); err != nil {
		t.Fatal(err)
	}
	segment := filepath.Join(dir, "segment")
	keep := func(content string) error {
		if err := os.WriteFile(segment, []byte(content), 0o600); err != nil {
			t.Fatal(err)
		}
		return exec.Command("sh", "archive-wal.sh", segment, "000000010000000000000001", archive).Run()
	}
	if err := keep("one"); err != nil {
		t.Fatal(err)
	}
	if err := keep("one"); err != nil {
		t.Errorf("the same segment again: %v", err)
	}
	if err := keep("two"); err == nil {
		t.Error("another segment of the same name is taken")
	}
	out, err := exec.Command("gunzip", "-c", filepath.Join(archive, "000000010000000000000001.gz")).Output()
	if err != nil || string(out) != "one" {
		t.Errorf("the archive holds %q, %v", out, err)
	}
}

func TestScriptsRefuse(t *testing.T) {
	t.Parallel()
	s := site{dir: domaintest.Folder(t)}
	filled := filepath.Join(s.dir, "filled")
	if err := os.MkdirAll(filepath.Join(filled, "x"), 0o755); err != nil {
		t.Fatal(err)
	}
	empty := t.TempDir()
	for _, tt := range []struct {
		arguments []string
		says      string
	}{
		{[]string{"backup.sh"}, "usage"},
		{[]string{"backup.sh", filled, "0"}, "KEEP must be"},
		{[]string{"backup.sh", filepath.Join(s.dir, "absent")}, "is not a folder"},
		{[]string{"backup.sh", filled}, "LAMPWARD_DATABASE_URL is not set"},
		{[]string{"restore.sh"}, "--old-wal"},
		{[]string{"restore.sh", "--from"}, "--old-wal"},
		{[]string{"restore.sh", "--form", "x"}, "--old-wal"},
		{[]string{"restore.sh", "--from", filled, "--to", filled}, "is not empty"},
		{[]string{"restore.sh", "--from", filepath.Join(s.dir, "absent"), "--to", empty}, "is not a folder"},
		{[]string{"restore.sh", "--from", filled, "--to", empty, "--lampward", "/absent"}, "cannot be run"},
		{[]string{"restore.sh", "--from", filled, "--to", empty, "--old-wal", "/absent"}, "is not a folder"},
	} {
		cmd := exec.Command("bash", tt.arguments...)
		cmd.Env = []string{"PATH=" + os.Getenv("PATH")}
		out, err := cmd.CombinedOutput()
		if err == nil || !strings.Contains(string(out), tt.says) {
			t.Errorf("%v: %v, want it to say %q:\n%s", tt.arguments, err, tt.says, out)
		}
	}
}

// Package domaintest gives every test a database of its own: a copy, made in some tens of milliseconds, of a template
// that holds the migrated schema. A test package that uses it starts one private PostgreSQL server, when the first test
// asks for a database, and stops it after the last; nothing needs to run beforehand and nothing is left afterwards, not
// even of a test binary that is killed (where the system signals the death of a parent: Linux, Windows).
//
// A package that uses it says so once:
//
//	func TestMain(m *testing.M) { domaintest.Main(m) }
package domaintest

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"lampward/domain/postgres"
	"lampward/migrations"
)

const template = "lampward_template"

var keep = flag.Bool("keep", false, "keep the folder of the test server, and say how to open it, when a test fails")

// run is what the tests of this binary share.
var run struct {
	ready   bool // Main was called
	prepare []Prepare
	base    string // holds everything on disk
	failed  atomic.Bool
	number  atomic.Int64
	folders atomic.Int64

	start  func() error // once
	server *postgres.Server
	admin  *pgxpool.Pool
}

// Prepare adds to the template, after the migrations, what the package's tests need beyond them, such as the tables of
// the job library. It is given the template's connection URL.
type Prepare func(ctx context.Context, url string) error

// Main runs the tests (m is the testing.M, or what a package wraps around it) and exits. It fails the run if the server
// does not stop cleanly or a process is left.
func Main(m interface{ Run() int }, prepare ...Prepare) {
	run.ready, run.prepare = true, prepare
	run.start = sync.OnceValue(startServer)
	code := m.Run()
	if err := finish(); err != nil {
		fmt.Fprintln(os.Stderr, "domaintest:", err)
		code = max(code, 1)
	}
	os.Exit(code)
}

// finish stops the server, looks for what is left, and removes the folder.
func finish() error {
	if run.base == "" {
		return left("")
	}
	var errs []error
	if run.admin != nil {
		run.admin.Close()
	}
	if run.server != nil {
		errs = append(errs, run.server.Close())
	}
	errs = append(errs, left(run.base))
	if *keep && run.failed.Load() && run.server != nil {
		s := run.server
		fmt.Fprintf(os.Stderr, "domaintest: the server's folder is kept. To open it, as the owner of the data:\n"+
			"  %s -D %s -k %s -c listen_addresses=\n  PGPASSWORD=$(cat %s) psql -h %s -U lampward -l\n",
			s.Programs().Path("postgres"), s.DataDir(), s.DataDir(),
			filepath.Join(filepath.Dir(s.DataDir()), "password"), s.DataDir())
		return errors.Join(errs...)
	}
	return errors.Join(append(errs, os.RemoveAll(run.base))...)
}

// DB returns a pool on a fresh database with the migrated schema, for this test alone: at most four connections, closed
// at the end of the test. The database is dropped if the test passes; if it fails it is kept until the end of the run,
// or for good with the flag -keep, and the log says how to open it.
func DB(t testing.TB) *pgxpool.Pool {
	t.Helper()
	url := URL(t)
	pool, err := postgres.Open(t.Context(), url, postgres.PoolOptions{ApplicationName: t.Name(), MaxConns: 4})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { closePool(t, pool) })
	return pool
}

// URL returns the connection URL of a fresh database with the migrated schema, as DB does, for programs that open it
// themselves.
func URL(t testing.TB) string {
	t.Helper()
	return database(t, template)
}

// Empty returns the connection URL of a fresh database without a schema.
func Empty(t testing.TB) string {
	t.Helper()
	return database(t, "template1")
}

// Folder returns an empty folder for a private server, removed at the end of the test. The one of testing.T is closed
// to other accounts than its own, and the server of a test run as root has another.
func Folder(t testing.TB) string {
	t.Helper()
	base, err := baseFolder()
	if err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(base, "f"+strconv.FormatInt(run.folders.Add(1), 10))
	if err := os.Mkdir(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := os.RemoveAll(dir); err != nil {
			t.Error(err)
		}
	})
	return dir
}

// database makes a database for the test from the named template.
func database(t testing.TB, from string) string {
	t.Helper()
	if !run.ready {
		t.Fatal("this package lacks: func TestMain(m *testing.M) { domaintest.Main(m) }")
	}
	if err := run.start(); err != nil {
		t.Fatal(err)
	}
	name := databaseName(t.Name(), run.number.Add(1))
	url := run.server.DatabaseURL(name)
	// A cancelled context must not keep the database from being dropped, nor end the making of it half way.
	ctx := context.WithoutCancel(t.Context())
	quoted := pgx.Identifier{name}.Sanitize()
	// Copying the files beats replaying them through the log several times over, since nothing here is ever synced.
	if _, err := run.admin.Exec(ctx, `CREATE DATABASE `+quoted+` TEMPLATE `+from+` STRATEGY file_copy`); err != nil {
		t.Fatalf("make a database for the test: %v", err)
	}
	t.Cleanup(func() {
		if t.Failed() {
			run.failed.Store(true)
			how := "it goes with the end of the run; to keep it, run the test with -args -keep"
			if *keep {
				how = "it is kept"
			}
			t.Logf("the test's database is %s: psql '%s' (%s)", name, url, how)
			return
		}
		if _, err := run.admin.Exec(ctx, `DROP DATABASE `+quoted+` WITH (FORCE)`); err != nil {
			t.Errorf("drop the test's database: %v", err)
		}
	})
	return url
}

// databaseName turns a test's name into one that needs no thought in a shell, within the 63 bytes of a name.
func databaseName(test string, number int64) string {
	safe := strings.Map(func(r rune) rune {
		switch {
		case r >= 'a' && r <= 'z', r >= '0' && r <= '9':
			return r
		case r >= 'A' && r <= 'Z':
			return r + 'a' - 'A'
		}
		return '_'
	}, test)
	return fmt.Sprintf("%.40s_%d", safe, number)
}

// closePool closes the test's pool. A connection that the test never gave back would make that wait for ever.
func closePool(t testing.TB, pool *pgxpool.Pool) {
	t.Helper()
	closed := make(chan struct{})
	go func() {
		pool.Close()
		close(closed)
	}()
	select {
	case <-closed:
	case <-time.After(10 * time.Second):
		t.Errorf("%d connections of the test's pool were never given back", pool.Stat().AcquiredConns())
	}
}

// startServer runs the server of this test binary and makes the template on it.
func startServer() error {
	ctx := context.Background()
	base, err := baseFolder()
	if err != nil {
		return err
	}
	run.server, err = postgres.Start(ctx, postgres.Options{
		Dir:      filepath.Join(base, "server"),
		Database: template,
		NoFsync:  true,
		Settings: map[string]string{
			"max_connections": "200",
			// Tests that load many rows analyse them, as the program does; and a worker in the template would hold up
			// the copies.
			"autovacuum":       "off",
			"wal_level":        "minimal",
			"max_wal_senders":  "0",
			"max_wal_size":     "4GB",
			"deadlock_timeout": "200ms",
		},
	})
	if err != nil {
		return fmt.Errorf("start a server for the tests: %w", err)
	}
	url := run.server.DatabaseURL(template)
	if _, _, err := postgres.Up(ctx, url, migrations.Files); err != nil {
		return fmt.Errorf("migrate the template: %w", err)
	}
	for _, prepare := range run.prepare {
		if err := prepare(ctx, url); err != nil {
			return fmt.Errorf("prepare the template: %w", err)
		}
	}
	run.admin, err = postgres.Open(ctx, run.server.DatabaseURL("postgres"), postgres.PoolOptions{
		ApplicationName: "domaintest", MaxConns: 4, StatementTimeout: 5 * time.Minute, LockTimeout: 5 * time.Minute,
	})
	if err != nil {
		return err
	}
	if _, err := run.admin.Exec(ctx, `ALTER DATABASE `+template+` ALLOW_CONNECTIONS false`); err != nil {
		return fmt.Errorf("close the template: %w", err)
	}
	return nil
}

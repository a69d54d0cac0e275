package postgres

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"io/fs"
	"strings"
	"time"

	"github.com/golang-migrate/migrate/v4"
	"github.com/golang-migrate/migrate/v4/database"
	migratepgx "github.com/golang-migrate/migrate/v4/database/pgx/v5"
	"github.com/golang-migrate/migrate/v4/source/iofs"
	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/stdlib"
)

// DirtyError says that a migration stopped half way, so that the schema is of no known version.
type DirtyError struct{ Version uint }

// Error says what to do.
func (e *DirtyError) Error() string {
	return fmt.Sprintf("the schema is marked as half way to version %d: a migration stopped. The statements of a file "+
		"are undone together when one fails, unless the file ends its transaction itself. Compare the schema with the "+
		"file, put right by hand what it left, record the version the schema is really at (the one before the attempt "+
		"if nothing is left), and migrate again", e.Version)
}

// migrationLock is the advisory lock under which this program migrates, one process at a time.
const migrationLock = 0x6c616d70 // "lamp"

// Up applies every migration of files that the database lacks, and returns the version it was at and is at now (0 for
// an empty database). Having nothing to do is no error. Programs that migrate one database at once wait for one
// another. It fails with *DirtyError if an earlier migration stopped half way, and refuses a database that is newer
// than files. A migration that fails is named with its file's line.
func Up(ctx context.Context, url string, files fs.FS) (from, to uint, err error) {
	return migrateBy(ctx, url, files, func(m *migrate.Migrate, at uint) error {
		latest, err := Latest(files)
		if err != nil {
			return err
		}
		if at > latest {
			return fmt.Errorf("the database is at version %d and this program knows versions up to %d: "+
				"run the newer program", at, latest)
		}
		return m.Up()
	})
}

// Down takes back the last steps migrations, or all of them if steps is 0, and with them the data they hold. It
// returns the version the database was at and is at now.
func Down(ctx context.Context, url string, files fs.FS, steps int) (from, to uint, err error) {
	if steps < 0 {
		return 0, 0, errors.New("steps must not be negative")
	}
	return migrateBy(ctx, url, files, func(m *migrate.Migrate, at uint) error {
		if steps == 0 || at == 0 {
			return m.Down()
		}
		err := m.Steps(-steps)
		if _, ok := errors.AsType[migrate.ErrShortLimit](err); ok {
			return nil // there were fewer, and all are taken back
		}
		return err
	})
}

// Force records that the schema is at the given version, and runs nothing. It ends the state that DirtyError tells of.
func Force(ctx context.Context, url string, files fs.FS, version uint) error {
	return withMigrate(ctx, url, files, func(m *migrate.Migrate) error {
		if version == 0 {
			return m.Force(database.NilVersion)
		}
		return m.Force(int(version))
	})
}

// Version returns the version that the database's schema is at, 0 if no migration was ever applied, and whether it
// stopped half way through that version. It changes nothing and may be asked with a reader's rights.
func Version(ctx context.Context, url string) (version uint, dirty bool, err error) {
	config, err := parseURL(url)
	if err != nil {
		return 0, false, err
	}
	db := stdlib.OpenDB(*config.ConnConfig)
	defer db.Close()
	var stored int64 // -1 where the very first migration was being taken back
	err = db.QueryRowContext(ctx, `SELECT version, dirty FROM schema_migrations LIMIT 1`).Scan(&stored, &dirty)
	if errors.Is(err, sql.ErrNoRows) || sqlState(err) == "42P01" { // undefined_table
		return 0, false, nil
	}
	if err != nil {
		return 0, false, fmt.Errorf("read the schema's version: %w", err)
	}
	return uint(max(0, stored)), dirty, nil
}

// Latest returns the highest version among the migrations in files.
func Latest(files fs.FS) (uint, error) {
	src, err := iofs.New(files, ".")
	if err != nil {
		return 0, fmt.Errorf("read the migrations: %w", err)
	}
	defer src.Close()
	version, err := src.First()
	for err == nil {
		var next uint
		if next, err = src.Next(version); err == nil {
			version = next
		}
	}
	if !errors.Is(err, fs.ErrNotExist) {
		return 0, fmt.Errorf("read the migrations: %w", err)
	}
	if version == 0 {
		return 0, errors.New("there are no migrations")
	}
	return version, nil
}

// migrateBy runs step with the version the database is at, and tells what became of it.
func migrateBy(ctx context.Context, url string, files fs.FS, step func(*migrate.Migrate, uint) error) (from, to uint, err error) {
	err = withMigrate(ctx, url, files, func(m *migrate.Migrate) error {
		var dirty bool
		var err error
		if from, dirty, err = versionOf(m); err != nil {
			return err
		}
		if dirty {
			return &DirtyError{from}
		}
		err = step(m, from)
		if errors.Is(err, migrate.ErrNoChange) {
			err = nil
		}
		if err == nil {
			err = ctx.Err() // it stops between two migrations without an error of its own
		}
		var versionErr error
		if to, _, versionErr = versionOf(m); err == nil {
			err = versionErr
		}
		return explain(err, to)
	})
	return from, to, err
}

func versionOf(m *migrate.Migrate) (uint, bool, error) {
	version, dirty, err := m.Version()
	if errors.Is(err, migrate.ErrNilVersion) {
		return 0, false, nil
	}
	return version, dirty, err
}

// withMigrate hands a migrator to f while no other program migrates the same database.
func withMigrate(ctx context.Context, url string, files fs.FS, f func(*migrate.Migrate) error) error {
	config, err := parseURL(url)
	if err != nil {
		return err
	}
	// A migration may take long, and must not be broken off for it.
	params := config.ConnConfig.RuntimeParams
	params["application_name"] = "lampward migrate"
	params["statement_timeout"] = "0"
	params["idle_in_transaction_session_timeout"] = "0"

	unlock, err := lockMigrations(ctx, config.ConnConfig)
	if err != nil {
		return err
	}
	return errors.Join(runMigrate(ctx, config.ConnConfig, files, f), unlock())
}

func runMigrate(ctx context.Context, config *pgx.ConnConfig, files fs.FS, f func(*migrate.Migrate) error) error {
	src, err := iofs.New(files, ".")
	if err != nil {
		return fmt.Errorf("read the migrations: %w", err)
	}
	defer src.Close()
	// The driver keeps a connection for itself, and where it fails to begin it lets go of it without closing it.
	var opened []*pgx.Conn
	db := stdlib.OpenDB(*config, stdlib.OptionAfterConnect(func(_ context.Context, c *pgx.Conn) error {
		opened = append(opened, c)
		return nil
	}))
	defer func() {
		db.Close()
		for _, c := range opened {
			c.Close(context.WithoutCancel(ctx))
		}
	}()
	driver, err := migratepgx.WithInstance(db, &migratepgx.Config{})
	if err != nil {
		return fmt.Errorf("prepare to migrate: %w", err)
	}
	m, err := migrate.NewWithInstance("iofs", src, "pgx5", driver)
	if err != nil {
		return fmt.Errorf("prepare to migrate: %w", err)
	}
	stop := context.AfterFunc(ctx, func() { m.GracefulStop <- true })
	defer stop()
	return f(m)
}

// lockMigrations waits until this program may migrate. It asks again and again instead of waiting in the server: a
// session that waits there holds a snapshot, for which CREATE INDEX CONCURRENTLY in the other program would wait in
// turn.
func lockMigrations(ctx context.Context, config *pgx.ConnConfig) (unlock func() error, err error) {
	conn, err := pgx.ConnectConfig(ctx, config)
	if err != nil {
		return nil, fmt.Errorf("open the database: %w", err)
	}
	free := func() error { return conn.Close(context.WithoutCancel(ctx)) } // the lock ends with its connection
	for {
		var ok bool
		err := conn.QueryRow(ctx, `SELECT pg_try_advisory_lock($1)`, migrationLock).Scan(&ok)
		if err == nil && ok {
			return free, nil
		}
		if err == nil {
			err = pause(ctx, 100*time.Millisecond)
		}
		if err != nil {
			return nil, errors.Join(fmt.Errorf("wait for another program that migrates: %w", err), free())
		}
	}
}

// explain turns the migrator's errors into ones that a person can act on, without the whole file in them.
func explain(err error, at uint) error {
	var failed database.Error
	var pointed *database.Error
	var dirty migrate.ErrDirty
	switch {
	case err == nil:
		return nil
	case errors.As(err, &dirty):
		return &DirtyError{uint(max(0, dirty.Version))}
	case errors.As(err, &failed):
	case errors.As(err, &pointed):
		failed = *pointed
	default:
		return err
	}
	if failed.Line == 0 {
		return fmt.Errorf("migrating to version %d failed: %w", at, failed.OrigErr)
	}
	line := ""
	if lines := strings.Split(string(failed.Query), "\n"); int(failed.Line) <= len(lines) {
		line = strings.TrimSpace(lines[failed.Line-1])
	}
	return fmt.Errorf("migrating to version %d failed at line %d (%s): %w", at, failed.Line, line, failed.OrigErr)
}

package main

import (
	"context"
	"errors"
	"fmt"
	"os"

	"github.com/jackc/pgx/v5/pgxpool"

	"lampward/domain/job"
	"lampward/domain/postgres"
	"lampward/domain/review"
	"lampward/migrations"
)

// database says which database a command works on: a server that is named, or one of the program's own.
type database struct {
	URL  string `name:"database-url" env:"LAMPWARD_DATABASE_URL" help:"A PostgreSQL server to use; without it the program runs one of its own." placeholder:"postgres://..."`
	Data string `name:"data" env:"LAMPWARD_DATA" help:"Folder of the program's own server; the user's data folder by default." type:"path"`
}

// opened is a database in use.
type opened struct {
	pool *pgxpool.Pool
	url  string
	own  *postgres.Server // nil for a server that was named
}

func (o *opened) close() error {
	o.pool.Close()
	if o.own == nil {
		return nil
	}
	return o.own.Close()
}

// open connects. It starts the program's own server where no other is named, and brings the schema of that one up to
// date; the schema of a named server is only changed by migrate.
func (d database) open(ctx context.Context, s *streams) (*opened, error) {
	if d.URL != "" {
		pool, err := postgres.Open(ctx, d.URL, postgres.PoolOptions{})
		if err != nil {
			return nil, err
		}
		return &opened{pool: pool, url: d.URL}, nil
	}
	dir := d.Data
	if dir == "" {
		var err error
		if dir, err = postgres.DefaultDir(os.Getenv); err != nil {
			return nil, err
		}
	}
	server, err := postgres.Start(ctx, postgres.Options{Dir: dir, Log: s.log})
	if err != nil {
		if errors.Is(err, postgres.ErrInUse) {
			return nil, fmt.Errorf("%w: another lampward is running on %s; stop it, or name another folder with --data", err, dir)
		}
		return nil, err
	}
	o := &opened{url: server.URL(), own: server}
	if err := migrateUp(ctx, o.url, nil); err != nil {
		return nil, errors.Join(err, server.Close())
	}
	if o.pool, err = postgres.Open(ctx, o.url, postgres.PoolOptions{}); err != nil {
		return nil, errors.Join(err, server.Close())
	}
	return o, nil
}

// migrateUp brings the schema and the tables of the jobs up to date, and asks for reviews where this program's rules
// are newer than those that judged last.
func migrateUp(ctx context.Context, url string, told func(from, to uint)) error {
	from, to, err := postgres.Up(ctx, url, migrations.Files)
	if err != nil {
		return err
	}
	if told != nil {
		told(from, to)
	}
	pool, err := postgres.Open(ctx, url, postgres.PoolOptions{MaxConns: 2})
	if err != nil {
		return err
	}
	defer pool.Close()
	return job.Migrate(ctx, pool)
}

// current fails where the schema of the database is not the one this program needs.
func current(ctx context.Context, url string) error {
	latest, err := postgres.Latest(migrations.Files)
	if err != nil {
		return err
	}
	version, dirty, err := postgres.Version(ctx, url)
	switch {
	case err != nil:
		return err
	case dirty:
		return fmt.Errorf("the migration to version %d stopped half way: see lampward migrate --help", version)
	case version < latest:
		return fmt.Errorf("the database is at version %d and this program needs %d: run lampward migrate", version, latest)
	case version > latest:
		return fmt.Errorf("the database is at version %d and this program knows versions up to %d: run the newer program", version, latest)
	}
	return nil
}

// newReviewer returns the reviewer of this program and sees that newer rules are applied.
func newReviewer(ctx context.Context, o *opened, s *streams) (*review.Reviewer, error) {
	return review.New(), review.NoteRuleSet(ctx, o.pool, s.clock())
}

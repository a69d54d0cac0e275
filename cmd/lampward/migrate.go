package main

import (
	"context"
	"errors"
	"fmt"

	"lampward/domain/postgres"
	"lampward/migrations"
)

type migrateCommand struct {
	Up      migrateUpCommand      `cmd:"" default:"1" help:"Apply every migration the database lacks (the default)."`
	Down    migrateDownCommand    `cmd:"" help:"Take migrations back, and with them the data they hold."`
	Version migrateVersionCommand `cmd:"" help:"Say which version the database is at."`
	Force   migrateForceCommand   `cmd:"" help:"Set the version after a migration that stopped half way was mended by hand."`
}

// Help shows examples.
func (migrateCommand) Help() string {
	return `Examples:
  LAMPWARD_DATABASE_URL=postgres://... lampward migrate
  lampward migrate version
  lampward migrate down --steps 1

Several programs may migrate one database at once: they wait for one another.`
}

// named is a database that must be named: the program's own is always up to date.
type named struct {
	URL string `name:"database-url" env:"LAMPWARD_DATABASE_URL" required:"" help:"The PostgreSQL server." placeholder:"postgres://..."`
}

type migrateUpCommand struct{ named }

// Run applies what is missing.
func (c *migrateUpCommand) Run(ctx context.Context, s *streams) error {
	return migrateUp(ctx, c.URL, func(from, to uint) {
		if from == to {
			fmt.Fprintf(s.out, "the database is at version %d already\n", to)
		} else {
			fmt.Fprintf(s.out, "the database was at version %d and is at version %d\n", from, to)
		}
	})
}

type migrateDownCommand struct {
	named
	Steps int `required:"" help:"How many migrations to take back; 0 for all of them."`
}

// Run takes migrations back.
func (c *migrateDownCommand) Run(ctx context.Context, s *streams) error {
	from, to, err := postgres.Down(ctx, c.URL, migrations.Files, c.Steps)
	if err == nil {
		fmt.Fprintf(s.out, "the database was at version %d and is at version %d\n", from, to)
	}
	return err
}

type migrateVersionCommand struct{ named }

// Run says the version. The exit status is 1 where the database is not at this program's.
func (c *migrateVersionCommand) Run(ctx context.Context, s *streams) error {
	version, dirty, err := postgres.Version(ctx, c.URL)
	if err != nil {
		return err
	}
	latest, err := postgres.Latest(migrations.Files)
	if err != nil {
		return err
	}
	state := ""
	if dirty {
		state = ", half way"
	}
	fmt.Fprintf(s.out, "the database is at version %d%s; this program needs %d\n", version, state, latest)
	if dirty || version != latest {
		return exit(1)
	}
	return nil
}

type migrateForceCommand struct {
	named
	Version uint `arg:"" help:"The version the schema really has."`
}

// Run sets the version.
func (c *migrateForceCommand) Run(ctx context.Context, s *streams) error {
	latest, err := postgres.Latest(migrations.Files)
	if err != nil {
		return err
	}
	if c.Version > latest {
		return errors.New("there is no such version")
	}
	if err := postgres.Force(ctx, c.URL, migrations.Files, c.Version); err != nil {
		return err
	}
	fmt.Fprintf(s.out, "the version is set to %d\n", c.Version)
	return nil
}

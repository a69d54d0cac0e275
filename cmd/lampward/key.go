package main

import (
	"context"
	"errors"
	"fmt"
	"text/tabwriter"
	"time"

	"lampward/domain"
	"lampward/domain/access"
	"lampward/domain/site"
)

type keyCommand struct {
	Create   keyCreateCommand   `cmd:"" help:"Make a key and show its secret, this once."`
	List     keyListCommand     `cmd:"" help:"List the keys in use."`
	Withdraw keyWithdrawCommand `cmd:"" help:"End a key at once."`
}

// Help shows examples.
func (keyCommand) Help() string {
	return `Examples:
  lampward key create --name "first planner" --role administrator --building all
  lampward key create --name "board reader" --role integrator --building ALDER --days 365
  lampward key list
  lampward key withdraw 019b76da-a800-7000-8000-000000000000

Only a hash of the secret is kept. Replicas notice a withdrawn key within ten seconds.`
}

type keyCreateCommand struct {
	database
	Name     string   `required:"" help:"What or who it is for."`
	Role     string   `required:"" enum:"viewer,crew,contractor,integrator,planner,administrator" help:"What it may do: ${enum}."`
	Building []string `required:"" help:"Codes of the buildings it may do it in, or all."`
	Days     int      `help:"How many days it lasts; it does not end where this is left out."`
}

// Run makes a key.
func (c *keyCreateCommand) Run(ctx context.Context, s *streams) error {
	if c.Days < 0 {
		return errors.New("--days must not be negative")
	}
	return with(ctx, s, c.database, func(o *opened) error {
		var secret string
		at := s.clock()
		err := domain.In(ctx, o.pool, domain.ID{}, ours, at, func(sc domain.Scope) (err error) {
			secret, err = makeKey(ctx, sc, c.Name, c.Role, c.Building, c.Days)
			return err
		})
		if err != nil {
			return err
		}
		fmt.Fprintln(s.out, secret)
		return nil
	})
}

// makeKey stores a key with one grant for each building, or one for all.
func makeKey(ctx context.Context, sc domain.Scope, name, role string, buildings []string, days int) (string, error) {
	k := access.Key{Name: name}
	if days > 0 {
		until := sc.At.AddDate(0, 0, days)
		k.ExpiresAt = &until
	}
	var grants []access.Grant
	for _, code := range buildings {
		g := access.Grant{Role: role}
		if code != "all" {
			b, err := site.BuildingByCode(ctx, sc, code)
			if err != nil {
				return "", fmt.Errorf("building %s: %w", code, err)
			}
			g.BuildingID = &b.ID
		}
		grants = append(grants, g)
	}
	return access.CreateKey(ctx, sc, &k, grants)
}

// with runs f on a database whose schema is the one this program needs.
func with(ctx context.Context, s *streams, d database, f func(*opened) error) error {
	o, err := d.open(ctx, s)
	if err != nil {
		return err
	}
	if err = current(ctx, o.url); err == nil {
		err = f(o)
	}
	return errors.Join(err, o.close())
}

type keyListCommand struct{ database }

// Run lists the keys.
func (c *keyListCommand) Run(ctx context.Context, s *streams) error {
	return with(ctx, s, c.database, func(o *opened) error {
		sc := domain.On(o.pool, domain.ID{}, ours, s.clock())
		keys, err := access.Keys.Select(ctx, sc, `WHERE retired_at IS NULL ORDER BY created_at, id`)
		if err != nil {
			return err
		}
		w := tabwriter.NewWriter(s.out, 0, 0, 2, ' ', 0)
		fmt.Fprintln(w, "ID\tNAME\tMADE\tENDS\tLAST USED")
		day := func(t *time.Time) string {
			if t == nil {
				return "-"
			}
			return t.Format(time.DateOnly)
		}
		for _, k := range keys {
			fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\n", k.ID, k.Name, day(&k.CreatedAt), day(k.ExpiresAt), day(k.LastUsedAt))
		}
		return w.Flush()
	})
}

type keyWithdrawCommand struct {
	database
	ID string `arg:"" help:"Identifier of the key, as list shows it."`
}

// Run ends a key.
func (c *keyWithdrawCommand) Run(ctx context.Context, s *streams) error {
	id, err := domain.ParseID(c.ID)
	if err != nil {
		return err
	}
	return with(ctx, s, c.database, func(o *opened) error {
		err := domain.In(ctx, o.pool, domain.ID{}, ours, s.clock(), func(sc domain.Scope) error {
			k, err := access.Keys.Get(ctx, sc, id)
			if err != nil {
				return err
			}
			_, err = access.RevokeKey(ctx, sc, id, k.Version)
			return err
		})
		if err == nil {
			fmt.Fprintln(s.out, "withdrawn; replicas notice within ten seconds")
		}
		return err
	})
}

package main

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"text/tabwriter"
	"time"

	"lampward/domain"
	"lampward/domain/review"
)

type demoCommand struct {
	database
	listening
	Fixtures int  `help:"How many luminaires the estate has; a few hundred where left out, 1000000 for a large one."`
	Once     bool `help:"Stop after the summary."`
}

// Help shows examples.
func (demoCommand) Help() string {
	return `Examples:
  lampward demo
  lampward demo --once
  lampward demo --fixtures 100000 --listen 127.0.0.1:9090

All buildings, models and people in it are invented. Without LAMPWARD_DATABASE_URL it runs a PostgreSQL server of its own
from the programs on this machine, in the user's data folder, and ends it with itself. A second run keeps what is there.`
}

// Run draws the estate, judges it, shows the worst and serves it.
func (c *demoCommand) Run(ctx context.Context, s *streams) error {
	if c.Fixtures < 0 || c.Fixtures > 10_000_000 {
		return errors.New("--fixtures must be from 0 to 10,000,000")
	}
	db, err := c.open(ctx, s)
	if err != nil {
		return err
	}
	err = c.on(ctx, s, db)
	return errors.Join(err, db.close())
}

func (c *demoCommand) on(ctx context.Context, s *streams, db *opened) error {
	if db.own == nil {
		if err := migrateUp(ctx, db.url, nil); err != nil {
			return err
		}
	}
	r, err := newReviewer(ctx, db, s)
	if err != nil {
		return err
	}
	sum, err := loadEstate(ctx, db.pool, r, estateOptions{Fixtures: c.Fixtures, At: s.clock(), Progress: s.progress("buildings")})
	if err != nil {
		return err
	}
	if err := drain(ctx, db.pool, r, s.clock); err != nil {
		return err
	}
	if err := review.CountTotals(ctx, db.pool, s.clock()); err != nil {
		return err
	}
	if err := s.summary(ctx, db, r, sum); err != nil {
		return err
	}
	if c.Once {
		return nil
	}
	var secret string
	err = domain.In(ctx, db.pool, domain.ID{}, ours, s.clock(), func(sc domain.Scope) (err error) {
		secret, err = makeKey(ctx, sc, "demo", "administrator", []string{"all"}, 1)
		return err
	})
	if err != nil {
		return err
	}
	return serve(ctx, s, db, r, c.listening, true, func(address string) {
		fmt.Fprintf(s.out, "\nServing at http://%s until interrupted; every operation is shown at http://%s/docs\nA key for a day:\n\n  KEY=%s\n  curl -H \"Authorization: Bearer $KEY\" http://%s/v1/summary\n",
			address, address, secret, address)
	})
}

// worst is how many causes the summary shows with their arithmetic.
const worst = 5

// summary writes what stands in the estate and what is worst in it.
func (s *streams) summary(ctx context.Context, db *opened, r *review.Reviewer, sum estateSummary) error {
	fmt.Fprintf(s.out, "An invented estate: %d buildings, %d spaces, %d circuits, %d dimmers, %d drivers, %d luminaires.\n\n",
		sum.Buildings, sum.Spaces, sum.Circuits, sum.Dimmers, sum.Drivers, sum.Fixtures)
	list, err := review.Summaries(ctx, db.pool, nil)
	if err != nil {
		return err
	}
	w := tabwriter.NewWriter(s.out, 0, 0, 2, ' ', 0)
	fmt.Fprintln(w, "BUILDING\tNAME\tDANGER\tHIGH\tMEDIUM\tLOW\tQUESTIONS\tJUDGED")
	for i, b := range list {
		if i == 10 {
			fmt.Fprintf(w, "... and %d more\n", len(list)-i)
			break
		}
		judged := "-"
		if b.Coverage.Ratio != nil {
			judged = fmt.Sprintf("%.0f %%", 100**b.Coverage.Ratio)
		}
		fmt.Fprintf(w, "%s\t%s\t%d\t%d\t%d\t%d\t%d\t%s\n", b.Code, b.Name, b.Findings["danger"], b.Findings["high"], b.Findings["medium"], b.Findings["low"], b.Questions, judged)
	}
	if err := w.Flush(); err != nil {
		return err
	}
	cat, err := r.Shelf.At(ctx, db.pool)
	if err != nil {
		return err
	}
	groups, err := review.GroupsEverywhere(ctx, db.pool, cat, time.Now(), nil)
	if err != nil {
		return err
	}
	fmt.Fprintf(s.out, "\nThe worst, by cause:\n")
	for i, g := range groups {
		if i == worst {
			fmt.Fprintf(s.out, "\n... and %d causes more: GET /v1/causes\n", len(groups)-i)
			break
		}
		fmt.Fprintf(s.out, "\n%d. %s, %s in %s, %s [%s]\n   %s\n", i+1, strings.ToUpper(g.Severity), counted(g.Places, "place"),
			counted(g.Buildings, "building"), counted(g.Lamps, "lamp"), g.Rule, g.Sentence)
		steps, err := review.StepsOf(ctx, db.pool, g.Cause)
		if err != nil {
			return err
		}
		for _, step := range steps {
			fmt.Fprintf(s.out, "     %s: %s\n", step.What, step.Sum)
		}
		fmt.Fprintf(s.out, "   why: %s\n   what to do: %s\n   basis: %s\n", g.Why, g.Remedy, g.Basis)
	}
	fmt.Fprintf(s.out, "\nA screening estimate from the record. Local codes and licensed practice decide.\n")
	return nil
}

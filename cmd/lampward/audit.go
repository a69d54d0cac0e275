package main

import (
	"context"
	"fmt"

	"lampward/domain"
	"lampward/domain/event"
	"lampward/domain/site"
)

type auditCommand struct {
	Verify auditVerifyCommand `cmd:"" help:"Recompute the chain of every building and name the first entry that does not fit."`
}

type auditVerifyCommand struct {
	database
	Building []string `help:"Codes of buildings; all of them where left out."`
}

// Help shows examples.
func (auditVerifyCommand) Help() string {
	return `Examples:
  lampward audit verify
  lampward audit verify --building ALDER

The exit status is 1 where a chain is broken.`
}

// Run recomputes the chains.
func (c *auditVerifyCommand) Run(ctx context.Context, s *streams) error {
	return with(ctx, s, c.database, func(o *opened) error {
		read := domain.On(o.pool, domain.ID{}, ours, s.clock())
		type chain struct {
			name string
			id   domain.ID
		}
		var chains []chain
		if len(c.Building) == 0 {
			list, err := site.Buildings.Select(ctx, read, `ORDER BY code`)
			if err != nil {
				return err
			}
			chains = append(chains, chain{name: "central"})
			for _, b := range list {
				chains = append(chains, chain{b.Code, b.ID})
			}
		}
		for _, code := range c.Building {
			b, err := site.BuildingByCode(ctx, read, code)
			if err != nil {
				return fmt.Errorf("building %s: %w", code, err)
			}
			chains = append(chains, chain{code, b.ID})
		}
		progress := s.progress("chains")
		entries, broken := int64(0), 0
		for i, ch := range chains {
			v, err := event.Verify(ctx, domain.On(o.pool, ch.id, ours, s.clock()))
			if err != nil {
				return err
			}
			entries += v.Entries
			if v.Broken != 0 {
				broken++
				fmt.Fprintf(s.out, "%s: broken at entry %d: %s\n", ch.name, v.Broken, v.Why)
			}
			if progress != nil {
				progress(i+1, len(chains))
			}
		}
		fmt.Fprintf(s.out, "%d chains, %d entries, %d broken\n", len(chains), entries, broken)
		if broken > 0 {
			return exit(1)
		}
		return nil
	})
}

package review

import (
	"context"

	"github.com/jackc/pgx/v5"

	"lampward/domain"
)

// TryEverywhere judges a proposal in several buildings, in all those in use where buildings is nil: "every lamp of this
// model in these buildings by that one".
func (r *Reviewer) TryEverywhere(ctx context.Context, s domain.Scope, buildings []domain.ID, p *Proposal) (WhatIf, error) {
	cat, err := r.Shelf.At(ctx, s)
	if err != nil {
		return WhatIf{}, err
	}
	if err := p.Validate(cat, true); err != nil {
		return WhatIf{}, err
	}
	if buildings == nil {
		rows, err := s.Query(ctx, `SELECT id FROM building WHERE retired_at IS NULL ORDER BY code`)
		if err != nil {
			return WhatIf{}, domain.Classify(err, "building")
		}
		if buildings, err = pgx.CollectRows(rows, pgx.RowTo[domain.ID]); err != nil {
			return WhatIf{}, domain.Classify(err, "building")
		}
	}
	sum := newTrial()
	for _, id := range buildings {
		in := s
		in.Building = id
		if err := r.try(ctx, in, cat, p, sum); err != nil {
			return WhatIf{}, err
		}
	}
	return sum.result(), nil
}

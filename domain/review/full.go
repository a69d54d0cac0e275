package review

import (
	"context"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"lampward/domain"
	"lampward/domain/event"
	"lampward/domain/plant"
)

// chunkPlaces is about how many places one transaction of a full review holds, so that crews wait little.
const chunkPlaces = 2000

// Tally sums what a review did.
type Tally struct {
	Trees, Places            int
	Opened, Changed, Cleared int
}

func (t *Tally) add(o Outcome) {
	t.Opened += len(o.Opened)
	t.Changed += len(o.Changed)
	t.Cleared += len(o.Cleared)
}

// Job is who acts when a review looks by itself.
var Job = domain.Actor{Kind: "job"}

// Full judges every tree of a building anew, a chunk of trees a transaction, each as of the time now gives. progress,
// if not nil, is told of places done and in all. It can be cut off anywhere: what is done stands.
func (r *Reviewer) Full(ctx context.Context, db *pgxpool.Pool, building domain.ID, now func() time.Time, progress func(done, total int)) (Tally, error) {
	return r.trees(ctx, db, building, now, progress, `
		SELECT tree_id, sum(n)::int
		  FROM (SELECT tree_id, count(*) AS n FROM place WHERE building_id = $1 AND retired_at IS NULL GROUP BY tree_id
		         UNION ALL
		        SELECT tree_id, count(*) FROM circuit WHERE building_id = $1 AND retired_at IS NULL GROUP BY tree_id
		         UNION ALL
		        SELECT tree_id, 0 FROM finding WHERE building_id = $1 AND cleared_at IS NULL) AS x
		 GROUP BY tree_id
		 ORDER BY tree_id`)
}

// trees judges the trees a query of the building gives with their number of places; the query takes the building as
// its first argument.
func (r *Reviewer) trees(ctx context.Context, db *pgxpool.Pool, building domain.ID, now func() time.Time, progress func(done, total int), sql string, args ...any) (Tally, error) {
	var tally Tally
	rows, err := db.Query(ctx, sql, append([]any{building}, args...)...)
	if err != nil {
		return tally, domain.Classify(err, "review")
	}
	type sized struct {
		id domain.ID
		n  int
	}
	list, err := pgx.CollectRows(rows, func(row pgx.CollectableRow) (t sized, err error) { return t, row.Scan(&t.id, &t.n) })
	if err != nil {
		return tally, domain.Classify(err, "review")
	}
	total := 0
	for _, t := range list {
		total += t.n
	}
	for at := 0; at < len(list); {
		var chunk []domain.ID
		n := 0
		for at < len(list) && (len(chunk) == 0 || n+list[at].n <= chunkPlaces) {
			chunk = append(chunk, list[at].id)
			n += list[at].n
			at++
		}
		out, err := r.chunk(ctx, db, building, now(), chunk)
		if err != nil {
			return tally, err
		}
		tally.add(out)
		tally.Trees += len(chunk)
		tally.Places += n
		if progress != nil {
			progress(tally.Places, total)
		}
	}
	return tally, nil
}

// chunk judges some trees in one transaction.
func (r *Reviewer) chunk(ctx context.Context, db *pgxpool.Pool, building domain.ID, at time.Time, trees []domain.ID) (Outcome, error) {
	var out Outcome
	err := domain.In(ctx, db, building, Job, at, func(s domain.Scope) error {
		var err error
		out, err = r.again(ctx, s, trees)
		return err
	})
	return out, err
}

// again judges trees under their locks with the catalogue as it stands at the end.
func (r *Reviewer) again(ctx context.Context, s domain.Scope, trees []domain.ID) (Outcome, error) {
	if err := lock(ctx, s, Touch{}, trees); err != nil {
		return Outcome{}, err
	}
	for range tries {
		cat, err := r.Shelf.At(ctx, s)
		if err != nil {
			return Outcome{}, err
		}
		out, err := judge(ctx, s, cat, trees)
		if err != nil {
			return Outcome{}, err
		}
		if err := event.Hold(ctx, s); err != nil {
			return Outcome{}, err
		}
		seq, err := plant.CatalogueSeq(ctx, s)
		if err != nil || seq == cat.Seq {
			return out, err
		}
	}
	return Outcome{}, errContended
}

package review

import (
	"context"
	"errors"
	"fmt"
	"runtime"
	"sync"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"
	"golang.org/x/sync/errgroup"

	"lampward/domain"
	"lampward/domain/event"
	"lampward/domain/plant"
)

// Pending counts reviews that are owed and not yet done: those a change asked for, and those whose time has come.
func Pending(ctx context.Context, db domain.Queryer, now time.Time) (due, rechecks int, err error) {
	err = db.QueryRow(ctx, `SELECT (SELECT count(*) FROM review_due), (SELECT count(*) FROM tree WHERE recheck_at <= $1)`, now).Scan(&due, &rechecks)
	return due, rechecks, domain.Classify(err, "review")
}

// owed is one row of review_due.
type owed struct {
	ID        domain.ID
	Building  *domain.ID
	Tree      *domain.ID
	ModelKind string
	Model     *domain.ID
}

// DrainOne does the oldest review that is owed and that nobody else is doing, and reports whether there was one. One
// that is cut off stays owed. A program with older rules than those in force does none: it could only undo.
func (r *Reviewer) DrainOne(ctx context.Context, db *pgxpool.Pool, now func() time.Time) (bool, error) {
	var did bool
	var o owed
	err := pgx.BeginFunc(ctx, db, func(tx pgx.Tx) error {
		err := tx.QueryRow(ctx, `
			SELECT id, building_id, tree_id, model_kind, model_id
			  FROM review_due
			 WHERE (SELECT rule_set FROM catalogue_head WHERE id = 1) <= $1
			 ORDER BY created_at, id
			 LIMIT 1
			   FOR UPDATE SKIP LOCKED`, RuleSet).Scan(&o.ID, &o.Building, &o.Tree, &o.ModelKind, &o.Model)
		if errors.Is(err, pgx.ErrNoRows) {
			return nil
		}
		if err != nil {
			return err
		}
		did = true
		if o.Building == nil {
			// One for every building, so that many replicas can share them.
			_, err = tx.Exec(ctx, `
				INSERT INTO review_due (id, building_id, tree_id, model_kind, model_id, why, created_at)
				SELECT gen_random_uuid(), b.id, NULL, d.model_kind, d.model_id, d.why, d.created_at
				  FROM review_due d, building b
				 WHERE d.id = $1 AND b.retired_at IS NULL`, o.ID)
		} else {
			err = r.drain(ctx, db, o, now)
		}
		if err != nil {
			return err
		}
		_, err = tx.Exec(ctx, `DELETE FROM review_due WHERE id = $1`, o.ID)
		return err
	})
	if err != nil && did && ctx.Err() == nil {
		_, later := db.Exec(ctx, `
			UPDATE review_due
			   SET created_at = greatest($2, (SELECT max(created_at) FROM review_due) + interval '1 microsecond')
			 WHERE id = $1`, o.ID, now())
		err = errors.Join(err, later)
	}
	return did, domain.Classify(err, "review")
}

func (r *Reviewer) drain(ctx context.Context, db *pgxpool.Pool, o owed, now func() time.Time) error {
	// Whoever read the catalogue before it changed and has not committed yet holds the head: wait for them, so that
	// their places are seen below.
	err := domain.In(ctx, db, *o.Building, Job, now(), func(s domain.Scope) error { return event.Hold(ctx, s) })
	if domain.KindOf(err) == domain.NotFound {
		return nil
	}
	if err != nil {
		return err
	}
	switch {
	case o.Tree != nil:
		_, err = r.chunk(ctx, db, *o.Building, now(), []domain.ID{*o.Tree})
	case o.Model != nil:
		err = r.withModel(ctx, db, *o.Building, o.ModelKind, *o.Model, now)
	default:
		_, err = r.Full(ctx, db, *o.Building, now, nil)
	}
	return err
}

// withModel judges the trees that hold a model, under any id that was merged into it, pointing the places to the
// model itself first.
func (r *Reviewer) withModel(ctx context.Context, db *pgxpool.Pool, building domain.ID, kind string, model domain.ID, now func() time.Time) error {
	cat, err := r.Shelf.At(ctx, db)
	if err != nil {
		return err
	}
	ids, into := cat.Also(kind, model)
	if len(ids) > 1 {
		err := domain.In(ctx, db, building, Job, now(), func(s domain.Scope) error {
			return plant.Repoint(ctx, s, kind, ids, into)
		})
		if err != nil {
			return err
		}
	}
	fixtures := cat.FixturesWith(kind, ids)
	_, err = r.trees(ctx, db, building, now, nil, `
		SELECT tree_id, count(*)::int
		  FROM place p
		 WHERE building_id = $1 AND retired_at IS NULL
		   AND (($2 = 'lamp' AND lamp_model_id = ANY($3)) OR ($2 = 'driver' AND driver_model_id = ANY($3))
		     OR ($2 = 'dimmer' AND dimmer_model_id = ANY($3)) OR fixture_model_id = ANY($4)
		     OR ($2 = 'lamp' AND id IN (SELECT place_id FROM unit
		                                 WHERE building_id = $1 AND odd AND removed_at IS NULL AND lamp_model_id = ANY($3))))
		 GROUP BY tree_id
		 ORDER BY tree_id`, kind, domain.IDs(ids), domain.IDs(fixtures))
	return err
}

// RecheckDue judges again the trees whose time has come, of at most most of them, and returns how many there were. Where
// a building fails the others are judged all the same, and the failures are told together.
func (r *Reviewer) RecheckDue(ctx context.Context, db *pgxpool.Pool, now func() time.Time, most int) (int, error) {
	rows, err := db.Query(ctx, `
		SELECT building_id, tree_id
		  FROM tree
		 WHERE recheck_at <= $1
		 ORDER BY recheck_at
		 LIMIT $2`, now(), most)
	if err != nil {
		return 0, domain.Classify(err, "review")
	}
	type pair struct{ building, tree domain.ID }
	list, err := pgx.CollectRows(rows, func(row pgx.CollectableRow) (p pair, err error) { return p, row.Scan(&p.building, &p.tree) })
	if err != nil {
		return 0, domain.Classify(err, "review")
	}
	byBuilding := map[domain.ID][]domain.ID{}
	var order []domain.ID
	for _, p := range list {
		if byBuilding[p.building] == nil {
			order = append(order, p.building)
		}
		byBuilding[p.building] = append(byBuilding[p.building], p.tree)
	}
	var failed []error
	for _, building := range order {
		if _, err := r.chunk(ctx, db, building, now(), byBuilding[building]); err != nil {
			failed = append(failed, fmt.Errorf("building %s: %w", building, err))
		}
	}
	return len(list), errors.Join(failed...)
}

// NoteRuleSet asks for a review of every building where this program's rules are newer than those that judged last.
func NoteRuleSet(ctx context.Context, db *pgxpool.Pool, now time.Time) error {
	return domain.In(ctx, db, domain.ID{}, Job, now, func(s domain.Scope) error {
		tag, err := s.Exec(ctx, `UPDATE catalogue_head SET rule_set = $1, seq = seq + 1 WHERE id = 1 AND rule_set < $1`, RuleSet)
		if err != nil {
			return domain.Classify(err, "catalogue")
		}
		if tag.RowsAffected() == 0 {
			return nil
		}
		return event.ReviewDue(ctx, s, event.Due{Why: "newer rules"})
	})
}

// Everything judges every building in use, several at once where there are processors for it. progress, if not nil, is
// told of buildings done and in all.
func (r *Reviewer) Everything(ctx context.Context, db *pgxpool.Pool, now func() time.Time, progress func(done, total int)) (Tally, error) {
	rows, err := db.Query(ctx, `SELECT id FROM building WHERE retired_at IS NULL ORDER BY code`)
	if err != nil {
		return Tally{}, domain.Classify(err, "building")
	}
	ids, err := pgx.CollectRows(rows, pgx.RowTo[domain.ID])
	if err != nil {
		return Tally{}, domain.Classify(err, "building")
	}
	var mu sync.Mutex
	var sum Tally
	done := 0
	group, ctx := errgroup.WithContext(ctx)
	group.SetLimit(min(runtime.GOMAXPROCS(0), 4))
	for _, id := range ids {
		group.Go(func() error {
			t, err := r.Full(ctx, db, id, now, nil)
			if err != nil {
				return err
			}
			mu.Lock()
			defer mu.Unlock()
			sum.Trees, sum.Places = sum.Trees+t.Trees, sum.Places+t.Places
			sum.Opened, sum.Changed, sum.Cleared = sum.Opened+t.Opened, sum.Changed+t.Changed, sum.Cleared+t.Cleared
			done++
			if progress != nil {
				progress(done, len(ids))
			}
			return nil
		})
	}
	err = group.Wait()
	return sum, err
}

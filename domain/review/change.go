package review

import (
	"context"

	"github.com/jackc/pgx/v5"

	"lampward/calc/retrofit"
	"lampward/domain"
	"lampward/domain/event"
	"lampward/domain/plant"
)

// A Reviewer judges trees with the newest catalogue. One serves a whole program.
type Reviewer struct {
	Shelf *plant.Shelf
}

// New returns a Reviewer.
func New() *Reviewer { return &Reviewer{Shelf: &plant.Shelf{}} }

// Touch names what a change will touch: places and circuits, or every tree of the building. It need not be complete:
// a change that reaches further starts over with more locked.
type Touch struct {
	Places, Circuits []domain.ID
	All              bool
}

// Outcome is what a change did to the findings.
type Outcome struct {
	Opened  []Finding `json:"opened"`
	Changed []Finding `json:"changed"`
	Cleared []Finding `json:"cleared"`
}

// tries is how often a change starts over because it reached further, or because the catalogue moved.
const tries = 8

// Change runs f on the trees that touch names and all it turns out to reach, then judges them anew and stores what is
// found, in s's transaction: all or nothing. It fails with Invalid where the records would break a rule that always
// holds, and with Conflict where others keep changing the same trees or the building is retired.
func (r *Reviewer) Change(ctx context.Context, s domain.Scope, touch Touch, f func(*plant.Edit) error) (Outcome, error) {
	trees, err := touched(ctx, s, touch)
	if err != nil {
		return Outcome{}, err
	}
	for range tries {
		cat, err := r.Shelf.At(ctx, s)
		if err != nil {
			return Outcome{}, err
		}
		out, more, moved, err := r.attempt(ctx, s, cat, touch, trees, f)
		if err != nil {
			return Outcome{}, err
		}
		if more == nil && !moved {
			return out, nil
		}
		trees = union(trees, more)
	}
	return Outcome{}, errContended
}

// errContended is told where others keep changing the same trees.
var errContended = domain.Conflictf("others keep changing the same circuits; try again")

// attempt makes the change once inside a savepoint, its locks included, so that what starts over takes all its locks
// in their order again. It returns the trees it lacked, or that the catalogue moved, having rolled back.
func (r *Reviewer) attempt(ctx context.Context, s domain.Scope, cat *plant.Catalogue, touch Touch, trees []domain.ID, f func(*plant.Edit) error) (out Outcome, more []domain.ID, moved bool, err error) {
	tx := s.Queryer.(pgx.Tx)
	mark := event.Mark(s)
	point, err := tx.Begin(ctx)
	if err != nil {
		return out, nil, false, domain.Classify(err, "record")
	}
	back := func() error {
		event.Rewind(s, mark)
		return domain.Classify(point.Rollback(ctx), "record")
	}
	inner := s
	inner.Queryer = point
	edit := plant.NewEdit(inner, trees)
	if err = lock(ctx, inner, touch, trees); err == nil {
		err = f(edit)
	}
	if err == nil && edit.DevicesChanged() {
		err = alsoBehindDevice(ctx, inner, edit.Trees())
	}
	if err == nil {
		out, err = judge(ctx, inner, cat, edit.Trees())
	}
	if grow := plant.AsGrow(err); grow != nil {
		return out, grow.Trees, false, back()
	}
	if err != nil {
		if backErr := back(); backErr != nil {
			return out, nil, false, backErr
		}
		return out, nil, false, err
	}
	if err := event.Hold(ctx, inner); err != nil {
		return out, nil, false, err
	}
	// Both are read under the lock of the head, which a job that follows the catalogue and a retiring building take too.
	var seq int64
	var retired bool
	err = inner.QueryRow(ctx, `
		SELECT seq, EXISTS (SELECT FROM building WHERE id = $1 AND retired_at IS NOT NULL)
		  FROM catalogue_head
		 WHERE id = 1`, inner.Building).Scan(&seq, &retired)
	if err != nil {
		return out, nil, false, domain.Classify(err, "catalogue")
	}
	if retired {
		return out, nil, false, domain.Conflictf("the building is retired; restore it first")
	}
	if seq != cat.Seq {
		return out, nil, true, back()
	}
	return out, nil, false, domain.Classify(point.Commit(ctx), "record")
}

// touched resolves what a touch names into trees.
func touched(ctx context.Context, s domain.Scope, t Touch) ([]domain.ID, error) {
	if !t.All && len(t.Places)+len(t.Circuits) == 0 {
		return nil, nil
	}
	sql := `
		SELECT tree_id FROM place WHERE building_id = $1 AND id = ANY($2)
		 UNION
		SELECT tree_id FROM circuit WHERE building_id = $1 AND id = ANY($3)`
	args := []any{s.Building, domain.IDs(t.Places), domain.IDs(t.Circuits)}
	if t.All {
		sql = `
		SELECT tree_id FROM place WHERE building_id = $1 AND retired_at IS NULL
		 UNION
		SELECT tree_id FROM circuit WHERE building_id = $1 AND retired_at IS NULL`
		args = args[:1]
	}
	return listIDs(ctx, s, sql, args...)
}

func listIDs(ctx context.Context, s domain.Scope, sql string, args ...any) ([]domain.ID, error) {
	rows, err := s.Query(ctx, sql, args...)
	if err != nil {
		return nil, domain.Classify(err, "record")
	}
	out, err := pgx.CollectRows(rows, pgx.RowTo[domain.ID])
	return out, domain.Classify(err, "record")
}

// lock holds the trees, in the order of the house: the circuits that stand for a tree, then the places that do. It
// then resolves the touch again, since trees may have joined while it waited, and asks for more where some did.
func lock(ctx context.Context, s domain.Scope, t Touch, trees []domain.ID) error {
	ids := domain.IDs(trees)
	for _, table := range []string{"circuit", "place"} {
		if _, err := s.Exec(ctx, `
			SELECT id
			  FROM `+table+`
			 WHERE building_id = $1 AND id = ANY($2)
			 ORDER BY id
			   FOR NO KEY UPDATE`, s.Building, ids); err != nil {
			return domain.Classify(err, "record")
		}
	}
	now, err := touched(ctx, s, t)
	if err != nil {
		return err
	}
	if all := union(trees, now); len(all) > len(trees) {
		return &plant.Grow{Trees: all[len(trees):]}
	}
	return nil
}

// union returns a with those of b it lacks.
func union(a, b []domain.ID) []domain.ID {
	have := make(map[domain.ID]bool, len(a))
	out := append([]domain.ID{}, a...)
	for _, id := range a {
		have[id] = true
	}
	for _, id := range b {
		if !have[id] {
			have[id] = true
			out = append(out, id)
		}
	}
	return out
}

// alsoBehindDevice asks for the trees of other circuits behind a residual-current device that a locked circuit names.
func alsoBehindDevice(ctx context.Context, s domain.Scope, trees []domain.ID) error {
	more, err := listIDs(ctx, s, `
		SELECT DISTINCT o.tree_id
		  FROM circuit c
		  JOIN circuit o ON o.building_id = c.building_id AND o.board = c.board AND o.rcd = c.rcd
		 WHERE c.building_id = $1 AND o.building_id = $1
		   AND c.tree_id = ANY($2) AND NOT o.tree_id = ANY($2)
		   AND c.rcd NOT IN ('', 'none') AND c.retired_at IS NULL AND o.retired_at IS NULL`, s.Building, domain.IDs(trees))
	if err != nil {
		return err
	}
	if len(more) > 0 {
		return &plant.Grow{Trees: more}
	}
	return nil
}

// judge loads the trees, settles which place belongs to which tree now, judges them and stores what changed.
func judge(ctx context.Context, s domain.Scope, cat *plant.Catalogue, ids []domain.ID) (Outcome, error) {
	recs, err := plant.Load(ctx, s, ids)
	if err != nil {
		return Outcome{}, err
	}
	trees, err := Trees(cat, recs, s.At)
	if err != nil {
		return Outcome{}, err
	}
	if err := settle(ctx, s, trees); err != nil {
		return Outcome{}, err
	}
	var checker retrofit.Checker
	want := newWanted(s)
	for i := range trees {
		want.add(&trees[i], trees[i].Check(&checker))
	}
	return want.store(ctx, s, ids)
}

// settle writes on every record the tree it now belongs to.
func settle(ctx context.Context, s domain.Scope, trees []Tree) error {
	for _, circuits := range []bool{true, false} {
		var members, owners []domain.ID
		for i := range trees {
			for _, m := range trees[i].Members {
				if m.Circuit == circuits && m.Stored != trees[i].ID {
					members, owners = append(members, m.ID), append(owners, trees[i].ID)
				}
			}
		}
		if members == nil {
			continue
		}
		table := "place"
		if circuits {
			table = "circuit"
		}
		if _, err := s.Exec(ctx, `
			UPDATE `+table+` t
			   SET tree_id = n.tree_id
			  FROM unnest($2::uuid[], $3::uuid[]) AS n (id, tree_id)
			 WHERE t.building_id = $1 AND t.id = n.id`, s.Building, domain.IDs(members), domain.IDs(owners)); err != nil {
			return domain.Classify(err, "record")
		}
	}
	return nil
}

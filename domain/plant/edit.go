package plant

import (
	"context"
	"errors"
	"slices"
	"time"

	"lampward/domain"
	"lampward/domain/event"
	"lampward/domain/site"
)

// An Edit is the right to change what loads what, in the trees that the review package has locked. Nothing but
// review.Change makes one: it recomputes the findings of every tree the Edit touched in the same transaction.
//
// A tree is everything one finding can depend on: the circuits, dimmers, drivers and luminaires joined by feeds, by
// controls and by a shared residual-current device.
type Edit struct {
	domain.Scope
	locked  map[domain.ID]bool
	fresh   map[domain.ID]bool // trees that this edit began: nobody else can know them
	spaces  map[domain.ID]bool
	devices bool // a residual-current device was renamed: trees may join
	quiet   bool
}

// NewEdit is for the review package alone: it returns an edit of the locked trees.
func NewEdit(s domain.Scope, locked []domain.ID) *Edit {
	e := &Edit{Scope: s, locked: map[domain.ID]bool{}, fresh: map[domain.ID]bool{}, spaces: map[domain.ID]bool{}}
	for _, id := range locked {
		e.locked[id] = true
	}
	return e
}

// Trees returns the trees that must be computed again.
func (e *Edit) Trees() []domain.ID {
	out := make([]domain.ID, 0, len(e.locked)+len(e.fresh))
	for id := range e.locked {
		out = append(out, id)
	}
	for id := range e.fresh {
		if !e.locked[id] {
			out = append(out, id)
		}
	}
	slices.SortFunc(out, func(a, b domain.ID) int { return slices.Compare(a[:], b[:]) })
	return out
}

// DevicesChanged reports whether a residual-current device was named anew.
func (e *Edit) DevicesChanged() bool { return e.devices }

// Quiet leaves the acts of this edit out of the audit and the events: the caller records one for all of them.
func (e *Edit) Quiet() { e.quiet = true }

// Grow asks for more trees to be locked before the edit is run again.
type Grow struct{ Trees []domain.ID }

// Error says what is wanted.
func (g *Grow) Error() string { return "the change reaches further than was locked" }

// AsGrow returns the Grow in err's chain, nil if there is none.
func AsGrow(err error) *Grow {
	g, ok := errors.AsType[*Grow](err)
	if !ok {
		return nil
	}
	return g
}

func (e *Edit) holds(tree domain.ID) bool { return e.locked[tree] || e.fresh[tree] }

// reach makes sure that the trees of these places and circuits are locked, and returns the tree of each place and
// circuit that is in use. It fails with a Grow where some are not locked yet.
func (e *Edit) reach(ctx context.Context, places, circuits []domain.ID) (map[domain.ID]domain.ID, error) {
	trees := map[domain.ID]domain.ID{}
	rows, err := e.Query(ctx, `
		SELECT id, tree_id FROM place WHERE building_id = $1 AND id = ANY($2) AND retired_at IS NULL
		 UNION ALL
		SELECT id, tree_id FROM circuit WHERE building_id = $1 AND id = ANY($3) AND retired_at IS NULL`,
		e.Building, domain.IDs(places), domain.IDs(circuits))
	if err != nil {
		return nil, domain.Classify(err, "place")
	}
	defer rows.Close()
	var more []domain.ID
	for rows.Next() {
		var id, tree domain.ID
		if err := rows.Scan(&id, &tree); err != nil {
			return nil, domain.Classify(err, "place")
		}
		trees[id] = tree
		if !e.holds(tree) {
			more = append(more, tree)
		}
	}
	if err := rows.Err(); err != nil {
		return nil, domain.Classify(err, "place")
	}
	if more != nil {
		return nil, &Grow{more}
	}
	return trees, nil
}

func (e *Edit) record(action, kind string, id domain.ID, body any) {
	if !e.quiet {
		event.Record(e.Scope, event.Act{Action: action, Kind: kind, ID: id, Body: body})
	}
}

// headed is a building record whose head can be reached and which knows its own rules.
type headed[T any] interface {
	*T
	Head() *domain.Row
	Validate() error
}

// insert stores a new record under the scope's building and time. A client may have chosen its id.
func insert[T any, P headed[T]](ctx context.Context, e *Edit, t *domain.Table[T], row P, kind string) error {
	h := row.Head()
	if h.ID.IsZero() {
		h.ID = domain.NewID()
	}
	h.BuildingID, h.Version, h.CreatedAt, h.UpdatedAt, h.RetiredAt = e.Building, 1, e.At, e.At, nil
	if err := row.Validate(); err != nil {
		return err
	}
	if err := checkReferences(ctx, e.Scope, t.What, row, nil); err != nil {
		return err
	}
	if err := t.Insert(ctx, e.Scope, (*T)(row)); err != nil {
		return err
	}
	e.record(kind+".created", kind, h.ID, row)
	return nil
}

// update stores a changed record if the stored version is still its own, and returns the record as it was. fix, if
// not nil, settles what a client does not send before the record is checked.
func update[T any, P headed[T]](ctx context.Context, e *Edit, t *domain.Table[T], row P, kind string, fix func(before P) error) (P, error) {
	h := row.Head()
	old, err := t.Lock(ctx, e.Scope, h.ID)
	if err != nil {
		return nil, err
	}
	before := P(&old)
	was := before.Head()
	h.BuildingID, h.CreatedAt, h.UpdatedAt, h.RetiredAt = e.Building, was.CreatedAt, e.At, was.RetiredAt
	if was.RetiredAt != nil {
		return nil, domain.Conflictf("the %s is retired; restore it first", t.What)
	}
	if fix != nil {
		if err := fix(before); err != nil {
			return nil, err
		}
	}
	if err := row.Validate(); err != nil {
		return nil, err
	}
	if err := checkReferences(ctx, e.Scope, t.What, row, before); err != nil {
		return nil, err
	}
	if err := t.Update(ctx, e.Scope, (*T)(row)); err != nil {
		return nil, err
	}
	e.record(kind+".changed", kind, h.ID, event.Changed(before, row))
	return before, nil
}

// retire sets or lifts a record's retirement if the stored version is the given one.
func retire[T any, P headed[T]](ctx context.Context, e *Edit, t *domain.Table[T], id domain.ID, version int64, at *time.Time, kind string, fix func(P)) (T, error) {
	row, err := t.Lock(ctx, e.Scope, id)
	if err != nil {
		return row, err
	}
	h := P(&row).Head()
	if (h.RetiredAt == nil) == (at == nil) {
		return row, domain.Conflictf("the %s is already in that state", t.What)
	}
	h.Version, h.RetiredAt, h.UpdatedAt = version, at, e.At
	if fix != nil {
		fix(&row)
	}
	if err := t.Update(ctx, e.Scope, &row); err != nil {
		return row, err
	}
	action := kind + ".retired"
	if at == nil {
		action = kind + ".restored"
	}
	e.record(action, kind, id, nil)
	return row, nil
}

// CreateSpace stores a new space.
func (e *Edit) CreateSpace(ctx context.Context, p *site.Space) error {
	return insert(ctx, e, site.Spaces, p, "space")
}

// UpdateSpace stores a changed space; the trees of its places are computed again.
func (e *Edit) UpdateSpace(ctx context.Context, p *site.Space) error {
	if err := e.reachSpaces(ctx, []domain.ID{p.ID}); err != nil {
		return err
	}
	_, err := update(ctx, e, site.Spaces, p, "space", nil)
	return err
}

// RetireSpace takes a space out of use. It fails with Conflict while places stand in it.
func (e *Edit) RetireSpace(ctx context.Context, id domain.ID, version int64) (site.Space, error) {
	if err := e.refuseWhile(ctx, "places stand in this space; move or retire them first",
		`SELECT count(*) FROM place WHERE building_id = $1 AND space_id = $2 AND retired_at IS NULL`, id); err != nil {
		return site.Space{}, err
	}
	return retire[site.Space](ctx, e, site.Spaces, id, version, &e.At, "space", nil)
}

// RestoreSpace takes a retired space back into use.
func (e *Edit) RestoreSpace(ctx context.Context, id domain.ID, version int64) (site.Space, error) {
	return retire[site.Space](ctx, e, site.Spaces, id, version, nil, "space", nil)
}

// reachSpaces makes sure that the trees of the places in some spaces are locked. It fails with a Grow where some are not.
func (e *Edit) reachSpaces(ctx context.Context, ids []domain.ID) error {
	rows, err := e.Query(ctx, `SELECT DISTINCT tree_id FROM place WHERE building_id = $1 AND space_id = ANY($2) AND retired_at IS NULL`,
		e.Building, domain.IDs(ids))
	if err != nil {
		return domain.Classify(err, "space")
	}
	defer rows.Close()
	var more []domain.ID
	for rows.Next() {
		var tree domain.ID
		if err := rows.Scan(&tree); err != nil {
			return domain.Classify(err, "space")
		}
		if !e.holds(tree) {
			more = append(more, tree)
		}
	}
	if err := rows.Err(); err != nil {
		return domain.Classify(err, "space")
	}
	if more != nil {
		return &Grow{more}
	}
	return nil
}

// refuseWhile fails with Conflict where the count a query gives is not 0; the query takes the building and the id.
func (e *Edit) refuseWhile(ctx context.Context, why, sql string, id domain.ID) error {
	var n int
	if err := e.QueryRow(ctx, sql, e.Building, id).Scan(&n); err != nil {
		return domain.Classify(err, "record")
	}
	if n > 0 {
		return domain.Conflictf("%d %s", n, why)
	}
	return nil
}

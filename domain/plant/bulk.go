package plant

import (
	"context"
	"crypto/sha256"
	"encoding/json"
	"errors"
	"fmt"
	"slices"
	"strings"

	"lampward/domain"
	"lampward/domain/event"
	"lampward/domain/site"
)

// MaxBulk is the most rows one request may carry.
const MaxBulk = 10_000

// A Bulk is many records of one building to be stored at once. A record whose id, or whose own name in the building,
// is known changes that record; others are new. Fields left out are absent, as in a PUT.
type Bulk struct {
	Spaces   []site.Space  `json:"spaces,omitempty"`
	MakeUps  []MakeUp      `json:"make_ups,omitempty"`
	Circuits []Circuit     `json:"circuits,omitempty"`
	Dimmers  []Dimmer      `json:"dimmers,omitempty"`
	Drivers  []Driver      `json:"drivers,omitempty"`
	Fixtures []Fixture     `json:"fixtures,omitempty"`
	Feeds    []Feed        `json:"feeds,omitempty"`
	Controls []ControlLink `json:"controls,omitempty"`
}

// Rows returns how many records b holds.
func (b *Bulk) Rows() int {
	return len(b.Spaces) + len(b.MakeUps) + len(b.Circuits) + len(b.Dimmers) + len(b.Drivers) + len(b.Fixtures) + len(b.Feeds) + len(b.Controls)
}

// Clone returns a bulk whose rows may be changed without changing b's.
func (b *Bulk) Clone() Bulk {
	return Bulk{Spaces: slices.Clone(b.Spaces), MakeUps: slices.Clone(b.MakeUps), Circuits: slices.Clone(b.Circuits), Dimmers: slices.Clone(b.Dimmers),
		Drivers: slices.Clone(b.Drivers), Fixtures: slices.Clone(b.Fixtures), Feeds: slices.Clone(b.Feeds), Controls: slices.Clone(b.Controls)}
}

// BulkCounts tells what became of the rows.
type BulkCounts struct {
	New       int `json:"new"`
	Changed   int `json:"changed"`
	Unchanged int `json:"unchanged"`
}

// Upsert stores b: all of it or nothing, as one entry of the audit. The bulk's rows carry their ids afterwards.
func (e *Edit) Upsert(ctx context.Context, b *Bulk) (BulkCounts, error) {
	var n BulkCounts
	if b.Rows() == 0 {
		return n, &domain.Error{Kind: domain.Invalid, Msg: "there are no rows in the request"}
	}
	if b.Rows() > MaxBulk {
		return n, &domain.Error{Kind: domain.Invalid, Msg: fmt.Sprintf("there are %d rows in the request; at most %d are taken at once", b.Rows(), MaxBulk)}
	}
	request, err := json.Marshal(b)
	if err != nil {
		return n, fmt.Errorf("bulk: %w", err)
	}
	u := &upsert{Edit: e, check: domain.NewCheck("bulk"), trees: map[domain.ID]domain.ID{}}
	plans := []func(context.Context) error{
		func(ctx context.Context) error {
			return match(ctx, u, site.Spaces, "spaces", "space", b.Spaces, nil, spaceName)
		},
		func(ctx context.Context) error {
			return match(ctx, u, MakeUps, "make_ups", "make_up", b.MakeUps, nil, makeUpName)
		},
		func(ctx context.Context) error {
			return match(ctx, u, Circuits, "circuits", "circuit", b.Circuits, nil, circuitName)
		},
		func(ctx context.Context) error { return matchPlaces(ctx, u, Dimmers, "dimmers", KindDimmer, b.Dimmers) },
		func(ctx context.Context) error { return matchPlaces(ctx, u, Drivers, "drivers", KindDriver, b.Drivers) },
		func(ctx context.Context) error {
			return matchPlaces(ctx, u, Fixtures, "fixtures", KindFixture, b.Fixtures)
		},
		func(ctx context.Context) error { return match(ctx, u, Feeds, "feeds", "feed", b.Feeds, nil, nil) },
		func(ctx context.Context) error {
			return match(ctx, u, Controls, "controls", "control", b.Controls, nil, nil)
		},
	}
	for _, plan := range plans {
		if err := plan(ctx); err != nil {
			return n, err
		}
	}
	if err := u.refs.check(ctx, e.Scope, u.check); err != nil {
		return n, err
	}
	if err := u.check.Err(); err != nil {
		return n, err
	}
	if err := u.reachFar(ctx); err != nil {
		return n, err
	}
	u.plantTrees(b)
	for _, write := range u.writes {
		if err := write(ctx); err != nil {
			return n, err
		}
	}
	sum := sha256.Sum256(request)
	event.Record(e.Scope, event.Act{Action: "bulk.stored", Kind: "building", ID: e.Building,
		Body: map[string]any{"counts": u.counts, "sha256": fmt.Sprintf("%x", sum)}})
	return u.counts, nil
}

// upsert is the work of one Upsert: first everything is matched and checked, then it is written.
type upsert struct {
	*Edit
	check  *domain.Check
	refs   references
	trees  map[domain.ID]domain.ID // of places and circuits that exist or are made here
	writes []func(context.Context) error
	counts BulkCounts
}

func spaceName(p *site.Space) string  { return p.Level + "\x00" + p.Name }
func makeUpName(m *MakeUp) string     { return m.Name }
func circuitName(k *Circuit) string   { return k.Board + "\x00" + k.Way }
func placeName(h *PlaceHead) string   { return h.Tag }
func splitName(name string) [2]string { a, b, _ := strings.Cut(name, "\x00"); return [2]string{a, b} }

// byName finds records in use by the name they have in the building; $2 and $3 are the two parts of the names.
var byName = map[string]string{
	"space":    `retired_at IS NULL AND (level, name) IN (SELECT * FROM unnest($3::text[], $4::text[]))`,
	"make_up":  `retired_at IS NULL AND name = ANY($3) AND $4::text[] IS NOT NULL`,
	"circuit":  `retired_at IS NULL AND (board, way) IN (SELECT * FROM unnest($3::text[], $4::text[]))`,
	"place":    `retired_at IS NULL AND tag = ANY($3) AND $4::text[] IS NOT NULL`,
	"feed":     `false AND $3::text[] IS NOT NULL AND $4::text[] IS NOT NULL`,
	"control":  `false AND $3::text[] IS NOT NULL AND $4::text[] IS NOT NULL`,
	"building": "",
}

func matchPlaces[T any, P placed[T]](ctx context.Context, u *upsert, t *domain.Table[T], list, kind string, rows []T) error {
	for i := range rows {
		h := P(&rows[i]).Place()
		h.Kind = kind
		if h.ID.IsZero() && h.Tag == "" {
			h.ID = domain.NewID()
		}
		if h.Tag == "" {
			h.Tag = generatedTag(kind, h.ID)
		}
	}
	return match(ctx, u, t, list, kind, rows, func(known, row P) error {
		if known.Place().Kind != kind {
			return errors.New("is the label of a " + known.Place().Kind)
		}
		row.Place().TreeID = known.Place().TreeID
		u.trees[known.Head().ID] = known.Place().TreeID
		return nil
	}, func(row P) string { return placeName(row.Place()) })
}

// match finds which rows are known, settles their heads, checks them, and plans what to write.
func match[T any, P headed[T]](ctx context.Context, u *upsert, t *domain.Table[T], list, kind string, rows []T, fix func(known, row P) error, name func(P) string) error {
	if len(rows) == 0 {
		return nil
	}
	var ids []domain.ID
	var first, second []string
	for i := range rows {
		if id := P(&rows[i]).Head().ID; !id.IsZero() {
			ids = append(ids, id)
		}
		if name != nil {
			n := splitName(name(&rows[i]))
			first, second = append(first, n[0]), append(second, n[1])
		}
	}
	byID, named := map[domain.ID]P{}, map[string]P{}
	if err := t.Each(ctx, u.Scope, func(row *T) error {
		known := *row
		byID[P(&known).Head().ID] = &known
		if name != nil && P(&known).Head().RetiredAt == nil {
			named[name(&known)] = &known
		}
		return nil
	}, `WHERE building_id = $1 AND (id = ANY($2) OR `+byName[t.Name]+`)`, u.Building, domain.IDs(ids), orEmpty(first), orEmpty(second)); err != nil {
		return err
	}
	var made, changed []*T
	seen := map[domain.ID]int{}
	for i := range rows {
		row, at := P(&rows[i]), pointer(list, i)
		h := row.Head()
		known := byID[h.ID]
		if known == nil && h.ID.IsZero() && name != nil {
			known = named[name(row)]
		}
		if known == nil {
			if h.ID.IsZero() {
				h.ID = domain.NewID()
			}
			h.Version, h.CreatedAt = 1, u.At
		} else {
			was := known.Head()
			if was.RetiredAt != nil {
				u.check.Add(at+"/id", "is retired; restore it first")
				continue
			}
			h.ID, h.Version, h.CreatedAt = was.ID, was.Version, was.CreatedAt
		}
		h.BuildingID, h.UpdatedAt, h.RetiredAt = u.Building, u.At, nil
		if j, twice := seen[h.ID]; twice {
			u.check.Add(at, "is the same record as row %d", j)
			continue
		}
		seen[h.ID] = i
		u.refs.made(t.Name, h.ID)
		u.refs.made(kind, h.ID)
		if err := row.Validate(); err != nil {
			bad, ok := errors.AsType[*domain.Error](err)
			if !ok {
				return err
			}
			u.check.Under(at, func(c *domain.Check) {
				for _, f := range bad.Fields {
					c.Add(f.Pointer, "%s", f.Detail)
				}
			})
			continue
		}
		if named, ok := any(row).(refers); ok {
			named.refer(&u.refs, at)
		}
		u.keepTree(any(known), any(row))
		switch {
		case known == nil:
			made = append(made, &rows[i])
			u.counts.New++
		default:
			if fix != nil {
				if err := fix(known, row); err != nil {
					u.check.Add(at+"/tag", "%s", err.Error())
					continue
				}
			}
			if t.Same((*T)(known), &rows[i]) {
				u.counts.Unchanged++
				continue
			}
			changed = append(changed, &rows[i])
			u.counts.Changed++
		}
	}
	u.writes = append(u.writes, func(ctx context.Context) error {
		if len(made) > 0 {
			if err := t.Copy(ctx, u.Scope, len(made), func(i int) *T { return made[i] }); err != nil {
				return err
			}
		}
		return t.UpdateAll(ctx, u.Scope, changed)
	})
	return nil
}

func orEmpty(s []string) []string {
	if s == nil {
		return []string{}
	}
	return s
}

// keepTree notes the tree a circuit is in; a changed device may join trees.
func (u *upsert) keepTree(known, row any) {
	k, ok := row.(*Circuit)
	if !ok {
		return
	}
	k.TreeID = k.ID
	if was, _ := known.(*Circuit); was != nil {
		k.TreeID = was.TreeID
		u.trees[k.ID] = was.TreeID
	}
	u.devices = u.devices || k.sharesDevice()
}

// reachFar makes sure that every known place and circuit that a row is, or names, is in a locked tree.
func (u *upsert) reachFar(ctx context.Context) error {
	var ids []domain.ID
	for _, n := range u.refs.named {
		switch n.table {
		case "place", "circuit", "dimmer":
			ids = append(ids, n.id)
		}
	}
	for id := range u.trees {
		ids = append(ids, id)
	}
	trees, err := u.reach(ctx, ids, ids)
	if err != nil {
		return err
	}
	for id, tree := range trees {
		u.trees[id] = tree
	}
	return nil
}

// plantTrees gives every new place the tree of what feeds it, so that few records must be told again later.
func (u *upsert) plantTrees(b *Bulk) {
	up := map[domain.ID]*PlaceHead{}
	var heads []*PlaceHead
	note := func(h *PlaceHead) {
		up[h.ID] = h
		heads = append(heads, h)
	}
	for i := range b.Dimmers {
		note(&b.Dimmers[i].PlaceHead)
	}
	for i := range b.Drivers {
		note(&b.Drivers[i].PlaceHead)
	}
	for i := range b.Fixtures {
		note(&b.Fixtures[i].PlaceHead)
	}
	for i := range b.Circuits {
		k := &b.Circuits[i]
		if _, known := u.trees[k.ID]; !known {
			u.trees[k.ID] = k.ID
			u.fresh[k.ID] = true
		}
	}
	for _, h := range heads {
		if _, known := u.trees[h.ID]; known {
			continue
		}
		h.TreeID = h.ID
		at := h
		for range len(heads) + 1 {
			places, circuits := at.feeds()
			next := append(places, circuits...)
			if len(next) == 0 {
				h.TreeID = at.ID
				break
			}
			if tree, ok := u.trees[next[0]]; ok {
				h.TreeID = tree
				break
			}
			if at = up[next[0]]; at == nil {
				break
			}
		}
		if !u.holds(h.TreeID) {
			u.fresh[h.TreeID] = true
		}
	}
}

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
// is known changes that record; others are new. A feed goes by its place, source, purpose and input, a control by its
// dimmer, what it acts on and its path. Fields left out are absent, as in a PUT, but a label stays.
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
	u := &upsert{Edit: e, check: domain.NewCheck("bulk"), taken: domain.NewCheck("bulk"), trees: map[domain.ID]domain.ID{}, names: map[string]string{}, ids: map[string]string{}}
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
		func(ctx context.Context) error {
			return match(ctx, u, Feeds, "feeds", "feed", b.Feeds, nil, feedName)
		},
		func(ctx context.Context) error {
			for i := range b.Controls {
				if b.Controls[i].Position == 0 {
					b.Controls[i].Position = 1
				}
			}
			return match(ctx, u, Controls, "controls", "control", b.Controls, nil, controlName)
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
	if taken := domain.FieldsOf(u.taken.Err()); taken != nil {
		return n, &domain.Error{Kind: domain.Conflict, Msg: "other records of this building have these names already", Fields: taken}
	}
	if err := u.reachFar(ctx); err != nil {
		return n, err
	}
	u.plantTrees(b)
	if err := u.write(ctx); err != nil {
		return n, err
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
	taken  *domain.Check // names that stored records have
	refs   references
	trees  map[domain.ID]domain.ID // of places and circuits that exist or are made here
	names  map[string]string       // table and name -> the row of the request that has it
	ids    map[string]string       // table and id -> the row of the request that is it
	counts BulkCounts

	far       []domain.ID // places and circuits that changed feeds and controls named before
	spaces    []domain.ID // changed spaces
	corrected []domain.ID // changed places

	before  []func(context.Context) error // new rows that others may name
	places  []newPlaces
	after   []func(context.Context) error // new rows that name others
	changes []func(context.Context) error
}

// newPlaces are the new places of one kind.
type newPlaces struct {
	heads []*PlaceHead
	copy  func(ctx context.Context, rows []int) error
}

// write stores what was planned: what is named before what names it, and what is new before what changes.
func (u *upsert) write(ctx context.Context) error {
	steps := slices.Concat(u.before, []func(context.Context) error{u.copyPlaces}, u.after, u.changes)
	for _, step := range steps {
		if err := step(ctx); err != nil {
			return err
		}
	}
	return u.correctUnits(ctx, u.corrected)
}

// copyPlaces stores the new places in the order of their feeds: what feeds another before that one, whatever their
// kinds. It fails with Invalid where they feed each other in a circle.
func (u *upsert) copyPlaces(ctx context.Context) error {
	waiting := map[domain.ID]bool{}
	for _, p := range u.places {
		for _, h := range p.heads {
			waiting[h.ID] = true
		}
	}
	for len(waiting) > 0 {
		stored := len(waiting)
		for _, p := range u.places {
			var rows []int
			for i, h := range p.heads {
				if waiting[h.ID] && (h.FedByPlaceID == nil || !waiting[*h.FedByPlaceID]) {
					rows = append(rows, i)
				}
			}
			if len(rows) == 0 {
				continue
			}
			if err := p.copy(ctx, rows); err != nil {
				return err
			}
			for _, i := range rows {
				delete(waiting, p.heads[i].ID)
			}
		}
		if len(waiting) == stored {
			return &domain.Error{Kind: domain.Invalid, Msg: "the feeds make a circle",
				Fields: []domain.Field{{Pointer: "/fed_by_place_id", Detail: "must not lead back to the place itself"}}}
		}
	}
	return nil
}

func spaceName(p *site.Space) string { return p.Level + "\x00" + p.Name }
func makeUpName(m *MakeUp) string    { return m.Name }
func circuitName(k *Circuit) string  { return k.Board + "\x00" + k.Way }
func placeName(h *PlaceHead) string  { return h.Tag }

// feedName and controlName begin with the two identifiers that rows are looked for by.
func feedName(f *Feed) string {
	return f.PlaceID.String() + "\x00" + either(f.FromCircuitID, f.FromPlaceID) + "\x00" + f.Purpose + "\x00" + f.Input
}

func controlName(l *ControlLink) string {
	return l.DimmerID.String() + "\x00" + either(l.PlaceID, l.CircuitID) + "\x00" + l.Path
}

func either(a, b *domain.ID) string {
	if a == nil {
		a = b
	}
	if a == nil {
		return domain.ID{}.String()
	}
	return a.String()
}

// splitName returns the two parts of a name that rows are looked for by.
func splitName(name string) [2]string {
	parts := append(strings.SplitN(name, "\x00", 3), "")
	return [2]string{parts[0], parts[1]}
}

// byName finds records in use by the name they have in the building; $2 and $3 are the two parts of the names.
var byName = map[string]string{
	"space":   `retired_at IS NULL AND (level, name) IN (SELECT * FROM unnest($3::text[], $4::text[]))`,
	"make_up": `retired_at IS NULL AND name = ANY($3) AND $4::text[] IS NOT NULL`,
	"circuit": `retired_at IS NULL AND (board, way) IN (SELECT * FROM unnest($3::text[], $4::text[]))`,
	"place":   `retired_at IS NULL AND tag = ANY($3) AND $4::text[] IS NOT NULL`,
	"feed": `retired_at IS NULL AND (place_id, coalesce(from_circuit_id, from_place_id)) IN
	         (SELECT a::uuid, b::uuid FROM unnest($3::text[], $4::text[]) AS n (a, b))`,
	"control": `retired_at IS NULL AND (dimmer_id, coalesce(place_id, circuit_id)) IN
	            (SELECT a::uuid, b::uuid FROM unnest($3::text[], $4::text[]) AS n (a, b))`,
}

func matchPlaces[T any, P placed[T]](ctx context.Context, u *upsert, t *domain.Table[T], list, kind string, rows []T) error {
	for i := range rows {
		P(&rows[i]).Place().Kind = kind
	}
	return match(ctx, u, t, list, kind, rows, func(known, row P) error {
		h := row.Place()
		if known == nil {
			if h.Tag == "" {
				h.Tag = generatedTag(kind, h.ID)
			}
			return nil
		}
		was := known.Place()
		if was.Kind != kind {
			return errors.New("is the label of a " + was.Kind)
		}
		if h.Tag == "" {
			h.Tag = was.Tag
		}
		h.TreeID = was.TreeID
		u.trees[h.ID] = was.TreeID
		return nil
	}, func(row P) string { return placeName(row.Place()) })
}

// match finds which rows are known, settles their heads, checks them, and plans what to write. fix, if not nil, settles
// a row beside the one that is known, nil where it is new.
func match[T any, P headed[T]](ctx context.Context, u *upsert, t *domain.Table[T], list, kind string, rows []T, fix func(known, row P) error, name func(P) string) error {
	if len(rows) == 0 {
		return nil
	}
	var ids []domain.ID
	asked := map[domain.ID]bool{}
	var first, second []string
	for i := range rows {
		if id := P(&rows[i]).Head().ID; !id.IsZero() {
			ids, asked[id] = append(ids, id), true
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
	for i := range rows {
		row, at := P(&rows[i]), pointer(list, i)
		h := row.Head()
		known := byID[h.ID]
		given := !h.ID.IsZero()
		if !given && name != nil {
			known = named[name(row)]
		}
		if known == nil {
			if !given {
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
		if other, twice := u.ids[t.Name+h.ID.String()]; twice {
			u.check.Add(at, "is the same record as %s", other)
			continue
		}
		u.ids[t.Name+h.ID.String()] = at
		u.refs.made(t.Name, h.ID)
		u.refs.made(kind, h.ID)
		if fix != nil {
			if err := fix(known, row); err != nil {
				u.check.Add(at+"/tag", "%s", err.Error())
				continue
			}
		}
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
		if name != nil {
			var holder *domain.Row
			if other := named[name(row)]; other != nil {
				holder = other.Head()
			}
			if !u.nameFree(t.Name, at, name(row), given, h, holder, asked) {
				continue
			}
		}
		if naming, ok := any(row).(refers); ok {
			naming.refer(&u.refs, at)
			if known != nil {
				u.refs.keep(known, at)
			}
		}
		u.keepTree(any(known), any(row))
		switch {
		case known == nil:
			made = append(made, &rows[i])
			u.counts.New++
		case t.Same((*T)(known), &rows[i]):
			u.counts.Unchanged++
		default:
			changed = append(changed, &rows[i])
			u.counts.Changed++
			switch was := any(known).(type) {
			case *Feed:
				u.far = append(u.far, far(was)...)
			case *ControlLink:
				u.far = append(u.far, far(was)...)
			}
		}
	}
	plan[T, P](u, t, made, changed)
	return nil
}

// nameField is where a record has its own name in the building; a feed and a control have none, and may be told twice
// under two identifiers.
var nameField = map[string]string{"space": "/name", "make_up": "/name", "circuit": "/way", "place": "/tag"}

// nameFree tells of a row whose name another row of the request has, or a stored record (nil: none) that the request
// leaves alone. It returns false where it told.
func (u *upsert) nameFree(table, at, name string, given bool, h, holder *domain.Row, asked map[domain.ID]bool) bool {
	field, own := nameField[table]
	if given && !own {
		return true
	}
	key := table + "\x00" + name
	if other, twice := u.names[key]; twice {
		u.check.Add(at+field, "is the same as that of %s", other)
		return false
	}
	u.names[key] = at
	if own && holder != nil && holder.ID != h.ID && !asked[holder.ID] {
		u.taken.Add(at+field, "already belongs to another record of this building")
		return false
	}
	return true
}

// plan notes what is to be written of the rows of one list.
func plan[T any, P headed[T]](u *upsert, t *domain.Table[T], made, changed []*T) {
	store := func(ctx context.Context, rows []int) error {
		return t.Copy(ctx, u.Scope, len(rows), func(i int) *T { return made[rows[i]] })
	}
	all := func(ctx context.Context) error {
		return t.Copy(ctx, u.Scope, len(made), func(i int) *T { return made[i] })
	}
	switch {
	case len(made) == 0:
	case t.Name == "place":
		p := newPlaces{copy: store}
		for _, row := range made {
			p.heads = append(p.heads, any(row).(interface{ Place() *PlaceHead }).Place())
		}
		u.places = append(u.places, p)
	case t.Name == "feed" || t.Name == "control":
		u.after = append(u.after, all)
	default:
		u.before = append(u.before, all)
	}
	u.changes = append(u.changes, func(ctx context.Context) error { return t.UpdateAll(ctx, u.Scope, changed) })
	for _, row := range changed {
		switch id := P(row).Head().ID; t.Name {
		case "place":
			u.corrected = append(u.corrected, id)
		case "space":
			u.spaces = append(u.spaces, id)
		}
	}
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

// reachFar makes sure that every known place and circuit that a row is, names, or named before, is in a locked tree, and
// so is every place in a space that changes.
func (u *upsert) reachFar(ctx context.Context) error {
	if len(u.spaces) > 0 {
		if err := u.reachSpaces(ctx, u.spaces); err != nil {
			return err
		}
	}
	ids := u.far
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

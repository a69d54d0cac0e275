package plant

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"strings"

	"lampward/domain"
)

// CreateMakeUp stores a new make-up; it stands nowhere until it is put.
func (e *Edit) CreateMakeUp(ctx context.Context, m *MakeUp) error {
	return insert(ctx, e, MakeUps, m, "make_up")
}

// UpdateMakeUp stores a changed make-up. The places it was put in stay as they are until it is applied.
func (e *Edit) UpdateMakeUp(ctx context.Context, m *MakeUp) error {
	_, err := update(ctx, e, MakeUps, m, "make_up", nil)
	return err
}

// RetireMakeUp takes a make-up out of the list people choose from; its places stay.
func (e *Edit) RetireMakeUp(ctx context.Context, id domain.ID, version int64) (MakeUp, error) {
	return retire[MakeUp](ctx, e, MakeUps, id, version, &e.At, "make_up", nil)
}

// RestoreMakeUp takes a retired make-up back into use.
func (e *Edit) RestoreMakeUp(ctx context.Context, id domain.ID, version int64) (MakeUp, error) {
	return retire[MakeUp](ctx, e, MakeUps, id, version, nil, "make_up", nil)
}

// A Put says where a make-up is put, and how often.
type Put struct {
	MakeUpID  domain.ID  `json:"make_up_id"`
	SpaceID   *domain.ID `json:"space_id,omitempty"`
	CircuitID *domain.ID `json:"circuit_id,omitempty"`
	Count     int        `json:"count"` // luminaires
	Tags      []string   `json:"tags,omitempty"`
}

// PutMakeUp makes the places of a make-up: its luminaires, the remote gear that feeds them, and the dimmer, if it has
// them. Places without a tag of their own get one; their position is in_room until a label is scanned.
func (e *Edit) PutMakeUp(ctx context.Context, p Put) (Bulk, error) {
	c := domain.NewCheck("make-up")
	c.Count("/count", &p.Count, 1, MaxBulk/2-1) // each may need gear of its own, and all of them a dimmer
	if len(p.Tags) > p.Count {
		c.Add("/tags", "must not be more than count")
	}
	if err := c.Err(); err != nil {
		return Bulk{}, err
	}
	var r references
	r.name("/space_id", "space", p.SpaceID)
	r.name("/circuit_id", "circuit", p.CircuitID)
	if err := r.check(ctx, e.Scope, c); err != nil {
		return Bulk{}, err
	}
	if err := c.Err(); err != nil {
		return Bulk{}, err
	}
	m, err := e.makeUpInUse(ctx, p.MakeUpID)
	if err != nil {
		return Bulk{}, err
	}
	b := m.Expand(p)
	if _, err := e.Upsert(ctx, &b); err != nil {
		if bad, ok := errors.AsType[*domain.Error](err); ok {
			for i, f := range bad.Fields { // luminaire i carries tag i
				if n, ok := strings.CutPrefix(f.Pointer, "/fixtures/"); ok && strings.HasSuffix(n, "/tag") {
					bad.Fields[i].Pointer = "/tags/" + strings.TrimSuffix(n, "/tag")
				}
			}
		}
		return Bulk{}, err
	}
	return b, nil
}

// makeUpInUse returns a make-up that is not retired.
func (e *Edit) makeUpInUse(ctx context.Context, id domain.ID) (MakeUp, error) {
	m, err := MakeUps.Get(ctx, e.Scope, id)
	if err == nil && m.RetiredAt != nil {
		err = domain.Conflictf("the make-up is retired; restore it first")
	}
	return m, err
}

// Expand returns the records that putting m makes, with their ids and tags.
func (m *MakeUp) Expand(p Put) Bulk {
	var b Bulk
	head := func(kind string) PlaceHead {
		h := PlaceHead{SpaceID: p.SpaceID, Position: "in_room", MakeUpID: &m.ID, FactSource: m.FactSource, FedByCircuitID: p.CircuitID}
		h.ID = domain.NewID()
		h.Tag = generatedTag(kind, h.ID)
		return h
	}
	var feed *domain.ID
	if m.DimmerModelID != nil {
		d := Dimmer{PlaceHead: head(KindDimmer), DimmerModelID: m.DimmerModelID}
		b.Dimmers = append(b.Dimmers, d)
		feed = &d.ID
	}
	under := func(h PlaceHead) PlaceHead {
		if feed != nil {
			h.FedByCircuitID, h.FedByPlaceID = nil, feed
		}
		return h
	}
	remote := m.Gear == "remote"
	for i := range p.Count {
		f := Fixture{PlaceHead: under(head(KindFixture)), FixtureModelID: m.FixtureModelID, Gear: m.Gear, LampModelID: m.LampModelID, LampCount: m.LampCount}
		if i < len(p.Tags) {
			f.Tag = p.Tags[i]
		}
		switch {
		case remote:
			each := 1
			if m.FixturesPerDriver != nil {
				each = *m.FixturesPerDriver
			}
			if i%each == 0 {
				g := Driver{PlaceHead: under(head(KindDriver)), DriverModelID: m.DriverModelID}
				g.CableM, g.CableMM2, g.CableClass = m.CableM, m.CableMM2, m.CableClass
				b.Drivers = append(b.Drivers, g)
			}
			f.FedByCircuitID, f.FedByPlaceID = nil, &b.Drivers[len(b.Drivers)-1].ID
		default:
			f.DriverModelID = m.DriverModelID
		}
		b.Fixtures = append(b.Fixtures, f)
	}
	return b
}

// ApplyMakeUp gives places that a make-up was put in what it says now: all of them, or those named.
func (e *Edit) ApplyMakeUp(ctx context.Context, id domain.ID, places []domain.ID) (int, error) {
	m, err := e.makeUpInUse(ctx, id)
	if err != nil {
		return 0, err
	}
	rest, args := `WHERE building_id = $1 AND make_up_id = $2 AND retired_at IS NULL`, []any{e.Building, id}
	if places != nil {
		rest, args = rest+` AND id = ANY($3)`, append(args, domain.IDs(places))
	}
	fixtures, err := Fixtures.Select(ctx, e.Scope, rest+` AND kind = 'fixture' ORDER BY id`, args...)
	if err != nil {
		return 0, err
	}
	drivers, err := Drivers.Select(ctx, e.Scope, rest+` AND kind = 'driver' ORDER BY id`, args...)
	if err != nil {
		return 0, err
	}
	dimmers, err := Dimmers.Select(ctx, e.Scope, rest+` AND kind = 'dimmer' ORDER BY id`, args...)
	if err != nil {
		return 0, err
	}
	var ids []domain.ID
	put := map[domain.ID]bool{}
	for _, h := range slices.Concat(heads[Fixture](fixtures), heads[Driver](drivers), heads[Dimmer](dimmers)) {
		ids, put[h.ID] = append(ids, h.ID), true
	}
	c := domain.NewCheck("request")
	for i, id := range places {
		if !put[id] {
			c.Add(fmt.Sprintf("/place_ids/%d", i), "names no place in use that was put with this make-up")
		}
	}
	if err := c.Err(); err != nil {
		return 0, err
	}
	if _, err := e.reach(ctx, ids, nil); err != nil {
		return 0, err
	}
	for i := range fixtures {
		f := &fixtures[i]
		f.FixtureModelID, f.Gear, f.LampModelID, f.LampCount, f.UpdatedAt = m.FixtureModelID, m.Gear, m.LampModelID, m.LampCount, e.At
		f.DriverModelID = nil
		if m.Gear != "remote" {
			f.DriverModelID = m.DriverModelID
		}
		if err := Fixtures.Update(ctx, e.Scope, f); err != nil {
			return 0, err
		}
	}
	for i := range drivers {
		g := &drivers[i]
		g.DriverModelID, g.CableM, g.CableMM2, g.CableClass, g.UpdatedAt = m.DriverModelID, m.CableM, m.CableMM2, m.CableClass, e.At
		if err := Drivers.Update(ctx, e.Scope, g); err != nil {
			return 0, err
		}
	}
	for i := range dimmers {
		d := &dimmers[i]
		d.DimmerModelID, d.UpdatedAt = m.DimmerModelID, e.At
		if err := Dimmers.Update(ctx, e.Scope, d); err != nil {
			return 0, err
		}
	}
	if err := e.correctUnits(ctx, ids); err != nil {
		return 0, err
	}
	e.record("make_up.applied", "make_up", id, map[string]any{"places": fmt.Sprint(len(ids))})
	return len(ids), nil
}

// heads returns what some places have in common.
func heads[T any, P placed[T]](rows []T) []*PlaceHead {
	out := make([]*PlaceHead, len(rows))
	for i := range rows {
		out[i] = P(&rows[i]).Place()
	}
	return out
}

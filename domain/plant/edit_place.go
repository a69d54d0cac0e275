package plant

import (
	"context"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"

	"lampward/domain"
)

// CreateCircuit stores a new circuit: a tree of its own until something is fed from it.
func (e *Edit) CreateCircuit(ctx context.Context, k *Circuit) error {
	if k.ID.IsZero() {
		k.ID = domain.NewID()
	}
	k.TreeID = k.ID
	e.fresh[k.ID] = true
	e.devices = e.devices || k.sharesDevice()
	return insert(ctx, e, Circuits, k, "circuit")
}

func (k *Circuit) sharesDevice() bool { return k.RCD != "" && k.RCD != "none" }

// UpdateCircuit stores a changed circuit.
func (e *Edit) UpdateCircuit(ctx context.Context, k *Circuit) error {
	if _, err := e.reach(ctx, nil, []domain.ID{k.ID}); err != nil {
		return err
	}
	_, err := update(ctx, e, Circuits, k, "circuit", func(before *Circuit) error {
		k.TreeID = before.TreeID
		if k.sharesDevice() && (k.RCD != before.RCD || k.Board != before.Board) {
			e.devices = true
		}
		return nil
	})
	return err
}

// RetireCircuit takes a circuit out of use. It fails with Conflict while it feeds something or is dimmed as a whole.
func (e *Edit) RetireCircuit(ctx context.Context, id domain.ID, version int64) (Circuit, error) {
	if _, err := e.reach(ctx, nil, []domain.ID{id}); err != nil {
		return Circuit{}, err
	}
	if err := e.refuseWhile(ctx, "places or controls hang on this circuit; move or retire them first", `
		SELECT (SELECT count(*) FROM place WHERE building_id = $1 AND fed_by_circuit_id = $2 AND retired_at IS NULL)
		     + (SELECT count(*) FROM feed WHERE building_id = $1 AND from_circuit_id = $2 AND retired_at IS NULL)
		     + (SELECT count(*) FROM control WHERE building_id = $1 AND circuit_id = $2 AND retired_at IS NULL)`, id); err != nil {
		return Circuit{}, err
	}
	e.fresh[id] = true
	return retire(ctx, e, Circuits, id, version, &e.At, "circuit", func(k *Circuit) { k.TreeID = id })
}

// RestoreCircuit takes a retired circuit back into use.
func (e *Edit) RestoreCircuit(ctx context.Context, id domain.ID, version int64) (Circuit, error) {
	e.fresh[id], e.devices = true, true
	return retire(ctx, e, Circuits, id, version, nil, "circuit", func(k *Circuit) { k.TreeID = id })
}

// placed is a record of the place table.
type placed[T any] interface {
	headed[T]
	Place() *PlaceHead
}

// feeds returns the places and circuits a place head names.
func (h *PlaceHead) feeds() (places, circuits []domain.ID) {
	if h.FedByPlaceID != nil {
		places = append(places, *h.FedByPlaceID)
	}
	if h.FedByCircuitID != nil {
		circuits = append(circuits, *h.FedByCircuitID)
	}
	return places, circuits
}

// missing returns an Invalid error naming the feed that does not exist, if one does not.
func (h *PlaceHead) missing(trees map[domain.ID]domain.ID) error {
	for at, id := range map[string]*domain.ID{"/fed_by_place_id": h.FedByPlaceID, "/fed_by_circuit_id": h.FedByCircuitID} {
		if id == nil {
			continue
		}
		if _, ok := trees[*id]; !ok {
			return &domain.Error{Kind: domain.Invalid, Msg: "the feed does not exist in this building",
				Fields: []domain.Field{{Pointer: at, Detail: "names nothing in this building"}}}
		}
	}
	return nil
}

func createPlace[T any, P placed[T]](ctx context.Context, e *Edit, t *domain.Table[T], row P, kind string) error {
	h := row.Place()
	if h.ID.IsZero() {
		h.ID = domain.NewID()
	}
	if h.Tag == "" {
		h.Tag = generatedTag(kind, h.ID)
	}
	places, circuits := h.feeds()
	trees, err := e.reach(ctx, places, circuits)
	if err != nil {
		return err
	}
	if err := h.missing(trees); err != nil {
		return err
	}
	h.Kind, h.TreeID = kind, h.ID
	for _, tree := range trees {
		h.TreeID = tree
	}
	if h.TreeID == h.ID {
		e.fresh[h.ID] = true
	}
	return insert(ctx, e, t, row, kind)
}

// generatedTag returns a label for a place that came without one: a letter for its kind and the end of its id.
func generatedTag(kind string, id domain.ID) string {
	return fmt.Sprintf("%s-%X", map[string]string{KindDimmer: "D", KindDriver: "G", KindFixture: "L"}[kind], id[11:])
}

func updatePlace[T any, P placed[T]](ctx context.Context, e *Edit, t *domain.Table[T], row P, kind string, fix func(before P) error) error {
	h := row.Place()
	places, circuits := h.feeds()
	trees, err := e.reach(ctx, append(places, h.ID), circuits)
	if err != nil {
		return err
	}
	if err := h.missing(trees); err != nil {
		return err
	}
	_, err = update(ctx, e, t, row, kind, func(before P) error {
		was := before.Place()
		if was.Kind != kind {
			return domain.NotFoundf("there is no such %s", kind)
		}
		h.Kind, h.TreeID = kind, was.TreeID
		if h.Tag == "" {
			h.Tag = was.Tag
		}
		if fix != nil {
			return fix(before)
		}
		return nil
	})
	return err
}

func retirePlace[T any, P placed[T]](ctx context.Context, e *Edit, t *domain.Table[T], id domain.ID, version int64, at *time.Time, kind string) (T, error) {
	var none T
	if at != nil {
		if _, err := e.reach(ctx, []domain.ID{id}, nil); err != nil {
			return none, err
		}
		if err := e.refuseWhile(ctx, "places, controls or units still depend on this place; move or remove them first", `
			SELECT (SELECT count(*) FROM place WHERE building_id = $1 AND fed_by_place_id = $2 AND retired_at IS NULL)
			     + (SELECT count(*) FROM feed WHERE building_id = $1 AND from_place_id = $2 AND retired_at IS NULL)
			     + (SELECT count(*) FROM control WHERE building_id = $1 AND dimmer_id = $2 AND retired_at IS NULL)
			     + (SELECT count(*) FROM unit WHERE building_id = $1 AND place_id = $2 AND removed_at IS NULL AND retired_at IS NULL)`, id); err != nil {
			return none, err
		}
	}
	e.fresh[id] = true
	row, err := t.Get(ctx, e.Scope, id)
	if err != nil {
		return none, err
	}
	if P(&row).Place().Kind != kind {
		return none, domain.NotFoundf("there is no such %s", kind)
	}
	if at == nil {
		if err := e.reachBack(ctx, P(&row).Place()); err != nil {
			return none, err
		}
	}
	return retire(ctx, e, t, id, version, at, kind, func(row P) { row.Place().TreeID = id })
}

// reachBack makes sure that the trees a place returns to are locked: of what feeds it and of what acts on it, which may
// be in other trees by now. It fails with Invalid where what feeds it, or its space, is out of use.
func (e *Edit) reachBack(ctx context.Context, h *PlaceHead) error {
	var r references
	r.name("/space_id", "space", h.SpaceID)
	c := domain.NewCheck("place")
	if err := r.check(ctx, e.Scope, c); err != nil {
		return err
	}
	if err := c.Err(); err != nil {
		return err
	}
	places, circuits := h.feeds()
	rows, err := e.Query(ctx, `
		SELECT coalesce(from_place_id, from_circuit_id) FROM feed WHERE building_id = $1 AND place_id = $2 AND retired_at IS NULL
		 UNION ALL
		SELECT dimmer_id FROM control WHERE building_id = $1 AND place_id = $2 AND retired_at IS NULL`, e.Building, h.ID)
	if err != nil {
		return domain.Classify(err, "place")
	}
	far, err := pgx.CollectRows(rows, pgx.RowTo[domain.ID])
	if err != nil {
		return domain.Classify(err, "place")
	}
	trees, err := e.reach(ctx, append(places, far...), append(circuits, far...))
	if err != nil {
		return err
	}
	return h.missing(trees)
}

// CreateDimmer stores a new place of a dimmer or switch.
func (e *Edit) CreateDimmer(ctx context.Context, d *Dimmer) error {
	return createPlace(ctx, e, Dimmers, d, KindDimmer)
}

// UpdateDimmer stores a changed dimmer.
func (e *Edit) UpdateDimmer(ctx context.Context, d *Dimmer) error {
	corrected := false
	if err := updatePlace(ctx, e, Dimmers, d, KindDimmer, func(before *Dimmer) error {
		corrected = !same(before.DimmerModelID, d.DimmerModelID)
		return nil
	}); err != nil || !corrected {
		return err
	}
	return e.correctUnits(ctx, []domain.ID{d.ID})
}

// RetireDimmer takes a dimmer out of use. It fails with Conflict while it controls something.
func (e *Edit) RetireDimmer(ctx context.Context, id domain.ID, version int64) (Dimmer, error) {
	return retirePlace[Dimmer](ctx, e, Dimmers, id, version, &e.At, KindDimmer)
}

// RestoreDimmer takes a retired dimmer back into use.
func (e *Edit) RestoreDimmer(ctx context.Context, id domain.ID, version int64) (Dimmer, error) {
	return retirePlace[Dimmer](ctx, e, Dimmers, id, version, nil, KindDimmer)
}

// CreateDriver stores a new place of control gear.
func (e *Edit) CreateDriver(ctx context.Context, d *Driver) error {
	return createPlace(ctx, e, Drivers, d, KindDriver)
}

// UpdateDriver stores changed control gear.
func (e *Edit) UpdateDriver(ctx context.Context, d *Driver) error {
	corrected := false
	if err := updatePlace(ctx, e, Drivers, d, KindDriver, func(before *Driver) error {
		corrected = !same(before.DriverModelID, d.DriverModelID)
		return nil
	}); err != nil || !corrected {
		return err
	}
	return e.correctUnits(ctx, []domain.ID{d.ID})
}

// RetireDriver takes control gear out of use. It fails with Conflict while it feeds something.
func (e *Edit) RetireDriver(ctx context.Context, id domain.ID, version int64) (Driver, error) {
	return retirePlace[Driver](ctx, e, Drivers, id, version, &e.At, KindDriver)
}

// RestoreDriver takes retired control gear back into use.
func (e *Edit) RestoreDriver(ctx context.Context, id domain.ID, version int64) (Driver, error) {
	return retirePlace[Driver](ctx, e, Drivers, id, version, nil, KindDriver)
}

// CreateFixture stores a new luminaire.
func (e *Edit) CreateFixture(ctx context.Context, f *Fixture) error {
	return createPlace(ctx, e, Fixtures, f, KindFixture)
}

// UpdateFixture stores a corrected luminaire. Another lamp model here corrects the record; a lamp that was changed is
// told with Fit.
func (e *Edit) UpdateFixture(ctx context.Context, f *Fixture) error {
	corrected := false
	if err := updatePlace(ctx, e, Fixtures, f, KindFixture, func(before *Fixture) error {
		corrected = !same(before.LampModelID, f.LampModelID) || !same(before.DriverModelID, f.DriverModelID) || !same(before.FixtureModelID, f.FixtureModelID)
		return nil
	}); err != nil || !corrected {
		return err
	}
	return e.correctUnits(ctx, []domain.ID{f.ID})
}

// correctUnits follows a correction of places: the units that stand there are of the models the places now name. Lamps
// that were told to differ from the rest keep their own.
func (e *Edit) correctUnits(ctx context.Context, places []domain.ID) error {
	if len(places) == 0 {
		return nil
	}
	if _, err := e.Exec(ctx, `
		UPDATE unit u
		   SET lamp_model_id = CASE u.part WHEN 'lamp' THEN p.lamp_model_id END,
		       driver_model_id = CASE u.part WHEN 'driver' THEN p.driver_model_id END,
		       dimmer_model_id = CASE u.part WHEN 'dimmer' THEN p.dimmer_model_id END,
		       fixture_model_id = CASE u.part WHEN 'fixture' THEN p.fixture_model_id END,
		       version = u.version + 1, updated_at = $3
		  FROM place p
		 WHERE u.building_id = $1 AND p.building_id = $1 AND p.id = u.place_id AND u.place_id = ANY($2)
		   AND u.removed_at IS NULL AND u.retired_at IS NULL AND NOT u.odd
		   AND (u.part = 'lamp' AND u.lamp_model_id IS DISTINCT FROM p.lamp_model_id
		     OR u.part = 'driver' AND u.driver_model_id IS DISTINCT FROM p.driver_model_id
		     OR u.part = 'dimmer' AND u.dimmer_model_id IS DISTINCT FROM p.dimmer_model_id
		     OR u.part = 'fixture' AND u.fixture_model_id IS DISTINCT FROM p.fixture_model_id)`,
		e.Building, domain.IDs(places), e.At); err != nil {
		return domain.Classify(err, "unit")
	}
	_, err := e.Exec(ctx, `
		UPDATE unit u
		   SET odd = (u.lamp_model_id IS DISTINCT FROM p.lamp_model_id), version = u.version + 1, updated_at = $3
		  FROM place p
		 WHERE u.building_id = $1 AND p.building_id = $1 AND p.id = u.place_id AND u.place_id = ANY($2)
		   AND u.removed_at IS NULL AND u.retired_at IS NULL AND u.part = 'lamp'
		   AND u.odd <> (u.lamp_model_id IS DISTINCT FROM p.lamp_model_id)`, e.Building, domain.IDs(places), e.At)
	return domain.Classify(err, "unit")
}

// RetireFixture takes a luminaire out of use. It fails with Conflict while it holds a unit.
func (e *Edit) RetireFixture(ctx context.Context, id domain.ID, version int64) (Fixture, error) {
	return retirePlace[Fixture](ctx, e, Fixtures, id, version, &e.At, KindFixture)
}

// RestoreFixture takes a retired luminaire back into use.
func (e *Edit) RestoreFixture(ctx context.Context, id domain.ID, version int64) (Fixture, error) {
	return retirePlace[Fixture](ctx, e, Fixtures, id, version, nil, KindFixture)
}

func same(a, b *domain.ID) bool {
	return a == b || a != nil && b != nil && *a == *b
}

// CreateFeed stores a further supply of a place.
func (e *Edit) CreateFeed(ctx context.Context, f *Feed) error {
	if err := f.Validate(); err != nil {
		return err
	}
	if err := e.reachFeed(ctx, f); err != nil {
		return err
	}
	return insert(ctx, e, Feeds, f, "feed")
}

// UpdateFeed stores a changed supply.
func (e *Edit) UpdateFeed(ctx context.Context, f *Feed) error {
	before, err := Feeds.Get(ctx, e.Scope, f.ID)
	if err != nil {
		return err
	}
	if err := f.Validate(); err != nil {
		return err
	}
	if err := e.reachStored(ctx, &before); err != nil {
		return err
	}
	if err := e.reachFeed(ctx, f); err != nil {
		return err
	}
	_, err = update(ctx, e, Feeds, f, "feed", nil)
	return err
}

// RetireFeed takes a supply out of use.
func (e *Edit) RetireFeed(ctx context.Context, id domain.ID, version int64) (Feed, error) {
	return e.setFeed(ctx, id, version, &e.At)
}

// RestoreFeed takes a retired supply back into use.
func (e *Edit) RestoreFeed(ctx context.Context, id domain.ID, version int64) (Feed, error) {
	return e.setFeed(ctx, id, version, nil)
}

func (e *Edit) setFeed(ctx context.Context, id domain.ID, version int64, at *time.Time) (Feed, error) {
	f, err := Feeds.Get(ctx, e.Scope, id)
	if err != nil {
		return f, err
	}
	if at == nil {
		err = e.reachFeed(ctx, &f)
	} else {
		err = e.reachStored(ctx, &f)
	}
	if err != nil {
		return f, err
	}
	return retire[Feed](ctx, e, Feeds, id, version, at, "feed", nil)
}

func (e *Edit) reachFeed(ctx context.Context, f *Feed) error {
	return e.reachAll(ctx, "feed", map[string]*domain.ID{"/place_id": &f.PlaceID, "/from_place_id": f.FromPlaceID},
		map[string]*domain.ID{"/from_circuit_id": f.FromCircuitID})
}

// reachStored is reach for all that a stored record names; what is out of use by now has no tree.
func (e *Edit) reachStored(ctx context.Context, row refers) error {
	ids := far(row)
	_, err := e.reach(ctx, ids, ids)
	return err
}

// far returns the places and circuits that a record names.
func far(row refers) (ids []domain.ID) {
	var r references
	row.refer(&r, "")
	for _, n := range r.named {
		switch n.table {
		case "place", "circuit", "dimmer":
			ids = append(ids, n.id)
		}
	}
	return ids
}

// reachAll is reach for fields that a record names; it fails with Invalid for one that names nothing.
func (e *Edit) reachAll(ctx context.Context, what string, places, circuits map[string]*domain.ID) error {
	var p, c []domain.ID
	for _, id := range places {
		if id != nil {
			p = append(p, *id)
		}
	}
	for _, id := range circuits {
		if id != nil {
			c = append(c, *id)
		}
	}
	trees, err := e.reach(ctx, p, c)
	if err != nil {
		return err
	}
	check := domain.NewCheck(what)
	for _, fields := range []map[string]*domain.ID{places, circuits} {
		for at, id := range fields {
			if id == nil {
				continue
			}
			if _, ok := trees[*id]; !ok {
				check.Add(at, "names nothing in this building")
			}
		}
	}
	return check.Err()
}

// CreateControl stores that a dimmer or switch acts on a place or a circuit.
func (e *Edit) CreateControl(ctx context.Context, l *ControlLink) error {
	if l.Position == 0 {
		l.Position = 1
	}
	if err := l.Validate(); err != nil {
		return err
	}
	if err := e.reachControl(ctx, l); err != nil {
		return err
	}
	return insert(ctx, e, Controls, l, "control")
}

// UpdateControl stores a changed control.
func (e *Edit) UpdateControl(ctx context.Context, l *ControlLink) error {
	before, err := Controls.Get(ctx, e.Scope, l.ID)
	if err != nil {
		return err
	}
	if l.Position == 0 {
		l.Position = 1
	}
	if err := l.Validate(); err != nil {
		return err
	}
	if err := e.reachStored(ctx, &before); err != nil {
		return err
	}
	if err := e.reachControl(ctx, l); err != nil {
		return err
	}
	_, err = update(ctx, e, Controls, l, "control", nil)
	return err
}

// RetireControl takes a control out of use.
func (e *Edit) RetireControl(ctx context.Context, id domain.ID, version int64) (ControlLink, error) {
	return e.setControl(ctx, id, version, &e.At)
}

// RestoreControl takes a retired control back into use.
func (e *Edit) RestoreControl(ctx context.Context, id domain.ID, version int64) (ControlLink, error) {
	return e.setControl(ctx, id, version, nil)
}

func (e *Edit) setControl(ctx context.Context, id domain.ID, version int64, at *time.Time) (ControlLink, error) {
	l, err := Controls.Get(ctx, e.Scope, id)
	if err != nil {
		return l, err
	}
	if at == nil {
		err = e.reachControl(ctx, &l)
	} else {
		err = e.reachStored(ctx, &l)
	}
	if err != nil {
		return l, err
	}
	return retire[ControlLink](ctx, e, Controls, id, version, at, "control", nil)
}

func (e *Edit) reachControl(ctx context.Context, l *ControlLink) error {
	return e.reachAll(ctx, "control", map[string]*domain.ID{"/dimmer_id": &l.DimmerID, "/place_id": l.PlaceID},
		map[string]*domain.ID{"/circuit_id": l.CircuitID})
}

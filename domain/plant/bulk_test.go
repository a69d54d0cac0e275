package plant_test

import (
	"context"
	"fmt"
	"testing"

	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// survey is a bulk of n rows without identifiers, as a sheet would give it: one space, circuits, and luminaires.
func (x bench) survey(n int) plant.Bulk {
	b := plant.Bulk{Spaces: []site.Space{{Level: "0", Name: "Hall"}}}
	for i := range (n - 1) / 10 {
		b.Circuits = append(b.Circuits, plant.Circuit{Board: "DB1", Way: fmt.Sprint(i), CircuitFacts: loading.CircuitFacts{RatingA: of(16.0), RCD: "none"}})
	}
	for i := range n - 1 - len(b.Circuits) {
		b.Fixtures = append(b.Fixtures, plant.Fixture{PlaceHead: plant.PlaceHead{Tag: fmt.Sprintf("L-%05d", i)},
			FixtureModelID: &x.m.Downlight.ID, LampModelID: &x.m.MainsLED9.ID, LampCount: of(1)})
	}
	return b
}

func (x bench) upsert(b plant.Bulk) (n plant.BulkCounts, err error) {
	x.t.Helper()
	err = x.edit(func(ctx context.Context, e *plant.Edit) (err error) {
		sent := b.Clone()
		n, err = e.Upsert(ctx, &sent)
		return err
	})
	return n, err
}

// Ten thousand rows are one request and one entry of the audit, and sending them again changes nothing.
func TestBulkTwice(t *testing.T) {
	x := setup(t)
	b := x.survey(plant.MaxBulk)
	if b.Rows() != plant.MaxBulk {
		t.Fatalf("%d rows", b.Rows())
	}
	before := x.count(`SELECT count(*) FROM audit WHERE building_id = $1`)
	n, err := x.upsert(b)
	if err != nil || n != (plant.BulkCounts{New: plant.MaxBulk}) {
		t.Fatalf("first: %+v, %v", n, err)
	}
	if got := x.count(`SELECT count(*) FROM audit WHERE building_id = $1`) - before; got != 1 {
		t.Errorf("%d entries of the audit, want 1", got)
	}
	n, err = x.upsert(b)
	if err != nil || n != (plant.BulkCounts{Unchanged: plant.MaxBulk}) {
		t.Errorf("second: %+v, %v", n, err)
	}
	if got := x.count(`SELECT count(*) FROM place WHERE building_id = $1 AND version <> 1`); got != 0 {
		t.Errorf("%d places were written twice", got)
	}
	b.Fixtures[17].LampCount = of(0)
	if n, err = x.upsert(b); err != nil || n != (plant.BulkCounts{Changed: 1, Unchanged: plant.MaxBulk - 1}) {
		t.Errorf("one changed: %+v, %v", n, err)
	}
	b.Fixtures = append(b.Fixtures, plant.Fixture{})
	if _, err := x.upsert(b); domain.KindOf(err) != domain.Invalid {
		t.Errorf("a row too many gives %v", err)
	}
	if _, err := x.upsert(plant.Bulk{}); domain.KindOf(err) != domain.Invalid {
		t.Errorf("no rows give %v", err)
	}
}

// Rows may feed each other in any order and from any list; feeds and controls without identifiers are known again.
func TestBulkFeedsInAnyOrder(t *testing.T) {
	x := setup(t)
	id := domain.NewID
	circuit, mains, gear, low, light, second := id(), id(), id(), id(), id(), id()
	place := func(id domain.ID, tag string, circuit, place *domain.ID) plant.PlaceHead {
		h := plant.PlaceHead{Tag: tag, FedByCircuitID: circuit, FedByPlaceID: place}
		h.ID = id
		return h
	}
	k := plant.Circuit{Board: "DB1", Way: "1"}
	k.ID = circuit
	b := plant.Bulk{
		Circuits: []plant.Circuit{k},
		// A dimmer behind the gear that another dimmer feeds: neither list can be stored before the other.
		Dimmers: []plant.Dimmer{{PlaceHead: place(low, "D-LOW", nil, &gear)}, {PlaceHead: place(mains, "D-MAINS", &circuit, nil)}},
		Drivers: []plant.Driver{{PlaceHead: place(gear, "G-1", nil, &mains)}},
		Fixtures: []plant.Fixture{{PlaceHead: place(light, "L-1", nil, &low)},
			{PlaceHead: place(second, "L-2", &circuit, nil)}},
		Feeds:    []plant.Feed{{PlaceID: light, FromCircuitID: &circuit, Purpose: "permanent_live"}},
		Controls: []plant.ControlLink{{DimmerID: mains, PlaceID: &second, Path: "signal"}, {DimmerID: mains, CircuitID: &circuit, Path: "power_path"}},
	}
	if n, err := x.upsert(b); err != nil || n.New != b.Rows() {
		t.Fatalf("first: %+v, %v", n, err)
	}
	if n, err := x.upsert(b); err != nil || n.Unchanged != b.Rows() {
		t.Errorf("second: %+v, %v", n, err)
	}
	for _, p := range []domain.ID{mains, gear, low, light, second} {
		if x.tree(p) != circuit {
			t.Errorf("place %s is in tree %s", p, x.tree(p))
		}
	}
	// A change by identifier that leaves the label out keeps it.
	d := plant.Driver{PlaceHead: place(gear, "", nil, &mains), DriverModelID: &x.m.Wound100.ID}
	if n, err := x.upsert(plant.Bulk{Drivers: []plant.Driver{d}}); err != nil || n.Changed != 1 {
		t.Fatalf("%+v, %v", n, err)
	}
	if got, err := plant.Drivers.Get(t.Context(), x.scope(), gear); err != nil || got.Tag != "G-1" || got.DriverModelID == nil {
		t.Errorf("the driver reads %+v, %v", got, err)
	}
	// A circle of new rows is told, whatever lists they are in.
	a, c := domain.NewID(), domain.NewID()
	_, err := x.upsert(plant.Bulk{Dimmers: []plant.Dimmer{{PlaceHead: place(a, "C-1", nil, &c)}}, Drivers: []plant.Driver{{PlaceHead: place(c, "C-2", nil, &a)}}})
	if told := domain.FieldsOf(err); domain.KindOf(err) != domain.Invalid || len(told) != 1 || told[0].Pointer != "/fed_by_place_id" {
		t.Errorf("a circle gives %v", err)
	}
}

// Every bad row is told with its own pointer, and nothing of the request is stored.
func TestBulkRefused(t *testing.T) {
	x := setup(t)
	l := x.line("1", 1)
	tagged := func(tag string) plant.Fixture { return plant.Fixture{PlaceHead: plant.PlaceHead{Tag: tag}} }
	own := tagged("G-1")
	own.ID = domain.NewID()
	gone := tagged("X-3")
	gone.SpaceID = of(domain.NewID())
	model := tagged("X-4")
	model.LampModelID = &x.m.Wound100.ID
	heavy := tagged("X-5")
	heavy.LampCount = of(-1)
	for name, c := range map[string]struct {
		b      plant.Bulk
		kind   domain.Kind
		fields string
	}{
		"a label twice":              {plant.Bulk{Fixtures: []plant.Fixture{tagged("X-1"), tagged("X-2"), tagged("X-1")}}, domain.Invalid, "/fixtures/2/tag"},
		"a label in two lists":       {plant.Bulk{Dimmers: []plant.Dimmer{{PlaceHead: plant.PlaceHead{Tag: "X-1"}}}, Fixtures: []plant.Fixture{tagged("X-1")}}, domain.Invalid, "/fixtures/0/tag"},
		"a driver's label":           {plant.Bulk{Fixtures: []plant.Fixture{tagged("G-1")}}, domain.Invalid, "/fixtures/0/tag"},
		"a new id, a label in use":   {plant.Bulk{Fixtures: []plant.Fixture{own}}, domain.Conflict, "/fixtures/0/tag"},
		"a space that is not there":  {plant.Bulk{Fixtures: []plant.Fixture{tagged("X-1"), gone}}, domain.Invalid, "/fixtures/1/space_id"},
		"a model of another kind":    {plant.Bulk{Fixtures: []plant.Fixture{model}}, domain.Invalid, "/fixtures/0/lamp_model_id"},
		"a count below nothing":      {plant.Bulk{Fixtures: []plant.Fixture{heavy}}, domain.Invalid, "/fixtures/0/lamp_count"},
		"a way twice":                {plant.Bulk{Circuits: []plant.Circuit{{Board: "A", Way: "1"}, {Board: "A", Way: "1"}}}, domain.Invalid, "/circuits/1/way"},
		"a name that cannot be seen": {plant.Bulk{Spaces: []site.Space{{Name: "a\u200bb"}}}, domain.Invalid, "/spaces/0/name"},
		"a feed of nothing":          {plant.Bulk{Feeds: []plant.Feed{{PlaceID: l.f.ID, Purpose: "normal"}}}, domain.Invalid, "/feeds/0"},
		"a control by a driver":      {plant.Bulk{Controls: []plant.ControlLink{{DimmerID: l.d.ID, PlaceID: &l.f.ID, Path: "signal"}}}, domain.Invalid, "/controls/0/dimmer_id"},
	} {
		x.refused(name, c.kind, c.fields, func(ctx context.Context, e *plant.Edit) error {
			sent := c.b.Clone()
			_, err := e.Upsert(ctx, &sent)
			return err
		})
	}
	if n := x.count(`SELECT (SELECT count(*) FROM place WHERE building_id = $1) + (SELECT count(*) FROM circuit WHERE building_id = $1) + (SELECT count(*) FROM space WHERE building_id = $1)`); n != 3 {
		t.Errorf("%d records, want the 3 of before", n)
	}
}

// A bulk that moves a control, or changes the hours of a space, judges the trees of both ends anew.
func TestBulkReachesFar(t *testing.T) {
	x := setup(t)
	a, b := x.line("1", 1), x.line("2", 1)
	dimmer := x.dimmer("D-1")
	var link plant.ControlLink
	x.must(func(ctx context.Context, e *plant.Edit) error {
		link = plant.ControlLink{DimmerID: dimmer.ID, PlaceID: &a.f.ID, Path: "signal"}
		return e.CreateControl(ctx, &link)
	})
	if x.tree(dimmer.ID) != x.tree(a.f.ID) {
		t.Fatal("a control does not join its dimmer's tree")
	}
	link.PlaceID = &b.f.ID
	if n, err := x.upsert(plant.Bulk{Controls: []plant.ControlLink{link}}); err != nil || n.Changed != 1 {
		t.Fatalf("%+v, %v", n, err)
	}
	if x.tree(dimmer.ID) != x.tree(b.f.ID) || x.tree(a.f.ID) == x.tree(b.f.ID) {
		t.Error("a moved control leaves its dimmer in the old tree")
	}
	// The space of luminaire a gets yearly hours: the tree's recheck follows them.
	var hall site.Space
	x.must(func(ctx context.Context, e *plant.Edit) error {
		hall = site.Space{Name: "Hall"}
		if err := e.CreateSpace(ctx, &hall); err != nil {
			return err
		}
		f := x.fixture(a.f.ID)
		f.SpaceID, f.LampModelID, f.LampsFittedAt = &hall.ID, &x.m.LED7.ID, of(hour(1))
		return e.UpdateFixture(ctx, &f)
	})
	recheck := `SELECT count(*) FROM tree WHERE building_id = $1 AND tree_id = $2 AND recheck_at IS NOT NULL`
	if n := x.count(recheck, x.tree(a.f.ID)); n != 0 {
		t.Fatal("without yearly hours nothing is due by time alone")
	}
	hall.YearlyHours = of(2500.0)
	if n, err := x.upsert(plant.Bulk{Spaces: []site.Space{hall}}); err != nil || n.Changed != 1 {
		t.Fatalf("%+v, %v", n, err)
	}
	if n := x.count(recheck, x.tree(a.f.ID)); n != 1 {
		t.Error("the tree of a place in a changed space is not judged anew")
	}
}

// A make-up is put in one act, told of by its own fields, and what it says now can be applied to all or some.
func TestMakeUp(t *testing.T) {
	x := setup(t)
	var m plant.MakeUp
	var b plant.Bulk
	put := func(p plant.Put) func(context.Context, *plant.Edit) error {
		return func(ctx context.Context, e *plant.Edit) (err error) {
			p.MakeUpID = m.ID
			b, err = e.PutMakeUp(ctx, p)
			return err
		}
	}
	x.must(func(ctx context.Context, e *plant.Edit) error {
		m = plant.MakeUp{Name: "Set", FixtureModelID: &x.m.Downlight.ID, Gear: "remote", LampModelID: &x.m.Halogen35.ID, LampCount: of(1),
			DriverModelID: &x.m.Electronic105.ID, FixturesPerDriver: of(3), DimmerModelID: &x.m.TrailingEdge.ID}
		return e.CreateMakeUp(ctx, &m)
	})
	l := x.line("1", 1)
	x.must(put(plant.Put{Count: 7, CircuitID: &l.k.ID, Tags: []string{"S-1", "S-2"}}))
	if len(b.Fixtures) != 7 || len(b.Drivers) != 3 || len(b.Dimmers) != 1 || b.Fixtures[1].Tag != "S-2" || b.Fixtures[2].Tag == "" || b.Fixtures[6].Position != "in_room" {
		t.Errorf("put as %d luminaires, %d drivers, %d dimmers", len(b.Fixtures), len(b.Drivers), len(b.Dimmers))
	}
	some := []domain.ID{b.Fixtures[0].ID, b.Dimmers[0].ID, b.Dimmers[0].ID}
	others := b
	x.refused("a label twice", domain.Invalid, "/tags/1", put(plant.Put{Count: 2, Tags: []string{"S-3", "S-3"}}))
	x.refused("a label in use", domain.Conflict, "/tags/0", put(plant.Put{Count: 1, Tags: []string{"S-1"}}))
	x.refused("more labels than luminaires", domain.Invalid, "/tags", put(plant.Put{Count: 1, Tags: []string{"S-4", "S-5"}}))
	x.refused("none", domain.Invalid, "/count", put(plant.Put{}))
	x.refused("a space that is not there", domain.Invalid, "/space_id", put(plant.Put{Count: 3, SpaceID: of(domain.NewID())}))
	x.refused("a circuit that is not there", domain.Invalid, "/circuit_id", put(plant.Put{Count: 3, CircuitID: of(domain.NewID())}))

	x.must(func(ctx context.Context, e *plant.Edit) error {
		now := m // an edit that reaches further starts over
		now.LampModelID, now.DimmerModelID = &x.m.LED7.ID, &x.m.LeadingEdge.ID
		if err := e.UpdateMakeUp(ctx, &now); err != nil {
			return err
		}
		n, err := e.ApplyMakeUp(ctx, m.ID, some)
		if err == nil && n != 2 {
			t.Errorf("applied to %d places, want 2", n)
		}
		return err
	})
	if f := x.fixture(others.Fixtures[0].ID); *f.LampModelID != x.m.LED7.ID {
		t.Error("a place named keeps the old lamp")
	}
	if f := x.fixture(others.Fixtures[1].ID); *f.LampModelID != x.m.Halogen35.ID {
		t.Error("a place not named has the new lamp")
	}
	if d, err := plant.Dimmers.Get(t.Context(), x.scope(), others.Dimmers[0].ID); err != nil || *d.DimmerModelID != x.m.LeadingEdge.ID {
		t.Errorf("the dimmer keeps its old model: %+v, %v", d, err)
	}
	x.refused("a place of another origin", domain.Invalid, "/place_ids/1", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.ApplyMakeUp(ctx, m.ID, []domain.ID{some[0], l.f.ID})
		return err
	})
	x.must(func(ctx context.Context, e *plant.Edit) error {
		n, err := e.ApplyMakeUp(ctx, m.ID, nil)
		if err == nil && n != 11 {
			t.Errorf("applied to %d places, want all 11", n)
		}
		return err
	})
}

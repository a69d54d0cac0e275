package plant_test

import (
	"context"
	"fmt"
	"strings"
	"testing"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/plant"
	"lampward/domain/review"
	"lampward/domain/site"
)

func TestMain(m *testing.M) { domaintest.Main(m) }

// bench is a building with a catalogue in a database of its own. Its edits go through the one door.
type bench struct {
	t  *testing.T
	db *pgxpool.Pool
	r  *review.Reviewer
	b  site.Building
	m  domaintest.Models
}

func setup(t *testing.T) bench {
	t.Helper()
	t.Parallel()
	db := domaintest.DB(t)
	return bench{t, db, review.New(), domaintest.Building(t, db, "TEST"), domaintest.Catalogue(t, db)}
}

func (x bench) edit(f func(context.Context, *plant.Edit) error) error {
	x.t.Helper()
	return domain.In(x.t.Context(), x.db, x.b.ID, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error {
		_, err := x.r.Change(x.t.Context(), s, review.Touch{}, func(e *plant.Edit) error { return f(x.t.Context(), e) })
		return err
	})
}

func (x bench) must(f func(context.Context, *plant.Edit) error) {
	x.t.Helper()
	if err := x.edit(f); err != nil {
		x.t.Fatal(err)
	}
}

// refused wants an edit refused with a kind and, where it is Invalid, with exactly these fields.
func (x bench) refused(what string, want domain.Kind, fields string, f func(context.Context, *plant.Edit) error) {
	x.t.Helper()
	err := x.edit(f)
	var told []string
	for _, f := range domain.FieldsOf(err) {
		told = append(told, f.Pointer)
	}
	if domain.KindOf(err) != want || strings.Join(told, " ") != fields {
		x.t.Errorf("%s gives %v; want kind %d and fields %q", what, err, want, fields)
	}
}

func (x bench) scope() domain.Scope {
	return domain.On(x.db, x.b.ID, domaintest.Tester, domaintest.Noon)
}

// count returns what a query gives; its first argument is the building.
func (x bench) count(sql string, args ...any) (n int) {
	x.t.Helper()
	if err := x.db.QueryRow(x.t.Context(), sql, append([]any{x.b.ID}, args...)...).Scan(&n); err != nil {
		x.t.Fatal(err)
	}
	return n
}

func (x bench) fixture(id domain.ID) plant.Fixture {
	x.t.Helper()
	f, err := plant.Fixtures.Get(x.t.Context(), x.scope(), id)
	if err != nil {
		x.t.Fatal(err)
	}
	return f
}

// stands returns the units now in a place, as "holder:model", a model by its code.
func (x bench) stands(place domain.ID, part string) string {
	x.t.Helper()
	code := map[domain.ID]string{x.m.Halogen35.ID: "H35", x.m.LED7.ID: "L7", x.m.LED7DC.ID: "L7DC", x.m.Electronic105.ID: "ET105",
		x.m.Electronic60.ID: "ET60", x.m.Wound100.ID: "WT100", x.m.Downlight.ID: "DL1", x.m.LeadingEdge.ID: "LE", x.m.TrailingEdge.ID: "TE"}
	units, err := plant.Units.Select(x.t.Context(), x.scope(), `
		WHERE building_id = $1 AND place_id = $2 AND part = $3 AND removed_at IS NULL ORDER BY holder`, x.b.ID, place, part)
	if err != nil {
		x.t.Fatal(err)
	}
	var out []string
	for _, u := range units {
		name := "?"
		for _, id := range []*domain.ID{u.LampModelID, u.DriverModelID, u.DimmerModelID, u.FixtureModelID} {
			if id != nil {
				name = code[*id]
			}
		}
		out = append(out, fmt.Sprintf("%d:%s", u.Holder, name))
	}
	return strings.Join(out, " ")
}

func of[T any](v T) *T { return &v }

// line is a circuit with a driver and a downlight on it.
type line struct {
	k plant.Circuit
	d plant.Driver
	f plant.Fixture
}

func (x bench) line(way string, lamps int) (l line) {
	x.t.Helper()
	x.must(func(ctx context.Context, e *plant.Edit) error {
		l = line{k: plant.Circuit{Board: "DB1", Way: way}, d: plant.Driver{DriverModelID: &x.m.Electronic105.ID},
			f: plant.Fixture{FixtureModelID: &x.m.Downlight.ID, LampModelID: &x.m.Halogen35.ID, LampCount: &lamps}}
		if err := e.CreateCircuit(ctx, &l.k); err != nil {
			return err
		}
		l.d.Tag, l.d.FedByCircuitID = "G-"+way, &l.k.ID
		if err := e.CreateDriver(ctx, &l.d); err != nil {
			return err
		}
		l.f.Tag, l.f.FedByPlaceID = "L-"+way, &l.d.ID
		return e.CreateFixture(ctx, &l.f)
	})
	return l
}

func (x bench) dimmer(tag string) (d plant.Dimmer) {
	x.t.Helper()
	x.must(func(ctx context.Context, e *plant.Edit) error {
		d = plant.Dimmer{DimmerModelID: &x.m.TrailingEdge.ID}
		d.Tag = tag
		return e.CreateDimmer(ctx, &d)
	})
	return d
}

// tree returns the tree of a place or circuit.
func (x bench) tree(id domain.ID) (tree domain.ID) {
	x.t.Helper()
	err := x.db.QueryRow(x.t.Context(), `
		SELECT tree_id FROM place WHERE building_id = $1 AND id = $2
		 UNION ALL
		SELECT tree_id FROM circuit WHERE building_id = $1 AND id = $2`, x.b.ID, id).Scan(&tree)
	if err != nil {
		x.t.Fatal(err)
	}
	return tree
}

// record is a kind of record driven through its whole life.
type record[T any, P interface {
	*T
	Head() *domain.Row
}] struct {
	name            string
	t               *domain.Table[T]
	made            T
	change          func(P) // makes a valid change
	create          func(*plant.Edit, context.Context, *T) error
	update          func(*plant.Edit, context.Context, *T) error
	retire, restore func(*plant.Edit, context.Context, domain.ID, int64) (T, error)
}

// life makes, reads, changes, retires and restores a record, and wants each version told, an old one refused, a state
// that is there already refused, and another building to know nothing of it.
func life[T any, P interface {
	*T
	Head() *domain.Row
}](x bench, c record[T, P]) {
	x.t.Helper()
	ctx := x.t.Context()
	row := c.made
	x.must(func(ctx context.Context, e *plant.Edit) error { row = c.made; return c.create(e, ctx, &row) })
	h := P(&row).Head()
	if h.ID.IsZero() || h.Version != 1 || h.BuildingID != x.b.ID || !h.CreatedAt.Equal(domaintest.Noon) || h.RetiredAt != nil {
		x.t.Errorf("%s is made with the head %+v", c.name, *h)
	}
	got, err := c.t.Get(ctx, x.scope(), h.ID)
	if err != nil || !c.t.Same(&got, &row) {
		x.t.Errorf("%s reads back as %+v, %v; made as %+v", c.name, got, err, row)
	}
	other := domain.On(x.db, domain.NewID(), domaintest.Tester, domaintest.Noon)
	if _, err := c.t.Get(ctx, other, h.ID); domain.KindOf(err) != domain.NotFound {
		x.t.Errorf("another building reads the %s: %v", c.name, err)
	}
	if rows, _, err := c.t.Page(ctx, other, domain.Page{Limit: 10}); err != nil || len(rows) != 0 {
		x.t.Errorf("another building lists %d of %s, %v", len(rows), c.name, err)
	}
	x.refused(c.name+" with the same id", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		twin := c.made
		P(&twin).Head().ID = h.ID
		return c.create(e, ctx, &twin)
	})

	x.must(func(ctx context.Context, e *plant.Edit) error {
		row = got
		c.change(&row)
		P(&row).Head().RetiredAt = of(domaintest.Noon) // not for a client to say
		return c.update(e, ctx, &row)
	})
	got2, err := c.t.Get(ctx, x.scope(), h.ID)
	if err != nil || P(&got2).Head().Version != 2 || P(&got2).Head().RetiredAt != nil || c.t.Same(&got2, &got) || !c.t.Same(&got2, &row) {
		x.t.Errorf("%s is changed to %+v, %v", c.name, got2, err)
	}
	x.refused("an old version of "+c.name, domain.Stale, "", func(ctx context.Context, e *plant.Edit) error {
		old := got
		return c.update(e, ctx, &old)
	})
	x.refused("changing a "+c.name+" that is not there", domain.NotFound, "", func(ctx context.Context, e *plant.Edit) error {
		none := got2
		P(&none).Head().ID = domain.NewID()
		return c.update(e, ctx, &none)
	})
	turn := func(do func(*plant.Edit, context.Context, domain.ID, int64) (T, error), version int64) func(context.Context, *plant.Edit) error {
		return func(ctx context.Context, e *plant.Edit) error { _, err := do(e, ctx, h.ID, version); return err }
	}
	x.refused("restoring a "+c.name+" in use", domain.Conflict, "", turn(c.restore, 2))
	x.refused("retiring an old version of "+c.name, domain.Stale, "", turn(c.retire, 1))
	x.must(turn(c.retire, 2))
	x.refused("retiring a "+c.name+" twice", domain.Conflict, "", turn(c.retire, 3))
	x.refused("changing a retired "+c.name, domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		row := got2
		P(&row).Head().Version = 3
		return c.update(e, ctx, &row)
	})
	x.must(turn(c.restore, 3))
	got3, err := c.t.Get(ctx, x.scope(), h.ID)
	if err != nil || P(&got3).Head().Version != 4 || P(&got3).Head().RetiredAt != nil || !c.t.Same(&got3, &got2) {
		x.t.Errorf("%s is restored as %+v, %v", c.name, got3, err)
	}
	if n := x.count(`SELECT count(*) FROM audit WHERE building_id = $1 AND subject_id = $2`, h.ID); n != 4 {
		x.t.Errorf("%s has %d entries in the audit, want 4", c.name, n)
	}
}

// Every kind of record is made, read, changed, retired and restored by the same rules.
func TestLives(t *testing.T) {
	x := setup(t)
	a, b := x.line("1", 1), x.line("2", 1)
	dimmer := x.dimmer("D-1")
	life(x, record[site.Space, *site.Space]{"space", site.Spaces, site.Space{Level: "0", Name: "Hall", Permits: []string{}, Escort: of(false)},
		func(r *site.Space) { r.YearlyHours = of(2500.0) },
		(*plant.Edit).CreateSpace, (*plant.Edit).UpdateSpace, (*plant.Edit).RetireSpace, (*plant.Edit).RestoreSpace})
	life(x, record[plant.Circuit, *plant.Circuit]{"circuit", plant.Circuits, plant.Circuit{Board: "DB1", Way: "'; DROP TABLE circuit; --"},
		func(r *plant.Circuit) { r.RatingA, r.RCD = of(10.0), "R1" },
		(*plant.Edit).CreateCircuit, (*plant.Edit).UpdateCircuit, (*plant.Edit).RetireCircuit, (*plant.Edit).RestoreCircuit})
	head := plant.PlaceHead{Tag: "X-1", FedByCircuitID: &a.k.ID}
	life(x, record[plant.Dimmer, *plant.Dimmer]{"dimmer", plant.Dimmers, plant.Dimmer{PlaceHead: head},
		func(r *plant.Dimmer) { r.SetEdge = "leading_edge" },
		(*plant.Edit).CreateDimmer, (*plant.Edit).UpdateDimmer, (*plant.Edit).RetireDimmer, (*plant.Edit).RestoreDimmer})
	head.Tag = "X-2"
	life(x, record[plant.Driver, *plant.Driver]{"driver", plant.Drivers, plant.Driver{PlaceHead: head, DriverModelID: &x.m.Wound100.ID},
		func(r *plant.Driver) { r.CableTapsM, r.FedByCircuitID = []float64{1, 2}, &b.k.ID },
		(*plant.Edit).CreateDriver, (*plant.Edit).UpdateDriver, (*plant.Edit).RetireDriver, (*plant.Edit).RestoreDriver})
	head.Tag = "X-3"
	life(x, record[plant.Fixture, *plant.Fixture]{"fixture", plant.Fixtures, plant.Fixture{PlaceHead: head, LampCount: of(2)},
		func(r *plant.Fixture) {
			r.LampModelID, r.LampsFittedAt = &x.m.MainsLED9.ID, of(domaintest.Noon.Add(-time.Hour))
		},
		(*plant.Edit).CreateFixture, (*plant.Edit).UpdateFixture, (*plant.Edit).RetireFixture, (*plant.Edit).RestoreFixture})
	life(x, record[plant.Feed, *plant.Feed]{"feed", plant.Feeds, plant.Feed{PlaceID: a.f.ID, FromCircuitID: &b.k.ID, Purpose: "permanent_live"},
		func(r *plant.Feed) { r.Input = "L2" },
		(*plant.Edit).CreateFeed, (*plant.Edit).UpdateFeed, (*plant.Edit).RetireFeed, (*plant.Edit).RestoreFeed})
	life(x, record[plant.ControlLink, *plant.ControlLink]{"control", plant.Controls, plant.ControlLink{DimmerID: dimmer.ID, PlaceID: &a.d.ID, Path: "signal"},
		func(r *plant.ControlLink) { r.PlaceID, r.CircuitID = nil, &b.k.ID },
		(*plant.Edit).CreateControl, (*plant.Edit).UpdateControl, (*plant.Edit).RetireControl, (*plant.Edit).RestoreControl})
	life(x, record[plant.MakeUp, *plant.MakeUp]{"make-up", plant.MakeUps, plant.MakeUp{Name: "Downlight", LampCount: of(1)},
		func(r *plant.MakeUp) { r.Gear, r.FixturesPerDriver = "remote", of(3) },
		(*plant.Edit).CreateMakeUp, (*plant.Edit).UpdateMakeUp, (*plant.Edit).RetireMakeUp, (*plant.Edit).RestoreMakeUp})
}

// What is depended on is not retired; what stays behind can still be changed.
func TestRetireRules(t *testing.T) {
	x := setup(t)
	l := x.line("1", 1)
	dimmer := x.dimmer("D-1")
	var room site.Space
	var made plant.MakeUp
	var link plant.ControlLink
	x.must(func(ctx context.Context, e *plant.Edit) error {
		room, made = site.Space{Name: "Hall"}, plant.MakeUp{Name: "Set"}
		if err := e.CreateSpace(ctx, &room); err != nil {
			return err
		}
		if err := e.CreateMakeUp(ctx, &made); err != nil {
			return err
		}
		link = plant.ControlLink{DimmerID: dimmer.ID, PlaceID: &l.f.ID, Path: "signal"}
		if err := e.CreateControl(ctx, &link); err != nil {
			return err
		}
		f := l.f
		f.SpaceID, f.MakeUpID = &room.ID, &made.ID
		if err := e.UpdateFixture(ctx, &f); err != nil {
			return err
		}
		l.f = f
		return nil
	})
	x.refused("retiring a circuit that feeds", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RetireCircuit(ctx, l.k.ID, 1)
		return err
	})
	x.refused("retiring a driver that feeds", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RetireDriver(ctx, l.d.ID, 1)
		return err
	})
	x.refused("retiring a dimmer that controls", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RetireDimmer(ctx, dimmer.ID, 1)
		return err
	})
	x.refused("retiring a space with a place in it", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RetireSpace(ctx, room.ID, 1)
		return err
	})
	x.refused("retiring a fixture as a driver", domain.NotFound, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RetireDriver(ctx, l.f.ID, l.f.Version)
		return err
	})
	// A make-up may go; the places it was put in stay and can be changed.
	x.must(func(ctx context.Context, e *plant.Edit) error { _, err := e.RetireMakeUp(ctx, made.ID, 1); return err })
	x.must(func(ctx context.Context, e *plant.Edit) error {
		f := l.f
		f.Note = "Seen"
		if err := e.UpdateFixture(ctx, &f); err != nil {
			return err
		}
		l.f = f
		return nil
	})
	x.must(func(ctx context.Context, e *plant.Edit) error {
		f := l.f
		f.Note = "Seen again"
		_, err := e.Upsert(ctx, &plant.Bulk{Fixtures: []plant.Fixture{f}})
		return err
	})
	l.f = x.fixture(l.f.ID)
	x.refused("naming a retired make-up anew", domain.Invalid, "/make_up_id", func(ctx context.Context, e *plant.Edit) error {
		d := l.d
		d.MakeUpID = &made.ID
		return e.UpdateDriver(ctx, &d)
	})
	x.refused("putting a retired make-up", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.PutMakeUp(ctx, plant.Put{MakeUpID: made.ID, Count: 1})
		return err
	})

	// A unit holds its place.
	x.must(func(ctx context.Context, e *plant.Edit) error {
		_, err := e.Fit(ctx, plant.Swap{PlaceID: l.f.ID, Part: "lamp", ModelID: &x.m.LED7.ID, DoneAt: domaintest.Noon})
		return err
	})
	l.f = x.fixture(l.f.ID)
	x.refused("retiring a fixture that holds a unit", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RetireFixture(ctx, l.f.ID, l.f.Version)
		return err
	})
	x.must(func(ctx context.Context, e *plant.Edit) error {
		_, err := e.Fit(ctx, plant.Swap{PlaceID: l.f.ID, Part: "lamp", Emptied: true, DoneAt: domaintest.Noon})
		return err
	})
	l.f = x.fixture(l.f.ID)
	x.must(func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RetireFixture(ctx, l.f.ID, l.f.Version)
		return err
	})
	if n := x.count(`SELECT count(*) FROM finding WHERE building_id = $1 AND subject_id = $2 AND cleared_at IS NULL`, l.f.ID); n != 0 {
		t.Errorf("%d findings of a retired fixture are open", n)
	}
	// What controls a retired place can be retired, and then the dimmer too.
	x.must(func(ctx context.Context, e *plant.Edit) error { _, err := e.RetireControl(ctx, link.ID, 1); return err })
	x.refused("restoring a control of a retired place", domain.Invalid, "/place_id", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RestoreControl(ctx, link.ID, 2)
		return err
	})
	x.must(func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RetireDimmer(ctx, dimmer.ID, 1)
		return err
	})
	// A place does not come back into a space, or onto a feed, that is out of use.
	x.must(func(ctx context.Context, e *plant.Edit) error { _, err := e.RetireSpace(ctx, room.ID, 1); return err })
	restore := func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RestoreFixture(ctx, l.f.ID, l.f.Version+1)
		return err
	}
	x.refused("restoring into a retired space", domain.Invalid, "/space_id", restore)
	x.must(func(ctx context.Context, e *plant.Edit) error { _, err := e.RestoreSpace(ctx, room.ID, 2); return err })
	x.must(func(ctx context.Context, e *plant.Edit) error { _, err := e.RetireDriver(ctx, l.d.ID, 1); return err })
	x.refused("restoring onto a retired driver", domain.Invalid, "/fed_by_place_id", restore)
	x.must(func(ctx context.Context, e *plant.Edit) error { _, err := e.RestoreDriver(ctx, l.d.ID, 2); return err })
	x.must(restore)
}

// A place that comes back is in the tree of what still acts on it.
func TestRestoreJoinsTrees(t *testing.T) {
	x := setup(t)
	a, b := x.line("1", 1), x.line("2", 1)
	x.must(func(ctx context.Context, e *plant.Edit) error {
		if err := e.CreateFeed(ctx, &plant.Feed{PlaceID: a.f.ID, FromCircuitID: &b.k.ID, Purpose: "permanent_live"}); err != nil {
			return err
		}
		return nil
	})
	if x.tree(a.f.ID) != x.tree(b.f.ID) {
		t.Fatal("a second feed does not join two trees")
	}
	x.must(func(ctx context.Context, e *plant.Edit) error { _, err := e.RetireFixture(ctx, a.f.ID, 1); return err })
	if x.tree(a.d.ID) == x.tree(b.f.ID) {
		t.Fatal("two trees stay joined by a retired fixture")
	}
	x.must(func(ctx context.Context, e *plant.Edit) error { _, err := e.RestoreFixture(ctx, a.f.ID, 2); return err })
	if x.tree(a.f.ID) != x.tree(b.f.ID) || x.tree(a.d.ID) != x.tree(b.k.ID) {
		t.Error("a fixture comes back without the tree of its second feed")
	}
}

// Feeds make no circle and stay in one building; a control in the power path shares the circuit it switches.
func TestFeedRules(t *testing.T) {
	x := setup(t)
	a, b := x.line("1", 1), x.line("2", 1)
	elsewhere := bench{t, x.db, x.r, domaintest.Building(t, x.db, "ELSEWHERE"), x.m}.line("1", 1)
	x.refused("a circle of two", domain.Invalid, "/fed_by_place_id", func(ctx context.Context, e *plant.Edit) error {
		d := a.d
		d.FedByCircuitID, d.FedByPlaceID = nil, &a.f.ID
		return e.UpdateDriver(ctx, &d)
	})
	x.refused("a place that feeds itself", domain.Invalid, "/fed_by_place_id", func(ctx context.Context, e *plant.Edit) error {
		d := a.d
		d.FedByCircuitID, d.FedByPlaceID = nil, &a.d.ID
		return e.UpdateDriver(ctx, &d)
	})
	x.refused("two normal feeds", domain.Invalid, "/fed_by_place_id", func(ctx context.Context, e *plant.Edit) error {
		f := a.f
		f.FedByCircuitID = &a.k.ID
		return e.UpdateFixture(ctx, &f)
	})
	x.refused("a feed from another building", domain.Invalid, "/fed_by_place_id", func(ctx context.Context, e *plant.Edit) error {
		f := a.f
		f.FedByPlaceID = &elsewhere.d.ID
		return e.UpdateFixture(ctx, &f)
	})
	x.refused("a further feed from another building", domain.Invalid, "/from_circuit_id", func(ctx context.Context, e *plant.Edit) error {
		return e.CreateFeed(ctx, &plant.Feed{PlaceID: a.f.ID, FromCircuitID: &elsewhere.k.ID, Purpose: "normal"})
	})
	x.refused("a further feed of two sources", domain.Invalid, "", func(ctx context.Context, e *plant.Edit) error {
		return e.CreateFeed(ctx, &plant.Feed{PlaceID: a.f.ID, FromCircuitID: &b.k.ID, FromPlaceID: &b.d.ID, Purpose: "normal"})
	})
	x.refused("a control by what is no dimmer", domain.Invalid, "/dimmer_id", func(ctx context.Context, e *plant.Edit) error {
		return e.CreateControl(ctx, &plant.ControlLink{DimmerID: b.d.ID, PlaceID: &a.f.ID, Path: "signal"})
	})
	d := plant.Dimmer{}
	x.must(func(ctx context.Context, e *plant.Edit) error {
		d = plant.Dimmer{PlaceHead: plant.PlaceHead{Tag: "D-1", FedByCircuitID: &a.k.ID}}
		return e.CreateDimmer(ctx, &d)
	})
	x.refused("a power path across circuits", domain.Invalid, "/path", func(ctx context.Context, e *plant.Edit) error {
		return e.CreateControl(ctx, &plant.ControlLink{DimmerID: d.ID, PlaceID: &b.f.ID, Path: "power_path"})
	})
	x.must(func(ctx context.Context, e *plant.Edit) error {
		return e.CreateControl(ctx, &plant.ControlLink{DimmerID: d.ID, PlaceID: &b.f.ID, Path: "signal"})
	})
	// Nothing of what was refused is stored.
	if n := x.count(`SELECT (SELECT count(*) FROM feed WHERE building_id = $1) * 100 + (SELECT count(*) FROM control WHERE building_id = $1)`); n != 1 {
		t.Errorf("feeds and controls on record: %d", n)
	}
}

// A label is unique among what is in use, is made up where it is left out, and stays where a change leaves it out.
func TestTags(t *testing.T) {
	x := setup(t)
	l := x.line("1", 1)
	x.refused("a label twice", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		return e.CreateDimmer(ctx, &plant.Dimmer{PlaceHead: plant.PlaceHead{Tag: "L-1"}})
	})
	x.must(func(ctx context.Context, e *plant.Edit) error { _, err := e.RetireFixture(ctx, l.f.ID, 1); return err })
	var d plant.Dimmer
	x.must(func(ctx context.Context, e *plant.Edit) error {
		d = plant.Dimmer{PlaceHead: plant.PlaceHead{Tag: "L-1"}}
		return e.CreateDimmer(ctx, &d)
	})
	x.refused("a label that was given away", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RestoreFixture(ctx, l.f.ID, 2)
		return err
	})
	x.must(func(ctx context.Context, e *plant.Edit) error {
		g := plant.Driver{}
		if err := e.CreateDriver(ctx, &g); err != nil {
			return err
		}
		if g.Tag == "" {
			t.Error("a driver without a label gets none")
		}
		d.Tag, d.Note = "", "Seen"
		return e.UpdateDimmer(ctx, &d)
	})
	if d.Tag != "L-1" {
		t.Errorf("a change without a label leaves %q", d.Tag)
	}
	for _, tag := range []string{"a\u200bb", "a\u202eb", "a\x00b", strings.Repeat("a", 201), " a"} {
		x.refused("a label "+fmt.Sprintf("%q", tag), domain.Invalid, "/tag", func(ctx context.Context, e *plant.Edit) error {
			return e.CreateDimmer(ctx, &plant.Dimmer{PlaceHead: plant.PlaceHead{Tag: tag}})
		})
	}
}

// Pages of a list hold every row once, in order.
func TestPages(t *testing.T) {
	x := setup(t)
	x.must(func(ctx context.Context, e *plant.Edit) error {
		var b plant.Bulk
		for i := range 25 {
			b.Circuits = append(b.Circuits, plant.Circuit{Board: "DB1", Way: fmt.Sprint(i)})
		}
		_, err := e.Upsert(ctx, &b)
		return err
	})
	for _, limit := range []int{1, 7, 25, 1000} {
		seen, cursor := map[domain.ID]bool{}, ""
		var last domain.ID
		for {
			rows, next, err := plant.Circuits.Page(t.Context(), x.scope(), domain.Page{Limit: limit, Cursor: cursor}, domain.Match{Column: "board", Value: "DB1"})
			if err != nil || len(rows) > limit {
				t.Fatalf("%d rows of %d, %v", len(rows), limit, err)
			}
			for _, r := range rows {
				if seen[r.ID] || strings.Compare(string(r.ID[:]), string(last[:])) <= 0 {
					t.Fatalf("row %s twice or out of order", r.ID)
				}
				seen[r.ID], last = true, r.ID
			}
			if cursor = next; next == "" {
				break
			}
		}
		if len(seen) != 25 {
			t.Errorf("pages of %d hold %d rows", limit, len(seen))
		}
	}
	if _, _, err := plant.Circuits.Page(t.Context(), x.scope(), domain.Page{Limit: 1}, domain.Match{Column: "board; DROP TABLE circuit", Value: "x"}); domain.KindOf(err) != domain.Invalid {
		t.Errorf("a column that is none gives %v", err)
	}
	rows, _, err := plant.Circuits.Page(t.Context(), x.scope(), domain.Page{Limit: 100}, domain.Match{Column: "way", Op: "contains", Value: "%"})
	if err != nil || len(rows) != 0 {
		t.Errorf("a percent sign matches %d ways, %v", len(rows), err)
	}
}

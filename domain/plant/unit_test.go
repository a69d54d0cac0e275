package plant_test

import (
	"context"
	"testing"
	"time"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/plant"
)

// hour is a time n hours after noon.
func hour(n int) time.Time { return domaintest.Noon.Add(time.Duration(n-100) * time.Hour) }

func (x bench) fit(w plant.Swap) (u plant.Unit) {
	x.t.Helper()
	x.must(func(ctx context.Context, e *plant.Edit) (err error) { u, err = e.Fit(ctx, w); return err })
	return u
}

// Lamps changed one by one keep their own histories, and the luminaire tells what is in it.
func TestFitLamps(t *testing.T) {
	x := setup(t)
	l := x.line("1", 3)
	swap := func(holder int, model *domain.ID, at time.Time) plant.Swap {
		return plant.Swap{PlaceID: l.f.ID, Part: "lamp", Holder: holder, ModelID: model, Emptied: model == nil, DoneAt: at}
	}
	check := func(what, units string, count int, model domain.ID) {
		t.Helper()
		f := x.fixture(l.f.ID)
		if got := x.stands(l.f.ID, "lamp"); got != units {
			t.Errorf("%s: units %q, want %q", what, got, units)
		}
		if f.LampCount == nil || *f.LampCount != count || f.LampModelID == nil || *f.LampModelID != model {
			t.Errorf("%s: %v lamps of %v, want %d of %v", what, f.LampCount, f.LampModelID, count, model)
		}
	}
	u := x.fit(swap(2, &x.m.LED7.ID, hour(1)))
	check("one of three", "1:H35 2:L7 3:H35", 3, x.m.Halogen35.ID)
	if u.Holder != 2 || u.FittedAt == nil || !u.FittedAt.Equal(hour(1)) {
		t.Errorf("the new unit is %+v", u)
	}
	x.fit(swap(1, nil, hour(2)))
	check("one taken out", "2:L7 3:H35", 2, x.m.Halogen35.ID)
	x.fit(swap(1, nil, hour(3)))
	check("taken out twice", "2:L7 3:H35", 2, x.m.Halogen35.ID)
	x.fit(swap(3, &x.m.LED7.ID, hour(4)))
	check("all alike", "2:L7 3:L7", 2, x.m.LED7.ID)
	x.fit(swap(1, &x.m.LED7.ID, hour(5)))
	check("put back", "1:L7 2:L7 3:L7", 3, x.m.LED7.ID)
	if n := x.count(`SELECT count(*) FROM unit WHERE building_id = $1 AND place_id = $2 AND odd`, l.f.ID); n != 0 {
		t.Errorf("%d units are marked as odd", n)
	}
	x.refused("a swap before the one on record", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.Fit(ctx, swap(1, &x.m.Halogen35.ID, hour(4)))
		return err
	})
	// A swap told late, of another holder, does not make the lamps older than they are.
	at := *x.fixture(l.f.ID).LampsFittedAt
	x.fit(swap(4, &x.m.LED7.ID, hour(1)))
	check("a fourth", "1:L7 2:L7 3:L7 4:L7", 4, x.m.LED7.ID)
	if got := x.fixture(l.f.ID).LampsFittedAt; got == nil || !got.Equal(at) {
		t.Errorf("lamps fitted at %v, want %v", got, at)
	}
}

// Where nobody knows how many lamps there are, a swap does not make it known, unless it says that it is the only one or
// the model of the luminaire tells.
func TestFitUnknownCount(t *testing.T) {
	x := setup(t)
	for _, c := range []struct {
		name   string
		model  *domain.ID
		holder int
		want   *int
	}{
		{"nothing known", nil, 2, nil},
		{"the only one", nil, 0, of(1)},
		{"the model has one holder", &x.m.Downlight.ID, 0, of(1)},
	} {
		var f plant.Fixture
		x.must(func(ctx context.Context, e *plant.Edit) error {
			f = plant.Fixture{FixtureModelID: c.model, LampModelID: &x.m.Halogen35.ID}
			return e.CreateFixture(ctx, &f)
		})
		x.fit(plant.Swap{PlaceID: f.ID, Part: "lamp", Holder: c.holder, ModelID: &x.m.LED7.ID, DoneAt: hour(1)})
		got := x.fixture(f.ID).LampCount
		if (got == nil) != (c.want == nil) || got != nil && *got != *c.want {
			t.Errorf("%s: %v lamps, want %v", c.name, got, c.want)
		}
	}
}

func TestFitRefused(t *testing.T) {
	x := setup(t)
	l := x.line("1", 1)
	good := plant.Swap{PlaceID: l.f.ID, Part: "lamp", ModelID: &x.m.LED7.ID, DoneAt: domaintest.Noon}
	for name, c := range map[string]struct {
		spoil func(*plant.Swap)
		kind  domain.Kind
		field string
	}{
		"a place that is not there":  {func(w *plant.Swap) { w.PlaceID = domain.NewID() }, domain.NotFound, ""},
		"no part":                    {func(w *plant.Swap) { w.Part = "" }, domain.Invalid, "/part"},
		"a part that is none":        {func(w *plant.Swap) { w.Part = "ballast" }, domain.Invalid, "/part"},
		"a model that is not there":  {func(w *plant.Swap) { w.ModelID = of(domain.NewID()) }, domain.Invalid, "/model_id"},
		"a model of another kind":    {func(w *plant.Swap) { w.ModelID = &x.m.Wound100.ID }, domain.Invalid, "/model_id"},
		"a lamp and none":            {func(w *plant.Swap) { w.Emptied = true }, domain.Invalid, "/model_id"},
		"neither a lamp nor none":    {func(w *plant.Swap) { w.ModelID = nil }, domain.Invalid, "/model_id"},
		"no time":                    {func(w *plant.Swap) { w.DoneAt = time.Time{} }, domain.Invalid, "/done_at"},
		"tomorrow":                   {func(w *plant.Swap) { w.DoneAt = domaintest.Noon.AddDate(0, 0, 1) }, domain.Invalid, "/done_at"},
		"before electric light":      {func(w *plant.Swap) { w.DoneAt = time.Date(1, 1, 1, 0, 0, 0, 1, time.UTC) }, domain.Invalid, "/done_at"},
		"a mode without a failure":   {func(w *plant.Swap) { w.Mode = "dark" }, domain.Invalid, "/mode"},
		"a reason that is none":      {func(w *plant.Swap) { w.Why = "ugly" }, domain.Invalid, "/why"},
		"a marking of a battery":     {func(w *plant.Swap) { w.Battery = "NiCd" }, domain.Invalid, "/battery"},
		"a serial of two lines":      {func(w *plant.Swap) { w.Serial = "1\n2" }, domain.Invalid, "/serial"},
		"a date that is none":        {func(w *plant.Swap) { w.Temporary = of(domain.Date("2026-02-30")) }, domain.Invalid, "/temporary_until"},
		"hours below nothing":        {func(w *plant.Swap) { w.Hours = of(-1.0) }, domain.Invalid, "/hours"},
		"a holder that is none":      {func(w *plant.Swap) { w.Holder = -1 }, domain.Invalid, "/holder"},
		"a lamp in a driver":         {func(w *plant.Swap) { w.PlaceID = l.d.ID }, domain.Conflict, ""},
		"a dimmer in a luminaire":    {func(w *plant.Swap) { w.Part, w.ModelID = "dimmer", &x.m.LeadingEdge.ID }, domain.Conflict, ""},
		"a battery with a model":     {func(w *plant.Swap) { w.Part = "battery" }, domain.Invalid, "/model_id"},
		"a battery that is no place": {func(w *plant.Swap) { w.Part, w.ModelID, w.PlaceID = "battery", nil, l.d.ID }, domain.Conflict, ""},
	} {
		w := good
		c.spoil(&w)
		x.refused(name, c.kind, c.field, func(ctx context.Context, e *plant.Edit) error { _, err := e.Fit(ctx, w); return err })
	}
	if n := x.count(`SELECT count(*) FROM unit WHERE building_id = $1`); n != 0 {
		t.Errorf("%d units are stored", n)
	}
}

// Gear that is swapped tells the place what was there before; what was set on it is forgotten; a luminaire whose gear
// is a place of its own takes none.
func TestFitDriver(t *testing.T) {
	x := setup(t)
	l := x.line("1", 1)
	x.fit(plant.Swap{PlaceID: l.d.ID, Part: "driver", ModelID: &x.m.Wound100.ID, DoneAt: hour(1), Why: "retrofit"})
	d, err := plant.Drivers.Get(t.Context(), x.scope(), l.d.ID)
	if err != nil || d.DriverModelID == nil || *d.DriverModelID != x.m.Wound100.ID || d.SeparationBefore != "selv" || d.FittedAt == nil || !d.FittedAt.Equal(hour(1)) {
		t.Errorf("the driver reads %+v, %v", d, err)
	}
	if got := x.stands(l.d.ID, "driver"); got != "1:WT100" {
		t.Errorf("units %q", got)
	}
	x.must(func(ctx context.Context, e *plant.Edit) error {
		f := l.f
		f.Gear = "remote"
		return e.UpdateFixture(ctx, &f)
	})
	x.refused("gear in a luminaire with remote gear", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.Fit(ctx, plant.Swap{PlaceID: l.f.ID, Part: "driver", ModelID: &x.m.Wound100.ID, DoneAt: hour(1)})
		return err
	})
	x.must(func(ctx context.Context, e *plant.Edit) error {
		f := x.fixture(l.f.ID)
		f.Gear = "none"
		return e.UpdateFixture(ctx, &f)
	})
	x.fit(plant.Swap{PlaceID: l.f.ID, Part: "driver", ModelID: &x.m.Wound100.ID, DoneAt: hour(1)})
	f := x.fixture(l.f.ID)
	if f.Gear != "integral" {
		t.Errorf("gear was put into the luminaire, which says %q", f.Gear)
	}
	if err := f.Validate(); err != nil {
		t.Errorf("what a swap leaves is not valid: %v", err)
	}
}

// A luminaire of another model takes with it what was inside the old one; one of the same model is lamped as before.
func TestFitFixture(t *testing.T) {
	x := setup(t)
	l := x.line("1", 2)
	x.fit(plant.Swap{PlaceID: l.f.ID, Part: "lamp", Holder: 1, ModelID: &x.m.LED7.ID, DoneAt: hour(1)})
	x.must(func(ctx context.Context, e *plant.Edit) error {
		return e.Report(ctx, &plant.Failure{PlaceID: &l.f.ID, Part: "lamp", Holder: 2, Mode: "dark", NoticedAt: hour(2)})
	})
	x.fit(plant.Swap{PlaceID: l.f.ID, Part: "fixture", ModelID: &x.m.Downlight.ID, DoneAt: hour(3), Why: "damaged"})
	if f := x.fixture(l.f.ID); f.LampCount == nil || *f.LampCount != 2 || x.stands(l.f.ID, "lamp") != "1:L7 2:H35" {
		t.Errorf("a luminaire like the one before is lamped as %v, %q", f.LampCount, x.stands(l.f.ID, "lamp"))
	}
	x.fit(plant.Swap{PlaceID: l.f.ID, Part: "fixture", Unknown: true, DoneAt: hour(4), Why: "retrofit"})
	f := x.fixture(l.f.ID)
	if f.FixtureModelID != nil || f.LampModelID != nil || f.LampCount != nil || f.FedByPlaceID == nil || x.stands(l.f.ID, "lamp") != "" || x.stands(l.f.ID, "fixture") != "1:?" {
		t.Errorf("another luminaire keeps %+v with %q", f, x.stands(l.f.ID, "lamp"))
	}
	if n := x.count(`SELECT count(*) FROM failure WHERE building_id = $1 AND cleared_at IS NULL`); n != 0 {
		t.Errorf("%d failures of lamps that left are open", n)
	}
}

// A battery goes by its marking; one taken out leaves none, which is not the same as nobody having looked.
func TestFitBattery(t *testing.T) {
	x := setup(t)
	l := x.line("1", 1)
	x.fit(plant.Swap{PlaceID: l.f.ID, Part: "battery", Battery: "4.8 V 2 Ah", DoneAt: hour(1)})
	if got := x.fixture(l.f.ID).Battery; got != "4.8 V 2 Ah" {
		t.Errorf("battery %q", got)
	}
	x.fit(plant.Swap{PlaceID: l.f.ID, Part: "battery", Emptied: true, DoneAt: hour(2)})
	if got := x.fixture(l.f.ID).Battery; got != "none" || x.stands(l.f.ID, "battery") != "" {
		t.Errorf("after taking it out: %q, units %q", got, x.stands(l.f.ID, "battery"))
	}
	x.fit(plant.Swap{PlaceID: l.f.ID, Part: "battery", Unknown: true, DoneAt: hour(3)})
	if got := x.fixture(l.f.ID).Battery; got != "" || x.stands(l.f.ID, "battery") != "1:?" {
		t.Errorf("one nobody read: %q, units %q", got, x.stands(l.f.ID, "battery"))
	}
}

// A corrected model corrects the units that stand there; a lamp told to differ keeps its own.
func TestCorrection(t *testing.T) {
	x := setup(t)
	l := x.line("1", 2)
	x.fit(plant.Swap{PlaceID: l.f.ID, Part: "lamp", Holder: 1, ModelID: &x.m.LED7.ID, DoneAt: hour(1)})
	x.fit(plant.Swap{PlaceID: l.d.ID, Part: "driver", ModelID: &x.m.Wound100.ID, DoneAt: hour(1)})
	x.must(func(ctx context.Context, e *plant.Edit) error {
		f := x.fixture(l.f.ID)
		f.LampModelID = &x.m.LED7DC.ID
		return e.UpdateFixture(ctx, &f)
	})
	if got := x.stands(l.f.ID, "lamp"); got != "1:L7 2:L7DC" {
		t.Errorf("lamps after a correction: %q", got)
	}
	x.must(func(ctx context.Context, e *plant.Edit) error {
		f := x.fixture(l.f.ID)
		f.LampModelID = &x.m.LED7.ID
		d := plant.Driver{PlaceHead: plant.PlaceHead{Tag: l.d.Tag, FedByCircuitID: &l.k.ID}, DriverModelID: &x.m.Electronic60.ID}
		_, err := e.Upsert(ctx, &plant.Bulk{Fixtures: []plant.Fixture{f}, Drivers: []plant.Driver{d}})
		return err
	})
	if lamps, gear := x.stands(l.f.ID, "lamp"), x.stands(l.d.ID, "driver"); lamps != "1:L7 2:L7" || gear != "1:ET60" {
		t.Errorf("after a correction in bulk: lamps %q, gear %q", lamps, gear)
	}
	if n := x.count(`SELECT count(*) FROM unit WHERE building_id = $1 AND odd`); n != 0 {
		t.Errorf("%d lamps are odd where all are alike", n)
	}
}

func (x bench) report(place domain.ID, part string, holder int, mode string, at time.Time) (f plant.Failure) {
	x.t.Helper()
	x.must(func(ctx context.Context, e *plant.Edit) error {
		f = plant.Failure{PlaceID: &place, Part: part, Holder: holder, Mode: mode, NoticedAt: at}
		return e.Report(ctx, &f)
	})
	return f
}

// Two reports are one failure only while the same unit stays.
func TestReports(t *testing.T) {
	x := setup(t)
	l := x.line("1", 2)
	first := x.report(l.f.ID, "lamp", 1, "dark", hour(10))
	again := x.report(l.f.ID, "lamp", 1, "dark", hour(9))
	if again.ID != first.ID || again.Reports != 2 || !again.NoticedAt.Equal(hour(9)) {
		t.Errorf("the same lamp dark again: %+v", again)
	}
	if other := x.report(l.f.ID, "lamp", 2, "dark", hour(10)); other.ID == first.ID {
		t.Error("another holder is the same failure")
	}
	if other := x.report(l.f.ID, "lamp", 1, "flicker", hour(10)); other.ID == first.ID {
		t.Error("another way of failing is the same failure")
	}
	// A group of lamps is changed: what was told of the old ones is over.
	for holder := 1; holder <= 2; holder++ {
		x.fit(plant.Swap{PlaceID: l.f.ID, Part: "lamp", Holder: holder, ModelID: &x.m.LED7.ID, DoneAt: hour(20), Why: "group_relamp"})
	}
	if n := x.count(`SELECT count(*) FROM failure WHERE building_id = $1 AND cleared_at IS NULL`); n != 0 {
		t.Errorf("%d failures of lamps that left are open", n)
	}
	fresh := x.report(l.f.ID, "lamp", 1, "dark", hour(30))
	if fresh.ID == first.ID || fresh.ClearedAt != nil || fresh.UnitID == nil {
		t.Errorf("the new lamp's failure is %+v", fresh)
	}
	// A report that comes late is of the lamp that was there when it was noticed.
	late := x.report(l.f.ID, "lamp", 1, "dark", hour(11))
	if late.ID != first.ID || late.Reports != 3 {
		t.Errorf("a late report is of %+v", late)
	}
	late = x.report(l.f.ID, "lamp", 1, "dim", hour(11))
	if late.ClearedAt == nil || !late.ClearedAt.Equal(hour(20)) || late.UnitID == nil || *late.UnitID == *fresh.UnitID {
		t.Errorf("a late report of another failing is %+v", late)
	}
	// A failure noticed after a swap that is told late is not the old lamp's.
	x.fit(plant.Swap{PlaceID: l.f.ID, Part: "lamp", Holder: 1, ModelID: &x.m.LED7.ID, DoneAt: hour(25), Why: "failed", Mode: "dark"})
	if n := x.count(`SELECT count(*) FROM failure WHERE building_id = $1 AND id = $2 AND cleared_at IS NULL`, fresh.ID); n != 1 {
		t.Error("a failure noticed after the swap was cleared by it")
	}
	if n := x.count(`SELECT count(*) FROM failure WHERE building_id = $1 AND noticed_at = $2 AND cleared_at = $2`, hour(25)); n != 1 {
		t.Errorf("%d failures are recorded by a swap because of one", n)
	}
	// A driver has one holder, named or not.
	one := x.report(l.d.ID, "driver", 0, "noise", hour(10))
	if two := x.report(l.d.ID, "driver", 1, "noise", hour(10)); two.ID != one.ID {
		t.Error("one driver's noise is two failures")
	}
}

func TestReportRefused(t *testing.T) {
	x := setup(t)
	l := x.line("1", 1)
	good := plant.Failure{PlaceID: &l.f.ID, Part: "lamp", Holder: 1, Mode: "dark", NoticedAt: domaintest.Noon}
	for name, c := range map[string]struct {
		spoil func(*plant.Failure)
		field string
	}{
		"no place":                {func(f *plant.Failure) { f.PlaceID = nil }, ""},
		"a make-up that is not":   {func(f *plant.Failure) { f.PlaceID, f.MakeUpID = nil, of(domain.NewID()) }, "/make_up_id"},
		"a part of another place": {func(f *plant.Failure) { f.PlaceID = &l.d.ID }, "/part"},
		"a mode that is none":     {func(f *plant.Failure) { f.Mode = "broken" }, "/mode"},
		"tomorrow":                {func(f *plant.Failure) { f.NoticedAt = domaintest.Noon.AddDate(0, 0, 1) }, "/noticed_at"},
		"good after bad":          {func(f *plant.Failure) { f.LastGoodAt = of(domaintest.Noon.Add(time.Minute)) }, "/last_good_at"},
		"a note that turns":       {func(f *plant.Failure) { f.Note = "a\u202eb" }, "/note"},
	} {
		f := good
		c.spoil(&f)
		x.refused(name, domain.Invalid, c.field, func(ctx context.Context, e *plant.Edit) error { sent := f; return e.Report(ctx, &sent) })
	}
	x.refused("a place that is not there", domain.NotFound, "", func(ctx context.Context, e *plant.Edit) error {
		f := good
		f.PlaceID = of(domain.NewID())
		return e.Report(ctx, &f)
	})
	// What a client has no say in is not taken from it.
	f := good
	f.ClearedAt, f.UnitID, f.Reports, f.RetiredAt = of(domaintest.Noon), of(domain.NewID()), 40, of(domaintest.Noon)
	x.must(func(ctx context.Context, e *plant.Edit) error { return e.Report(ctx, &f) })
	if f.ClearedAt != nil || f.UnitID != nil || f.Reports != 1 || f.RetiredAt != nil {
		t.Errorf("a report is stored as %+v", f)
	}
	x.refused("clearing before it was noticed", domain.Invalid, "/cleared_at", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.Clear(ctx, f.ID, 1, domaintest.Noon.Add(-time.Hour), "")
		return err
	})
	x.refused("a cause of two lines", domain.Invalid, "/cause", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.Clear(ctx, f.ID, 1, domaintest.Noon, "a\nb")
		return err
	})
	x.refused("clearing an old version", domain.Stale, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.Clear(ctx, f.ID, 7, domaintest.Noon, "")
		return err
	})
	x.must(func(ctx context.Context, e *plant.Edit) error {
		_, err := e.Clear(ctx, f.ID, 1, domaintest.Noon, "loose contact")
		return err
	})
	x.refused("clearing twice", domain.Conflict, "", func(ctx context.Context, e *plant.Edit) error {
		_, err := e.Clear(ctx, f.ID, 2, domaintest.Noon, "")
		return err
	})
}

// A test of an emergency luminaire keeps what was fitted then.
func TestEmergencyTest(t *testing.T) {
	x := setup(t)
	l := x.line("1", 1)
	test := func(e *plant.EmergencyTest) func(context.Context, *plant.Edit) error {
		return func(ctx context.Context, edit *plant.Edit) error { return edit.Test(ctx, e) }
	}
	x.must(func(ctx context.Context, e *plant.Edit) error {
		f := l.f
		f.EmergencyMode, f.Battery = "maintained", "4.8 V 2 Ah"
		return e.UpdateFixture(ctx, &f)
	})
	first := plant.EmergencyTest{PlaceID: l.f.ID, Test: "function", TestedAt: domaintest.Noon, Passed: true}
	first.RetiredAt = of(domaintest.Noon)
	x.must(test(&first))
	if first.LampModelID == nil || *first.LampModelID != x.m.Halogen35.ID || first.Battery != "4.8 V 2 Ah" || first.RetiredAt != nil {
		t.Errorf("the test keeps %+v", first)
	}
	x.fit(plant.Swap{PlaceID: l.f.ID, Part: "lamp", ModelID: &x.m.LED7.ID, DoneAt: domaintest.Noon})
	if got, err := plant.EmergencyTests.Get(t.Context(), x.scope(), first.ID); err != nil || *got.LampModelID != x.m.Halogen35.ID {
		t.Errorf("a swap changes what a test was made with: %+v, %v", got, err)
	}
	for name, c := range map[string]struct {
		e     plant.EmergencyTest
		kind  domain.Kind
		field string
	}{
		"no kind":             {plant.EmergencyTest{PlaceID: l.f.ID, TestedAt: domaintest.Noon}, domain.Invalid, "/test"},
		"no minutes":          {plant.EmergencyTest{PlaceID: l.f.ID, Test: "duration", TestedAt: domaintest.Noon}, domain.Invalid, "/minutes_achieved"},
		"tomorrow":            {plant.EmergencyTest{PlaceID: l.f.ID, Test: "function", TestedAt: domaintest.Noon.AddDate(0, 0, 1)}, domain.Invalid, "/tested_at"},
		"a place that is not": {plant.EmergencyTest{PlaceID: domain.NewID(), Test: "function", TestedAt: domaintest.Noon}, domain.NotFound, ""},
		"a driver":            {plant.EmergencyTest{PlaceID: l.d.ID, Test: "function", TestedAt: domaintest.Noon}, domain.Conflict, ""},
	} {
		x.refused("a test with "+name, c.kind, c.field, test(&c.e))
	}
	x.refused("a trip tomorrow", domain.Invalid, "/tripped_at", func(ctx context.Context, e *plant.Edit) error {
		return e.Tripped(ctx, &plant.Trip{CircuitID: l.k.ID, TrippedAt: domaintest.Noon.AddDate(0, 0, 1)})
	})
	x.refused("a trip of no circuit", domain.NotFound, "", func(ctx context.Context, e *plant.Edit) error {
		return e.Tripped(ctx, &plant.Trip{CircuitID: l.f.ID, TrippedAt: domaintest.Noon})
	})
	x.must(func(ctx context.Context, e *plant.Edit) error {
		return e.Tripped(ctx, &plant.Trip{CircuitID: l.k.ID, TrippedAt: domaintest.Noon})
	})
}

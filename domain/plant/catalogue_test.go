package plant_test

import (
	"testing"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// central runs f in a transaction of no building.
func (x bench) central(f func(domain.Scope) error) error {
	x.t.Helper()
	return domain.In(x.t.Context(), x.db, domain.ID{}, domaintest.Tester, domaintest.Noon, f)
}

func (x bench) mustCentral(f func(domain.Scope) error) {
	x.t.Helper()
	if err := x.central(f); err != nil {
		x.t.Fatal(err)
	}
}

func (x bench) lampModel(code string) (m plant.LampModel) {
	x.t.Helper()
	m = x.m.LED7
	m.CatalogueRow, m.Code, m.Provisional = domain.CatalogueRow{}, code, true
	x.mustCentral(func(s domain.Scope) error {
		return plant.CreateModel(x.t.Context(), s, plant.LampModels, &m, "lamp_model")
	})
	return m
}

func (x bench) merge(id, into domain.ID, version int64) error {
	x.t.Helper()
	return x.central(func(s domain.Scope) error {
		_, err := plant.MergeModel(x.t.Context(), s, plant.LampModels, id, into, version, "lamp_model")
		return err
	})
}

func (x bench) wants(what string, err error, kind domain.Kind, field string) {
	x.t.Helper()
	told := domain.FieldsOf(err)
	if domain.KindOf(err) != kind || field != "" && (len(told) != 1 || told[0].Pointer != field) {
		x.t.Errorf("%s gives %v", what, err)
	}
}

// A model lives by the rules of all records; whether it is merged is not for a client to say.
func TestModel(t *testing.T) {
	x := setup(t)
	ctx := t.Context()
	m := x.lampModel("NEW-1")
	create := func(m plant.LampModel) error {
		return x.central(func(s domain.Scope) error { return plant.CreateModel(ctx, s, plant.LampModels, &m, "lamp_model") })
	}
	update := func(m plant.LampModel) error {
		return x.central(func(s domain.Scope) error { return plant.UpdateModel(ctx, s, plant.LampModels, &m, "lamp_model") })
	}
	turn := func(version int64, restore bool) error {
		return x.central(func(s domain.Scope) error {
			_, err := plant.RetireModel(ctx, s, plant.LampModels, m.ID, version, restore, "lamp_model")
			return err
		})
	}
	read := func() plant.LampModel {
		t.Helper()
		got, err := plant.LampModels.Get(ctx, domain.On(x.db, domain.ID{}, domaintest.Tester, domaintest.Noon), m.ID)
		if err != nil {
			t.Fatal(err)
		}
		return got
	}
	twin := m
	twin.ID = domain.ID{}
	x.wants("a code twice", create(twin), domain.Conflict, "")
	born := m
	born.ID, born.Code, born.MergedInto = domain.ID{}, "NEW-2", &x.m.LED7.ID
	x.wants("a model made as merged", create(born), domain.Invalid, "/merged_into")
	said := read()
	said.MergedInto = &x.m.LED7.ID
	x.wants("a model changed to be merged", update(said), domain.Invalid, "/merged_into")
	said = read()
	said.PowerW, said.Provisional = of(8.0), false
	if err := update(said); err != nil {
		t.Fatal(err)
	}
	if got := read(); *got.PowerW != 8 || !got.Provisional || got.Version != 2 {
		t.Errorf("changed to %+v", got)
	}
	x.wants("an old version", update(said), domain.Stale, "")
	x.mustCentral(func(s domain.Scope) error {
		_, err := plant.ConfirmModel(ctx, s, plant.LampModels, m.ID, 2, "lamp_model")
		return err
	})
	if read().Provisional {
		t.Error("confirmed, and still provisional")
	}
	x.wants("confirming twice", x.central(func(s domain.Scope) error {
		_, err := plant.ConfirmModel(ctx, s, plant.LampModels, m.ID, 3, "lamp_model")
		return err
	}), domain.Conflict, "")
	x.wants("restoring what is in use", turn(3, true), domain.Conflict, "")
	if err := turn(3, false); err != nil {
		t.Fatal(err)
	}
	if err := create(twin); err != nil {
		t.Errorf("the code of a retired model cannot be used: %v", err)
	}
	x.wants("restoring over another", turn(4, true), domain.Conflict, "")
}

// A merged model is the other one everywhere: in the catalogue, its pairings and its prices; merges make no chains.
func TestMerge(t *testing.T) {
	x := setup(t)
	ctx := t.Context()
	a, b, c := x.lampModel("A"), x.lampModel("B"), x.lampModel("C")
	x.mustCentral(func(s domain.Scope) error {
		return plant.CreateModel(ctx, s, plant.Pairings, &plant.Pairing{LampModelID: &a.ID, DriverModelID: &x.m.Electronic105.ID, StatedBy: "Invented list"}, "pairing")
	})
	x.wants("merging into itself", x.merge(a.ID, a.ID, 1), domain.Conflict, "")
	x.wants("merging into nothing", x.merge(a.ID, domain.NewID(), 1), domain.Invalid, "/into")
	x.wants("an old version", x.merge(a.ID, b.ID, 9), domain.Stale, "")
	if err := x.merge(a.ID, b.ID, 1); err != nil {
		t.Fatal(err)
	}
	x.wants("merging twice", x.merge(a.ID, c.ID, 2), domain.Conflict, "")
	x.wants("merging into a merged one", x.merge(c.ID, a.ID, 1), domain.Conflict, "")
	x.wants("merging one that others are merged into", x.merge(b.ID, c.ID, 1), domain.Conflict, "")
	x.wants("restoring a merged one", x.central(func(s domain.Scope) error {
		_, err := plant.RetireModel(ctx, s, plant.LampModels, a.ID, 2, true, "lamp_model")
		return err
	}), domain.Conflict, "")

	cat, err := plant.LoadCatalogue(ctx, x.db)
	if err != nil {
		t.Fatal(err)
	}
	if got := cat.Lamps[a.ID]; got == nil || got.ID != b.ID {
		t.Errorf("the merged model is %+v", got)
	}
	for k := range cat.Pairings {
		if k.Lamp != b.ID {
			t.Errorf("a pairing is of %v, want the model it was merged into", k.Lamp)
		}
	}
	if ids, into := cat.Also(plant.KindLamp, a.ID); into != b.ID || len(ids) != 2 {
		t.Errorf("known as %v, now %v", ids, into)
	}
	if n := x.count(`SELECT count(*) FROM review_due WHERE $1::uuid IS NOT NULL AND model_id = $2`, a.ID); n == 0 {
		t.Error("a merge owes no review")
	}
}

// A price is in force from its day until the next; a retired one stands in nobody's way; merged models have one price.
func TestPrices(t *testing.T) {
	x := setup(t)
	ctx := t.Context()
	a, b := x.lampModel("A"), x.lampModel("B")
	price := func(model domain.ID, from domain.Date, amount domain.Decimal, currency string) (plant.Price, error) {
		p := plant.Price{ModelKind: plant.KindLamp, ModelID: model, FromDate: from, Amount: amount, Currency: currency}
		return p, x.central(func(s domain.Scope) error { return plant.CreateModel(ctx, s, plant.Prices, &p, "price") })
	}
	set := func(model domain.ID, from domain.Date, amount domain.Decimal, currency string) plant.Price {
		t.Helper()
		p, err := price(model, from, amount, currency)
		if err != nil {
			t.Fatal(err)
		}
		return p
	}
	on := func(model domain.ID, day domain.Date) string {
		t.Helper()
		all, err := plant.PricesOn(ctx, domain.On(x.db, domain.ID{}, domaintest.Tester, domaintest.Noon), day)
		if err != nil {
			t.Fatal(err)
		}
		p, ok := all[model]
		if !ok {
			return "none"
		}
		return string(p.Amount) + " " + p.Currency
	}
	seq := x.count(`SELECT seq FROM catalogue_head WHERE $1::uuid IS NOT NULL`)
	first := set(a.ID, "2026-01-01", "4.50", "EUR")
	set(a.ID, "2026-02-01", "5.00", "EUR")
	for day, want := range map[domain.Date]string{"2025-12-31": "none", "2026-01-31": "4.50 EUR", "2026-02-01": "5.00 EUR"} {
		if got := on(a.ID, day); got != want {
			t.Errorf("on %s: %s, want %s", day, got, want)
		}
	}
	_, err := price(a.ID, "2026-01-01", "4.60", "EUR")
	x.wants("a second price of one day", err, domain.Conflict, "")
	x.mustCentral(func(s domain.Scope) error {
		_, err := plant.RetireModel(ctx, s, plant.Prices, first.ID, 1, false, "price")
		return err
	})
	set(a.ID, "2026-01-01", "4.60", "EUR")
	x.wants("restoring over another", x.central(func(s domain.Scope) error {
		_, err := plant.RetireModel(ctx, s, plant.Prices, first.ID, 2, true, "price")
		return err
	}), domain.Conflict, "")
	set(a.ID, "2026-02-01", "4.00", "CHF")
	if got := on(a.ID, "2026-02-01"); got != "4.00 CHF" {
		t.Errorf("of two currencies from one day: %s, want the first by code", got)
	}
	if got := x.count(`SELECT seq FROM catalogue_head WHERE $1::uuid IS NOT NULL`); got != seq {
		t.Errorf("prices moved the catalogue %d times: they are no part of what is judged", got-seq)
	}
	_, err = price(domain.NewID(), "2026-01-01", "1", "EUR")
	x.wants("a price of nothing", err, domain.Invalid, "/model_id")
	_, err = price(x.m.Wound100.ID, "2026-01-01", "1", "EUR")
	x.wants("a price of another kind", err, domain.Invalid, "/model_id")
	_, err = price(a.ID, "2026-03-01", "-1", "EUR")
	x.wants("a price below nothing", err, domain.Invalid, "/amount")

	// B is found to be A: the price stated last is the price of both, and what was stated for A itself goes first.
	set(b.ID, "2026-02-01", "9.00", "CHF")
	set(b.ID, "2026-03-01", "6.00", "EUR")
	if err := x.merge(b.ID, a.ID, 1); err != nil {
		t.Fatal(err)
	}
	for _, model := range []domain.ID{a.ID, b.ID} {
		if feb, mar := on(model, "2026-02-28"), on(model, "2026-03-01"); feb != "4.00 CHF" || mar != "6.00 EUR" {
			t.Errorf("after a merge: %s and %s", feb, mar)
		}
	}
}

// A use of a space is told once, and asks for a review only where its hours move.
func TestSpaceUse(t *testing.T) {
	x := setup(t)
	ctx := t.Context()
	u := site.SpaceUse{Use: "corridor", YearlyHours: of(4000.0), Source: "Invented"}
	x.mustCentral(func(s domain.Scope) error { return plant.CreateModel(ctx, s, site.SpaceUses, &u, "space_use") })
	owed := func() int {
		return x.count(`SELECT count(*) FROM review_due WHERE $1::uuid IS NOT NULL AND model_id IS NULL`)
	}
	before := owed()
	u.RequiredLX = of(100.0)
	x.mustCentral(func(s domain.Scope) error { return plant.UpdateModel(ctx, s, site.SpaceUses, &u, "space_use") })
	if owed() != before {
		t.Error("light that is asked for changes no finding")
	}
	u.YearlyHours = of(4100.0)
	x.mustCentral(func(s domain.Scope) error { return plant.UpdateModel(ctx, s, site.SpaceUses, &u, "space_use") })
	if owed() != before+1 {
		t.Error("other hours owe no review")
	}
	twin := u
	twin.ID = domain.ID{}
	x.wants("a use twice", x.central(func(s domain.Scope) error { return plant.CreateModel(ctx, s, site.SpaceUses, &twin, "space_use") }), domain.Conflict, "")
}

package review_test

import (
	"context"
	"slices"
	"testing"

	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/plant"
	"lampward/domain/review"
	"lampward/domain/site"
)

// central acts in the catalogue.
func (x bench) central(f func(context.Context, domain.Scope) error) {
	x.t.Helper()
	ctx := context.Background()
	if err := domain.In(ctx, x.db, domain.ID{}, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error { return f(ctx, s) }); err != nil {
		x.t.Fatal(err)
	}
}

// inside acts in the building.
func (x bench) inside(f func(context.Context, domain.Scope) error) error {
	x.t.Helper()
	ctx := context.Background()
	return domain.In(ctx, x.db, x.b.ID, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error { return f(ctx, s) })
}

func (x bench) try(p *review.Proposal) review.WhatIf {
	x.t.Helper()
	w, err := x.r.Try(context.Background(), x.scope(), p)
	if err != nil {
		x.t.Fatal(err)
	}
	return w
}

func opened(w *review.WhatIf) []string {
	var ids []string
	for _, f := range w.Opened {
		ids = append(ids, f.Rule)
	}
	return ids
}

func (x bench) open() []review.Finding {
	x.t.Helper()
	list, _, err := review.List(context.Background(), x.scope(), review.Filter{}, domain.Page{Limit: 1000})
	if err != nil {
		x.t.Fatal(err)
	}
	return list
}

// A proposal is refused for what it brings, never for what stands: 7 W LED on an electronic transformer is refused, the
// same lamp again where it already hangs is not; nothing of a trial is stored.
func TestProposalIsRefusedForWhatItBrings(t *testing.T) {
	x := setup(t)
	_, _, lights, _ := x.transformer("1", x.m.Electronic105.ID, x.m.Halogen35.ID, 3)
	at := []domain.ID{lights[0].ID}
	before := len(x.open())
	w := x.try(&review.Proposal{PlaceIDs: at, LampModelID: &x.m.LED7.ID})
	if !w.Refused || !slices.Contains(opened(&w), "led_on_electronic_transformer") || w.Lamps != 1 || w.Places != 1 {
		t.Errorf("LED on an electronic transformer: %+v", w)
	}
	if *w.BeforeW != 35 || *w.AfterW != 7 {
		t.Errorf("%g W before, %g W after", *w.BeforeW, *w.AfterW)
	}
	if got := len(x.open()); got != before {
		t.Errorf("%d findings after a trial, %d before", got, before)
	}
	if w := x.try(&review.Proposal{PlaceIDs: at, LampModelID: &x.m.Halogen35.ID}); w.Refused || w.OpenedN != 0 || w.ClearedN != 0 {
		t.Errorf("like for like: %+v", w)
	}
	x.must(review.Touch{Places: at}, func(ctx context.Context, e *plant.Edit) error {
		_, err := e.Fit(ctx, plant.Swap{PlaceID: lights[0].ID, Part: plant.KindLamp, ModelID: &x.m.LED7.ID, DoneAt: domaintest.Noon})
		return err
	})
	if w := x.try(&review.Proposal{PlaceIDs: at, LampModelID: &x.m.LED7.ID}); w.Refused {
		t.Errorf("the same lamp again brings nothing: %+v", w)
	}
	if w := x.try(&review.Proposal{PlaceIDs: at, LampModelID: &x.m.LED7DC.ID}); !w.Refused {
		t.Errorf("another lamp with trouble of its own: %+v", w)
	}
	if w := x.try(&review.Proposal{PlaceIDs: at, LampModelID: &x.m.Halogen35.ID}); w.Refused || w.ClearedN == 0 {
		t.Errorf("back to halogen: %+v", w)
	}
}

// Gear without separation in the place of gear with it: what hangs on it was chosen for extra-low voltage.
func TestProposedGearLosesSeparation(t *testing.T) {
	x := setup(t)
	bare := plant.DriverModel{ModelHead: plant.ModelHead{Code: "NS60"}, Gear: x.m.Electronic105.Gear}
	bare.Name, bare.Separation = "105 W transformer without separation", "none"
	x.central(func(ctx context.Context, s domain.Scope) error {
		return plant.CreateModel(ctx, s, plant.DriverModels, &bare, "driver_model")
	})
	_, d, _, _ := x.transformer("1", x.m.Electronic105.ID, x.m.Halogen35.ID, 3)
	x.must(review.Touch{Places: []domain.ID{d.ID}}, func(ctx context.Context, e *plant.Edit) error {
		g, err := plant.Drivers.Get(ctx, e.Scope, d.ID)
		if err != nil {
			return err
		}
		g.TouchableLive = domaintest.Of(true)
		return e.UpdateDriver(ctx, &g)
	})
	w := x.try(&review.Proposal{PlaceIDs: []domain.ID{d.ID}, DriverModelID: &bare.ID})
	if !w.Refused || !slices.Contains(opened(&w), "isolation_lost") {
		t.Errorf("opens %v", opened(&w))
	}
	if w := x.try(&review.Proposal{PlaceIDs: []domain.ID{d.ID}, DriverModelID: &x.m.Wound100.ID}); slices.Contains(opened(&w), "isolation_lost") {
		t.Errorf("separated gear opens %v", opened(&w))
	}
}

// An override waives ahead: once fitted as proposed, the findings it was refused for open waived, and only those.
func TestOverrideWaivesWhatItWasRefusedFor(t *testing.T) {
	x := setup(t)
	_, _, lights, _ := x.transformer("1", x.m.Electronic105.ID, x.m.Halogen35.ID, 3)
	at := []domain.ID{lights[0].ID}
	w := x.try(&review.Proposal{PlaceIDs: at, LampModelID: &x.m.LED7.ID})
	err := x.inside(func(ctx context.Context, s domain.Scope) error {
		return review.Override(ctx, s, &w, "/override", "", "2026-03-01")
	})
	if got := domain.FieldsOf(err); len(got) != 2 {
		t.Errorf("an empty reason and a day past give %v", got)
	}
	if err := x.inside(func(ctx context.Context, s domain.Scope) error {
		return review.Override(ctx, s, &w, "/override", "one lamp, watched for a week", "2026-03-09")
	}); err != nil {
		t.Fatal(err)
	}
	if len(w.Waivers) == 0 {
		t.Fatal("nothing is waived")
	}
	x.must(review.Touch{Places: at}, func(ctx context.Context, e *plant.Edit) error {
		_, err := e.Fit(ctx, plant.Swap{PlaceID: lights[0].ID, Part: plant.KindLamp, ModelID: &x.m.LED7.ID, DoneAt: domaintest.Noon})
		return err
	})
	for _, f := range x.open() {
		if f.Blocks != (f.Waiver != nil && f.Waiver.InEffect) {
			t.Errorf("%s blocks %v, waiver %+v", f.Rule, f.Blocks, f.Waiver)
		}
	}
}

// What is on record of a luminaire decides; of another kind of place, or none, it says so.
func TestFitAtPlace(t *testing.T) {
	x := setup(t)
	_, d, lights, _ := x.transformer("1", x.m.Electronic105.ID, x.m.Halogen35.ID, 3)
	ask := func(place, lamp domain.ID) (review.FitAnswer, error) {
		return x.r.FitAtPlace(context.Background(), x.scope(), &review.FitRequest{BuildingID: &x.b.ID, PlaceID: &place, LampModelID: &lamp, Options: true})
	}
	x.settle(d.ID, lights)
	a, err := ask(lights[0].ID, x.m.LED7.ID)
	if err != nil || a.Answer != review.DoesNotFit || len(a.Findings) == 0 || !a.Findings[0].Blocks {
		t.Errorf("%+v, %v", a, err)
	}
	if !slices.ContainsFunc(a.Options, func(o review.Option) bool { return o.LampModelID == x.m.Halogen35.ID && o.DriverModelID == nil }) {
		t.Errorf("a refusal offers %+v", a.Options)
	}
	if a, err = ask(lights[0].ID, x.m.Halogen35.ID); err != nil || a.Answer == review.DoesNotFit || len(a.Options) != 0 {
		t.Errorf("like for like %+v, %v", a, err)
	}
	if _, err = ask(d.ID, x.m.LED7.ID); domain.KindOf(err) != domain.Conflict {
		t.Errorf("at the transformer: %v", err)
	}
	if _, err = ask(domain.NewID(), x.m.LED7.ID); domain.KindOf(err) != domain.NotFound {
		t.Errorf("nowhere: %v", err)
	}
}

// A refused answer off the ladder names what the catalogue has that would do.
func TestBareRefusalOffersOptions(t *testing.T) {
	x := setup(t)
	cat, err := plant.LoadCatalogue(context.Background(), x.db)
	if err != nil {
		t.Fatal(err)
	}
	q := &review.FitRequest{LampModelID: &x.m.LED7.ID, Lamps: 2, DriverModelID: &x.m.Electronic105.ID, DimmerNone: true, Options: true}
	a, err := review.FitCheck(cat, x.b.Supply, q)
	if err != nil || a.Answer != review.DoesNotFit {
		t.Fatalf("%+v, %v", a, err)
	}
	if !slices.ContainsFunc(a.Options, func(o review.Option) bool { return o.LampModelID == x.m.Halogen35.ID && o.DriverModelID == nil }) {
		t.Errorf("offers %+v", a.Options)
	}
	q.LampModelID = &x.m.Halogen35.ID
	if a, err = review.FitCheck(cat, x.b.Supply, q); err != nil || a.Answer != review.Fits || len(a.Options) != 0 {
		t.Errorf("two halogen lamps of 35 W on 35 to 105 W: %+v, %v", a, err)
	}
}

// Two lamps stay beside the one proposed, a dimmer acts by a signal: each kind of lamp is a luminaire on the one driver,
// and the signal is no feed.
func TestKeptPlaceIsAsDescribed(t *testing.T) {
	x := setup(t)
	line := plant.DimmerModel{ModelHead: plant.ModelHead{Code: "SIG1"}, Control: loading.Control{Name: "Signal line", Kind: loading.DALI, FactSource: loading.SeenOnNameplate}}
	x.central(func(ctx context.Context, s domain.Scope) error {
		return plant.CreateModel(ctx, s, plant.DimmerModels, &line, "dimmer_model")
	})
	q := &review.FitRequest{BuildingID: &x.b.ID, LampModelID: &x.m.Halogen35.ID, Lamps: 1, DriverModelID: &x.m.Electronic105.ID, DimmerModelID: &line.ID,
		Staying: []review.LampsOf{{LampModelID: &x.m.LED7.ID, Count: 2}}, Keep: &review.Keep{Tag: "K1"}}
	var kept review.KeptPlace
	if err := x.inside(func(ctx context.Context, s domain.Scope) (err error) {
		kept, _, err = x.r.Store(ctx, s, q, true)
		return err
	}); err != nil {
		t.Fatal(err)
	}
	if len(kept.FixtureIDs) != 2 || kept.Tag != "K1" || kept.DriverID == nil || kept.DimmerID == nil {
		t.Fatalf("kept %+v", kept)
	}
	ctx := context.Background()
	d, err := plant.Drivers.Get(ctx, x.scope(), *kept.DriverID)
	if err != nil || d.FedByPlaceID != nil {
		t.Errorf("the driver is fed by %v, %v", d.FedByPlaceID, err)
	}
	links, err := plant.Controls.Select(ctx, x.scope(), `WHERE building_id = $1 AND dimmer_id = $2`, x.b.ID, *kept.DimmerID)
	if err != nil || len(links) != 1 || links[0].Path != loading.Signal || *links[0].PlaceID != d.ID {
		t.Errorf("controls %+v, %v", links, err)
	}
	for i, want := range []struct {
		lamp  domain.ID
		count int
	}{{x.m.Halogen35.ID, 1}, {x.m.LED7.ID, 2}} {
		f, err := plant.Fixtures.Get(ctx, x.scope(), kept.FixtureIDs[i])
		if err != nil || *f.LampModelID != want.lamp || *f.LampCount != want.count || *f.FedByPlaceID != d.ID {
			t.Errorf("luminaire %d: %+v, %v", i, f, err)
		}
	}
}

// Options at three 35 W halogen lamps, each in its own luminaire, on a transformer for 35 to 105 W. By hand, with 2,000 h a
// year, 0.20 EUR/kWh, 2,000 h rated life and 2.00 EUR a lamp: 3 lamps × 20,000 h / 2,000 h × 2.00 = 60.00 EUR, energy
// 105 W × 20,000 h / 1000 × 0.20 = 420.00 EUR; 480.00 EUR together. A 20 W halogen lamp of 3.00 EUR and the same life:
// 90.00 + 240.00 = 330.00 EUR, so it comes first.
func TestOptionsAreRankedByCost(t *testing.T) {
	x := setup(t)
	ctx := context.Background()
	h20 := plant.LampModel{ModelHead: plant.ModelHead{Code: "H20-12"}, Lamp: x.m.Halogen35.Lamp}
	h20.Name, h20.PowerW, h20.RatedLifeH = "20 W halogen reflector", domaintest.Of(20.0), domaintest.Of(2000.0)
	x.central(func(ctx context.Context, s domain.Scope) error {
		if err := plant.CreateModel(ctx, s, plant.LampModels, &h20, "lamp_model"); err != nil {
			return err
		}
		m, err := plant.LampModels.Lock(ctx, s, x.m.Halogen35.ID)
		if err != nil {
			return err
		}
		m.RatedLifeH = domaintest.Of(2000.0)
		if err := plant.UpdateModel(ctx, s, plant.LampModels, &m, "lamp_model"); err != nil {
			return err
		}
		for id, amount := range map[domain.ID]domain.Decimal{h20.ID: "3.00", x.m.Halogen35.ID: "2.00"} {
			p := plant.Price{ModelKind: plant.KindLamp, ModelID: id, FromDate: "2026-01-01", Amount: amount, Currency: "EUR"}
			if err := plant.CreateModel(ctx, s, plant.Prices, &p, "price"); err != nil {
				return err
			}
		}
		return nil
	})
	_, d, lights, _ := x.transformer("1", x.m.Electronic105.ID, x.m.Halogen35.ID, 3)
	if err := x.inside(func(ctx context.Context, s domain.Scope) error {
		return site.CreateRate(ctx, s, &site.Rate{Rate: site.EnergyRate, FromDate: "2026-01-01", Amount: "0.20", Currency: "EUR"})
	}); err != nil {
		t.Fatal(err)
	}
	room := site.Space{Level: "0", Name: "Hall", YearlyHours: domaintest.Of(2000.0)}
	x.must(review.Touch{Places: []domain.ID{lights[0].ID}}, func(ctx context.Context, e *plant.Edit) error {
		if err := e.CreateSpace(ctx, &room); err != nil {
			return err
		}
		f, err := plant.Fixtures.Get(ctx, e.Scope, lights[0].ID)
		if err != nil {
			return err
		}
		f.SpaceID = &room.ID
		return e.UpdateFixture(ctx, &f)
	})
	x.settle(d.ID, lights)
	list, err := x.r.Options(ctx, x.scope(), lights[0].ID)
	if err != nil {
		t.Fatal(err)
	}
	costs := map[domain.ID]string{}
	for i, o := range list {
		if o.DriverModelID == nil && o.Cost != nil {
			costs[o.LampModelID] = string(o.Cost.Amount)
		}
		if o.LampModelID == x.m.LED7.ID && (o.DriverModelID == nil || *o.DriverModelID == x.m.Electronic60.ID) {
			t.Errorf("LED on an electronic transformer is called safe: %+v", o)
		}
		if o.Lamps != 3 {
			t.Errorf("%d lamps to fit: all that hang on the gear are three", o.Lamps)
		}
		if i > 0 && list[i-1].Cost == nil && o.Cost != nil {
			t.Error("one of unknown cost comes before one of known cost")
		}
	}
	if costs[h20.ID] != "330.00" || costs[x.m.Halogen35.ID] != "480.00" || list[0].LampModelID != h20.ID {
		t.Errorf("costs %v, first %+v", costs, list)
	}
}

// settle records what blocking rules wait for: the luminaires are in a dry place, and the output cable of their gear is 1 m of
// 2.5 mm² good for 20 A.
func (x bench) settle(gear domain.ID, lights []plant.Fixture) {
	x.t.Helper()
	x.must(review.Touch{Places: []domain.ID{gear}}, func(ctx context.Context, e *plant.Edit) error {
		d, err := plant.Drivers.Get(ctx, e.Scope, gear)
		if err != nil {
			return err
		}
		d.CableM, d.CableMM2, d.CableRatedA, d.TerminalRatedA = domaintest.Of(1.0), domaintest.Of(2.5), domaintest.Of(20.0), domaintest.Of(20.0)
		if err := e.UpdateDriver(ctx, &d); err != nil {
			return err
		}
		for i := range lights {
			f, err := plant.Fixtures.Get(ctx, e.Scope, lights[i].ID)
			if err != nil {
				return err
			}
			f.Zone = "dry"
			if err := e.UpdateFixture(ctx, &f); err != nil {
				return err
			}
		}
		return nil
	})
}

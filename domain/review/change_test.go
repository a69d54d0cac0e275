package review_test

import (
	"context"
	"strings"
	"testing"

	"github.com/jackc/pgx/v5/pgxpool"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/event"
	"lampward/domain/plant"
	"lampward/domain/review"
	"lampward/domain/site"
)

// bench is a building with a catalogue in a database of its own.
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

func (x bench) change(touch review.Touch, f func(context.Context, *plant.Edit) error) (review.Outcome, error) {
	x.t.Helper()
	var out review.Outcome
	ctx := context.Background()
	err := domain.In(ctx, x.db, x.b.ID, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error {
		var err error
		out, err = x.r.Change(ctx, s, touch, func(e *plant.Edit) error { return f(ctx, e) })
		return err
	})
	return out, err
}

func (x bench) must(touch review.Touch, f func(context.Context, *plant.Edit) error) review.Outcome {
	x.t.Helper()
	out, err := x.change(touch, f)
	if err != nil {
		x.t.Fatal(err)
	}
	return out
}

func (x bench) scope() domain.Scope {
	return domain.On(x.db, x.b.ID, domaintest.Tester, domaintest.Noon)
}

// transformer makes a circuit with one driver and n downlights with a lamp model.
func (x bench) transformer(way string, driver, lamp domain.ID, n int) (k plant.Circuit, d plant.Driver, lights []plant.Fixture, out review.Outcome) {
	x.t.Helper()
	out = x.must(review.Touch{}, func(ctx context.Context, e *plant.Edit) error {
		k = plant.Circuit{Board: "DB1", Way: way}
		k.Curve, k.RatingA, k.RCD, k.Neutral = "B", domaintest.Of(16.0), "none", "own"
		lights = nil
		if err := e.CreateCircuit(ctx, &k); err != nil {
			return err
		}
		d = plant.Driver{DriverModelID: &driver}
		d.Tag, d.FedByCircuitID = "G-"+way, &k.ID
		if err := e.CreateDriver(ctx, &d); err != nil {
			return err
		}
		for i := range n {
			f := plant.Fixture{FixtureModelID: &x.m.Downlight.ID, LampModelID: &lamp, LampCount: domaintest.Of(1)}
			f.Tag, f.FedByPlaceID = domaintest.Tag("L-"+way, i+1), &d.ID
			if err := e.CreateFixture(ctx, &f); err != nil {
				return err
			}
			lights = append(lights, f)
		}
		return nil
	})
	return k, d, lights, out
}

func rules(fs []review.Finding) string {
	var ids []string
	for _, f := range fs {
		ids = append(ids, f.Rule)
	}
	return strings.Join(ids, " ")
}

// Three 35 W halogen lamps on a 105 W transformer are 105 W: just not over. One swapped for 7 W LED is told at once;
// all three make 21 W, under the 35 W the transformer needs (methods: worked check 3 of the load check).
func TestSwapOpensAndClearsFindings(t *testing.T) {
	x := setup(t)
	_, d, lights, out := x.transformer("1", x.m.Electronic105.ID, x.m.Halogen35.ID, 3)
	for _, f := range out.Opened {
		if f.Severity != "low" {
			t.Errorf("three halogen lamps open %s: %s", f.Rule, f.Sentence)
		}
	}
	swap := func(i int, lamp domain.ID) review.Outcome {
		return x.must(review.Touch{Places: []domain.ID{lights[i].ID}}, func(ctx context.Context, e *plant.Edit) error {
			_, err := e.Fit(ctx, plant.Swap{PlaceID: lights[i].ID, Part: plant.KindLamp, ModelID: &lamp, DoneAt: domaintest.Noon, Why: "failed"})
			return err
		})
	}
	if got := rules(swap(0, x.m.LED7.ID).Opened); !strings.Contains(got, "led_on_electronic_transformer") || !strings.Contains(got, "led_and_halogen_mixed") {
		t.Errorf("one LED lamp among halogen opens %q", got)
	}
	swap(1, x.m.LED7.ID)
	last := swap(2, x.m.LED7.ID)
	if got := rules(last.Opened); !strings.Contains(got, "led_underloads_electronic_transformer") {
		t.Errorf("three LED lamps of 7 W on a transformer that needs 35 W open %q", got)
	}
	if got := rules(last.Cleared); !strings.Contains(got, "led_and_halogen_mixed") {
		t.Errorf("the last halogen lamp gone clears %q", got)
	}
	var sentence string
	for _, f := range last.Opened {
		if f.Rule == "led_underloads_electronic_transformer" {
			sentence = f.Sentence
			if len(f.Steps) == 0 {
				t.Error("no arithmetic with the finding")
			}
		}
	}
	if !strings.Contains(sentence, "21 W") || !strings.Contains(sentence, "35 W") {
		t.Errorf("sentence %q lacks the load of 21 W or the least load of 35 W", sentence)
	}
	// The lamps put back end every finding of the swap.
	for i := range lights {
		swap(i, x.m.Halogen35.ID)
	}
	open, err := review.Findings.Select(context.Background(), x.scope(), `WHERE building_id = $1 AND cleared_at IS NULL`, x.b.ID)
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range open {
		if f.Severity != "low" && f.Rule != "repeat_failure" {
			t.Errorf("still open: %s on %s", f.Rule, f.SubjectKind)
		}
	}
	stays, err := plant.Units.Select(context.Background(), x.scope(), `WHERE building_id = $1 AND place_id = $2 ORDER BY fitted_at NULLS FIRST, removed_at`, x.b.ID, lights[0].ID)
	if err != nil || len(stays) != 3 {
		t.Fatalf("%d stays (%v), want the first halogen lamp, the LED lamp and the second halogen lamp", len(stays), err)
	}
	_ = d
	v, err := event.Verify(context.Background(), x.scope())
	if err != nil || v.Broken != 0 || v.Entries == 0 {
		t.Errorf("audit: %+v, %v", v, err)
	}
}

func TestFeedsInACircleAreRefused(t *testing.T) {
	x := setup(t)
	_, d, _, _ := x.transformer("1", x.m.Electronic105.ID, x.m.Halogen35.ID, 1)
	var second plant.Driver
	x.must(review.Touch{}, func(ctx context.Context, e *plant.Edit) error {
		second = plant.Driver{}
		second.Tag, second.FedByPlaceID = "G-2", &d.ID
		return e.CreateDriver(ctx, &second)
	})
	_, err := x.change(review.Touch{}, func(ctx context.Context, e *plant.Edit) error {
		again, err := plant.Drivers.Get(ctx, e.Scope, d.ID)
		if err != nil {
			return err
		}
		again.FedByCircuitID, again.FedByPlaceID = nil, &second.ID
		return e.UpdateDriver(ctx, &again)
	})
	if domain.KindOf(err) != domain.Invalid || !strings.Contains(err.Error(), "circle") {
		t.Errorf("a circle of feeds gives %v", err)
	}
	kept, err := plant.Drivers.Get(context.Background(), x.scope(), d.ID)
	if err != nil || kept.FedByCircuitID == nil {
		t.Errorf("the refused change left %+v, %v", kept.FedByPlaceID, err)
	}
}

func TestAnotherBuildingsPlaceFeedsNothing(t *testing.T) {
	x := setup(t)
	_, d, _, _ := x.transformer("1", x.m.Electronic105.ID, x.m.Halogen35.ID, 1)
	other := x
	other.b = domaintest.Building(t, x.db, "OTHER")
	_, err := other.change(review.Touch{}, func(ctx context.Context, e *plant.Edit) error {
		f := plant.Fixture{}
		f.Tag, f.FedByPlaceID = "L-X", &d.ID
		return e.CreateFixture(ctx, &f)
	})
	if domain.KindOf(err) != domain.Invalid || !strings.Contains(err.Error(), "/fed_by_place_id") {
		t.Errorf("a feed from another building gives %v", err)
	}
	_, err = other.change(review.Touch{Places: []domain.ID{d.ID}}, func(ctx context.Context, e *plant.Edit) error {
		_, err := e.RetireDriver(ctx, d.ID, 1)
		return err
	})
	if domain.KindOf(err) != domain.NotFound {
		t.Errorf("retiring another building's driver gives %v", err)
	}
}

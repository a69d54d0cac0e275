package review_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/plant"
	"lampward/domain/review"
)

// Rule 4 of the records: findings equal a full review of the building at every commit, under any number of writers.
// Eight writers make random edits, the catalogue changes under them, and a full review runs all the while; at the end
// what is stored must be what a fresh look at the records finds, and every record must know the tree it is in.
func TestFindingsEqualAFreshReviewAfterRandomEdits(t *testing.T) {
	x := setup(t)
	const writers, each = 8, 250
	for i := range 24 {
		lamp := []domain.ID{x.m.Halogen35.ID, x.m.LED7.ID, x.m.LED7DC.ID}[i%3]
		driver := []domain.ID{x.m.Electronic105.ID, x.m.Electronic60.ID, x.m.Wound100.ID}[i/8]
		x.transformer(fmt.Sprint(i), driver, lamp, 3)
	}
	ctx, stop := context.WithCancel(context.Background())
	defer stop()
	now := func() time.Time { return domaintest.Noon }
	var reviews atomic.Int64
	var looping sync.WaitGroup
	looping.Go(func() {
		for ctx.Err() == nil {
			if _, err := x.r.Full(context.Background(), x.db, x.b.ID, now, nil); err != nil && domain.KindOf(err) != domain.Conflict {
				t.Errorf("full review: %v", err)
				return
			}
			if _, err := x.r.DrainOne(context.Background(), x.db, now); err != nil && domain.KindOf(err) != domain.Conflict {
				t.Errorf("drain: %v", err)
				return
			}
			reviews.Add(1)
		}
	})
	var done, refused atomic.Int64
	var writing sync.WaitGroup
	for w := range writers {
		writing.Go(func() {
			rnd := rand.New(rand.NewPCG(uint64(w), 7))
			for i := range each {
				err := x.randomEdit(rnd, w, i)
				switch domain.KindOf(err) {
				case domain.Internal:
					if err != nil {
						t.Errorf("writer %d, edit %d: %v", w, i, err)
						return
					}
					done.Add(1)
				default:
					refused.Add(1)
				}
			}
		})
	}
	writing.Wait()
	stop()
	looping.Wait()
	t.Logf("%d edits made, %d refused, %d reviews beside them", done.Load(), refused.Load(), reviews.Load())
	if done.Load() < writers*each/3 {
		t.Fatalf("only %d of %d edits were made", done.Load(), writers*each)
	}
	for {
		more, err := x.r.DrainOne(context.Background(), x.db, now)
		if err != nil {
			t.Fatal(err)
		}
		if !more {
			break
		}
	}
	x.compareWithFresh()
	again, err := x.r.Full(context.Background(), x.db, x.b.ID, now, nil)
	if err != nil || again.Opened+again.Changed+again.Cleared != 0 {
		t.Errorf("a full review at the end opens %d, changes %d, clears %d (%v), want none", again.Opened, again.Changed, again.Cleared, err)
	}
}

// compareWithFresh loads everything, judges it anew and compares with what is stored.
func (x bench) compareWithFresh() {
	x.t.Helper()
	ctx := context.Background()
	s := x.scope()
	var trees []domain.ID
	rows, err := x.db.Query(ctx, `SELECT DISTINCT tree_id FROM place WHERE building_id = $1 UNION SELECT tree_id FROM circuit WHERE building_id = $1`, x.b.ID)
	if err != nil {
		x.t.Fatal(err)
	}
	for rows.Next() {
		var id domain.ID
		if err := rows.Scan(&id); err != nil {
			x.t.Fatal(err)
		}
		trees = append(trees, id)
	}
	recs, err := plant.Load(ctx, s, trees)
	if err != nil {
		x.t.Fatal(err)
	}
	cat, err := plant.LoadCatalogue(ctx, x.db)
	if err != nil {
		x.t.Fatal(err)
	}
	built, err := review.Trees(cat, recs, domaintest.Noon)
	if err != nil {
		x.t.Fatal(err)
	}
	for _, tree := range built {
		for _, m := range tree.Members {
			if m.Stored != tree.ID {
				x.t.Errorf("record %s says tree %s, is in %s", m.ID, m.Stored, tree.ID)
			}
		}
	}
	rep, err := review.Compute(cat, recs, domaintest.Noon)
	if err != nil {
		x.t.Fatal(err)
	}
	want := map[string]bool{}
	for _, f := range rep.Findings {
		want[fmt.Sprint(f.Rule, f.ID, f.Lamp, f.Gear, f.Control, f.Severity, f.Sentence)] = true
	}
	open, err := review.Findings.Select(ctx, s, `WHERE building_id = $1 AND cleared_at IS NULL`, x.b.ID)
	if err != nil {
		x.t.Fatal(err)
	}
	have := map[string]bool{}
	for _, f := range open {
		k := fmt.Sprint(f.Rule, f.SubjectID, key(f.LampModelID), key(f.DriverModelID), key(f.DimmerModelID), f.Severity, f.Sentence)
		if have[k] {
			x.t.Errorf("stored twice: %s", f.Sentence)
		}
		have[k] = true
		if !want[k] {
			x.t.Errorf("stored, not found afresh: %s on %s: %s", f.Rule, f.SubjectID, f.Sentence)
		}
	}
	for k := range want {
		if !have[k] {
			x.t.Errorf("found afresh, not stored: %s", k)
		}
	}
	if len(want) == 0 {
		x.t.Error("the edits left nothing to find: the test shows nothing")
	}
}

func key(id *domain.ID) [16]byte {
	if id == nil {
		return [16]byte{}
	}
	return *id
}

// pick returns one of the ids a query of the building gives, in a stable order.
func (x bench) pick(ctx context.Context, s domain.Scope, rnd *rand.Rand, sql string) (domain.ID, bool, error) {
	rows, err := s.Query(ctx, sql, x.b.ID)
	if err != nil {
		return domain.ID{}, false, err
	}
	var ids []domain.ID
	for rows.Next() {
		var id domain.ID
		if err := rows.Scan(&id); err != nil {
			return domain.ID{}, false, err
		}
		ids = append(ids, id)
	}
	if len(ids) == 0 {
		return domain.ID{}, false, rows.Err()
	}
	return ids[rnd.IntN(len(ids))], true, rows.Err()
}

const (
	anyFixture = `SELECT id FROM place WHERE building_id = $1 AND kind = 'fixture' AND retired_at IS NULL ORDER BY id`
	anyDriver  = `SELECT id FROM place WHERE building_id = $1 AND kind = 'driver' AND retired_at IS NULL ORDER BY id`
	anyDimmer  = `SELECT id FROM place WHERE building_id = $1 AND kind = 'dimmer' AND retired_at IS NULL ORDER BY id`
	anyCircuit = `SELECT id FROM circuit WHERE building_id = $1 AND retired_at IS NULL ORDER BY id`
	anyControl = `SELECT id FROM control WHERE building_id = $1 AND retired_at IS NULL ORDER BY id`
)

// randomEdit makes one edit; the error's kind tells whether it was refused.
func (x bench) randomEdit(rnd *rand.Rand, w, i int) error {
	ctx := context.Background()
	act := rnd.IntN(14)
	if act == 13 {
		return x.changeModel(ctx, rnd)
	}
	return domain.In(ctx, x.db, x.b.ID, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error {
		fixture, _, err := x.pick(ctx, s, rnd, anyFixture)
		if err != nil {
			return err
		}
		driver, _, err := x.pick(ctx, s, rnd, anyDriver)
		if err != nil {
			return err
		}
		circuit, _, err := x.pick(ctx, s, rnd, anyCircuit)
		if err != nil {
			return err
		}
		dimmer, haveDimmer, err := x.pick(ctx, s, rnd, anyDimmer)
		if err != nil {
			return err
		}
		lamp := []domain.ID{x.m.Halogen35.ID, x.m.LED7.ID, x.m.LED7DC.ID}[rnd.IntN(3)]
		gear := []domain.ID{x.m.Electronic105.ID, x.m.Electronic60.ID, x.m.Wound100.ID}[rnd.IntN(3)]
		tag := fmt.Sprintf("W%d-%d", w, i)
		_, err = x.r.Change(ctx, s, review.Touch{Places: []domain.ID{fixture}}, func(e *plant.Edit) error {
			switch act {
			case 0, 1, 2:
				_, err := e.Fit(ctx, plant.Swap{PlaceID: fixture, Part: plant.KindLamp, ModelID: &lamp, DoneAt: domaintest.Noon, Why: "failed"})
				return err
			case 3:
				_, err := e.Fit(ctx, plant.Swap{PlaceID: driver, Part: plant.KindDriver, ModelID: &gear, DoneAt: domaintest.Noon})
				return err
			case 4:
				f := plant.Fixture{FixtureModelID: &x.m.Downlight.ID, LampModelID: &lamp, LampCount: domaintest.Of(1 + rnd.IntN(3))}
				f.Tag, f.FedByPlaceID = tag, &driver
				return e.CreateFixture(ctx, &f)
			case 5:
				d := plant.Driver{DriverModelID: &gear}
				d.Tag, d.FedByCircuitID = tag, &circuit
				return e.CreateDriver(ctx, &d)
			case 6:
				d, err := plant.Drivers.Get(ctx, e.Scope, driver)
				if err != nil {
					return err
				}
				d.FedByCircuitID, d.FedByPlaceID = &circuit, nil
				return e.UpdateDriver(ctx, &d)
			case 7:
				f, err := plant.Fixtures.Get(ctx, e.Scope, fixture)
				if err != nil {
					return err
				}
				f.FedByCircuitID, f.FedByPlaceID = nil, &driver
				return e.UpdateFixture(ctx, &f)
			case 8:
				k, err := plant.Circuits.Get(ctx, e.Scope, circuit)
				if err != nil {
					return err
				}
				k.RCD = []string{"none", "none", fmt.Sprintf("RCD%d", rnd.IntN(8))}[rnd.IntN(3)]
				k.RCDMA = domaintest.Of(30.0)
				return e.UpdateCircuit(ctx, &k)
			case 9:
				d := plant.Dimmer{DimmerModelID: []*domain.ID{&x.m.LeadingEdge.ID, &x.m.TrailingEdge.ID}[rnd.IntN(2)]}
				d.Tag, d.FedByCircuitID = tag, &circuit
				if err := e.CreateDimmer(ctx, &d); err != nil {
					return err
				}
				return e.CreateControl(ctx, &plant.ControlLink{DimmerID: d.ID, CircuitID: &circuit, Path: "power_path"})
			case 10:
				if !haveDimmer {
					return nil
				}
				path := "power_path"
				if rnd.IntN(4) == 0 {
					path = "signal" // joins circuits
				}
				return e.CreateControl(ctx, &plant.ControlLink{DimmerID: dimmer, PlaceID: &driver, Path: path})
			case 11:
				id, ok, err := x.pick(ctx, e.Scope, rnd, anyControl)
				if err != nil || !ok {
					return err
				}
				l, err := plant.Controls.Get(ctx, e.Scope, id)
				if err != nil {
					return err
				}
				_, err = e.RetireControl(ctx, id, l.Version)
				return err
			default:
				return e.Report(ctx, &plant.Failure{PlaceID: &fixture, Part: plant.KindLamp, Holder: 1, Mode: "dark", NoticedAt: domaintest.Noon.AddDate(0, -rnd.IntN(9), 0)})
			}
		})
		return err
	})
}

// changeModel changes a rating in the catalogue.
func (x bench) changeModel(ctx context.Context, rnd *rand.Rand) error {
	id := []domain.ID{x.m.Electronic105.ID, x.m.Electronic60.ID}[rnd.IntN(2)]
	return domain.In(ctx, x.db, domain.ID{}, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error {
		m, err := plant.DriverModels.Lock(ctx, s, id)
		if err != nil {
			return err
		}
		m.MinLoadW = domaintest.Of(float64(5 * rnd.IntN(10)))
		return plant.UpdateModel(ctx, s, plant.DriverModels, &m, "driver_model")
	})
}

package job

import (
	"context"
	"log/slog"
	"sync/atomic"
	"testing"
	"time"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/event"
	"lampward/domain/plant"
	"lampward/domain/review"
)

func TestMain(m *testing.M) { domaintest.Main(m) }

// TestWorkIsDone: a review that is owed is done and counted, totals are kept, answers that are too old are forgotten; a
// second program beside the first does no harm; both stop softly.
func TestWorkIsDone(t *testing.T) {
	t.Parallel()
	ctx, db := context.Background(), domaintest.DB(t)
	m := domaintest.Catalogue(t, db)
	b := domaintest.Building(t, db, "JOBS")
	r := review.New()
	err := domain.In(ctx, db, b.ID, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error {
		_, err := r.Change(ctx, s, review.Touch{}, func(e *plant.Edit) error {
			g := plant.Driver{DriverModelID: &m.Electronic105.ID}
			if err := e.CreateDriver(ctx, &g); err != nil {
				return err
			}
			return e.CreateFixture(ctx, &plant.Fixture{PlaceHead: plant.PlaceHead{FedByPlaceID: &g.ID}, FixtureModelID: &m.Downlight.ID, LampModelID: &m.LED7.ID, LampCount: domaintest.Of(1)})
		})
		if err != nil {
			return err
		}
		if _, err := s.Exec(ctx, `UPDATE finding SET cleared_at = updated_at WHERE building_id = $1`, s.Building); err != nil { // as if no review had found them
			return err
		}
		return event.ReviewDue(ctx, s, event.Due{Building: &s.Building, Why: "a test"})
	})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := db.Exec(ctx, `INSERT INTO idempotency (principal, route, key, body_hash, status, headers, body, created_at) VALUES ('a', 'b', 'c', '', 200, '{}', '', $1)`,
		domaintest.Noon.Add(-25*time.Hour)); err != nil {
		t.Fatal(err)
	}
	if err := Migrate(ctx, db); err != nil {
		t.Fatal(err)
	}
	if err := Migrate(ctx, db); err != nil {
		t.Fatalf("a second time: %v", err)
	}
	var reviewed atomic.Int64
	o := Options{Pool: db, Reviewer: r, Clock: func() time.Time { return domaintest.Noon }, Log: slog.New(slog.DiscardHandler),
		Reviewed: func(time.Duration) { reviewed.Add(1) }, Every: time.Second}
	one, err := Start(ctx, o)
	if err != nil {
		t.Fatal(err)
	}
	two, err := Start(ctx, o)
	if err != nil {
		t.Fatal(err)
	}
	done := func() bool {
		due, _, err := review.Pending(ctx, db, domaintest.Noon)
		if err != nil {
			t.Fatal(err)
		}
		buildings, byRule, err := review.Totals(ctx, db)
		if err != nil {
			t.Fatal(err)
		}
		var answers int
		if err := db.QueryRow(ctx, `SELECT count(*) FROM idempotency`).Scan(&answers); err != nil {
			t.Fatal(err)
		}
		return due == 0 && len(byRule) > 0 && len(buildings) == 1 && answers == 0 && reviewed.Load() > 0
	}
	deadline := time.NewTimer(60 * time.Second)
	defer deadline.Stop()
	look := time.NewTicker(200 * time.Millisecond)
	defer look.Stop()
	for !done() {
		select {
		case <-deadline.C:
			t.Fatal("the work was not done within a minute")
		case <-look.C:
		}
	}
	soft, cancel := context.WithTimeout(ctx, 20*time.Second)
	defer cancel()
	if err := one.Stop(soft); err != nil {
		t.Error(err)
	}
	if err := two.Stop(soft); err != nil {
		t.Error(err)
	}
}

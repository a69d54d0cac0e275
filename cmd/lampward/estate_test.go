package main

import (
	"context"
	"errors"
	"reflect"
	"testing"
	"time"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/event"
	"lampward/domain/review"
	"lampward/domain/site"
)

// TestEstateTellsEveryStory loads the small estate: nearly every rule must find something in it (two are for proposals
// alone or need what no invented story has), every severity must appear, and a second load must change nothing.
func TestEstateTellsEveryStory(t *testing.T) {
	t.Parallel()
	ctx, db := context.Background(), domaintest.DB(t)
	r := review.New()
	at := time.Date(2026, 3, 2, 12, 0, 0, 0, time.UTC)
	sum, err := loadEstate(ctx, db, r, estateOptions{At: at})
	if err != nil {
		t.Fatal(err)
	}
	if sum.Buildings != len(invented) || sum.Made != len(invented) || sum.Fixtures < 200 {
		t.Errorf("drawn: %+v", sum)
	}
	counts, err := review.CountByRule(ctx, db)
	if err != nil {
		t.Fatal(err)
	}
	missing := 0
	for _, rule := range review.Rules() {
		if counts[rule.ID] == 0 {
			missing++
			t.Logf("nothing is found by %s: %s", rule.ID, rule.Trigger)
		}
	}
	if missing > 2 {
		t.Errorf("%d of %d rules find nothing", missing, len(review.Rules()))
	}
	var severities int
	if err := db.QueryRow(ctx, `SELECT count(DISTINCT severity) FROM finding WHERE cleared_at IS NULL`).Scan(&severities); err != nil || severities != 4 {
		t.Errorf("%d severities, %v", severities, err)
	}
	count := func() (n int) {
		if err := db.QueryRow(ctx, `SELECT (SELECT count(*) FROM audit) + (SELECT count(*) FROM audit_central)`).Scan(&n); err != nil {
			t.Fatal(err)
		}
		return n
	}
	before := count()
	again, err := loadEstate(ctx, db, r, estateOptions{At: at.Add(time.Hour)})
	if err != nil || again.Made != 0 || again.Fixtures != sum.Fixtures || count() != before {
		t.Errorf("the second load: %+v, %d entries of audit after %d, %v", again, count(), before, err)
	}
}

// TestEstateIsDrawnAlike: what is drawn depends on the size alone, and a larger estate begins with the same buildings.
func TestEstateIsDrawnAlike(t *testing.T) {
	t.Parallel()
	for i := range invented {
		if a, b := drawBuilding(i, estateOptions{}), drawBuilding(i, estateOptions{}); !reflect.DeepEqual(a.bulk, b.bulk) {
			t.Errorf("building %d of the small estate is drawn in two ways", i)
		}
	}
	a, b := drawBuilding(1, estateOptions{Fixtures: 4000}), drawBuilding(1, estateOptions{Fixtures: 1_000_000})
	if !reflect.DeepEqual(a.bulk, b.bulk) {
		t.Error("the second building of a large estate depends on how many there are")
	}
	if len(a.bulk.Fixtures) < perBuilding {
		t.Errorf("%d luminaires in a building of %d", len(a.bulk.Fixtures), perBuilding)
	}
}

// TestLargeEstateIsMostlySound: of the drivers of a large estate, one in twenty or so has a finding of its own: a share
// of 3 to 8 in a hundred.
func TestLargeEstateIsMostlySound(t *testing.T) {
	t.Parallel()
	ctx, db := context.Background(), domaintest.DB(t)
	sum, err := loadEstate(ctx, db, review.New(), estateOptions{Fixtures: 2 * perBuilding, At: domaintest.Noon})
	if err != nil {
		t.Fatal(err)
	}
	var found int
	err = db.QueryRow(ctx, `
		SELECT count(DISTINCT (f.building_id, f.subject_id))
		  FROM finding f
		  JOIN place p ON p.building_id = f.building_id AND p.id = f.subject_id
		 WHERE p.kind = 'driver' AND f.cleared_at IS NULL`).Scan(&found)
	if share := float64(found) / float64(sum.Drivers); err != nil || sum.Buildings != 2 || share < 0.03 || share > 0.08 {
		t.Errorf("%d of %d drivers have a finding, a share of %.3f; %v", found, sum.Drivers, share, err)
	}
}

// TestBuildingIsDrawnWholeOrNotAtAll: where the telling of what happened fails, nothing of the building is left, and the
// next run draws it with all that happened, in one unbroken chain of audit.
func TestBuildingIsDrawnWholeOrNotAtAll(t *testing.T) {
	t.Parallel()
	ctx, db := context.Background(), domaintest.DB(t)
	r := review.New()
	if err := storeCatalogue(ctx, db, domaintest.Noon); err != nil {
		t.Fatal(err)
	}
	cut := errors.New("cut off")
	k := drawBuilding(0, estateOptions{})
	k.tell(func(*telling) error { return cut })
	if _, err := k.store(ctx, db, r, 0, domaintest.Noon); !errors.Is(err, cut) {
		t.Fatalf("told: %v", err)
	}
	id := idOf("building", k.code)
	if there, err := site.Exists(ctx, db, id); there || err != nil {
		t.Fatalf("half a building is there: %t, %v", there, err)
	}
	whole := drawBuilding(0, estateOptions{})
	sum, err := whole.store(ctx, db, r, 0, domaintest.Noon)
	if err != nil || sum.Made != 1 {
		t.Fatalf("the next run: %+v, %v", sum, err)
	}
	v, err := event.Verify(ctx, domain.On(db, id, ours, domaintest.Noon))
	if err != nil || v.Broken != 0 || v.Entries <= int64(len(whole.events)) {
		t.Errorf("the chain: %+v, %v; %d things happened", v, err, len(whole.events))
	}
}

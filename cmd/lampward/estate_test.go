package main

import (
	"context"
	"testing"
	"time"

	"lampward/domain/domaintest"
	"lampward/domain/review"
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

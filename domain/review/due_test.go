package review_test

import (
	"context"
	"testing"
	"time"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/event"
	"lampward/domain/plant"
	"lampward/domain/review"
)

// TestFailingReviewKeepsNoneWaiting: of two buildings whose reviews are owed and whose trees' time has come, the first
// cannot be read. Its review fails and stays owed; the other's is done by the next one, and its tree is judged in spite of
// the failure.
func TestFailingReviewKeepsNoneWaiting(t *testing.T) {
	t.Parallel()
	ctx, db := context.Background(), domaintest.DB(t)
	m := domaintest.Catalogue(t, db)
	r := review.New()
	later := func() time.Time { return domaintest.Noon.Add(time.Minute) }
	for more := true; more; { // what the catalogue asked for
		var err error
		if more, err = r.DrainOne(ctx, db, later); err != nil {
			t.Fatal(err)
		}
	}
	var ids [2]domain.ID
	for i, code := range []string{"BROKEN", "SOUND"} {
		ids[i] = domaintest.Building(t, db, code).ID
		bulk := luminaires(&m, 20)
		err := domain.In(ctx, db, ids[i], domaintest.Tester, domaintest.Noon.Add(time.Duration(i)*time.Second), func(s domain.Scope) error {
			_, err := r.Change(ctx, s, review.Touch{}, func(e *plant.Edit) error {
				_, err := e.Upsert(ctx, &bulk)
				return err
			})
			if err != nil {
				return err
			}
			if _, err := s.Exec(ctx, `UPDATE tree SET recheck_at = $2 WHERE building_id = $1`, s.Building, s.At); err != nil {
				return err
			}
			return event.ReviewDue(ctx, s, event.Due{Building: &s.Building, Why: "a test"})
		})
		if err != nil {
			t.Fatal(err)
		}
	}
	// A curve of breaking current is a list of points: a text in its place cannot be read.
	if _, err := db.Exec(ctx, `UPDATE circuit SET pulse_curve = '"not a curve"' WHERE building_id = $1`, ids[0]); err != nil {
		t.Fatal(err)
	}
	owed := func() (of []domain.ID) {
		rows, err := db.Query(ctx, `SELECT building_id FROM review_due ORDER BY created_at, id`)
		if err != nil {
			t.Fatal(err)
		}
		defer rows.Close()
		for rows.Next() {
			var id domain.ID
			if err := rows.Scan(&id); err != nil {
				t.Fatal(err)
			}
			of = append(of, id)
		}
		if err := rows.Err(); err != nil {
			t.Fatal(err)
		}
		return of
	}

	if got := owed(); len(got) != 2 || got[0] != ids[0] || got[1] != ids[1] {
		t.Fatalf("owed: %v; want one a building: %v", got, ids)
	}
	n, err := r.RecheckDue(ctx, db, later, 1000)
	if err == nil || n < 2 {
		t.Errorf("%d trees were judged, %v", n, err)
	}
	for i, want := range []bool{true, false} {
		var due bool
		if err := db.QueryRow(ctx, `SELECT EXISTS (SELECT FROM tree WHERE building_id = $1 AND recheck_at <= $2)`, ids[i], later()).Scan(&due); err != nil || due != want {
			t.Errorf("building %d: a tree's time has come: %t, %v", i, due, err)
		}
	}

	if did, err := r.DrainOne(ctx, db, later); !did || err == nil {
		t.Fatalf("the broken building: %t, %v", did, err)
	}
	if got := owed(); len(got) != 2 || got[0] != ids[1] || got[1] != ids[0] {
		t.Fatalf("owed after the failure: %v; want the sound building first, then the broken one: %v", got, ids)
	}
	if did, err := r.DrainOne(ctx, db, later); !did || err != nil {
		t.Fatalf("the sound building: %t, %v", did, err)
	}
	if got := owed(); len(got) != 1 || got[0] != ids[0] {
		t.Errorf("owed in the end: %v", got)
	}
	if _, err := db.Exec(ctx, `UPDATE circuit SET pulse_curve = NULL WHERE building_id = $1`, ids[0]); err != nil {
		t.Fatal(err)
	}
	if did, err := r.DrainOne(ctx, db, later); !did || err != nil || len(owed()) != 0 {
		t.Errorf("the building that was mended: %t, %v", did, err)
	}
}

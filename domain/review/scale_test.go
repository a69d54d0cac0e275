package review_test

import (
	"bytes"
	"context"
	"flag"
	"fmt"
	"io"
	"testing"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/plant"
	"lampward/domain/review"
)

// estate stores n luminaires in buildings of 2,000: four to a transformer, five transformers to a circuit, and one
// transformer in twenty with LED lamps that it cannot bear.
func estate(b *testing.B, db *pgxpool.Pool, r *review.Reviewer, n int) (buildings []domain.ID, m domaintest.Models) {
	b.Helper()
	ctx := context.Background()
	m = domaintest.Catalogue(b, db)
	const each = 2000
	for at := 0; at < n; at += each {
		home := domaintest.Building(b, db, fmt.Sprintf("B%d", at/each))
		buildings = append(buildings, home.ID)
		bulk := luminaires(&m, each)
		err := domain.In(ctx, db, home.ID, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error {
			_, err := r.Change(ctx, s, review.Touch{}, func(e *plant.Edit) error {
				_, err := e.Upsert(ctx, &bulk)
				return err
			})
			return err
		})
		if err != nil {
			b.Fatal(err)
		}
	}
	if _, err := db.Exec(ctx, `VACUUM ANALYZE`); err != nil {
		b.Fatal(err)
	}
	return buildings, m
}

// luminaires are the records of n luminaires with their transformers and circuits.
func luminaires(m *domaintest.Models, n int) plant.Bulk {
	var bulk plant.Bulk
	for i := 0; i < n; i += 4 {
		if i%20 == 0 {
			k := plant.Circuit{Board: fmt.Sprint("DB", i/200), Way: fmt.Sprint(i / 20)}
			k.ID, k.Curve, k.RatingA, k.RCD, k.Neutral = domain.NewID(), "C", domaintest.Of(16.0), "none", "own"
			bulk.Circuits = append(bulk.Circuits, k)
		}
		circuit := bulk.Circuits[len(bulk.Circuits)-1].ID
		lamp, d := m.Halogen35.ID, plant.Driver{DriverModelID: &m.Wound100.ID}
		d.ID, d.Tag, d.FedByCircuitID = domain.NewID(), fmt.Sprint("G", i), &circuit
		if i%80 == 0 {
			d.DriverModelID, lamp = &m.Electronic105.ID, m.LED7.ID
		}
		bulk.Drivers = append(bulk.Drivers, d)
		count := 4
		if i%80 != 0 {
			count = 2 // 70 W of halogen lamps in all: under the rating
		}
		for j := range 4 {
			f := plant.Fixture{FixtureModelID: &m.Downlight.ID, LampModelID: &lamp, LampCount: domaintest.Of(0)}
			if j < count {
				f.LampCount = domaintest.Of(1)
			}
			f.Tag, f.FedByPlaceID = fmt.Sprintf("L%d-%d", i, j), &d.ID
			bulk.Fixtures = append(bulk.Fixtures, f)
		}
	}
	return bulk
}

// fixtures sizes the estates of the benchmarks here: go test ./domain/review -bench . -args -fixtures 1000000
var fixtures = flag.Int("fixtures", 20_000, "luminaires in the estates of the benchmarks")

// changeSome changes the lamps behind one driver in a hundred past the review's back: from what the driver bears to what it
// does not, and back the next time. It returns how many drivers that were.
func changeSome(b *testing.B, db *pgxpool.Pool, m *domaintest.Models, buildings []domain.ID) (changed int64) {
	b.Helper()
	for _, id := range buildings {
		tag, err := db.Exec(context.Background(), `
			WITH driver AS (
				SELECT id
				  FROM place
				 WHERE building_id = $1 AND kind = 'driver' AND driver_model_id = $2 AND substr(tag, 2)::int % 400 = 4),
			lamp AS (
				UPDATE place f
				   SET lamp_model_id = CASE WHEN f.lamp_model_id = $3 THEN $4 ELSE $3 END::uuid
				  FROM driver d
				 WHERE f.building_id = $1 AND f.fed_by_place_id = d.id)
			SELECT FROM driver`, id, m.Wound100.ID, m.Halogen35.ID, m.LED7DC.ID)
		if err != nil {
			b.Fatal(err)
		}
		changed += tag.RowsAffected()
	}
	return changed
}

// BenchmarkFullReview measures a review of an estate of which one driver in a hundred changed since the last one, against
// COPY TO STDOUT of the rows it reads, in one run; and, once, the first review of all.
func BenchmarkFullReview(b *testing.B) {
	db := domaintest.DB(b)
	r := review.New()
	buildings, m := estate(b, db, r, *fixtures)
	now := func() time.Time { return domaintest.Noon }
	ctx := context.Background()
	if _, err := db.Exec(ctx, `TRUNCATE finding, question, tree`); err != nil { // as if nothing had been reviewed
		b.Fatal(err)
	}
	start := time.Now()
	tally, err := r.Everything(ctx, db, now, nil)
	if err != nil {
		b.Fatal(err)
	}
	first := time.Since(start)
	if drivers := *fixtures / 4; tally.Opened < drivers/20 {
		b.Fatalf("the first review of %d drivers found %+v", drivers, tally)
	}
	conn, err := db.Acquire(ctx)
	if err != nil {
		b.Fatal(err)
	}
	defer conn.Release()
	var copied, reviewed time.Duration
	for b.Loop() {
		changed := changeSome(b, db, &m, buildings)
		if want := int64(len(buildings) * 2000 / 400); changed != want {
			b.Fatalf("%d drivers changed, not %d", changed, want)
		}
		start := time.Now()
		for _, table := range []string{"circuit", "place"} {
			if _, err := conn.Conn().PgConn().CopyTo(ctx, io.Discard, `COPY `+table+` TO STDOUT`); err != nil {
				b.Fatal(err)
			}
		}
		copied += time.Since(start)
		start = time.Now()
		tally, err := r.Everything(ctx, db, now, nil)
		if err != nil {
			b.Fatal(err)
		}
		if int64(tally.Opened+tally.Cleared) < changed || tally.Places < *fixtures {
			b.Fatalf("a review after %d changes found %+v", changed, tally)
		}
		reviewed += time.Since(start)
	}
	b.ReportMetric(reviewed.Seconds()/copied.Seconds(), "x/copy")
	b.ReportMetric(reviewed.Seconds()/float64(b.N), "s/review")
	b.ReportMetric(copied.Seconds()/float64(b.N), "s/copy")
	b.ReportMetric(first.Seconds(), "s/first")
}

// BenchmarkBulk measures requests of 10,000 rows, with and without review and audit, against COPY FROM STDIN of the same
// rows into the same tables, with their indexes and constraints.
func BenchmarkBulk(b *testing.B) {
	ctx := context.Background()
	db := domaintest.DB(b)
	m := domaintest.Catalogue(b, db)
	r := review.New()
	var rows int
	var took [3]time.Duration
	store := func(code string, put func(domain.Scope, *plant.Bulk) error) time.Duration {
		bulk := luminaires(&m, 7690) // 10,000 rows with what feeds them
		rows = bulk.Rows()
		home := domaintest.Building(b, db, code)
		start := time.Now()
		if err := domain.In(ctx, db, home.ID, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error { return put(s, &bulk) }); err != nil {
			b.Fatal(err)
		}
		return time.Since(start)
	}
	conn, err := db.Acquire(ctx)
	if err != nil {
		b.Fatal(err)
	}
	defer conn.Release()
	pg := conn.Conn().PgConn()
	for n := 0; b.Loop(); n++ {
		took[0] += store(fmt.Sprint("R", n), func(s domain.Scope, bulk *plant.Bulk) error {
			_, err := r.Change(ctx, s, review.Touch{}, func(e *plant.Edit) error {
				_, err := e.Upsert(ctx, bulk)
				return err
			})
			return err
		})
		took[1] += store(fmt.Sprint("U", n), func(s domain.Scope, bulk *plant.Bulk) error {
			e := plant.NewEdit(s, nil)
			e.Quiet()
			_, err := e.Upsert(ctx, bulk)
			return err
		})
		// The rows of that building go out and in again.
		var id domain.ID
		if err := db.QueryRow(ctx, `SELECT id FROM building WHERE code = $1`, fmt.Sprint("U", n)).Scan(&id); err != nil {
			b.Fatal(err)
		}
		var text [2]bytes.Buffer
		for i, table := range []string{"circuit", "place"} {
			if _, err := pg.CopyTo(ctx, &text[i], `COPY (SELECT * FROM `+table+` WHERE building_id = '`+id.String()+`') TO STDOUT`); err != nil {
				b.Fatal(err)
			}
		}
		for _, table := range []string{"place", "circuit"} {
			if _, err := db.Exec(ctx, `DELETE FROM `+table+` WHERE building_id = $1`, id); err != nil {
				b.Fatal(err)
			}
		}
		start := time.Now()
		for i, table := range []string{"circuit", "place"} {
			if _, err := pg.CopyFrom(ctx, &text[i], `COPY `+table+` FROM STDIN`); err != nil {
				b.Fatal(err)
			}
		}
		took[2] += time.Since(start)
	}
	b.ReportMetric(took[2].Seconds()/took[0].Seconds(), "of-copy")
	b.ReportMetric(took[2].Seconds()/took[1].Seconds(), "of-copy-unreviewed")
	b.ReportMetric(float64(rows*b.N)/took[0].Seconds(), "rows/s")
}

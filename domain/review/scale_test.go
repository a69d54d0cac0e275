package review_test

import (
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
func estate(b *testing.B, db *pgxpool.Pool, r *review.Reviewer, n int) (buildings []domain.ID) {
	b.Helper()
	ctx := context.Background()
	m := domaintest.Catalogue(b, db)
	const each = 2000
	for at := 0; at < n; at += each {
		home := domaintest.Building(b, db, fmt.Sprintf("B%d", at/each))
		buildings = append(buildings, home.ID)
		var bulk plant.Bulk
		for i := 0; i < each; i += 4 {
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
	return buildings
}

// fixtures sizes the estates of the benchmarks here: go test ./domain/review -bench . -args -fixtures 1000000
var fixtures = flag.Int("fixtures", 20_000, "luminaires in the estates of the benchmarks")

// BenchmarkFullReview measures a second review of an estate against COPY TO STDOUT of the rows it reads, in one run.
func BenchmarkFullReview(b *testing.B) {
	db := domaintest.DB(b)
	r := review.New()
	estate(b, db, r, *fixtures)
	now := func() time.Time { return domaintest.Noon }
	ctx := context.Background()
	conn, err := db.Acquire(ctx)
	if err != nil {
		b.Fatal(err)
	}
	defer conn.Release()
	var copied, reviewed time.Duration
	for b.Loop() {
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
		if tally.Opened+tally.Changed+tally.Cleared != 0 || tally.Places < *fixtures {
			b.Fatalf("a second review found %+v", tally)
		}
		reviewed += time.Since(start)
	}
	b.ReportMetric(reviewed.Seconds()/copied.Seconds(), "x/copy")
	b.ReportMetric(reviewed.Seconds()/float64(b.N), "s/review")
	b.ReportMetric(copied.Seconds()/float64(b.N), "s/copy")
}

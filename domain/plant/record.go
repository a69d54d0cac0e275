package plant

import (
	"context"
	"time"

	"github.com/jackc/pgx/v5"

	"lampward/domain"
	"lampward/domain/site"
)

// Records are the records of a building, or of some of its trees, that its findings depend on.
type Records struct {
	Building site.Building
	Spaces   map[domain.ID]SpaceFacts
	Circuits []Circuit
	Dimmers  []Dimmer
	Drivers  []Driver
	Fixtures []Fixture
	Feeds    []Feed
	Controls []ControlLink
	Odd      []OddLamp
	Failures []FailureFact
	Tests    []EmergencyTest // the last function test of each emergency luminaire, and the last of any kind
	Trips    []TripFact
}

// SpaceFacts is what a finding may depend on of a space.
type SpaceFacts struct {
	YearlyHours *float64
	Use         string
}

// An OddLamp is a lamp now fitted that differs from the others of its luminaire.
type OddLamp struct {
	PlaceID     domain.ID
	Holder      int
	LampModelID *domain.ID
	FittedAt    *time.Time
}

// A FailureFact is a failure of the last twelve months, or one that is open.
type FailureFact struct {
	PlaceID   domain.ID
	Part      string
	Holder    int
	Mode      string
	NoticedAt time.Time
	Open      bool
}

// A TripFact is a trip of the last twelve months.
type TripFact struct {
	CircuitID domain.ID
	TrippedAt time.Time
}

// Load reads the records of the given trees of s's building. Retired records are left out.
func Load(ctx context.Context, s domain.Scope, trees []domain.ID) (*Records, error) {
	r := &Records{Spaces: map[domain.ID]SpaceFacts{}}
	ids := domain.IDs(trees)
	yearAgo := s.At.AddDate(-1, 0, 0)
	var batch pgx.Batch
	ask := func(sql string, args []any, read func(pgx.Rows) error) {
		batch.Queue(sql, args...).Query(read)
	}
	inTrees := []any{s.Building, ids}
	batch.Queue(`SELECT `+site.Buildings.List("")+` FROM building WHERE id = $1`, s.Building).
		QueryRow(func(row pgx.Row) error { return row.Scan(site.Buildings.Targets(&r.Building)...) })
	ask(`SELECT `+Circuits.List("")+` FROM circuit WHERE building_id = $1 AND tree_id = ANY($2) AND retired_at IS NULL ORDER BY id`, inTrees,
		collect(Circuits, &r.Circuits))
	ask(`SELECT `+Dimmers.List("")+` FROM place WHERE building_id = $1 AND tree_id = ANY($2) AND kind = 'dimmer' AND retired_at IS NULL ORDER BY id`, inTrees,
		collect(Dimmers, &r.Dimmers))
	ask(`SELECT `+Drivers.List("")+` FROM place WHERE building_id = $1 AND tree_id = ANY($2) AND kind = 'driver' AND retired_at IS NULL ORDER BY id`, inTrees,
		collect(Drivers, &r.Drivers))
	ask(`SELECT `+Fixtures.List("")+` FROM place WHERE building_id = $1 AND tree_id = ANY($2) AND kind = 'fixture' AND retired_at IS NULL ORDER BY id`, inTrees,
		collect(Fixtures, &r.Fixtures))
	ask(`
		SELECT `+Feeds.List("")+`
		  FROM feed f
		 WHERE building_id = $1 AND retired_at IS NULL
		   AND (SELECT tree_id FROM place p WHERE p.building_id = $1 AND p.id = f.place_id AND p.retired_at IS NULL) = ANY($2)
		 ORDER BY id`, inTrees, collect(Feeds, &r.Feeds))
	ask(`
		SELECT `+Controls.List("")+`
		  FROM control c
		 WHERE building_id = $1 AND retired_at IS NULL
		   AND (SELECT tree_id FROM place p WHERE p.building_id = $1 AND p.id = c.dimmer_id AND p.retired_at IS NULL) = ANY($2)
		 ORDER BY position, id`, inTrees, collect(Controls, &r.Controls))
	ask(`
		SELECT u.place_id, u.holder, u.lamp_model_id, u.fitted_at
		  FROM unit u
		  JOIN place p ON p.building_id = u.building_id AND p.id = u.place_id
		 WHERE u.building_id = $1 AND p.building_id = $1 AND p.tree_id = ANY($2) AND u.odd AND u.removed_at IS NULL AND u.retired_at IS NULL
		   AND u.part = 'lamp'
		 ORDER BY u.place_id, u.holder`, inTrees, func(rows pgx.Rows) (err error) {
		r.Odd, err = pgx.CollectRows(rows, func(row pgx.CollectableRow) (o OddLamp, err error) {
			return o, row.Scan(&o.PlaceID, &o.Holder, &o.LampModelID, &o.FittedAt)
		})
		return err
	})
	ask(`
		SELECT f.place_id, f.part, f.holder, f.mode, f.noticed_at, f.cleared_at IS NULL
		  FROM failure f
		  JOIN place p ON p.building_id = f.building_id AND p.id = f.place_id
		 WHERE f.building_id = $1 AND p.building_id = $1 AND p.tree_id = ANY($2) AND f.retired_at IS NULL
		 ORDER BY f.noticed_at, f.id`, inTrees, func(rows pgx.Rows) (err error) {
		r.Failures, err = pgx.CollectRows(rows, func(row pgx.CollectableRow) (f FailureFact, err error) {
			return f, row.Scan(&f.PlaceID, &f.Part, &f.Holder, &f.Mode, &f.NoticedAt, &f.Open)
		})
		return err
	})
	ask(`
		SELECT DISTINCT ON (t.place_id, t.test) `+EmergencyTests.List("t")+`
		  FROM emergency_test t
		  JOIN place p ON p.building_id = t.building_id AND p.id = t.place_id
		 WHERE t.building_id = $1 AND p.building_id = $1 AND p.tree_id = ANY($2) AND t.retired_at IS NULL
		 ORDER BY t.place_id, t.test, t.tested_at DESC, t.id DESC`, inTrees, collect(EmergencyTests, &r.Tests))
	ask(`
		SELECT t.circuit_id, t.tripped_at
		  FROM trip t
		  JOIN circuit c ON c.building_id = t.building_id AND c.id = t.circuit_id
		 WHERE t.building_id = $1 AND c.building_id = $1 AND c.tree_id = ANY($2) AND t.retired_at IS NULL AND t.tripped_at > $3
		 ORDER BY t.tripped_at, t.id`, append(inTrees, yearAgo), func(rows pgx.Rows) (err error) {
		r.Trips, err = pgx.CollectRows(rows, func(row pgx.CollectableRow) (t TripFact, err error) {
			return t, row.Scan(&t.CircuitID, &t.TrippedAt)
		})
		return err
	})
	ask(`
		SELECT id, yearly_hours, use
		  FROM space
		 WHERE building_id = $1
		   AND id IN (SELECT space_id FROM place WHERE building_id = $1 AND tree_id = ANY($2) AND retired_at IS NULL)`, inTrees, func(rows pgx.Rows) error {
		for rows.Next() {
			var id domain.ID
			var f SpaceFacts
			if err := rows.Scan(&id, &f.YearlyHours, &f.Use); err != nil {
				return err
			}
			r.Spaces[id] = f
		}
		return rows.Err()
	})
	return r, domain.Classify(s.SendBatch(ctx, &batch).Close(), "records")
}

// collect gathers the rows of a table in order.
func collect[T any](t *domain.Table[T], out *[]T) func(pgx.Rows) error {
	return func(rows pgx.Rows) error {
		return t.Scan(rows, func(row *T) error { *out = append(*out, *row); return nil })
	}
}

package review

import (
	"context"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"lampward/domain"
)

// Names of totals in building_total; a severity or a rule follows the slash.
const (
	totalSeverity = "findings/"
	totalRule     = "rule/"
	totalPlaces   = "coverage_places"
	totalKnown    = "coverage_known"
)

// CountTotals counts what monitoring shows of every building in use and keeps it, so that every replica shows the same
// and a scrape costs little.
func CountTotals(ctx context.Context, db *pgxpool.Pool, at time.Time) error {
	rows, err := db.Query(ctx, `SELECT id FROM building WHERE retired_at IS NULL ORDER BY id`)
	if err != nil {
		return domain.Classify(err, "building")
	}
	ids, err := pgx.CollectRows(rows, pgx.RowTo[domain.ID])
	if err != nil {
		return domain.Classify(err, "building")
	}
	for _, id := range ids {
		if err := countTotals(ctx, db, id, at); err != nil {
			return err
		}
	}
	return nil
}

func countTotals(ctx context.Context, db *pgxpool.Pool, building domain.ID, at time.Time) error {
	_, err := db.Exec(ctx, `
		WITH counted AS (
			SELECT 'findings/' || severity AS name, count(*)::float8 AS value
			  FROM finding WHERE building_id = $1 AND cleared_at IS NULL GROUP BY severity
			 UNION ALL
			SELECT 'rule/' || rule, count(*) FROM finding WHERE building_id = $1 AND cleared_at IS NULL GROUP BY rule
			 UNION ALL
			SELECT 'coverage_places', coalesce(sum(places), 0) FROM tree WHERE building_id = $1
			 UNION ALL
			SELECT 'coverage_known', coalesce(sum(known), 0) FROM tree WHERE building_id = $1),
		gone AS (
			DELETE FROM building_total t
			 WHERE t.building_id = $1 AND (t.name LIKE 'findings/%' OR t.name LIKE 'rule/%') AND NOT EXISTS (SELECT FROM counted c WHERE c.name = t.name))
		INSERT INTO building_total (building_id, name, value, updated_at)
		SELECT $1, name, value, $2 FROM counted
		    ON CONFLICT (building_id, name) DO UPDATE SET value = excluded.value, updated_at = excluded.updated_at`, building, at)
	return domain.Classify(err, "building")
}

// A BuildingTotal is what monitoring shows of one building.
type BuildingTotal struct {
	Code       string
	BySeverity map[string]float64
	Places     float64
	Known      float64
}

// Totals reads the totals kept of every building in use, in the order of codes, and the open findings by rule over all.
func Totals(ctx context.Context, db domain.Queryer) (buildings []BuildingTotal, byRule map[string]float64, err error) {
	rows, err := db.Query(ctx, `
		SELECT b.code, t.name, t.value
		  FROM building b
		  JOIN building_total t ON t.building_id = b.id
		 WHERE b.retired_at IS NULL
		 ORDER BY b.code, t.name`)
	if err != nil {
		return nil, nil, domain.Classify(err, "building")
	}
	defer rows.Close()
	byRule = map[string]float64{}
	for rows.Next() {
		var code, name string
		var value float64
		if err := rows.Scan(&code, &name, &value); err != nil {
			return nil, nil, domain.Classify(err, "building")
		}
		if len(buildings) == 0 || buildings[len(buildings)-1].Code != code {
			buildings = append(buildings, BuildingTotal{Code: code, BySeverity: map[string]float64{}})
		}
		b := &buildings[len(buildings)-1]
		switch {
		case name == totalPlaces:
			b.Places = value
		case name == totalKnown:
			b.Known = value
		case len(name) > len(totalSeverity) && name[:len(totalSeverity)] == totalSeverity:
			b.BySeverity[name[len(totalSeverity):]] = value
		case len(name) > len(totalRule) && name[:len(totalRule)] == totalRule:
			byRule[name[len(totalRule):]] += value
		}
	}
	return buildings, byRule, domain.Classify(rows.Err(), "building")
}

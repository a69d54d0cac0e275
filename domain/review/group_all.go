package review

import (
	"cmp"
	"context"
	"slices"
	"time"

	"lampward/calc/retrofit"
	"lampward/domain"
	"lampward/domain/plant"
)

// sortGroups puts first what can hurt a person, then severity times lamps affected, then the oldest.
func sortGroups(gs []Group) {
	slices.SortStableFunc(gs, func(a, b Group) int {
		return cmp.Or(
			cmp.Compare(retrofit.Weight(retrofit.Severity(b.Severity), b.Lamps), retrofit.Weight(retrofit.Severity(a.Severity), a.Lamps)),
			a.Since.Compare(b.Since), cmp.Compare(a.Rule, b.Rule), cmp.Compare(a.Sentence, b.Sentence))
	})
}

// waivedHere tells whether a waiver lets finding f be on the day it is, at time $2, in its building b.
var waivedHere = waivedOn("f.building_id", "($2::timestamptz AT TIME ZONE b.time_zone)::date")

// those are the buildings named, as an argument of a query that takes all where it is NULL.
func those(buildings []domain.ID) any {
	if buildings == nil {
		return nil
	}
	return domain.IDs(buildings)
}

// GroupsEverywhere returns the findings of all buildings that are open at a time by cause, of those named where buildings
// is not nil.
func GroupsEverywhere(ctx context.Context, db domain.Queryer, cat *plant.Catalogue, at time.Time, buildings []domain.ID) ([]Group, error) {
	rows, err := db.Query(ctx, `
		SELECT f.rule, f.lamp_model_id, f.driver_model_id, f.dimmer_model_id, max(`+rankSQL+`), bool_or(f.blocks), count(*), sum(f.lamps),
		       count(DISTINCT f.building_id), count(*) FILTER (WHERE `+waivedHere+`), min(f.opened_at), (array_agg(f.sentence ORDER BY f.lamps DESC, f.id))[1]
		  FROM finding f
		  JOIN building b ON b.id = f.building_id
		 WHERE f.cleared_at IS NULL AND ($1::uuid[] IS NULL OR f.building_id = ANY($1))
		 GROUP BY f.rule, f.lamp_model_id, f.driver_model_id, f.dimmer_model_id`, those(buildings), at)
	if err != nil {
		return nil, domain.Classify(err, "finding")
	}
	return collectGroups(rows, cat)
}

// ListEverywhere returns findings of all buildings, of those named where buildings is not nil, in the order of List, at
// most page.Limit of them after the page's cursor, and the cursor of the next page. Whether each is waived is asked of
// its building.
func ListEverywhere(ctx context.Context, db domain.Queryer, f Filter, at time.Time, buildings []domain.ID, page domain.Page) ([]Finding, string, error) {
	return list(ctx, db, f, page, `
		  JOIN building b ON b.id = f.building_id
		 WHERE ($1::uuid[] IS NULL OR f.building_id = ANY($1))
		   AND ($3::boolean IS NULL OR $3 = `+waivedHere+`)`, those(buildings), at, f.Waived)
}

// A RuleCount is how many findings of a rule are open.
type RuleCount struct {
	Rule      string `json:"rule"`
	Severity  string `json:"severity"` // the worst
	Blocks    bool   `json:"blocks"`
	Findings  int    `json:"findings"`
	Waived    int    `json:"waived"` // of the findings
	Lamps     int    `json:"lamps"`
	Buildings int    `json:"buildings"`
}

// RuleCounts returns how many findings are open at a time by rule, in the buildings named or in all where buildings is nil:
// the worst severity first, then the most findings.
func RuleCounts(ctx context.Context, db domain.Queryer, at time.Time, buildings []domain.ID) ([]RuleCount, error) {
	rows, err := db.Query(ctx, `
		SELECT f.rule, max(`+rankSQL+`) AS rank, bool_or(f.blocks), count(*) AS n, count(*) FILTER (WHERE `+waivedHere+`), sum(f.lamps), count(DISTINCT f.building_id)
		  FROM finding f
		  JOIN building b ON b.id = f.building_id
		 WHERE f.cleared_at IS NULL AND ($1::uuid[] IS NULL OR f.building_id = ANY($1))
		 GROUP BY f.rule
		 ORDER BY rank DESC, n DESC, f.rule`, those(buildings), at)
	if err != nil {
		return nil, domain.Classify(err, "finding")
	}
	defer rows.Close()
	out := []RuleCount{}
	for rows.Next() {
		var c RuleCount
		var rank int
		if err := rows.Scan(&c.Rule, &rank, &c.Blocks, &c.Findings, &c.Waived, &c.Lamps, &c.Buildings); err != nil {
			return nil, domain.Classify(err, "finding")
		}
		c.Severity = severityOf(rank)
		out = append(out, c)
	}
	return out, domain.Classify(rows.Err(), "finding")
}

// A Summary is a building's state on one line.
type Summary struct {
	BuildingID domain.ID      `json:"building_id"`
	Code       string         `json:"code"`
	Name       string         `json:"name"`
	Luminaires int            `json:"luminaires"` // in use, as last reviewed
	Findings   map[string]int `json:"findings"`   // open, by severity
	Questions  int            `json:"questions"`
	Coverage   Coverage       `json:"coverage"`
	Pending    bool           `json:"pending"` // a review is owed: the figures may be of before a change
	Reviews    int            `json:"reviews_pending"`
}

// Summaries returns the state of every building in use, of those named where buildings is not nil, in the order of
// their codes.
func Summaries(ctx context.Context, db domain.Queryer, buildings []domain.ID) ([]Summary, error) {
	rows, err := db.Query(ctx, `
		SELECT b.id, b.code, b.name,
		       (SELECT coalesce(jsonb_object_agg(severity, n), '{}') FROM (SELECT severity, count(*) AS n FROM finding f
		         WHERE f.building_id = b.id AND f.cleared_at IS NULL GROUP BY severity) AS x),
		       (SELECT count(*) FROM (SELECT DISTINCT field, about_kind, about_id, with_id FROM question q WHERE q.building_id = b.id) AS x),
		       coalesce(t.places, 0), coalesce(t.known, 0),
		       (SELECT count(*) FROM review_due d WHERE d.building_id IS NULL OR d.building_id = b.id)
		  FROM building b
		  LEFT JOIN (SELECT building_id, sum(places) AS places, sum(known) AS known FROM tree GROUP BY building_id) AS t ON t.building_id = b.id
		 WHERE b.retired_at IS NULL AND ($1::uuid[] IS NULL OR b.id = ANY($1))
		 ORDER BY b.code`, those(buildings))
	if err != nil {
		return nil, domain.Classify(err, "building")
	}
	defer rows.Close()
	out := []Summary{}
	for rows.Next() {
		var s Summary
		if err := rows.Scan(&s.BuildingID, &s.Code, &s.Name, &s.Findings, &s.Questions, &s.Coverage.Places, &s.Coverage.Known, &s.Reviews); err != nil {
			return nil, domain.Classify(err, "building")
		}
		s.Luminaires, s.Pending = s.Coverage.Places, s.Reviews > 0
		if s.Coverage.Places > 0 {
			r := float64(s.Coverage.Known) / float64(s.Coverage.Places)
			s.Coverage.Ratio = &r
		}
		out = append(out, s)
	}
	return out, domain.Classify(rows.Err(), "building")
}

// CountByRule returns how many findings are open by rule, over all buildings.
func CountByRule(ctx context.Context, db domain.Queryer) (map[string]int, error) {
	rows, err := db.Query(ctx, `SELECT rule, count(*) FROM finding WHERE cleared_at IS NULL GROUP BY rule`)
	if err != nil {
		return nil, domain.Classify(err, "finding")
	}
	defer rows.Close()
	out := map[string]int{}
	for rows.Next() {
		var rule string
		var n int
		if err := rows.Scan(&rule, &n); err != nil {
			return nil, domain.Classify(err, "finding")
		}
		out[rule] = n
	}
	return out, domain.Classify(rows.Err(), "finding")
}

// StepsOf returns the arithmetic of the finding that speaks for a cause: the one with the most lamps.
func StepsOf(ctx context.Context, db domain.Queryer, c Cause) ([]Step, error) {
	var steps []Step
	err := db.QueryRow(ctx, `
		SELECT steps
		  FROM finding
		 WHERE rule = $1 AND lamp_model_id IS NOT DISTINCT FROM $2 AND driver_model_id IS NOT DISTINCT FROM $3
		   AND dimmer_model_id IS NOT DISTINCT FROM $4 AND cleared_at IS NULL
		 ORDER BY lamps DESC, id
		 LIMIT 1`, c.Rule, c.LampModelID, c.DriverModelID, c.DimmerModelID).Scan(&steps)
	return steps, domain.Classify(err, "finding")
}

package review

import (
	"context"
	"time"

	"github.com/jackc/pgx/v5"

	"lampward/calc/retrofit"
	"lampward/domain"
	"lampward/domain/event"
	"lampward/domain/plant"
)

// A Filter narrows a list of findings; zero fields do not.
type Filter struct {
	Severity, Rule, Sureness string
	Subject                  domain.ID
	Space                    domain.ID
	Lamp, Driver, Dimmer     domain.ID
	Kind                     string // of the subject
	Newest                   bool   // the newest first, instead of the worst
	Cleared                  bool   // those that cleared, instead of those that are open
	Waived                   *bool  // only those that a waiver lets be, or only those none does
}

// rankSQL orders severities as retrofit.Severity does.
const rankSQL = `CASE f.severity WHEN 'danger' THEN 4 WHEN 'high' THEN 3 WHEN 'medium' THEN 2 ELSE 1 END`

// waivedOn tells whether a waiver lets finding f be: of a building, in effect on a day, both as SQL says them.
func waivedOn(building, day string) string {
	return `EXISTS (
		SELECT FROM waiver w
		 WHERE w.building_id = ` + building + ` AND w.subject_id = f.subject_id AND w.rule = f.rule AND w.input_hash = f.input_hash
		   AND w.retired_at IS NULL AND w.until >= ` + day + ` AND w.rule_set >= f.rule_set)`
}

// List returns findings of s's building, the worst first: by severity, then lamps affected, then age; at most
// page.Limit of them after the page's cursor, and the cursor of the next page.
func List(ctx context.Context, s domain.Scope, f Filter, page domain.Page) ([]Finding, string, error) {
	day, err := Today(ctx, s)
	if err != nil {
		return nil, "", err
	}
	out, next, err := list(ctx, s, f, page, `
		 WHERE f.building_id = $1
		   AND ($2::boolean IS NULL OR $2 = `+waivedOn("$1", "$3::date")+`)`, s.Building, f.Waived, day)
	if err != nil {
		return nil, "", err
	}
	return out, next, withWaivers(ctx, s, out, day)
}

// list returns findings narrowed by a filter and a WHERE clause of three arguments.
func list(ctx context.Context, db domain.Queryer, f Filter, page domain.Page, where string, one, two, three any) ([]Finding, string, error) {
	rank, lamps, opened, last := 5, 0, time.Time{}, domain.ID{}
	order := rankSQL + ` DESC, f.lamps DESC, f.opened_at, f.id`
	after := `(` + rankSQL + `, f.lamps) <= ($14, $15) AND ((` + rankSQL + `, f.lamps) < ($14, $15) OR (f.opened_at, f.id) > ($16, $17))`
	if f.Newest {
		order = `f.opened_at DESC, f.id DESC`
		after = `($14::int, $15::int) IS NOT NULL AND (f.opened_at, f.id) < ($16, $17)`
		opened, last = time.Date(9999, 1, 1, 0, 0, 0, 0, time.UTC), domain.ID{255, 255, 255, 255, 255, 255, 255, 255, 255, 255, 255, 255, 255, 255, 255, 255}
	}
	if page.Cursor != "" {
		if err := domain.DecodeCursor(page.Cursor, &rank, &lamps, &opened, &last); err != nil {
			return nil, "", err
		}
	}
	rows, err := db.Query(ctx, `
		SELECT `+Findings.List("f")+`, coalesce(p.tag, c.board || '/' || c.way, '')
		  FROM finding f
		  LEFT JOIN place p ON p.building_id = f.building_id AND p.id = f.subject_id
		  LEFT JOIN circuit c ON c.building_id = f.building_id AND c.id = f.subject_id`+where+`
		   AND (f.cleared_at IS NOT NULL) = $4
		   AND ($5 = '' OR f.severity = $5)
		   AND ($6 = '' OR f.rule = $6)
		   AND ($7 = '' OR f.sureness = $7)
		   AND ($8 = '' OR f.subject_kind = $8)
		   AND ($9::uuid IS NULL OR f.subject_id = $9)
		   AND ($10::uuid IS NULL OR p.space_id = $10)
		   AND ($11::uuid IS NULL OR f.lamp_model_id = $11)
		   AND ($12::uuid IS NULL OR f.driver_model_id = $12)
		   AND ($13::uuid IS NULL OR f.dimmer_model_id = $13)
		   AND `+after+`
		 ORDER BY `+order+`
		 LIMIT $18`,
		one, two, three, f.Cleared, f.Severity, f.Rule, f.Sureness, f.Kind, orNil(f.Subject), orNil(f.Space), orNil(f.Lamp), orNil(f.Driver), orNil(f.Dimmer),
		rank, lamps, opened, last, page.Limit+1)
	if err != nil {
		return nil, "", domain.Classify(err, "finding")
	}
	defer rows.Close()
	out := []Finding{}
	var row Finding
	targets := append(Findings.Targets(&row), &row.Tag)
	for rows.Next() {
		row = Finding{}
		if err := rows.Scan(targets...); err != nil {
			return nil, "", domain.Classify(err, "finding")
		}
		row.explain()
		out = append(out, row)
	}
	if err := rows.Err(); err != nil {
		return nil, "", domain.Classify(err, "finding")
	}
	next := ""
	if len(out) > page.Limit {
		out = out[:page.Limit]
		l := &out[len(out)-1]
		next = domain.EncodeCursor(retrofit.Severity(l.Severity).Rank(), l.Lamps, l.OpenedAt, l.ID)
	}
	return out, next, nil
}

// Get returns one finding with its arithmetic.
func Get(ctx context.Context, s domain.Scope, id domain.ID) (Finding, error) {
	f, err := Findings.Get(ctx, s, id)
	if err != nil {
		return f, err
	}
	f.explain()
	err = s.QueryRow(ctx, `
		SELECT coalesce((SELECT tag FROM place WHERE building_id = $1 AND id = $2),
		                (SELECT board || '/' || way FROM circuit WHERE building_id = $1 AND id = $2), '')`, s.Building, f.SubjectID).Scan(&f.Tag)
	if err != nil {
		return f, domain.Classify(err, "finding")
	}
	day, err := Today(ctx, s)
	if err != nil {
		return f, err
	}
	one := []Finding{f}
	err = withWaivers(ctx, s, one, day)
	return one[0], err
}

// Today returns the day it is in the building's time zone at the scope's time.
func Today(ctx context.Context, s domain.Scope) (domain.Date, error) {
	var zone string
	err := s.QueryRow(ctx, `SELECT time_zone FROM building WHERE id = $1`, s.Building).Scan(&zone)
	return today(zone, s.At), domain.Classify(err, "building")
}

// withWaivers adds to each finding the waiver that is in effect on a day.
func withWaivers(ctx context.Context, s domain.Scope, fs []Finding, day domain.Date) error {
	if len(fs) == 0 {
		return nil
	}
	ids := make([]domain.ID, len(fs))
	for i := range fs {
		ids[i] = fs[i].SubjectID
	}
	list, err := Waivers.Select(ctx, s, `WHERE building_id = $1 AND subject_id = ANY($2) AND retired_at IS NULL ORDER BY until`, s.Building, domain.IDs(ids))
	if err != nil {
		return err
	}
	for i := range fs {
		for j := range list {
			w := &list[j]
			if w.Rule == fs[i].Rule && w.SubjectID == fs[i].SubjectID && string(w.InputHash) == string(fs[i].InputHash) && day <= w.Until {
				found := *w
				found.InEffect, found.Confirm = w.covers(&fs[i], day), w.RuleSet < fs[i].RuleSet
				fs[i].Waiver = &found
			}
		}
	}
	return nil
}

func orNil(id domain.ID) *domain.ID {
	if id.IsZero() {
		return nil
	}
	return &id
}

// Waive lets findings be until the end of a day, for a reason: those named, or every open one of a cause.
func Waive(ctx context.Context, s domain.Scope, ids []domain.ID, cause *Cause, why string, until domain.Date) ([]Waiver, error) {
	c := domain.NewCheck("waiver")
	if err := checkWaiver(ctx, s, c, "", why, until); err != nil {
		return nil, err
	}
	if (len(ids) == 0) == (cause == nil) {
		c.Add("/findings", "must name findings, or cause must be given: one of the two")
	}
	if err := c.Err(); err != nil {
		return nil, err
	}
	rest, args := `WHERE building_id = $1 AND id = ANY($2) AND cleared_at IS NULL ORDER BY id`, []any{s.Building, domain.IDs(ids)}
	if cause != nil {
		rest = `WHERE building_id = $1 AND rule = $2 AND lamp_model_id IS NOT DISTINCT FROM $3
		          AND driver_model_id IS NOT DISTINCT FROM $4 AND dimmer_model_id IS NOT DISTINCT FROM $5 AND cleared_at IS NULL ORDER BY id`
		args = []any{s.Building, cause.Rule, cause.LampModelID, cause.DriverModelID, cause.DimmerModelID}
	}
	list, err := Findings.Select(ctx, s, rest, args...)
	if err != nil {
		return nil, err
	}
	if len(list) == 0 || cause == nil && len(list) < len(ids) {
		return nil, domain.NotFoundf("%d of the findings named are not open in this building", max(len(ids)-len(list), 1))
	}
	return waive(ctx, s, list, why, until)
}

// Override lets a refused proposal pass, for a reason and until the end of a day: what it is refused for is waived ahead,
// so that its findings open waived once it is fitted as proposed. Fields of a bad override are named under at.
func Override(ctx context.Context, s domain.Scope, w *WhatIf, at, why string, until domain.Date) error {
	c := domain.NewCheck("override")
	if err := checkWaiver(ctx, s, c, at, why, until); err != nil {
		return err
	}
	if err := c.Err(); err != nil {
		return err
	}
	var err error
	w.Waivers, err = waive(ctx, s, w.refusing, why, until)
	return err
}

// checkWaiver adds what is wrong with a waiver's reason and date.
func checkWaiver(ctx context.Context, s domain.Scope, c *domain.Check, at, why string, until domain.Date) error {
	c.Text(at+"/why", why)
	if why == "" {
		c.Add(at+"/why", "must say why")
	}
	day, err := Today(ctx, s)
	if err != nil {
		return err
	}
	c.Date(at+"/until", &until)
	if until < day {
		c.Add(at+"/until", "must not lie in the past")
	}
	return nil
}

// waive stores a waiver for each finding.
func waive(ctx context.Context, s domain.Scope, list []Finding, why string, until domain.Date) ([]Waiver, error) {
	out := make([]Waiver, len(list))
	for i := range list {
		f := &list[i]
		w := &out[i]
		w.ID, w.BuildingID, w.Version, w.CreatedAt, w.UpdatedAt = domain.NewID(), s.Building, 1, s.At, s.At
		w.Rule, w.RuleSet, w.SubjectKind, w.SubjectID, w.InputHash = f.Rule, f.RuleSet, f.SubjectKind, f.SubjectID, f.InputHash
		w.Why, w.Until, w.ByKind, w.ByID, w.InEffect = why, until, s.By.Kind, s.By.ID, true
		act := event.Act{Action: "finding.waived", Kind: "finding", ID: f.ID, Body: w}
		if f.ID.IsZero() { // not recorded yet: waived ahead
			act.Kind, act.ID = f.SubjectKind, f.SubjectID
		}
		event.Record(s, act)
	}
	return out, Waivers.Copy(ctx, s, len(out), func(i int) *Waiver { return &out[i] })
}

// EndWaiver ends a waiver before its date.
func EndWaiver(ctx context.Context, s domain.Scope, id domain.ID, version int64) (Waiver, error) {
	w, err := Waivers.Lock(ctx, s, id)
	if err != nil {
		return w, err
	}
	if w.RetiredAt != nil {
		return w, domain.Conflictf("the waiver has already ended")
	}
	w.Version, w.RetiredAt, w.UpdatedAt = version, &s.At, s.At
	if err := Waivers.Update(ctx, s, &w); err != nil {
		return w, err
	}
	event.Record(s, event.Act{Action: "finding.waiver_ended", Kind: "waiver", ID: id})
	return w, nil
}

// A Cause is what findings have in common: the rule and the models.
type Cause struct {
	Rule          string     `json:"rule"`
	LampModelID   *domain.ID `json:"lamp_model_id,omitempty"`
	DriverModelID *domain.ID `json:"driver_model_id,omitempty"`
	DimmerModelID *domain.ID `json:"dimmer_model_id,omitempty"`
}

// A Group is the open findings of one cause.
type Group struct {
	Cause
	Severity  string    `json:"severity"` // the worst
	Blocks    bool      `json:"blocks"`
	Places    int       `json:"places"`
	Lamps     int       `json:"lamps"`
	Buildings int       `json:"buildings"`
	Waived    int       `json:"waived"` // of the places
	Since     time.Time `json:"since"`  // the oldest
	Sentence  string    `json:"sentence"`
	Why       string    `json:"why"`
	Basis     string    `json:"basis"`
	Remedy    string    `json:"remedy"`
	Lamp      string    `json:"lamp,omitempty"` // names of the models
	Driver    string    `json:"driver,omitempty"`
	Dimmer    string    `json:"dimmer,omitempty"`
}

// Groups returns the open findings of s's building by cause, the worst first.
func Groups(ctx context.Context, s domain.Scope, cat *plant.Catalogue) ([]Group, error) {
	day, err := Today(ctx, s)
	if err != nil {
		return nil, err
	}
	rows, err := s.Query(ctx, `
		SELECT f.rule, f.lamp_model_id, f.driver_model_id, f.dimmer_model_id, max(`+rankSQL+`), bool_or(f.blocks), count(*), sum(f.lamps), 1,
		       count(*) FILTER (WHERE `+waivedOn("$1", "$2")+`), min(f.opened_at), (array_agg(f.sentence ORDER BY f.lamps DESC, f.id))[1]
		  FROM finding f
		 WHERE f.building_id = $1 AND f.cleared_at IS NULL
		 GROUP BY f.rule, f.lamp_model_id, f.driver_model_id, f.dimmer_model_id`, s.Building, day)
	if err != nil {
		return nil, domain.Classify(err, "finding")
	}
	return collectGroups(rows, cat)
}

// A Question asks for one fact about one model, or one place, and says how many places it settles.
type Question struct {
	Field     string     `json:"field"`
	Ask       string     `json:"ask"`        // what to look for on site
	AboutKind string     `json:"about_kind"` // a kind of model or place, or board
	AboutID   domain.ID  `json:"about_id"`   // of a board: its first circuit
	WithID    *domain.ID `json:"with_id,omitempty"`
	About     string     `json:"about"` // name of the model, or label of the place
	Rule      string     `json:"rule"`
	Severity  string     `json:"severity"` // at stake
	Blocks    bool       `json:"blocks"`
	Settles   int        `json:"settles"` // places
}

// MostQuestions is how many questions are shown for a building at once.
const MostQuestions = 20

// Questions returns the most useful questions of s's building and how many there are in all.
func Questions(ctx context.Context, s domain.Scope, cat *plant.Catalogue) (list []Question, total int, err error) {
	// What is behind a residual-current device is asked once a board: whoever opens it sees all its ways.
	rows, err := s.Query(ctx, `
		SELECT q.field, CASE WHEN c.id IS NULL THEN q.about_kind ELSE 'board' END, (array_agg(q.about_id ORDER BY q.about_id))[1], q.with_id,
		       (array_agg(q.rule ORDER BY `+questionRank+` DESC))[1],
		       max(`+questionRank+`), bool_or(q.blocks), sum(q.places),
		       coalesce(c.board, (SELECT tag FROM place WHERE building_id = $1 AND id = (array_agg(q.about_id))[1]),
		                (SELECT board || '/' || way FROM circuit WHERE building_id = $1 AND id = (array_agg(q.about_id))[1]), ''),
		       count(*) OVER ()
		  FROM question q
		  LEFT JOIN circuit c ON c.building_id = q.building_id AND c.id = q.about_id AND q.field IN ('circuit.rcd', 'circuit.rcd_ma')
		 WHERE q.building_id = $1
		 GROUP BY q.field, q.about_kind, c.id IS NULL, c.board, CASE WHEN c.id IS NULL THEN q.about_id END, q.with_id,
		          CASE WHEN c.id IS NULL THEN q.about_kind ELSE 'board' END
		 ORDER BY max(`+questionRank+`) * sum(q.places) DESC, q.about_kind LIKE '%_model' DESC, q.field, 3
		 LIMIT $2`, s.Building, MostQuestions)
	if err != nil {
		return nil, 0, domain.Classify(err, "question")
	}
	list = []Question{}
	defer rows.Close()
	for rows.Next() {
		var q Question
		var with domain.ID
		var rank int
		if err := rows.Scan(&q.Field, &q.AboutKind, &q.AboutID, &with, &q.Rule, &rank, &q.Blocks, &q.Settles, &q.About, &total); err != nil {
			return nil, 0, domain.Classify(err, "question")
		}
		q.Severity, q.WithID = severityOf(rank), orNil(with)
		q.Ask = retrofit.Field(q.Field).Text().Ask
		if name := modelName(cat, q.AboutKind, q.AboutID); name != "" {
			q.About = name
			if q.WithID != nil {
				q.About += " + " + modelName(cat, "driver_model", with)
			}
		}
		list = append(list, q)
	}
	return list, total, domain.Classify(rows.Err(), "question")
}

const questionRank = `CASE q.severity WHEN 'danger' THEN 4 WHEN 'high' THEN 3 WHEN 'medium' THEN 2 ELSE 1 END`

func severityOf(rank int) string {
	return [...]string{"low", "low", "medium", "high", "danger"}[min(max(rank, 0), 4)]
}

func modelName(cat *plant.Catalogue, kind string, id domain.ID) string {
	switch kind {
	case retrofit.AboutLamp, retrofit.AboutPairing:
		if m := cat.Lamps[id]; m != nil {
			return m.Name
		}
	case retrofit.AboutGear:
		if m := cat.Drivers[id]; m != nil {
			return m.Name
		}
	case retrofit.AboutControl:
		if m := cat.Dimmers[id]; m != nil {
			return m.Name
		}
	case retrofit.AboutFitting:
		if m := cat.Fixtures[id]; m != nil {
			return m.Name
		}
	}
	return ""
}

// Coverage is the share of a building's luminaires whose gear kind, ratings and feed are on record.
type Coverage struct {
	Places int      `json:"places"`
	Known  int      `json:"known"`
	Ratio  *float64 `json:"ratio,omitempty"` // absent where there is nothing to cover
}

// Cover returns the coverage of s's building.
func Cover(ctx context.Context, s domain.Scope) (Coverage, error) {
	var c Coverage
	err := s.QueryRow(ctx, `SELECT coalesce(sum(places), 0), coalesce(sum(known), 0) FROM tree WHERE building_id = $1`, s.Building).Scan(&c.Places, &c.Known)
	if c.Places > 0 {
		r := float64(c.Known) / float64(c.Places)
		c.Ratio = &r
	}
	return c, domain.Classify(err, "building")
}

func collectGroups(rows pgx.Rows, cat *plant.Catalogue) ([]Group, error) {
	defer rows.Close()
	out := []Group{}
	for rows.Next() {
		var g Group
		var rank int
		if err := rows.Scan(&g.Rule, &g.LampModelID, &g.DriverModelID, &g.DimmerModelID, &rank, &g.Blocks, &g.Places, &g.Lamps, &g.Buildings,
			&g.Waived, &g.Since, &g.Sentence); err != nil {
			return nil, domain.Classify(err, "finding")
		}
		g.Severity = severityOf(rank)
		if r, ok := retrofit.RuleOf(g.Rule); ok {
			g.Why, g.Basis, g.Remedy = r.Why, r.Basis, r.Remedy
		}
		g.Lamp = modelName(cat, retrofit.AboutLamp, zeroOr(g.LampModelID))
		g.Driver = modelName(cat, retrofit.AboutGear, zeroOr(g.DriverModelID))
		g.Dimmer = modelName(cat, retrofit.AboutControl, zeroOr(g.DimmerModelID))
		out = append(out, g)
	}
	sortGroups(out)
	return out, domain.Classify(rows.Err(), "finding")
}

package review

import (
	"context"
	"slices"

	"lampward/calc/loading"
	"lampward/calc/retrofit"
	"lampward/domain"
	"lampward/domain/plant"
)

// A Proposal is what would be fitted where: at places, on all of a circuit, or wherever a lamp or driver model stands.
type Proposal struct {
	PlaceIDs          []domain.ID `json:"place_ids,omitempty"`
	CircuitID         *domain.ID  `json:"circuit_id,omitempty"`
	FromLampModelID   *domain.ID  `json:"from_lamp_model_id,omitempty"`   // only lamps of this model are changed
	FromDriverModelID *domain.ID  `json:"from_driver_model_id,omitempty"` // only gear of this model is changed
	LampModelID       *domain.ID  `json:"lamp_model_id,omitempty"`        // to fit
	DriverModelID     *domain.ID  `json:"driver_model_id,omitempty"`
	DimmerModelID     *domain.ID  `json:"dimmer_model_id,omitempty"`
}

// WhatIf is what a proposal would change. Nothing of it is stored.
type WhatIf struct {
	Refused   bool          `json:"refused"` // it brings or worsens a blocking finding
	Buildings int           `json:"buildings"`
	Places    int           `json:"places"` // places changed
	Lamps     int           `json:"lamps"`  // lamps changed
	Opened    []WhatFinding `json:"opened"` // the worst first, at most 100
	Cleared   []WhatFinding `json:"cleared"`
	OpenedN   int           `json:"opened_count"`
	ClearedN  int           `json:"cleared_count"`
	Missing   []MissingFact `json:"missing"`
	BeforeW   *float64      `json:"power_before_w,omitempty"` // of the lamps changed; absent: a wattage is unknown
	AfterW    *float64      `json:"power_after_w,omitempty"`
	BeforeKWh *float64      `json:"energy_before_kwh_per_year,omitempty"` // absent: a wattage or burning hours are unknown
	AfterKWh  *float64      `json:"energy_after_kwh_per_year,omitempty"`
	BeforeRel *float64      `json:"relamps_before_per_year,omitempty"` // burning hours over rated life
	AfterRel  *float64      `json:"relamps_after_per_year,omitempty"`
	Loads     []LoadChange  `json:"loads,omitempty"`   // of the gear, dimmers and circuits changed, at most 100
	Waivers   []Waiver      `json:"waivers,omitempty"` // made by whoever overrode the refusal
	refusing  []Finding     // what it is refused for, as the findings will be recorded once it is fitted
}

// A WhatFinding is a finding that a proposal opens or clears.
type WhatFinding struct {
	FitFinding
	BuildingID  domain.ID `json:"building_id"`
	SubjectKind string    `json:"subject_kind"`
	SubjectID   domain.ID `json:"subject_id"`
	Label       string    `json:"label"`
	lamps       int
}

// A LoadChange is a load against its window before and after.
type LoadChange struct {
	BuildingID  domain.ID      `json:"building_id"`
	SubjectKind string         `json:"subject_kind"`
	SubjectID   domain.ID      `json:"subject_id"`
	Label       string         `json:"label"`
	Before      *retrofit.Load `json:"before,omitempty"`
	After       *retrofit.Load `json:"after,omitempty"`
}

const mostShown = 100

// Validate reports every field of p that breaks a rule. wide allows a proposal that names no place.
func (p *Proposal) Validate(cat *plant.Catalogue, wide bool) error {
	c := domain.NewCheck("proposal")
	if p.LampModelID == nil && p.DriverModelID == nil && p.DimmerModelID == nil {
		c.Add("", "must say what would be fitted: lamp_model_id, driver_model_id or dimmer_model_id")
	}
	if p.PlaceIDs == nil && p.CircuitID == nil && p.FromLampModelID == nil && p.FromDriverModelID == nil {
		c.Add("", "must say where: place_ids, circuit_id, from_lamp_model_id or from_driver_model_id")
	}
	if wide && (p.PlaceIDs != nil || p.CircuitID != nil) {
		c.Add("", "must name no place or circuit where several buildings are asked about")
	}
	named := func(at string, id *domain.ID, there func(domain.ID) bool) {
		if id != nil && !there(*id) {
			c.Add(at, "names no model of the catalogue")
		}
	}
	lamp := func(id domain.ID) bool { return cat.Lamps[id] != nil }
	driver := func(id domain.ID) bool { return cat.Drivers[id] != nil }
	named("/lamp_model_id", p.LampModelID, lamp)
	named("/from_lamp_model_id", p.FromLampModelID, lamp)
	named("/driver_model_id", p.DriverModelID, driver)
	named("/from_driver_model_id", p.FromDriverModelID, driver)
	named("/dimmer_model_id", p.DimmerModelID, func(id domain.ID) bool { return cat.Dimmers[id] != nil })
	return c.Err()
}

// Try judges a proposal in s's building.
func (r *Reviewer) Try(ctx context.Context, s domain.Scope, p *Proposal) (WhatIf, error) {
	cat, err := r.Shelf.At(ctx, s)
	if err != nil {
		return WhatIf{}, err
	}
	if err := p.Validate(cat, false); err != nil {
		return WhatIf{}, err
	}
	sum := newTrial()
	if err := r.try(ctx, s, cat, p, sum); err != nil {
		return WhatIf{}, err
	}
	return sum.result(), nil
}

// trial gathers what proposals change.
type trial struct {
	out             WhatIf
	beforeW, afterW float64
	beforeE, afterE float64
	beforeR, afterR float64
	noW, noE, noR   bool
	before, after   retrofit.Checker
	missing         []retrofit.Question
	buildings       map[domain.ID]bool
}

func newTrial() *trial {
	return &trial{out: WhatIf{Opened: []WhatFinding{}, Cleared: []WhatFinding{}}, buildings: map[domain.ID]bool{}}
}

// try judges the trees of s's building that a proposal reaches, about 500 places at a time.
func (r *Reviewer) try(ctx context.Context, s domain.Scope, cat *plant.Catalogue, p *Proposal, sum *trial) error {
	ids, err := reached(ctx, s, cat, p)
	if err != nil {
		return err
	}
	for len(ids) > 0 {
		n := min(len(ids), 100)
		recs, err := plant.Load(ctx, s, ids[:n])
		if err != nil {
			return err
		}
		ids = ids[n:]
		trees, err := Trees(cat, recs, s.At)
		if err != nil {
			return err
		}
		labels := Labels(recs)
		b := &builder{cat: cat, recs: recs}
		space := map[domain.ID]*domain.ID{}
		for i := range recs.Fixtures {
			space[recs.Fixtures[i].ID] = recs.Fixtures[i].SpaceID
		}
		for i := range trees {
			sum.tree(s, cat, &trees[i], p, labels, func(id domain.ID) *float64 { return b.yearlyHours(space[id]) })
		}
	}
	if p.PlaceIDs != nil && sum.out.Places == 0 {
		return domain.NotFoundf("none of the places named is in use here and holds what is to be changed")
	}
	return nil
}

// reached returns the trees a proposal may change.
func reached(ctx context.Context, s domain.Scope, cat *plant.Catalogue, p *Proposal) ([]domain.ID, error) {
	switch {
	case p.PlaceIDs != nil:
		return touched(ctx, s, Touch{Places: p.PlaceIDs})
	case p.CircuitID != nil:
		return touched(ctx, s, Touch{Circuits: []domain.ID{*p.CircuitID}})
	case p.FromLampModelID != nil:
		ids, _ := cat.Also(plant.KindLamp, *p.FromLampModelID)
		return listIDs(ctx, s, `
			SELECT tree_id FROM place WHERE building_id = $1 AND lamp_model_id = ANY($2) AND retired_at IS NULL
			 UNION
			SELECT p.tree_id FROM unit u JOIN place p ON p.building_id = u.building_id AND p.id = u.place_id
			 WHERE u.building_id = $1 AND p.building_id = $1 AND u.odd AND u.removed_at IS NULL AND u.lamp_model_id = ANY($2)
			 ORDER BY 1`, s.Building, domain.IDs(ids))
	default:
		ids, _ := cat.Also(plant.KindDriver, *p.FromDriverModelID)
		return listIDs(ctx, s, `
			SELECT DISTINCT tree_id FROM place
			 WHERE building_id = $1 AND retired_at IS NULL AND (driver_model_id = ANY($2) OR fixture_model_id = ANY($3))
			 ORDER BY 1`, s.Building, domain.IDs(ids), domain.IDs(cat.FixturesWith(plant.KindDriver, ids)))
	}
}

// tree judges one tree before and after.
func (t *trial) tree(s domain.Scope, cat *plant.Catalogue, tree *Tree, p *Proposal, labels map[domain.ID]string, yearly func(domain.ID) *float64) {
	after := propose(&tree.System)
	changed := t.apply(cat, after, p, yearly)
	if len(changed) == 0 {
		return
	}
	t.buildings[s.Building] = true
	was, is := t.before.Check(&tree.System), t.after.Check(after)
	opened, cleared := difference(was.Findings, is.Findings)
	worse := retrofit.Compare(was, is)
	for _, f := range opened {
		// Where no number says that it is less bad than before, the same trouble by another model is new trouble.
		if f.Blocks && f.Excess == 0 && !slices.ContainsFunc(worse, func(w retrofit.Finding) bool { return sameFinding(&w, f) }) {
			worse = append(worse, *f)
		}
	}
	for i := range worse {
		t.out.Refused = true
		t.out.refusing = append(t.out.refusing, newFinding(s, tree.ID, &worse[i]))
	}
	advice := retrofit.Verdict(was, is)
	t.missing = append(append(t.missing, advice.Missing...), advice.ToConfirm...)
	show := func(list []*retrofit.Finding) (out []WhatFinding) {
		for _, f := range list {
			id := domain.ID(f.Subject.Key)
			out = append(out, WhatFinding{newFitFinding(f), s.Building, string(f.Subject.Kind), id, labels[id], f.Lamps})
		}
		return out
	}
	t.out.Opened, t.out.OpenedN = append(t.out.Opened, show(opened)...), t.out.OpenedN+len(opened)
	t.out.Cleared, t.out.ClearedN = append(t.out.Cleared, show(cleared)...), t.out.ClearedN+len(cleared)
	if len(t.out.Opened) > 4*mostShown {
		t.trim()
	}
	t.loads(s, tree, after, labels)
}

// trouble tells findings apart by rule, subject and models.
type trouble struct {
	rule               string
	subject            loading.Key
	lamp, gear, dimmer loading.Key
}

func troubleOf(f *retrofit.Finding) trouble {
	return trouble{f.Rule, f.Subject.Key, f.Lamp, f.Gear, f.Control}
}

func sameFinding(a, b *retrofit.Finding) bool { return troubleOf(a) == troubleOf(b) }

// difference returns the findings only b has and those only a has.
func difference(a, b []retrofit.Finding) (opened, cleared []*retrofit.Finding) {
	had, has := map[trouble]bool{}, map[trouble]bool{}
	for i := range a {
		had[troubleOf(&a[i])] = true
	}
	for i := range b {
		has[troubleOf(&b[i])] = true
		if !had[troubleOf(&b[i])] {
			opened = append(opened, &b[i])
		}
	}
	for i := range a {
		if !has[troubleOf(&a[i])] {
			cleared = append(cleared, &a[i])
		}
	}
	return opened, cleared
}

// apply fits what is proposed and returns the keys of the places changed.
func (t *trial) apply(cat *plant.Catalogue, sys *loading.System, p *Proposal, yearly func(domain.ID) *float64) map[loading.Key]bool {
	changed := map[loading.Key]bool{}
	wanted := func(key loading.Key, circuit int) bool {
		if p.PlaceIDs != nil && !slices.Contains(p.PlaceIDs, domain.ID(key)) {
			return false
		}
		if p.CircuitID != nil && (circuit < 0 || sys.Circuits[circuit].Key != loading.Key(*p.CircuitID)) {
			return false
		}
		return true
	}
	driverOf := map[int]bool{} // drivers whose luminaires were named
	for i := range sys.Fixtures {
		f := &sys.Fixtures[i]
		if !wanted(f.Key, f.Circuit) {
			continue
		}
		if f.Driver >= 0 {
			driverOf[f.Driver] = true
		}
		if p.LampModelID != nil {
			t.relampAll(cat, f, p, yearly(domain.ID(f.Key)), changed)
		}
	}
	for i := range sys.Drivers {
		d := &sys.Drivers[i]
		if p.DriverModelID == nil || !(wanted(d.Key, d.Circuit) || driverOf[i] && p.PlaceIDs != nil) {
			continue
		}
		if p.FromDriverModelID != nil && (d.Model == nil || d.Model.Key != keyOfDriver(cat, *p.FromDriverModelID)) {
			continue
		}
		refit(d, &cat.Drivers[*p.DriverModelID].Gear)
		changed[d.Key] = true
		t.out.Places++
	}
	for i := range sys.Dimmers {
		d := &sys.Dimmers[i]
		if p.DimmerModelID == nil || p.FromLampModelID != nil || p.FromDriverModelID != nil || !wanted(d.Key, d.Circuit) {
			continue
		}
		d.Model, d.Proposed = &cat.Dimmers[*p.DimmerModelID].Control, true
		changed[d.Key] = true
		t.out.Places++
	}
	return changed
}

func keyOfDriver(cat *plant.Catalogue, id domain.ID) loading.Key {
	if m := cat.Drivers[id]; m != nil {
		return m.ID
	}
	return loading.Key{}
}

// relampAll changes the lamps of one luminaire that a proposal means.
func (t *trial) relampAll(cat *plant.Catalogue, f *loading.Fixture, p *Proposal, yearly *float64, changed map[loading.Key]bool) {
	lamp := &cat.Lamps[*p.LampModelID].Lamp
	n := 0
	if len(f.Lamps) == 0 && p.FromLampModelID == nil && p.PlaceIDs != nil {
		// Nobody looked what is in it: the one lamp proposed is judged, the others are asked for.
		f.Lamps = []loading.LampGroup{{Count: 1}}
	}
	for i := range f.Lamps {
		g := &f.Lamps[i]
		if p.FromLampModelID != nil && (g.Model == nil || g.Model.Key != (&builder{cat: cat}).keyOf(*p.FromLampModelID)) {
			continue
		}
		n += g.Count
		t.count(g.Model, g.Count, yearly, &t.beforeW, &t.beforeE, &t.beforeR)
		t.count(lamp, g.Count, yearly, &t.afterW, &t.afterE, &t.afterR)
		*g = loading.LampGroup{Model: lamp, Count: g.Count, Proposed: true}
	}
	if n > 0 {
		changed[f.Key] = true
		t.out.Places++
		t.out.Lamps += n
	}
}

// count adds the power, yearly energy and yearly relamps of n lamps; what is unknown makes the sum unknown.
func (t *trial) count(m *loading.Lamp, n int, yearly *float64, w, kwh, relamps *float64) {
	if m == nil || m.PowerW == nil {
		t.noW, t.noE = true, true
	} else {
		*w += float64(n) * *m.PowerW
		if yearly != nil {
			*kwh += float64(n) * *m.PowerW * *yearly / 1000
		}
	}
	if yearly == nil {
		t.noE, t.noR = true, true
	}
	if m == nil || m.RatedLifeH == nil || *m.RatedLifeH <= 0 {
		t.noR = true
	} else if yearly != nil {
		*relamps += float64(n) * *yearly / *m.RatedLifeH
	}
}

// loads adds the loads of what changed, before and after.
func (t *trial) loads(s domain.Scope, tree *Tree, after *loading.System, labels map[domain.ID]string) {
	if len(t.out.Loads) >= mostShown {
		return
	}
	was, is := retrofit.Loads(&tree.System), retrofit.Loads(after)
	type key struct {
		subject  retrofit.Subject
		quantity string
	}
	before := map[key]*retrofit.Load{}
	for i := range was {
		before[key{was[i].Subject, string(was[i].Quantity)}] = &was[i]
	}
	for i := range is {
		b := before[key{is[i].Subject, string(is[i].Quantity)}]
		if b != nil && same(b.Present, is[i].Present) && same(b.Max, is[i].Max) && same(b.Min, is[i].Min) || len(t.out.Loads) >= mostShown {
			continue
		}
		id := domain.ID(is[i].Subject.Key)
		t.out.Loads = append(t.out.Loads, LoadChange{s.Building, string(is[i].Subject.Kind), id, labels[id], b, &is[i]})
	}
}

func same(a, b *float64) bool { return a == nil && b == nil || a != nil && b != nil && *a == *b }

// trim keeps the worst findings.
func (t *trial) trim() {
	for _, list := range []*[]WhatFinding{&t.out.Opened, &t.out.Cleared} {
		slices.SortStableFunc(*list, func(a, b WhatFinding) int {
			return retrofit.Weight(retrofit.Severity(b.Severity), b.lamps) - retrofit.Weight(retrofit.Severity(a.Severity), a.lamps)
		})
		if len(*list) > mostShown {
			*list = (*list)[:mostShown]
		}
	}
}

func (t *trial) result() WhatIf {
	t.trim()
	out := t.out
	out.Buildings = len(t.buildings)
	// One fact may be missing in many trees: it is told once.
	seen := map[string]bool{}
	out.Missing = []MissingFact{}
	retrofit.SortQuestions(t.missing)
	for _, m := range missingFacts(t.missing) {
		if k := m.Field + "\x00" + m.About; !seen[k] {
			seen[k] = true
			out.Missing = append(out.Missing, m)
		}
	}
	if len(out.Missing) > MostQuestions {
		out.Missing = out.Missing[:MostQuestions]
	}
	if out.Lamps > 0 {
		if !t.noW {
			out.BeforeW, out.AfterW = &t.beforeW, &t.afterW
		}
		if !t.noE {
			out.BeforeKWh, out.AfterKWh = &t.beforeE, &t.afterE
		}
		if !t.noR {
			out.BeforeRel, out.AfterRel = &t.beforeR, &t.afterR
		}
	}
	return out
}

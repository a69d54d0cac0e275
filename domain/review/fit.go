package review

import (
	"context"
	"fmt"
	"time"

	"lampward/calc/loading"
	"lampward/calc/retrofit"
	"lampward/domain"
	"lampward/domain/plant"
)

// A LampsOf is a number of lamps of one model, by the catalogue or by what is printed on them.
type LampsOf struct {
	LampModelID *domain.ID    `json:"lamp_model_id,omitempty"`
	Lamp        *loading.Lamp `json:"lamp,omitempty"`
	Count       int           `json:"count"`
}

// A FitRequest asks "may I fit this here?": a lamp, and either a luminaire on record or what a person on a ladder can
// see, which is what gear there is, what is printed on it, how many lamps hang on it, and whether a dimmer does.
type FitRequest struct {
	BuildingID *domain.ID `json:"building_id,omitempty"` // of the place, or whose mains count
	PlaceID    *domain.ID `json:"place_id,omitempty"`    // a luminaire on record
	Holder     int        `json:"holder,omitempty"`      // of its lamps, from 1; 0: all of them

	LampModelID *domain.ID    `json:"lamp_model_id,omitempty"` // what is to be fitted: by the catalogue ...
	Lamp        *loading.Lamp `json:"lamp,omitempty"`          // ... or as printed
	Lamps       int           `json:"lamps,omitempty"`         // how many of them hang on the gear
	Staying     []LampsOf     `json:"staying,omitempty"`       // lamps that stay beside them

	DriverModelID  *domain.ID       `json:"driver_model_id,omitempty"`
	Gear           *loading.Gear    `json:"gear,omitempty"`      // kind and what is printed on it
	GearNone       bool             `json:"gear_none,omitempty"` // looked: the lamp is straight on the circuit
	DimmerModelID  *domain.ID       `json:"dimmer_model_id,omitempty"`
	Dimmer         *loading.Control `json:"dimmer,omitempty"`
	DimmerNone     bool             `json:"dimmer_none,omitempty"` // looked: a plain switch
	FixtureModelID *domain.ID       `json:"fixture_model_id,omitempty"`
	Fitting        *loading.Fitting `json:"fitting,omitempty"`
	Supply         *loading.Supply  `json:"supply,omitempty"` // the mains; the building's where absent

	Options bool  `json:"options,omitempty"` // look for what would do, where the answer is no
	Keep    *Keep `json:"keep,omitempty"`    // store what was seen as a place
}

// Keep says where what was seen is stored. The building is the request's.
type Keep struct {
	SpaceID  *domain.ID `json:"space_id,omitempty"`
	Tag      string     `json:"tag,omitempty"`
	Position string     `json:"position,omitempty"`
}

// A FitAnswer is the answer with its reasons. It is a screening estimate; local codes and licensed practice decide.
type FitAnswer struct {
	Answer   string        `json:"answer"` // fit, do_not_fit, fit_only_if
	Sum      string        `json:"sum"`    // the arithmetic in one line
	Findings []FitFinding  `json:"findings"`
	Missing  []MissingFact `json:"missing"`    // facts that could change the answer, the most useful first
	Confirm  []MissingFact `json:"to_confirm"` // facts not known that seldom change it
	Cautions []Caution     `json:"cautions"`
	Options  []Option      `json:"options,omitempty"`
	Kept     *KeptPlace    `json:"kept,omitempty"`
}

// Caution is what people must know before they work at a place.
type Caution = retrofit.Caution

// A FitFinding is a finding that the proposal brings.
type FitFinding struct {
	Rule     string   `json:"rule"`
	Severity string   `json:"severity"`
	Sureness string   `json:"sureness"`
	Blocks   bool     `json:"blocks"`
	Sentence string   `json:"sentence"`
	Steps    []Step   `json:"steps"`
	Basis    string   `json:"basis"`
	Remedy   string   `json:"remedy"`
	Cautions []string `json:"cautions"`
}

// A MissingFact is a fact that could change the answer.
type MissingFact struct {
	Field    string `json:"field"`
	Ask      string `json:"ask"`
	About    string `json:"about,omitempty"`
	Severity string `json:"severity"` // at stake
	Blocks   bool   `json:"blocks"`
}

// A KeptPlace is what a fit check stored.
type KeptPlace struct {
	DriverID   *domain.ID  `json:"driver_id,omitempty"`
	DimmerID   *domain.ID  `json:"dimmer_id,omitempty"`
	FixtureIDs []domain.ID `json:"fixture_ids"`
	Tag        string      `json:"tag"`
}

// Validate reports every field of q that breaks a rule. cat may be nil: then nothing may be named by an identifier.
func (q *FitRequest) Validate(cat *plant.Catalogue) error {
	c := domain.NewCheck("question")
	exactly := func(at, what string, given ...bool) {
		n := 0
		for _, g := range given {
			if g {
				n++
			}
		}
		if n > 1 {
			c.Add(at, "must be given in one way: %s", what)
		}
	}
	exactly("/lamp", "lamp_model_id or lamp", q.LampModelID != nil, q.Lamp != nil)
	exactly("/gear", "driver_model_id, gear or gear_none", q.DriverModelID != nil, q.Gear != nil, q.GearNone)
	exactly("/dimmer", "dimmer_model_id, dimmer or dimmer_none", q.DimmerModelID != nil, q.Dimmer != nil, q.DimmerNone)
	exactly("/fitting", "fixture_model_id or fitting", q.FixtureModelID != nil, q.Fitting != nil)
	if q.LampModelID == nil && q.Lamp == nil {
		c.Add("/lamp", "must say what is to be fitted")
	}
	if q.PlaceID != nil {
		if q.BuildingID == nil {
			c.Add("/building_id", "must name the building of the place")
		}
		if q.DriverModelID != nil || q.Gear != nil || q.GearNone || q.DimmerModelID != nil || q.Dimmer != nil || q.DimmerNone || q.Lamps != 0 || q.Staying != nil || q.Keep != nil {
			c.Add("/place_id", "must be given alone with the lamp: what else there is, is on record")
		}
	}
	c.Count("/lamps", &q.Lamps, 0, 1000)
	c.Count("/holder", &q.Holder, 0, 1000)
	if q.Keep != nil && q.BuildingID == nil {
		c.Add("/building_id", "must say in which building the place is kept")
	}
	for i := range q.Staying {
		c.Count(fmt.Sprintf("/staying/%d/count", i), &q.Staying[i].Count, 1, 1000)
	}
	named := func(at string, id *domain.ID, there func(domain.ID) bool) {
		if id != nil && (cat == nil || !there(*id)) {
			c.Add(at, "names no model of the catalogue")
		}
	}
	named("/lamp_model_id", q.LampModelID, func(id domain.ID) bool { return cat.Lamps[id] != nil })
	named("/driver_model_id", q.DriverModelID, func(id domain.ID) bool { return cat.Drivers[id] != nil })
	named("/dimmer_model_id", q.DimmerModelID, func(id domain.ID) bool { return cat.Dimmers[id] != nil })
	named("/fixture_model_id", q.FixtureModelID, func(id domain.ID) bool { return cat.Fixtures[id] != nil })
	for i, l := range q.Staying {
		at := fmt.Sprintf("/staying/%d", i)
		named(at+"/lamp_model_id", l.LampModelID, func(id domain.ID) bool { return cat.Lamps[id] != nil })
		c.Under(at, func(c *domain.Check) { nested(c, "/lamp", l.Lamp) })
	}
	nested(c, "/lamp", q.Lamp)
	if q.Gear != nil {
		checkNested(c, "/gear", (&plant.DriverModel{ModelHead: plant.ModelHead{Code: "x"}, Gear: *q.Gear}).Validate)
	}
	if q.Dimmer != nil {
		checkNested(c, "/dimmer", (&plant.DimmerModel{ModelHead: plant.ModelHead{Code: "x"}, Control: *q.Dimmer}).Validate)
	}
	if q.Fitting != nil {
		checkNested(c, "/fitting", (&plant.FixtureModel{ModelHead: plant.ModelHead{Code: "x"}, Fitting: *q.Fitting}).Validate)
	}
	if q.Supply != nil {
		c.Range("/supply/mains_v", q.Supply.MainsV, 50, 1000, "V")
		c.Range("/supply/mains_hz", q.Supply.MainsHz, 16, 400, "Hz")
		c.OneOf("/supply/wiring_rules", q.Supply.WiringRules, loading.IEC60364, loading.NFPA70, loading.OtherRules)
	}
	return c.Err()
}

func nested(c *domain.Check, at string, l *loading.Lamp) {
	if l != nil {
		checkNested(c, at, (&plant.LampModel{ModelHead: plant.ModelHead{Code: "x"}, Lamp: *l}).Validate)
	}
}

// checkNested adds the fields a model's own rules refuse; a description off the ladder needs no name.
func checkNested(c *domain.Check, at string, validate func() error) {
	for _, f := range domain.FieldsOf(validate()) {
		if f.Pointer != "/name" || f.Detail != "must not be empty" {
			c.Add(at+f.Pointer, "%s", f.Detail)
		}
	}
}

// FitCheck answers a request that names no place on record. cat may be nil where nothing is named by an identifier.
func FitCheck(cat *plant.Catalogue, supply loading.Supply, q *FitRequest) (FitAnswer, error) {
	if err := q.Validate(cat); err != nil {
		return FitAnswer{}, err
	}
	if cat == nil {
		cat = plant.NewCatalogue(nil, nil, nil, nil, nil)
	}
	sys := q.system(cat, supply)
	advice := retrofit.Verdict(retrofit.Result{}, retrofit.Check(sys))
	if q.DimmerModelID == nil && q.Dimmer == nil && !q.DimmerNone {
		// Nobody said whether a dimmer acts on it: a yes would rest on silence.
		advice.Missing = append(advice.Missing, retrofit.Question{Field: retrofit.FieldDimmerModel, Rule: "dimmer_wrong_for_gear",
			Severity: retrofit.High, Blocks: true, Places: 1, About: retrofit.About{Kind: "dimmer", Index: -1, Name: "is there a dimmer, or a plain switch?"}})
		if advice.Answer == retrofit.Fit {
			advice.Answer = retrofit.FitOnlyIf
		}
	}
	a := newAnswer(advice, cautionsAt(sys, 0))
	if q.Options && a.Answer == DoesNotFit {
		a.Options = bareOptions(cat, sys)
	}
	return a, nil
}

// system is what the request describes, as far as it does.
func (q *FitRequest) system(cat *plant.Catalogue, supply loading.Supply) *loading.System {
	if q.Supply != nil {
		supply = *q.Supply
	}
	sys := &loading.System{Supply: supply, Pairings: cat.Pairings, Proposal: true}
	// What a person on a ladder cannot see of the circuit is not asked for here.
	sys.Circuits = []loading.Circuit{{CircuitFacts: loading.CircuitFacts{RCD: "none", Neutral: "own", CentralBattery: "none"}}}
	var controls []loading.Controlled
	if dimmer := q.dimmer(cat); dimmer != nil {
		sys.Dimmers = []loading.Dimmer{{Model: dimmer, Circuit: 0}}
		controls = []loading.Controlled{{Dimmer: 0, Path: pathOf(dimmer)}}
	}
	fixture := loading.Fixture{Model: q.fitting(cat), GearNone: q.GearNone, Driver: -1, Circuit: 0}
	if !q.GearNone {
		sys.Drivers = []loading.Driver{{Model: q.gear(cat), Circuit: 0, Controls: controls}}
		fixture.Driver = 0
	} else {
		fixture.Controls = controls
	}
	lamp := lampOf(cat, q.LampModelID, q.Lamp)
	if q.Lamps > 0 {
		fixture.Lamps = append(fixture.Lamps, loading.LampGroup{Model: lamp, Count: q.Lamps, Proposed: true})
	} else {
		fixture.Lamps = append(fixture.Lamps, loading.LampGroup{Model: lamp, Count: 1, Proposed: true})
		fixture.LampsUnknown = true
	}
	for _, s := range q.Staying {
		fixture.Lamps = append(fixture.Lamps, loading.LampGroup{Model: lampOf(cat, s.LampModelID, s.Lamp), Count: s.Count})
	}
	sys.Fixtures = []loading.Fixture{fixture}
	return sys
}

// pathOf says what a dimmer acts by: it sits in the feed, or it sends a signal.
func pathOf(dimmer *loading.Control) string {
	switch dimmer.Kind {
	case loading.DALI, loading.Analogue0to10V, loading.Analogue1to10V:
		return loading.Signal
	}
	return loading.PowerPath
}

func lampOf(cat *plant.Catalogue, id *domain.ID, printed *loading.Lamp) *loading.Lamp {
	if id != nil {
		if m := cat.Lamps[*id]; m != nil {
			return &m.Lamp
		}
	}
	return printed
}

func (q *FitRequest) gear(cat *plant.Catalogue) *loading.Gear {
	if q.DriverModelID != nil {
		return &cat.Drivers[*q.DriverModelID].Gear
	}
	return q.Gear
}

func (q *FitRequest) dimmer(cat *plant.Catalogue) *loading.Control {
	if q.DimmerModelID != nil {
		return &cat.Dimmers[*q.DimmerModelID].Control
	}
	return q.Dimmer
}

func (q *FitRequest) fitting(cat *plant.Catalogue) *loading.Fitting {
	if q.FixtureModelID != nil {
		return &cat.Fixtures[*q.FixtureModelID].Fitting
	}
	return q.Fitting
}

func cautionsAt(sys *loading.System, fixture int) []Caution {
	return retrofit.JobCautions(sys, retrofit.Subject{Kind: retrofit.OnFixture, Index: fixture}, retrofit.Job{})
}

func newAnswer(a retrofit.Advice, cautions []Caution) FitAnswer {
	out := FitAnswer{Answer: string(a.Answer), Sum: a.Sum, Findings: []FitFinding{}, Missing: missingFacts(a.Missing), Confirm: missingFacts(a.ToConfirm), Cautions: cautions}
	for i := range a.Findings {
		out.Findings = append(out.Findings, newFitFinding(&a.Findings[i]))
	}
	if out.Cautions == nil {
		out.Cautions = []Caution{}
	}
	return out
}

func newFitFinding(f *retrofit.Finding) FitFinding {
	out := FitFinding{Rule: f.Rule, Severity: string(f.Severity), Sureness: string(f.Sureness), Blocks: f.Blocks, Sentence: f.Sentence,
		Steps: f.Steps, Basis: f.Basis, Remedy: f.Remedy, Cautions: f.Cautions}
	if out.Steps == nil {
		out.Steps = []Step{}
	}
	if out.Cautions == nil {
		out.Cautions = []string{}
	}
	return out
}

func missingFacts(qs []retrofit.Question) []MissingFact {
	out := []MissingFact{}
	for _, q := range qs {
		out = append(out, MissingFact{Field: string(q.Field), Ask: q.Field.Text().Ask, About: q.About.Name, Severity: string(q.Severity), Blocks: q.Blocks})
	}
	return out
}

// FitAtPlace answers for a luminaire on record, in the building of s.
func (r *Reviewer) FitAtPlace(ctx context.Context, s domain.Scope, q *FitRequest) (FitAnswer, error) {
	cat, err := r.Shelf.At(ctx, s)
	if err != nil {
		return FitAnswer{}, err
	}
	if err := q.Validate(cat); err != nil {
		return FitAnswer{}, err
	}
	t, err := treeOf(ctx, s, cat, *q.PlaceID)
	if err != nil {
		return FitAnswer{}, err
	}
	i := t.fixture(*q.PlaceID)
	if i < 0 {
		return FitAnswer{}, domain.Conflictf("a lamp cannot be fitted there: the place is not a luminaire")
	}
	before := retrofit.Check(&t.System)
	after := propose(&t.System)
	lamp := lampOf(cat, q.LampModelID, q.Lamp)
	relamp(&after.Fixtures[i], lamp, q.Holder)
	a := newAnswer(retrofit.Verdict(before, retrofit.Check(after)), cautionsAt(after, i))
	if q.Options && a.Answer == DoesNotFit {
		// A place whose lamps nobody could name has no options; the answer stands without them.
		if a.Options, err = optionsAt(ctx, s, cat, t, *q.PlaceID); domain.KindOf(err) == domain.Conflict {
			err = nil
		}
	}
	return a, err
}

// treeOf loads and builds the tree of one place or circuit.
func treeOf(ctx context.Context, s domain.Scope, cat *plant.Catalogue, id domain.ID) (*Tree, error) {
	t, _, err := treeWith(ctx, s, cat, id)
	return t, err
}

// treeWith is treeOf with the records it was built from.
func treeWith(ctx context.Context, s domain.Scope, cat *plant.Catalogue, id domain.ID) (*Tree, *plant.Records, error) {
	ids, err := touched(ctx, s, Touch{Places: []domain.ID{id}, Circuits: []domain.ID{id}})
	if err != nil {
		return nil, nil, err
	}
	recs, err := plant.Load(ctx, s, ids)
	if err != nil {
		return nil, nil, err
	}
	trees, err := Trees(cat, recs, s.At)
	if err != nil {
		return nil, nil, err
	}
	for i := range trees {
		for _, m := range trees[i].Members {
			if m.ID == id {
				return &trees[i], recs, nil
			}
		}
	}
	return nil, nil, domain.NotFoundf("there is no such place in use")
}

// fixture returns the position of a luminaire in the tree's system, -1 if it is not one.
func (t *Tree) fixture(id domain.ID) int {
	for i := range t.System.Fixtures {
		if domain.ID(t.System.Fixtures[i].Key) == id {
			return i
		}
	}
	return -1
}

// propose returns a copy of a system in which what is fitted may be changed without touching the original.
func propose(sys *loading.System) *loading.System {
	after := *sys
	after.Proposal = true
	after.Drivers = append([]loading.Driver{}, sys.Drivers...)
	after.Dimmers = append([]loading.Dimmer{}, sys.Dimmers...)
	after.Fixtures = append([]loading.Fixture{}, sys.Fixtures...)
	for i := range after.Fixtures {
		after.Fixtures[i].Lamps = append([]loading.LampGroup{}, sys.Fixtures[i].Lamps...)
	}
	return &after
}

// refit proposes gear in the place of what is there: what hangs on it was chosen for the separation of the gear before it,
// and a current somebody set goes with the gear it was set on.
func refit(d *loading.Driver, g *loading.Gear) {
	if d.Model != nil && d.Model.Key != g.Key && d.Model.Separation != "" {
		d.SeparationBefore = d.Model.Separation
	}
	d.Model, d.Proposed, d.SetMA = g, true, g.OutputMaxMA
}

// relamp proposes a lamp in one holder of a luminaire, or in all of them where holder is 0. A lamp in one holder of
// several takes the place of one of the largest group.
func relamp(f *loading.Fixture, lamp *loading.Lamp, holder int) {
	n := 0
	for _, g := range f.Lamps {
		n += g.Count
	}
	if holder == 0 || n <= 1 {
		f.Lamps = []loading.LampGroup{{Model: lamp, Count: max(n, 1), Proposed: true}}
		return
	}
	largest := 0
	for i := range f.Lamps {
		if f.Lamps[i].Count > f.Lamps[largest].Count {
			largest = i
		}
	}
	g := &f.Lamps[largest]
	g.Count--
	g.Dark = max(g.Dark-1, 0)
	if g.Count == 0 {
		f.Lamps = append(f.Lamps[:largest], f.Lamps[largest+1:]...)
	}
	f.Lamps = append(f.Lamps, loading.LampGroup{Model: lamp, Count: 1, Proposed: true})
}

// Store keeps what a fit check described as places of s's building: the gear, the dimmer and a luminaire for each kind of
// lamp on it, those proposed only if fitted is true. Models that are not in the catalogue were stored by KeepModels
// first, so every part has its identifier.
func (r *Reviewer) Store(ctx context.Context, s domain.Scope, q *FitRequest, fitted bool) (KeptPlace, Outcome, error) {
	var kept KeptPlace
	cat, err := r.Shelf.At(ctx, s)
	if err != nil {
		return kept, Outcome{}, err
	}
	out, err := r.Change(ctx, s, Touch{}, func(e *plant.Edit) error {
		kept = KeptPlace{FixtureIDs: []domain.ID{}}
		head := func() plant.PlaceHead {
			return plant.PlaceHead{SpaceID: q.Keep.SpaceID, Position: q.Keep.Position, FactSource: loading.SeenOnNameplate}
		}
		var feed *domain.ID
		signal := false
		if q.DimmerModelID != nil {
			d := plant.Dimmer{PlaceHead: head(), DimmerModelID: q.DimmerModelID}
			if err := e.CreateDimmer(ctx, &d); err != nil {
				return err
			}
			kept.DimmerID = &d.ID
			if m := cat.Dimmers[*q.DimmerModelID]; m != nil && pathOf(&m.Control) == loading.Signal {
				signal = true
			} else {
				feed = &d.ID
			}
		}
		controlled := func(place domain.ID) error {
			if !signal {
				return nil
			}
			return e.CreateControl(ctx, &plant.ControlLink{DimmerID: *kept.DimmerID, PlaceID: &place, Position: 1, Path: loading.Signal})
		}
		if q.DriverModelID != nil {
			d := plant.Driver{PlaceHead: head(), DriverModelID: q.DriverModelID}
			d.FedByPlaceID = feed
			if err := e.CreateDriver(ctx, &d); err != nil {
				return err
			}
			if err := controlled(d.ID); err != nil {
				return err
			}
			kept.DriverID, feed = &d.ID, &d.ID
		}
		for i, group := range q.kept(fitted) {
			f := plant.Fixture{PlaceHead: head(), FixtureModelID: q.FixtureModelID, LampModelID: group.LampModelID}
			f.FedByPlaceID = feed
			if i == 0 {
				f.Tag = q.Keep.Tag
			}
			switch {
			case q.GearNone:
				f.Gear = "none"
			case q.DriverModelID != nil:
				f.Gear = "remote"
			}
			if group.Count > 0 {
				f.LampCount = &group.Count
			}
			if fitted && i == 0 {
				at := s.At.Truncate(time.Second)
				f.LampsFittedAt = &at
			}
			if err := e.CreateFixture(ctx, &f); err != nil {
				return err
			}
			if q.DriverModelID == nil {
				if err := controlled(f.ID); err != nil {
					return err
				}
			}
			kept.FixtureIDs = append(kept.FixtureIDs, f.ID)
			if i == 0 {
				kept.Tag = f.Tag
			}
		}
		return nil
	})
	return kept, out, err
}

// kept are the lamps that a place is kept with, a luminaire for each kind: those proposed first if they are fitted, and
// those that stay. There is one luminaire at least, whose lamps are then not known.
func (q *FitRequest) kept(fitted bool) []LampsOf {
	var groups []LampsOf
	if fitted {
		groups = append(groups, LampsOf{LampModelID: q.LampModelID, Count: q.Lamps})
	}
	groups = append(groups, q.Staying...)
	if len(groups) == 0 {
		groups = []LampsOf{{}}
	}
	return groups
}

// KeepModels stores, as provisional models, what a fit check described by what is printed on it, and makes the
// request name them. s must have no building.
func KeepModels(ctx context.Context, s domain.Scope, q *FitRequest) error {
	code := func() string { return "NEW-" + domain.NewID().String()[24:] }
	named := func(name *string, what string) {
		if *name == "" {
			*name = what + ", as read on site"
		}
	}
	if q.Gear != nil {
		m := plant.DriverModel{ModelHead: plant.ModelHead{Code: code(), Provisional: true}, Gear: *q.Gear}
		named(&m.Name, "Gear")
		if err := plant.CreateModel(ctx, s, plant.DriverModels, &m, "driver_model"); err != nil {
			return err
		}
		q.DriverModelID, q.Gear = &m.ID, nil
	}
	if q.Dimmer != nil {
		m := plant.DimmerModel{ModelHead: plant.ModelHead{Code: code(), Provisional: true}, Control: *q.Dimmer}
		named(&m.Name, "Dimmer")
		if err := plant.CreateModel(ctx, s, plant.DimmerModels, &m, "dimmer_model"); err != nil {
			return err
		}
		q.DimmerModelID, q.Dimmer = &m.ID, nil
	}
	if q.Fitting != nil {
		m := plant.FixtureModel{ModelHead: plant.ModelHead{Code: code(), Provisional: true}, Fitting: *q.Fitting}
		named(&m.Name, "Luminaire")
		if err := plant.CreateModel(ctx, s, plant.FixtureModels, &m, "fixture_model"); err != nil {
			return err
		}
		q.FixtureModelID, q.Fitting = &m.ID, nil
	}
	lamp := func(id **domain.ID, printed **loading.Lamp) error {
		if *printed == nil {
			return nil
		}
		m := plant.LampModel{ModelHead: plant.ModelHead{Code: code(), Provisional: true}, Lamp: **printed}
		named(&m.Name, "Lamp")
		if err := plant.CreateModel(ctx, s, plant.LampModels, &m, "lamp_model"); err != nil {
			return err
		}
		*id, *printed = &m.ID, nil
		return nil
	}
	if err := lamp(&q.LampModelID, &q.Lamp); err != nil {
		return err
	}
	for i := range q.Staying {
		if err := lamp(&q.Staying[i].LampModelID, &q.Staying[i].Lamp); err != nil {
			return err
		}
	}
	return nil
}

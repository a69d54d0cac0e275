package review

import (
	"cmp"
	"context"
	"fmt"
	"slices"
	"strconv"

	"lampward/calc/loading"
	"lampward/calc/retrofit"
	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// optionYears is the horizon over which options are ranked.
const optionYears = 10

// mostOptions is how many options are returned; mostCombinations how many are looked at.
const (
	mostOptions          = 20
	mostCombinations     = 20_000
	mostBareCombinations = 2_000 // off the ladder somebody waits: about 50 ms
)

// An Option is a combination that may safely be fitted at a place and on all that hangs on its gear: nothing above low
// comes of it and no blocking rule waits for a fact.
type Option struct {
	LampModelID   domain.ID     `json:"lamp_model_id"`
	Lamp          string        `json:"lamp"`
	DriverModelID *domain.ID    `json:"driver_model_id,omitempty"` // absent: the gear stays
	Driver        string        `json:"driver,omitempty"`
	DimmerModelID *domain.ID    `json:"dimmer_model_id,omitempty"` // absent: the dimmer stays, or there is none
	Dimmer        string        `json:"dimmer,omitempty"`
	Lamps         int           `json:"lamps"`      // lamps to fit
	ToConfirm     []MissingFact `json:"to_confirm"` // not blocking
	Notes         []string      `json:"notes"`      // low findings
	PowerW        *float64      `json:"power_w,omitempty"`
	Cost          *domain.Money `json:"cost_10_years,omitempty"` // absent: a price, a rate, a life or the hours are unknown
	CostSteps     []Step        `json:"cost_steps"`
	CostUnknown   string        `json:"cost_unknown,omitempty"` // what is missing for the cost
	cost          float64
}

// optioner looks for options at one place.
type optioner struct {
	cat    *plant.Catalogue
	prices map[domain.ID]plant.Price
	rate   *site.Rate
	yearly *float64
	sys    *loading.System // the gear with all its luminaires, alone on its circuit
	driver int             // position of the gear in sys; -1: none
	count  int             // lamps on it
	most   int             // combinations looked at
	before retrofit.Result
	check  retrofit.Checker
}

// Options returns what may safely be fitted at a luminaire and on all that hangs on the same gear, cheapest over ten
// years first; those whose cost is unknown come last.
func (r *Reviewer) Options(ctx context.Context, s domain.Scope, place domain.ID) ([]Option, error) {
	cat, err := r.Shelf.At(ctx, s)
	if err != nil {
		return nil, err
	}
	t, err := treeOf(ctx, s, cat, place)
	if err != nil {
		return nil, err
	}
	return optionsAt(ctx, s, cat, t, place)
}

func optionsAt(ctx context.Context, s domain.Scope, cat *plant.Catalogue, t *Tree, place domain.ID) ([]Option, error) {
	i := t.fixture(place)
	if i < 0 {
		return nil, domain.Conflictf("options are for luminaires; this place is another kind")
	}
	o := &optioner{cat: cat, most: mostCombinations}
	if err := o.load(ctx, s, t, place); err != nil {
		return nil, err
	}
	o.sys, o.driver = part(&t.System, i)
	o.before = retrofit.Check(o.sys)
	cap := capOf(&t.System.Fixtures[i])
	if cap == "" {
		return nil, &domain.Error{Kind: domain.Conflict, Msg: "the cap of the lamps is not on record, so no lamp can be named: record fixture_model.cap or the lamp now fitted"}
	}
	for j := range o.sys.Fixtures {
		if other := capOf(&o.sys.Fixtures[j]); other != "" && other != cap {
			return nil, domain.Conflictf("lamps of caps %s and %s hang on the same gear, so no one lamp suits all: move the luminaires of one cap to other gear first", cap, other)
		}
	}
	return o.confirm(t, o.ranked(cap)), nil
}

// bareOptions returns what of the catalogue would do where nothing is on record, what cannot be seen from a ladder aside.
// The cost is left out: neither hours nor rates are known there.
func bareOptions(cat *plant.Catalogue, sys *loading.System) []Option {
	cap := capOf(&sys.Fixtures[0])
	if cap == "" {
		return nil
	}
	o := &optioner{cat: cat, most: mostBareCombinations, sys: sys, driver: sys.Fixtures[0].Driver}
	out := o.ranked(cap)
	out = out[:min(len(out), mostOptions)]
	for i := range out {
		out[i].CostUnknown = "the hours a year and the energy rate of a place on record"
	}
	return out
}

// ranked searches and puts the cheapest first.
func (o *optioner) ranked(cap string) []Option {
	for j := range o.sys.Fixtures {
		for _, g := range o.sys.Fixtures[j].Lamps {
			o.count += g.Count
		}
	}
	o.count = max(o.count, 1)
	found := o.search(cap)
	slices.SortStableFunc(found, func(a, b Option) int {
		return cmp.Or(boolInt(a.Cost == nil)-boolInt(b.Cost == nil), cmp.Compare(a.cost, b.cost),
			boolInt(a.DriverModelID != nil)-boolInt(b.DriverModelID != nil), cmp.Compare(len(a.ToConfirm), len(b.ToConfirm)), cmp.Compare(a.Lamp, b.Lamp))
	})
	return found
}

func boolInt(b bool) int {
	if b {
		return 1
	}
	return 0
}

// load reads what the cost needs.
func (o *optioner) load(ctx context.Context, s domain.Scope, t *Tree, place domain.ID) error {
	day, err := Today(ctx, s)
	if err != nil {
		return err
	}
	if o.prices, err = plant.PricesOn(ctx, s, day); err != nil {
		return err
	}
	rate, ok, err := site.RateOn(ctx, s, site.EnergyRate, day)
	if err != nil {
		return err
	}
	if ok {
		o.rate = &rate
	}
	var use string
	err = s.QueryRow(ctx, `
		SELECT sp.yearly_hours, sp.use
		  FROM place p
		  JOIN space sp ON sp.building_id = p.building_id AND sp.id = p.space_id
		 WHERE p.building_id = $1 AND sp.building_id = $1 AND p.id = $2`, s.Building, place).Scan(&o.yearly, &use)
	if domain.KindOf(domain.Classify(err, "space")) == domain.NotFound {
		return nil
	}
	if err != nil {
		return domain.Classify(err, "space")
	}
	if o.yearly == nil {
		o.yearly = o.cat.Uses[use].YearlyHours
	}
	return nil
}

// part returns a system of one luminaire's gear with everything on it, and the position of the gear.
func part(sys *loading.System, fixture int) (*loading.System, int) {
	f := &sys.Fixtures[fixture]
	out := loading.System{Supply: sys.Supply, Circuits: sys.Circuits, Dimmers: sys.Dimmers, Pairings: sys.Pairings}
	if f.Driver < 0 {
		out.Fixtures = []loading.Fixture{*f}
		return &out, -1
	}
	out.Drivers = []loading.Driver{sys.Drivers[f.Driver]}
	for i := range sys.Fixtures {
		if sys.Fixtures[i].Driver == f.Driver {
			g := sys.Fixtures[i]
			g.Driver = 0
			out.Fixtures = append(out.Fixtures, g)
		}
	}
	return &out, 0
}

func capOf(f *loading.Fixture) string {
	if f.Model != nil && f.Model.Cap != "" {
		return f.Model.Cap
	}
	for _, g := range f.Lamps {
		if g.Model != nil && g.Model.Cap != "" {
			return g.Model.Cap
		}
	}
	return ""
}

// search tries every lamp of the cap with the gear there is, with every other gear, and with every other dimmer.
func (o *optioner) search(cap string) []Option {
	lamps := inUse(o.cat.Lamps, func(m *plant.LampModel) bool { return m.Cap == cap })
	drivers := []*plant.DriverModel{nil}
	if o.driver >= 0 && !o.sys.Drivers[o.driver].Integral {
		drivers = append(drivers, inUse(o.cat.Drivers, func(m *plant.DriverModel) bool { return m.Kind != "" && m.Kind != loading.EmergencyPack })...)
	}
	dimmers := []*plant.DimmerModel{nil}
	if o.dimmed() >= 0 {
		dimmers = append(dimmers, inUse(o.cat.Dimmers, func(m *plant.DimmerModel) bool { return m.Kind != "" })...)
	}
	var found []Option
	tried := 0
	for _, dimmer := range dimmers {
		for _, driver := range drivers {
			for _, lamp := range lamps {
				if tried++; tried > o.most {
					return found
				}
				sys := o.with(o.sys, lamp, driver, dimmer)
				a := retrofit.Verdict(o.before, o.check.Check(sys))
				if safe(a, o.most == mostBareCombinations) {
					found = append(found, o.option(lamp, driver, dimmer, a))
				}
			}
		}
	}
	return found
}

// safe reports whether nothing above low comes of a proposal and no blocking rule waits for a fact; of a place that is not
// on record, for one that can be seen.
func safe(a retrofit.Advice, seen bool) bool {
	for i := range a.Findings {
		if a.Findings[i].Blocks || a.Findings[i].Severity != retrofit.Low {
			return false
		}
	}
	blocks := func(q retrofit.Question) bool { return q.Blocks }
	if slices.ContainsFunc(a.Missing, blocks) || !seen && slices.ContainsFunc(a.ToConfirm, blocks) {
		return false
	}
	return a.Answer != retrofit.DoNotFit
}

// inUse returns the models people may choose from, in the order of their codes.
func inUse[T any, P interface {
	*T
	Head() *plant.ModelHead
}](models map[domain.ID]P, want func(P) bool) []P {
	var out []P
	for id, m := range models {
		h := m.Head()
		if h.ID == id && h.RetiredAt == nil && !h.Provisional && want(m) {
			out = append(out, m)
		}
	}
	slices.SortFunc(out, func(a, b P) int { return cmp.Compare(a.Head().Code, b.Head().Code) })
	return out
}

// dimmed returns the position of the dimmer in the power path of the gear or the luminaire, -1 if there is none.
func (o *optioner) dimmed() int {
	list := o.sys.Fixtures[0].Controls
	if o.driver >= 0 {
		list = o.sys.Drivers[o.driver].Controls
	}
	for _, c := range list {
		if c.Path == loading.PowerPath {
			return c.Dimmer
		}
	}
	return -1
}

// with proposes a combination on all luminaires of a system that hang on the gear.
func (o *optioner) with(sys *loading.System, lamp *plant.LampModel, driver *plant.DriverModel, dimmer *plant.DimmerModel) *loading.System {
	after := propose(sys)
	for i := range after.Fixtures {
		relamp(&after.Fixtures[i], &lamp.Lamp, 0)
	}
	if driver != nil {
		refit(&after.Drivers[o.driver], &driver.Gear)
	}
	if dimmer != nil {
		d := o.dimmed()
		after.Dimmers[d].Model, after.Dimmers[d].Proposed = &dimmer.Control, true
	}
	return after
}

func (o *optioner) option(lamp *plant.LampModel, driver *plant.DriverModel, dimmer *plant.DimmerModel, a retrofit.Advice) Option {
	out := Option{LampModelID: lamp.ID, Lamp: lamp.Name, Lamps: o.count, ToConfirm: missingFacts(slices.Concat(a.Missing, a.ToConfirm)), Notes: []string{}, CostSteps: []Step{}}
	for i := range a.Findings {
		out.Notes = append(out.Notes, a.Findings[i].Sentence)
	}
	if driver != nil {
		out.DriverModelID, out.Driver = &driver.ID, driver.Name
	}
	if dimmer != nil {
		out.DimmerModelID, out.Dimmer = &dimmer.ID, dimmer.Name
	}
	o.price(&out, lamp, driver, dimmer)
	return out
}

// price adds the cost over ten years: what is bought now, lamps bought again at the end of their rated life, energy.
func (o *optioner) price(out *Option, lamp *plant.LampModel, driver *plant.DriverModel, dimmer *plant.DimmerModel) {
	unknown := func(what string) { out.CostUnknown, out.CostSteps = what, []Step{} }
	if lamp.PowerW != nil {
		w := float64(o.count) * *lamp.PowerW
		out.PowerW = &w
	}
	currency := ""
	money := func(id domain.ID, name string) (float64, bool) {
		p, ok := o.prices[id]
		if !ok {
			unknown("the price of " + name)
			return 0, false
		}
		if currency != "" && p.Currency != currency {
			unknown("prices in one currency")
			return 0, false
		}
		currency = p.Currency
		v, err := strconv.ParseFloat(string(p.Amount), 64)
		return v, err == nil
	}
	total := 0.0
	if driver != nil {
		v, ok := money(driver.ID, driver.Name)
		if !ok {
			return
		}
		total += v
		out.CostSteps = append(out.CostSteps, Step{What: "gear", Sum: fmt.Sprintf("1 × %.2f %s", v, currency), Basis: "price on file"})
	}
	if dimmer != nil {
		v, ok := money(dimmer.ID, dimmer.Name)
		if !ok {
			return
		}
		total += v
		out.CostSteps = append(out.CostSteps, Step{What: "dimmer", Sum: fmt.Sprintf("1 × %.2f %s", v, currency), Basis: "price on file"})
	}
	each, ok := money(lamp.ID, lamp.Name)
	if !ok {
		return
	}
	switch {
	case o.yearly == nil:
		unknown("the burning hours of the space")
		return
	case lamp.RatedLifeH == nil:
		unknown("the rated life of " + lamp.Name)
		return
	case lamp.PowerW == nil:
		unknown("the power of " + lamp.Name)
		return
	case o.rate == nil:
		unknown("the building's energy rate")
		return
	case o.rate.Currency != currency:
		unknown("an energy rate in " + currency)
		return
	}
	hours := *o.yearly * optionYears
	sets := max(1, hours / *lamp.RatedLifeH)
	lamps := float64(o.count) * sets * each
	rate, err := strconv.ParseFloat(string(o.rate.Amount), 64)
	if err != nil {
		unknown("the building's energy rate")
		return
	}
	kwh := *out.PowerW * hours / 1000
	total += lamps + kwh*rate
	out.CostSteps = append(out.CostSteps,
		Step{What: "lamps", Sum: fmt.Sprintf("%d × max(1, %.0f h / %.0f h) × %.2f = %.2f %s", o.count, hours, *lamp.RatedLifeH, each, lamps, currency), Basis: "rated life; a lamp is bought at least once"},
		Step{What: "energy", Sum: fmt.Sprintf("%.1f W × %.0f h / 1000 × %.4f = %.2f %s", *out.PowerW, hours, rate, kwh*rate, currency), Basis: "lamp power, yearly hours of the space, energy rate on file; no discount"},
		Step{What: fmt.Sprintf("%d years", optionYears), Sum: fmt.Sprintf("%.2f %s", total, currency), Basis: "sum"})
	out.cost = total
	out.Cost = &domain.Money{Amount: strconv.FormatFloat(total, 'f', 2, 64), Currency: currency}
}

// confirm judges the best options once more in the whole tree, so that what else hangs on the circuit has its say.
func (o *optioner) confirm(t *Tree, found []Option) []Option {
	before := retrofit.Check(&t.System)
	out := []Option{}
	for _, option := range found {
		if len(out) == mostOptions {
			break
		}
		after := propose(&t.System)
		lamp := o.cat.Lamps[option.LampModelID]
		for i := range after.Fixtures {
			for j := range o.sys.Fixtures {
				if after.Fixtures[i].Key == o.sys.Fixtures[j].Key {
					relamp(&after.Fixtures[i], &lamp.Lamp, 0)
				}
			}
		}
		if option.DriverModelID != nil {
			for i := range after.Drivers {
				if after.Drivers[i].Key == o.sys.Drivers[o.driver].Key && !after.Drivers[i].Integral {
					refit(&after.Drivers[i], &o.cat.Drivers[*option.DriverModelID].Gear)
				}
			}
		}
		if option.DimmerModelID != nil {
			after.Dimmers[o.dimmed()].Model = &o.cat.Dimmers[*option.DimmerModelID].Control
			after.Dimmers[o.dimmed()].Proposed = true
		}
		if a := retrofit.Verdict(before, retrofit.Check(after)); safe(a, false) {
			option.ToConfirm = missingFacts(slices.Concat(a.Missing, a.ToConfirm))
			out = append(out, option)
		}
	}
	return out
}

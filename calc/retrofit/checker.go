package retrofit

import (
	"math"

	"lampward/calc/loading"
)

// A Checker evaluates the rules and keeps its working memory between systems. It is for one goroutine; the zero
// Checker is ready.
type Checker struct {
	sys      *loading.System
	rule     *Rule // being evaluated
	findings []Finding
	asks     []ask
	visible  []Finding
	question []Question
	at       map[questionKey]int32

	driver  []driverView
	fixture []fixtureView
	dimmer  []dimmerView
	circuit []circuitView
	lamps   []lampLoad
	index   []int32 // luminaires by driver

	withList    map[loading.Key]struct{} // lamps for which a list of gear is on record
	withListOf  uintptr
	withListLen int
}

// An ask is a field that one rule misses at one place.
type ask struct {
	rule     *Rule
	severity Severity
	blocks   bool
	field    Field
	about    About
	place    Subject
	level    Kind
	link     links
	lamp     *loading.Lamp
	proposed bool
}

type questionKey struct {
	field Field
	about About
}

// Check evaluates every rule on a system.
func Check(sys *loading.System) Result { return new(Checker).Check(sys) }

// Check evaluates every rule on a system. The slices of the result are the Checker's own and are good until its next
// Check; what they hold may be kept.
func (c *Checker) Check(sys *loading.System) Result {
	c.sys = sys
	c.findings, c.asks, c.visible, c.question = c.findings[:0], c.asks[:0], c.visible[:0], c.question[:0]
	c.gather()
	for i := range c.driver {
		v := &c.driver[i]
		c.askGearOfDriver(v)
		for _, c.rule = range byDriver {
			c.rule.driver(v)
		}
		for _, f := range v.fixtures {
			c.checkFixture(&c.fixture[f])
		}
	}
	for i := range c.fixture {
		if v := &c.fixture[i]; v.driver == nil {
			c.askGearOfFixture(v)
			c.checkFixture(v)
		}
	}
	for i := range c.dimmer {
		for _, c.rule = range byDimmer {
			c.rule.dimmer(&c.dimmer[i])
		}
	}
	for i := range c.circuit {
		for _, c.rule = range byCircuit {
			c.rule.circuit(&c.circuit[i])
		}
	}
	c.hide()
	c.gatherQuestions()
	r := Result{Findings: c.visible, Questions: c.question, Coverage: c.coverage()}
	if sys.Proposal {
		r.Sum, r.marked = c.sum()
	}
	return r
}

// sum is the load a proposal makes, in one line: that of the driver it loads most, else of the luminaire.
func (c *Checker) sum() (line string, marked bool) {
	highest := -1.0
	for i := range c.driver {
		v := &c.driver[i]
		if !v.proposed {
			continue
		}
		marked = true
		maxW, ok := positive(v.g.MaxLoadW)
		unit := "W"
		if !ok {
			maxW, ok = positive(v.g.MaxLoadVA)
			unit = "VA"
		}
		share := 0.0
		if ok {
			share = v.load.w.lo / maxW
		}
		if share <= highest {
			continue
		}
		highest = share
		line = sumOf(v.lamps, false, v.load.w) + " on " + v.name()
		if ok {
			line += ", " + loading.Percent(share) + " of " + quantity(maxW, unit)
		}
		if w, ok := positive(v.g.MinLoadW); ok {
			line += ", minimum " + quantity(w, "W")
		}
	}
	for i := range c.fixture {
		v := &c.fixture[i]
		if !v.proposed {
			continue
		}
		marked = true
		if line == "" && v.driver == nil {
			var s load
			for j := range v.lamps {
				s.add(&v.lamps[j])
			}
			line = sumOf(v.lamps, false, s.w)
			if v.bare {
				line += ", straight on the circuit"
			}
		}
	}
	for i := range c.dimmer {
		marked = marked || c.dimmer[i].proposed
	}
	return line, marked
}

func (c *Checker) checkFixture(v *fixtureView) {
	c.askLampsOf(v)
	traits := v.traits()
	for _, c.rule = range byFixture {
		if c.rule.only == 0 || c.rule.only&traits != 0 {
			c.rule.fixture(v)
		}
	}
}

// askLampsOf asks for what every rule about a lamp waits for: what kind it is and, of a proposed one, its power and the
// supply it needs.
func (c *Checker) askLampsOf(v *fixtureView) {
	c.rule = &rules[0]
	for i := range v.lamps {
		l := &v.lamps[i]
		switch {
		case l.model == nil:
			if l.proposed {
				v.ask(FieldFixtureLamps, v.aboutPlace())
			}
			continue
		case l.class == classUnknown:
			v.ask(FieldLampTechnology, aboutLamp(l.model))
		}
		if !l.proposed {
			continue
		}
		if !l.known {
			v.ask(FieldLampPower, aboutLamp(l.model))
		}
		if v.bare && l.model.Supply == "" {
			v.ask(FieldLampSupply, aboutLamp(l.model))
		}
	}
}

// hide drops what another finding on the same gear makes pointless: findings and questions alike. A finding that is
// itself hidden still hides.
func (c *Checker) hide() {
	var hiding uint64
	for i := range c.findings {
		hiding |= c.findings[i].rule.hides
	}
	hidden := func(r *Rule, level Kind, l links, lamp *loading.Lamp) bool {
		if hiding&(1<<r.number) == 0 {
			return false
		}
		for i := range c.findings {
			f := &c.findings[i]
			if f.rule.hides&(1<<r.number) != 0 && touches(f.link, f.level, f.lamp, l, level, lamp) {
				return true
			}
		}
		return false
	}
	for i := range c.findings {
		f := &c.findings[i]
		if !hidden(f.rule, f.level, f.link, f.lamp) {
			c.visible = append(c.visible, *f)
		}
	}
	if hiding == 0 {
		return
	}
	kept := c.asks[:0]
	for _, a := range c.asks {
		if !hidden(a.rule, a.level, a.link, a.lamp) {
			kept = append(kept, a)
		}
	}
	c.asks = kept
}

// gatherQuestions makes one question of all that ask for the same field of the same model or place, the most useful
// first.
func (c *Checker) gatherQuestions() {
	if len(c.asks) == 0 {
		return
	}
	if c.at == nil || len(c.at) > 4096 {
		c.at = make(map[questionKey]int32)
	} else {
		clear(c.at)
	}
	for i := range c.asks {
		a := &c.asks[i]
		k := questionKey{a.field, a.about}
		n, ok := c.at[k]
		if !ok {
			n = int32(len(c.question))
			c.at[k] = n
			c.question = append(c.question, Question{Field: a.field, About: a.about})
		}
		q := &c.question[n]
		if a.severity.Rank() > q.Severity.Rank() {
			q.Severity, q.Rule = a.severity, a.rule.ID
		}
		q.Blocks = q.Blocks || a.blocks
		q.Proposed = q.Proposed || a.proposed
		if q.last != a.place || q.Places == 0 {
			q.Places++
			q.last = a.place
		}
	}
	SortQuestions(c.question)
}

// coverage counts the luminaires whose gear kind, ratings and feed are known.
func (c *Checker) coverage() Coverage {
	cov := Coverage{Places: len(c.fixture)}
	for i := range c.fixture {
		v := &c.fixture[i]
		if v.link.circuit < 0 || v.f.LampsUnknown || len(v.lamps) == 0 {
			continue
		}
		rated := true
		for j := range v.lamps {
			rated = rated && v.lamps[j].known
		}
		if d := v.driver; d != nil {
			rated = rated && d.rated()
		} else if !v.bare {
			rated = false
		}
		if rated {
			cov.Known++
		}
	}
	return cov
}

// rated reports whether the gear's kind and highest load are known.
func (v *driverView) rated() bool {
	if v.kind == gearUnknown {
		return false
	}
	_, w := positive(v.g.MaxLoadW)
	_, va := positive(v.g.MaxLoadVA)
	_, window := positive(v.g.ComplianceMaxV)
	return w || va || window && v.kind == constantCurrent
}

// askGearOfDriver asks what a driver of unknown kind is.
func (c *Checker) askGearOfDriver(v *driverView) {
	if v.kind != gearUnknown {
		return
	}
	a := ask{field: FieldDriverModel, about: About{Kind: string(OnDriver), Key: v.d.Key, Index: int(v.link.driver)}}
	if v.d.Model != nil {
		a.field, a.about = FieldGearKind, aboutGear(v.g)
	}
	c.askKind(a, &v.view)
}

// askGearOfFixture asks what gear a luminaire has of which nothing is on record.
func (c *Checker) askGearOfFixture(v *fixtureView) {
	if v.bare || len(v.lamps) == 0 && !v.f.LampsUnknown {
		return
	}
	a := ask{field: FieldFixtureFeed, about: About{Kind: string(OnFixture), Key: v.f.Key, Index: int(v.link.fixture)}}
	if is(v.m.Discharge) && v.holdsLED() {
		a.field = FieldFixtureConversion
	} else if v.f.Model != nil {
		switch v.m.Gear {
		case "":
			a.field, a.about = FieldFittingGear, aboutFitting(v.m)
		case "integral":
			a.field, a.about = FieldFittingDriver, aboutFitting(v.m)
		}
	}
	c.askKind(a, &v.view)
}

// askKind files the one question of a place whose gear kind is unknown. Everything waits for it, so it stands for the
// worst that gear can do.
func (c *Checker) askKind(a ask, v *view) {
	a.rule, a.severity, a.blocks = &rules[0], Danger, true
	a.place, a.level, a.link, a.proposed = v.subject, v.level, v.link, v.proposed
	c.asks = append(c.asks, a)
}

func aboutGear(g *loading.Gear) About {
	return About{Kind: AboutGear, Key: g.Key, Index: -1, Name: g.Name}
}

func aboutLamp(m *loading.Lamp) About {
	return About{Kind: AboutLamp, Key: m.Key, Index: -1, Name: m.Name}
}

func aboutFitting(m *loading.Fitting) About {
	return About{Kind: AboutFitting, Key: m.Key, Index: -1, Name: m.Name}
}

func aboutControl(m *loading.Control) About {
	return About{Kind: AboutControl, Key: m.Key, Index: -1, Name: m.Name}
}

// ask files a missing field with the rule's own severity at stake.
func (v *view) ask(f Field, about About) { v.askAt(f, about, v.by.rule.Severity, v.by.rule.Blocks) }

// askAt files a missing field with another severity at stake.
func (v *view) askAt(f Field, about About, s Severity, blocks bool) {
	if v.quiet {
		return
	}
	v.by.asks = append(v.by.asks, ask{
		rule: v.by.rule, severity: s, blocks: blocks, field: f, about: about,
		place: v.subject, level: v.level, link: v.link, proposed: v.proposed,
	})
}

// found files a finding and returns it for its sentence; it is good until the next one.
func (v *view) found(s Severity, j judgement) *Finding {
	c := v.by
	f := Finding{
		Rule: c.rule.ID, Severity: s, Blocks: c.rule.Blocks && j.blocks(), Sureness: j.sure, Subject: v.subject,
		Excess: j.excess, Proposed: v.proposed, Basis: c.rule.Basis, Remedy: c.rule.Remedy, Cautions: c.rule.Cautions,
		rule: c.rule, level: v.level, link: v.link,
	}
	if j.sure == Screening {
		f.Severity = Low
	}
	c.findings = append(c.findings, f)
	return &c.findings[len(c.findings)-1]
}

// gather joins the system's slices into views.
func (c *Checker) gather() {
	s := c.sys
	nd, nf := len(s.Drivers), len(s.Fixtures)
	c.driver = resized(c.driver, nd)
	c.fixture = resized(c.fixture, nf)
	c.dimmer = resized(c.dimmer, len(s.Dimmers))
	c.circuit = resized(c.circuit, len(s.Circuits))
	c.lamps = c.lamps[:0]

	// Lamps of every driver and every luminaire go into one slice; it is sized first so that it never moves.
	groups := 0
	for i := range s.Fixtures {
		groups += len(s.Fixtures[i].Lamps)
	}
	if cap(c.lamps) < 2*groups {
		c.lamps = make([]lampLoad, 0, 2*groups)
	}
	c.index = resized(c.index, nd+1+nf)
	start, list := c.index[:nd+1], c.index[nd+1:]
	clear(start)
	for i := range s.Fixtures {
		if d := s.Fixtures[i].Driver; d >= 0 && d < nd {
			start[d+1]++
		}
	}
	for i := range nd {
		start[i+1] += start[i]
	}
	for i := range s.Fixtures {
		if d := s.Fixtures[i].Driver; d >= 0 && d < nd {
			list[start[d]] = int32(i)
			start[d]++
		}
	}
	// Each start now holds the end of its own list, which is the start of the next.
	for i := range s.Fixtures {
		c.gatherFixture(i)
	}
	begin := int32(0)
	for i := range s.Drivers {
		c.gatherDriver(i, list[begin:start[i]:start[i]])
		begin = start[i]
	}
	for i := range s.Fixtures {
		v := &c.fixture[i]
		if d := s.Fixtures[i].Driver; d >= 0 && d < nd {
			v.driver = &c.driver[d]
			v.link.driver = int32(d)
			v.proposed = v.proposed || v.driver.d.Proposed
			v.link.circuit = v.driver.link.circuit
			v.circuit = v.driver.circuit
			v.quiet = v.driver.quiet
		}
	}
	c.gatherControls()
	c.gatherCircuits()
}

func resized[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}

func (c *Checker) gatherFixture(i int) {
	f := &c.sys.Fixtures[i]
	v := &c.fixture[i]
	*v = fixtureView{f: f, m: f.Model}
	v.view = view{by: c, level: OnFixture, subject: Subject{OnFixture, i, f.Key}, link: noLinks}
	v.link.fixture = int32(i)
	if v.m == nil {
		v.m = &noFitting
	}
	noDriver := f.Driver < 0 || f.Driver >= len(c.sys.Drivers)
	v.bare = noDriver && (f.GearNone || v.m.Gear == "none" || f.Conversion == "gear_bypassed" || f.Conversion == "gear_removed")
	v.quiet = noDriver && !v.bare
	if f.Circuit >= 0 && f.Circuit < len(c.sys.Circuits) {
		v.link.circuit = int32(f.Circuit)
		v.circuit = &c.sys.Circuits[f.Circuit]
	}
	from := len(c.lamps)
	for j := range f.Lamps {
		l := gatherLamp(&f.Lamps[j])
		if l.count > 0 {
			c.lamps = append(c.lamps, l)
			v.proposed = v.proposed || l.proposed
		}
	}
	v.lamps = c.lamps[from:len(c.lamps):len(c.lamps)]
}

func (c *Checker) gatherDriver(i int, fixtures []int32) {
	d := &c.sys.Drivers[i]
	v := &c.driver[i]
	*v = driverView{d: d, g: d.Model, kind: kindOf(d.Model), fixtures: fixtures}
	v.view = view{by: c, level: OnDriver, subject: Subject{OnDriver, i, d.Key}, link: noLinks, proposed: d.Proposed}
	v.link.driver = int32(i)
	if v.g == nil {
		v.g = &noGear
	}
	v.quiet = v.kind == gearUnknown
	if d.Integral && len(fixtures) == 1 {
		f := int(fixtures[0])
		v.subject = Subject{OnFixture, f, c.sys.Fixtures[f].Key}
		v.link.fixture = fixtures[0]
	}
	circuit, own := d.Circuit, d.Circuit >= 0 && d.Circuit < len(c.sys.Circuits)
	if !own {
		circuit = -1
	}
	from := len(c.lamps)
	groups := false
	for _, fi := range fixtures {
		f := &c.fixture[fi]
		if n := f.f.Circuit; !own && n >= 0 && n < len(c.sys.Circuits) && (circuit < 0 || n < circuit) {
			circuit = n // nobody says what feeds the driver: its luminaires do
		}
		v.load.unseen = v.load.unseen || f.f.LampsUnknown
		groups = groups || f.f.SwitchGroup != c.fixture[fixtures[0]].f.SwitchGroup
		v.proposed = v.proposed || f.proposed
	lamp:
		for j := range f.lamps {
			for k := from; k < len(c.lamps); k++ {
				if m := &c.lamps[k]; sameLamp(m.model, f.lamps[j].model) {
					m.count += f.lamps[j].count
					m.dark += f.lamps[j].dark
					m.proposed = m.proposed || f.lamps[j].proposed
					m.unproven = m.unproven || f.lamps[j].unproven
					continue lamp
				}
			}
			c.lamps = append(c.lamps, f.lamps[j])
		}
	}
	v.lamps = c.lamps[from:len(c.lamps):len(c.lamps)]
	for j := range v.lamps {
		v.load.add(&v.lamps[j])
	}
	if v.load.unseen {
		v.load.w.hi, v.load.workingW.hi, v.load.va.hi, v.load.workingVA.hi = math.Inf(1), math.Inf(1), math.Inf(1), math.Inf(1)
	}
	v.lit = v.load
	if groups {
		c.smallestGroup(v)
	}
	if circuit >= 0 && circuit < len(c.sys.Circuits) {
		v.link.circuit = int32(circuit)
		v.circuit = &c.sys.Circuits[circuit]
	}
}

// smallestGroup finds the switched group that loads a driver least, by its working lamps. Groups without a lamp that
// works are left out.
func (c *Checker) smallestGroup(v *driverView) {
	first := true
	for i, fi := range v.fixtures {
		name := c.fixture[fi].f.SwitchGroup
		seen := false
		for _, before := range v.fixtures[:i] {
			seen = seen || c.fixture[before].f.SwitchGroup == name
		}
		if seen {
			continue
		}
		var sum load
		for _, other := range v.fixtures[i:] {
			o := &c.fixture[other]
			if o.f.SwitchGroup != name {
				continue
			}
			for j := range o.lamps {
				sum.add(&o.lamps[j])
			}
			if o.f.LampsUnknown {
				sum.unseen = true
				sum.workingW.hi, sum.workingVA.hi = math.Inf(1), math.Inf(1)
			}
		}
		if (sum.working > 0 || sum.unseen) && (first || sum.workingW.lo < v.lit.workingW.lo) {
			v.lit, first = sum, false
		}
	}
}

// gatherControls lists what hangs on each dimmer. A luminaire fed by a driver that the dimmer also names is counted
// once, with its driver.
func (c *Checker) gatherControls() {
	s := c.sys
	for i := range s.Dimmers {
		d := &s.Dimmers[i]
		v := &c.dimmer[i]
		*v = dimmerView{d: d, m: d.Model, members: v.members[:0]}
		v.view = view{by: c, level: OnDimmer, subject: Subject{OnDimmer, i, d.Key}, link: noLinks, proposed: d.Proposed}
		v.link.dimmer = int32(i)
		if v.m == nil {
			v.m = &noControl
		}
		if d.Circuit >= 0 && d.Circuit < len(s.Circuits) {
			v.link.circuit = int32(d.Circuit)
			v.circuit = &s.Circuits[d.Circuit]
		}
	}
	if len(s.Dimmers) == 0 {
		return
	}
	c.eachControl(func(dimmer int, m member) {
		v := &c.dimmer[dimmer]
		v.members = append(v.members, m)
		var on *view
		if m.driver != nil {
			on = &m.driver.view
		} else {
			on = &m.fixture.view
		}
		on.proposed = on.proposed || v.d.Proposed
		v.proposed = v.proposed || on.proposed
		if on.link.dimmer < 0 && !m.signal() {
			on.link.dimmer = int32(dimmer)
		}
	})
}

// eachControl calls f for every control of every driver and of every luminaire that is not counted with its driver.
func (c *Checker) eachControl(f func(dimmer int, m member)) {
	s := c.sys
	for i := range s.Drivers {
		for k := range s.Drivers[i].Controls {
			if n := s.Drivers[i].Controls[k].Dimmer; n >= 0 && n < len(s.Dimmers) {
				f(n, member{driver: &c.driver[i], controlled: &s.Drivers[i].Controls[k]})
			}
		}
	}
	for i := range s.Fixtures {
		v := &c.fixture[i]
	control:
		for k := range v.f.Controls {
			n := v.f.Controls[k].Dimmer
			if n < 0 || n >= len(s.Dimmers) {
				continue
			}
			if v.driver == nil {
				f(n, member{fixture: v, controlled: &v.f.Controls[k]})
				continue
			}
			for j := range v.driver.d.Controls {
				if v.driver.d.Controls[j].Dimmer == n {
					continue control
				}
			}
			for _, other := range v.driver.fixtures {
				if other >= int32(i) {
					break
				}
				for j := range s.Fixtures[other].Controls {
					if s.Fixtures[other].Controls[j].Dimmer == n {
						continue control
					}
				}
			}
			f(n, member{driver: v.driver, controlled: &v.f.Controls[k]})
		}
	}
}

// gatherCircuits lists what hangs on each circuit.
func (c *Checker) gatherCircuits() {
	s := c.sys
	for i := range s.Circuits {
		v := &c.circuit[i]
		*v = circuitView{c: &s.Circuits[i], drivers: v.drivers[:0], fixtures: v.fixtures[:0]}
		v.view = view{by: c, level: OnCircuit, subject: Subject{OnCircuit, i, s.Circuits[i].Key}, link: noLinks}
		v.link.circuit = int32(i)
	}
	for i := range c.driver {
		if n := c.driver[i].link.circuit; n >= 0 {
			v := &c.circuit[n]
			v.drivers = append(v.drivers, int32(i))
			v.proposed = v.proposed || c.driver[i].proposed
		}
	}
	for i := range c.fixture {
		if n := c.fixture[i].link.circuit; n >= 0 && c.fixture[i].driver == nil {
			v := &c.circuit[n]
			v.fixtures = append(v.fixtures, int32(i))
			v.proposed = v.proposed || c.fixture[i].proposed
		}
	}
}

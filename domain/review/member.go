package review

import (
	"time"

	"lampward/calc/loading"
	"lampward/calc/retrofit"
	"lampward/domain"
	"lampward/domain/plant"
)

// inYear reports whether t lies in the last twelve months.
func inYear(t, now time.Time) bool { return t.AddDate(0, retrofit.FailureMonths, 0).After(now) }

func (b *builder) makeCircuit(k *plant.Circuit, x *index, t *Tree) loading.Circuit {
	c := loading.Circuit{CircuitFacts: k.CircuitFacts, Key: k.ID}
	for _, at := range x.trips[k.ID] {
		if inYear(at, b.at) {
			c.TripsInYear++
			t.sooner(at.AddDate(0, retrofit.FailureMonths, 0), b.at)
		}
	}
	return c
}

func (b *builder) makeDimmer(d *plant.Dimmer, x *index, t *Tree) loading.Dimmer {
	out := loading.Dimmer{DimmerFacts: d.DimmerFacts, Key: d.ID, Circuit: -1, FactSource: d.FactSource}
	if d.DimmerModelID != nil {
		if m := b.cat.Dimmers[*d.DimmerModelID]; m != nil {
			out.Model = &m.Control
		}
	}
	for _, f := range x.failed[d.ID] {
		if f.mode == "contact_welded" && inYear(f.at, b.at) {
			out.WeldsInYear++
			t.sooner(f.at.AddDate(0, retrofit.FailureMonths, 0), b.at)
		}
	}
	return out
}

func (b *builder) gear(id *domain.ID) *loading.Gear {
	if id == nil {
		return nil
	}
	if m := b.cat.Drivers[*id]; m != nil {
		return &m.Gear
	}
	return nil
}

func (b *builder) makeDriver(d *plant.Driver, x *index, t *Tree) loading.Driver {
	out := loading.Driver{DriverFacts: d.DriverFacts, Key: d.ID, Model: b.gear(d.DriverModelID), Circuit: x.circuitOf(d.ID),
		Controls: b.controls(d.ID, x), FactSource: d.FactSource}
	b.gearFailures(&out, x.failed[d.ID], t)
	return out
}

// gearFailures counts what happened to control gear.
func (b *builder) gearFailures(d *loading.Driver, failed []happened, t *Tree) {
	for _, f := range failed {
		if f.part != plant.KindDriver {
			continue
		}
		if f.mode == "overheats" {
			d.HeatFailure = true
		}
		if inYear(f.at, b.at) {
			d.FailuresInYear++
			t.sooner(f.at.AddDate(0, retrofit.FailureMonths, 0), b.at)
		}
	}
}

// controls gathers what acts on a place: the dimmers its feed passes, those set on its circuit, and its own.
func (b *builder) controls(place domain.ID, x *index) []loading.Controlled {
	s := x.source[place]
	var out []loading.Controlled
	add := func(dimmer domain.ID, path, voltage string) {
		i, ok := x.dimmer[dimmer]
		if !ok {
			return
		}
		for _, have := range out {
			if have.Dimmer == i && have.Path == path {
				return
			}
		}
		out = append(out, loading.Controlled{Dimmer: i, Path: path, VoltageFound: voltage})
	}
	for _, c := range x.controls[s.circuit] {
		add(c.DimmerID, c.Path, c.VoltageFound)
	}
	for i := len(s.through) - 1; i >= 0; i-- {
		add(s.through[i], loading.PowerPath, "")
	}
	for _, c := range x.controls[place] {
		add(c.DimmerID, c.Path, c.VoltageFound)
	}
	return out
}

// addFixture adds a luminaire, and the gear inside it where it is integral.
func (b *builder) addFixture(p *plant.Fixture, x *index, t *Tree) {
	s := x.source[p.ID]
	f := loading.Fixture{FixtureFacts: p.FixtureFacts, Key: p.ID, Driver: -1, Output: s.output, Circuit: x.circuitOf(p.ID),
		FurtherFeeds: x.feeds[p.ID], FactSource: p.FactSource}
	gear, inside := p.Gear, p.DriverModelID
	if p.FixtureModelID != nil {
		if m := b.cat.Fixtures[*p.FixtureModelID]; m != nil {
			f.Model = &m.Fitting
			if gear == "" {
				gear = m.Gear
			}
			if inside == nil {
				inside = m.DriverModelID
			}
		}
	}
	f.GearNone = gear == "none" && s.driver.IsZero()
	switch {
	case !s.driver.IsZero():
		f.Driver = x.driver[s.driver]
		for _, c := range x.controls[p.ID] {
			if i, ok := x.dimmer[c.DimmerID]; ok {
				f.Controls = append(f.Controls, loading.Controlled{Dimmer: i, Path: c.Path, VoltageFound: c.VoltageFound})
			}
		}
	case gear == "integral" || inside != nil:
		d := loading.Driver{Key: p.ID, Model: b.gear(inside), Circuit: f.Circuit, Controls: b.controls(p.ID, x), Integral: true, FactSource: p.FactSource}
		d.InsulationOver, d.InEnclosure = p.InsulationOver, p.InEnclosure
		b.gearFailures(&d, x.failed[p.ID], t)
		f.Driver = len(t.System.Drivers)
		t.System.Drivers = append(t.System.Drivers, d)
	default:
		f.Controls = b.controls(p.ID, x)
	}
	f.Lamps, f.LampsUnknown = b.lamps(p, f, x, t)
	b.emergency(&f, p, x)
	b.repeats(&f, p, x, t)
	t.System.Fixtures = append(t.System.Fixtures, f)
}

// lamps groups the lamps of a luminaire by model; unknown tells that there may be holders nobody has looked at.
func (b *builder) lamps(p *plant.Fixture, f loading.Fixture, x *index, t *Tree) (groups []loading.LampGroup, unknown bool) {
	odd := x.odd[p.ID]
	count := len(odd)
	switch {
	case p.LampCount != nil:
		count = *p.LampCount
	case f.Model != nil && f.Model.Holders != nil:
		count = *f.Model.Holders
	case p.LampModelID == nil:
		return nil, true
	default:
		count, unknown = max(count, 1), true
	}
	group := func(model *domain.ID, n int, at *time.Time) *loading.LampGroup {
		g := loading.LampGroup{Count: n}
		if model != nil {
			if m := b.cat.Lamps[*model]; m != nil {
				g.Model = &m.Lamp
			}
		}
		b.service(&g, p, at, x, t)
		groups = append(groups, g)
		return &groups[len(groups)-1]
	}
	holder := map[int]int{} // holder -> position in groups
	for _, o := range odd {
		same := -1
		for i := range groups {
			if o.LampModelID != nil && groups[i].Model != nil && groups[i].Model.Key == b.keyOf(*o.LampModelID) {
				same = i
			}
		}
		if same >= 0 {
			groups[same].Count++
		} else {
			group(o.LampModelID, 1, o.FittedAt)
			same = len(groups) - 1
		}
		holder[o.Holder] = same
	}
	rest := -1
	if n := count - len(odd); n > 0 {
		group(p.LampModelID, n, p.LampsFittedAt)
		rest = len(groups) - 1
	}
	dark := map[int]bool{}
	for _, h := range x.failed[p.ID] {
		if !h.open || h.part != plant.KindLamp || h.mode != "dark" || dark[h.holder] {
			continue
		}
		dark[h.holder] = true
		i, ok := holder[h.holder]
		if !ok {
			i = rest
		}
		if i >= 0 && groups[i].Dark < groups[i].Count {
			groups[i].Dark++
		}
	}
	return groups, unknown
}

func (b *builder) keyOf(model domain.ID) loading.Key {
	if m := b.cat.Lamps[model]; m != nil {
		return m.ID
	}
	return loading.Key{}
}

// service says how long lamps have been in service, by the yearly hours of their space, and whether they gave trouble.
func (b *builder) service(g *loading.LampGroup, p *plant.Fixture, at *time.Time, x *index, t *Tree) {
	for _, f := range x.failed[p.ID] {
		if f.part == plant.KindLamp && (at == nil || !f.at.Before(*at)) {
			g.FailureKnown = true
		}
	}
	yearly := b.yearlyHours(p.SpaceID)
	if at == nil || yearly == nil || *yearly <= 0 {
		return
	}
	hours := b.at.Sub(*at).Hours() * *yearly / hoursAYear
	if hours < 0 {
		hours = 0
	}
	g.HoursFitted = &hours
	if hours <= retrofit.ProvenHours && g.Model != nil && g.Model.Technology == loading.LEDLamp && *yearly > 1 {
		// Told from the day of fitting, so that looking again does not move it.
		t.sooner(at.Add(time.Duration(retrofit.ProvenHours*hoursAYear / *yearly * float64(time.Hour))+time.Hour), b.at)
	}
}

// yearlyHours returns the burning hours a year of a space: its own, else those of its use.
func (b *builder) yearlyHours(space *domain.ID) *float64 {
	if space == nil {
		return nil
	}
	s := b.recs.Spaces[*space]
	if s.YearlyHours != nil {
		return s.YearlyHours
	}
	return b.cat.Uses[s.Use].YearlyHours
}

// emergency compares what is fitted with what the last function test was made with.
func (b *builder) emergency(f *loading.Fixture, p *plant.Fixture, x *index) {
	for _, test := range x.tests[p.ID] {
		if test.Test != "function" {
			continue
		}
		f.Emergency = loading.EmergencyRecord{Tested: true, Battery: test.Battery,
			ChangedLater: p.LampsFittedAt != nil && p.LampsFittedAt.After(test.TestedAt) || p.FittedAt != nil && p.FittedAt.After(test.TestedAt)}
		if test.LampModelID != nil {
			f.Emergency.Lamp = b.keyOf(*test.LampModelID)
		}
		if g := b.gear(test.DriverModelID); g != nil {
			f.Emergency.Gear = g.Key
		}
	}
}

// repeats counts the failures of the holder that failed most often in the last twelve months. A failure whose holder
// nobody named counts only where there is one holder.
func (b *builder) repeats(f *loading.Fixture, p *plant.Fixture, x *index, t *Tree) {
	count := map[int]int{}
	one := p.LampCount != nil && *p.LampCount <= 1 || p.LampCount == nil && f.Model != nil && f.Model.Holders != nil && *f.Model.Holders == 1
	for _, h := range x.failed[p.ID] {
		if h.part != plant.KindLamp || !inYear(h.at, b.at) {
			continue
		}
		holder := h.holder
		if holder == 0 {
			if !one {
				continue
			}
			holder = 1
		}
		count[holder]++
		f.FailuresInYear = max(f.FailuresInYear, count[holder])
		t.sooner(h.at.AddDate(0, retrofit.FailureMonths, 0), b.at)
	}
}

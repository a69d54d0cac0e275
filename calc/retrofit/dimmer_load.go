package retrofit

import (
	"math"

	"lampward/calc/loading"
)

// electronicEfficiency brackets the efficiency of electronic gear that states none: it decides only whether asking for
// it could change an outcome.
var electronicEfficiency = Range{FieldEfficiency, "efficiency of electronic gear", 0.80, 0.95, "", FromPractice}

// loadClass is how a load takes its current from a phase-cut dimmer, and so which of the dimmer's ratings counts.
type loadClass uint8

const (
	resistive  loadClass = iota // mains filament lamps: R
	inductive                   // wound transformers: L, VA
	capacitive                  // electronic transformers: C
	ledLoad                     // LED lamps and LED drivers
	loadClasses
)

var classWords = [loadClasses]string{
	resistive: "filament lamps", inductive: "magnetic transformers", capacitive: "electronic transformers", ledLoad: "LED lamps and drivers",
}

// classOfGear is the class of a driver's input.
func classOfGear(k gearKind) loadClass {
	switch k {
	case magneticTransformer, magneticBallast, hidGear:
		return inductive
	case electronicTransformer:
		return capacitive
	}
	return ledLoad
}

// inputFactor is input power over the power of the lamps: 1/efficiency.
func (v *driverView) inputFactor() span {
	if e, ok := positive(v.g.Efficiency); ok && e >= 0.01 && e <= 1 {
		return exactly(1 / e)
	}
	r := electronicEfficiency
	if v.kind.wound() {
		r = woundEfficiency
	}
	return span{1 / r.Hi, 1 / r.Lo, r.Mark}
}

// dimmerLoad is what hangs on a dimmer or switch through its load current.
type dimmerLoad struct {
	class    [loadClasses]span    // all lamps, as the rating of the class counts them: W, or VA on wound transformers
	lampsW   [loadClasses]float64 // power of the lamps of the class that are known, W: no load is below it
	present  [loadClasses]bool
	working  span          // W taken by the lamps believed working, gear losses included
	lamps    int           // lamps
	lit      int           // of these believed working
	leds     int           // LED lamps on the mains and LED drivers
	ledW     span          // their power, W
	peakA    float64       // sum of the repetitive peaks that are stated, A
	peakMiss *loading.Lamp // an LED lamp on the mains that states none
	unknown  bool          // a member whose gear or lamps nobody knows
	members  int
}

// powerLoad sums what a control carries.
func (v *dimmerView) powerLoad() dimmerLoad {
	var s dimmerLoad
	for i := range v.members {
		m := &v.members[i]
		if m.signal() {
			continue
		}
		s.members++
		if m.driver != nil {
			s.addDriver(m.driver)
		} else {
			s.addFixture(m.fixture)
		}
	}
	return s
}

func (s *dimmerLoad) addDriver(d *driverView) {
	if d.kind == gearUnknown {
		s.unknown = true
		s.working.hi = math.Inf(1)
		return
	}
	if d.kind == emergencyPack {
		return
	}
	c := classOfGear(d.kind)
	factor := d.inputFactor()
	w := d.load.w.divided(factor)
	if c == inductive {
		// The magnetising current is neglected: S is about the lamps' apparent power over the efficiency.
		s.class[c] = s.class[c].plus(d.load.va.divided(factor))
	} else {
		s.class[c] = s.class[c].plus(w)
	}
	s.lampsW[c] += d.load.w.lo
	if d.load.count > 0 || d.load.unseen {
		s.present[c] = true
	}
	s.working = s.working.plus(d.lit.workingW.divided(factor))
	s.lamps += d.load.count
	s.lit += d.lit.working
	if c == ledLoad {
		s.leds++
		s.ledW = s.ledW.plus(w)
	}
}

func (s *dimmerLoad) addFixture(f *fixtureView) {
	if !f.bare {
		s.unknown = true
		s.working.hi = math.Inf(1)
		return
	}
	for i := range f.lamps {
		l := &f.lamps[i]
		var one load
		one.add(l)
		c := resistive
		switch {
		case l.class == led || l.class == fluorescent:
			c = ledLoad
			s.leds += l.count
			s.ledW = s.ledW.plus(one.w)
			s.addPeak(l)
		case l.class != filament:
			s.unknown = true
		}
		s.class[c] = s.class[c].plus(one.w)
		s.lampsW[c] += one.w.lo
		s.present[c] = true
		s.working = s.working.plus(one.workingW)
		s.lamps += l.count
		s.lit += l.working()
	}
	if f.f.LampsUnknown {
		s.unknown = true
		s.working.hi = math.Inf(1)
	}
}

// addPeak adds the current spikes of mains LED lamps.
func (s *dimmerLoad) addPeak(l *lampLoad) {
	if l.model == nil {
		return
	}
	peak, ok := positive(l.model.RepetitivePeakA)
	if !ok {
		s.peakMiss = l.model
		return
	}
	if a, err := loading.RepetitivePeakA(l.count, peak); err == nil {
		s.peakA += a
	}
}

// onlyLED reports whether nothing but LED lamps and drivers hangs on it.
func (s *dimmerLoad) onlyLED() bool {
	return s.present[ledLoad] && !s.present[resistive] && !s.present[inductive] && !s.present[capacitive]
}

// classes counts the classes of load present.
func (s *dimmerLoad) classes() int {
	n := 0
	for _, here := range s.present {
		if here {
			n++
		}
	}
	return n
}

// forClass names the class a rating is for, where there is but one.
func (s *dimmerLoad) forClass() string {
	if s.classes() != 1 {
		return ""
	}
	for c, here := range s.present {
		if here {
			return " for " + classWords[c]
		}
	}
	return ""
}

// gathered joins lines of a sum that have the same power each, so that forty like luminaires are one line.
func gathered(all []loading.Part) []loading.Part {
	var out []loading.Part
next:
	for _, p := range all {
		for i := range out {
			if out[i].PowerW == p.PowerW {
				out[i].Count += p.Count
				continue next
			}
		}
		out = append(out, p)
	}
	return out
}

// rating returns the dimmer's rating for a class, and what to ask for where none is on record. One figure printed beside
// several letters of IEC 60669-2-1 is the rating for each of them.
func (v *dimmerView) rating(c loadClass) (limit float64, ok bool, missing Field) {
	m := v.m
	switch c {
	case resistive:
		limit, ok = positive(m.MaxLoadW)
		return limit, ok, FieldDimmerMaxLoad
	case inductive:
		if limit, ok = positive(m.MaxLoadVA); !ok && marked(m, inductiveLetter) {
			limit, ok = positive(m.MaxLoadW)
		}
		return limit, ok, FieldDimmerMaxVA
	case capacitive:
		if limit, ok = positive(m.CapacitiveMaxW); !ok && marked(m, capacitiveLetter) {
			limit, ok = positive(m.MaxLoadW)
		}
		return limit, ok, FieldDimmerCapacitive
	}
	limit, ok = positive(m.LEDMaxLoadW)
	return limit, ok, FieldDimmerLEDMaxLoad
}

// minimum is the dimmer's least load, W, for what hangs on it.
func (v *dimmerView) minimum(s *dimmerLoad) (least float64, ok bool, missing Field) {
	if s.onlyLED() {
		if least, ok = known(v.m.LEDMinLoadW); ok {
			return least, true, ""
		}
	}
	least, ok = known(v.m.MinLoadW)
	return least, ok, FieldDimmerMinLoad
}

// input says what a rule reads of the load on a control.
type input uint8

const (
	lampPower     input = iota // the lamps' power alone
	inputPower                 // with the losses of the gear, W
	apparentPower              // inductive gear by its VA
)

// askLoads asks for what keeps the load on a control from being known: power first, then what turns it into input.
func (v *dimmerView) askLoads(read input) {
	asked := false
	for i := range v.members {
		m := &v.members[i]
		if m.signal() {
			continue
		}
		if m.driver != nil {
			asked = v.askLampsOf(m.driver.fixtures, m.driver.lamps) || asked
		} else {
			asked = v.askLampsIn(m.fixture) || asked
		}
	}
	if asked || read == lampPower {
		return
	}
	for i := range v.members {
		d := v.members[i].driver
		if d == nil || v.members[i].signal() || d.kind == gearUnknown || d.kind == emergencyPack {
			continue
		}
		if !d.inputFactor().exact() {
			v.ask(FieldEfficiency, aboutGear(d.g))
		}
		if read == apparentPower && classOfGear(d.kind) == inductive {
			for j := range d.lamps {
				if l := &d.lamps[j]; l.model != nil && !l.inversePowerFactor().exact() {
					v.ask(FieldLampPowerFactor, aboutLamp(l.model))
				}
			}
		}
	}
}

// askLampsOf asks for lamps nobody has looked at and power nobody has read on gear, and reports whether it did.
func (v *view) askLampsOf(fixtures []int32, lamps []lampLoad) bool {
	asked := false
	for _, i := range fixtures {
		x := &v.by.fixture[i]
		unseen := x.f.LampsUnknown
		for j := range x.lamps {
			unseen = unseen || x.lamps[j].model == nil
		}
		if unseen {
			v.ask(FieldFixtureLamps, x.aboutPlace())
			asked = true
		}
	}
	return v.askPowers(lamps) || asked
}

// askLampsIn does the same for a luminaire without gear. One whose gear nobody knows is asked for that alone.
func (v *view) askLampsIn(x *fixtureView) bool {
	if !x.bare {
		return false
	}
	unseen := x.f.LampsUnknown
	for j := range x.lamps {
		unseen = unseen || x.lamps[j].model == nil
	}
	if unseen {
		v.ask(FieldFixtureLamps, x.aboutPlace())
	}
	return v.askPowers(x.lamps) || unseen
}

func (v *view) askPowers(lamps []lampLoad) bool {
	asked := false
	for i := range lamps {
		if l := &lamps[i]; l.model != nil && !l.known {
			v.ask(FieldLampPower, aboutLamp(l.model))
			asked = true
		}
	}
	return asked
}

// found files a finding on a dimmer or switch and all lamps whose current flows through it.
func (v *dimmerView) found(s Severity, j judgement, lamps int) *Finding {
	f := v.view.found(s, j)
	f.Lamps = lamps
	f.Control = v.m.Key
	f.rests(v.d.FactSource)
	if v.d.Model != nil {
		f.rests(v.m.FactSource)
	}
	oneGear, oneLamp := true, true
	for i := range v.members {
		m := &v.members[i]
		if m.driver != nil {
			f.rests(m.driver.d.FactSource, m.driver.g.FactSource)
			oneGear = oneGear && (f.Gear == loading.Key{} || f.Gear == m.driver.g.Key)
			f.Gear = m.driver.g.Key
		} else {
			f.rests(m.fixture.f.FactSource)
		}
		lamps := m.lamps()
		for k := range lamps {
			x := lamps[k].model
			if x == nil {
				oneLamp = false
				continue
			}
			f.rests(x.FactSource)
			oneLamp = oneLamp && (f.Lamp == loading.Key{} || f.Lamp == x.Key)
			f.Lamp = x.Key
		}
	}
	// The cause names a model only where all that hangs on the control is of it.
	if !oneGear {
		f.Gear = loading.Key{}
	}
	if !oneLamp {
		f.Lamp = loading.Key{}
	}
	return f
}

// foundMember files a finding on one driver, or one luminaire without a driver, behind a control; with a lamp on its
// lamps of that model alone.
func (v *dimmerView) foundMember(m *member, l *lampLoad, s Severity, j judgement) *Finding {
	var f *Finding
	switch {
	case m.driver != nil && l != nil:
		f = m.driver.foundLamp(l, s, j)
	case m.driver != nil:
		f = m.driver.found(s, j)
	case l != nil:
		f = m.fixture.foundLamp(l, s, j)
	default:
		f = m.fixture.found(s, j)
	}
	f.Control = v.m.Key
	f.link.dimmer = v.link.dimmer
	f.rests(v.d.FactSource)
	if v.d.Model != nil {
		f.rests(v.m.FactSource)
	}
	return f
}

// lamps are the lamps of a member.
func (m *member) lamps() []lampLoad {
	if m.driver != nil {
		return m.driver.lamps
	}
	return m.fixture.lamps
}

// name is how a sentence calls a dimmer or switch.
func (v *dimmerView) name() string {
	if w, ok := positive(v.m.MaxLoadW); ok {
		return "this " + quantity(w, "W") + " " + controlWord(v.m)
	}
	return "this " + controlWord(v.m)
}

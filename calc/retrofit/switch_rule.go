package retrofit

import (
	"math"

	"lampward/calc/loading"
)

// switchRules judge switches, detectors and other contacts against what they switch.
var switchRules = []Rule{
	{
		ID: "no_neutral_glow", Severity: Low, Subject: OnDimmer,
		Trigger:  "two-wire electronic switch without a neutral, with LED lamps",
		Why:      "What leaks through the open switch charges the lamps: they glow, flash, or the switch triggers by itself.",
		Basis:    "leakage through a snubber, 2 π f C V; glow below 1 mA is common practice, no source",
		Remedy:   "Fit a switch with a neutral, a listed bypass load, or a plain contact.",
		Cautions: []string{"CA-01", "CA-11"},
		Asks:     []Field{FieldDimmerNeutral},
		dimmer:   noNeutralGlow,
	},
	{
		ID: "switch_unsuitable", Severity: Medium, Subject: OnDimmer,
		Trigger: "relay, detector, time switch, photocell or contactor whose contact rating is passed by 10 or more LED gears or 200 W and more of " +
			"them, whose resistive rating is passed by any load, or whose least load is not met",
		Why:      "Inrush of LED gear may pass 100 times its running current; contacts are often made for 10 times, and weld.",
		Basis:    "Lighting Research Center 2011 on inrush; rating on the contact",
		Remedy:   "Fit a relay or contactor rated for LED or electronic gear, or split the load.",
		Cautions: []string{"CA-01", "CA-15"},
		Asks:     []Field{FieldDimmerContact, FieldDimmerMinLoad, FieldLampPower, FieldFixtureLamps, FieldLampPowerFactor, FieldGearPowerFactor, FieldEfficiency},
		dimmer:   switchUnsuitable,
	},
	{
		ID: "transformer_inrush_on_switch", Severity: Low, Subject: OnDimmer,
		Trigger:  "magnetic transformers on a relay, detector or other contact, or behind a B curve breaker: proposals, and where a trip or weld is on record",
		Why:      "A wound core takes many times its rated current for the first half cycle: breakers trip, contacts weld.",
		Basis:    "10 to 50 times the rated current, from memory of handbooks",
		Remedy:   "Use a C or D curve breaker, a contact rated for transformers, or a soft start.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldCircuitCurve},
		dimmer:   transformerInrushOnSwitch,
		circuit:  transformerInrushOnBreaker,
	},
}

// leakageNF are the capacitances of a small and a large snubber across a switch, nF.
const (
	smallSnubberNF = 10
	largeSnubberNF = 100
)

func noNeutralGlow(v *dimmerView) {
	if !switches(v.m) || v.m.Kind == loading.SwitchContact || v.m.Kind == loading.Contactor || is(v.m.NeedsNeutral) || is(v.d.Neutral) {
		return
	}
	s := v.powerLoad()
	if s.leds == 0 {
		return
	}
	if v.m.NeedsNeutral == nil && v.d.Neutral == nil {
		if v.m.Kind == loading.SwitchElectronic {
			v.ask(FieldDimmerNeutral, aboutControl(v.m))
		}
		return
	}
	if v.m.Kind != loading.SwitchElectronic && v.m.NeedsNeutral == nil {
		return // a relay inside needs no neutral to be without leakage
	}
	f := v.found(Low, certain, s.lamps)
	f.say("%s has no neutral and switches LED lamps; they can glow or flash when off.", capital(v.name()))
	volts, hz := 230.0, 50.0
	if x, ok := v.feedV(v.circuit); ok {
		volts = x
	}
	if x, ok := positive(v.by.sys.MainsHz); ok {
		hz = x
	}
	small, err := loading.CapacitiveMA(smallSnubberNF, volts, hz)
	large, err2 := loading.CapacitiveMA(largeSnubberNF, volts, hz)
	if err == nil && err2 == nil {
		f.step("leakage through a snubber of 10 nF to 100 nF", "2 π × "+quantity(hz, "Hz")+" × 10 nF × "+quantity(volts, "V")+" = "+
			quantity(small, "mA")+"; at 100 nF "+quantity(large, "mA")+"; LED lamps can glow from about "+quantity(loading.GlowMA, "mA"), v.by.rule.Basis)
	}
}

func switchUnsuitable(v *dimmerView) {
	if !switches(v.m) || len(v.members) == 0 {
		return
	}
	s := v.powerLoad()
	if s.lamps == 0 {
		return
	}
	v.contactOverloaded(&s)

	least, ok := known(v.m.MinLoadW)
	if x, states := known(v.m.LEDMinLoadW); states && s.onlyLED() {
		least, ok = x, true
	}
	switch {
	case s.lit == 0:
	case ok:
		j := below(s.working, exactly(least))
		if j.open {
			v.askLoads(inputPower)
		}
		if j.fails {
			f := v.found(Medium, j, s.lit)
			f.say("%s %s %s with %s; it needs at least %s.", capital(plural(s.lit, "lamp")), v.verb(s.lit, "loads", "load"), v.name(),
				amount(s.working, "W"), quantity(least, "W"))
			v.stepMinimum(f, &s, least)
		}
	case v.m.Kind == loading.SwitchElectronic && s.leds > 0 && !is(v.m.NeedsNeutral) && !is(v.d.Neutral):
		v.ask(FieldDimmerMinLoad, aboutControl(v.m))
	}
}

// contactOverloaded judges what a contact switches against what it states it may.
func (v *dimmerView) contactOverloaded(s *dimmerLoad) {
	volts, hasVolts := v.feedV(v.circuit)
	amps, leds := v.switchedA(volts)
	if contact, ok := positive(v.m.ContactA); ok && hasVolts {
		j := above(amps, exactly(contact))
		if j.fails {
			f := v.found(Medium, j, s.lamps)
			f.say("%s switches %s; its contact is rated for %s.", capital(v.name()), amount(amps, "A"), quantity(contact, "A"))
			f.Steps = append(f.Steps, loading.RatingSteps(amps.lo, contact, "A", "current against the contact rating", v.by.rule.Basis)...)
			return
		}
		if j.open {
			v.askInputs()
		}
	}
	many := s.leds >= loading.SwitchedGearLimit
	if s.leds == 0 {
		return
	}
	if few := below(s.ledW, exactly(loading.SwitchedPowerW)); !many && (few.fails || few.open) {
		if few.open {
			v.askLoads(lampPower)
		}
		return
	}
	rated := false
	if n := v.m.CapacitiveCount; n != nil && *n >= 0 && *n < 1e6 {
		rated = true
		if s.leds > *n {
			f := v.found(Medium, judgement{fails: true, sure: Recorded, excess: ratio(float64(s.leds), float64(*n))}, s.lamps)
			f.say("%s switches %s; it is rated for %d.", capital(v.name()), plural(s.leds, "LED gear"), *n)
			f.Steps = append(f.Steps, loading.RatingSteps(float64(s.leds), float64(*n), "gears", "LED gears against the contact's count", v.by.rule.Basis)...)
			return
		}
	}
	if a, ok := known(v.m.CapacitiveA); ok {
		rated = true
		if !hasVolts {
			return
		}
		j := above(leds, exactly(a))
		if j.open {
			v.askInputs()
		}
		if j.fails {
			f := v.found(Medium, j, s.lamps)
			f.say("%s switches %s of LED and electronic gear; its contact is rated for %s of it.", capital(v.name()), amount(leds, "A"), quantity(a, "A"))
			f.Steps = append(f.Steps, loading.RatingSteps(leds.lo, math.Max(a, smallest), "A", "current of LED and electronic gear against the contact rating", v.by.rule.Basis)...)
		}
	}
	if !rated {
		v.ask(FieldDimmerContact, aboutControl(v.m))
	}
}

// switchedA is the current through a control, A, and the part of it that LED and electronic gear take.
func (v *dimmerView) switchedA(volts float64) (all, leds span) {
	if volts <= 0 {
		return nothingKnown, nothingKnown
	}
	for i := range v.members {
		m := &v.members[i]
		if m.signal() {
			continue
		}
		if m.driver != nil {
			a := m.driver.inputVA().scaled(1 / volts)
			all = all.plus(a)
			if !m.driver.kind.wound() {
				leds = leds.plus(a)
			}
			continue
		}
		all = all.plus(m.fixture.inputVA(false).scaled(1 / volts))
		leds = leds.plus(m.fixture.inputVA(true).scaled(1 / volts))
	}
	return all, leds
}

// askInputs asks for what keeps the current of the members from being known.
func (v *dimmerView) askInputs() {
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
	if asked {
		return
	}
	for i := range v.members {
		m := &v.members[i]
		if m.signal() {
			continue
		}
		v.askInputOf(m.driver, m.fixture)
	}
}

// woundOn reports how many magnetic transformers hang on a control's power path, and their lamps.
func (v *dimmerView) woundOn() (transformers, lamps int) {
	for i := range v.members {
		m := &v.members[i]
		if m.driver != nil && !m.signal() && m.driver.kind == magneticTransformer {
			transformers++
			lamps += m.driver.load.count
		}
	}
	return transformers, lamps
}

func transformerInrushOnSwitch(v *dimmerView) {
	if !switches(v.m) {
		return
	}
	proposal := v.by.sys.Proposal && v.proposed && v.m.Kind != loading.SwitchContact
	welded := v.d.WeldsInYear > 0
	if !proposal && !welded {
		return
	}
	n, lamps := v.woundOn()
	if n == 0 {
		return
	}
	f := v.found(Low, certain, lamps)
	f.say("%s switches %s, whose cores take many times their rated current at switch-on.", capital(v.name()), plural(n, "magnetic transformer"))
	if welded {
		f.step("contacts welded in the last 12 months", "1 or more", "recorded on site")
	} else {
		f.step("transformers on this contact", plural(n, "magnetic transformer"), v.by.rule.Basis)
	}
}

func transformerInrushOnBreaker(v *circuitView) {
	proposal := v.by.sys.Proposal && v.proposed
	if v.c.Curve != "B" && v.c.Curve != "" || !proposal && v.c.TripsInYear <= 0 {
		return
	}
	n, lamps := 0, 0
	for _, i := range v.drivers {
		if d := &v.by.driver[i]; d.kind == magneticTransformer {
			n++
			lamps += d.load.count
		}
	}
	if n == 0 {
		return
	}
	if v.c.Curve == "" {
		v.ask(FieldCircuitCurve, v.aboutPlace())
		return
	}
	f := v.found(Low, certain)
	f.Lamps = lamps
	f.say("%s %s behind a B curve breaker, which may trip from 3 times its rating.", capital(plural(n, "magnetic transformer")), v.be(n))
	if v.c.TripsInYear > 0 {
		f.step("trips in the last 12 months", "1 or more", "recorded on site")
	}
	f.step("transformers behind a B curve", plural(n, "magnetic transformer"), "B curve: 3 to 5 times the rating at once, IEC 60898-1; "+v.by.rule.Basis)
}

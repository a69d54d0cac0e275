package retrofit

import (
	"lampward/calc/loading"
)

// protectionRules judge protection against electric shock and water.
var protectionRules = []Rule{
	{
		ID: "isolation_lost", Severity: Danger, Blocks: true, Subject: OnDriver,
		Trigger: "gear without separation in the place of SELV or class II gear, or a constant-current output above 60 V dc, with touchable parts; " +
			"mains and extra-low voltage not kept apart",
		Why:      "A person who touches the output touches the mains.",
		Basis:    "no-load limits of 35 V peak and 60 V ripple-free dc, IEC 60598-1:2008 clause 8.2.3 c) as quoted",
		Remedy:   "Fit isolating gear; keep mains and extra-low voltage apart.",
		Cautions: []string{"CA-01", "CA-03"},
		Asks:     []Field{FieldGearSeparation, FieldDriverTouchable, FieldComplianceMax},
		driver:   isolationLost,
	},
	{
		ID: "earth_lost", Severity: Danger, Blocks: true, Subject: OnFixture,
		Trigger:  "class I luminaire recorded without its protective earth",
		Why:      "A fault makes the metal live.",
		Basis:    "class I of IEC 61140; recorded on site",
		Remedy:   "Restore the earth and prove it.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldFixtureEarth, FieldFittingClass, FieldFixtureModel},
		fixture:  earthLost,
	},
	{
		ID: "zone_unsuitable", Severity: High, Blocks: true, Subject: OnFixture,
		Trigger:  "IP code or class of the luminaire below what its damp, wet, outdoor, bath or pool zone asks for; danger in the zones of a bath or pool",
		Why:      "Water reaches live parts; wet skin conducts.",
		Basis:    "IEC 60364-7-701 and -702, from memory; damp, wet and outdoor places by common practice",
		Remedy:   "Fit a luminaire suitable for the zone.",
		Cautions: []string{"CA-01", "CA-12"},
		Asks:     []Field{FieldFittingIP, FieldFittingClass, FieldFixtureZone, FieldFixtureModel},
		fixture:  zoneUnsuitable,
		only:     wet,
	},
}

// touchable reports whether live parts of a driver's output can be touched, at the gear or at a luminaire; known is
// false where nobody has looked at all of them.
func (v *driverView) touchable() (can, known bool) {
	can, known = is(v.d.TouchableLive), v.d.TouchableLive != nil
	for _, i := range v.fixtures {
		can = can || is(v.by.fixture[i].f.TouchableLive)
	}
	return can, known || can
}

func isolationLost(v *driverView) {
	if isNot(v.d.Segregated) {
		f := v.found(Danger, certain)
		f.say("Mains and the output of %s are not kept apart.", v.name())
		f.shows("seen on site", "mains and extra-low voltage kept apart: no")
	}
	if v.d.Model == nil {
		return
	}
	before := v.d.SeparationBefore == "selv" || v.d.SeparationBefore == "class_ii"
	highest, hasHighest := positive(v.g.ComplianceMaxV)
	high := v.kind == constantCurrent && hasHighest && highest > loading.SELVNoLoadDCV
	lost := before && v.g.Separation == "none"
	can, known := v.touchable()
	switch {
	case lost && can:
		f := v.found(Danger, certain)
		f.say("The gear before had its output separated from the mains; %s has not, and live parts of it can be touched.", v.name())
		f.shows("separation", "before: "+v.d.SeparationBefore+"; now: none; touchable live parts: yes")
	case high && can:
		f := v.found(Danger, certain)
		f.say("The output of %s reaches %s dc without load, above %s, and live parts of it can be touched.", v.name(), quantity(highest, "V"), quantity(loading.SELVNoLoadDCV, "V"))
		f.step("output against the limit", quantity(highest, "V")+" > "+quantity(loading.SELVNoLoadDCV, "V"), v.by.rule.Basis)
	case (lost || high && before) && !known:
		v.ask(FieldDriverTouchable, v.aboutPlace())
	case before && v.g.Separation == "" && (can || !known):
		v.ask(FieldGearSeparation, aboutGear(v.g))
	case can && v.kind == constantCurrent && !hasHighest:
		v.ask(FieldComplianceMax, aboutGear(v.g))
	}
}

func earthLost(v *fixtureView) {
	switch {
	case isNot(v.f.Earth) && v.m.Class == "I":
		f := v.found(Danger, certain)
		f.say("This class I luminaire is recorded without its protective earth.")
		f.shows("luminaire", "class: I; protective earth: not connected")
	case isNot(v.f.Earth) && v.m.Class == "" && v.f.Model != nil:
		v.ask(FieldFittingClass, aboutFitting(v.m))
	case isNot(v.f.Earth) && v.f.Model == nil:
		v.ask(FieldFixtureModel, v.aboutPlace())
	case v.f.Earth == nil && v.m.Class == "I" && v.converted():
		// Nobody loses an earth by looking on; rewiring is where it is left off.
		v.ask(FieldFixtureEarth, v.aboutPlace())
	}
}

// A wetZone says what a zone asks for: the second numeral of the IP code and class III, and whether a bath or pool is
// within reach.
type wetZone struct {
	water    int
	classIII bool
	reach    bool
}

// wetZoneOf returns what a zone asks for; ok is false for a dry or unknown one.
func wetZoneOf(zone string) (z wetZone, ok bool) {
	switch zone {
	case "dry", "":
		return wetZone{}, false
	case "damp":
		return wetZone{water: 1}, true
	case "wet":
		return wetZone{water: 4}, true
	case "outdoor":
		return wetZone{water: 3}, true
	case "bath_0":
		return wetZone{water: 7, classIII: true, reach: true}, true
	case "bath_1", "bath_2", "pool_1":
		return wetZone{water: 4, reach: true}, true
	case "pool_0":
		return wetZone{water: 8, classIII: true, reach: true}, true
	case "pool_2":
		return wetZone{water: 2, reach: true}, true
	}
	return wetZone{}, false
}

// waterNumeral reads the second numeral of an IP code, e.g. 5 of IP65; ok is false where there is none.
func waterNumeral(ip string) (n int, ok bool) {
	if len(ip) < 4 || ip[0] != 'I' && ip[0] != 'i' || ip[1] != 'P' && ip[1] != 'p' {
		return 0, false
	}
	at := 3
	if ip[2] == ' ' && len(ip) > 4 {
		at = 4
	}
	if ip[at] == 'X' || ip[at] == 'x' {
		return 0, true // not tested against water
	}
	if ip[at] < '0' || ip[at] > '9' {
		return 0, false
	}
	return int(ip[at] - '0'), true
}

func zoneUnsuitable(v *fixtureView) {
	if v.f.Zone == "" {
		if v.proposed && v.f.Model != nil {
			v.ask(FieldFixtureZone, v.aboutPlace())
		}
		return
	}
	zone, ok := wetZoneOf(v.f.Zone)
	if !ok {
		return
	}
	severity := High
	if zone.reach {
		severity = Danger
	}
	if v.f.Model == nil {
		v.askAt(FieldFixtureModel, v.aboutPlace(), severity, true)
		return
	}
	water, ok := waterNumeral(v.m.IP)
	switch {
	case !ok:
		v.askAt(FieldFittingIP, aboutFitting(v.m), severity, true)
	case water < zone.water:
		f := v.found(severity, certain)
		f.say("A luminaire of %s hangs in zone %s, which asks for IPX%d.", v.m.IP, v.f.Zone, zone.water)
		f.step("protection against water", loading.Figure(float64(water))+" < "+loading.Figure(float64(zone.water)), v.by.rule.Basis)
		return
	}
	if !zone.classIII {
		return
	}
	switch v.m.Class {
	case "III":
	case "":
		v.askAt(FieldFittingClass, aboutFitting(v.m), severity, true)
	default:
		f := v.found(severity, certain)
		f.say("A class %s luminaire hangs in zone %s, where only SELV of class III is allowed.", v.m.Class, v.f.Zone)
		f.shows("luminaire and zone", "class: "+v.m.Class+"; zone "+v.f.Zone+": class III")
	}
}

package retrofit

import (
	"math"

	"lampward/calc/loading"
)

// dimmerRules judge dimmers, control pairs and what hangs on them. What is wrong between a dimmer and one driver or
// luminaire is found at that place, what is wrong with the whole load at the dimmer.
var dimmerRules = []Rule{
	{
		ID: "dimmer_wrong_for_gear", Severity: High, Blocks: true, Subject: OnDimmer,
		Trigger:  "the compatibility matrix says no to this load on this kind of control",
		Why:      "The wrong edge or class of control overheats the load or the dimmer, or does nothing at all.",
		Basis:    matrixBasis,
		Remedy:   "Change the dimmer for one that suits the load, or the gear for one that suits the dimmer.",
		Cautions: []string{"CA-01", "CA-11"},
		Asks: []Field{FieldDimmerModel, FieldDimmerKind, FieldDimmerMarking, FieldDimmerSetEdge, FieldDimmerToroids, FieldGearDimming,
			FieldGearToroid, FieldLampDimming, FieldLampTechnology},
		Hides:  []string{"mains_led_on_unmatched_dimmer", "dimmed_magnetic_transformer_after_retrofit"},
		dimmer: dimmerWrongForGear,
	},
	{
		ID: "not_dimmable_on_dimmer", Severity: High, Blocks: true, Subject: OnDimmer,
		Trigger:  "lamp or gear that is not dimmable behind any dimmer, even one left at full",
		Why:      "The dimmer's chopped supply drives ripple current and heat into gear that was not made for it.",
		Basis:    matrixBasis,
		Remedy:   "Replace the dimmer with a switch, or fit lamps or gear marked dimmable.",
		Cautions: []string{"CA-01", "CA-11"},
		Asks:     []Field{FieldLampDimming, FieldGearDimming},
		Hides:    []string{"dimmer_wrong_for_gear", "mains_led_on_unmatched_dimmer", "dimmed_magnetic_transformer_after_retrofit"},
		dimmer:   notDimmableOnDimmer,
	},
	{
		ID: "dimmer_overloaded", Severity: High, Blocks: true, Subject: OnDimmer,
		Trigger:  "load above the dimmer's rating for its class, its LED rating, its count of lamps or its repetitive peak",
		Why:      "The dimmer overheats; lamps with a capacitor input take spikes far above what their watts suggest.",
		Basis:    "rating on the dimmer; repetitive peak as in NEMA SSL 7A",
		Remedy:   "Split the load over more dimmers, or fit an interface or a larger dimmer.",
		Cautions: []string{"CA-01", "CA-11"},
		Asks: []Field{FieldDimmerLEDMaxLoad, FieldDimmerMaxLoad, FieldDimmerMaxVA, FieldDimmerCapacitive, FieldDimmerChannel, FieldLampPower,
			FieldFixtureLamps, FieldEfficiency, FieldLampPowerFactor, FieldLampPeak, FieldGearOutputV},
		dimmer: dimmerOverloaded,
	},
	{
		ID: "dimmer_underloaded", Severity: Medium, Subject: OnDimmer,
		Trigger:  "power taken by the lamps believed working below the dimmer's least load",
		Why:      "The dimmer's switch drops out and fires again: flicker, pop-on, dead travel.",
		Basis:    "least load on the dimmer",
		Remedy:   "Fit a dimmer with a lower least load, or a load the dimmer's maker lists for it.",
		Cautions: []string{"CA-01", "CA-11"},
		Asks:     []Field{FieldDimmerMinLoad, FieldLampPower, FieldFixtureLamps, FieldEfficiency},
		dimmer:   dimmerUnderloaded,
	},
	{
		ID: "dimmer_mixed_loads", Severity: High, Blocks: true, Subject: OnDimmer,
		Trigger:  "magnetic transformers together with electronic transformers, LED drivers or LED lamps on one phase-cut output",
		Why:      "One kind needs the leading edge, the other the trailing edge; the wound part drives voltage spikes into the rest.",
		Basis:    "over-voltage from an inductive load, from memory of IEC 60669-2-1",
		Remedy:   "Put inductive and capacitive loads on separate dimmers.",
		Cautions: []string{"CA-01", "CA-11"},
		dimmer:   dimmerMixedLoads,
	},
	{
		ID: "control_signal_mismatch", Severity: Medium, Subject: OnDimmer,
		Trigger:  "analogue source on a source or sink on a sink, 0-10 V against 1-10 V, DALI or pulse-width against another signal",
		Why:      "The gear does not follow the control: full light, or none, or no off.",
		Basis:    "ANSI C137.1 and IEC 60929 annex E, from memory; IEC 62386",
		Remedy:   "Match control and gear, or fit an interface between them.",
		Cautions: []string{"CA-01", "CA-11", "CA-15"},
		Asks:     []Field{FieldDimmerRole, FieldGearRole},
		dimmer:   controlSignalMismatch,
	},
	{
		ID: "mains_on_control_pair", Severity: Danger, Blocks: true, Subject: OnDimmer,
		Trigger:  "mains voltage recorded on a control input or pair",
		Why:      "The input is destroyed, and everything on the pair can be live.",
		Basis:    "recorded on site",
		Remedy:   "Isolate, find the fault, and segregate the control pair from the mains.",
		Cautions: []string{"CA-01", "CA-09", "CA-15"},
		dimmer:   mainsOnControlPair,
	},
	{
		ID: "dimmed_magnetic_transformer_after_retrofit", Severity: Medium, Subject: OnDimmer,
		Trigger:  "magnetic transformer with LED lamps on a phase-cut dimmer whose load is below the dimmer's least load",
		Why:      "The dimmer fires unevenly; the dc offset makes the transformer hum and saturate.",
		Basis:    "least load on the dimmer; saturation by dc offset is engineering reasoning",
		Remedy:   "Fit an inductive dimmer with a lower least load, or none.",
		Cautions: []string{"CA-01", "CA-11"},
		Asks:     []Field{FieldDimmerMinLoad, FieldLampPower, FieldFixtureLamps, FieldEfficiency},
		Hides:    []string{"dimmer_underloaded"},
		dimmer:   dimmedMagneticTransformer,
	},
	{
		ID: "mains_led_on_unmatched_dimmer", Severity: Medium, Subject: OnDimmer,
		Trigger:  "mains LED lamp on a phase-cut dimmer: marked dimmable without naming the edge, or naming it in a pair that nobody lists",
		Why:      "How a dimmer and an LED lamp get on cannot be told from their ratings: 14 lamps on 4 dimmers differed even at full.",
		Basis:    "DOE CALiPER Retail Lamps 3.1; matrix of loads and dimmers",
		Remedy:   "Use a pair that somebody tested and lists.",
		Cautions: []string{"CA-11"},
		Asks:     []Field{FieldLampDimming},
		dimmer:   mainsLEDOnUnmatchedDimmer,
	},
}

// actsThrough reports whether a member hangs on a control in the way the control works. A control of the signal kind
// often switches the mains as well: the power path through it is then a plain contact.
func (v *dimmerView) actsThrough(m *member) bool {
	if m.signal() || !signalKind(v.m) {
		return true
	}
	for i := range v.members {
		o := &v.members[i]
		if o.signal() && o.driver == m.driver && o.fixture == m.fixture {
			return false
		}
	}
	return true
}

func (v *dimmerView) sayNo(m *member, l *lampLoad, load, accepts string) {
	f := v.foundMember(m, l, High, certain)
	f.say("%s is on %s; it accepts %s.", capital(load), v.name(), accepts)
	f.step("load on this kind of control", load+", "+accepts+", on a "+controlWord(v.m)+" = no", matrixBasis)
}

func dimmerWrongForGear(v *dimmerView) {
	if v.m.Kind == "" {
		if len(v.members) > 0 {
			v.ask(v.kindField())
		}
		return
	}
	for i := range v.members {
		m := &v.members[i]
		if !v.actsThrough(m) {
			continue
		}
		if d := m.driver; d != nil {
			x := v.onGear(d)
			switch {
			case x.ask != "":
				v.ask(x.ask, x.about)
			case x.answer == Incompatible:
				load := d.name()
				accepts := acceptsOf(d.g.Dimming).words()
				if d.kind == magneticTransformer {
					accepts = "leading edge with the letter L"
					if is(d.g.Toroid) {
						load, accepts = load+" (a toroid)", accepts+" and leave for toroids"
					}
				}
				v.sayNo(m, nil, load, accepts)
			}
			continue
		}
		if !m.fixture.bare {
			continue
		}
		for k := range m.fixture.lamps {
			l := &m.fixture.lamps[k]
			x := v.onLamp(l)
			switch {
			case x.answer == Conditional: // mains_led_on_unmatched_dimmer
			case x.ask != "":
				v.ask(x.ask, x.about)
			case x.answer == Incompatible:
				accepts := "phase-cut dimming"
				if l.class != filament {
					accepts = acceptsOf(l.model.Dimming).words()
				}
				v.sayNo(m, l, "this mains "+l.class.word(), accepts)
			}
		}
	}
}

func notDimmableOnDimmer(v *dimmerView) {
	if !phaseCut(v.m) && v.m.Kind != loading.PWMDC {
		return
	}
	for i := range v.members {
		m := &v.members[i]
		if m.signal() {
			continue
		}
		if d := m.driver; d != nil && v.m.Kind != loading.PWMDC {
			if d.kind == gearUnknown || d.kind == emergencyPack || v.listedGear(d) {
				continue
			}
			if a := acceptsOf(d.g.Dimming); a.nothing && d.kind != magneticTransformer {
				f := v.foundMember(m, nil, High, certain)
				f.say("%s is not dimmable and is on %s.", capital(d.name()), v.name())
				f.step("marked for dimming", "none, on a "+controlWord(v.m)+" = no, even at full", matrixBasis)
			}
		}
		lamps := m.lamps()
		for k := range lamps {
			l := &lamps[k]
			if l.model == nil || l.class == filament || m.driver == nil && !m.fixture.bare {
				continue
			}
			if m.driver != nil && (m.driver.kind == gearUnknown || l.model.Technology == loading.LEDModule || v.listedGear(m.driver)) ||
				m.driver == nil && v.listed(l.model.Key, loading.Key{}, v.sameLamps(l.model)) {
				continue
			}
			if a := acceptsOf(l.model.Dimming); a.nothing {
				f := v.foundMember(m, l, High, certain)
				f.say("%s of a model that is not dimmable %s on %s.", plural(l.count, l.class.word()), v.be(l.count), v.name())
				f.step("marked for dimming", "none, on a "+controlWord(v.m)+" = no, even at full", matrixBasis)
			} else if !a.known && l.class == led && m.driver != nil {
				v.ask(FieldLampDimming, aboutLamp(l.model))
			}
		}
	}
}

func dimmerOverloaded(v *dimmerView) {
	switch {
	case v.m.Kind == loading.PWMDC:
		v.channelOverloaded()
		return
	case !phaseCut(v.m):
		return
	}
	s := v.powerLoad()
	share, thumb, sure := exactly(0), exactly(0), 0.0
	var missing [loadClasses]Field
	lacks, screened := false, false
	for c := range loadClasses {
		if !s.present[c] {
			continue
		}
		limit, ok, field := v.rating(c)
		if ok {
			share = share.plus(s.class[c].scaled(1 / limit))
			sure += s.lampsW[c] / limit
			continue
		}
		if w, known := positive(v.m.MaxLoadW); known && c == ledLoad {
			// The rule of thumb stands in for a missing LED rating; larger rating, smaller share.
			screened = true
			thumb = thumb.plus(span{s.class[c].lo / (w * dimmerLEDShare.Hi), s.class[c].hi / (w * dimmerLEDShare.Lo), dimmerLEDShare.Mark})
			continue
		}
		missing[c], lacks = field, true
	}
	j := above(share, exactly(1))
	if byLamps := above(exactly(sure), exactly(1)); byLamps.fails {
		j = byLamps // the lamps alone are too much, whatever the gear loses
	}
	count, counted := v.m.LEDMaxCount, false
	if count != nil && *count > 0 && *count <= 1e6 {
		counted = s.leds > *count
	}
	peak, peaked := positive(v.m.RepetitivePeakA)
	switch {
	case j.fails:
		f := v.found(High, j, s.lamps)
		f.say("%s %s %s to %s of its rating%s.", capital(plural(s.lamps, "lamp")), v.verb(s.lamps, "loads", "load"), v.name(), loading.Percent(share.lo), s.forClass())
		v.stepRatings(f, &s)
		if s.classes() > 1 {
			f.step("shares of all ratings together", loading.Percent(share.lo), v.by.rule.Basis)
		}
		return
	case counted:
		f := v.found(High, judgement{fails: true, sure: Recorded, excess: ratio(float64(s.leds), float64(*count))}, s.lamps)
		f.say("%s %s on %s; it may carry at most %d.", capital(plural(s.leds, "LED lamp")), v.be(s.leds), v.name(), *count)
		f.Steps = append(f.Steps, loading.RatingSteps(float64(s.leds), float64(*count), "lamps", "lamps against the count on the dimmer", v.by.rule.Basis)...)
		return
	case peaked && exceeds(s.peakA, peak):
		f := v.found(High, judgement{fails: true, sure: Recorded, excess: ratio(s.peakA, peak)}, s.lamps)
		f.say("The current spikes of %s add up to %s each half cycle; %s may carry %s.", plural(s.leds, "LED lamp"), quantity(s.peakA, "A"), v.name(), quantity(peak, "A"))
		f.Steps = append(f.Steps, loading.RatingSteps(s.peakA, peak, "A", "repetitive peak against the dimmer's", v.by.rule.Basis)...)
		return
	}
	if screened {
		j = above(share.plus(thumb), exactly(1))
		switch {
		case j.fails:
			j.sure = Screening
			f := v.found(High, j, s.lamps)
			limit, _ := positive(v.m.MaxLoadW)
			f.say("%s of LED lamps on %s without a rating for them is more than a quarter of its filament rating.", amount(s.class[ledLoad], "W"), v.name())
			v.stepRatings(f, &s)
			f.step("LED lamps against 10 % to 25 % of the filament rating", amount(s.class[ledLoad], "W")+" against "+
				amount(dimmerLEDShare.times(limit), "W"), "common practice, no source")
			return
		case j.open && (!math.IsInf(s.class[ledLoad].hi, 1) || s.class[ledLoad].lo > dimmerLEDShare.Lo*v.maxLoad()):
			v.ask(FieldDimmerLEDMaxLoad, aboutControl(v.m))
		}
	}
	if lacks {
		for c := range loadClasses {
			if missing[c] != "" {
				v.ask(missing[c], aboutControl(v.m))
			}
		}
	}
	if j.open {
		v.askLoads(apparentPower)
	}
	if peaked && s.peakMiss != nil {
		v.ask(FieldLampPeak, aboutLamp(s.peakMiss))
	}
}

func (v *dimmerView) maxLoad() float64 {
	w, _ := positive(v.m.MaxLoadW)
	return w
}

// stepRatings shows the load of each class against its rating.
func (v *dimmerView) stepRatings(f *Finding, s *dimmerLoad) {
	for c := range loadClasses {
		limit, ok, _ := v.rating(c)
		if !s.present[c] || !ok {
			continue
		}
		unit := "W"
		if c == inductive {
			unit = "VA"
		}
		var all []loading.Part
		for i := range v.members {
			if m := &v.members[i]; !m.signal() && v.memberClass(m, c) {
				all = append(all, v.partsOf(m, c)...)
			}
		}
		if len(all) > 0 {
			f.step("load of "+classWords[c], loading.SumWords(gathered(all)), "nameplate power of the lamps")
		}
		f.step("load of "+classWords[c]+" against the rating, losses of gear included", amount(s.class[c], unit)+"; "+loading.Figure(s.class[c].lo)+" / "+
			loading.Figure(limit)+" = "+loading.Percent(s.class[c].lo/limit), v.by.rule.Basis)
	}
}

// memberClass reports whether a member has part in a class of load.
func (v *dimmerView) memberClass(m *member, c loadClass) bool {
	if m.driver != nil {
		return m.driver.kind != gearUnknown && m.driver.kind != emergencyPack && classOfGear(m.driver.kind) == c
	}
	return len(v.partsOf(m, c)) > 0
}

// partsOf are the lamps of a member that count for a class.
func (v *dimmerView) partsOf(m *member, c loadClass) []loading.Part {
	if m.driver != nil {
		return parts(m.driver.lamps, false)
	}
	var out []loading.Part
	for i := range m.fixture.lamps {
		l := &m.fixture.lamps[i]
		if (l.class == led || l.class == fluorescent) == (c == ledLoad) && (c == ledLoad || c == resistive) && l.known {
			out = append(out, loading.Part{Count: l.count, PowerW: l.watts})
		}
	}
	return out
}

// channelOverloaded judges the current of a pulse-width dimmer. Without a rating over all channels the rating of one is
// the limit, as it is where the dimmer has but one.
func (v *dimmerView) channelOverloaded() {
	limit, ok := positive(v.m.TotalMaxA)
	if !ok {
		limit, ok = positive(v.m.ChannelMaxA)
	}
	amps := exactly(0)
	lamps := 0
	for i := range v.members {
		d := v.members[i].driver
		if d == nil || v.members[i].signal() || d.kind != constantVoltage {
			continue
		}
		volts, known := positive(d.g.OutputV)
		if !known {
			v.ask(FieldGearOutputV, aboutGear(d.g))
			amps.hi = math.Inf(1)
			continue
		}
		amps = amps.plus(d.load.w.scaled(1 / volts))
		lamps += d.load.count
	}
	if lamps == 0 {
		return
	}
	if !ok {
		v.ask(FieldDimmerChannel, aboutControl(v.m))
		return
	}
	j := above(amps, exactly(limit))
	if j.open {
		v.askLoads(lampPower)
	}
	if j.fails {
		f := v.found(High, j, lamps)
		f.say("The load on %s draws %s; it may carry %s.", v.name(), amount(amps, "A"), quantity(limit, "A"))
		f.Steps = append(f.Steps, loading.RatingSteps(amps.lo, limit, "A", "output current against the dimmer's rating", v.by.rule.Basis)...)
	}
}

func dimmerUnderloaded(v *dimmerView) {
	if !phaseCut(v.m) {
		return
	}
	s := v.powerLoad()
	least, j := v.belowMinimum(&s)
	if !j.fails {
		return
	}
	f := v.found(Medium, j, s.lit)
	f.say("%s %s %s with %s; it needs at least %s.", capital(plural(s.lit, "lamp")), v.verb(s.lit, "loads", "load"), v.name(),
		amount(s.working, "W"), quantity(least, "W"))
	v.stepMinimum(f, &s, least)
}

// belowMinimum judges the load now against the dimmer's least load, and asks for what is missing.
func (v *dimmerView) belowMinimum(s *dimmerLoad) (least float64, j judgement) {
	if s.lit == 0 {
		return 0, judgement{}
	}
	least, ok, missing := v.minimum(s)
	if !ok {
		v.ask(missing, aboutControl(v.m))
		return 0, judgement{}
	}
	j = below(s.working, exactly(least))
	if j.open {
		v.askLoads(inputPower)
	}
	return least, j
}

func (v *dimmerView) stepMinimum(f *Finding, s *dimmerLoad, least float64) {
	f.step("power at the dimmer, lamps believed working, losses of gear included", amount(s.working, "W"), "nameplate power over efficiency")
	f.step("load against the dimmer's least load", quantity(s.working.hi, "W")+" < "+quantity(least, "W"), "least load on the dimmer")
}

func dimmerMixedLoads(v *dimmerView) {
	if !phaseCut(v.m) {
		return
	}
	s := v.powerLoad()
	if !s.present[inductive] || !s.present[capacitive] && !s.present[ledLoad] {
		return
	}
	f := v.found(High, certain, s.lamps)
	other := capacitive
	if !s.present[capacitive] {
		other = ledLoad
	}
	f.say("%s carries magnetic transformers and %s on one output.", capital(v.name()), classWords[other])
	f.step("kinds of load on one output", "inductive "+amount(s.class[inductive], "VA")+" and capacitive "+
		amount(s.class[capacitive].plus(s.class[ledLoad]), "W"), v.by.rule.Basis)
}

func controlSignalMismatch(v *dimmerView) {
	for i := range v.members {
		m := &v.members[i]
		d := m.driver
		if d == nil || d.kind == gearUnknown || !signalKind(v.m) || !v.actsThrough(m) || v.listedGear(d) {
			continue
		}
		a := acceptsOf(d.g.Dimming)
		if !a.signal() {
			continue // the matrix says no
		}
		speaks := v.m.Kind == loading.DALI && a.dali || v.m.Kind == loading.Analogue1to10V && a.analogue1 ||
			v.m.Kind == loading.Analogue0to10V && a.analogue0
		if !speaks {
			f := v.foundMember(m, nil, Medium, certain)
			f.say("%s accepts %s and hangs on a %s.", capital(d.name()), a.words(), controlWord(v.m))
			f.step("protocol of gear and control", a.words()+" against "+controlWord(v.m), v.by.rule.Basis)
			continue
		}
		if !analogue(v.m) {
			continue
		}
		mine, its := v.m.AnalogueRole, d.g.AnalogueRole
		switch {
		case mine == "":
			v.ask(FieldDimmerRole, aboutControl(v.m))
		case its == "":
			v.ask(FieldGearRole, aboutGear(d.g))
		case mine == its:
			f := v.foundMember(m, nil, Medium, certain)
			verb := "drive"
			if mine == loading.Sinks {
				verb = "draw"
			}
			f.say("%s and the %s on its pair both %s the control current; one must source it and the other sink it.", capital(d.name()), controlWord(v.m), verb)
			f.step("role on the analogue pair", "gear "+its+", control "+mine, v.by.rule.Basis)
		}
	}
}

func mainsOnControlPair(v *dimmerView) {
	for i := range v.members {
		m := &v.members[i]
		if !m.signal() || m.controlled.VoltageFound != "mains" {
			continue
		}
		f := v.foundMember(m, nil, Danger, certain)
		where := "a luminaire"
		if m.driver != nil {
			where = m.driver.name()
		}
		f.say("Mains voltage was found on the control pair of %s.", where)
		f.step("voltage found on the pair", "mains", "recorded on site")
	}
}

func dimmedMagneticTransformer(v *dimmerView) {
	if !phaseCut(v.m) {
		return
	}
	concerned := false
	for i := range v.members {
		concerned = concerned || v.dimmedWound(&v.members[i])
	}
	if !concerned {
		return
	}
	s := v.powerLoad()
	least, j := v.belowMinimum(&s)
	if !j.fails {
		return
	}
	for i := range v.members {
		m := &v.members[i]
		if !v.dimmedWound(m) {
			continue
		}
		f := v.foundMember(m, nil, Medium, j)
		f.say("%s with LED lamps is on %s, which carries %s and needs at least %s.", capital(m.driver.name()), v.name(),
			amount(s.working, "W"), quantity(least, "W"))
		v.stepMinimum(f, &s, least)
	}
}

// dimmedWound reports whether a member is a magnetic transformer with LED lamps.
func (v *dimmerView) dimmedWound(m *member) bool {
	return m.driver != nil && !m.signal() && m.driver.kind == magneticTransformer && m.driver.load.led > 0
}

func mainsLEDOnUnmatchedDimmer(v *dimmerView) {
	if !phaseCut(v.m) {
		return
	}
	for i := range v.members {
		m := &v.members[i]
		if m.signal() || m.fixture == nil || !m.fixture.bare {
			continue
		}
		for k := range m.fixture.lamps {
			l := &m.fixture.lamps[k]
			if l.class != led || l.model == nil {
				continue
			}
			a := acceptsOf(l.model.Dimming)
			switch {
			case !a.known:
				v.ask(FieldLampDimming, aboutLamp(l.model))
				continue
			case !a.phase() || v.listed(l.model.Key, loading.Key{}, v.sameLamps(l.model)):
				continue
			}
			severity, words := Low, "names the edge ("+a.words()+"), but nobody lists it with this dimmer"
			if a.edgeless {
				severity, words = Medium, "is marked dimmable without naming the edge"
			}
			f := v.foundMember(m, l, severity, certain)
			f.say("%s on %s %s of a model that %s.", capital(plural(l.count, "mains LED lamp")), v.name(), are(l.count), words)
			f.step("lamp and dimmer", a.words()+" on a "+controlWord(v.m)+", no listed pair = conditional", matrixBasis)
		}
	}
}

// sameLamps counts the lamps of one model straight on the dimmer.
func (v *dimmerView) sameLamps(model *loading.Lamp) int {
	n := 0
	for i := range v.members {
		m := &v.members[i]
		if m.signal() || m.driver != nil {
			continue
		}
		for k := range m.fixture.lamps {
			if sameLamp(m.fixture.lamps[k].model, model) {
				n += m.fixture.lamps[k].count
			}
		}
	}
	return n
}

package retrofit

import (
	"lampward/calc/loading"
)

// fittingRules judge lamps against the luminaire they hang in.
var fittingRules = []Rule{
	{
		ID: "exposed_live_parts", Severity: Danger, Blocks: true, Subject: OnFixture,
		Trigger:  "a person recorded touchable live parts, or a lamp without a safety approval",
		Why:      "Retail lamps with live faceplates have been found.",
		Basis:    "Electrical Safety First, safe installation of retrofit LED lamps; recorded on site",
		Remedy:   "Take it out of use.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldLampApproval, FieldGearSeparation},
		fixture:  exposedLiveParts,
		driver:   exposedLiveOutput,
	},
	{
		ID: "enclosed_fitting_lamp_not_rated", Severity: High, Blocks: true, Subject: OnFixture,
		Trigger:  "LED or compact fluorescent lamp in an enclosed, insulation-contact or fire-rated luminaire: marked against it, or (medium) silent about it",
		Why:      "In a 4,000 h test 53 % failed in enclosed ceiling luminaires and 48 % in recessed ones.",
		Basis:    "Lawrence Berkeley National Laboratory, large-scale LED lamp life test; lamp marking",
		Remedy:   "Fit a lamp marked for enclosed luminaires, or an LED luminaire.",
		Cautions: []string{"CA-02"},
		Asks:     []Field{FieldLampEnclosed, FieldFittingEnclosed},
		fixture:  enclosedFittingLampNotRated,
	},
	{
		ID: "fitting_over_max_lamp_power", Severity: Danger, Blocks: true, Subject: OnFixture,
		Trigger:  "lamp power above the luminaire's label; medium for lamps without a filament or arc, by their own power",
		Why:      "Heat destroys the insulation and can start a fire.",
		Basis:    "luminaire label; NFPA LED lighting safety",
		Remedy:   "Obey the label.",
		Cautions: []string{"CA-02"},
		Asks:     []Field{FieldFittingMaxW, FieldFixtureModel, FieldLampPower},
		fixture:  fittingOverMaxLampPower,
	},
	{
		ID: "insulation_over_gear", Severity: Danger, Subject: OnFixture,
		Trigger:  "thermal insulation or a hood recorded over gear or a luminaire that is not marked for it",
		Why:      "Heat that cannot leave destroys gear and can start a fire.",
		Basis:    "marking of gear and luminaire; recorded on site",
		Remedy:   "Restore the clearances, or fit gear and luminaires marked for it.",
		Cautions: []string{"CA-01", "CA-02", "CA-05"},
		Asks:     []Field{FieldFixtureModel},
		fixture:  insulationOverFitting,
		driver:   insulationOverGear,
	},
}

func exposedLiveParts(v *fixtureView) {
	if is(v.f.TouchableLive) {
		f := v.found(Danger, certain)
		f.say("Live parts of this luminaire can be touched.")
		f.shows("seen on site", "touchable live parts: yes")
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil || l.model.Technology != loading.LEDLamp && l.model.Technology != loading.LEDTube {
			if l.model != nil && isNot(l.model.Approval) {
				v.sayUnapproved(l)
			}
			continue
		}
		switch {
		case l.model.Approval == nil:
			v.ask(FieldLampApproval, aboutLamp(l.model))
		case isNot(l.model.Approval):
			v.sayUnapproved(l)
		}
	}
}

func (v *fixtureView) sayUnapproved(l *lampLoad) {
	f := v.foundLamp(l, Danger, certain)
	f.say("%s %s without a safety approval.", plural(l.count, "lamp"), are(l.count))
	f.shows("lamp", "safety approval: none")
}

func exposedLiveOutput(v *driverView) {
	if !is(v.d.TouchableLive) || v.d.SeparationBefore == "selv" || v.d.SeparationBefore == "class_ii" {
		return // with a record of what stood here before it is isolation_lost
	}
	switch v.g.Separation {
	case "none":
		f := v.found(Danger, certain)
		f.say("Live parts of the output of %s can be touched, and it has no separation from the mains.", v.name())
		f.shows("output", "touchable live parts: yes; separation: none")
	case "":
		if v.d.Model != nil {
			v.ask(FieldGearSeparation, aboutGear(v.g))
		}
	}
}

// enclosed reports whether a luminaire closes its lamp in; known is false where nobody has said.
func (v *fixtureView) enclosed() (closed, known bool) {
	if is(v.f.InEnclosure) || is(v.m.Enclosed) || is(v.m.FireRated) || is(v.m.InsulationRated) {
		return true, true
	}
	return false, v.f.InEnclosure != nil || v.m.Enclosed != nil
}

func enclosedFittingLampNotRated(v *fixtureView) {
	closed, known := v.enclosed()
	if known && !closed {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil || l.model.Technology != loading.LEDLamp && l.model.Technology != loading.CFL || is(l.model.SuitableEnclosed) {
			continue
		}
		switch {
		case !known && v.f.Model == nil:
		case !known && l.model.SuitableEnclosed == nil:
			v.askAt(FieldLampEnclosed, aboutLamp(l.model), Medium, false)
		case !known:
			v.ask(FieldFittingEnclosed, aboutFitting(v.m))
		case isNot(l.model.SuitableEnclosed):
			f := v.foundLamp(l, High, certain)
			f.say("%s %s marked against enclosed luminaires, and this one is enclosed.", plural(l.count, "lamp"), are(l.count))
			f.shows("luminaire and lamp", "luminaire: enclosed; lamp for enclosed luminaires: no")
		default:
			v.ask(FieldLampEnclosed, aboutLamp(l.model))
			f := v.foundLamp(l, Medium, certain)
			f.Blocks = false
			f.say("%s %s in an enclosed luminaire; nothing says that this lamp is made for that.", plural(l.count, "lamp"), v.verb(l.count, "sits", "sit"))
			f.shows("luminaire and lamp", "luminaire: enclosed; lamp for enclosed luminaires: not stated")
		}
	}
}

func fittingOverMaxLampPower(v *fixtureView) {
	limit, ok := positive(v.m.MaxLampW)
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil || l.class == classUnknown {
			continue
		}
		severity := Medium
		if l.class == filament || l.class == discharge {
			severity = Danger
		}
		switch {
		case l.model.Technology == loading.LEDModule:
		case !ok && v.f.Model != nil:
			v.askAt(FieldFittingMaxW, aboutFitting(v.m), severity, true)
		case !ok:
			if severity == Danger {
				v.ask(FieldFixtureModel, v.aboutPlace())
			}
		case !l.known:
			v.askAt(FieldLampPower, aboutLamp(l.model), severity, true)
		case exceeds(l.watts, limit):
			j := above(exactly(l.watts), exactly(limit))
			f := v.foundLamp(l, severity, j)
			f.say("%s %s in a luminaire labelled for at most %s a lamp.", capital(words([]lampLoad{*l}, false)), v.verb(l.count, "sits", "sit"), quantity(limit, "W"))
			f.step("lamp against the label", loading.Figure(l.watts)+" / "+loading.Figure(limit)+" = "+loading.Percent(l.watts/limit), "luminaire label")
		}
	}
}

func insulationOverFitting(v *fixtureView) {
	if !is(v.f.InsulationOver) {
		return
	}
	if v.f.Model == nil {
		v.ask(FieldFixtureModel, v.aboutPlace())
		return
	}
	if is(v.m.InsulationRated) {
		return
	}
	severity := High
	if v.driver != nil && v.driver.d.Integral && v.driver.kind.wound() {
		severity = Danger
	}
	for i := range v.lamps {
		if c := v.lamps[i].class; c == filament || c == discharge {
			severity = Danger
		}
	}
	f := v.found(severity, certain)
	f.say("Insulation or a hood lies over this luminaire, which is not marked for it.")
	f.shows("seen on site", "insulation or hood over it: yes; marked for that: no")
}

func insulationOverGear(v *driverView) {
	if !is(v.d.InsulationOver) || is(v.g.InsulationCovering) {
		return
	}
	severity := High
	if v.kind.wound() {
		severity = Danger
	}
	f := v.found(severity, certain)
	f.say("Insulation or a hood lies over %s, which is not marked for it.", v.name())
	f.shows("seen on site", "insulation or hood over it: yes; marked for that: no")
}

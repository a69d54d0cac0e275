package retrofit

import (
	"strings"

	"lampward/calc/loading"
)

// dischargeRules judge LED lamps in luminaires made for high-intensity discharge lamps.
var dischargeRules = []Rule{
	{
		ID: "led_in_hid_fitting_with_ignitor", Severity: Danger, Blocks: true, Subject: OnFixture,
		Trigger:  "LED lamp in a discharge luminaire whose ignitor or ballast is still in circuit, and the lamp is not made for that",
		Why:      "The ignitor strikes the lamp with pulses of kilovolts.",
		Basis:    "common practice, no source; lamp data",
		Remedy:   "Remove the gear and label the luminaire, with a kit rated for it.",
		Cautions: []string{"CA-01", "CA-03", "CA-10"},
		Asks:     []Field{FieldLampHIDGear, FieldFixtureConversion},
		fixture:  ledInHIDFittingWithIgnitor,
		only:     forDischarge,
	},
	{
		ID: "heavy_lamp_in_hid_fitting", Severity: High, Blocks: true, Subject: OnFixture,
		Trigger:  "lamp in a discharge luminaire heavier than its holder may carry (danger), or of another cap (high)",
		Why:      "The lamp works loose and falls.",
		Basis:    "mass stated for the holder; IEC 60061 caps",
		Remedy:   "Fit an LED luminaire.",
		Cautions: []string{"CA-04", "CA-13"},
		Asks:     []Field{FieldLampMass, FieldFittingMass},
		fixture:  heavyLampInHIDFitting,
		only:     forDischarge,
	},
}

func ledInHIDFittingWithIgnitor(v *fixtureView) {
	if !is(v.m.Discharge) && (v.driver == nil || v.driver.kind != hidGear) {
		return
	}
	inCircuit := v.driver != nil && (v.driver.kind == hidGear || v.onBallast()) && !v.converted()
	if !inCircuit {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.class != led || l.model.Technology == loading.LEDModule {
			continue
		}
		switch {
		case l.model.HIDGearCompatible == nil:
			v.ask(FieldLampHIDGear, aboutLamp(l.model))
		case !*l.model.HIDGearCompatible:
			f := v.foundLamp(l, Danger, certain)
			f.say("%s %s in a discharge luminaire with %s still in circuit.", plural(l.count, "LED lamp"), v.verb(l.count, "sits", "sit"), v.driver.kind.word())
			f.shows("lamp and gear", "lamp made for discharge gear in circuit: no; gear in circuit: "+v.driver.kind.word())
		}
	}
}

// holdsLED reports whether an LED lamp hangs in a luminaire.
func (v *fixtureView) holdsLED() bool {
	for i := range v.lamps {
		if v.lamps[i].class == led {
			return true
		}
	}
	return false
}

func heavyLampInHIDFitting(v *fixtureView) {
	if !is(v.m.Discharge) {
		return
	}
	limit, hasLimit := positive(v.m.MaxLampMassG)
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil {
			continue
		}
		if l.model.Cap != "" && v.m.Cap != "" && !strings.EqualFold(l.model.Cap, v.m.Cap) {
			f := v.foundLamp(l, High, certain)
			f.say("%s with cap %s %s in a luminaire with %s holders.", plural(l.count, "lamp"), l.model.Cap, v.verb(l.count, "sits", "sit"), v.m.Cap)
			f.shows("cap and holder", l.model.Cap+" against "+v.m.Cap)
		}
		mass, hasMass := positive(l.model.MassG)
		if !hasLimit || !hasMass {
			if l.class == led && !hasMass {
				v.askAt(FieldLampMass, aboutLamp(l.model), Danger, true)
			}
			if l.class == led && !hasLimit {
				v.askAt(FieldFittingMass, aboutFitting(v.m), Danger, true)
			}
			continue
		}
		if j := above(exactly(mass), exactly(limit)); j.fails {
			f := v.foundLamp(l, Danger, j)
			f.say("%s of %s %s in holders that may carry %s.", plural(l.count, "lamp"), quantity(mass, "g"), v.verb(l.count, "hangs", "hang"), quantity(limit, "g"))
			f.step("mass against the holder", loading.Figure(mass)+" / "+loading.Figure(limit)+" = "+loading.Percent(mass/limit), "mass stated for the holder")
		}
	}
}

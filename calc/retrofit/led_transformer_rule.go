package retrofit

import (
	"lampward/calc/loading"
)

// ledTransformerRules judge LED lamps on transformers made for filament lamps.
var ledTransformerRules = []Rule{
	{
		ID: "dc_led_on_electronic_transformer", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "LED lamp for dc only on an electronic transformer",
		Why:      "It is fed at both polarities, tens of thousands of times a second.",
		Basis:    "lamp marking; form of the transformer's output",
		Remedy:   "Fit a dc LED driver of the lamp's voltage.",
		Cautions: []string{"CA-01", "CA-02"},
		Asks:     []Field{FieldLampSupply},
		Hides:    []string{"led_on_electronic_transformer", "led_underloads_electronic_transformer", "dc_lamp_on_ac", "led_and_halogen_mixed"},
		driver:   dcLEDOnElectronicTransformer,
	},
	{
		ID: "led_on_electronic_transformer", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger: "extra-low voltage LED lamp on an electronic transformer that does not list it: stated unsuitable, or nothing stated; " +
			"medium once proven in service; low where the lamp is stated suitable but the pair is not listed",
		Why: "Bursts of high frequency at or above a floor of 33.9 V peak to peak at 12 V, plus ringing, strike the lamp's capacitor and rectifier, " +
			"and the load is too light and unsteady for the oscillator. Laboratories tied flicker and hum of LED lamps to the transformer; " +
			"that capacitor and rectifier fail of it is engineering reasoning.",
		Basis:    "California Lighting Technology Center 2015; DOE fact sheet on LED MR16 lamps; peak derived",
		Remedy:   "Fit an LED driver, ac or dc as the lamp says, or a lamp that is named together with the transformer.",
		Cautions: []string{"CA-01", "CA-02"},
		Asks:     []Field{FieldLampHighFreq},
		driver:   ledOnElectronicTransformer,
	},
	{
		ID: "led_underloads_electronic_transformer", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "LED lamps on an electronic transformer, and the lamps believed working below its minimum, or fewer than the pairing's least",
		Why:      "The transformer restarts in every half cycle: flicker, stress, early failure of both.",
		Basis:    "minimum load on the gear; least lamps of the pairing",
		Remedy:   "Fit an LED driver, or a lamp that is named together with the transformer. A filament lamp kept as ballast is no permanent cure.",
		Cautions: []string{"CA-01", "CA-02"},
		Asks:     []Field{FieldGearMinLoad, FieldGearMaxLoad, FieldLampPower, FieldFixtureLamps},
		Hides:    []string{"driver_underloaded"},
		driver:   ledUnderloadsElectronicTransformer,
	},
	{
		ID: "led_and_halogen_mixed", Severity: Medium, Subject: OnDriver,
		Trigger:  "LED and filament lamps on one electronic transformer",
		Why:      "The filament lamps carry the minimum load; when they fail, the LED lamps go with them.",
		Basis:    "minimum load on the gear",
		Remedy:   "Use one kind of lamp on one transformer.",
		Cautions: []string{"CA-01", "CA-02"},
		driver:   ledAndHalogenMixed,
	},
}

// listed reports whether a pairing names this lamp with this gear, alone or with the dimmer in its power path, and
// allows their number. least is the pairing's least number of lamps, 0 where none is stated.
func (v *driverView) listed(l *lampLoad) (listed bool, least int) {
	if l.model == nil || v.d.Model == nil || len(v.by.sys.Pairings) == 0 || v.g.Key == (loading.Key{}) || l.model.Key == (loading.Key{}) {
		return false, 0
	}
	p, ok := v.by.sys.Pairings[loading.PairingKey{Lamp: l.model.Key, Gear: v.g.Key}]
	if !ok && v.link.dimmer >= 0 {
		if control := v.by.dimmer[v.link.dimmer].m.Key; control != (loading.Key{}) {
			p, ok = v.by.sys.Pairings[loading.PairingKey{Lamp: l.model.Key, Gear: v.g.Key, Control: control}]
		}
	}
	if !ok {
		return false, 0
	}
	if p.LeastLamps != nil {
		least = max(*p.LeastLamps, 0)
	}
	return p.MostLamps == nil || l.count <= *p.MostLamps, least
}

// allListed reports whether every LED lamp on the gear is listed with it.
func (v *driverView) allListed() bool {
	for i := range v.lamps {
		if v.lamps[i].class != led {
			continue
		}
		if ok, _ := v.listed(&v.lamps[i]); !ok {
			return false
		}
	}
	return true
}

// burstSteps shows the clean floor of the transformer's output.
func (v *driverView) burstSteps(f *Finding) {
	rms, ok := positive(v.g.OutputV)
	if !ok {
		rms = 12
	}
	hz, _ := positive(v.by.sys.MainsHz)
	f.Steps = append(f.Steps, loading.BurstSteps(rms, hz)...)
}

func dcLEDOnElectronicTransformer(v *driverView) {
	if v.kind != electronicTransformer || v.outputForm() == loading.OutputDC {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.class != led {
			continue
		}
		switch {
		case l.model.Supply == loading.SupplyELVDC:
			f := v.foundLamp(l, High, certain)
			f.say("%s for dc only %s on %s, whose output changes polarity at high frequency.", plural(l.count, "LED lamp"), v.verb(l.count, "hangs", "hang"), v.name())
			v.burstSteps(f)
		case l.model.Supply == "" && l.lowVoltage():
			v.ask(FieldLampSupply, aboutLamp(l.model))
		}
	}
}

func ledOnElectronicTransformer(v *driverView) {
	if v.kind != electronicTransformer || v.outputForm() == loading.OutputDC {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.class != led || !l.lowVoltage() {
			continue
		}
		if ok, _ := v.listed(l); ok {
			continue
		}
		severity, blocks, why := High, true, "nothing says that this lamp suits high frequency"
		switch {
		case isNot(l.model.HighFrequency):
			why = "this lamp is stated unsuitable for high frequency"
		case is(l.model.HighFrequency):
			severity, blocks, why = Low, false, "this lamp is stated suitable for high frequency, but nobody lists the pair"
		case !l.unproven:
			severity, blocks, why = Medium, false, "nothing says that this lamp suits high frequency, though it has been in service for more than 2,000 h without a recorded failure"
		}
		if l.model.HighFrequency == nil {
			v.askAt(FieldLampHighFreq, aboutLamp(l.model), severity, blocks)
		}
		f := v.foundLamp(l, severity, certain)
		f.Blocks = blocks
		f.say("%s %s on %s, which does not list this lamp; %s.", capital(words([]lampLoad{*l}, false)), v.verb(l.count, "hangs", "hang"), v.name(), why)
		v.burstSteps(f)
	}
}

func ledUnderloadsElectronicTransformer(v *driverView) {
	if v.kind != electronicTransformer || v.lit.ledWorking == 0 {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.class != led {
			continue
		}
		if _, least := v.listed(l); l.working() < least {
			f := v.foundLamp(l, High, judgement{fails: true, sure: Recorded, excess: ratio(float64(least), float64(l.working()))})
			f.say("%s %s on %s; the pair is stated for at least %s.", capital(words([]lampLoad{*l}, true)), v.verb(l.working(), "works", "work"), v.name(), plural(least, "lamp"))
			f.step("lamps against the pairing", plural(l.working(), "lamp")+" working; at least "+plural(least, "lamp"), "pairing stated by a maker")
			return
		}
	}
	least, ok := v.minimum()
	j := judgement{open: true}
	if ok {
		j = below(v.lit.workingW, least)
	}
	if j.open {
		v.askMinimum(least, ok)
	}
	if !j.fails {
		return
	}
	f := v.found(High, j)
	f.Lamps = v.lit.working
	f.say("%s %s %s with %s; %s.", capital(v.litWords()), v.verb(v.lit.working, "loads", "load"), v.name(), quantity(v.lit.workingW.hi, "W"), leastWords(least))
	v.stepMinimum(f, least)
}

func ledAndHalogenMixed(v *driverView) {
	if v.kind != electronicTransformer || v.load.led == 0 || v.load.filament == 0 {
		return
	}
	f := v.found(Medium, certain)
	f.say("%s %s %s together, LED and filament lamps mixed: when the filament lamps fail, %s are left.", capital(words(v.lamps, false)),
		v.verb(v.load.count, "loads", "load"), v.name(), amount(v.load.ledWorkingW, "W"))
	f.step("load, all lamps", sumOf(v.lamps, false, v.load.w), "nameplate power")
	if least, ok := v.minimum(); ok {
		f.step("what the LED lamps leave alone", amount(v.load.ledWorkingW, "W")+" against a minimum of "+amount(least, "W"), "minimum load on the gear")
	}
}

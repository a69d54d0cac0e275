package retrofit

import (
	"lampward/calc/loading"
)

// Limits of voltages, common practice of the trade.
const (
	otherNominal   = 1.20 // times the lamp's rating: the gear is of another nominal voltage
	lowerNominal   = 0.80
	dcMatch        = 0.05 // difference allowed between a dc driver and a strip
	ledDestructive = 1.15 // times the rating of an LED lamp
	ownNominalV    = 60.0 // what is rated above this is not an extra-low voltage lamp, V
)

// outputRules compare the form and voltage of an output with what the lamps on it need.
// The end of extra-low voltage for alternating current, V (IEC 61140:2016), and the lowest nominal voltage of a public
// mains, V (IEC 60038:2009).
const (
	extraLowV   = 50
	leastMainsV = 100
)

var outputRules = []Rule{
	{
		ID: "output_voltage_mismatch", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "gear of one nominal voltage on lamps of another, e.g. 24 V on a 12 V lamp or the reverse; gear on lamps it is not made to feed: a ballast on lamps for a voltage, a voltage supply on lamps for a ballast or the mains, or no gear where a lamp needs it",
		Why:      "Twice the voltage is three times the power of a filament and the end of an LED; half of it is a dim or dark lamp.",
		Basis:    "nameplates; a 5 % match of dc supplies is common practice",
		Remedy:   "Match the lamp's voltage and the gear's.",
		Cautions: []string{"CA-01", "CA-02"},
		Asks:     []Field{FieldGearOutputV, FieldLampRatedV, FieldCircuitV},
		Hides:    []string{"lamp_overvoltage", "led_overvoltage_on_magnetic_transformer"},
		driver:   outputVoltageMismatch,
		fixture:  lowVoltageLampOnMains,
		only:     straight,
	},
	{
		ID: "dc_lamp_on_ac", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "lamp for dc only on a 50 or 60 Hz ac output",
		Why:      "Smoothed, 12 V ac becomes 15.6 V dc; unsmoothed, the lamp flickers and is fed backwards half the time.",
		Basis:    "peak of a sine less two diodes; lamp marking",
		Remedy:   "Fit a dc driver of the lamp's voltage.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldLampSupply},
		Hides:    []string{"led_overvoltage_on_magnetic_transformer"},
		driver:   dcLampOnAC,
	},
	{
		ID: "ac_load_on_dc", Severity: Medium, Subject: OnDriver,
		Trigger:  "lamp or gear not marked for dc, or a phase-cut dimmer, on a dc supply",
		Why:      "It does not start, or never turns off.",
		Basis:    "lamp and gear markings",
		Remedy:   "Feed it with the supply it is marked for.",
		Cautions: []string{"CA-01", "CA-15"},
		Asks:     []Field{FieldLampSupply, FieldGearInputDC, FieldCircuitBattery},
		driver:   acLoadOnDC,
		fixture:  acLampOnDC,
		only:     straight,
	},
	{
		ID: "wound_transformer_on_dc", Severity: Danger, Blocks: true, Subject: OnDriver,
		Trigger:  "magnetic transformer or ballast on a circuit that a central battery feeds with dc",
		Why:      "Dc saturates the core; only the winding's resistance limits the current: fire.",
		Basis:    "a core carries no dc flux without saturating",
		Remedy:   "Fit gear marked for dc, or an ac central supply.",
		Cautions: []string{"CA-01", "CA-08", "CA-15"},
		Asks:     []Field{FieldCircuitBattery},
		Hides:    []string{"ac_load_on_dc"},
		driver:   woundTransformerOnDC,
	},
	{
		ID: "reversed_polarity", Severity: High, Subject: OnDriver,
		Trigger:  "output recorded reversed on a dc module without a bridge",
		Why:      "LED junctions break down in reverse.",
		Basis:    "recorded on site; lamp marking",
		Remedy:   "Swap the conductors and use a keyed connector.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldLampBridge},
		driver:   reversedPolarity,
	},
	{
		ID: "current_module_on_voltage_supply", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "constant-current module on a constant-voltage supply",
		Why:      "Nothing limits the current: it rises as the module warms.",
		Basis:    "lamp marking",
		Remedy:   "Fit a constant-current driver of the module's current.",
		Cautions: []string{"CA-01", "CA-03"},
		Asks:     []Field{FieldLampSupply},
		Hides: []string{"module_overcurrent", "module_undercurrent", "string_above_voltage_window", "string_below_voltage_window",
			"string_over_driver_power", "parallel_string_cascade", "output_voltage_mismatch"},
		driver: currentModuleOnVoltageSupply,
	},
	{
		ID: "voltage_strip_on_current_supply", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "constant-voltage strip or lamp on a constant-current driver",
		Why:      "The driver raises its voltage until its current flows or its maximum is reached.",
		Basis:    "lamp marking",
		Remedy:   "Fit a constant-voltage driver of the strip's voltage.",
		Cautions: []string{"CA-01", "CA-03"},
		Asks:     []Field{FieldLampSupply},
		Hides: []string{"module_overcurrent", "module_undercurrent", "string_above_voltage_window", "string_below_voltage_window",
			"string_over_driver_power", "parallel_string_cascade", "output_voltage_mismatch"},
		driver: voltageStripOnCurrentSupply,
	},
	{
		ID: "lamp_overvoltage", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "output above 1.05 of a filament lamp's rating at the load it has, e.g. one halogen left among LEDs on a wound transformer",
		Why:      "A filament lives half as long at 5 % over.",
		Basis:    "filament lamp law of lighting handbooks; regulation linear in VA is common practice",
		Remedy:   "Replace all lamps on the transformer together, or fit a smaller one.",
		Cautions: []string{"CA-01", "CA-02"},
		Asks:     []Field{FieldRegulation, FieldGearOutputV, FieldGearMaxVA, FieldLampRatedV},
		driver:   lampOvervoltage,
	},
	{
		ID: "led_overvoltage_on_magnetic_transformer", Severity: Low, Blocks: true, Subject: OnDriver,
		Trigger:  "off-load rise of a wound transformer above the LED lamp's stated maximum, else above 1.10 of its rating; medium, and blocking, above 1.15",
		Why:      "LED lamps load a transformer so little that its voltage stays near the no-load value.",
		Basis:    "regulation linear in VA; 1.10 and 1.15 are common practice",
		Remedy:   "Fit a transformer of smaller VA, or a dc driver.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldRegulation, FieldGearOutputV, FieldGearMaxVA, FieldLampRatedV, FieldLampPowerFactor},
		driver:   ledOvervoltageOnMagneticTransformer,
	},
}

// outputForm is the form of a gear's output: as stated, else that of its kind.
func (v *driverView) outputForm() string {
	if v.g.OutputForm != "" {
		return v.g.OutputForm
	}
	switch v.kind {
	case electronicTransformer:
		return loading.OutputHFAC
	case magneticTransformer:
		return loading.OutputMainsAC
	case constantVoltage, constantCurrent:
		return loading.OutputDC
	}
	return ""
}

// outputV is the voltage the lamps on a voltage source see, V: the stated one, of a wound transformer at the load of
// the lamps believed working (WoundOutputV at nominal mains).
func (v *driverView) outputV() (out span, ok bool) {
	rated, ok := positive(v.g.OutputV)
	if !ok || v.kind != magneticTransformer {
		return exactly(rated), ok
	}
	reg := v.regulation()
	share := v.share()
	lo, err := loading.WoundOutputV(rated, reg.lo, share.hi, 1)
	if err != nil {
		return span{}, false
	}
	hi, err := loading.WoundOutputV(rated, reg.hi, share.lo, 1)
	if err != nil {
		return span{}, false
	}
	return span{lo, hi, weaker(reg.mark, share.mark)}, true
}

// regulation of a wound transformer, %: stated, or from its no-load voltage, or the plausible range.
func (v *driverView) regulation() span {
	if r, ok := known(v.g.RegulationPct); ok && r <= 100 {
		return exactly(r)
	}
	none, ok := positive(v.g.NoLoadV)
	full, ok2 := positive(v.g.OutputV)
	if ok && ok2 && none >= full && none <= 2*full {
		return exactly(100 * (none - full) / full)
	}
	return woundRegulation.times(1)
}

// share is the apparent power of the lamps believed working over the rating, 0..1; all of that where either is
// unknown.
func (v *driverView) share() span {
	rated, ok := positive(v.g.MaxLoadVA)
	if !ok {
		rated, ok = positive(v.g.MaxLoadW)
	}
	if !ok {
		return span{0, 1, ""}
	}
	s := v.load.workingVA.scaled(1 / rated)
	return span{min(s.lo, 1), min(s.hi, 1), s.mark}
}

// askOutput asks for what keeps a wound transformer's output from being known.
func (v *driverView) askOutput() {
	if !v.regulation().exact() {
		v.ask(FieldRegulation, aboutGear(v.g))
	}
	if s := v.share(); s.exact() {
		return
	}
	if _, ok := positive(v.g.MaxLoadVA); !ok {
		v.ask(FieldGearMaxVA, aboutGear(v.g))
	}
	v.askPowerFactors()
	if !v.load.workingW.exact() {
		v.askLamps()
	}
}

// onVoltage reports whether a lamp is meant to hang on a voltage at all.
func (l *lampLoad) onVoltage() bool {
	return l.model != nil && l.model.Supply != loading.SupplyConstantCurrent && l.model.Supply != loading.SupplyGear &&
		l.class != fluorescent && l.class != discharge
}

func outputVoltageMismatch(v *driverView) {
	wrongGear(v)
	if !v.kind.voltageSource() {
		return
	}
	out, ok := positive(v.g.OutputV)
	for i := range v.lamps {
		l := &v.lamps[i]
		if !l.onVoltage() || v.needsOther(l) != "" {
			continue
		}
		if !ok {
			v.ask(FieldGearOutputV, aboutGear(v.g))
			return
		}
		rated, hasRated := positive(l.model.RatedV)
		most, hasMost := positive(l.model.MaxV)
		if !hasRated && !hasMost {
			v.ask(FieldLampRatedV, aboutLamp(l.model))
			continue
		}
		if !hasRated {
			rated = most
		}
		limit := otherNominal * rated
		if hasMost {
			limit = max(most, rated)
		}
		switch {
		case v.kind != magneticTransformer && hasMost && exceeds(out, limit) || exceeds(out, max(limit, otherNominal*rated)):
			f := v.foundLamp(l, High, judgement{fails: true, sure: Recorded, excess: ratio(out, rated)})
			f.say("%s of %s %s on %s of %s.", plural(l.count, "lamp"), quantity(rated, "V"), v.verb(l.count, "hangs", "hang"), v.name(), quantity(out, "V"))
			f.step("output against the lamp's rating", loading.Figure(out)+" / "+loading.Figure(rated)+" = "+loading.Percent(out/rated), "nameplates")
			if l.class == filament {
				if s, err := loading.GeneralFilament.At(out / rated); err == nil {
					f.step("power of the filament", "("+loading.Figure(out)+" / "+loading.Figure(rated)+")^1.6 = "+loading.Figure(s.Power)+" times the rated power", "filament lamp law, lighting handbooks")
				}
			}
		case exceeds(lowerNominal*rated, out):
			f := v.foundLamp(l, Low, judgement{fails: true, sure: Recorded, excess: ratio(rated, out)})
			f.Blocks = false
			f.say("%s of %s %s on %s of %s: dim or dark.", plural(l.count, "lamp"), quantity(rated, "V"), v.verb(l.count, "hangs", "hang"), v.name(), quantity(out, "V"))
			f.step("output against the lamp's rating", loading.Figure(out)+" / "+loading.Figure(rated)+" = "+loading.Percent(out/rated), "nameplates")
		case v.kind == constantVoltage && l.class == led && (exceeds(rated*(1-dcMatch), out) || exceeds(out, rated*(1+dcMatch)) && !(hasMost && out <= most)):
			f := v.foundLamp(l, Low, byThumb(ratio(max(out, rated), min(out, rated))))
			f.say("%s of %s %s on %s of %s; they should lie within 5 %%.", plural(l.count, "lamp"), quantity(rated, "V"), v.verb(l.count, "hangs", "hang"), v.name(), quantity(out, "V"))
			f.step("output against the lamp's rating", loading.Figure(out)+" / "+loading.Figure(rated)+" = "+loading.Percent(out/rated), "common practice, no source")
		}
	}
}

// wrongGear finds lamps whose stated supply is of another kind than the gear gives: a ballast or discharge gear limits a
// discharge, it holds no voltage; a transformer or constant-voltage driver limits none, and what it gives is not the
// mains. Tubes have rules of their own, and in a converted luminaire the ballast feeds nothing.
func wrongGear(v *driverView) {
	for i := range v.lamps {
		l := &v.lamps[i]
		needs := v.needsOther(l)
		if needs == "" {
			continue
		}
		f := v.foundLamp(l, High, judgement{fails: true, sure: Recorded})
		f.say("%s that %s %s %s on %s.", plural(l.count, "lamp"), v.verb(l.count, "needs", "need"), needs, v.verb(l.count, "hangs", "hang"), v.name())
		f.step("gear and lamp", "lamp: needs "+needs+"; gear: "+v.kind.word(), "nameplates")
	}
}

// needsOther says what a lamp needs that gear of this kind never gives; empty: it may suit.
func (v *driverView) needsOther(l *lampLoad) string {
	if l.model == nil {
		return ""
	}
	switch v.kind {
	case magneticBallast, electronicBallast, hidGear:
		switch l.model.Supply {
		case loading.SupplyELVAC, loading.SupplyELVDC, loading.SupplyELVACDC:
			return "extra-low voltage"
		case loading.SupplyConstantCurrent:
			return "a constant current"
		case loading.SupplyMainsAC:
			if l.class != fluorescent && l.model.Technology != loading.LEDTube && !is(l.model.HIDGearCompatible) && !v.bypassed() {
				return "the mains"
			}
		}
		return ""
	}
	if !v.kind.voltageSource() {
		return ""
	}
	switch l.model.Supply {
	case loading.SupplyGear:
		return "a ballast"
	case loading.SupplyMainsAC:
		// A wound transformer may also be one of mains voltages, e.g. 230 V to 120 V.
		if out, ok := positive(v.g.OutputV); ok && out <= extraLowV || !ok && v.kind != magneticTransformer {
			return "the mains"
		}
	}
	return ""
}

// bypassed reports whether a luminaire on the gear was rewired around it.
func (v *driverView) bypassed() bool {
	for _, i := range v.fixtures {
		if v.by.fixture[i].converted() {
			return true
		}
	}
	return false
}

// mainsV is the voltage of the circuit a place hangs on, V.
func (v *view) mainsV(c *loading.Circuit) (float64, bool) {
	if c != nil {
		if x, ok := positive(c.NominalV); ok {
			return x, true
		}
	}
	return positive(v.by.sys.MainsV)
}

func lowVoltageLampOnMains(v *fixtureView) {
	if !v.bare {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model != nil {
			needs := ""
			switch l.model.Supply {
			case loading.SupplyConstantCurrent:
				needs = "a constant current"
			case loading.SupplyGear:
				if l.model.Technology != loading.LEDTube && !v.converted() { // else the rules of tubes say it
					needs = "a ballast"
				}
			}
			if needs != "" {
				f := v.foundLamp(l, High, judgement{fails: true, sure: Recorded})
				f.say("%s that %s %s %s straight on the circuit, without control gear.", plural(l.count, "lamp"), v.verb(l.count, "needs", "need"), needs, v.verb(l.count, "hangs", "hang"))
				f.step("gear and lamp", "lamp: needs "+needs+"; gear: none", "the record")
				continue
			}
		}
		if !l.onVoltage() || !l.lowVoltage() {
			continue
		}
		rated, ok := positive(l.model.RatedV)
		if l.model.Supply == "" && !ok {
			continue // it may be a mains lamp; what supply it needs is asked where that decides
		}
		mains, hasMains := v.mainsV(v.circuit)
		if !hasMains && v.by.sys.Proposal && l.model.Supply != "" && !exceeds(otherNominal*rated, leastMainsV) {
			f := v.foundLamp(l, High, judgement{fails: true, sure: Recorded})
			f.say("%s for extra-low voltage %s straight on the mains, without control gear.", plural(l.count, "lamp"), v.verb(l.count, "hangs", "hang"))
			f.step("gear and lamp", "lamp: needs extra-low voltage; gear: none", "nameplates; the lowest mains voltage is 100 V (IEC 60038:2009)")
			continue
		}
		if !hasMains {
			v.ask(FieldCircuitV, v.aboutCircuit())
			continue
		}
		if !ok {
			rated = ownNominalV
		}
		if !exceeds(mains, otherNominal*rated) {
			continue
		}
		f := v.foundLamp(l, High, judgement{fails: true, sure: Recorded, excess: ratio(mains, rated)})
		f.say("%s for extra-low voltage %s straight on %s, without control gear.", plural(l.count, "lamp"), v.verb(l.count, "hangs", "hang"), quantity(mains, "V"))
		f.step("supply against the lamp", quantity(mains, "V")+" > "+quantity(rated, "V"), "nameplates")
	}
}

// aboutCircuit is the circuit a luminaire hangs on, or the luminaire where that is unknown.
func (v *fixtureView) aboutCircuit() About {
	if v.circuit == nil {
		return v.aboutPlace()
	}
	return About{Kind: string(OnCircuit), Key: v.circuit.Key, Index: int(v.link.circuit)}
}

// aboutCircuit is the circuit a driver hangs on, or the driver where that is unknown.
func (v *driverView) aboutCircuit() About {
	if v.circuit == nil {
		return v.aboutPlace()
	}
	return About{Kind: string(OnCircuit), Key: v.circuit.Key, Index: int(v.link.circuit)}
}

func dcLampOnAC(v *driverView) {
	if !v.kind.voltageSource() || v.outputForm() != loading.OutputMainsAC {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.class != led {
			continue
		}
		switch l.model.Supply {
		case "":
			v.ask(FieldLampSupply, aboutLamp(l.model))
		case loading.SupplyELVDC:
			f := v.foundLamp(l, High, certain)
			f.say("%s for dc only %s on %s, whose output is ac at the mains frequency.", plural(l.count, "LED lamp"), v.verb(l.count, "hangs", "hang"), v.name())
			f.shows("lamp and output", "lamp: extra-low voltage dc; output: ac at the mains frequency")
			if out, ok := positive(v.g.OutputV); ok {
				if dc, err := loading.SmoothedDCV(out); err == nil {
					f.step("that voltage rectified and smoothed", "√2 × "+quantity(out, "V")+" − 1.4 V = "+quantity(dc, "V")+" dc", "peak of a sine less two diodes of 0.7 V")
				}
			}
		}
	}
}

// centralDC reports whether a central battery feeds the circuit with dc when the mains are lost. It asks where
// nobody has said and a luminaire of a central system hangs there.
func (v *driverView) centralDC() bool {
	if v.circuit == nil {
		return false
	}
	if v.circuit.CentralBattery == "" {
		for _, i := range v.fixtures {
			if v.by.fixture[i].f.EmergencySource == "central" {
				v.ask(FieldCircuitBattery, v.aboutCircuit())
				break
			}
		}
	}
	return v.circuit.CentralBattery == "dc"
}

func acLoadOnDC(v *driverView) {
	if v.kind == gearUnknown {
		return
	}
	if v.kind.voltageSource() && v.outputForm() == loading.OutputDC {
		for i := range v.lamps {
			l := &v.lamps[i]
			if l.model == nil || l.class == filament {
				continue
			}
			switch {
			case l.model.Supply == "" && l.lowVoltage():
				v.ask(FieldLampSupply, aboutLamp(l.model))
			case l.model.Supply == loading.SupplyELVAC:
				f := v.foundLamp(l, Medium, certain)
				f.say("%s for ac only %s on %s, whose output is dc.", plural(l.count, "lamp"), v.verb(l.count, "hangs", "hang"), v.name())
				f.shows("lamp and output", "lamp: extra-low voltage ac; output: dc")
			}
		}
	}
	if v.kind.wound() || !v.centralDC() {
		return
	}
	switch {
	case isNot(v.g.InputDC):
		f := v.found(Medium, certain)
		f.say("A central battery feeds %s with dc; it is not made for a dc input.", v.name())
		f.shows("circuit and gear", "central battery: dc; dc input of the gear: no")
	case v.g.InputDC == nil:
		v.ask(FieldGearInputDC, aboutGear(v.g))
	}
	if m := v.phaseCut(); m != nil {
		f := v.found(Medium, certain)
		f.Control = m.Key
		f.say("A phase-cut dimmer stands before %s on a circuit that a central battery feeds with dc; it does not turn off on dc.", v.name())
		f.shows("circuit and dimmer", "central battery: dc; dimmer: phase-cut")
	}
}

// phaseCut is the phase-cut dimmer in the driver's power path, nil if there is none or it is unknown.
func (v *driverView) phaseCut() *loading.Control {
	if v.link.dimmer < 0 {
		return nil
	}
	m := v.by.dimmer[v.link.dimmer].m
	switch m.Kind {
	case loading.LeadingEdge, loading.TrailingEdge, loading.UniversalPhase:
		return m
	}
	return nil
}

func acLampOnDC(v *fixtureView) {
	if !v.bare || v.circuit == nil || v.circuit.CentralBattery != "dc" {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil || l.class == filament || l.model.Supply != loading.SupplyMainsAC {
			continue
		}
		f := v.foundLamp(l, Medium, certain)
		f.say("%s for ac mains %s on a circuit that a central battery feeds with dc.", plural(l.count, "lamp"), v.verb(l.count, "hangs", "hang"))
		f.shows("circuit and lamp", "central battery: dc; lamp: ac mains")
	}
}

func woundTransformerOnDC(v *driverView) {
	if !v.kind.wound() || !v.centralDC() {
		return
	}
	f := v.found(Danger, certain)
	f.say("A central battery feeds %s with dc; its core saturates and only the winding limits the current.", v.name())
	f.shows("circuit and gear", "central battery: dc; gear: "+v.kind.word())
}

func reversedPolarity(v *driverView) {
	if v.d.Polarity != "reversed" || v.kind == gearUnknown || v.outputForm() != loading.OutputDC {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.class != led {
			continue
		}
		switch {
		case l.model.Bridge == nil && l.model.Supply != loading.SupplyConstantCurrent:
			v.ask(FieldLampBridge, aboutLamp(l.model))
		case !is(l.model.Bridge):
			f := v.foundLamp(l, High, certain)
			f.say("The output of %s is recorded reversed; %s without a bridge %s on it.", v.name(), plural(l.count, "LED module"), v.verb(l.count, "hangs", "hang"))
			f.shows("output and lamp", "polarity: reversed; bridge in the lamp: none")
		}
	}
}

func currentModuleOnVoltageSupply(v *driverView) {
	if !v.kind.voltageSource() {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil {
			continue
		}
		switch {
		case l.model.Supply == loading.SupplyConstantCurrent:
			f := v.foundLamp(l, High, certain)
			f.say("%s for constant current %s on %s, which holds its voltage.", plural(l.count, "module"), v.verb(l.count, "hangs", "hang"), v.name())
			f.shows("lamp and gear", "lamp: constant current; gear: constant voltage")
		case l.model.Supply == "" && l.model.Technology == loading.LEDModule:
			v.ask(FieldLampSupply, aboutLamp(l.model))
		}
	}
}

func voltageStripOnCurrentSupply(v *driverView) {
	if v.kind != constantCurrent {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil {
			continue
		}
		switch l.model.Supply {
		case loading.SupplyELVAC, loading.SupplyELVDC, loading.SupplyELVACDC, loading.SupplyMainsAC:
			f := v.foundLamp(l, High, certain)
			f.say("%s for a constant voltage %s on %s.", plural(l.count, "lamp"), v.verb(l.count, "hangs", "hang"), v.name())
			f.shows("lamp and gear", "lamp: constant voltage; gear: constant current")
			if most, ok := positive(v.g.ComplianceMaxV); ok {
				if rated, ok := positive(l.model.RatedV); ok {
					f.step("highest voltage of the driver against the lamp", quantity(most, "V")+" against "+quantity(rated, "V"), "nameplates")
				}
			}
		case "":
			v.ask(FieldLampSupply, aboutLamp(l.model))
		}
	}
}

// woundSteps shows the output of a wound transformer against a limit, V, at the end of the ranges that favours it.
func (v *driverView) woundSteps(f *Finding, limit float64) {
	rated, ok := positive(v.g.OutputV)
	if !ok || v.kind != magneticTransformer {
		return
	}
	reg, share := v.regulation(), v.share()
	basis := "regulation stated"
	if !reg.exact() {
		basis = "regulation not read, at least 5 %, from memory of handbooks"
	}
	f.Steps = append(f.Steps, loading.WoundSteps(rated, reg.lo, share.hi, 1, limit, basis)...)
	if !reg.exact() || !share.exact() {
		f.Steps = append(f.Steps, loading.WoundSteps(rated, reg.hi, share.lo, 1, limit, "at the other end of what is not known")...)
	}
}

func lampOvervoltage(v *driverView) {
	if !v.kind.voltageSource() || v.load.working == 0 {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.class != filament || l.working() == 0 {
			continue
		}
		out, ok := v.outputV()
		rated, hasRated := positive(l.model.RatedV)
		if !ok {
			v.ask(FieldGearOutputV, aboutGear(v.g))
			return
		}
		if !hasRated {
			v.ask(FieldLampRatedV, aboutLamp(l.model))
			continue
		}
		limit := loading.LampVoltageFactor * rated
		j := above(out, exactly(limit))
		if j.open {
			v.askOutput()
		}
		if !j.fails {
			continue
		}
		f := v.foundLamp(l, High, j)
		f.Lamps = l.working()
		f.say("%s gives %s at this load; %s of %s should see at most %s.", capital(v.name()), amount(out, "V"),
			plural(l.working(), "filament lamp"), quantity(rated, "V"), quantity(limit, "V"))
		v.woundSteps(f, limit)
		law := loading.GeneralFilament
		if l.model.Technology == loading.Halogen {
			law = loading.HalogenFilament
		}
		f.Steps = append(f.Steps, law.LifeSteps(out.lo, rated)...)
	}
}

func ledOvervoltageOnMagneticTransformer(v *driverView) {
	if v.kind != magneticTransformer || v.load.working == 0 {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.class != led || !l.lowVoltage() || l.working() == 0 {
			continue
		}
		out, ok := v.outputV()
		if !ok {
			v.ask(FieldGearOutputV, aboutGear(v.g))
			return
		}
		rated, hasRated := positive(l.model.RatedV)
		most, hasMost := positive(l.model.MaxV)
		if !hasRated && !hasMost {
			v.ask(FieldLampRatedV, aboutLamp(l.model))
			continue
		}
		if !hasRated {
			rated = most
		}
		limit := loading.LEDVoltageFactor * rated
		if hasMost {
			limit = most
		}
		j := above(out, exactly(limit))
		destructive := above(out, exactly(max(limit, ledDestructive*rated)))
		switch {
		case j.open:
			v.askOutput()
			continue
		case !j.fails:
			continue
		case destructive.open:
			v.askAt(FieldRegulation, aboutGear(v.g), Medium, true)
		}
		severity := Low
		if destructive.fails {
			severity = Medium
		}
		f := v.foundLamp(l, severity, j)
		f.Lamps = l.working()
		if !destructive.fails {
			f.Blocks = false
			if !hasMost {
				f.screens()
			}
		}
		f.say("%s gives %s at this load; %s of %s should see at most %s.", capital(v.name()), amount(out, "V"),
			plural(l.working(), "LED lamp"), quantity(rated, "V"), quantity(limit, "V"))
		v.woundSteps(f, limit)
		if dc, err := loading.SmoothedDCV(out.lo); err == nil {
			f.step("after a bridge and a capacitor", "√2 × "+quantity(out.lo, "V")+" − 1.4 V = "+quantity(dc, "V")+" dc", "peak of a sine less two diodes of 0.7 V")
		}
	}
}

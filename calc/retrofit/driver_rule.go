package retrofit

import (
	"errors"
	"math"

	"lampward/calc/loading"
)

// Bands of a load, common practice of the trade.
const (
	dangerousOverload = 1.10 // times the maximum
	heatMarks         = "tc and ta marks of IEC 61347-1"
)

// driverLoadRules compare the load on control gear with its window and its surroundings with its marks.
var driverLoadRules = []Rule{
	{
		ID: "driver_overloaded", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "power or apparent power of all lamps above the gear's maximum; the rating for LED lamps used for LED lamps",
		Why:      "The gear overheats and ages fast, and its insulation can fail.",
		Basis:    "IEC 61347-2-2 and IEC 61347-2-13; bands of severity are common practice",
		Remedy:   "Cut the load, or fit gear with a larger rating.",
		Cautions: []string{"CA-01", "CA-02", "CA-03"},
		// The first line is its own; the rest are what every rule waits for, asked in its name.
		Asks: []Field{FieldGearMaxLoad, FieldGearLEDMaxLoad, FieldLampPower, FieldLampPowerFactor, FieldFixtureLamps, FieldFixtureOutput, FieldGearOutputMaxW, FieldGearThermal,
			FieldGearKind, FieldDriverModel, FieldFixtureFeed, FieldFittingGear, FieldFittingDriver, FieldFixtureConversion, FieldLampTechnology, FieldLampSupply},
		driver: driverOverloaded,
	},
	{
		ID: "driver_underloaded", Severity: Medium, Subject: OnDriver,
		Trigger:  "power of the lamps believed working below the minimum of an electronic transformer, or of gear that states one",
		Why:      "Below its minimum the oscillator drops out in every half cycle or does not start: flicker, no light, stress.",
		Basis:    "minimum load on the gear; IEC 61047",
		Remedy:   "Fit gear with a lower minimum load.",
		Cautions: []string{"CA-01", "CA-03"},
		Asks:     []Field{FieldGearMinLoad, FieldGearMaxLoad, FieldLampPower, FieldFixtureLamps},
		Hides:    []string{"driver_underloaded_on_lamp_loss"},
		driver:   driverUnderloaded,
	},
	{
		ID: "driver_underloaded_on_lamp_loss", Severity: Low, Subject: OnDriver,
		Trigger:  "two or more lamps, load at or above the minimum, and below it once the largest lamp has failed",
		Why:      "One failed lamp takes the others with it, and they are then blamed.",
		Basis:    "minimum load on the gear",
		Remedy:   "Replace all lamps on this gear together, or fit gear with a lower minimum load.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldGearMinLoad, FieldGearMaxLoad, FieldLampPower, FieldFixtureLamps},
		driver:   driverUnderloadedOnLampLoss,
	},
	{
		ID: "driver_too_hot", Severity: High, Subject: OnDriver,
		Trigger:  "air at the gear hotter than its derating curve allows, or than its ta mark, or its case estimated above tc",
		Why:      "Life halves for about every 10 K; insulation and capacitors fail.",
		Basis:    heatMarks + "; derating curve of the data sheet",
		Remedy:   "Ventilate, reduce the load, or move the gear to a cooler place.",
		Cautions: []string{"CA-01", "CA-02", "CA-03"},
		Asks:     []Field{FieldDriverAir, FieldGearTa, FieldGearTc, FieldGearMaxLoad, FieldLampPower, FieldFixtureLamps},
		driver:   driverTooHot,
	},
	{
		ID: "driver_highly_loaded", Severity: Low, Subject: OnDriver,
		Trigger:  "proposals only: LED driver above 80 % of its maximum",
		Why:      "No reserve for tolerances, heat and a later lamp.",
		Basis:    "80 % is common practice of the trade",
		Remedy:   "Choose a driver with a larger rating.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldGearMaxLoad, FieldLampPower, FieldFixtureLamps, FieldFixtureOutput},
		driver:   driverHighlyLoaded,
	},
}

// A comparison is one way in which a load can pass a maximum.
type comparison struct {
	judgement
	value span
	limit float64
	unit  string
	over  string // what the limit is, in a sentence
}

func driverOverloaded(v *driverView) {
	if v.load.count == 0 && !v.load.unseen || v.kind == gearUnknown || v.kind == constantCurrent || v.kind == emergencyPack {
		return
	}
	maxW, hasW := positive(v.g.MaxLoadW)
	maxVA, hasVA := positive(v.g.MaxLoadVA)
	ledMax, hasLED := positive(v.g.LEDMaxLoadW)
	transformer := v.kind == electronicTransformer || v.kind == magneticTransformer

	var worst comparison
	lampsOpen, factorsOpen := false, false
	try := func(value span, limit float64, unit, over string) bool {
		j := above(value, exactly(limit))
		if j.fails && (!worst.fails || worst.sure != Recorded && j.sure == Recorded || worst.sure == j.sure && j.excess > worst.excess) {
			worst = comparison{j, value, limit, unit, over}
		}
		return j.open
	}
	if hasW {
		lampsOpen = try(v.load.w, maxW, "W", "it may carry at most") || lampsOpen
	}
	if hasVA {
		// Apparent power is never below power, so power alone can prove an overload.
		try(v.load.w, maxVA, "VA", "it may carry at most")
		if try(v.load.va, maxVA, "VA", "it may carry at most") {
			lampsOpen = lampsOpen || math.IsInf(v.load.w.hi, 1)
			factorsOpen = true
		}
	}
	if transformer && v.load.led > 0 && hasLED {
		lampsOpen = try(v.load.ledW, ledMax, "W", "it may carry LED lamps up to") || lampsOpen
	}
	if n := v.g.LEDMaxCount; transformer && n != nil && *n > 0 && *n < 1e6 {
		try(exactly(float64(v.load.led)), float64(*n), "LED lamps", "it may carry at most")
	}
	outputOpen, outputUnknown := v.overloadedOutput(&worst, &lampsOpen)

	if worst.fails {
		v.sayOverloaded(&worst)
		return
	}
	if !hasW && !hasVA {
		v.ask(FieldGearMaxLoad, aboutGear(v.g))
	}
	if lampsOpen {
		v.askLamps()
	}
	if factorsOpen {
		v.askPowerFactors()
	}
	if v.kind == electronicTransformer && v.load.led > 0 && v.g.LEDMaxLoadW == nil && v.g.LEDMaxCount == nil && !v.allListed() {
		v.ask(FieldGearLEDMaxLoad, aboutGear(v.g))
	}
	if outputUnknown {
		v.ask(FieldGearOutputMaxW, aboutGear(v.g))
	}
	if outputOpen {
		for _, i := range v.fixtures {
			if x := &v.by.fixture[i]; x.f.Output <= 0 {
				v.ask(FieldFixtureOutput, x.aboutPlace())
			}
		}
	}
}

// overloadedOutput judges each output of gear with several. It reports whether the outputs the luminaires hang on
// decide, and whether the rating of an output does.
func (v *driverView) overloadedOutput(worst *comparison, lampsOpen *bool) (open, unrated bool) {
	if v.g.Outputs == nil || *v.g.Outputs < 2 || len(v.fixtures) == 0 {
		return false, false
	}
	limit, ok := positive(v.g.OutputMaxW)
	if !ok {
		return false, true
	}
	if !above(v.load.w, exactly(limit)).fails && !above(v.load.w, exactly(limit)).open {
		return false, false // all of it would fit on one output
	}
	for at, i := range v.fixtures {
		n := v.by.fixture[i].f.Output
		if n <= 0 {
			open = true
			continue
		}
		first := true
		for _, before := range v.fixtures[:at] {
			first = first && v.by.fixture[before].f.Output != n
		}
		if !first {
			continue
		}
		var sum load
		for _, other := range v.fixtures[at:] {
			x := &v.by.fixture[other]
			if x.f.Output != n {
				continue
			}
			for k := range x.lamps {
				sum.add(&x.lamps[k])
			}
			if x.f.LampsUnknown {
				sum.w.hi = math.Inf(1)
			}
		}
		j := above(sum.w, exactly(limit))
		*lampsOpen = *lampsOpen || j.open
		if j.fails && (!worst.fails || j.excess > worst.excess) {
			*worst = comparison{j, sum.w, limit, "W", "each of its outputs may carry at most"}
		}
	}
	return open, false
}

func (v *driverView) sayOverloaded(w *comparison) {
	severity := High
	switch {
	case exceeds(w.excess, dangerousOverload):
		severity = Danger
	case v.kind == magneticTransformer && isNot(v.g.ThermalProtection):
		severity = Danger
	case v.kind == magneticTransformer && v.g.ThermalProtection == nil:
		v.askAt(FieldGearThermal, aboutGear(v.g), Danger, true)
	}
	f := v.found(severity, w.judgement)
	f.say("%s %s %s with %s; %s %s.", words(v.lamps, false), v.verb(v.load.count, "loads", "load"), v.name(),
		amount(w.value, w.unit), w.over, quantity(w.limit, w.unit))
	if w.unit == "VA" {
		f.step("apparent power, all lamps", sumOf(v.lamps, false, v.load.w)+"; over their power factors "+amount(v.load.va, "VA"),
			"power over power factor; an LED lamp that states none has 0.5 to 0.9, common practice")
	} else {
		f.step("load, all lamps", sumOf(v.lamps, false, v.load.w), "nameplate power")
	}
	f.step("load against the maximum", loading.Figure(w.value.lo)+" / "+loading.Figure(w.limit)+" = "+loading.Percent(w.value.lo/w.limit), v.by.rule.Basis)
	if v.load.working < v.load.count {
		f.step("load of the lamps believed working", sumOf(v.lamps, true, v.load.workingW), "open failures left out")
	}
}

// minimum is the least load gear asks for, W. An electronic transformer that nobody has read has one somewhere in the
// plausible range of its rating; ok is false where even that is unknown.
func (v *driverView) minimum() (least span, ok bool) {
	if w, ok := known(v.g.MinLoadW); ok {
		return exactly(w), true
	}
	if v.kind != electronicTransformer {
		return span{}, false
	}
	if w, ok := positive(v.g.MaxLoadW); ok {
		return transformerMinimum.times(w), true
	}
	if va, ok := positive(v.g.MaxLoadVA); ok {
		return transformerMinimum.times(va), true
	}
	return span{}, false
}

// hasMinimum reports whether gear of this kind may ask for a least load. Wound gear and ballasts do only where they
// say so; a constant-current driver has its voltage window instead.
func (v *driverView) hasMinimum() bool {
	switch v.kind {
	case electronicTransformer, constantVoltage:
		return true
	case gearUnknown:
		return false
	}
	_, states := positive(v.g.MinLoadW)
	return states
}

// askMinimum asks for what keeps a load from being judged against the minimum.
func (v *driverView) askMinimum(least span, ok bool) {
	if !ok || !least.exact() {
		v.ask(FieldGearMinLoad, aboutGear(v.g))
	}
	if !v.lit.workingW.exact() {
		v.askLamps()
	}
}

// leastWords names the minimum in a sentence and says where it comes from.
func leastWords(least span) string {
	if least.exact() {
		return "it needs at least " + quantity(least.lo, "W")
	}
	return "it is likely to need at least " + loading.Figure(least.lo) + " to " + quantity(least.hi, "W")
}

// stepMinimum adds the arithmetic of a load against the minimum.
func (v *driverView) stepMinimum(f *Finding, least span) {
	if v.grouped() {
		f.step("load, the smallest switched group", amount(v.lit.workingW, "W"), "nameplate power of the lamps believed working")
	} else {
		f.step("load, lamps believed working", sumOf(v.lamps, true, v.lit.workingW), "nameplate power")
	}
	if !least.exact() {
		f.step("minimum load, not read", "25 % to 40 % of the rating = "+amount(least, "W"), "common practice, no source")
	}
	f.step("load against the minimum", quantity(v.lit.workingW.hi, "W")+" < "+quantity(least.lo, "W"), "minimum load on the gear")
	if v.load.working < v.load.count {
		f.step("load of all lamps, failed ones included", sumOf(v.lamps, false, v.load.w), "nameplate power")
	}
}

// grouped reports whether the lamps are switched in groups, so that the smallest decides.
func (v *driverView) grouped() bool { return v.lit.count != v.load.count }

// litWords names the lamps that load a driver least.
func (v *driverView) litWords() string {
	if v.grouped() {
		return "the smallest switched group, " + plural(v.lit.working, "lamp") + ","
	}
	return words(v.lamps, true)
}

func driverUnderloaded(v *driverView) {
	if !v.hasMinimum() || v.lit.working == 0 {
		return
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
	f := v.found(Medium, j)
	f.Lamps = v.lit.working
	f.say("%s %s %s with %s; %s.", capital(v.litWords()), v.verb(v.lit.working, "loads", "load"), v.name(),
		quantity(v.lit.workingW.hi, "W"), leastWords(least))
	v.stepMinimum(f, least)
}

func driverUnderloadedOnLampLoss(v *driverView) {
	if !v.hasMinimum() || v.lit.working < 2 {
		return
	}
	least, ok := v.minimum()
	if !ok {
		v.ask(FieldGearMinLoad, aboutGear(v.g))
		return
	}
	if below(v.lit.workingW, least).fails {
		return
	}
	after := span{math.Max(0, v.lit.workingW.lo-v.lit.largestW), v.lit.workingW.hi, ""}
	if v.lit.workingW.exact() {
		after = exactly(after.lo)
	}
	j := below(after, least)
	if j.open {
		v.askMinimum(least, ok)
	}
	if !j.fails {
		return
	}
	severity := Low
	if v.lit.ledWorking > 1 || v.lit.ledWorking == 1 && !v.lit.largestLED {
		severity = Medium
	}
	f := v.found(severity, j)
	f.Lamps = v.lit.working - 1
	f.say("Once one of %s on %s fails, %s are left; %s.", v.litWords(), v.name(), quantity(after.hi, "W"), leastWords(least))
	v.stepLoss(f, after.hi, least)
}

func (v *driverView) stepLoss(f *Finding, left float64, least span) {
	f.step("load, lamps believed working", amount(v.lit.workingW, "W"), "nameplate power")
	f.Steps = append(f.Steps, loading.LampLossSteps(v.lit.workingW.lo, v.lit.largestW, least.lo)...)
	if !least.exact() {
		f.step("minimum load, not read", "25 % to 40 % of the rating = "+amount(least, "W"), "common practice, no source")
	}
}

func driverTooHot(v *driverView) {
	if v.kind == gearUnknown {
		return
	}
	air, ok := degrees(v.d.AirC)
	if !ok {
		if v.d.HeatFailure || is(v.d.InEnclosure) && is(v.d.InsulationOver) {
			v.ask(FieldDriverAir, v.aboutPlace())
		}
		return
	}
	maxW, rated := positive(v.g.MaxLoadW)
	if len(v.g.Derating) > 0 {
		share, err := loading.AllowedShare(v.g.Derating, air)
		last := v.g.Derating[len(v.g.Derating)-1]
		switch {
		case err == nil && !rated:
			v.ask(FieldGearMaxLoad, aboutGear(v.g))
			return
		case err == nil:
			allowed := share * maxW
			if j := above(v.load.w, exactly(allowed)); j.fails {
				f := v.found(High, j)
				f.say("At %s °C %s may carry %s; %s %s it with %s.", loading.Figure(air), v.name(), quantity(allowed, "W"),
					words(v.lamps, false), v.verb(v.load.count, "loads", "load"), amount(v.load.w, "W"))
				f.Steps = loading.DeratingSteps(air, share, maxW, v.load.w.lo)
			} else if j.open {
				v.askLamps()
			}
			return
		case errors.Is(err, loading.ErrOutsideCurve) && air > last.AirC:
			f := v.found(High, certain)
			f.say("The air at %s is %s °C; its derating curve allows nothing above %s °C.", v.name(), loading.Figure(air), loading.Figure(last.AirC))
			f.step("air against the curve", loading.Figure(air)+" °C > "+loading.Figure(last.AirC)+" °C", "derating curve of the data sheet")
			return
		case errors.Is(err, loading.ErrOutsideCurve):
			return // cooler than the curve begins
		}
	}
	ta, hasTa := degrees(v.g.TaC)
	if !hasTa {
		v.ask(FieldGearTa, aboutGear(v.g))
		return
	}
	if air > ta {
		f := v.found(High, certain)
		f.say("The air at %s is %s °C; it is rated for %s °C.", v.name(), loading.Figure(air), loading.Figure(ta))
		f.step("air against the ta mark", loading.Figure(air)+" °C > "+loading.Figure(ta)+" °C", heatMarks)
		return
	}
	// With the air within ta, the case passes tc only where the load passes the maximum.
	if !rated || !exceeds(v.load.w.lo, maxW) {
		return
	}
	tc, hasTc := degrees(v.g.TcC)
	if !hasTc {
		v.ask(FieldGearTc, aboutGear(v.g))
		return
	}
	share := ratio(v.load.w.lo, maxW)
	if c, err := loading.CaseC(air, ta, tc, share); err == nil && c > tc {
		f := v.found(High, certain)
		f.say("The case of %s is estimated at %s °C with %s of load in air of %s °C; its tc mark is %s °C.", v.name(),
			loading.Figure(c), amount(v.load.w, "W"), loading.Figure(air), loading.Figure(tc))
		f.Steps = loading.CaseSteps(air, ta, tc, share)
	}
}

func driverHighlyLoaded(v *driverView) {
	if !v.by.sys.Proposal || !v.kind.ledDriver() || v.load.count == 0 {
		return
	}
	maxW, ok := positive(v.g.MaxLoadW)
	if !ok {
		v.ask(FieldGearMaxLoad, aboutGear(v.g))
		return
	}
	w := v.load.w
	if v.kind == constantCurrent {
		mA, ok := v.current()
		if !ok {
			return // asked for by string_over_driver_power, which has more at stake
		}
		if w, _, _, ok = v.running(mA); !ok {
			return
		}
	}
	j := above(w, exactly(loading.HighLoadShare*maxW))
	if j.open && v.kind == constantVoltage {
		v.askLamps()
	}
	if !j.fails || above(w, exactly(maxW)).fails {
		return
	}
	f := v.found(Low, byThumb(j.excess))
	f.say("%s %s %s with %s, %s of its maximum %s; 80 %% leaves a reserve.", words(v.lamps, false), v.verb(v.load.count, "loads", "load"), v.name(),
		amount(w, "W"), loading.Percent(w.lo/maxW), quantity(maxW, "W"))
	f.step("load against the maximum", loading.Figure(w.lo)+" / "+loading.Figure(maxW)+" = "+loading.Percent(w.lo/maxW), v.by.rule.Basis)
	if least, err := loading.SmallestDriverW(w.lo, loading.HighLoadShare); err == nil {
		f.step("smallest driver at 80 %", quantity(w.lo, "W")+" / 0.8 = "+quantity(least, "W"), "common practice, no source")
	}
}

// capital writes the first letter large.
func capital(s string) string {
	if s != "" && s[0] >= 'a' && s[0] <= 'z' {
		return string(s[0]-'a'+'A') + s[1:]
	}
	return s
}

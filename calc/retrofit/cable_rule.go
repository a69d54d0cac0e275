package retrofit

import (
	"math"

	"lampward/calc/loading"
)

// smallCableA is what the smallest flexible conductor in use, 0.75 mm2, carries, A (from memory of cable tables). Below
// it no rating needs to be read.
const smallCableA = 6.0

// cableRules judge the cable between an output and its lamps. They leave alone gear inside a luminaire, whose leads are
// the maker's, unless something is on record about them.
var cableRules = []Rule{
	{
		ID: "output_voltage_drop", Severity: Medium, Subject: OnDriver,
		Trigger:  "voltage lost to the furthest lamp above 5 %; with one length on file, the whole load at its end",
		Why:      "Less light, another colour, and LED lamps that draw more current or drop out.",
		Basis:    "IEC 60228 conductor resistance at 20 °C; 5 % of IEC 60364-7-715 clause 715.525, from memory",
		Remedy:   "Thicker or shorter cable, gear nearer to the lamps, or 24 V.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldDriverCable, FieldDriverCableMM2, FieldDriverCableClass, FieldGearOutputV, FieldLampPower, FieldLampPowerFactor, FieldFixtureLamps},
		driver:   outputVoltageDrop,
	},
	{
		ID: "high_frequency_lead_too_long", Severity: Medium, Subject: OnDriver,
		Trigger:  "output lead of an electronic transformer longer than marked on it; low where nothing is marked and it is longer than 2 m",
		Why:      "A long lead radiates, and its reactance takes voltage that a thicker cable does not give back.",
		Basis:    "length marked on the gear; 2 m is common practice, no source; CISPR 15",
		Remedy:   "Move the gear nearer to the lamps.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldDriverCable},
		driver:   highFrequencyLeadTooLong,
	},
	{
		ID: "output_cable_overloaded", Severity: Danger, Blocks: true, Subject: OnDriver,
		Trigger:  "output current above the marked rating of the cable or its terminals, or above 25 A where NFPA 70 applies",
		Why:      "Extra-low voltage cables burn too: 100 W at 12 V is 8.3 A, often without a fuse.",
		Basis:    "rating of cable and terminals; NFPA 70 article 411, from memory",
		Remedy:   "Split the load, or fit thicker cable and larger terminals.",
		Cautions: []string{"CA-01", "CA-02"},
		Asks:     []Field{FieldDriverCableA, FieldGearOutputV, FieldLampPower, FieldLampPowerFactor, FieldFixtureLamps},
		driver:   outputCableOverloaded,
	},
}

// outputA is the current of a voltage source's output with all its lamps, A.
func (v *driverView) outputA() (a span, volts float64, ok bool) {
	volts, ok = positive(v.g.OutputV)
	if !ok {
		return span{}, 0, false
	}
	s := v.load.va
	if v.outputForm() == loading.OutputDC {
		s = v.load.w
	}
	return s.scaled(1 / volts), volts, true
}

// loaded reports whether the driver is a voltage source with lamps on it.
func (v *driverView) loaded() bool { return v.kind.voltageSource() && v.load.count > 0 }

func outputVoltageDrop(v *driverView) {
	if !v.loaded() {
		return
	}
	length, hasLength := known(v.d.CableM)
	section, hasSection := positive(v.d.CableMM2)
	if !hasLength && len(v.d.CableTapsM) > 0 {
		length, hasLength = known(&v.d.CableTapsM[len(v.d.CableTapsM)-1])
	}
	amps, volts, ok := v.outputA()
	if !hasLength || !hasSection || !ok {
		if v.d.Integral && v.d.CableM == nil && v.d.CableMM2 == nil {
			return
		}
		if !hasLength {
			v.ask(FieldDriverCable, v.aboutPlace())
		}
		if !hasSection {
			v.ask(FieldDriverCableMM2, v.aboutPlace())
		}
		if !ok {
			v.ask(FieldGearOutputV, aboutGear(v.g))
		}
		return
	}
	temp := 20.0
	if air, ok := degrees(v.d.AirC); ok {
		temp = min(max(temp, air), 160)
	}
	solid, flexible := v.d.CableClass, v.d.CableClass
	if v.d.CableClass == "" {
		solid, flexible = "1", "5"
	}
	lo, err := loading.ResistanceOhmPerKM(section, solid, temp)
	if err != nil {
		v.ask(FieldDriverCableMM2, v.aboutPlace())
		return
	}
	hi, err := loading.ResistanceOhmPerKM(section, flexible, temp)
	if err != nil {
		v.ask(FieldDriverCableMM2, v.aboutPlace())
		return
	}
	ohms := span{lo, hi, ""}
	drop := amps.divided(ohms).scaled(2 * length / 1000)
	taps := false
	if each, ok := v.tapped(); ok {
		a, errA := loading.AppendTapDropsV(nil, v.d.CableTapsM, each, lo)
		b, errB := loading.AppendTapDropsV(nil, v.d.CableTapsM, each, hi)
		if errA == nil && errB == nil {
			drop, taps = span{a[len(a)-1], b[len(b)-1], ""}, true
		}
	}
	j := above(drop, exactly(loading.FurthestDropPct/100*volts))
	if j.open {
		if v.d.CableClass == "" {
			v.ask(FieldDriverCableClass, v.aboutPlace())
		}
		if !v.load.w.exact() {
			v.askLamps()
		}
		if v.outputForm() != loading.OutputDC {
			v.askPowerFactors()
		}
	}
	if !j.fails {
		return
	}
	f := v.found(Medium, j)
	f.say("The output cable of %s, %s of %s mm², loses %s of %s to the furthest lamp; 5 %% is %s.", v.name(), quantity(length, "m"),
		loading.Figure(section), amount(drop, "V"), quantity(volts, "V"), quantity(loading.FurthestDropPct/100*volts, "V"))
	if taps {
		f.step("voltage lost along the taps", amount(drop, "V")+" at the last of "+plural(len(v.d.CableTapsM), "tap")+"; "+
			loading.Figure(drop.lo)+" / "+quantity(volts, "V")+" = "+loading.Percent(drop.lo/volts), v.by.rule.Basis)
		return
	}
	f.Steps = loading.DropSteps(amps.lo, length, lo, volts, loading.FurthestDropPct, v.by.rule.Basis)
}

// tapped returns the current of each lamp along a run with taps on file. It needs one lamp model and one tap a lamp.
func (v *driverView) tapped() (each []float64, ok bool) {
	if len(v.d.CableTapsM) == 0 || len(v.lamps) != 1 || !v.lamps[0].known || v.lamps[0].count != len(v.d.CableTapsM) {
		return nil, false
	}
	amps, _, ok := v.outputA()
	if !ok || !amps.exact() {
		return nil, false
	}
	each = make([]float64, len(v.d.CableTapsM))
	for i := range each {
		each[i] = amps.lo / float64(len(each))
	}
	return each, true
}

func highFrequencyLeadTooLong(v *driverView) {
	if v.kind != electronicTransformer || v.load.count == 0 && !v.load.unseen {
		return
	}
	length, ok := known(v.d.CableM)
	if !ok {
		if !v.d.Integral {
			v.ask(FieldDriverCable, v.aboutPlace())
		}
		return
	}
	if marked, ok := positive(v.g.OutputLeadM); ok {
		if j := above(exactly(length), exactly(marked)); j.fails {
			f := v.found(Medium, j)
			f.say("The output lead of %s is %s long; it is marked for at most %s.", v.name(), quantity(length, "m"), quantity(marked, "m"))
			f.Steps = loading.LeadSteps(length, marked, "length marked on the gear")
		}
		return
	}
	if j := above(exactly(length), exactly(loading.LeadLimitM)); j.fails {
		f := v.found(Low, byThumb(j.excess))
		f.say("The output lead of %s is %s long; where none is marked, %s is usual.", v.name(), quantity(length, "m"), quantity(loading.LeadLimitM, "m"))
		f.Steps = loading.LeadSteps(length, loading.LeadLimitM, "common practice, no source")
	}
}

func outputCableOverloaded(v *driverView) {
	if !v.loaded() {
		return
	}
	amps, volts, ok := v.outputA()
	cable, hasCable := positive(v.d.CableRatedA)
	terminal, hasTerminal := positive(v.d.TerminalRatedA)
	limit, what := math.Inf(1), ""
	if hasCable {
		limit, what = cable, "its cable is rated for"
	}
	if hasTerminal && terminal < limit {
		limit, what = terminal, "its terminals are rated for"
	}
	if v.by.sys.WiringRules == loading.NFPA70 && loading.SecondaryLimitA < limit {
		limit, what = loading.SecondaryLimitA, "a secondary circuit may carry"
	}
	if !ok {
		if hasCable || hasTerminal || !v.d.Integral {
			v.ask(FieldGearOutputV, aboutGear(v.g))
		}
		return
	}
	var j judgement
	if !math.IsInf(limit, 1) {
		j = above(amps, exactly(limit))
	}
	if !j.fails && !v.d.Integral {
		if !hasCable && (exceeds(amps.lo, smallCableA) || v.load.w.exact() && exceeds(amps.hi, smallCableA)) {
			v.ask(FieldDriverCableA, v.aboutPlace())
		}
		if j.open {
			v.askLamps()
			v.askPowerFactors()
		}
	}
	if !j.fails {
		return
	}
	f := v.found(Danger, j)
	f.say("%s %s %s from %s of %s; %s at most %s.", words(v.lamps, false), v.verb(v.load.count, "draws", "draw"), amount(amps, "A"), v.name(),
		quantity(volts, "V"), what, quantity(limit, "A"))
	f.Steps = loading.CurrentSteps(amps.lo*volts, volts, 1, limit, "output current against the rating", v.by.rule.Basis)
}

package retrofit

import (
	"math"

	"lampward/calc/loading"
)

// wrongSupplyFactor is how far above its maximum a supply is a danger. Common practice, no source.
const wrongSupplyFactor = 1.2

// correctedFactor is the power factor from which gear is taken to have its harmonics limited. Common practice, no source.
const correctedFactor = 0.9

// circuitRules judge final circuits against all they feed, and what they feed against the mains.
var circuitRules = []Rule{
	{
		ID: "supply_outside_input_range", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "voltage or frequency of the circuit outside the stated input range of the gear or mains lamp",
		Why:      "The gear or lamp is for another supply: it overheats, fails at once, or does not start.",
		Basis:    "input marking; that a unit sold for 230-240 V is good for 172-264 V is common practice, no source",
		Remedy:   "Fit gear or lamps made for this supply.",
		Cautions: []string{"CA-01", "CA-03"},
		Asks:     []Field{FieldGearInputV, FieldLampRatedV, FieldCircuitV},
		driver:   gearOutsideInputRange,
		fixture:  lampOutsideInputRange,
		only:     straight,
	},
	{
		ID: "circuit_overloaded", Severity: High, Blocks: true, Subject: OnCircuit,
		Trigger:  "steady current above the breaker's rating, or above 80 % of it where NFPA 70 applies and the breaker is not listed for 100 %; the cable is not checked",
		Why:      "Cable and breaker run hot; the breaker trips in the end.",
		Basis:    "rating of the breaker; NFPA 70 210.20(A)",
		Remedy:   "Split the circuit or cut the load.",
		Cautions: []string{"CA-01"},
		Asks: []Field{FieldCircuitRating, FieldCircuitV, FieldCircuitListed, FieldWiringRules, FieldLampPower, FieldFixtureLamps, FieldLampPowerFactor,
			FieldGearPowerFactor, FieldEfficiency},
		circuit: circuitOverloaded,
	},
	{
		ID: "circuit_inrush", Severity: Medium, Subject: OnCircuit,
		Trigger:  "more gears than the breaker carries at switch-on: proposals, and installed circuits with a trip in the last 12 months",
		Why:      "Capacitor inputs charge together in a fraction of a millisecond; the breaker takes it for a short circuit.",
		Basis:    "maker's count or pulse curve; else an estimate from IEC 60898-1 trip limits, derived",
		Remedy:   "Use a C curve breaker where the loop impedance allows, split the circuit, or fit an inrush limiter.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldGearInrush, FieldLampInrush, FieldCircuitCurve, FieldCircuitRating},
		circuit:  circuitInrush,
	},
	{
		ID: "circuit_leakage", Severity: Medium, Subject: OnCircuit,
		Trigger:  "standing leakage of all ways behind one residual-current device above 30 % of its rating",
		Why:      "The device may trip from half its rating, and every switching adds to the standing leakage.",
		Basis:    "BS 7671:2018 regulation 531.3.2",
		Remedy:   "Split the ways over more devices, or give each way its own.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldCircuitRCD, FieldCircuitRCDMA, FieldGearLeakage},
		circuit:  circuitLeakage,
	},
	{
		ID: "neutral_shared_between_circuits", Severity: Danger, Blocks: true, Subject: OnCircuit,
		Trigger:  "neutral borrowed from another way",
		Why:      "With this way switched off its neutral stays live from the other.",
		Basis:    "recorded on site",
		Remedy:   "Lock off both ways, prove the neutral dead to earth, and give each way its own neutral.",
		Cautions: []string{"CA-01", "CA-15"},
		Asks:     []Field{FieldCircuitNeutral},
		circuit:  neutralSharedBetweenCircuits,
	},
	{
		ID: "shared_neutral_harmonics", Severity: Medium, Subject: OnCircuit,
		Trigger:  "common neutral of one multi-phase circuit with LED or electronic gear whose power factor is below 0.9",
		Why:      "Third harmonics of the phases add up in the neutral instead of cancelling.",
		Basis:    "triple harmonics add in a common neutral; 0.9 as the mark of corrected gear is common practice, no source",
		Remedy:   "Measure the neutral current and check the neutral's section.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldLampPowerFactor, FieldGearPowerFactor},
		circuit:  sharedNeutralHarmonics,
	},
}

// feedV is the voltage between phase and neutral that hangs on a circuit, V. A multi-phase circuit is often named by
// the voltage between its phases.
func (v *view) feedV(c *loading.Circuit) (float64, bool) {
	volts, ok := v.mainsV(c)
	if !ok || c == nil || c.Phases == nil || *c.Phases < 3 {
		return volts, ok
	}
	if mains, known := positive(v.by.sys.MainsV); known && volts > 1.5*mains {
		return mains, true
	}
	if volts >= 300 {
		return volts / math.Sqrt(3), true
	}
	return volts, true
}

// An inputRange is the supply a nameplate is good for.
type inputRange struct {
	low, high       float64 // V; high is infinite and low 0 where that end is not stated
	complete        bool
	lowHz, highHz   float64
	hasLow, hasHigh bool
}

func gearOutsideInputRange(v *driverView) {
	if v.kind == gearUnknown {
		return
	}
	r := inputRange{high: math.Inf(1)}
	low, hasLow := positive(v.g.InputMinV)
	high, hasHigh := positive(v.g.InputMaxV)
	r.hasLow, r.hasHigh = hasLow, hasHigh
	r.complete = hasLow && hasHigh
	switch {
	case r.complete:
		if a, b, err := loading.InputLimitsV(low, high); err == nil {
			low, high = a, b
		}
		r.low, r.high = low, high
	case hasLow:
		r.low = low
	case hasHigh:
		r.high = high
	}
	r.lowHz, _ = positive(v.g.InputMinHz)
	r.highHz, _ = positive(v.g.InputMaxHz)
	volts, known := v.feedV(v.circuit)
	side := v.wrongSupply(&r, volts, known)
	if side == "" {
		if known && !r.complete {
			v.ask(FieldGearInputV, aboutGear(v.g))
		} else if !known && v.circuit != nil {
			v.ask(FieldCircuitV, v.aboutCircuit())
		}
		return
	}
	f := v.found(severityOfSupply(&r, volts), judgement{fails: true, sure: Recorded, excess: excessOfSupply(&r, volts)})
	v.saySupply(f, v.name(), &r, volts, side)
}

func lampOutsideInputRange(v *fixtureView) {
	if !v.bare {
		return
	}
	volts, known := v.feedV(v.circuit)
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil || l.lowVoltage() || l.model.Supply != "" && l.model.Supply != loading.SupplyMainsAC {
			continue
		}
		rated, hasRated := positive(l.model.RatedV)
		if !hasRated {
			if known && l.model.Supply == loading.SupplyMainsAC {
				v.ask(FieldLampRatedV, aboutLamp(l.model))
			}
			continue
		}
		r := inputRange{complete: true, hasLow: true, hasHigh: true}
		low, high, err := loading.InputLimitsV(rated, rated)
		if err != nil {
			continue
		}
		r.low, r.high = low, high
		if most, ok := positive(l.model.MaxV); ok && most >= rated {
			r.high = most
		}
		side := v.wrongSupply(&r, volts, known)
		if side == "" {
			if !known && v.circuit != nil {
				v.ask(FieldCircuitV, v.aboutCircuit())
			}
			continue
		}
		f := v.foundLamp(l, severityOfSupply(&r, volts), judgement{fails: true, sure: Recorded, excess: excessOfSupply(&r, volts)})
		v.saySupply(f, "a lamp for "+quantity(rated, "V"), &r, volts, side)
	}
}

// wrongSupply tells which way a supply lies outside a range: "above", "below", "frequency", or empty.
func (v *view) wrongSupply(r *inputRange, volts float64, known bool) string {
	switch {
	case known && exceeds(volts, r.high):
		return "above"
	case known && exceeds(r.low, volts):
		return "below"
	}
	hz, ok := positive(v.by.sys.MainsHz)
	if ok && (r.highHz > 0 && exceeds(hz, r.highHz) || r.lowHz > 0 && exceeds(r.lowHz, hz)) {
		return "frequency"
	}
	return ""
}

func severityOfSupply(r *inputRange, volts float64) Severity {
	if exceeds(volts, wrongSupplyFactor*r.high) {
		return Danger
	}
	return High
}

func excessOfSupply(r *inputRange, volts float64) float64 {
	switch {
	case math.IsInf(r.high, 1) || volts <= r.high:
		return 0
	}
	return ratio(volts, r.high)
}

func (v *view) saySupply(f *Finding, what string, r *inputRange, volts float64, side string) {
	if side == "frequency" {
		hz, _ := positive(v.by.sys.MainsHz)
		f.say("%s is on a supply of %s, outside its stated %s.", capital(what), quantity(hz, "Hz"), hertz(r))
		f.step("frequency against the input range", quantity(hz, "Hz")+"; stated "+hertz(r), "input marking")
		return
	}
	limit, sign := r.high, " > "
	if side == "below" {
		limit, sign = r.low, " < "
	}
	f.say("%s is on a supply of %s; it is good for %s.", capital(what), quantity(volts, "V"), voltsWords(r))
	f.step("supply against the input range", quantity(volts, "V")+sign+quantity(limit, "V")+"; "+loading.Figure(volts)+" / "+loading.Figure(limit)+" = "+
		loading.Percent(volts/limit), f.Basis)
}

func voltsWords(r *inputRange) string {
	switch {
	case !r.hasLow:
		return "up to " + quantity(r.high, "V")
	case !r.hasHigh:
		return quantity(r.low, "V") + " and more"
	}
	return loading.Figure(math.Floor(r.low)) + " to " + quantity(r.high, "V")
}

func hertz(r *inputRange) string {
	switch {
	case r.lowHz <= 0:
		return "up to " + quantity(r.highHz, "Hz")
	case r.highHz <= 0:
		return quantity(r.lowHz, "Hz") + " and more"
	}
	return loading.Figure(r.lowHz) + " to " + quantity(r.highHz, "Hz")
}

// inputVA is the apparent power gear takes from the mains, VA. A transformer passes the power factor of its lamps on;
// other gear has its own.
func (v *driverView) inputVA() span {
	switch v.kind {
	case gearUnknown:
		return nothingKnown
	case emergencyPack:
		return exactly(0)
	case magneticTransformer, electronicTransformer:
		return v.load.va.divided(v.inputFactor())
	}
	return v.load.w.divided(v.inputFactor()).divided(v.inverseGearFactor())
}

// inverseGearFactor is 1/PF of gear with a power factor of its own.
func (v *driverView) inverseGearFactor() span {
	if pf, ok := positive(v.g.PowerFactor); ok && pf >= 0.01 && pf <= 1 {
		return exactly(1 / pf)
	}
	if v.kind.ledDriver() {
		return span{1 / ledPowerFactor.Hi, 1 / ledPowerFactor.Lo, ledPowerFactor.Mark}
	}
	return span{1, 1 / ledPowerFactor.Lo, FromPractice} // a ballast, compensated or not
}

// inputVA is the apparent power of the lamps of a luminaire without gear, VA; electronic only counts LED lamps and
// lamps with gear inside.
func (v *fixtureView) inputVA(electronic bool) span {
	if !v.bare {
		return nothingKnown
	}
	out := exactly(0)
	for i := range v.lamps {
		l := &v.lamps[i]
		if electronic && l.class == filament {
			continue
		}
		var one load
		one.add(l)
		out = out.plus(one.va)
	}
	if v.f.LampsUnknown {
		out.hi = math.Inf(1)
	}
	return out
}

// askInputOf asks for what keeps the input of a driver or of a luminaire without gear from being known, its lamps'
// power aside.
func (v *view) askInputOf(d *driverView, f *fixtureView) {
	var lamps []lampLoad
	switch {
	case d != nil && (d.kind == gearUnknown || d.kind == emergencyPack || d.load.count == 0):
		return
	case d != nil && (d.kind == magneticTransformer || d.kind == electronicTransformer):
		lamps = d.lamps
	case d != nil:
		if !d.inverseGearFactor().exact() {
			v.ask(FieldGearPowerFactor, aboutGear(d.g))
			return
		}
	case f != nil && f.bare:
		lamps = f.lamps
	}
	asked := false
	for i := range lamps {
		if l := &lamps[i]; l.model != nil && !l.inversePowerFactor().exact() {
			v.ask(FieldLampPowerFactor, aboutLamp(l.model))
			asked = true
		}
	}
	if d != nil && !asked && !d.inputFactor().exact() {
		v.ask(FieldEfficiency, aboutGear(d.g))
	}
}

// found files a finding on a circuit; it rests on all that hangs on it.
func (v *circuitView) found(s Severity, j judgement) *Finding {
	f := v.view.found(s, j)
	f.rests(v.c.FactSource)
	for _, i := range v.drivers {
		d := &v.by.driver[i]
		f.Lamps += d.load.count
		f.rests(d.d.FactSource)
		if d.d.Model != nil {
			f.rests(d.g.FactSource)
		}
	}
	for _, i := range v.fixtures {
		x := &v.by.fixture[i]
		f.rests(x.f.FactSource)
		for k := range x.lamps {
			f.Lamps += x.lamps[k].count
		}
	}
	return f
}

// steadyVA sums the apparent power and the lamp power on a circuit.
func (v *circuitView) steadyVA() (va, w span) {
	for _, i := range v.drivers {
		va, w = va.plus(v.by.driver[i].inputVA()), w.plus(v.by.driver[i].load.w)
	}
	for _, i := range v.fixtures {
		x := &v.by.fixture[i]
		va = va.plus(x.inputVA(false))
		for k := range x.lamps {
			var one load
			one.add(&x.lamps[k])
			w = w.plus(one.w)
		}
	}
	return va, w
}

// parts are all lamps of known power on a circuit.
func (v *circuitView) parts() []loading.Part {
	var all []loading.Part
	for _, i := range v.drivers {
		all = append(all, parts(v.by.driver[i].lamps, false)...)
	}
	for _, i := range v.fixtures {
		all = append(all, parts(v.by.fixture[i].lamps, false)...)
	}
	return gathered(all)
}

// continuousShare is the share of a breaker that lighting, a load of 3 h and more, may use.
func (v *circuitView) continuousShare() span {
	switch {
	case is(v.c.Listed100):
		return exactly(1)
	case v.by.sys.WiringRules == loading.NFPA70 && isNot(v.c.Listed100):
		return exactly(loading.ContinuousShare)
	case v.by.sys.WiringRules == loading.NFPA70 || v.by.sys.WiringRules == "":
		return span{loading.ContinuousShare, 1, ""}
	}
	return exactly(1)
}

func circuitOverloaded(v *circuitView) {
	if len(v.drivers)+len(v.fixtures) == 0 {
		return
	}
	va, w := v.steadyVA()
	if va.lo == 0 {
		return // nothing on it, or nothing of which more than its gear kind is worth asking
	}
	rating, rated := positive(v.c.RatingA)
	volts, known := v.feedV(v.c)
	if !rated {
		v.ask(FieldCircuitRating, v.aboutPlace())
		return
	}
	if !known {
		v.ask(FieldCircuitV, v.aboutPlace())
		return
	}
	phases := 1.0
	if v.c.Phases != nil && *v.c.Phases == 3 {
		phases = 3 // shared evenly: uneven phases are not on record
	}
	amps := va.scaled(1 / (volts * phases))
	share := v.continuousShare()
	j := above(amps, share.scaled(rating))
	if j.fails {
		limit := share.hi
		f := v.found(High, j)
		f.say("This circuit %s %s; its breaker of %s may carry %s. Cable capacity not checked.", v.verb(1, "draws", "draw"), amount(amps, "A"),
			quantity(rating, "A"), quantity(limit*rating, "A"))
		sum := loading.SumWords(v.parts())
		if !w.exact() {
			sum = "at least " + sum
		}
		f.step("power of the lamps", sum, "nameplate power")
		f.step("apparent power from the mains, losses and power factors counted", amount(va, "VA"), "input power over power factor")
		per := quantity(volts, "V")
		if phases == 3 {
			per = "(3 × " + per + ")"
		}
		f.step("steady current", loading.Figure(va.lo)+" VA / "+per+" = "+quantity(amps.lo, "A"), "all lamps, phases shared evenly")
		f.step("against the breaker, cable capacity not checked", loading.Figure(amps.lo)+" / "+loading.Figure(limit*rating)+" = "+
			loading.Percent(amps.lo/(limit*rating)), v.by.rule.Basis)
		return
	}
	if !j.open {
		return
	}
	if !share.exact() && !above(amps, exactly(rating)).open {
		if v.by.sys.WiringRules == "" {
			v.ask(FieldWiringRules, v.aboutPlace())
		} else {
			v.ask(FieldCircuitListed, v.aboutPlace())
		}
		if above(amps, exactly(loading.ContinuousShare*rating)).fails {
			return
		}
	}
	v.askSteady()
}

// askSteady asks for what keeps a circuit's current from being known: power first, then what turns it into current.
func (v *circuitView) askSteady() {
	asked := false
	for _, i := range v.drivers {
		asked = v.askLampsOf(v.by.driver[i].fixtures, v.by.driver[i].lamps) || asked
	}
	for _, i := range v.fixtures {
		asked = v.askLampsIn(&v.by.fixture[i]) || asked
	}
	if asked {
		return
	}
	for _, i := range v.drivers {
		v.askInputOf(&v.by.driver[i], nil)
	}
	for _, i := range v.fixtures {
		v.askInputOf(nil, &v.by.fixture[i])
	}
}

func neutralSharedBetweenCircuits(v *circuitView) {
	switch v.c.Neutral {
	case "borrowed":
		f := v.found(Danger, certain)
		f.say("This circuit borrows its neutral from another way; with this way off the neutral stays live.")
		f.step("neutral", "borrowed from another way", "recorded on site")
	case "":
		if v.by.sys.Proposal && v.proposed {
			v.ask(FieldCircuitNeutral, v.aboutPlace())
		}
	}
}

func sharedNeutralHarmonics(v *circuitView) {
	if v.c.Neutral != "common" {
		return
	}
	lamps, poor, worst := 0, 0, 1.0
	var asks []func()
	count := func(n int, pf *float64, inherits bool, ask func()) {
		lamps += n
		switch x, ok := positive(pf); {
		case ok && x <= 1 && exceeds(correctedFactor, x):
			poor += n
			worst = math.Min(worst, x)
		case !ok && !inherits:
			asks = append(asks, ask)
		}
	}
	lampsOf := func(list []lampLoad) {
		for k := range list {
			if l := &list[k]; l.class == led && l.model != nil {
				count(l.count, l.model.PowerFactor, false, func() { v.ask(FieldLampPowerFactor, aboutLamp(l.model)) })
			}
		}
	}
	for _, i := range v.drivers {
		d := &v.by.driver[i]
		switch {
		case d.kind == electronicTransformer || d.kind == magneticTransformer:
			lampsOf(d.lamps) // a transformer passes on what its lamps do
		case d.kind.ledDriver() || d.kind == electronicBallast:
			count(max(d.load.count, 1), d.g.PowerFactor, false, func() { v.ask(FieldGearPowerFactor, aboutGear(d.g)) })
		}
	}
	for _, i := range v.fixtures {
		if x := &v.by.fixture[i]; x.bare {
			lampsOf(x.lamps)
		}
	}
	if poor == 0 {
		for _, ask := range asks {
			ask()
		}
		return
	}
	f := v.found(Medium, judgement{fails: true, sure: Recorded, excess: correctedFactor / worst})
	f.Lamps = poor
	f.say("The phases of this circuit share one neutral, and %s on it %s a power factor below %s.", plural(poor, "lamp"), v.verb(poor, "has", "have"),
		loading.Figure(correctedFactor))
	f.step("lowest power factor on a common neutral", loading.Figure(worst)+" < "+loading.Figure(correctedFactor), v.by.rule.Basis)
}

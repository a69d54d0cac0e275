package retrofit

import (
	"math"

	"lampward/calc/loading"
)

// moduleBin is the share by which the running voltage of a module may lie above the typical one: its bin, from memory
// of data sheets (5 to 10 %).
const moduleBin = 1.05

// Bands of a module's current.
const (
	dangerousCurrent = 1.5 // times the module's maximum
	usefulCurrent    = 0.9 // of the module's nominal
)

// moduleRules judge constant-current drivers with modules in series.
var moduleRules = []Rule{
	{
		ID: "module_overcurrent", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "current of one string, tolerance included, above the module's maximum",
		Why:      "The junctions overheat and fail early.",
		Basis:    "module's maximum; tolerance of about 10 % from memory of IEC 62384",
		Remedy:   "Fit or set a driver of the module's current.",
		Cautions: []string{"CA-01", "CA-03"},
		Asks:     []Field{FieldLampMaxMA, FieldDriverSetMA, FieldGearOutputMA, FieldCurrentTolerance, FieldFixtureStrings},
		driver:   moduleOvercurrent,
	},
	{
		ID: "module_undercurrent", Severity: Low, Subject: OnDriver,
		Trigger:  "current of one string below 90 % of the module's nominal current",
		Why:      "Less light than planned.",
		Basis:    "module's nominal current",
		Remedy:   "Work out the light again with the current it gets.",
		Cautions: []string{"CA-03"},
		Asks:     []Field{FieldLampNominalMA, FieldDriverSetMA, FieldGearOutputMA, FieldFixtureStrings},
		driver:   moduleUndercurrent,
	},
	{
		ID: "string_above_voltage_window", Severity: Medium, Blocks: true, Subject: OnDriver,
		Trigger:  "modules in series at their highest (cold) voltage above the driver's window",
		Why:      "The driver does not start in the cold.",
		Basis:    "voltage window of the driver; module's cold voltage",
		Remedy:   "Put fewer modules in series, or fit a driver with a higher window.",
		Cautions: []string{"CA-01", "CA-03"},
		Asks:     []Field{FieldForwardVCold, FieldForwardV, FieldComplianceMax, FieldFixtureStrings, FieldFixtureLamps, FieldFixtureOutput},
		driver:   stringAboveVoltageWindow,
	},
	{
		ID: "string_below_voltage_window", Severity: Medium, Subject: OnDriver,
		Trigger:  "modules in series at their lowest (hot) voltage below the driver's window",
		Why:      "The driver starts and stops over and over, or flashes.",
		Basis:    "voltage window of the driver; module's hot voltage",
		Remedy:   "Put more modules in series, or fit a driver with a lower window.",
		Cautions: []string{"CA-01", "CA-03"},
		Asks:     []Field{FieldForwardVHot, FieldForwardV, FieldComplianceMin, FieldFixtureStrings, FieldFixtureLamps, FieldFixtureOutput},
		driver:   stringBelowVoltageWindow,
	},
	{
		ID: "string_over_driver_power", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "current times running voltage of all strings above the driver's maximum power",
		Why:      "The driver overheats.",
		Basis:    "maximum power of the driver; running voltage with a bin of 5 %, from memory of data sheets",
		Remedy:   "Fit a larger driver, or fewer modules.",
		Cautions: []string{"CA-01", "CA-03"},
		Asks:     []Field{FieldGearMaxLoad, FieldForwardV, FieldDriverSetMA, FieldGearOutputMA, FieldFixtureStrings, FieldFixtureLamps, FieldFixtureOutput},
		driver:   stringOverDriverPower,
	},
	{
		ID: "parallel_string_cascade", Severity: High, Blocks: true, Subject: OnDriver,
		Trigger:  "parallel strings on one driver, and the current left to each once one opens above the module's maximum",
		Why:      "One open string overloads the rest, which then open one after the other.",
		Basis:    "current over the strings that are left",
		Remedy:   "Give each string a driver of its own.",
		Cautions: []string{"CA-01", "CA-03"},
		Asks:     []Field{FieldFixtureStrings, FieldLampMaxMA, FieldDriverSetMA, FieldGearOutputMA},
		driver:   parallelStringCascade,
	},
}

// current is what a constant-current driver gives, mA: as set, or what its model can only be, or anything between its
// lowest and highest setting.
func (v *driverView) current() (mA span, ok bool) {
	if x, ok := positive(v.d.SetMA); ok {
		return exactly(x), true
	}
	hi, ok := positive(v.g.OutputMaxMA)
	if !ok {
		return span{}, false
	}
	lo, ok := positive(v.g.OutputMinMA)
	if !ok || lo > hi {
		return span{0, hi, ""}, true
	}
	return span{lo, hi, ""}, true
}

// askCurrent asks for what keeps a driver's current from being known.
func (v *driverView) askCurrent(mA span, ok bool) {
	switch {
	case !ok:
		v.ask(FieldGearOutputMA, aboutGear(v.g))
	case !mA.exact():
		v.ask(FieldDriverSetMA, v.aboutPlace())
	}
}

// isModule reports whether a lamp is to be judged as a module on a constant current.
func (l *lampLoad) isModule() bool {
	return l.class == led && (l.model.Supply == loading.SupplyConstantCurrent || l.model.Supply == "")
}

// modules counts the lamps in a luminaire.
func (v *fixtureView) modules() int {
	n := 0
	for i := range v.lamps {
		n += v.lamps[i].count
	}
	return n
}

// strings is the number of parallel strings in a luminaire: as seen, 1 where there is one module, else anything up to
// one string a module.
func (v *fixtureView) strings() (fewest, most int) {
	n := max(v.modules(), 1)
	if s := v.f.Strings; s != nil && *s >= 1 {
		s := min(*s, 1e6)
		return s, s
	}
	return 1, n
}

// stringsOf returns the bounds of the fewest and of the most strings among the luminaires that hold a lamp: the
// fewest carry the highest current.
func (v *driverView) stringsOf(l *lampLoad) (fewest, most span) {
	fewest, most = span{math.Inf(1), math.Inf(1), ""}, span{}
	for _, i := range v.fixtures {
		x := &v.by.fixture[i]
		for j := range x.lamps {
			if sameLamp(x.lamps[j].model, l.model) {
				lo, hi := x.strings()
				fewest = span{min(fewest.lo, float64(lo)), min(fewest.hi, float64(hi)), ""}
				most = span{max(most.lo, float64(lo)), max(most.hi, float64(hi)), ""}
				break
			}
		}
	}
	return fewest, most
}

// askStrings asks for the strings of the luminaires where nobody has counted them.
func (v *driverView) askStrings() {
	for _, i := range v.fixtures {
		x := &v.by.fixture[i]
		if lo, hi := x.strings(); lo != hi {
			v.ask(FieldFixtureStrings, x.aboutPlace())
		}
	}
}

// over divides a current by a number of strings, both between ends.
func (s span) over(n span) span { return span{s.lo / n.hi, s.hi / n.lo, weaker(s.mark, n.mark)} }

// tolerance of a driver's current, as a factor. Unread, its lower end is no tolerance at all, so that what fails there
// fails for certain.
func (v *driverView) tolerance() span {
	if t, ok := known(v.g.CurrentTolerance); ok && t <= 100 {
		return exactly(1 + t/100)
	}
	return span{1 + currentTolerance.Lo/100, 1 + currentTolerance.Hi/100, ""}
}

func moduleOvercurrent(v *driverView) {
	if v.kind != constantCurrent {
		return
	}
	mA, ok := v.current()
	for i := range v.lamps {
		l := &v.lamps[i]
		if !l.isModule() {
			continue
		}
		if !ok {
			v.askCurrent(mA, ok)
			return
		}
		fewest, _ := v.stringsOf(l)
		tol := v.tolerance()
		each := mA.over(fewest)
		each = span{each.lo * tol.lo, each.hi * tol.hi, ""}
		limit, hasLimit := positive(l.model.MaxMA)
		if !hasLimit {
			if nominal, ok := positive(l.model.NominalMA); !ok || exceeds(each.hi, nominal) {
				v.ask(FieldLampMaxMA, aboutLamp(l.model))
			}
			continue
		}
		j := above(each, exactly(limit))
		if j.open {
			v.askCurrent(mA, ok)
			if !fewest.exact() {
				v.askStrings()
			}
			if !tol.exact() {
				v.ask(FieldCurrentTolerance, aboutGear(v.g))
			}
		}
		if !j.fails {
			continue
		}
		severity := High
		if exceeds(j.excess, dangerousCurrent) {
			severity = Danger
		}
		f := v.foundLamp(l, severity, j)
		f.say("%s %s %s through each string; %s %s rated for at most %s.", capital(v.name()), v.verb(1, "sends", "send"),
			amount(each, "mA"), plural(l.count, "module"), are(l.count), quantity(limit, "mA"))
		f.Steps = loading.StringCurrentSteps(mA.lo, 100*(tol.lo-1), int(min(fewest.hi, 1e6)), limit, "current of one string against the module's maximum", v.by.rule.Basis)
	}
}

func moduleUndercurrent(v *driverView) {
	if v.kind != constantCurrent {
		return
	}
	mA, ok := v.current()
	for i := range v.lamps {
		l := &v.lamps[i]
		if !l.isModule() {
			continue
		}
		nominal, hasNominal := positive(l.model.NominalMA)
		if !ok || !hasNominal {
			v.askCurrent(mA, ok)
			if !hasNominal {
				v.ask(FieldLampNominalMA, aboutLamp(l.model))
			}
			continue
		}
		_, most := v.stringsOf(l)
		each := mA.over(most)
		j := below(each, exactly(usefulCurrent*nominal))
		if j.open {
			v.askCurrent(mA, ok)
			if !most.exact() {
				v.askStrings()
			}
		}
		if !j.fails {
			continue
		}
		f := v.foundLamp(l, Low, j)
		f.say("%s %s %s through each string; its modules are for %s.", capital(v.name()), v.verb(1, "sends", "send"), amount(each, "mA"), quantity(nominal, "mA"))
		f.Steps = loading.StringCurrentSteps(mA.hi, 0, int(min(most.lo, 1e6)), nominal, "current of one string against the module's nominal", v.by.rule.Basis)
	}
}

// A stringView is all that hangs in series on one output of a constant-current driver.
type stringView struct {
	output          int  // of several; 0 where there is one
	modules         span // in series
	hot, cold, run  span // V
	unseen          bool // lamps nobody has looked at
	noV, noHot      bool // a module's typical, hot, cold voltage is unknown
	noCold, strings bool // the number of parallel strings is unknown
}

// eachString calls f for every output of a constant-current driver that carries modules. Luminaires that do not say
// which of several outputs feeds them are left out and asked for.
func (v *driverView) eachString(f func(s *stringView)) {
	several := v.g.Outputs != nil && *v.g.Outputs > 1
	for at, i := range v.fixtures {
		n := v.by.fixture[i].f.Output
		if several && n <= 0 {
			v.ask(FieldFixtureOutput, v.by.fixture[i].aboutPlace())
			continue
		}
		first := true
		for _, before := range v.fixtures[:at] {
			first = first && several && v.by.fixture[before].f.Output != n
		}
		if !first {
			continue
		}
		var s stringView
		if several {
			s.output = n
		}
		any := false
		for _, other := range v.fixtures[at:] {
			x := &v.by.fixture[other]
			if several && x.f.Output != n {
				continue
			}
			any = x.addTo(&s) || any
		}
		if any {
			f(&s)
		}
	}
}

// addTo puts a luminaire's modules into a string and reports whether it has any.
func (v *fixtureView) addTo(s *stringView) bool {
	any := false
	if v.f.LampsUnknown {
		s.unseen = true
	}
	fewest, most := v.strings()
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil {
			s.unseen = true
			continue
		}
		if !l.isModule() {
			continue
		}
		any = true
		n := span{math.Max(1, math.Floor(float64(l.count)/float64(most))), math.Ceil(float64(l.count) / float64(fewest)), ""}
		s.strings = s.strings || fewest != most
		s.modules = s.modules.plus(n)
		typical, ok := positive(l.model.ForwardV)
		run, hot, cold := nothingKnown, nothingKnown, nothingKnown
		if ok {
			run, hot, cold = exactly(moduleBin*typical), moduleHot.times(typical), moduleCold.times(typical)
		} else {
			s.noV = true
		}
		if x, ok := positive(l.model.ForwardVHot); ok {
			hot = exactly(x)
		} else {
			s.noHot = true
		}
		if x, ok := positive(l.model.ForwardVCold); ok {
			cold = exactly(x)
		} else {
			s.noCold = true
		}
		s.hot = s.hot.plus(hot.divided(n))
		s.cold = s.cold.plus(cold.divided(n))
		s.run = s.run.plus(run.divided(n))
	}
	if s.unseen {
		s.hot.hi, s.cold.hi, s.run.hi = math.Inf(1), math.Inf(1), math.Inf(1)
	}
	return any
}

// askString asks for what keeps a string's voltage from being known.
func (v *driverView) askString(s *stringView, missing bool, f Field) {
	if missing {
		for i := range v.lamps {
			if l := &v.lamps[i]; l.isModule() && v.misses(l.model, f) {
				v.ask(f, aboutLamp(l.model))
			}
		}
	}
	if s.strings {
		v.askStrings()
	}
	if s.unseen {
		v.askLampsOf(v.fixtures, nil)
	}
}

// misses reports whether a module does not state one of its voltages.
func (v *driverView) misses(m *loading.Lamp, f Field) bool {
	p := m.ForwardV
	switch f {
	case FieldForwardVHot:
		p = m.ForwardVHot
	case FieldForwardVCold:
		p = m.ForwardVCold
	}
	_, ok := positive(p)
	return !ok
}

func stringAboveVoltageWindow(v *driverView) {
	if v.kind != constantCurrent {
		return
	}
	v.eachString(func(s *stringView) {
		limit, ok := positive(v.g.ComplianceMaxV)
		if !ok {
			v.ask(FieldComplianceMax, aboutGear(v.g))
			return
		}
		j := above(s.cold, exactly(limit))
		if j.open {
			v.askString(s, s.noCold, FieldForwardVCold)
		}
		if !j.fails {
			return
		}
		f := v.found(Medium, j)
		f.say("%s modules in series reach %s at a cold start; the window of %s ends at %s.", capital(figures(s.modules)), amount(s.cold, "V"), v.name(), quantity(limit, "V"))
		v.stepString(f, s, s.cold, "highest string voltage, cold start", quantity(limit, "V"), s.noCold)
	})
}

func stringBelowVoltageWindow(v *driverView) {
	if v.kind != constantCurrent {
		return
	}
	v.eachString(func(s *stringView) {
		limit, ok := known(v.g.ComplianceMinV)
		if !ok {
			v.ask(FieldComplianceMin, aboutGear(v.g))
			return
		}
		j := below(s.hot, exactly(limit))
		if j.open {
			v.askString(s, s.noHot, FieldForwardVHot)
		}
		if !j.fails {
			return
		}
		f := v.found(Medium, j)
		f.say("%s modules in series fall to %s when hot; the window of %s begins at %s.", capital(figures(s.modules)), amount(s.hot, "V"), v.name(), quantity(limit, "V"))
		v.stepString(f, s, s.hot, "lowest string voltage, hot", quantity(limit, "V"), s.noHot)
	})
}

// stepString adds the arithmetic of a string's voltage.
func (v *driverView) stepString(f *Finding, s *stringView, volts span, what, limit string, ranged bool) {
	basis := "module's data sheet"
	if ranged {
		basis = "typical voltage within 10 %, cold start 8 % more, common practice"
	}
	if s.modules.exact() && volts.exact() {
		f.step(what, loading.Figure(s.modules.lo)+" × "+quantity(volts.lo/s.modules.lo, "V")+" = "+quantity(volts.lo, "V")+"; window "+limit, basis)
		return
	}
	f.step(what, amount(s.modules, "modules")+": "+amount(volts, "V")+"; window "+limit, basis)
}

// running adds up the power the strings of a constant-current driver take once warm, W. What keeps it from being known
// is left in missing; ok is false where there are no modules.
func (v *driverView) running(mA span) (w, volts span, missing stringView, ok bool) {
	v.eachString(func(s *stringView) {
		ok = true
		volts = volts.plus(s.run)
		missing.noV, missing.unseen, missing.strings = missing.noV || s.noV, missing.unseen || s.unseen, missing.strings || s.strings
	})
	return volts.divided(mA).scaled(1e-3), volts, missing, ok
}

func stringOverDriverPower(v *driverView) {
	if v.kind != constantCurrent {
		return
	}
	mA, hasCurrent := v.current()
	w, volts, missing, ok := v.running(mA)
	if !ok {
		return
	}
	limit, hasLimit := positive(v.g.MaxLoadW)
	if !hasCurrent || !hasLimit {
		v.askCurrent(mA, hasCurrent)
		if !hasLimit {
			v.ask(FieldGearMaxLoad, aboutGear(v.g))
		}
		return
	}
	j := above(w, exactly(limit))
	if j.open {
		v.askCurrent(mA, true)
		v.askString(&missing, missing.noV, FieldForwardV)
	}
	if !j.fails {
		return
	}
	f := v.found(High, j)
	f.say("The modules %s %s from %s; it may give at most %s.", v.verb(2, "takes", "take"), amount(w, "W"), v.name(), quantity(limit, "W"))
	f.step("running power of the strings", amount(mA, "mA")+" × "+amount(volts, "V")+" = "+amount(w, "W"), v.by.rule.Basis)
	f.step("against the maximum", loading.Figure(w.lo)+" / "+loading.Figure(limit)+" = "+loading.Percent(w.lo/limit), "maximum power of the driver")
}

func parallelStringCascade(v *driverView) {
	if v.kind != constantCurrent {
		return
	}
	mA, ok := v.current()
	for i := range v.lamps {
		l := &v.lamps[i]
		if !l.isModule() || l.count < 2 {
			continue
		}
		if !ok {
			v.askCurrent(mA, ok)
			return
		}
		limit, hasLimit := positive(l.model.MaxMA)
		if !hasLimit {
			limit, hasLimit = positive(l.model.NominalMA)
			if hasLimit && !exceeds(mA.hi, limit) {
				continue // even the whole current is within the nominal
			}
			hasLimit = false
		} else if !exceeds(mA.hi, limit) {
			continue // one string can carry the whole current
		}
		v.cascade(l, mA, limit, hasLimit)
	}
}

// cascade judges the luminaires that hold modules of one model in parallel strings.
func (v *driverView) cascade(l *lampLoad, mA span, limit float64, hasLimit bool) {
	fails, worst := 0, judgement{}
	strings := 0
	for _, i := range v.fixtures {
		x := &v.by.fixture[i]
		holds := 0
		for j := range x.lamps {
			if sameLamp(x.lamps[j].model, l.model) {
				holds += x.lamps[j].count
			}
		}
		if holds < 2 {
			continue
		}
		if x.f.Strings == nil {
			v.ask(FieldFixtureStrings, x.aboutPlace())
			continue
		}
		s, _ := x.strings()
		if s < 2 {
			continue
		}
		if !hasLimit {
			v.ask(FieldLampMaxMA, aboutLamp(l.model))
			return
		}
		j := above(mA.scaled(1/float64(s-1)), exactly(limit))
		if j.open {
			v.askCurrent(mA, true)
		}
		if j.fails {
			fails += holds
			if j.excess > worst.excess {
				worst, strings = j, s
			}
		}
	}
	if fails == 0 {
		return
	}
	f := v.foundLamp(l, High, worst)
	f.Lamps = fails
	left := mA.scaled(1 / float64(strings-1))
	f.say("%d strings share %s of %s; once one opens, each of the rest gets %s, and its modules are rated for at most %s.", strings,
		amount(mA, "mA"), v.name(), amount(left, "mA"), quantity(limit, "mA"))
	f.Steps = loading.StringCurrentSteps(mA.lo, 0, strings-1, limit, "current of each string once one has opened", v.by.rule.Basis)
}

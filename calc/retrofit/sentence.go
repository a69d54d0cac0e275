package retrofit

import (
	"fmt"
	"math"
	"strings"

	"lampward/calc/loading"
)

// say sets the plain sentence of a finding.
func (f *Finding) say(format string, args ...any) { f.Sentence = fmt.Sprintf(format, args...) }

// step adds one line of arithmetic.
func (f *Finding) step(what, sum, basis string) {
	f.Steps = append(f.Steps, loading.Step{What: what, Sum: sum, Basis: basis})
}

// shows adds what is on record as the step of a finding that has no arithmetic.
func (f *Finding) shows(what, sum string) { f.step(what, sum, "the record") }

// screens turns a finding into one against a rule of thumb: low, and it refuses nothing.
func (f *Finding) screens() {
	f.Severity, f.Sureness, f.Blocks = Low, Screening, false
}

// quantity writes a number with its unit.
func quantity(x float64, unit string) string { return loading.Figure(x) + " " + unit }

// amount writes a span with its unit: "21 W", "at least 21 W", "22.2 to 40 VA".
func amount(s span, unit string) string {
	switch {
	case s.exact():
		return quantity(s.lo, unit)
	case math.IsInf(s.hi, 1):
		return "at least " + quantity(s.lo, unit)
	}
	return loading.Figure(s.lo) + " to " + quantity(s.hi, unit)
}

// figures writes a span of counts: "4", "4 to 6", "at least 4".
func figures(s span) string {
	switch {
	case s.exact():
		return loading.Figure(s.lo)
	case math.IsInf(s.hi, 1):
		return "at least " + loading.Figure(s.lo)
	}
	return loading.Figure(s.lo) + " to " + loading.Figure(s.hi)
}

// plural writes a count with its word.
func plural(n int, one string) string {
	if n == 1 {
		return "1 " + one
	}
	return fmt.Sprintf("%d %ss", n, one)
}

// words names lamps: "3 lamps of 7 W", "2 lamps of 35 W and 3 of 6 W", "9 lamps". Working counts only those believed
// working.
func words(lamps []lampLoad, working bool) string {
	total, kinds := 0, 0
	count := func(l *lampLoad) int {
		if working {
			return l.working()
		}
		return l.count
	}
	for i := range lamps {
		if n := count(&lamps[i]); n > 0 {
			total += n
			kinds++
		}
	}
	if kinds == 0 || kinds > 3 {
		return plural(total, "lamp")
	}
	var b strings.Builder
	part := 0
	for i := range lamps {
		l := &lamps[i]
		n := count(l)
		if n == 0 {
			continue
		}
		part++
		switch {
		case part == 1:
			b.WriteString(plural(n, "lamp"))
		case part == kinds:
			fmt.Fprintf(&b, " and %d", n)
		default:
			fmt.Fprintf(&b, ", %d", n)
		}
		if l.known {
			b.WriteString(" of " + quantity(l.watts, "W"))
		} else {
			b.WriteString(" of unknown power")
		}
	}
	return b.String()
}

// parts are the lamps of known power as lines of a sum.
func parts(lamps []lampLoad, working bool) []loading.Part {
	var out []loading.Part
	for i := range lamps {
		n := lamps[i].count
		if working {
			n = lamps[i].working()
		}
		if n > 0 && lamps[i].known {
			out = append(out, loading.Part{Count: n, PowerW: lamps[i].watts})
		}
	}
	return out
}

// sumOf writes the sum of the lamps' power, W; "at least" where a part of it is unknown.
func sumOf(lamps []lampLoad, working bool, w span) string {
	known := parts(lamps, working)
	if len(known) == 0 && !w.exact() {
		return "not known"
	}
	s := loading.SumWords(known)
	if !w.exact() {
		return "at least " + s
	}
	return s
}

// verb is the verb of n lamps, in the mood of a proposal where something is proposed.
func (v *view) verb(n int, one, many string) string {
	switch {
	case v.proposed:
		return "would " + many
	case n == 1:
		return one
	}
	return many
}

// be is "is", "are" or "would be".
func (v *view) be(n int) string {
	if v.proposed {
		return "would be"
	}
	return are(n)
}

// are is "is" or "are", of what holds whether or not anything is fitted.
func are(n int) string {
	if n == 1 {
		return "is"
	}
	return "are"
}

// name is how a sentence calls a driver: "this 105 W electronic transformer".
func (v *driverView) name() string {
	if w, ok := positive(v.g.MaxLoadW); ok && v.kind != constantCurrent {
		return "this " + quantity(w, "W") + " " + v.kind.word()
	}
	if va, ok := positive(v.g.MaxLoadVA); ok {
		return "this " + quantity(va, "VA") + " " + v.kind.word()
	}
	return "this " + v.kind.word()
}

// sourceRank orders the sources of facts, the weakest last.
func sourceRank(s string) int {
	switch s {
	case loading.SeenOnNameplate:
		return 0
	case loading.DataSheet:
		return 1
	case loading.Drawing:
		return 2
	case loading.HandedOver:
		return 3
	case loading.SaidByPerson:
		return 4
	}
	return 5
}

// rests lowers a finding's source to the weakest of those given. No source counts as assumed.
func (f *Finding) rests(sources ...string) {
	for _, s := range sources {
		if sourceRank(s) == 5 {
			s = loading.Assumed
		}
		if f.Source == "" || sourceRank(s) > sourceRank(f.Source) {
			f.Source = s
		}
	}
}

// found files a finding on a driver and all its lamps.
func (v *driverView) found(s Severity, j judgement) *Finding {
	f := v.view.found(s, j)
	f.Lamps = v.load.count
	f.Gear = v.g.Key
	f.rests(v.d.FactSource, v.g.FactSource)
	v.restsOnLamps(f, nil)
	if len(v.lamps) == 1 {
		f.ofLamp(v.lamps[0].model)
	}
	return f
}

// foundLamp files a finding on a driver and its lamps of one model.
func (v *driverView) foundLamp(l *lampLoad, s Severity, j judgement) *Finding {
	f := v.view.found(s, j)
	f.Lamps = l.count
	f.Gear = v.g.Key
	f.Proposed = l.proposed
	f.rests(v.d.FactSource, v.g.FactSource)
	v.restsOnLamps(f, l.model)
	f.ofLamp(l.model)
	return f
}

// restsOnLamps takes the luminaires' and the lamps' sources into a finding's; with a model only those of that model.
func (v *driverView) restsOnLamps(f *Finding, only *loading.Lamp) {
	for _, i := range v.fixtures {
		x := &v.by.fixture[i]
		for j := range x.lamps {
			m := x.lamps[j].model
			if only != nil && !sameLamp(only, m) {
				continue
			}
			f.rests(x.f.FactSource)
			if m != nil {
				f.rests(m.FactSource)
			}
		}
	}
}

// ofLamp names the lamp model as part of the cause.
func (f *Finding) ofLamp(m *loading.Lamp) {
	if m != nil {
		f.Lamp, f.lamp = m.Key, m
	}
}

// found files a finding on a luminaire.
func (v *fixtureView) found(s Severity, j judgement) *Finding {
	f := v.view.found(s, j)
	f.rests(v.f.FactSource)
	if v.f.Model != nil {
		f.rests(v.m.FactSource)
	}
	for i := range v.lamps {
		f.Lamps += v.lamps[i].count
	}
	if v.driver != nil {
		f.Gear = v.driver.g.Key
	}
	if len(v.lamps) == 1 {
		f.ofLamp(v.lamps[0].model)
	}
	return f
}

// foundLamp files a finding on a luminaire and its lamps of one model.
func (v *fixtureView) foundLamp(l *lampLoad, s Severity, j judgement) *Finding {
	f := v.found(s, j)
	f.Lamps = l.count
	f.Proposed = l.proposed
	f.ofLamp(l.model)
	if l.model != nil {
		f.rests(l.model.FactSource)
	}
	return f
}

// aboutPlace is the driver's own place.
func (v *driverView) aboutPlace() About {
	return About{Kind: string(OnDriver), Key: v.d.Key, Index: int(v.link.driver)}
}

// aboutPlace is the luminaire's own place.
func (v *fixtureView) aboutPlace() About {
	return About{Kind: string(OnFixture), Key: v.f.Key, Index: int(v.link.fixture)}
}

// aboutPlace is the dimmer's own place.
func (v *dimmerView) aboutPlace() About {
	return About{Kind: string(OnDimmer), Key: v.d.Key, Index: int(v.link.dimmer)}
}

// aboutPlace is the circuit.
func (v *circuitView) aboutPlace() About {
	return About{Kind: string(OnCircuit), Key: v.c.Key, Index: int(v.link.circuit)}
}

// askLamps asks for what keeps the sum of a driver's lamps from being known: lamps nobody has looked at, power
// nobody has read.
func (v *driverView) askLamps() { v.askLampsOf(v.fixtures, v.lamps) }

// askPowerFactors asks for the power factors that keep the apparent power of a driver's lamps from being known.
func (v *driverView) askPowerFactors() {
	for i := range v.lamps {
		l := &v.lamps[i]
		if inverse := l.inversePowerFactor(); l.model != nil && !inverse.exact() {
			v.ask(FieldLampPowerFactor, aboutLamp(l.model))
		}
	}
}

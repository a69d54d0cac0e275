package retrofit

import (
	"math"

	"lampward/calc/loading"
)

// An inrushShare adds up how much of a breaker's allowance gears use at switch-on.
type inrushShare struct {
	share    float64 // over 1: more than allowed
	gears    int
	estimate bool // some of it rests on the estimate for short pulses
	missing  bool // some gear states nothing
	steps    []loading.Step
	show     bool // make the steps
}

func circuitInrush(v *circuitView) {
	proposal := v.by.sys.Proposal && v.proposed
	if !proposal && v.c.TripsInYear <= 0 {
		return // the answer would change nothing
	}
	var s inrushShare
	v.addInrush(&s)
	if !exceeds(s.share, 1) {
		if s.missing {
			v.askInrush()
		}
		return
	}
	s = inrushShare{show: true}
	v.addInrush(&s)
	j := judgement{fails: true, sure: Recorded, excess: math.Min(s.share, 1000)}
	if s.estimate && v.c.TripsInYear <= 0 {
		j.sure = Screening // low: the limit is our estimate
	}
	f := v.found(Medium, j)
	what := "what its breaker carries"
	if s.estimate {
		what += " by estimate"
	}
	f.say("%s switched on together %s %s of %s.", capital(plural(s.gears, "gear")), v.verb(s.gears, "takes", "take"), loading.Percent(s.share), what)
	if v.c.TripsInYear > 0 {
		f.step("trips in the last 12 months", "1 or more", "recorded on site")
	}
	f.Steps = append(f.Steps, s.steps...)
}

// addInrush adds all gears of the circuit that charge a capacitor at switch-on. Wound transformers have a rule of their
// own; an electronic transformer has no large capacitor and counts only where it states an inrush.
func (v *circuitView) addInrush(s *inrushShare) {
	for at, i := range v.drivers {
		d := &v.by.driver[i]
		switch {
		case d.kind.ledDriver(), d.kind == electronicBallast, d.kind == electronicTransformer && d.g.InrushA != nil:
		default:
			continue
		}
		// Gears of one model are one line; the first of them adds all.
		n, first := 1, true
		if d.g.Key != (loading.Key{}) {
			for k, o := range v.drivers {
				if k != at && v.by.driver[o].g.Key == d.g.Key {
					n++
					first = first && k > at
				}
			}
		}
		if first {
			v.addGear(s, d.g, n)
		}
	}
	for _, i := range v.fixtures {
		x := &v.by.fixture[i]
		if !x.bare {
			continue
		}
		for k := range x.lamps {
			if l := &x.lamps[k]; l.class == led && l.model != nil {
				v.addPulse(s, l.model.InrushA, l.model.InrushUS, l.count)
			}
		}
	}
}

// addGear adds n gears of one model: by the maker's count where one is on file, else by their pulse.
func (v *circuitView) addGear(s *inrushShare, g *loading.Gear, n int) {
	amps, hasAmps := positive(v.c.RatingA)
	if g.UnitsPerBreaker != nil && *g.UnitsPerBreaker > 0 && g.UnitsBreakerA != nil && g.UnitsBreakerCurve != "" && hasAmps && v.c.Curve != "" {
		count, err := loading.ScaledCount(*g.UnitsPerBreaker, g.UnitsBreakerCurve, *g.UnitsBreakerA, v.c.Curve, amps)
		if err == nil {
			s.gears += n
			s.share += float64(n) / math.Max(float64(count), 0.5)
			if s.show {
				s.steps = append(s.steps, loading.Step{
					What: "maker's count restated for this breaker",
					Sum: loading.Figure(float64(*g.UnitsPerBreaker)) + " on " + g.UnitsBreakerCurve + loading.Figure(*g.UnitsBreakerA) + " = " +
						loading.Figure(float64(count)) + " on " + v.c.Curve + loading.Figure(amps) + "; " + plural(n, "gear"),
					Basis: "maker's count; scaling of the Electrical Installation Guide, fig. N72, rounded down",
				})
			}
			return
		}
	}
	v.addPulse(s, g.InrushA, g.InrushUS, n)
}

// addPulse adds n gears by their inrush peak and width: against the breaker's own pulse curve, else by estimate.
func (v *circuitView) addPulse(s *inrushShare, peakA, widthUS *float64, n int) {
	s.gears += n
	peak, hasPeak := positive(peakA)
	width, hasWidth := positive(widthUS)
	if !hasPeak || !hasWidth {
		s.missing = true
		return
	}
	if limit, err := loading.PulseLimitA(v.c.PulseCurve, width); err == nil {
		s.share += ratio(float64(n)*peak, limit)
		if s.show {
			s.steps = append(s.steps, loading.Step{
				What: "peaks against the breaker's pulse curve",
				Sum: loading.Figure(float64(n)) + " × " + quantity(peak, "A") + " = " + quantity(float64(n)*peak, "A") + "; at " + quantity(width, "µs") +
					" the breaker carries " + quantity(limit, "A"),
				Basis: "pulse curve of the breaker",
			})
		}
		return
	}
	amps, ok := positive(v.c.RatingA)
	limit, err := loading.InrushLimitA(v.c.Curve, amps, width)
	if !ok || err != nil {
		s.missing = true
		return
	}
	s.estimate = true
	s.share += ratio(float64(n)*peak, limit)
	if s.show {
		s.steps = append(s.steps, loading.InrushSteps(v.c.Curve, amps, peak, width)...)
		s.steps = append(s.steps, loading.Step{
			What:  "gears on the circuit, estimate",
			Sum:   loading.Figure(float64(n)) + " × " + quantity(peak, "A") + " = " + quantity(float64(n)*peak, "A") + "; " + loading.Percent(float64(n)*peak/limit),
			Basis: "inrush peak of the data sheet",
		})
	}
}

// askInrush asks for what keeps the allowance from being known: the breaker first, then the gear.
func (v *circuitView) askInrush() {
	curve := v.c.Curve == ""
	_, rated := positive(v.c.RatingA)
	if (curve || !rated) && len(v.c.PulseCurve) == 0 {
		if curve {
			v.ask(FieldCircuitCurve, v.aboutPlace())
		}
		if !rated {
			v.ask(FieldCircuitRating, v.aboutPlace())
		}
		return
	}
	for _, i := range v.drivers {
		d := &v.by.driver[i]
		if (d.kind.ledDriver() || d.kind == electronicBallast) && (d.g.InrushA == nil || d.g.InrushUS == nil) && d.g.UnitsPerBreaker == nil {
			v.ask(FieldGearInrush, aboutGear(d.g))
		}
	}
	for _, i := range v.fixtures {
		x := &v.by.fixture[i]
		for k := range x.lamps {
			if l := &x.lamps[k]; x.bare && l.class == led && l.model != nil && (l.model.InrushA == nil || l.model.InrushUS == nil) {
				v.ask(FieldLampInrush, aboutLamp(l.model))
			}
		}
	}
}

// circuitLeakage judges all ways behind one residual-current device once, at the first of them.
func circuitLeakage(v *circuitView) {
	if v.c.RCD == "none" {
		return
	}
	first := v.subject.Index
	total, units, ways := exactly(0), 0, 0
	concerned := false
	for i := range v.by.circuit {
		o := &v.by.circuit[i]
		if i != first && (v.c.RCD == "" || o.c.RCD != v.c.RCD) {
			continue
		}
		if i < first {
			return // judged there
		}
		ways++
		t, n, leaks := o.leakage()
		total, units = total.plus(t), units+n
		concerned = concerned || leaks
	}
	if !concerned {
		return // nothing leaks, or of all that may only the gear kind is worth asking
	}
	if v.c.RCD == "" {
		v.ask(FieldCircuitRCD, v.aboutPlace())
		return
	}
	rated, ok := v.ratedRCD()
	if !ok {
		v.ask(FieldCircuitRCDMA, v.aboutPlace())
		return
	}
	j := above(total, exactly(loading.LeakageShare*rated))
	if j.open {
		for i := range v.by.circuit {
			if o := &v.by.circuit[i]; o.c.RCD == v.c.RCD {
				v.askLeakage(o)
			}
		}
	}
	if !j.fails {
		return
	}
	f := v.found(Medium, j)
	f.Lamps = 0
	for i := range v.by.circuit {
		if o := &v.by.circuit[i]; o.c.RCD == v.c.RCD {
			f.rests(o.c.FactSource)
			for _, d := range o.drivers {
				f.Lamps += v.by.driver[d].load.count
			}
		}
	}
	f.say("%s behind one residual-current device of %s %s %s; it should stay below %s.", capital(plural(ways, "way")), quantity(rated, "mA"),
		v.verb(ways, "leaks", "leak"), amount(total, "mA"), quantity(loading.LeakageShare*rated, "mA"))
	f.Steps = append(f.Steps, loading.LeakageSteps(total.lo, rated, units)...)
}

// ratedRCD is the rated residual current of the device, mA, as any of the ways behind it states it.
func (v *circuitView) ratedRCD() (float64, bool) {
	for i := range v.by.circuit {
		if o := &v.by.circuit[i]; o.c.RCD == v.c.RCD {
			if x, ok := positive(o.c.RCDMA); ok {
				return x, true
			}
		}
	}
	return 0, false
}

// leakage sums the standing leakage of a way, mA, and counts the gears that leak; leaks reports whether gear of a known
// kind does or may. Gear in a class II or III luminaire has no path to leak to; lamps without gear neither.
func (v *circuitView) leakage() (total span, gears int, leaks bool) {
	for _, i := range v.drivers {
		d := &v.by.driver[i]
		switch mA, ok := known(d.g.LeakageMA); {
		case ok:
			total = total.plus(exactly(mA))
			if mA > 0 {
				gears++
				leaks = true
			}
		case d.insulated():
		default:
			total = total.plus(nothingKnown)
			leaks = leaks || d.kind != gearUnknown
		}
	}
	for _, i := range v.fixtures {
		if x := &v.by.fixture[i]; !x.bare && x.m.Class != "II" && x.m.Class != "III" {
			total = total.plus(nothingKnown)
		}
	}
	return total, gears, leaks
}

// insulated reports whether all luminaires on a driver are of class II or III.
func (v *driverView) insulated() bool {
	for _, i := range v.fixtures {
		if c := v.by.fixture[i].m.Class; c != "II" && c != "III" {
			return false
		}
	}
	return len(v.fixtures) > 0
}

func (v *circuitView) askLeakage(o *circuitView) {
	for _, i := range o.drivers {
		d := &v.by.driver[i]
		if _, ok := known(d.g.LeakageMA); !ok && !d.insulated() && d.kind != gearUnknown {
			v.ask(FieldGearLeakage, aboutGear(d.g))
		}
	}
}

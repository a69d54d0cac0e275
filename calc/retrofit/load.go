package retrofit

import (
	"lampward/calc/loading"
)

// A Load is one line of the picture "load against window" at a driver, a dimmer or a circuit. Nil is not known.
type Load struct {
	Subject        Subject  `json:"-"`
	Quantity       string   `json:"quantity"`                    // W, VA, A, lamps; V: running voltage of a string against the driver's window
	Output         int      `json:"output,omitempty"`            // of a driver with several outputs
	Present        *float64 `json:"present,omitempty"`           // all lamps
	PresentHigh    *float64 `json:"present_high,omitempty"`      // the upper end where Present is only the lower one of a range
	Working        *float64 `json:"working,omitempty"`           // lamps believed working
	AfterLossOfOne *float64 `json:"after_loss_of_one,omitempty"` // once the largest working lamp has failed
	Min            *float64 `json:"min,omitempty"`
	Max            *float64 `json:"max,omitempty"`
	DeratedMax     *float64 `json:"derated_max,omitempty"` // at the air temperature on record
	Pct            *float64 `json:"pct,omitempty"`         // Present over Max (over DeratedMax where that is known), %
}

// Loads returns what every driver, dimmer and circuit carries and may carry, in that order. A driver with nothing on
// record about it has no line.
func Loads(sys *loading.System) []Load {
	var c Checker
	c.sys, c.rule = sys, &rules[0] // what is asked on the way is not answered here
	c.gather()
	var out []Load
	for i := range c.driver {
		out = c.driver[i].loads(out)
	}
	for i := range c.dimmer {
		out = c.dimmer[i].loads(out)
	}
	for i := range c.circuit {
		out = c.circuit[i].loads(out)
	}
	return out
}

// with fills the numbers of a load.
func (l Load) with(present, working span, limits window) Load {
	l.Present, l.PresentHigh = ends(present)
	l.Working, _ = ends(working)
	l.Min, l.Max, l.DeratedMax = limits.min, limits.max, limits.derated
	most := l.Max
	if l.DeratedMax != nil {
		most = l.DeratedMax
	}
	if l.Present != nil && most != nil && *most > 0 {
		pct := 100 * ratio(*l.Present, *most)
		l.Pct = &pct
	}
	return l
}

type window struct{ min, max, derated *float64 }

// ends returns a span as one number, or two where it is a range. A sum with an unknown part is not a number at all.
func ends(s span) (lo, hi *float64) {
	if s.hi > largest*1e6 {
		return nil, nil
	}
	if s.exact() {
		return &s.lo, nil
	}
	return &s.lo, &s.hi
}

// number returns a recorded number, nil where it is unknown or none is stated.
func number(p *float64) *float64 {
	if x, ok := positive(p); ok {
		return &x
	}
	return nil
}

func (v *driverView) loads(out []Load) []Load {
	at := Load{Subject: Subject{OnDriver, int(v.link.driver), v.d.Key}}
	if v.load.count == 0 && !v.load.unseen && v.kind == gearUnknown {
		return out
	}
	limits := window{min: number(v.g.MinLoadW), max: number(v.g.MaxLoadW)}
	if share, ok := v.derated(); ok && limits.max != nil {
		most := share * *limits.max
		limits.derated = &most
	}
	if v.kind == constantCurrent {
		mA, ok := v.current()
		if !ok {
			mA = nothingKnown
		}
		w, _, _, any := v.running(mA)
		if !any {
			return append(out, at.with(nothingKnown, nothingKnown, limits))
		}
		line := at
		line.Quantity = "W"
		out = append(out, line.with(w, nothingKnown, limits))
		v.eachString(func(s *stringView) {
			line := at
			line.Quantity, line.Output = "V", s.output
			out = append(out, line.with(s.run, nothingKnown, window{min: number(v.g.ComplianceMinV), max: number(v.g.ComplianceMaxV)}))
		})
		return out
	}
	line := at
	line.Quantity = "W"
	line = line.with(v.load.w, v.load.workingW, limits)
	if v.load.workingW.exact() && v.load.working > 0 {
		left := max(0, v.load.workingW.lo-v.load.largestW)
		line.AfterLossOfOne = &left
	}
	out = append(out, line)
	if va := number(v.g.MaxLoadVA); va != nil {
		line = at
		line.Quantity = "VA"
		out = append(out, line.with(v.load.va, v.load.workingVA, window{max: va}))
	}
	return out
}

// derated is the share of its rating gear may carry at the air on record.
func (v *driverView) derated() (share float64, ok bool) {
	air, ok := degrees(v.d.AirC)
	if !ok || len(v.g.Derating) == 0 {
		return 0, false
	}
	share, err := loading.AllowedShare(v.g.Derating, air)
	return share, err == nil
}

func (v *dimmerView) loads(out []Load) []Load {
	s := v.powerLoad()
	if s.members == 0 {
		return out
	}
	at := Load{Subject: v.subject}
	if s.unknown {
		s.working.hi = nothingKnown.hi
	}
	all, any := span{}, false
	limit := window{}
	kinds := 0
	for c := range loadClasses {
		if !s.present[c] || c == inductive {
			continue
		}
		kinds++
		all, any = all.plus(s.class[c]), true
		if most, ok, _ := v.rating(c); ok {
			limit.max = &most
		} else {
			limit.max = nil
		}
	}
	if kinds > 1 {
		limit.max = nil // each kind has a rating of its own; shares of them are what counts
	}
	if s.unknown {
		all.hi = nothingKnown.hi
	}
	if least, ok, _ := v.minimum(&s); ok && least > 0 {
		limit.min = &least
	}
	if any || s.present[inductive] {
		line := at
		line.Quantity = "W"
		if !any || s.present[inductive] {
			all = nothingKnown // wound transformers are rated in VA
		}
		out = append(out, line.with(all, s.working, limit))
	}
	if s.present[inductive] {
		line := at
		line.Quantity = "VA"
		w := window{}
		if most, ok, _ := v.rating(inductive); ok {
			w.max = &most
		}
		out = append(out, line.with(s.class[inductive], nothingKnown, w))
	}
	if n := v.m.LEDMaxCount; n != nil && *n > 0 && *n < 1e6 {
		line := at
		line.Quantity = "lamps"
		most := float64(*n)
		out = append(out, line.with(exactly(float64(s.leds)), nothingKnown, window{max: &most}))
	}
	return out
}

func (v *circuitView) loads(out []Load) []Load {
	if len(v.drivers)+len(v.fixtures) == 0 {
		return out
	}
	line := Load{Subject: v.subject, Quantity: "A"}
	va, _ := v.steadyVA()
	volts, ok := v.feedV(v.c)
	if !ok {
		return append(out, line.with(nothingKnown, nothingKnown, window{max: number(v.c.RatingA)}))
	}
	phases := 1.0
	if v.c.Phases != nil && *v.c.Phases == 3 {
		phases = 3
	}
	limit := window{max: number(v.c.RatingA)}
	if share := v.continuousShare(); share.exact() && share.lo < 1 && limit.max != nil {
		most := share.lo * *limit.max
		limit.derated = &most
	}
	return append(out, line.with(va.scaled(1/(volts*phases)), nothingKnown, limit))
}

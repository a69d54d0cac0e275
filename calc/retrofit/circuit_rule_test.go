package retrofit

import (
	"testing"

	"lampward/calc/loading"
)

// complete is a circuit on which nothing is unknown.
func complete() loading.CircuitFacts {
	return loading.CircuitFacts{NominalV: some(230.0), Phases: some(1), Curve: "B", RatingA: some(16.0), RCD: "none", Neutral: "own"}
}

// drivers puts n LED drivers with a strip each on one circuit.
func drivers(c loading.CircuitFacts, n int, g loading.Gear, w float64) func(*rig) {
	return func(r *rig) {
		way := r.way(c)
		g.Key = r.key()
		strip := strip24(w)
		strip.Key = r.key()
		for range n {
			r.gear(g, way, nil, loading.LampGroup{Model: &strip, Count: 1})
		}
	}
}

// proposed marks all lamps of a rig as a proposal.
func proposed(build func(*rig)) func(*rig) {
	return func(r *rig) {
		build(r)
		r.Proposal = true
		for i := range r.Fixtures {
			for k := range r.Fixtures[i].Lamps {
				r.Fixtures[i].Lamps[k].Proposed = true
			}
		}
	}
}

// tripped records trips of the first circuit.
func tripped(build func(*rig)) func(*rig) {
	return func(r *rig) {
		build(r)
		r.Circuits[0].TripsInYear = 2
	}
}

// nfpa puts a rig under NFPA 70.
func nfpa(build func(*rig)) func(*rig) {
	return func(r *rig) {
		build(r)
		r.WiringRules = loading.NFPA70
	}
}

func TestCircuitRules(t *testing.T) {
	// 24 V strip of 100 W on a driver of 0.88 and 0.95: 119.6 VA, 0.52 A at 230 V; 30 of them 15.6 A, 31 16.1 A.
	d120 := ledDriver(120, fixed)
	loose := with(d120, func(g *loading.Gear) { g.PowerFactor = nil })
	silent := with(d120, func(g *loading.Gear) { g.InrushA, g.InrushUS = nil, nil })
	maker := with(silent, func(g *loading.Gear) {
		g.UnitsPerBreaker, g.UnitsBreakerA, g.UnitsBreakerCurve = some(18), some(16.0), "C"
	})
	small := func(w float64) loading.CircuitFacts {
		return with(complete(), func(c *loading.CircuitFacts) { c.RatingA = some(w) })
	}
	runCases(t, map[string][]ruleCase{
		"supply_outside_input_range": {
			// Good for 0.75 × 220 = 165 V to 1.10 × 240 = 264 V.
			{name: "277 V on a unit for 220-240 V", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.NominalV = some(277.0) }), 1, d120, 50),
				findings: 1, severity: High, blocks: true, sure: Recorded, says: "165 to 264 V"},
			{name: "264 V", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.NominalV = some(264.0) }), 1, d120, 50)},
			{name: "120 V", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.NominalV = some(120.0) }), 1, d120, 50), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "above 1.2 times the maximum", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.NominalV = some(480.0) }), 1, d120, 50),
				findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "three phases named by 400 V", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.NominalV, c.Phases = some(400.0), some(3) }), 1, d120, 50)},
			{name: "input marking unknown", build: drivers(complete(), 1, with(d120, func(g *loading.Gear) { g.InputMinV, g.InputMaxV = nil, nil }), 50), asks: []Field{FieldGearInputV}},
			{name: "supply unknown", build: func(r *rig) {
				r.MainsV = nil
				drivers(with(complete(), func(c *loading.CircuitFacts) { c.NominalV = nil }), 1, d120, 50)(r)
			}, asks: []Field{FieldCircuitV}},
			{name: "60 Hz on gear for 50 Hz", build: func(r *rig) {
				drivers(complete(), 1, with(d120, func(g *loading.Gear) { g.InputMinHz, g.InputMaxHz = some(50.0), some(50.0) }), 50)(r)
				r.MainsHz = some(60.0)
			}, findings: 1, severity: High, blocks: true, sure: Recorded, says: "60 Hz"},
			{name: "a 120 V lamp on 230 V", build: func(r *rig) {
				r.straight(r.way(complete()), nil, of(2, with(mainsHalogen(40), func(l *loading.Lamp) { l.RatedV = some(120.0) })))
			}, findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "a 240 V lamp on 230 V", build: func(r *rig) {
				r.straight(r.way(complete()), nil, of(2, with(mainsHalogen(40), func(l *loading.Lamp) { l.RatedV = some(240.0) })))
			}},
			{name: "a mains lamp of unknown voltage", build: func(r *rig) {
				r.straight(r.way(complete()), nil, of(2, with(mainsHalogen(40), func(l *loading.Lamp) { l.RatedV = nil })))
			}, asks: []Field{FieldLampRatedV}},
		},
		"circuit_overloaded": {
			{name: "16.1 A on 16 A", build: drivers(complete(), 31, d120, 100), findings: 1, severity: High, blocks: true, sure: Recorded, says: "31 × 100 W = 3100 W"},
			{name: "15.6 A on 16 A", build: drivers(complete(), 30, d120, 100)},
			// 40 W, 0.88, 0.95, 230 V: 0.208 A; 61 of them fit 80 % of 16 A, 62 do not.
			{name: "61 fittings at 80 % of 16 A", build: nfpa(drivers(with(complete(), func(c *loading.CircuitFacts) { c.Listed100 = some(false) }), 61, d120, 40))},
			{name: "62 fittings at 80 % of 16 A", build: nfpa(drivers(with(complete(), func(c *loading.CircuitFacts) { c.Listed100 = some(false) }), 62, d120, 40)),
				findings: 1, severity: High, blocks: true, sure: Recorded, says: "12.8 A"},
			{name: "62 fittings, breaker listed for 100 %", build: nfpa(drivers(with(complete(), func(c *loading.CircuitFacts) { c.Listed100 = some(true) }), 62, d120, 40))},
			{name: "62 fittings, listing unknown", build: nfpa(drivers(complete(), 62, d120, 40)), asks: []Field{FieldCircuitListed}},
			{name: "62 fittings, wiring rules unknown", build: func(r *rig) {
				drivers(complete(), 62, d120, 40)(r)
				r.WiringRules = ""
			}, asks: []Field{FieldWiringRules}},
			// 1035 W of filament lamps: 4.5 A.
			{name: "filament lamps", build: func(r *rig) { r.straight(r.way(small(4.4)), nil, of(9, mainsHalogen(115))) }, findings: 1, severity: High, blocks: true, sure: Recorded, says: "4.5 A"},
			{name: "filament lamps at the rating", build: func(r *rig) { r.straight(r.way(small(4.5)), nil, of(9, mainsHalogen(115))) }},
			// 20 × 100 W: 9.88 VA/W·230: at 0.9 11.0 A, at 0.5 19.8 A.
			{name: "power factor unknown", build: drivers(complete(), 20, loose, 100), asks: []Field{FieldGearPowerFactor}},
			{name: "power factor unknown, too much at both ends", build: drivers(small(10), 20, loose, 100), findings: 1, severity: High, blocks: false, sure: OnRange},
			{name: "power factor unknown, far too much at both ends", build: drivers(small(6), 20, loose, 100), findings: 1, severity: High, blocks: true, sure: OnRange},
			{name: "rating unknown", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.RatingA = nil }), 20, d120, 100), asks: []Field{FieldCircuitRating}},
			{name: "lamp power unknown", build: func(r *rig) {
				r.straight(r.way(complete()), nil, of(1, mainsHalogen(40)), of(1, with(mainsHalogen(40), func(l *loading.Lamp) { l.PowerW = nil })))
			}, asks: []Field{FieldLampPower}},
		},
		"circuit_inrush": {
			// 30 A, 200 us on B16: 274.3 A, 9 gears.
			{name: "ten gears installed, nothing tripped", build: drivers(complete(), 10, d120, 30)},
			{name: "ten gears installed, trips recorded", build: tripped(drivers(complete(), 10, d120, 30)), findings: 1, severity: Medium, sure: Recorded, says: "274.3 A / 30 A = 9"},
			{name: "nine gears installed, trips recorded", build: tripped(drivers(complete(), 9, d120, 30))},
			{name: "ten gears proposed", build: proposed(drivers(complete(), 10, d120, 30)), findings: 1, severity: Low, sure: Screening, says: "by estimate"},
			{name: "nine gears proposed", build: proposed(drivers(complete(), 9, d120, 30))},
			// 18 on C16 are 9 on B16.
			{name: "ten by the maker's count", build: proposed(drivers(complete(), 10, maker, 30)), findings: 1, severity: Medium, sure: Recorded, says: "18 on C16 = 9 on B16"},
			{name: "nine by the maker's count", build: proposed(drivers(complete(), 9, maker, 30))},
			// Pulse curve: 240 A at 200 us carry 8 × 30 A.
			{name: "nine by the pulse curve", build: proposed(drivers(with(complete(), func(c *loading.CircuitFacts) {
				c.PulseCurve = []loading.PulsePoint{{WidthUS: 100, PeakA: 300}, {WidthUS: 300, PeakA: 180}}
			}), 9, d120, 30)),
				findings: 1, severity: Medium, sure: Recorded, says: "the breaker carries 240 A"},
			{name: "eight by the pulse curve", build: proposed(drivers(with(complete(), func(c *loading.CircuitFacts) {
				c.PulseCurve = []loading.PulsePoint{{WidthUS: 100, PeakA: 300}, {WidthUS: 300, PeakA: 180}}
			}), 8, d120, 30))},
			{name: "inrush unknown, proposed", build: proposed(drivers(complete(), 10, silent, 30)), asks: []Field{FieldGearInrush}},
			{name: "inrush unknown, installed", build: drivers(complete(), 10, silent, 30)},
			{name: "breaker unknown, proposed", build: proposed(drivers(with(complete(), func(c *loading.CircuitFacts) { c.Curve, c.RatingA = "", nil }), 10, d120, 30)), asks: []Field{FieldCircuitCurve, FieldCircuitRating}},
			{name: "mains LED lamps proposed", build: proposed(func(r *rig) {
				r.straight(r.way(complete()), nil, of(10, with(mainsLED(7, fixed), func(l *loading.Lamp) { l.InrushA, l.InrushUS = some(30.0), some(200.0) })))
			}), findings: 1, severity: Low, sure: Screening},
		},
		"circuit_leakage": {
			// 30 mA: 9 mA, 18 gears of 0.5 mA.
			{name: "19 gears on 30 mA", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.RCD, c.RCDMA = "A", some(30.0) }), 19, d120, 20), findings: 1, severity: Medium, sure: Recorded, says: "limit 30 % × 30 mA = 9 mA"},
			{name: "18 gears on 30 mA", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.RCD, c.RCDMA = "A", some(30.0) }), 18, d120, 20)},
			{name: "two ways behind one device", build: func(r *rig) {
				c := with(complete(), func(c *loading.CircuitFacts) { c.RCD, c.RCDMA = "A", some(30.0) })
				drivers(c, 10, d120, 20)(r)
				drivers(c, 9, d120, 20)(r)
			}, findings: 1, severity: Medium, sure: Recorded, says: "2 ways"},
			{name: "two ways behind a device each", build: func(r *rig) {
				drivers(with(complete(), func(c *loading.CircuitFacts) { c.RCD, c.RCDMA = "A", some(30.0) }), 10, d120, 20)(r)
				drivers(with(complete(), func(c *loading.CircuitFacts) { c.RCD, c.RCDMA = "B", some(30.0) }), 9, d120, 20)(r)
			}},
			{name: "no device", build: drivers(complete(), 40, d120, 20)},
			{name: "device unknown", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.RCD = "" }), 19, d120, 20), asks: []Field{FieldCircuitRCD}},
			{name: "rating of the device unknown", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.RCD = "A" }), 19, d120, 20), asks: []Field{FieldCircuitRCDMA}},
			{name: "leakage unknown", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.RCD, c.RCDMA = "A", some(30.0) }), 19, with(d120, func(g *loading.Gear) { g.LeakageMA = nil }), 20),
				asks: []Field{FieldGearLeakage}},
			{name: "leakage unknown in class II", build: func(r *rig) {
				drivers(with(complete(), func(c *loading.CircuitFacts) { c.RCD, c.RCDMA = "A", some(30.0) }), 19, with(d120, func(g *loading.Gear) { g.LeakageMA = nil }), 20)(r)
				for i := range r.Fixtures {
					r.Fixtures[i].Model = &loading.Fitting{Class: "II"}
				}
			}},
		},
		"neutral_shared_between_circuits": {
			{name: "borrowed", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.Neutral = "borrowed" }), 1, d120, 20), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "its own", build: drivers(complete(), 1, d120, 20)},
			{name: "unknown, nothing proposed", build: drivers(with(complete(), func(c *loading.CircuitFacts) { c.Neutral = "" }), 1, d120, 20)},
			{name: "unknown, a proposal", build: proposed(drivers(with(complete(), func(c *loading.CircuitFacts) { c.Neutral = "" }), 1, d120, 20)), asks: []Field{FieldCircuitNeutral}},
		},
		"shared_neutral_harmonics": {
			{name: "common neutral, power factor 0.6", build: drivers(common(), 3, with(d120, func(g *loading.Gear) { g.PowerFactor = some(0.6) }), 20), findings: 1, severity: Medium, sure: Recorded, says: "0.6 < 0.9"},
			{name: "common neutral, power factor 0.9", build: drivers(common(), 3, with(d120, func(g *loading.Gear) { g.PowerFactor = some(0.9) }), 20)},
			{name: "common neutral, power factor unknown", build: drivers(common(), 3, loose, 20), asks: []Field{FieldGearPowerFactor}},
			{name: "its own neutral", build: drivers(complete(), 3, with(d120, func(g *loading.Gear) { g.PowerFactor = some(0.6) }), 20)},
			{name: "filament lamps", build: func(r *rig) { r.straight(r.way(common()), nil, of(3, mainsHalogen(40))) }},
		},
	})
}

func common() loading.CircuitFacts {
	return with(complete(), func(c *loading.CircuitFacts) { c.Neutral, c.Phases = "common", some(3) })
}

func TestSwitchRules(t *testing.T) {
	twoWire := loading.Control{Name: "electronic switch", Kind: loading.SwitchElectronic, NeedsNeutral: some(false), MinLoadW: some(0.0)}
	relay := loading.Control{Name: "detector", Kind: loading.Detector, NeedsNeutral: some(true), ContactA: some(10.0), CapacitiveA: some(2.0)}
	lamps := func(n int) loading.LampGroup { return of(n, mainsLED(20, fixed)) }
	transformers := func(m loading.Control, c loading.CircuitFacts) func(*rig) {
		return func(r *rig) {
			way := r.way(c)
			r.gear(wound(60), way, by(r.control(m, way)), of(1, halogen12(35)))
		}
	}
	curveC := with(complete(), func(c *loading.CircuitFacts) { c.Curve = "C" })
	plain := loading.Control{Name: "switch", Kind: loading.SwitchContact}
	runCases(t, map[string][]ruleCase{
		"no_neutral_glow": {
			// 2 π · 50 Hz · 10 nF · 230 V = 0.72 mA.
			{name: "two-wire switch with LED lamps", build: on(twoWire, lamps(1)), findings: 1, severity: Low, blocks: false, sure: Recorded, says: "0.7226 mA"},
			{name: "two-wire switch with filament lamps", build: on(twoWire, of(1, mainsHalogen(40)))},
			{name: "neutral connected", build: func(r *rig) {
				on(twoWire, lamps(1))(r)
				r.Dimmers[0].Neutral = some(true)
			}},
			{name: "neutral unknown", build: on(with(twoWire, func(m *loading.Control) { m.NeedsNeutral = nil }), lamps(1)), asks: []Field{FieldDimmerNeutral}},
			{name: "plain contact", build: on(plain, lamps(1))},
		},
		"switch_unsuitable": {
			// 20 W at 0.9 and 230 V: 0.0966 A; 20 take 1.93 A, 21 take 2.03 A.
			{name: "21 lamps on 2 A", build: on(relay, lamps(21)), findings: 1, severity: Medium, sure: Recorded, says: "2.029 A"},
			{name: "20 lamps on 2 A", build: on(relay, lamps(20))},
			{name: "more gears than its count", build: on(with(relay, func(m *loading.Control) { m.CapacitiveA, m.CapacitiveCount = nil, some(10) }), lamps(11)), findings: 1, severity: Medium, sure: Recorded},
			{name: "as many gears as its count", build: on(with(relay, func(m *loading.Control) { m.CapacitiveA, m.CapacitiveCount = nil, some(10) }), lamps(10))},
			{name: "ten gears, rating unknown", build: on(with(relay, func(m *loading.Control) { m.CapacitiveA = nil }), of(10, mainsLED(5, fixed))), asks: []Field{FieldDimmerContact}},
			{name: "200 W, rating unknown", build: on(with(relay, func(m *loading.Control) { m.CapacitiveA = nil }), of(5, mainsLED(40, fixed))), asks: []Field{FieldDimmerContact}},
			{name: "nine small gears, rating unknown", build: on(with(relay, func(m *loading.Control) { m.CapacitiveA = nil }), of(9, mainsLED(5, fixed)))},
			// 2310 W of filament lamps: 10.04 A on a contact of 10 A.
			{name: "filament lamps above the contact", build: on(relay, of(21, mainsHalogen(110))), findings: 1, severity: Medium, sure: Recorded, says: "10.04 A"},
			{name: "filament lamps at the contact", build: on(relay, of(20, mainsHalogen(115)))},
			{name: "below its least load", build: on(with(twoWire, func(m *loading.Control) { m.MinLoadW = some(40.0) }), lamps(1)), findings: 1, severity: Medium, sure: Recorded, says: "20 W < 40 W"},
			{name: "at its least load", build: on(with(twoWire, func(m *loading.Control) { m.MinLoadW = some(20.0) }), lamps(1))},
			{name: "least load of a two-wire switch unknown", build: on(with(twoWire, func(m *loading.Control) { m.MinLoadW = nil }), lamps(1)), asks: []Field{FieldDimmerMinLoad}},
		},
		"transformer_inrush_on_switch": {
			{name: "proposed on a detector", build: proposed(transformers(relay, curveC)), findings: 1, severity: Low, sure: Recorded},
			{name: "installed on a detector", build: transformers(relay, curveC)},
			{name: "installed on a detector that welded", build: func(r *rig) {
				transformers(relay, curveC)(r)
				r.Dimmers[0].WeldsInYear = 1
			}, findings: 1, severity: Low, sure: Recorded},
			{name: "proposed on a plain switch and a C curve", build: proposed(transformers(plain, curveC))},
			{name: "proposed on a plain switch and a B curve", build: proposed(transformers(plain, complete())), findings: 1, severity: Low, sure: Recorded, says: "B curve"},
			{name: "installed behind a B curve", build: transformers(plain, complete())},
			{name: "installed behind a B curve that tripped", build: tripped(transformers(plain, complete())), findings: 1, severity: Low, sure: Recorded, says: "1 or more"},
			{name: "proposed, curve unknown", build: proposed(transformers(plain, with(complete(), func(c *loading.CircuitFacts) { c.Curve = "" }))), asks: []Field{FieldCircuitCurve}},
		},
	})
}

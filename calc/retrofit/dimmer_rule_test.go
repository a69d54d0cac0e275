package retrofit

import (
	"testing"

	"lampward/calc/loading"
)

var (
	leading  = []string{loading.LeadingEdge}
	trailing = []string{loading.TrailingEdge}
	bothEdge = []string{loading.LeadingEdge, loading.TrailingEdge}
	edgeless = []string{loading.PhaseCut}
	fixed    = []string{}
)

// leadingDimmer is a complete leading-edge dimmer for R and L.
func leadingDimmer() loading.Control {
	return loading.Control{
		Name: "leading-edge dimmer", Kind: loading.LeadingEdge, Marking: "R,L", MinLoadW: some(20.0), MaxLoadW: some(300.0), MaxLoadVA: some(300.0),
		LEDMinLoadW: some(5.0), LEDMaxLoadW: some(100.0), Toroids: some(false),
	}
}

// trailingDimmer is a complete trailing-edge dimmer for R and C.
func trailingDimmer() loading.Control {
	return loading.Control{
		Name: "trailing-edge dimmer", Kind: loading.TrailingEdge, Marking: "R,C", MinLoadW: some(20.0), MaxLoadW: some(250.0),
		LEDMinLoadW: some(5.0), LEDMaxLoadW: some(100.0),
	}
}

// on puts lamps straight on a dimmer.
func on(m loading.Control, lamps ...loading.LampGroup) func(*rig) {
	return func(r *rig) {
		way := r.way(loading.CircuitFacts{})
		r.straight(way, by(r.control(m, way)), lamps...)
	}
}

// gearOn puts gear with lamps on a dimmer.
func gearOn(m loading.Control, g loading.Gear, lamps ...loading.LampGroup) func(*rig) {
	return func(r *rig) {
		way := r.way(loading.CircuitFacts{})
		r.gear(g, way, by(r.control(m, way)), lamps...)
	}
}

// with changes a nameplate.
func with[T any](x T, change func(*T)) T {
	change(&x)
	return x
}

func TestDimmerRules(t *testing.T) {
	universal := func(edge string) func(*rig) {
		return func(r *rig) {
			m := with(leadingDimmer(), func(m *loading.Control) { m.Kind, m.Marking = loading.UniversalPhase, "R,L,C" })
			gearOn(m, electronic(60, trailing), of(1, halogen12(35)))(r)
			r.Dimmers[0].SetEdge = edge
		}
	}
	paired := func(r *rig, least, most *int) {
		r.Pairings = map[loading.PairingKey]loading.Pairing{
			{Lamp: r.Fixtures[0].Lamps[0].Model.Key, Control: r.Dimmers[0].Model.Key}: {LeastLamps: least, MostLamps: most},
		}
	}
	runCases(t, map[string][]ruleCase{
		"dimmer_wrong_for_gear": {
			{name: "trailing-edge transformer on a leading-edge dimmer", build: gearOn(leadingDimmer(), electronic(60, trailing), of(1, halogen12(35))),
				findings: 1, severity: High, blocks: true, sure: Recorded, says: "accepts trailing edge"},
			{name: "the same on a trailing-edge dimmer", build: gearOn(trailingDimmer(), electronic(60, trailing), of(1, halogen12(35)))},
			{name: "toroid on a dimmer that forbids toroids", build: gearOn(leadingDimmer(), with(wound(60), func(g *loading.Gear) { g.Toroid = some(true) }), of(1, halogen12(35))),
				findings: 1, severity: High, blocks: true, sure: Recorded, says: "toroid"},
			{name: "the same, the core not on record", build: gearOn(leadingDimmer(), with(wound(60), func(g *loading.Gear) { g.Toroid = nil }), of(1, halogen12(35))),
				asks: []Field{FieldGearToroid}},
			{name: "wound transformer, letters of the dimmer unknown", build: gearOn(with(leadingDimmer(), func(m *loading.Control) { m.Marking = "" }), wound(60), of(1, halogen12(35))),
				asks: []Field{FieldDimmerMarking}},
			{name: "universal dimmer set to the wrong edge", build: universal(loading.LeadingEdge), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "universal dimmer set to the right edge", build: universal(loading.TrailingEdge)},
			{name: "universal dimmer, edge unknown", build: universal(""), asks: []Field{FieldDimmerSetEdge}},
			{name: "transformer nobody has read", build: gearOn(leadingDimmer(), electronic(60, nil), of(1, halogen12(35))), asks: []Field{FieldGearDimming}},
			{name: "dimmer of unknown kind", build: gearOn(loading.Control{}, electronic(60, trailing), of(1, halogen12(35))), asks: []Field{FieldDimmerKind}},
			{name: "LED driver on an edge it does not name", build: gearOn(trailingDimmer(), ledDriver(60, leading), of(1, strip24(30))),
				findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "the same pair listed by its maker", build: func(r *rig) {
				gearOn(trailingDimmer(), ledDriver(60, leading), of(1, strip24(30)))(r)
				r.Pairings = map[loading.PairingKey]loading.Pairing{{Gear: r.Drivers[0].Model.Key, Control: r.Dimmers[0].Model.Key}: {}}
			}},
			{name: "mains LED lamp for the other edge", build: on(trailingDimmer(), of(3, mainsLED(7, leading))), findings: 1, severity: High, blocks: true, sure: Recorded},
		},
		"not_dimmable_on_dimmer": {
			{name: "mains LED lamp marked not dimmable", build: on(leadingDimmer(), of(3, mainsLED(7, fixed))), findings: 1, severity: High, blocks: true, sure: Recorded,
				says: "3 LED lamps"},
			{name: "the same on a switch", build: on(loading.Control{Kind: loading.SwitchContact}, of(3, mainsLED(7, fixed)))},
			{name: "the same lamp marked dimmable", build: on(leadingDimmer(), of(3, mainsLED(7, bothEdge)))},
			{name: "transformer found unmarked", build: gearOn(trailingDimmer(), electronic(60, fixed), of(1, halogen12(35))), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "12 V LED lamp not dimmable behind a transformer", build: gearOn(leadingDimmer(), wound(60), of(2, with(led12(5), func(l *loading.Lamp) { l.Dimming = fixed }))),
				findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "the same lamp, marking unknown", build: gearOn(leadingDimmer(), wound(60), of(2, with(led12(5), func(l *loading.Lamp) { l.Dimming = nil }))),
				asks: []Field{FieldLampDimming}},
		},
		"dimmer_overloaded": {
			// 301 W and 300 W on 300 W; 108 W and 98 W against an LED rating of 100 W.
			{name: "filament lamps above the rating", build: on(leadingDimmer(), of(7, mainsHalogen(43))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "7 × 43 W = 301 W"},
			{name: "filament lamps at the rating", build: on(leadingDimmer(), of(6, mainsHalogen(50)))},
			{name: "LED lamps above the LED rating", build: on(leadingDimmer(), of(15, mainsLED(7.2, bothEdge))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "108.0 %"},
			{name: "LED lamps below the LED rating", build: on(leadingDimmer(), of(14, mainsLED(7, bothEdge)))},
			// 400 W dimmer without an LED rating, 12 × 7 W = 84 W: 10 % is 40 W and fails, 25 % is 100 W and passes.
			{name: "no LED rating, between the two rules of thumb", build: on(with(leadingDimmer(), func(m *loading.Control) { m.MaxLoadW, m.LEDMaxLoadW = some(400.0), nil }), of(12, mainsLED(7, bothEdge))),
				asks: []Field{FieldDimmerLEDMaxLoad}},
			{name: "no LED rating, above both", build: on(with(leadingDimmer(), func(m *loading.Control) { m.MaxLoadW, m.LEDMaxLoadW = some(400.0), nil }), of(15, mainsLED(7, bothEdge))),
				findings: 1, severity: Low, blocks: false, sure: Screening, says: "105 W"},
			{name: "no LED rating, below both", build: on(with(leadingDimmer(), func(m *loading.Control) { m.MaxLoadW, m.LEDMaxLoadW = some(400.0), nil }), of(5, mainsLED(7, bothEdge)))},
			{name: "more lamps than the dimmer states", build: on(with(leadingDimmer(), func(m *loading.Control) { m.LEDMaxCount = some(9) }), of(10, mainsLED(7, bothEdge))),
				findings: 1, severity: High, blocks: true, sure: Recorded, says: "10 lamps against 9 lamps"},
			{name: "as many as it states", build: on(with(leadingDimmer(), func(m *loading.Control) { m.LEDMaxCount = some(10) }), of(10, mainsLED(7, bothEdge)))},
			{name: "repetitive peak above the dimmer's", build: on(with(leadingDimmer(), func(m *loading.Control) { m.RepetitivePeakA = some(3.0) }),
				of(10, with(mainsLED(7, bothEdge), func(l *loading.Lamp) { l.RepetitivePeakA = some(0.31) }))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "3.1 A"},
			{name: "repetitive peak unknown where the dimmer limits it", build: on(with(leadingDimmer(), func(m *loading.Control) { m.RepetitivePeakA = some(3.0) }), of(10, mainsLED(7, bothEdge))),
				asks: []Field{FieldLampPeak}},
			// 4 × 60 W transformers with 50 W each on 250 W R, C: 200/0.95 = 210.5 W, 84 %.
			{name: "trailing edge 250 W with 200 W on transformers", build: func(r *rig) {
				way := r.way(loading.CircuitFacts{})
				d := r.control(trailingDimmer(), way)
				for range 4 {
					r.gear(electronic(60, trailing), way, by(d), of(1, halogen12(50)))
				}
			}},
			{name: "the same, efficiency unknown: even at 0.80 it fits", build: func(r *rig) {
				way := r.way(loading.CircuitFacts{})
				d := r.control(trailingDimmer(), way)
				for range 4 {
					r.gear(with(electronic(60, trailing), func(g *loading.Gear) { g.Efficiency = nil }), way, by(d), of(1, halogen12(50)))
				}
			}},
			// 5 × 50 W: 250 W of lamps and losses pass 250 W at 0.95: 263 W. At an unknown efficiency both ends fail.
			{name: "a fifth transformer", build: func(r *rig) {
				way := r.way(loading.CircuitFacts{})
				d := r.control(trailingDimmer(), way)
				for range 5 {
					r.gear(electronic(60, trailing), way, by(d), of(1, halogen12(50)))
				}
			}, findings: 1, severity: High, blocks: true, sure: Recorded, says: "105.3 %"},
			{name: "a fifth transformer, efficiency unknown", build: func(r *rig) {
				way := r.way(loading.CircuitFacts{})
				d := r.control(trailingDimmer(), way)
				for range 5 {
					r.gear(with(electronic(60, trailing), func(g *loading.Gear) { g.Efficiency = nil }), way, by(d), of(1, halogen12(50)))
				}
			}, findings: 1, severity: High, blocks: false, sure: OnRange},
			// 300 VA L, 250 W on wound transformers at 0.85: 294 VA, 98 %; 260 W: 306 VA.
			{name: "wound transformer, 294 VA of 300", build: gearOn(leadingDimmer(), wound(300), of(5, halogen12(50)))},
			{name: "wound transformer, 306 VA of 300", build: gearOn(leadingDimmer(), wound(300), of(13, halogen12(20))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "305.9"},
			{name: "wound transformer, efficiency unknown: 272 to 313 VA", build: gearOn(leadingDimmer(), with(wound(300), func(g *loading.Gear) { g.Efficiency = nil }), of(5, halogen12(50))),
				asks: []Field{FieldEfficiency}},
			{name: "no rating for wound transformers", build: gearOn(with(leadingDimmer(), func(m *loading.Control) { m.MaxLoadVA, m.Marking = nil, "" }), wound(300), of(2, halogen12(50))),
				asks: []Field{FieldDimmerMaxVA}},
			{name: "lamp power unknown", build: on(leadingDimmer(), of(6, with(mainsHalogen(50), func(l *loading.Lamp) { l.PowerW = nil }))), asks: []Field{FieldLampPower}},
			// 121 W of 24 V strip draw 5.04 A, 120 W 5 A.
			{name: "pulse-width channel above its current", build: gearOn(loading.Control{Kind: loading.PWMDC, ChannelMaxA: some(5.0)}, ledDriver(150, fixed), of(1, strip24(121))),
				findings: 1, severity: High, blocks: true, sure: Recorded, says: "5.042 A"},
			{name: "pulse-width channel at its current", build: gearOn(loading.Control{Kind: loading.PWMDC, ChannelMaxA: some(5.0)}, ledDriver(150, fixed), of(1, strip24(120)))},
			{name: "pulse-width channel unrated", build: gearOn(loading.Control{Kind: loading.PWMDC}, ledDriver(150, fixed), of(1, strip24(120))), asks: []Field{FieldDimmerChannel}},
		},
		"dimmer_underloaded": {
			// Least load 40 W, 3 × 7 W = 21 W.
			{name: "21 W on a minimum of 40 W", build: on(with(leadingDimmer(), func(m *loading.Control) { m.MinLoadW, m.LEDMinLoadW = some(40.0), nil }), of(3, mainsLED(7, bothEdge))),
				findings: 1, severity: Medium, sure: Recorded, says: "21 W < 40 W"},
			{name: "21 W on a minimum of 21 W", build: on(with(leadingDimmer(), func(m *loading.Control) { m.MinLoadW, m.LEDMinLoadW = some(21.0), nil }), of(3, mainsLED(7, bothEdge)))},
			{name: "failed lamps do not count", build: func(r *rig) {
				g := of(3, mainsHalogen(20))
				g.Dark = 2
				on(with(leadingDimmer(), func(m *loading.Control) { m.MinLoadW = some(40.0) }), g)(r)
			}, findings: 1, severity: Medium, sure: Recorded},
			{name: "an LED minimum is what counts for LED lamps", build: on(with(leadingDimmer(), func(m *loading.Control) { m.MinLoadW, m.LEDMinLoadW = some(40.0), some(10.0) }), of(3, mainsLED(7, bothEdge)))},
			{name: "minimum unknown", build: on(with(leadingDimmer(), func(m *loading.Control) { m.MinLoadW, m.LEDMinLoadW = nil, nil }), of(3, mainsLED(7, bothEdge))), asks: []Field{FieldDimmerMinLoad}},
		},
		"dimmer_mixed_loads": {
			{name: "wound and electronic transformers", build: func(r *rig) {
				way := r.way(loading.CircuitFacts{})
				d := r.control(leadingDimmer(), way)
				r.gear(wound(60), way, by(d), of(1, halogen12(35)))
				r.gear(electronic(60, bothEdge), way, by(d), of(1, halogen12(35)))
			}, findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "wound transformers and filament lamps", build: func(r *rig) {
				way := r.way(loading.CircuitFacts{})
				d := r.control(leadingDimmer(), way)
				r.gear(wound(60), way, by(d), of(1, halogen12(35)))
				r.straight(way, by(d), of(1, mainsHalogen(40)))
			}},
			{name: "both kinds on a switch", build: func(r *rig) {
				way := r.way(loading.CircuitFacts{})
				d := r.control(loading.Control{Kind: loading.SwitchContact}, way)
				r.gear(wound(60), way, by(d), of(1, halogen12(35)))
				r.gear(electronic(60, bothEdge), way, by(d), of(1, halogen12(35)))
			}},
		},
		"dimmed_magnetic_transformer_after_retrofit": {
			// 2 × 5 W at 0.85 = 11.8 W.
			{name: "11.8 W on a minimum of 20 W", build: gearOn(leadingDimmer(), wound(60), of(2, led12(5))), findings: 1, severity: Medium, sure: Recorded, says: "11.76 W < 20 W"},
			{name: "halogen lamps keep the load up", build: gearOn(leadingDimmer(), wound(60), of(1, halogen12(35)), of(2, led12(5)))},
			{name: "no LED lamp", build: gearOn(with(leadingDimmer(), func(m *loading.Control) { m.MinLoadW = some(60.0) }), wound(60), of(1, halogen12(35)))},
			{name: "minimum unknown", build: gearOn(with(leadingDimmer(), func(m *loading.Control) { m.MinLoadW = nil }), wound(60), of(2, led12(5))), asks: []Field{FieldDimmerMinLoad}},
		},
		"mains_led_on_unmatched_dimmer": {
			{name: "edge not named", build: on(leadingDimmer(), of(3, mainsLED(7, edgeless))), findings: 1, severity: Medium, sure: Recorded, says: "without naming the edge"},
			{name: "edge named, pair not listed", build: on(leadingDimmer(), of(3, mainsLED(7, leading))), findings: 1, severity: Low, sure: Recorded, says: "nobody lists"},
			{name: "pair listed", build: func(r *rig) {
				on(leadingDimmer(), of(3, mainsLED(7, leading)))(r)
				paired(r, nil, nil)
			}},
			{name: "pair listed for up to two lamps", build: func(r *rig) {
				on(leadingDimmer(), of(3, mainsLED(7, leading)))(r)
				paired(r, some(1), some(2))
			}, findings: 1, severity: Low, sure: Recorded},
			{name: "marking unknown", build: on(leadingDimmer(), of(3, mainsLED(7, nil))), asks: []Field{FieldLampDimming}},
			{name: "on a switch", build: on(loading.Control{Kind: loading.SwitchContact}, of(3, mainsLED(7, edgeless)))},
		},
		"control_signal_mismatch": {
			{name: "DALI gear on a 1-10 V control", build: signal(loading.Control{Kind: loading.Analogue1to10V, AnalogueRole: loading.Sinks}, ledDriver(60, []string{loading.DALI})),
				findings: 1, severity: Medium, sure: Recorded},
			{name: "0-10 V gear on a 1-10 V control", build: signal(loading.Control{Kind: loading.Analogue1to10V, AnalogueRole: loading.Sinks}, analogueGear(loading.Analogue0to10V, loading.Sources)),
				findings: 1, severity: Medium, sure: Recorded},
			{name: "source on a source", build: signal(loading.Control{Kind: loading.Analogue0to10V, AnalogueRole: loading.Sources}, analogueGear(loading.Analogue0to10V, loading.Sources)),
				findings: 1, severity: Medium, sure: Recorded, says: "both drive the control current"},
			{name: "source on a sink", build: signal(loading.Control{Kind: loading.Analogue0to10V, AnalogueRole: loading.Sinks}, analogueGear(loading.Analogue0to10V, loading.Sources))},
			{name: "role of the control unknown", build: signal(loading.Control{Kind: loading.Analogue0to10V}, analogueGear(loading.Analogue0to10V, loading.Sources)), asks: []Field{FieldDimmerRole}},
			{name: "role of the gear unknown", build: signal(loading.Control{Kind: loading.Analogue0to10V, AnalogueRole: loading.Sinks}, analogueGear(loading.Analogue0to10V, "")), asks: []Field{FieldGearRole}},
			{name: "DALI on DALI", build: signal(loading.Control{Kind: loading.DALI}, ledDriver(60, []string{loading.DALI}))},
		},
		"mains_on_control_pair": {
			{name: "mains found", build: func(r *rig) {
				signal(loading.Control{Kind: loading.DALI}, ledDriver(60, []string{loading.DALI}))(r)
				r.Drivers[0].Controls[0].VoltageFound = "mains"
			}, findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "extra-low voltage found", build: func(r *rig) {
				signal(loading.Control{Kind: loading.DALI}, ledDriver(60, []string{loading.DALI}))(r)
				r.Drivers[0].Controls[0].VoltageFound = "elv"
			}},
			{name: "nobody measured", build: signal(loading.Control{Kind: loading.DALI}, ledDriver(60, []string{loading.DALI}))},
		},
	})
}

// signal puts a driver on the pair of a control.
func signal(m loading.Control, g loading.Gear) func(*rig) {
	return func(r *rig) {
		way := r.way(loading.CircuitFacts{})
		r.gear(g, way, over(r.control(m, way)), of(1, strip24(30)))
	}
}

func analogueGear(kind, role string) loading.Gear {
	return with(ledDriver(60, []string{kind}), func(g *loading.Gear) { g.AnalogueRole = role })
}

func TestDimmerPrecedence(t *testing.T) {
	t.Parallel()
	rules := func(build func(*rig)) map[string]int {
		r := newRig()
		build(r)
		n := map[string]int{}
		for _, f := range Check(&r.System).Findings {
			n[f.Rule]++
		}
		return n
	}
	// Not dimmable hides the wrong edge and the unmatched pair on the same lamp; the other lamp keeps its own finding.
	n := rules(on(leadingDimmer(), of(3, mainsLED(7, fixed)), of(1, mainsLED(7, edgeless))))
	if n["not_dimmable_on_dimmer"] != 1 || n["dimmer_wrong_for_gear"] != 0 || n["mains_led_on_unmatched_dimmer"] != 1 {
		t.Errorf("findings %v", n)
	}
	// The wrong edge hides the dimmed transformer, which still hides the dimmer's underload.
	n = rules(gearOn(trailingDimmer(), wound(60), of(2, led12(5))))
	if n["dimmer_wrong_for_gear"] != 1 || n["dimmed_magnetic_transformer_after_retrofit"] != 0 || n["dimmer_underloaded"] != 0 {
		t.Errorf("findings %v", n)
	}
	n = rules(gearOn(leadingDimmer(), wound(60), of(2, led12(5))))
	if n["dimmed_magnetic_transformer_after_retrofit"] != 1 || n["dimmer_underloaded"] != 0 {
		t.Errorf("findings %v", n)
	}
}

func TestGearOfUnknownKindAsksNoMore(t *testing.T) {
	t.Parallel()
	r := newRig()
	gearOn(leadingDimmer(), loading.Gear{}, of(3, led12(5)))(r)
	for _, q := range Check(&r.System).Questions {
		if q.Field != FieldGearKind {
			t.Errorf("asks for %s of a place whose gear kind is unknown", q.Field)
		}
	}
}

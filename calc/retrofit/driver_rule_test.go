package retrofit

import (
	"testing"

	"lampward/calc/loading"
)

// fed puts lamps on gear, in one luminaire, on no known circuit.
func fed(g loading.Gear, lamps ...loading.LampGroup) func(*rig) {
	return func(r *rig) { r.gear(g, -1, nil, lamps...) }
}

// and changes what was built.
func and(build func(*rig), change func(*rig)) func(*rig) {
	return func(r *rig) {
		build(r)
		change(r)
	}
}

// transformer is a plain electronic transformer of maxW, its minimum and LED rating read.
func transformer(maxW, minW float64) loading.Gear {
	return with(electronic(maxW, nil), func(g *loading.Gear) {
		g.MaxLoadVA, g.MinLoadW, g.LEDMaxLoadW = nil, some(minW), some(0.0)
	})
}

func TestDriverLoadRules(t *testing.T) {
	unread := func(g loading.Gear) loading.Gear {
		return with(g, func(g *loading.Gear) { g.MinLoadW = nil })
	}
	noPower := with(halogen12(0), func(m *loading.Lamp) { m.PowerW = nil })
	anyFactor := func(w float64) loading.Lamp { return with(led12(w), func(m *loading.Lamp) { m.PowerFactor = nil }) }
	cable24 := func(maxW float64) loading.Gear { return ledDriver(maxW, nil) }
	runCases(t, map[string][]ruleCase{
		"driver_overloaded": {
			// Worked check 2 of loads: 4 × 50 = 200 W; 200/150 = 133.3 %, above 110 %.
			{name: "200 W on 150 W", build: fed(transformer(150, 50), of(4, halogen12(50))), findings: 1, severity: Danger, blocks: true, sure: Recorded, says: "133.3 %"},
			// 3 × 55 = 165 W = 110.0 % exactly: high, not above the band.
			{name: "110 % exactly", build: fed(transformer(150, 50), of(3, halogen12(55))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "110.0 %"},
			{name: "100 % exactly", build: fed(transformer(150, 50), of(3, halogen12(50)))},
			// Worked check 5: 2 × 35 + 3 × 6 = 88 W = 83.8 %.
			{name: "88 W on 105 W", build: fed(transformer(105, 35), of(2, halogen12(35)), of(3, led12(6)))},
			// Worked check 4: 4 × 5 W at power factor 0.5 = 40 VA on 60 VA, 66.7 %.
			{name: "apparent power within", build: fed(with(wound(60), func(g *loading.Gear) { g.MaxLoadW = nil }), of(4, with(led12(5), func(m *loading.Lamp) { m.PowerFactor = some(0.5) })))},
			// 4 × 8 W / 0.5 = 64 VA on 60 VA = 106.7 %.
			{name: "apparent power above", build: fed(with(wound(60), func(g *loading.Gear) { g.MaxLoadW = nil }), of(4, with(led12(8), func(m *loading.Lamp) { m.PowerFactor = some(0.5) }))),
				findings: 1, severity: High, blocks: true, sure: Recorded, says: "106.7 %"},
			// 4 × 8 W between 32/0.9 = 35.6 and 32/0.5 = 64 VA: 60 lies between.
			{name: "power factor decides", build: fed(with(wound(60), func(g *loading.Gear) { g.MaxLoadW = nil }), of(4, anyFactor(8))), asks: []Field{FieldLampPowerFactor}},
			// 7 × 8 = 56 W, 62.2 to 112 VA on 60 VA: both ends fail, 62.2/60 = 1.04 at the kind one; 56 W alone does not.
			{name: "both ends of the power factor", build: fed(with(wound(60), func(g *loading.Gear) { g.MaxLoadW = nil }), of(7, anyFactor(8))),
				findings: 1, severity: High, blocks: false, sure: OnRange},
			// 12 × 8 = 96 W: above 60 VA whatever the power factor.
			{name: "power alone proves it", build: fed(with(wound(60), func(g *loading.Gear) { g.MaxLoadW = nil }), of(12, anyFactor(8))),
				findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "wound without thermal protection", build: fed(with(wound(60), func(g *loading.Gear) { g.ThermalProtection = some(false) }), of(1, halogen12(62))),
				findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "rating for LED lamps", build: fed(with(transformer(105, 10), func(g *loading.Gear) { g.LEDMaxLoadW = some(30.0) }), of(5, led12(7))),
				findings: 1, severity: Danger, blocks: true, sure: Recorded, says: "it may carry LED lamps up to 30 W"},
			{name: "rating for LED lamps met", build: fed(with(transformer(105, 10), func(g *loading.Gear) { g.LEDMaxLoadW = some(35.0) }), of(5, led12(7)))},
			{name: "count of LED lamps", build: fed(with(transformer(105, 10), func(g *loading.Gear) { g.LEDMaxCount = some(4) }), of(5, led12(3))),
				findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "rating for LED lamps unknown", build: fed(with(transformer(105, 10), func(g *loading.Gear) { g.LEDMaxLoadW = nil }), of(5, led12(7))), asks: []Field{FieldGearLEDMaxLoad}},
			{name: "rating unknown", build: fed(with(transformer(105, 10), func(g *loading.Gear) { g.MaxLoadW = nil }), of(2, halogen12(35))), asks: []Field{FieldGearMaxLoad}},
			{name: "power unknown", build: fed(transformer(105, 10), of(2, halogen12(35)), of(1, noPower)), asks: []Field{FieldLampPower}},
			{name: "what is known is enough", build: fed(transformer(105, 10), of(4, halogen12(35)), of(1, noPower)), findings: 1, severity: Danger, blocks: true, sure: Recorded, says: "at least 140 W"},
			{name: "holders nobody has looked at", build: and(fed(transformer(105, 10), of(1, halogen12(35))), func(r *rig) { r.Fixtures[0].LampsUnknown = true }), asks: []Field{FieldFixtureLamps}},
			{name: "one output of two", build: and(fed(with(cable24(100), func(g *loading.Gear) { g.Outputs, g.OutputMaxW = some(2), some(50.0) }), of(1, strip24(60))), func(r *rig) { r.Fixtures[0].Output = 1 }),
				findings: 1, severity: Danger, blocks: true, sure: Recorded, says: "each of its outputs"},
			{name: "which output is unknown", build: fed(with(cable24(100), func(g *loading.Gear) { g.Outputs, g.OutputMaxW = some(2), some(50.0) }), of(1, strip24(60))), asks: []Field{FieldFixtureOutput}},
			{name: "gear kind unknown", build: fed(loading.Gear{MaxLoadW: some(10.0)}, of(4, halogen12(50))), asks: []Field{FieldGearKind}},
		},
		"driver_underloaded": {
			// 1 × 30 W on a 105 W transformer with a minimum of 35 W.
			{name: "30 W below 35 W", build: fed(transformer(105, 35), of(1, halogen12(30))), findings: 1, severity: Medium, sure: Recorded,
				says: "1 lamp of 30 W loads this 105 W electronic transformer with 30 W; it needs at least 35 W."},
			{name: "at the minimum", build: fed(transformer(105, 35), of(1, halogen12(35)))},
			{name: "failed lamps do not load", build: and(fed(transformer(105, 35), of(2, halogen12(20))), func(r *rig) { r.Fixtures[0].Lamps[0].Dark = 1 }), findings: 1, severity: Medium, sure: Recorded},
			{name: "nothing works", build: and(fed(transformer(105, 35), of(2, halogen12(20))), func(r *rig) { r.Fixtures[0].Lamps[0].Dark = 2 })},
			// 25 % to 40 % of 105 W is 26.25 to 42 W.
			{name: "below the whole range", build: fed(unread(transformer(105, 0)), of(1, halogen12(26))), findings: 1, severity: Medium, sure: OnRange, says: "26.25 to 42 W"},
			{name: "inside the range", build: fed(unread(transformer(105, 0)), of(1, halogen12(35))), asks: []Field{FieldGearMinLoad}},
			{name: "above the whole range", build: fed(unread(transformer(105, 0)), of(1, halogen12(42)))},
			{name: "nothing read", build: fed(with(unread(transformer(105, 0)), func(g *loading.Gear) { g.MaxLoadW = nil }), of(1, halogen12(42))), asks: []Field{FieldGearMinLoad}},
			{name: "power unknown", build: fed(transformer(105, 35), of(1, halogen12(20)), of(1, noPower)), asks: []Field{FieldLampPower}},
			{name: "what is known is enough", build: fed(transformer(105, 35), of(1, halogen12(35)), of(1, noPower))},
			{name: "LED driver that states one", build: fed(with(cable24(60), func(g *loading.Gear) { g.MinLoadW = some(10.0) }), of(1, strip24(9))), findings: 1, severity: Medium, sure: Recorded},
			{name: "LED driver nobody has read", build: fed(unread(cable24(60)), of(1, strip24(9))), asks: []Field{FieldGearMinLoad}},
			{name: "wound transformer has none", build: fed(with(wound(105), func(g *loading.Gear) { g.MinLoadW = nil }), of(1, halogen12(5)))},
			{name: "smallest switched group", build: and(fed(transformer(105, 35), of(1, halogen12(50))), func(r *rig) {
				r.Fixtures[0].SwitchGroup = "a"
				r.Fixtures = append(r.Fixtures, loading.Fixture{Driver: 0, Circuit: -1, FixtureFacts: loading.FixtureFacts{SwitchGroup: "b"}, Lamps: r.keyed([]loading.LampGroup{of(1, halogen12(20))})})
			}), findings: 1, severity: Medium, sure: Recorded, says: "smallest switched group"},
		},
		"driver_underloaded_on_lamp_loss": {
			// Worked check 1: 60 W with a minimum of 20 W, 4 × 5 W: at the minimum; 15 W once one fails.
			{name: "15 W left of 20 W", build: fed(transformer(60, 20), of(4, led12(5))), findings: 1, severity: Medium, sure: Recorded, says: "20 − 5 = 15 W against a minimum of 20 W"},
			{name: "halogen left", build: fed(transformer(60, 20), of(2, halogen12(15))), findings: 1, severity: Low, sure: Recorded},
			// Worked check 5: 88 W, one 35 W halogen lost leaves 53 W.
			{name: "53 W left of 35 W", build: fed(transformer(105, 35), of(2, halogen12(35)), of(3, led12(6)))},
			{name: "left exactly at the minimum", build: fed(transformer(60, 20), of(2, halogen12(20)))},
			{name: "one lamp has nobody to take along", build: fed(transformer(60, 20), of(1, halogen12(20)))},
			// 15 to 24 W needed; 2 × 15 leaves 15.
			{name: "inside the range", build: fed(unread(transformer(60, 0)), of(2, halogen12(15))), asks: []Field{FieldGearMinLoad}},
			// 24.6 to 42 W needed... 2 × 20 of a 100 W unit: 25 to 40 W; 40 W is enough, 20 W never.
			{name: "below the whole range", build: fed(unread(transformer(100, 0)), of(2, halogen12(20))), findings: 1, severity: Low, sure: OnRange},
		},
		"driver_too_hot": {
			{name: "above ta", build: and(fed(with(cable24(60), func(g *loading.Gear) { g.TaC = some(50.0) }), of(1, strip24(30))), func(r *rig) { r.Drivers[0].AirC = some(50.5) }), findings: 1, severity: High, sure: Recorded},
			{name: "at ta", build: and(fed(with(cable24(60), func(g *loading.Gear) { g.TaC = some(50.0) }), of(1, strip24(30))), func(r *rig) { r.Drivers[0].AirC = some(50.0) })},
			// Worked check of derating: ta 50, tc 85, air 40 at 60 % load: 40 + 35 × 0.6 = 61 °C.
			{name: "61 °C of 85 °C", build: and(fed(with(cable24(60), func(g *loading.Gear) { g.TaC, g.TcC = some(50.0), some(85.0) }), of(1, strip24(36))), func(r *rig) { r.Drivers[0].AirC = some(40.0) })},
			// 120 W on 60 W at 40 °C: 40 + 35 × 2 = 110 °C.
			{name: "case above tc", build: and(fed(with(cable24(60), func(g *loading.Gear) { g.TaC, g.TcC = some(50.0), some(85.0) }), of(1, strip24(120))), func(r *rig) { r.Drivers[0].AirC = some(40.0) }),
				findings: 1, severity: High, sure: Recorded, says: "110 °C"},
			// Worked check: 105 W, 100 % at 50 °C to 0 at 70 °C; 60 °C allows 52.5 W.
			{name: "above the curve", build: and(fed(with(transformer(105, 10), func(g *loading.Gear) {
				g.Derating = []loading.CurvePoint{{AirC: 50, SharePct: 100}, {AirC: 70, SharePct: 0}}
			}), of(1, halogen12(53))),
				func(r *rig) { r.Drivers[0].AirC = some(60.0) }), findings: 1, severity: High, sure: Recorded, says: "52.5 W"},
			{name: "on the curve", build: and(fed(with(transformer(105, 10), func(g *loading.Gear) {
				g.Derating = []loading.CurvePoint{{AirC: 50, SharePct: 100}, {AirC: 70, SharePct: 0}}
			}), of(1, halogen12(52.5))),
				func(r *rig) { r.Drivers[0].AirC = some(60.0) })},
			{name: "beyond the curve", build: and(fed(with(transformer(105, 10), func(g *loading.Gear) {
				g.Derating = []loading.CurvePoint{{AirC: 50, SharePct: 100}, {AirC: 60, SharePct: 50}}
			}), of(1, halogen12(20))),
				func(r *rig) { r.Drivers[0].AirC = some(61.0) }), findings: 1, severity: High, sure: Recorded},
			{name: "ta unknown", build: and(fed(cable24(60), of(1, strip24(30))), func(r *rig) { r.Drivers[0].AirC = some(50.0) }), asks: []Field{FieldGearTa}},
			{name: "air unknown, no reason to ask", build: fed(cable24(60), of(1, strip24(30)))},
			{name: "air unknown after a heat failure", build: and(fed(cable24(60), of(1, strip24(30))), func(r *rig) { r.Drivers[0].HeatFailure = true }), asks: []Field{FieldDriverAir}},
			{name: "air unknown, shut in and covered", build: and(fed(with(cable24(60), func(g *loading.Gear) { g.InsulationCovering = some(true) }), of(1, strip24(30))),
				func(r *rig) { r.Drivers[0].InEnclosure, r.Drivers[0].InsulationOver = some(true), some(true) }), asks: []Field{FieldDriverAir}},
		},
		"driver_highly_loaded": {
			{name: "49 W of 60 W", build: proposed(fed(cable24(60), of(1, strip24(49)))), findings: 1, severity: Low, sure: Screening},
			// Worked check 6: 48 W on 60 W is 80.0 %.
			{name: "48 W of 60 W", build: proposed(fed(cable24(60), of(1, strip24(48))))},
			{name: "already fitted", build: fed(cable24(60), of(1, strip24(59)))},
			{name: "overload is another matter", build: proposed(fed(cable24(60), of(1, strip24(61))))},
			{name: "rating unknown", build: proposed(fed(with(cable24(60), func(g *loading.Gear) { g.MaxLoadW = nil }), of(1, strip24(49)))), asks: []Field{FieldGearMaxLoad}},
		},
	})
}

// TestThermalProtectionAsked: a wound transformer slightly overloaded is a danger without thermal protection.
func TestThermalProtectionAsked(t *testing.T) {
	r := newRig()
	fed(with(wound(60), func(g *loading.Gear) { g.ThermalProtection = nil }), of(1, halogen12(62)))(r)
	for _, q := range Check(&r.System).Questions {
		if q.Field == FieldGearThermal {
			if q.Severity != Danger || !q.Blocks {
				t.Errorf("%s, blocks %v", q.Severity, q.Blocks)
			}
			return
		}
	}
	t.Error("did not ask")
}

// TestMaskedUnderload is worked check 5: lose both halogens and 18 W are left of 35 W.
func TestMaskedUnderload(t *testing.T) {
	r := newRig()
	fed(transformer(105, 35), of(2, halogen12(35)), of(3, led12(6)))(r)
	for _, f := range Check(&r.System).Findings {
		if f.Rule == "led_and_halogen_mixed" {
			if want := "when the filament lamps fail, 18 W are left"; !contains(f.Sentence, want) {
				t.Errorf("%q does not say %q", f.Sentence, want)
			}
			return
		}
	}
	t.Error("not found")
}

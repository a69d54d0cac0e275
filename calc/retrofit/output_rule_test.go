package retrofit

import (
	"testing"

	"lampward/calc/loading"
)

// module is a constant-current module with the voltages of worked check 1 of strings: 9.3 V typical, 0.92 of it hot and
// 1.10 of it cold.
func module() loading.Lamp {
	return loading.Lamp{
		Name: "module", Technology: loading.LEDModule, Supply: loading.SupplyConstantCurrent, NominalMA: some(700.0), MaxMA: some(1000.0), PowerW: some(6.5),
		ForwardV: some(9.3), ForwardVHot: some(9.3 * 0.92), ForwardVCold: some(9.3 * 1.10),
	}
}

// currentDriver is its driver: 700 mA, 27 to 54 V.
func currentDriver() loading.Gear {
	return loading.Gear{
		Name: "current driver", Kind: loading.LEDConstantCurrent, OutputForm: loading.OutputDC, OutputMinMA: some(700.0), OutputMaxMA: some(700.0), CurrentTolerance: some(5.0),
		ComplianceMinV: some(27.0), ComplianceMaxV: some(54.0), MaxLoadW: some(40.0), Separation: "selv", InputMinV: some(220.0), InputMaxV: some(240.0), Efficiency: some(0.88),
		PowerFactor: some(0.95), Dimming: fixed, LeakageMA: some(0.3),
	}
}

func TestOutputRules(t *testing.T) {
	dcOnly := func(w float64) loading.Lamp {
		return with(led12(w), func(m *loading.Lamp) { m.Supply = loading.SupplyELVDC })
	}
	silent := func(w float64) loading.Lamp { return with(led12(w), func(m *loading.Lamp) { m.Supply = "" }) }
	v12 := func(w float64) loading.Gear {
		return with(ledDriver(w, fixed), func(g *loading.Gear) { g.OutputV = some(12.0) })
	}
	battery := func(kind string, build func(*rig, int)) func(*rig) {
		return func(r *rig) { build(r, r.way(loading.CircuitFacts{NominalV: some(230.0), CentralBattery: kind})) }
	}
	// Regulation 10 %, load 12 %, worked check 1 of wound transformers: 12 × (1 + 0.1 × 0.88) = 13.056 V.
	reg := func(va float64, pct *float64) loading.Gear {
		return with(wound(va), func(g *loading.Gear) { g.RegulationPct, g.MaxLoadW = pct, nil })
	}
	runCases(t, map[string][]ruleCase{
		"output_voltage_mismatch": {
			// 24 V on a 12 V halogen: (24/12)^1.6 = 3.03 times the power.
			{name: "24 V on 12 V", build: fed(ledDriver(60, fixed), of(1, halogen12(20))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "3.031 times the rated power"},
			{name: "12 V on 24 V", build: fed(v12(60), of(1, strip24(20))), findings: 1, severity: Low, sure: Recorded, says: "dim or dark"},
			{name: "12 V on 12 V", build: fed(v12(60), of(1, halogen12(20)))},
			// 5 % of 24 V is 1.2 V.
			{name: "25.2 V on 24 V", build: fed(with(ledDriver(60, fixed), func(g *loading.Gear) { g.OutputV = some(25.2) }), of(1, strip24(20)))},
			{name: "25.3 V on 24 V", build: fed(with(ledDriver(60, fixed), func(g *loading.Gear) { g.OutputV = some(25.3) }), of(1, strip24(20))), findings: 1, severity: Low, sure: Screening},
			// 1.2 × 12 V = 14.4 V.
			{name: "14.4 V on 12 V", build: fed(with(transformer(60, 0), func(g *loading.Gear) { g.OutputV = some(14.4) }), of(1, halogen12(20)))},
			{name: "14.5 V on 12 V", build: fed(with(transformer(60, 0), func(g *loading.Gear) { g.OutputV = some(14.5) }), of(1, halogen12(20))), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "stated maximum allows it", build: fed(ledDriver(60, fixed), of(1, with(led12(5), func(m *loading.Lamp) { m.MaxV = some(30.0) })))},
			{name: "stated maximum passed", build: fed(ledDriver(60, fixed), of(1, with(led12(5), func(m *loading.Lamp) { m.MaxV = some(23.9) }))), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "output unknown", build: fed(with(v12(60), func(g *loading.Gear) { g.OutputV = nil }), of(1, halogen12(20))), asks: []Field{FieldGearOutputV}},
			{name: "lamp unknown", build: fed(v12(60), of(1, with(halogen12(20), func(m *loading.Lamp) { m.RatedV = nil }))), asks: []Field{FieldLampRatedV}},
			{name: "12 V lamp straight on the mains", build: func(r *rig) { r.straight(-1, nil, of(1, halogen12(20))) }, findings: 1, severity: High, blocks: true, sure: Recorded, says: "straight on 230 V"},
			{name: "mains lamp straight on the mains", build: func(r *rig) { r.straight(-1, nil, of(1, mainsHalogen(20))) }},
			{name: "mains unknown", build: func(r *rig) { r.MainsV = nil; r.straight(-1, nil, of(1, halogen12(20))) }, asks: []Field{FieldCircuitV}},
			{name: "12 V lamp on a ballast", build: fed(loading.Gear{Kind: loading.MagneticBallast}, of(1, led12(7))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "extra-low voltage"},
			{name: "module on a ballast", build: fed(loading.Gear{Kind: loading.ElectronicBallast}, of(1, module())), findings: 1, severity: High, blocks: true, sure: Recorded, says: "a constant current"},
			{name: "lamp for a ballast on a ballast", build: fed(loading.Gear{Kind: loading.MagneticBallast}, of(1, loading.Lamp{Technology: loading.Fluorescent, Supply: loading.SupplyGear}))},
			{name: "lamp for a ballast on 12 V", build: fed(v12(60), of(1, loading.Lamp{Technology: loading.Fluorescent, Supply: loading.SupplyGear})), findings: 1, severity: High, blocks: true, sure: Recorded, says: "a ballast"},
			{name: "mains LED lamp on a ballast", build: fed(loading.Gear{Kind: loading.MagneticBallast}, of(1, mainsLED(9, fixed))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "the mains"},
			{name: "mains LED lamp in a luminaire rewired around its ballast", build: func(r *rig) {
				fed(loading.Gear{Kind: loading.MagneticBallast}, of(1, mainsLED(9, fixed)))(r)
				r.Fixtures[0].Conversion = "gear_bypassed"
			}},
			{name: "LED lamp made for discharge gear", build: fed(loading.Gear{Kind: loading.HIDGearWithIgnitor}, of(1, with(mainsLED(9, fixed), func(m *loading.Lamp) { m.HIDGearCompatible = some(true) })))},
			{name: "tube on a ballast has a rule of its own", build: fed(loading.Gear{Kind: loading.MagneticBallast}, of(1, with(mainsLED(9, fixed), func(m *loading.Lamp) { m.Technology = loading.LEDTube })))},
			{name: "mains LED lamp on an electronic transformer", build: fed(with(transformer(60, 0), func(g *loading.Gear) { g.OutputV = nil }), of(1, mainsLED(9, fixed))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "the mains"},
			// 50 V is the end of extra-low voltage (IEC 61140).
			{name: "mains LED lamp on 50 V", build: fed(with(wound(60), func(g *loading.Gear) { g.OutputV = some(50.0) }), of(1, mainsLED(9, fixed))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "the mains"},
			{name: "120 V lamp on a transformer to 120 V", build: fed(with(wound(60), func(g *loading.Gear) { g.OutputV = some(120.0) }), of(1, with(mainsLED(9, fixed), func(m *loading.Lamp) { m.RatedV = some(120.0) })))},
			{name: "module straight on the circuit", build: func(r *rig) { r.straight(-1, nil, of(1, module())) }, findings: 1, severity: High, blocks: true, sure: Recorded, says: "a constant current"},
			{name: "lamp for a ballast straight on the circuit", build: func(r *rig) {
				r.straight(-1, nil, of(1, loading.Lamp{Technology: loading.Fluorescent, Supply: loading.SupplyGear}))
			}, findings: 1, severity: High, blocks: true, sure: Recorded, says: "a ballast"},
			{name: "12 V lamp proposed straight on a mains nobody named", build: func(r *rig) {
				r.MainsV, r.Proposal = nil, true
				r.straight(-1, nil, of(1, halogen12(20)))
			}, findings: 1, severity: High, blocks: true, sure: Recorded, says: "straight on the mains"},
		},
		"dc_lamp_on_ac": {
			// √2 × 12 − 1.4 = 15.57 V.
			{name: "dc lamp on a wound transformer", build: fed(wound(60), of(2, dcOnly(5))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "15.57 V dc"},
			{name: "ac and dc lamp", build: fed(wound(60), of(2, led12(5)))},
			{name: "dc lamp on dc", build: fed(v12(60), of(2, dcOnly(5)))},
			{name: "supply of the lamp unknown", build: fed(wound(60), of(2, silent(5))), asks: []Field{FieldLampSupply}},
			{name: "filament lamps take both", build: fed(wound(60), of(2, with(halogen12(5), func(m *loading.Lamp) { m.Supply = "" })))},
		},
		"ac_load_on_dc": {
			{name: "ac lamp on dc", build: fed(v12(60), of(2, with(led12(5), func(m *loading.Lamp) { m.Supply = loading.SupplyELVAC }))), findings: 1, severity: Medium, sure: Recorded},
			{name: "ac and dc lamp", build: fed(v12(60), of(2, led12(5)))},
			{name: "supply of the lamp unknown", build: fed(v12(60), of(2, silent(5))), asks: []Field{FieldLampSupply}},
			{name: "gear not for dc on a dc battery", build: battery("dc", func(r *rig, w int) {
				r.gear(with(v12(60), func(g *loading.Gear) { g.InputDC = some(false) }), w, nil, of(2, led12(5)))
			}), findings: 1, severity: Medium, sure: Recorded},
			{name: "gear for dc on a dc battery", build: battery("dc", func(r *rig, w int) {
				r.gear(with(v12(60), func(g *loading.Gear) { g.InputDC = some(true) }), w, nil, of(2, led12(5)))
			})},
			{name: "gear on an ac battery", build: battery("ac", func(r *rig, w int) { r.gear(v12(60), w, nil, of(2, led12(5))) })},
			{name: "dc input unknown", build: battery("dc", func(r *rig, w int) { r.gear(v12(60), w, nil, of(2, led12(5))) }), asks: []Field{FieldGearInputDC}},
			{name: "phase-cut dimmer on a dc battery", build: battery("dc", func(r *rig, w int) {
				d := r.control(loading.Control{Kind: loading.TrailingEdge}, w)
				r.gear(with(v12(60), func(g *loading.Gear) { g.InputDC = some(true) }), w, by(d), of(2, led12(5)))
			}), findings: 1, severity: Medium, sure: Recorded},
			{name: "mains lamp on a dc battery", build: battery("dc", func(r *rig, w int) { r.straight(w, nil, of(1, mainsLED(7, fixed))) }), findings: 1, severity: Medium, sure: Recorded},
			{name: "battery unknown, central emergency", build: battery("", func(r *rig, w int) {
				r.gear(with(v12(60), func(g *loading.Gear) { g.InputDC = some(true) }), w, nil, of(2, led12(5)))
				r.Fixtures[0].EmergencySource = "central"
			}), asks: []Field{FieldCircuitBattery}},
		},
		"wound_transformer_on_dc": {
			{name: "wound on a dc battery", build: battery("dc", func(r *rig, w int) { r.gear(wound(60), w, nil, of(2, halogen12(20))) }), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "wound on an ac battery", build: battery("ac", func(r *rig, w int) { r.gear(wound(60), w, nil, of(2, halogen12(20))) })},
			{name: "electronic on a dc battery", build: battery("dc", func(r *rig, w int) { r.gear(transformer(60, 0), w, nil, of(2, halogen12(20))) })},
			{name: "battery unknown, central emergency", build: battery("", func(r *rig, w int) {
				r.gear(wound(60), w, nil, of(2, halogen12(20)))
				r.Fixtures[0].EmergencySource = "central"
			}), asks: []Field{FieldCircuitBattery}},
			{name: "battery unknown, no emergency lighting", build: battery("", func(r *rig, w int) { r.gear(wound(60), w, nil, of(2, halogen12(20))) })},
		},
		"reversed_polarity": {
			{name: "reversed, no bridge", build: and(fed(ledDriver(60, fixed), of(1, with(strip24(20), func(m *loading.Lamp) { m.Bridge = some(false) }))), func(r *rig) { r.Drivers[0].Polarity = "reversed" }),
				findings: 1, severity: High, sure: Recorded},
			{name: "reversed, bridge", build: and(fed(ledDriver(60, fixed), of(1, with(strip24(20), func(m *loading.Lamp) { m.Bridge = some(true) }))), func(r *rig) { r.Drivers[0].Polarity = "reversed" })},
			{name: "right, no bridge", build: and(fed(ledDriver(60, fixed), of(1, with(strip24(20), func(m *loading.Lamp) { m.Bridge = some(false) }))), func(r *rig) { r.Drivers[0].Polarity = "right" })},
			{name: "reversed, bridge unknown", build: and(fed(ledDriver(60, fixed), of(1, strip24(20))), func(r *rig) { r.Drivers[0].Polarity = "reversed" }), asks: []Field{FieldLampBridge}},
			{name: "reversed, module on a current", build: and(fed(currentDriver(), of(4, module())), func(r *rig) { r.Drivers[0].Polarity = "reversed" }), findings: 1, severity: High, sure: Recorded},
		},
		"current_module_on_voltage_supply": {
			{name: "module on 24 V", build: fed(ledDriver(60, fixed), of(2, module())), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "strip on 24 V", build: fed(ledDriver(60, fixed), of(1, strip24(20)))},
			{name: "kind of module unknown", build: fed(ledDriver(60, fixed), of(1, with(module(), func(m *loading.Lamp) { m.Supply = "" }))), asks: []Field{FieldLampSupply}},
		},
		"voltage_strip_on_current_supply": {
			{name: "strip on 700 mA", build: fed(currentDriver(), of(1, strip24(20))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "54 V against 24 V"},
			{name: "module on 700 mA", build: fed(currentDriver(), of(4, module()))},
			{name: "kind of strip unknown", build: fed(currentDriver(), of(4, with(module(), func(m *loading.Lamp) { m.Supply = "" }))), asks: []Field{FieldLampSupply}},
		},
		"lamp_overvoltage": {
			// Worked check 4 of wound transformers: 100 VA, 10 %, the last 20 W: 12 × (1 + 0.1 × 0.8) = 12.96 V against 12.6 V.
			{name: "last halogen of five", build: and(fed(reg(100, some(10.0)), of(5, halogen12(20))), func(r *rig) { r.Fixtures[0].Lamps[0].Dark = 4 }),
				findings: 1, severity: High, blocks: true, sure: Recorded, says: "12.96 V"},
			// 50 % load: 12 × 1.05 = 12.6 V, the limit.
			{name: "at the limit", build: fed(reg(100, some(10.0)), of(1, halogen12(50)))},
			{name: "just over the limit", build: fed(reg(100, some(10.0)), of(1, halogen12(49))), findings: 1, severity: High, blocks: true, sure: Recorded},
			// 5 % to 20 %: at 50 % load 12.3 to 13.2 V.
			{name: "regulation decides", build: fed(reg(100, nil), of(1, halogen12(50))), asks: []Field{FieldRegulation}},
			// No load voltage 13.2 of 12 V is 10 %.
			{name: "no-load voltage instead", build: fed(with(reg(100, nil), func(g *loading.Gear) { g.NoLoadV = some(13.2) }), of(1, halogen12(50)))},
			// 12.5 V rated, at 10 % load: 12.5 × (1 + 5..20 % × 0.9) = 13.06 to 14.75 V; both above 12.6 V.
			{name: "both ends of the regulation", build: fed(with(reg(100, nil), func(g *loading.Gear) { g.OutputV = some(12.5) }), of(1, halogen12(10))),
				findings: 1, severity: High, blocks: true, sure: OnRange},
			{name: "rating of the transformer unknown", build: fed(with(reg(100, some(10.0)), func(g *loading.Gear) { g.MaxLoadVA = nil }), of(1, halogen12(50))), asks: []Field{FieldGearMaxVA}},
			{name: "rated voltage unknown", build: fed(reg(100, some(10.0)), of(1, with(halogen12(50), func(m *loading.Lamp) { m.RatedV = nil }))), asks: []Field{FieldLampRatedV}},
		},
		"led_overvoltage_on_magnetic_transformer": {
			// Worked check 1: 13.06 V, 1.088 of the rating.
			{name: "13.06 V", build: fed(reg(50, some(10.0)), of(1, with(led12(6), func(m *loading.Lamp) { m.PowerFactor = some(1.0) })))},
			{name: "13.06 V above a stated 13 V", build: fed(reg(50, some(10.0)), of(1, with(led12(6), func(m *loading.Lamp) { m.PowerFactor, m.MaxV = some(1.0), some(13.0) }))),
				findings: 1, severity: Low, sure: Recorded, says: "13.06 V"},
			// Worked check 2: 15 %, load 10 %: 13.62 V, 1.135 of the rating: above 1.10, not above 1.15.
			{name: "13.62 V", build: fed(reg(50, some(15.0)), of(1, with(led12(5), func(m *loading.Lamp) { m.PowerFactor = some(1.0) }))), findings: 1, severity: Low, sure: Screening, says: "13.62 V"},
			// 20 %, load 10 %: 14.16 V, 1.18.
			{name: "14.16 V", build: fed(reg(50, some(20.0)), of(1, with(led12(5), func(m *loading.Lamp) { m.PowerFactor = some(1.0) }))), findings: 1, severity: Medium, blocks: true, sure: Recorded, says: "14.16 V"},
			// 5 % to 20 %, load 10 %: 12.54 to 14.16 V.
			{name: "regulation decides", build: fed(reg(50, nil), of(1, with(led12(5), func(m *loading.Lamp) { m.PowerFactor = some(1.0) }))), asks: []Field{FieldRegulation}},
			{name: "output unknown", build: fed(with(reg(50, some(10.0)), func(g *loading.Gear) { g.OutputV = nil }), of(1, led12(5))), asks: []Field{FieldGearOutputV}},
		},
	})
}

func TestModuleRules(t *testing.T) {
	strings := func(n int, build func(*rig)) func(*rig) {
		return and(build, func(r *rig) { r.Fixtures[0].Strings = some(n) })
	}
	amps := func(mA float64, g loading.Gear) loading.Gear {
		return with(g, func(g *loading.Gear) { g.OutputMinMA, g.OutputMaxMA = some(mA), some(mA) })
	}
	limit := func(mA float64) loading.Lamp {
		return with(module(), func(m *loading.Lamp) { m.MaxMA, m.NominalMA = some(mA), some(mA) })
	}
	runCases(t, map[string][]ruleCase{
		"module_overcurrent": {
			// 700 mA × 1.05 = 735 mA.
			{name: "735 mA on 730 mA", build: strings(1, fed(currentDriver(), of(4, limit(730)))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "735 mA"},
			{name: "735 mA on 735 mA", build: strings(1, fed(currentDriver(), of(4, limit(735))))},
			// 735/490 = 150 % exactly is high, 735/480 = 153 % danger.
			{name: "150 %", build: strings(1, fed(currentDriver(), of(4, limit(490)))), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "153 %", build: strings(1, fed(currentDriver(), of(4, limit(480)))), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "set on the driver", build: strings(1, and(fed(with(currentDriver(), func(g *loading.Gear) { g.OutputMinMA, g.OutputMaxMA = some(250.0), some(1050.0) }), of(4, limit(735))), func(r *rig) { r.Drivers[0].SetMA = some(700.0) }))},
			{name: "setting decides", build: strings(1, fed(with(currentDriver(), func(g *loading.Gear) { g.OutputMinMA, g.OutputMaxMA = some(250.0), some(1050.0) }), of(4, limit(735)))), asks: []Field{FieldDriverSetMA}},
			// 700 mA × 1.00 to 1.10 against 750 mA.
			{name: "tolerance decides", build: strings(1, fed(with(currentDriver(), func(g *loading.Gear) { g.CurrentTolerance = nil }), of(4, limit(750)))), asks: []Field{FieldCurrentTolerance}},
			{name: "fails without tolerance", build: strings(1, fed(with(currentDriver(), func(g *loading.Gear) { g.CurrentTolerance = nil }), of(4, limit(650)))), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "maximum unknown", build: strings(1, fed(currentDriver(), of(4, with(module(), func(m *loading.Lamp) { m.MaxMA = nil })))), asks: []Field{FieldLampMaxMA}},
			{name: "strings decide", build: fed(currentDriver(), of(4, limit(500))), asks: []Field{FieldFixtureStrings}},
			{name: "two strings share", build: strings(2, fed(currentDriver(), of(4, limit(500))))},
			{name: "current unknown", build: strings(1, fed(with(currentDriver(), func(g *loading.Gear) { g.OutputMinMA, g.OutputMaxMA = nil, nil }), of(4, limit(735)))), asks: []Field{FieldGearOutputMA}},
		},
		"module_undercurrent": {
			// 90 % of 700 mA is 630 mA.
			{name: "629 mA", build: strings(1, fed(amps(629, currentDriver()), of(4, module()))), findings: 1, severity: Low, sure: Recorded},
			{name: "630 mA", build: strings(1, fed(amps(630, currentDriver()), of(4, module())))},
			{name: "nominal unknown", build: strings(1, fed(currentDriver(), of(4, with(module(), func(m *loading.Lamp) { m.NominalMA = nil })))), asks: []Field{FieldLampNominalMA}},
		},
		"string_above_voltage_window": {
			// Worked check 1: 5 modules 5 × 10.23 = 51.15 V of 54 V; 6 modules 61.38 V.
			{name: "6 modules", build: strings(1, fed(currentDriver(), of(6, module()))), findings: 1, severity: Medium, blocks: true, sure: Recorded, says: "61.38 V"},
			{name: "5 modules", build: strings(1, fed(currentDriver(), of(5, module())))},
			// Only the typical voltage: 5 × 9.3 × 0.972 to 1.188 is 45.2 to 55.2 V.
			{name: "cold voltage decides", build: strings(1, fed(currentDriver(), of(5, with(module(), func(m *loading.Lamp) { m.ForwardVCold = nil })))), asks: []Field{FieldForwardVCold}},
			// 6: 54.24 V at the lower end.
			{name: "both ends", build: strings(1, fed(currentDriver(), of(6, with(module(), func(m *loading.Lamp) { m.ForwardVCold = nil })))), findings: 1, severity: Medium, blocks: false, sure: OnRange},
			// 9 × 9.3 × 0.972 = 81.36 V, 1.507 times 54 V.
			{name: "both ends by half", build: strings(1, fed(currentDriver(), of(9, with(module(), func(m *loading.Lamp) { m.ForwardVCold = nil })))), findings: 1, severity: Medium, blocks: true, sure: OnRange},
			{name: "two strings of three", build: strings(2, fed(currentDriver(), of(6, module())))},
			{name: "strings decide", build: fed(currentDriver(), of(6, module())), asks: []Field{FieldFixtureStrings}},
			{name: "window unknown", build: strings(1, fed(with(currentDriver(), func(g *loading.Gear) { g.ComplianceMaxV = nil }), of(5, module()))), asks: []Field{FieldComplianceMax}},
			{name: "each output by itself", build: strings(1, and(fed(with(currentDriver(), func(g *loading.Gear) { g.Outputs = some(2) }), of(5, module())), func(r *rig) {
				second := r.Fixtures[0]
				r.Fixtures[0].Output, second.Output = 1, 2
				r.Fixtures = append(r.Fixtures, second)
			}))},
			{name: "which output is unknown", build: strings(1, fed(with(currentDriver(), func(g *loading.Gear) { g.Outputs = some(2) }), of(5, module()))), asks: []Field{FieldFixtureOutput}},
		},
		"string_below_voltage_window": {
			// Worked check 5: 3 modules are 27.9 V nominal, 25.67 V hot, below 27 V.
			{name: "3 modules", build: strings(1, fed(currentDriver(), of(3, module()))), findings: 1, severity: Medium, sure: Recorded, says: "25.67 V"},
			// 4 × 8.556 = 34.22 V.
			{name: "4 modules", build: strings(1, fed(currentDriver(), of(4, module())))},
			{name: "hot voltage decides", build: strings(1, fed(currentDriver(), of(3, with(module(), func(m *loading.Lamp) { m.ForwardVHot = nil })))), asks: []Field{FieldForwardVHot}},
			{name: "window unknown", build: strings(1, fed(with(currentDriver(), func(g *loading.Gear) { g.ComplianceMinV = nil }), of(4, module()))), asks: []Field{FieldComplianceMin}},
		},
		"string_over_driver_power": {
			// Worked check 2: 5 × 9.3 V × 0.7 A = 32.55 W nominal; with a bin of 5 % 34.18 W: a 35 W driver passes.
			{name: "5 modules on 35 W", build: strings(1, fed(with(currentDriver(), func(g *loading.Gear) { g.MaxLoadW = some(35.0) }), of(5, module())))},
			{name: "5 modules on 34 W", build: strings(1, fed(with(currentDriver(), func(g *loading.Gear) { g.MaxLoadW = some(34.0) }), of(5, module()))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "34.18 W"},
			{name: "maximum unknown", build: strings(1, fed(with(currentDriver(), func(g *loading.Gear) { g.MaxLoadW = nil }), of(5, module()))), asks: []Field{FieldGearMaxLoad}},
			{name: "voltage unknown", build: strings(1, fed(currentDriver(), of(5, with(module(), func(m *loading.Lamp) { m.ForwardV = nil })))), asks: []Field{FieldForwardV}},
		},
		"parallel_string_cascade": {
			// Worked check 4: 4 strings of 350 mA on 1400 mA; 466.7 mA each once one opens, 133 %.
			{name: "466.7 mA", build: strings(4, fed(amps(1400, currentDriver()), of(16, limit(350)))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "133.3 %"},
			{name: "modules for 467 mA", build: strings(4, fed(amps(1400, currentDriver()), of(16, limit(467))))},
			{name: "one string", build: strings(1, fed(amps(1400, currentDriver()), of(16, limit(350))))},
			{name: "strings unknown", build: fed(amps(1400, currentDriver()), of(16, limit(350))), asks: []Field{FieldFixtureStrings}},
			{name: "one string could carry it all", build: fed(amps(350, currentDriver()), of(16, limit(350)))},
		},
	})
}

func TestCableRules(t *testing.T) {
	run := func(build func(*rig), m, mm2 float64, class string) func(*rig) {
		return and(build, func(r *rig) {
			d := &r.Drivers[0]
			d.CableM, d.CableMM2, d.CableClass = some(m), some(mm2), class
		})
	}
	twelve := func(w float64) loading.Gear {
		return with(transformer(w, 0), func(g *loading.Gear) { g.OutputV = some(12.0) })
	}
	rated := func(build func(*rig), cable, terminal *float64) func(*rig) {
		return and(build, func(r *rig) { r.Drivers[0].CableRatedA, r.Drivers[0].TerminalRatedA = cable, terminal })
	}
	runCases(t, map[string][]ruleCase{
		"output_voltage_drop": {
			// Worked check 1 of drops: 50 W, 12 V, 2 m of 1.5 mm² class 5: 0.222 V, 1.85 %.
			{name: "1.85 %", build: run(fed(twelve(60), of(1, halogen12(50))), 2, 1.5, "5")},
			// Worked check 3 at 60 °C: 200 W, 10 m, 10 mm²: 0.737 V, 6.14 %.
			{name: "6.14 %", build: and(run(fed(twelve(250), of(4, halogen12(50))), 10, 10, "5"), func(r *rig) { r.Drivers[0].AirC = some(60.0); r.Drivers[0].Model.TaC = some(60.0) }),
				findings: 1, severity: Medium, sure: Recorded, says: "6.1 %"},
			// Worked check 4 at 40 °C: 60 W, 24 V, 15 m of 1.5 mm²: 1.076 V, 4.48 %.
			{name: "4.48 %", build: and(run(fed(ledDriver(60, fixed), of(1, strip24(60))), 15, 1.5, "5"), func(r *rig) { r.Drivers[0].AirC = some(40.0); r.Drivers[0].Model.TaC = some(60.0) })},
			// Worked check 6, half as long again: 3 × 20 W at 3, 6, 9 m of 2.5 mm²: 1.5 × 0.319 = 0.479 V, 3.99 %; with all of it
			// at the end 2 × 9 × 5 × 0.00798 = 0.718 V, 5.99 %.
			{name: "taps", build: and(run(fed(twelve(60), of(3, halogen12(20))), 9, 2.5, "5"), func(r *rig) { r.Drivers[0].CableTapsM = []float64{3, 6, 9} })},
			{name: "no taps", build: run(fed(twelve(60), of(3, halogen12(20))), 9, 2.5, "5"), findings: 1, severity: Medium, sure: Recorded, says: "6.0 %"},
			// 12.1 and 13.3 Ω/km: 60 W at 12 V is 5 A; at 4.7 m 0.569 and 0.625 V about 0.6 V.
			{name: "class decides", build: run(fed(twelve(60), of(1, halogen12(60))), 4.7, 1.5, ""), asks: []Field{FieldDriverCableClass}},
			{name: "length and section unknown", build: fed(twelve(60), of(1, halogen12(50))), asks: []Field{FieldDriverCable, FieldDriverCableMM2}},
			{name: "inside a luminaire", build: and(fed(twelve(60), of(1, halogen12(50))), func(r *rig) { r.Drivers[0].Integral = true })},
			{name: "a section no table has", build: run(fed(twelve(60), of(1, halogen12(50))), 2, 1.7, "5"), asks: []Field{FieldDriverCableMM2}},
		},
		"high_frequency_lead_too_long": {
			{name: "2.1 m, nothing marked", build: run(fed(twelve(60), of(1, halogen12(50))), 2.1, 1.5, "5"), findings: 1, severity: Low, sure: Screening},
			{name: "2 m, nothing marked", build: run(fed(twelve(60), of(1, halogen12(50))), 2, 1.5, "5")},
			{name: "4 m of 4 m marked", build: run(fed(with(twelve(60), func(g *loading.Gear) { g.OutputLeadM = some(4.0) }), of(1, halogen12(50))), 4, 2.5, "5")},
			{name: "4.1 m of 4 m marked", build: run(fed(with(twelve(60), func(g *loading.Gear) { g.OutputLeadM = some(4.0) }), of(1, halogen12(50))), 4.1, 2.5, "5"), findings: 1, severity: Medium, sure: Recorded},
			{name: "length unknown", build: fed(twelve(60), of(1, halogen12(50))), asks: []Field{FieldDriverCable}},
			{name: "a wound transformer", build: run(fed(wound(60), of(1, halogen12(50))), 9, 6, "5")},
		},
		"output_cable_overloaded": {
			// 100 W at 12 V is 8.33 A.
			{name: "8.33 A on 8 A", build: rated(fed(twelve(105), of(2, halogen12(50))), some(8.0), some(10.0)), findings: 1, severity: Danger, blocks: true, sure: Recorded, says: "8.333 A"},
			{name: "8.33 A on 10 A", build: rated(fed(twelve(105), of(2, halogen12(50))), some(10.0), some(10.0))},
			{name: "terminals", build: rated(fed(twelve(105), of(2, halogen12(50))), some(10.0), some(8.0)), findings: 1, severity: Danger, blocks: true, sure: Recorded, says: "its terminals"},
			{name: "rating unknown", build: fed(twelve(105), of(2, halogen12(50))), asks: []Field{FieldDriverCableA}},
			// 72 W at 12 V is 6 A, which any cable carries.
			{name: "6 A needs no reading", build: fed(twelve(105), of(1, halogen12(72)))},
			// 25 A at 12 V is 300 W.
			{name: "301 W under NFPA 70", build: nfpa(rated(fed(twelve(400), of(1, halogen12(301))), some(40.0), some(40.0))), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "300 W under NFPA 70", build: nfpa(rated(fed(twelve(400), of(1, halogen12(300))), some(40.0), some(40.0)))},
			{name: "301 W elsewhere", build: rated(fed(twelve(400), of(1, halogen12(301))), some(40.0), some(40.0))},
		},
	})
}

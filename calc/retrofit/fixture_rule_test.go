package retrofit

import (
	"testing"

	"lampward/calc/loading"
)

// hang puts lamps straight on a circuit in a luminaire of a model.
func hang(m loading.Fitting, lamps ...loading.LampGroup) func(*rig) {
	return func(r *rig) {
		i := r.straight(-1, nil, lamps...)
		m.Key = r.key()
		r.Fixtures[i].Model = &m
	}
}

// seen changes what was seen of the first luminaire.
func seen(build func(*rig), change func(*loading.FixtureFacts)) func(*rig) {
	return and(build, func(r *rig) { change(&r.Fixtures[0].FixtureFacts) })
}

// downlight is a plain luminaire of which everything is known.
func downlight() loading.Fitting {
	return loading.Fitting{Name: "downlight", Holders: some(1), Gear: "none", MaxLampW: some(50.0), Class: "II", IP: "IP20", Enclosed: some(false), FireRated: some(false),
		InsulationRated: some(false), Discharge: some(false), Emergency: some(false)}
}

func TestLEDTransformerRules(t *testing.T) {
	dcOnly := func(w float64) loading.Lamp {
		return with(led12(w), func(m *loading.Lamp) { m.Supply = loading.SupplyELVDC })
	}
	hours := func(h float64, build func(*rig)) func(*rig) {
		return and(build, func(r *rig) { r.Fixtures[0].Lamps[0].HoursFitted = some(h) })
	}
	unfit := with(led12(7), func(m *loading.Lamp) { m.HighFrequency = some(false) })
	suits := with(led12(7), func(m *loading.Lamp) { m.HighFrequency = some(true) })
	paired := func(p loading.Pairing, build func(*rig)) func(*rig) {
		return and(build, func(r *rig) {
			r.Pairings = map[loading.PairingKey]loading.Pairing{{Lamp: r.Fixtures[0].Lamps[0].Model.Key, Gear: r.Drivers[0].Model.Key}: p}
		})
	}
	runCases(t, map[string][]ruleCase{
		"dc_led_on_electronic_transformer": {
			{name: "dc only", build: fed(transformer(60, 5), of(3, dcOnly(7))), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "ac and dc", build: fed(transformer(60, 5), of(3, led12(7)))},
			{name: "dc only on a dc driver", build: fed(with(ledDriver(60, fixed), func(g *loading.Gear) { g.OutputV = some(12.0) }), of(3, dcOnly(7)))},
			{name: "supply unknown", build: fed(transformer(60, 5), of(3, with(led12(7), func(m *loading.Lamp) { m.Supply = "" }))), asks: []Field{FieldLampSupply}},
		},
		"led_on_electronic_transformer": {
			{name: "stated unsuitable", build: fed(transformer(60, 5), of(3, unfit)), findings: 1, severity: High, blocks: true, sure: Recorded, says: "stated unsuitable"},
			{name: "nothing stated", build: fed(transformer(60, 5), of(3, led12(7))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "nothing says"},
			// 2√2 × 11.8 = 33.37 V peak to peak, the clean floor.
			{name: "the floor is shown", build: fed(transformer(60, 5), of(3, led12(7))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "33.38 V peak to peak, plus ringing"},
			{name: "proven in service", build: hours(2001, fed(transformer(60, 5), of(3, led12(7)))), findings: 1, severity: Medium, sure: Recorded, says: "more than 2,000 h"},
			{name: "2,000 h exactly proves nothing", build: hours(2000, fed(transformer(60, 5), of(3, led12(7)))), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "a failure is on record", build: and(hours(2001, fed(transformer(60, 5), of(3, led12(7)))), func(r *rig) { r.Fixtures[0].Lamps[0].FailureKnown = true }), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "stated unsuitable, whatever the hours", build: hours(9000, fed(transformer(60, 5), of(3, unfit))), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "stated suitable, pair not listed", build: fed(transformer(60, 5), of(3, suits)), findings: 1, severity: Low, sure: Recorded},
			{name: "listed", build: paired(loading.Pairing{}, fed(transformer(60, 5), of(3, unfit)))},
			{name: "listed for up to three", build: paired(loading.Pairing{MostLamps: some(3)}, fed(transformer(60, 5), of(3, unfit)))},
			{name: "listed for up to two", build: paired(loading.Pairing{MostLamps: some(2)}, fed(transformer(60, 5), of(3, unfit))), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "listed with another dimmer", build: and(fed(transformer(60, 5), of(3, unfit)), func(r *rig) {
				r.Drivers[0].Controls = by(r.control(loading.Control{Kind: loading.TrailingEdge}, -1))
				r.Pairings = map[loading.PairingKey]loading.Pairing{{Lamp: r.Fixtures[0].Lamps[0].Model.Key, Gear: r.Drivers[0].Model.Key, Control: r.key()}: {}}
			}), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "listed with this dimmer", build: and(fed(transformer(60, 5), of(3, unfit)), func(r *rig) {
				n := r.control(loading.Control{Kind: loading.TrailingEdge}, -1)
				r.Drivers[0].Controls = by(n)
				r.Pairings = map[loading.PairingKey]loading.Pairing{{Lamp: r.Fixtures[0].Lamps[0].Model.Key, Gear: r.Drivers[0].Model.Key, Control: r.Dimmers[n].Model.Key}: {}}
			})},
			{name: "halogen is what it was made for", build: fed(transformer(60, 5), of(3, halogen12(20)))},
		},
		"led_underloads_electronic_transformer": {
			// Worked check 3 of loads: 1 × 7 W on 105 W with a minimum of 35 W.
			{name: "7 W of 35 W", build: fed(transformer(105, 35), of(1, led12(7))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "7 W < 35 W"},
			{name: "at the minimum", build: fed(transformer(105, 35), of(5, led12(7)))},
			{name: "21 W of 35 W", build: fed(transformer(105, 35), of(3, led12(7))), findings: 1, severity: High, blocks: true, sure: Recorded,
				says: "3 lamps of 7 W load this 105 W electronic transformer with 21 W; it needs at least 35 W."},
			// 26.25 to 42 W needed; 21 W is short by 1.25, 17 W by 1.54 even at the kind end.
			{name: "below the whole range", build: fed(with(transformer(105, 0), func(g *loading.Gear) { g.MinLoadW = nil }), of(3, led12(7))), findings: 1, severity: High, blocks: false, sure: OnRange},
			{name: "below the whole range by half", build: fed(with(transformer(105, 0), func(g *loading.Gear) { g.MinLoadW = nil }), of(1, led12(17))), findings: 1, severity: High, blocks: true, sure: OnRange},
			// 1.5 times exactly: 26.25/17.5.
			{name: "below by half exactly", build: fed(with(transformer(105, 0), func(g *loading.Gear) { g.MinLoadW = nil }), of(1, led12(17.5))), findings: 1, severity: High, blocks: true, sure: OnRange},
			{name: "inside the range", build: fed(with(transformer(105, 0), func(g *loading.Gear) { g.MinLoadW = nil }), of(5, led12(7))), asks: []Field{FieldGearMinLoad}},
			{name: "fewer than the pairing's least", build: paired(loading.Pairing{LeastLamps: some(4)}, fed(transformer(60, 5), of(3, led12(7)))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "at least 4 lamps"},
			{name: "the pairing's least", build: paired(loading.Pairing{LeastLamps: some(3)}, fed(transformer(60, 5), of(3, led12(7))))},
			{name: "halogen alone", build: fed(transformer(105, 35), of(1, halogen12(20)))},
		},
		"led_and_halogen_mixed": {
			{name: "mixed", build: fed(transformer(105, 35), of(2, halogen12(35)), of(3, led12(6))), findings: 1, severity: Medium, sure: Recorded, says: "18 W against a minimum of 35 W"},
			{name: "LED alone", build: fed(transformer(105, 35), of(6, led12(6)))},
			{name: "mixed on a wound one", build: fed(wound(105), of(2, halogen12(35)), of(3, led12(6)))},
		},
	})
}

func TestFittingRules(t *testing.T) {
	lamp := func(suits *bool) loading.Lamp {
		return with(mainsLED(7, fixed), func(m *loading.Lamp) { m.SuitableEnclosed = suits })
	}
	closed := with(downlight(), func(m *loading.Fitting) { m.Enclosed = some(true) })
	labelled := func(w float64) loading.Fitting {
		return with(downlight(), func(m *loading.Fitting) { m.MaxLampW = some(w) })
	}
	runCases(t, map[string][]ruleCase{
		"exposed_live_parts": {
			{name: "touchable", build: seen(hang(downlight(), of(1, mainsHalogen(20))), func(f *loading.FixtureFacts) { f.TouchableLive = some(true) }), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "looked, not touchable", build: seen(hang(downlight(), of(1, mainsHalogen(20))), func(f *loading.FixtureFacts) { f.TouchableLive = some(false) })},
			{name: "no approval", build: hang(downlight(), of(1, with(lamp(yes()), func(m *loading.Lamp) { m.Approval = some(false) }))), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "approved", build: hang(downlight(), of(1, lamp(yes())))},
			{name: "approval unknown", build: hang(downlight(), of(1, with(lamp(yes()), func(m *loading.Lamp) { m.Approval = nil }))), asks: []Field{FieldLampApproval}},
			{name: "touchable output without separation", build: and(fed(with(ledDriver(60, fixed), func(g *loading.Gear) { g.Separation = "none" }), of(1, strip24(20))), func(r *rig) { r.Drivers[0].TouchableLive = some(true) }),
				findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "touchable SELV output", build: and(fed(ledDriver(60, fixed), of(1, strip24(20))), func(r *rig) { r.Drivers[0].TouchableLive = some(true) })},
			{name: "touchable output, separation unknown", build: and(fed(with(ledDriver(60, fixed), func(g *loading.Gear) { g.Separation = "" }), of(1, strip24(20))), func(r *rig) { r.Drivers[0].TouchableLive = some(true) }),
				asks: []Field{FieldGearSeparation}},
		},
		"enclosed_fitting_lamp_not_rated": {
			{name: "marked against it", build: hang(closed, of(1, lamp(no()))), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "silent", build: hang(closed, of(1, lamp(nil))), findings: 1, severity: Medium, sure: Recorded},
			{name: "marked for it", build: hang(closed, of(1, lamp(yes())))},
			{name: "open luminaire", build: hang(downlight(), of(1, lamp(no())))},
			{name: "fire rated", build: hang(with(downlight(), func(m *loading.Fitting) { m.FireRated = some(true) }), of(1, lamp(no()))), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "shut in on site", build: seen(hang(downlight(), of(1, lamp(no()))), func(f *loading.FixtureFacts) { f.InEnclosure = some(true) }), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "halogen", build: hang(closed, of(1, mainsHalogen(20)))},
			{name: "luminaire unknown, lamp marked against it", build: hang(with(downlight(), func(m *loading.Fitting) { m.Enclosed = nil }), of(1, lamp(no()))), asks: []Field{FieldFittingEnclosed}},
			{name: "luminaire unknown, lamp silent", build: hang(with(downlight(), func(m *loading.Fitting) { m.Enclosed = nil }), of(1, lamp(nil))), asks: []Field{FieldLampEnclosed}},
		},
		"fitting_over_max_lamp_power": {
			{name: "50 W halogen in 40 W", build: hang(labelled(40), of(1, mainsHalogen(50))), findings: 1, severity: Danger, blocks: true, sure: Recorded, says: "125.0 %"},
			{name: "50 W in 50 W", build: hang(labelled(50), of(1, mainsHalogen(50)))},
			{name: "7 W LED in 6 W", build: hang(labelled(6), of(1, lamp(yes()))), findings: 1, severity: Medium, blocks: true, sure: Recorded},
			{name: "7 W LED in 7 W", build: hang(labelled(7), of(1, lamp(yes())))},
			{name: "label unknown", build: hang(with(downlight(), func(m *loading.Fitting) { m.MaxLampW = nil }), of(1, mainsHalogen(50))), asks: []Field{FieldFittingMaxW}},
			{name: "luminaire unknown", build: func(r *rig) { r.straight(-1, nil, of(1, mainsHalogen(50))) }, asks: []Field{FieldFixtureModel}},
			{name: "power unknown", build: hang(labelled(40), of(1, with(mainsHalogen(50), func(m *loading.Lamp) { m.PowerW = nil }))), asks: []Field{FieldLampPower}},
		},
		"insulation_over_gear": {
			{name: "over a halogen downlight", build: seen(hang(downlight(), of(1, mainsHalogen(20))), func(f *loading.FixtureFacts) { f.InsulationOver = some(true) }), findings: 1, severity: Danger, sure: Recorded},
			{name: "over an LED downlight", build: seen(hang(downlight(), of(1, lamp(yes()))), func(f *loading.FixtureFacts) { f.InsulationOver = some(true) }), findings: 1, severity: High, sure: Recorded},
			{name: "over one made for it", build: seen(hang(with(downlight(), func(m *loading.Fitting) { m.InsulationRated = some(true) }), of(1, lamp(yes()))), func(f *loading.FixtureFacts) { f.InsulationOver = some(true) })},
			{name: "none over it", build: seen(hang(downlight(), of(1, mainsHalogen(20))), func(f *loading.FixtureFacts) { f.InsulationOver = some(false) })},
			{name: "over a wound transformer", build: and(fed(wound(60), of(1, halogen12(20))), func(r *rig) { r.Drivers[0].InsulationOver = some(true) }), findings: 1, severity: Danger, sure: Recorded},
			{name: "over an LED driver", build: and(fed(ledDriver(60, fixed), of(1, strip24(20))), func(r *rig) { r.Drivers[0].InsulationOver = some(true) }), findings: 1, severity: High, sure: Recorded},
			{name: "over a driver made for it", build: and(fed(with(ledDriver(60, fixed), func(g *loading.Gear) { g.InsulationCovering = some(true) }), of(1, strip24(20))), func(r *rig) { r.Drivers[0].InsulationOver = some(true) })},
			{name: "over a luminaire nobody knows", build: seen(func(r *rig) { r.straight(-1, nil, of(1, lamp(yes()))) }, func(f *loading.FixtureFacts) { f.InsulationOver = some(true) }), asks: []Field{FieldFixtureModel}},
		},
	})
}

// ballast is a ballast for one 58 W lamp.
func ballast(kind string) loading.Gear {
	return loading.Gear{Name: "ballast", Kind: kind, MaxLoadW: some(58.0), InputMinV: some(220.0), InputMaxV: some(240.0), Separation: "none", LeakageMA: some(0.5), Dimming: fixed,
		Efficiency: some(0.85), PowerFactor: some(0.5)}
}

func TestTubeRules(t *testing.T) {
	tube := func(wiring string) loading.Lamp {
		return loading.Lamp{Name: "tube", Technology: loading.LEDTube, TubeWiring: wiring, PowerW: some(20.0), Approval: some(true), Supply: loading.SupplyMainsAC, RatedV: some(230.0), PowerFactor: some(0.9)}
	}
	lamp := loading.Lamp{Name: "fluorescent", Technology: loading.Fluorescent, Supply: loading.SupplyGear, PowerW: some(58.0)}
	batten := with(downlight(), func(m *loading.Fitting) { m.Gear, m.Shunted = "", some(false) })
	shunted := with(batten, func(m *loading.Fitting) { m.Shunted = some(true) })
	facts := func(conversion, ends string, build func(*rig)) func(*rig) {
		return seen(build, func(f *loading.FixtureFacts) { f.Conversion, f.FedEnds = conversion, ends })
	}
	onBallast := func(kind string, l loading.Lamp) func(*rig) {
		return and(fed(ballast(kind), of(1, l)), func(r *rig) { r.Fixtures[0].Starter = "dummy" })
	}
	listedWith := func(other bool, build func(*rig)) func(*rig) {
		return and(build, func(r *rig) {
			gear := r.Drivers[0].Model.Key
			if other {
				gear = r.key()
			}
			r.Pairings = map[loading.PairingKey]loading.Pairing{{Lamp: r.Fixtures[0].Lamps[0].Model.Key, Gear: gear}: {}}
		})
	}
	papers := func(label, paper *bool, build func(*rig)) func(*rig) {
		return seen(build, func(f *loading.FixtureFacts) {
			f.Conversion, f.FedEnds, f.ConversionLabel, f.ConversionPaper = "gear_removed", "one", label, paper
		})
	}
	runCases(t, map[string][]ruleCase{
		"single_ended_tube_in_shunted_holders": {
			{name: "joined contacts", build: facts("gear_removed", "one", hang(shunted, of(2, tube("single_ended")))), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "separate contacts", build: facts("gear_removed", "one", hang(batten, of(2, tube("single_ended"))))},
			{name: "seen here otherwise", build: seen(facts("gear_removed", "one", hang(shunted, of(2, tube("single_ended")))), func(f *loading.FixtureFacts) { f.Shunted = some(false) })},
			{name: "fed at both ends", build: facts("gear_removed", "both", hang(shunted, of(2, tube("double_ended"))))},
			{name: "holders unknown", build: facts("gear_removed", "one", hang(with(batten, func(m *loading.Fitting) { m.Shunted = nil }), of(2, tube("single_ended")))), asks: []Field{FieldFittingShunted}},
			{name: "luminaire unknown", build: facts("gear_removed", "one", func(r *rig) { r.straight(-1, nil, of(2, tube("single_ended"))) }), asks: []Field{FieldFixtureShunted}},
			{name: "no such tube, nothing asked", build: facts("gear_removed", "both", hang(with(batten, func(m *loading.Fitting) { m.Shunted = nil }), of(2, tube("double_ended"))))},
		},
		"tube_wiring_differs": {
			{name: "one-ended tube, both ends live", build: facts("gear_removed", "both", hang(batten, of(2, tube("single_ended")))), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "one-ended tube, one end live", build: facts("gear_removed", "one", hang(batten, of(2, tube("single_ended"))))},
			{name: "two-ended tube, one end live", build: facts("gear_removed", "one", hang(batten, of(2, tube("double_ended")))), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "bypass tube, unconverted", build: facts("none", "", onBallast(loading.MagneticBallast, tube("double_ended"))), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "fluorescent lamp, bypassed", build: facts("gear_bypassed", "", hang(batten, of(2, lamp))), findings: 1, severity: Danger, blocks: true, sure: Recorded, says: "without its ballast"},
			{name: "fluorescent lamp on its ballast", build: onBallast(loading.MagneticBallast, lamp)},
			{name: "ballast tube on a ballast", build: facts("none", "", onBallast(loading.MagneticBallast, tube("gear_fed")))},
			{name: "tube with its driver", build: facts("external_driver", "", hang(batten, of(2, tube("external_driver"))))},
			{name: "converted, ends unknown", build: facts("gear_removed", "", hang(batten, of(2, tube("single_ended")))), asks: []Field{FieldFixtureFedEnds}},
			{name: "conversion unknown", build: onBallast(loading.MagneticBallast, tube("double_ended")), asks: []Field{FieldFixtureFedEnds}},
			{name: "tube unknown", build: facts("gear_removed", "one", hang(batten, of(2, tube("")))), asks: []Field{FieldTubeWiring}},
		},
		"converted_without_label": {
			{name: "no label", build: papers(no(), yes(), hang(batten, of(2, tube("single_ended")))), findings: 1, severity: High, sure: Recorded},
			{name: "label", build: papers(yes(), yes(), hang(batten, of(2, tube("single_ended"))))},
			{name: "not converted", build: facts("none", "", onBallast(loading.MagneticBallast, lamp))},
			{name: "label unknown", build: papers(nil, yes(), hang(batten, of(2, tube("single_ended")))), asks: []Field{FieldFixtureLabel}},
		},
		"tube_gear_not_listed": {
			{name: "another ballast is listed", build: listedWith(true, onBallast(loading.MagneticBallast, tube("gear_fed"))), findings: 1, severity: High, sure: Recorded},
			{name: "this ballast is listed", build: listedWith(false, onBallast(loading.MagneticBallast, tube("gear_fed")))},
			{name: "no list on record", build: onBallast(loading.MagneticBallast, tube("gear_fed")), asks: []Field{FieldPairing}},
			{name: "starter of a fluorescent lamp", build: seen(listedWith(false, onBallast(loading.MagneticBallast, tube("gear_fed"))), func(f *loading.FixtureFacts) { f.Starter = "glow" }), findings: 1, severity: High, sure: Recorded},
			{name: "starter unknown", build: seen(listedWith(false, onBallast(loading.MagneticBallast, tube("gear_fed"))), func(f *loading.FixtureFacts) { f.Starter = "" }), asks: []Field{FieldFixtureStarter}},
			{name: "for wound ballasts on an electronic one", build: onBallast(loading.ElectronicBallast, with(tube("gear_fed"), func(m *loading.Lamp) { m.HighFrequency = some(false) })), findings: 1, severity: High, sure: Recorded},
			{name: "a fluorescent lamp", build: onBallast(loading.MagneticBallast, lamp)},
		},
		"conversion_papers_missing": {
			{name: "no declaration", build: papers(yes(), no(), hang(batten, of(2, tube("single_ended")))), findings: 1, severity: Medium, sure: Recorded, says: "declaration"},
			{name: "no kit listing", build: nfpa(papers(yes(), no(), hang(batten, of(2, tube("single_ended"))))), findings: 1, severity: High, sure: Recorded, says: "listing of its kit"},
			{name: "papers on file", build: papers(yes(), yes(), hang(batten, of(2, tube("single_ended"))))},
			{name: "covered by a listed kit", build: papers(yes(), no(), hang(with(batten, func(m *loading.Fitting) { m.ListedRetrofit = some(true) }), of(2, tube("single_ended"))))},
			{name: "papers unknown", build: papers(yes(), nil, hang(batten, of(2, tube("single_ended")))), asks: []Field{FieldFixturePapers}},
		},
	})
}

func TestDischargeAndEmergencyRules(t *testing.T) {
	hid := loading.Gear{Name: "discharge gear", Kind: loading.HIDGearWithIgnitor, MaxLoadW: some(150.0), InputMinV: some(220.0), InputMaxV: some(240.0), Separation: "none", LeakageMA: some(0.5), Dimming: fixed}
	corn := func(compatible *bool) loading.Lamp {
		return with(mainsLED(50, fixed), func(m *loading.Lamp) {
			m.Cap, m.MassG, m.HIDGearCompatible, m.SuitableEnclosed = "E40", some(600.0), compatible, some(true)
		})
	}
	bay := with(downlight(), func(m *loading.Fitting) {
		m.Gear, m.Discharge, m.Cap, m.MaxLampMassG, m.MaxLampW = "integral", some(true), "E40", some(600.0), some(400.0)
	})
	in := func(m loading.Fitting, g loading.Gear, lamps ...loading.LampGroup) func(*rig) {
		return and(fed(g, lamps...), func(r *rig) {
			m.Key = r.key()
			r.Fixtures[0].Model = &m
		})
	}
	removed := func(build func(*rig)) func(*rig) {
		return seen(build, func(f *loading.FixtureFacts) { f.Conversion = "gear_removed" })
	}
	emergency := func(change func(*rig)) func(*rig) {
		return and(fed(ledDriver(60, fixed), of(1, strip24(10))), func(r *rig) {
			f := &r.Fixtures[0]
			f.EmergencyMode, f.Battery = "maintained", "NiMH 4.8 V"
			f.Emergency = loading.EmergencyRecord{Tested: true, Lamp: f.Lamps[0].Model.Key, Gear: r.Drivers[0].Model.Key, Battery: "NiMH 4.8 V"}
			change(r)
		})
	}
	runCases(t, map[string][]ruleCase{
		"led_in_hid_fitting_with_ignitor": {
			{name: "ignitor in circuit", build: in(bay, hid, of(1, corn(no()))), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "made for it", build: in(bay, hid, of(1, corn(yes())))},
			{name: "gear removed", build: removed(in(bay, hid, of(1, corn(no()))))},
			{name: "lamp silent", build: in(bay, hid, of(1, corn(nil))), asks: []Field{FieldLampHIDGear}},
			{name: "the lamp it was made for", build: in(bay, hid, of(1, loading.Lamp{Technology: loading.MetalHalide, PowerW: some(150.0), MassG: some(200.0), Cap: "E40"}))},
		},
		"heavy_lamp_in_hid_fitting": {
			{name: "601 g on 600 g", build: removed(in(bay, hid, of(1, with(corn(yes()), func(m *loading.Lamp) { m.MassG = some(601.0) })))), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "600 g on 600 g", build: removed(in(bay, hid, of(1, corn(yes()))))},
			{name: "another cap", build: removed(in(bay, hid, of(1, with(corn(yes()), func(m *loading.Lamp) { m.Cap = "E27" })))), findings: 1, severity: High, blocks: true, sure: Recorded, says: "E27 against E40"},
			{name: "masses unknown", build: removed(in(with(bay, func(m *loading.Fitting) { m.MaxLampMassG = nil }), hid, of(1, with(corn(yes()), func(m *loading.Lamp) { m.MassG = nil })))), asks: []Field{FieldLampMass, FieldFittingMass}},
			{name: "not a discharge luminaire", build: removed(in(with(bay, func(m *loading.Fitting) { m.Discharge = some(false) }), hid, of(1, with(corn(yes()), func(m *loading.Lamp) { m.MassG = some(900.0) }))))},
		},
		"emergency_fitting_altered": {
			{name: "as tested", build: emergency(func(r *rig) {})},
			{name: "another lamp", build: emergency(func(r *rig) { r.Fixtures[0].Emergency.Lamp = r.key() }), findings: 1, severity: Danger, blocks: true, sure: Recorded, says: "The lamp"},
			{name: "another lamp, listed", build: emergency(func(r *rig) {
				r.Fixtures[0].Emergency.Lamp = r.key()
				r.Pairings = map[loading.PairingKey]loading.Pairing{{Lamp: r.Fixtures[0].Lamps[0].Model.Key, Gear: r.Drivers[0].Model.Key}: {}}
			})},
			{name: "another driver", build: emergency(func(r *rig) { r.Fixtures[0].Emergency.Gear = r.key() }), findings: 1, severity: Danger, blocks: true, sure: Recorded, says: "The gear"},
			{name: "another battery", build: emergency(func(r *rig) { r.Fixtures[0].Battery = "NiCd 4.8 V" }), findings: 1, severity: Danger, blocks: true, sure: Recorded, says: "The battery"},
			{name: "like for like, not yet tested", build: emergency(func(r *rig) { r.Fixtures[0].Emergency.ChangedLater = true }), findings: 1, severity: Medium, sure: Recorded},
			{name: "no emergency luminaire", build: emergency(func(r *rig) { r.Fixtures[0].EmergencyMode = "none"; r.Fixtures[0].Emergency.Lamp = r.key() })},
		},
		"repeat_failure": {
			{name: "two in one holder", build: and(hang(downlight(), of(1, mainsHalogen(20))), func(r *rig) { r.Fixtures[0].FailuresInYear = 2 }), findings: 1, severity: Medium, sure: Recorded},
			{name: "one", build: and(hang(downlight(), of(1, mainsHalogen(20))), func(r *rig) { r.Fixtures[0].FailuresInYear = 1 })},
			{name: "gear twice", build: and(fed(ledDriver(60, fixed), of(1, strip24(20))), func(r *rig) { r.Drivers[0].FailuresInYear = 2 }), findings: 1, severity: Medium, sure: Recorded},
			{name: "gear once", build: and(fed(ledDriver(60, fixed), of(1, strip24(20))), func(r *rig) { r.Drivers[0].FailuresInYear = 1 })},
		},
	})
}

func TestProtectionRules(t *testing.T) {
	replaced := func(before, now string, touch *bool) func(*rig) {
		return and(fed(with(ledDriver(60, fixed), func(g *loading.Gear) { g.Separation = now }), of(1, strip24(20))), func(r *rig) {
			r.Drivers[0].SeparationBefore, r.Drivers[0].TouchableLive = before, touch
		})
	}
	current := func(highest *float64, touch *bool) func(*rig) {
		return and(fed(with(currentDriver(), func(g *loading.Gear) { g.ComplianceMaxV = highest }), of(5, module())), func(r *rig) {
			r.Drivers[0].TouchableLive = touch
			r.Fixtures[0].Strings = some(1)
		})
	}
	classed := func(class string, earth *bool, conversion string) func(*rig) {
		return seen(hang(with(downlight(), func(m *loading.Fitting) { m.Class = class }), of(1, mainsHalogen(20))), func(f *loading.FixtureFacts) {
			f.Earth, f.Conversion = earth, conversion
		})
	}
	wet := func(zone, ip, class string) func(*rig) {
		return seen(hang(with(downlight(), func(m *loading.Fitting) { m.IP, m.Class = ip, class }), of(1, mainsHalogen(20))), func(f *loading.FixtureFacts) { f.Zone = zone })
	}
	runCases(t, map[string][]ruleCase{
		"isolation_lost": {
			{name: "SELV before, none now, touchable", build: replaced("selv", "none", yes()), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "not touchable", build: replaced("selv", "none", no())},
			{name: "SELV still", build: replaced("selv", "selv", yes())},
			{name: "none before", build: replaced("none", "none", no())},
			{name: "touchable unknown", build: replaced("class_ii", "none", nil), asks: []Field{FieldDriverTouchable}},
			{name: "separation unknown", build: replaced("class_ii", "", yes()), asks: []Field{FieldGearSeparation}},
			// 60 V ripple-free dc is the limit.
			{name: "constant current of 61 V", build: current(some(61.0), yes()), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "constant current of 60 V", build: current(some(60.0), yes())},
			{name: "constant current of unknown voltage", build: current(nil, yes()), asks: []Field{FieldComplianceMax}},
			{name: "not kept apart", build: and(fed(ledDriver(60, fixed), of(1, strip24(20))), func(r *rig) { r.Drivers[0].Segregated = some(false) }), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "kept apart", build: and(fed(ledDriver(60, fixed), of(1, strip24(20))), func(r *rig) { r.Drivers[0].Segregated = some(true) })},
		},
		"earth_lost": {
			{name: "class I without earth", build: classed("I", no(), "none"), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "class I with earth", build: classed("I", yes(), "none")},
			{name: "class II needs none", build: classed("II", no(), "none")},
			{name: "class unknown", build: classed("", no(), "none"), asks: []Field{FieldFittingClass}},
			{name: "rewired, earth unknown", build: classed("I", nil, "gear_removed"), asks: []Field{FieldFixtureEarth}},
			{name: "left alone, earth not recorded", build: classed("I", nil, "none")},
		},
		"zone_unsuitable": {
			// IEC 60364-7-701: IPX4 in zones 1 and 2, IPX7 and SELV in zone 0.
			{name: "IP20 in bath zone 2", build: wet("bath_2", "IP20", "II"), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "IP44 in bath zone 2", build: wet("bath_2", "IP44", "II")},
			{name: "IP67 class II in bath zone 0", build: wet("bath_0", "IP67", "II"), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "IP67 class III in bath zone 0", build: wet("bath_0", "IP67", "III")},
			{name: "IP67 in pool zone 0", build: wet("pool_0", "IP67", "III"), findings: 1, severity: Danger, blocks: true, sure: Recorded},
			{name: "IP43 in the wet", build: wet("wet", "IP43", "I"), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "IP44 in the wet", build: wet("wet", "IP44", "I")},
			{name: "IP22 outdoors", build: wet("outdoor", "IP22", "I"), findings: 1, severity: High, blocks: true, sure: Recorded},
			{name: "IP23 outdoors", build: wet("outdoor", "IP23", "I")},
			{name: "IP20 in the dry", build: wet("dry", "IP20", "I")},
			{name: "IP unknown", build: wet("wet", "", "I"), asks: []Field{FieldFittingIP}},
			{name: "class unknown in zone 0", build: wet("bath_0", "IP67", ""), asks: []Field{FieldFittingClass}},
			{name: "zone of a proposal unknown", build: proposed(wet("", "IP20", "I")), asks: []Field{FieldFixtureZone}},
		},
	})
}

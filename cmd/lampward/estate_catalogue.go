package main

import (
	"crypto/sha256"
	"slices"
	"strings"

	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// All models, buildings and people of the demo estate are invented. Codes and names are descriptions, not products.

// idOf makes the same identifier for the same words, in the form of a UUIDv7 of the first instant of 2026.
func idOf(words ...string) domain.ID {
	sum := sha256.Sum256([]byte("lampward demo\x00" + strings.Join(words, "\x00")))
	id := domain.ID(sum[:16])
	copy(id[:], []byte{0x01, 0x9b, 0x76, 0xda, 0xa8, 0x00}) // 2026-01-01T00:00:00Z in milliseconds
	id[6] = id[6]&0x0F | 0x70
	id[8] = id[8]&0x3F | 0x80
	return id
}

func of[T any](v T) *T { return &v }

// estateModels is the invented catalogue, by code.
type estateModels struct {
	lamps    []*plant.LampModel
	drivers  []*plant.DriverModel
	dimmers  []*plant.DimmerModel
	fixtures []*plant.FixtureModel
	pairings []*plant.Pairing
	prices   []*plant.Price
	uses     []*site.SpaceUse
}

const inventedNote = "Invented for the demo estate."

func (m *estateModels) lamp(code, name, technology, lampCap, supply string, volts, watts float64, more func(*loading.Lamp)) {
	l := &plant.LampModel{ModelHead: plant.ModelHead{Code: code, Note: inventedNote}, Lamp: loading.Lamp{Name: name, Technology: technology, Cap: lampCap, Supply: supply,
		PowerW: of(watts), PowerFactor: of(0.9), Dimming: []string{}, Approval: of(true), SuitableEnclosed: of(true), HazardousContent: "none", MassG: of(60.0),
		FactSource: loading.DataSheet}}
	l.ID = idOf("lamp", code)
	if volts > 0 {
		l.RatedV = of(volts)
	}
	if technology == loading.Halogen || technology == loading.Incandescent {
		l.PowerFactor, l.Dimming = of(1.0), []string{loading.PhaseCut, loading.LeadingEdge, loading.TrailingEdge}
		l.RatedLifeH, l.LifeBasis = of(2000.0), "B50"
	} else {
		l.RatedLifeH, l.LifeBasis = of(25000.0), "B50"
	}
	if more != nil {
		more(&l.Lamp)
	}
	m.lamps = append(m.lamps, l)
}

func (m *estateModels) driver(code, name, kind, form string, volts, least, most float64, more func(*loading.Gear)) {
	d := &plant.DriverModel{ModelHead: plant.ModelHead{Code: code, Note: inventedNote}, Gear: loading.Gear{Name: name, Kind: kind, OutputForm: form,
		InputMinV: of(207.0), InputMaxV: of(253.0), InputMinHz: of(50.0), InputMaxHz: of(60.0), InputDC: of(false), Outputs: of(1), MinLoadW: of(least), MaxLoadW: of(most),
		MaxLoadVA: of(most), Efficiency: of(0.9), PowerFactor: of(0.95), InrushA: of(5.0), InrushUS: of(100.0), LeakageMA: of(0.2), OutputLeadM: of(2.0),
		TaC: of(50.0), TcC: of(80.0), RatedLifeH: of(50000.0), LifeBasis: "B10", Dimming: []string{}, Separation: "selv", ThermalProtection: of(true),
		InsulationCovering: of(false), PCBFree: of(true), FactSource: loading.DataSheet}}
	d.ID = idOf("driver", code)
	if volts > 0 {
		d.OutputV = of(volts)
	}
	if more != nil {
		more(&d.Gear)
	}
	m.drivers = append(m.drivers, d)
}

func (m *estateModels) dimmer(code, name, kind string, more func(*loading.Control)) {
	d := &plant.DimmerModel{ModelHead: plant.ModelHead{Code: code, Note: inventedNote}, Control: loading.Control{Name: name, Kind: kind, NeedsNeutral: of(true),
		FactSource: loading.DataSheet}}
	d.ID = idOf("dimmer", code)
	if more != nil {
		more(&d.Control)
	}
	m.dimmers = append(m.dimmers, d)
}

func (m *estateModels) fixture(code, name, lampCap, gear string, holders int, maxW float64, more func(*loading.Fitting)) *plant.FixtureModel {
	f := &plant.FixtureModel{ModelHead: plant.ModelHead{Code: code, Note: inventedNote}, Fitting: loading.Fitting{Name: name, Cap: lampCap, Gear: gear, Holders: of(holders),
		MaxLampW: of(maxW), MaxLampMassG: of(500.0), Class: "I", IP: "IP20", Enclosed: of(false), InsulationRated: of(false), FireRated: of(false), Discharge: of(false),
		Emergency: of(false), Shunted: of(false), Category: "C", Replaceable: "yes", MassG: of(2000.0), FactSource: loading.DataSheet}}
	f.ID = idOf("fixture", code)
	if more != nil {
		more(&f.Fitting)
	}
	m.fixtures = append(m.fixtures, f)
	return f
}

// inventedModels returns the catalogue of the demo estate.
func inventedModels() *estateModels {
	m := &estateModels{}
	m.lamp("H20", "12 V halogen reflector lamp, 20 W", loading.Halogen, "GU5.3", loading.SupplyELVACDC, 12, 20, nil)
	m.lamp("H35", "12 V halogen reflector lamp, 35 W", loading.Halogen, "GU5.3", loading.SupplyELVACDC, 12, 35, nil)
	m.lamp("H50", "12 V halogen reflector lamp, 50 W", loading.Halogen, "GU5.3", loading.SupplyELVACDC, 12, 50, nil)
	m.lamp("HM50", "Mains halogen reflector lamp, 50 W", loading.Halogen, "GU10", loading.SupplyMainsAC, 230, 50, nil)
	m.lamp("L5", "12 V LED reflector lamp, 5 W", loading.LEDLamp, "GU5.3", loading.SupplyELVACDC, 12, 5, func(l *loading.Lamp) { l.HighFrequency = of(false) })
	m.lamp("L7", "12 V LED reflector lamp, 7 W", loading.LEDLamp, "GU5.3", loading.SupplyELVACDC, 12, 7, func(l *loading.Lamp) { l.HighFrequency = of(false) })
	m.lamp("L7HF", "12 V LED reflector lamp for high frequency, 7 W", loading.LEDLamp, "GU5.3", loading.SupplyELVACDC, 12, 7, func(l *loading.Lamp) {
		l.HighFrequency, l.Dimming = of(true), []string{loading.TrailingEdge}
	})
	m.lamp("L6DC", "12 V LED reflector lamp for dc only, 6 W", loading.LEDLamp, "GU5.3", loading.SupplyELVDC, 12, 6, func(l *loading.Lamp) { l.HighFrequency = of(false) })
	m.lamp("L6OPEN", "Mains LED reflector lamp, 6 W, not for closed fittings", loading.LEDLamp, "GU10", loading.SupplyMainsAC, 230, 6, func(l *loading.Lamp) {
		l.SuitableEnclosed, l.Dimming = of(false), []string{loading.PhaseCut}
	})
	m.lamp("L9E27", "Mains LED lamp, 9 W", loading.LEDLamp, "E27", loading.SupplyMainsAC, 230, 9, nil)
	m.lamp("L9BARE", "Mains LED lamp without a safety approval, 9 W", loading.LEDLamp, "E27", loading.SupplyMainsAC, 230, 9, func(l *loading.Lamp) { l.Approval = of(false) })
	m.lamp("LSTRIP24", "24 V LED strip module, 14 W", loading.LEDModule, "", loading.SupplyELVDC, 24, 14, func(l *loading.Lamp) { l.Bridge = of(false) })
	m.lamp("LMOD500", "LED module for 500 mA", loading.LEDModule, "", loading.SupplyConstantCurrent, 0, 9, func(l *loading.Lamp) {
		l.NominalMA, l.MaxMA, l.ForwardV, l.ForwardVCold, l.ForwardVHot = of(500.0), of(550.0), of(18.0), of(20.0), of(16.0)
	})
	m.lamp("F36", "T8 fluorescent tube, 36 W", loading.Fluorescent, "G13", loading.SupplyGear, 0, 36, func(l *loading.Lamp) {
		l.TubeWiring, l.HazardousContent, l.RatedLifeH = "gear_fed", "mercury", of(20000.0)
	})
	m.lamp("F58", "T8 fluorescent tube, 58 W", loading.Fluorescent, "G13", loading.SupplyGear, 0, 58, func(l *loading.Lamp) {
		l.TubeWiring, l.HazardousContent, l.RatedLifeH = "gear_fed", "mercury", of(20000.0)
	})
	m.lamp("LT20S", "LED tube fed at one end, 20 W", loading.LEDTube, "G13", loading.SupplyMainsAC, 230, 20, func(l *loading.Lamp) { l.TubeWiring = "single_ended" })
	m.lamp("LT20D", "LED tube fed at both ends, 20 W", loading.LEDTube, "G13", loading.SupplyMainsAC, 230, 20, func(l *loading.Lamp) { l.TubeWiring = "double_ended" })
	m.lamp("LT16G", "LED tube for a ballast, 16 W", loading.LEDTube, "G13", loading.SupplyGear, 0, 16, func(l *loading.Lamp) { l.TubeWiring = "gear_fed" })
	m.lamp("MH150", "Metal halide lamp, 150 W", loading.MetalHalide, "E40", loading.SupplyGear, 0, 150, func(l *loading.Lamp) { l.HazardousContent, l.RatedLifeH = "mercury", of(15000.0) })
	m.lamp("L60E40", "LED lamp for discharge luminaires, 60 W, heavy", loading.LEDLamp, "E40", loading.SupplyMainsAC, 230, 60, func(l *loading.Lamp) {
		l.HIDGearCompatible, l.MassG = of(false), of(900.0)
	})

	m.driver("ET60", "12 V electronic transformer, 20 to 60 W", loading.ElectronicTransformer, loading.OutputHFAC, 12, 20, 60, func(g *loading.Gear) { g.Dimming = []string{loading.TrailingEdge} })
	m.driver("ET105", "12 V electronic transformer, 35 to 105 W", loading.ElectronicTransformer, loading.OutputHFAC, 12, 35, 105, func(g *loading.Gear) {
		g.Dimming, g.Derating = []string{loading.TrailingEdge}, []loading.CurvePoint{{AirC: 40, SharePct: 100}, {AirC: 60, SharePct: 60}}
	})
	wound := func(regulation float64) func(*loading.Gear) {
		return func(g *loading.Gear) {
			g.Toroid, g.RegulationPct, g.Efficiency, g.PowerFactor, g.Dimming = of(false), of(regulation), of(0.85), of(0.95), []string{loading.LeadingEdge}
			g.OutputLeadM, g.InrushA = nil, of(10.0)
		}
	}
	m.driver("WT150", "12 V wound transformer, 150 VA", loading.MagneticTransformer, loading.OutputMainsAC, 12, 0, 150, wound(8))
	m.driver("WT60", "12 V wound transformer, 60 VA, soft", loading.MagneticTransformer, loading.OutputMainsAC, 12, 0, 60, wound(22))
	m.driver("CV24", "24 V LED driver, 100 W", loading.LEDConstantVoltage, loading.OutputDC, 24, 0, 100, func(g *loading.Gear) { g.InrushA, g.LeakageMA = of(45.0), of(0.7); g.InrushUS = of(250.0) })
	m.driver("CV12", "12 V LED driver, 60 W", loading.LEDConstantVoltage, loading.OutputDC, 12, 0, 60, nil)
	current := func(code, name string, mA, most float64, more func(*loading.Gear)) {
		m.driver(code, name, loading.LEDConstantCurrent, loading.OutputDC, 0, 0, most, func(g *loading.Gear) {
			g.OutputMinMA, g.OutputMaxMA, g.CurrentTolerance, g.ComplianceMinV, g.ComplianceMaxV = of(mA), of(mA), of(5.0), of(24.0), of(54.0)
			if more != nil {
				more(g)
			}
		})
	}
	current("CC250", "LED driver, 250 mA", 250, 20, nil)
	current("CC500", "LED driver, 500 mA", 500, 40, func(g *loading.Gear) { g.Dimming, g.AnalogueRole = []string{loading.Analogue1to10V}, loading.Sources })
	current("CC700", "LED driver, 700 mA", 700, 25, nil)
	current("CC500N", "LED driver, 500 mA, without separation", 500, 40, func(g *loading.Gear) { g.Separation = "none" })
	m.driver("MB58", "Magnetic ballast, 58 W", loading.MagneticBallast, loading.OutputMainsAC, 0, 0, 60, func(g *loading.Gear) {
		g.Separation, g.PowerFactor, g.OutputLeadM, g.InrushA, g.MaxLoadVA = "none", of(0.9), nil, of(8.0), nil
	})
	m.driver("EB2X58", "Electronic ballast for two tubes, 116 W", loading.ElectronicBallast, loading.OutputHFAC, 0, 0, 116, func(g *loading.Gear) {
		g.Separation, g.InrushA, g.LeakageMA, g.OutputLeadM, g.MaxLoadVA = "none", of(30.0), of(0.5), nil, nil
	})
	m.driver("HG150", "Discharge gear with ignitor, 150 W", loading.HIDGearWithIgnitor, loading.OutputMainsAC, 0, 0, 150, func(g *loading.Gear) { g.Separation, g.OutputLeadM, g.MaxLoadVA = "none", nil, nil })
	m.driver("LEDLOWPF", "LED driver of low power factor, 20 W", loading.LEDConstantVoltage, loading.OutputDC, 24, 0, 20, func(g *loading.Gear) { g.PowerFactor = of(0.55) })

	m.dimmer("LE400", "Leading-edge dimmer, 40 to 400 W", loading.LeadingEdge, func(c *loading.Control) {
		c.Marking, c.MinLoadW, c.MaxLoadW, c.MaxLoadVA, c.LEDMaxLoadW, c.LEDMinLoadW, c.Toroids = "RL", of(40.0), of(400.0), of(400.0), of(100.0), of(10.0), of(false)
	})
	m.dimmer("TE250", "Trailing-edge dimmer, 10 to 250 W", loading.TrailingEdge, func(c *loading.Control) {
		c.Marking, c.MinLoadW, c.MaxLoadW, c.CapacitiveMaxW, c.LEDMaxLoadW, c.LEDMinLoadW = "RC", of(10.0), of(250.0), of(250.0), of(100.0), of(5.0)
	})
	m.dimmer("DA64", "Digital lighting interface, 64 addresses", loading.DALI, func(c *loading.Control) { c.SignalMaxUnits = of(64) })
	m.dimmer("AN10", "1 to 10 V controller that sources", loading.Analogue1to10V, func(c *loading.Control) { c.AnalogueRole, c.SignalMaxUnits = loading.Sources, of(50) })
	m.dimmer("SW10", "Switch, 10 A", loading.SwitchContact, func(c *loading.Control) { c.ContactA, c.CapacitiveA, c.NeedsNeutral = of(10.0), of(2.0), of(false) })
	m.dimmer("ES300", "Two-wire electronic switch, 300 W", loading.SwitchElectronic, func(c *loading.Control) {
		c.MinLoadW, c.MaxLoadW, c.NeedsNeutral = of(10.0), of(300.0), of(false)
	})
	m.dimmer("PD5", "Presence detector, 5 A contact", loading.Detector, func(c *loading.Control) { c.ContactA, c.CapacitiveA, c.CapacitiveCount = of(5.0), of(1.0), of(8) })

	m.fixture("DL1", "Recessed downlight for one 12 V lamp", "GU5.3", "remote", 1, 50, func(f *loading.Fitting) { f.Class = "III" })
	m.fixture("DL35", "Recessed downlight, at most 35 W", "GU5.3", "remote", 1, 35, func(f *loading.Fitting) { f.Class = "III" })
	m.fixture("SP1", "Spotlight for one mains lamp", "GU10", "none", 1, 50, nil)
	m.fixture("BH1", "Closed bulkhead for one lamp", "E27", "none", 1, 60, func(f *loading.Fitting) { f.Enclosed, f.IP = of(true), "IP44" })
	m.fixture("FR1", "Closed fire-rated downlight for one mains lamp", "GU10", "none", 1, 50, func(f *loading.Fitting) { f.Enclosed, f.FireRated = of(true), of(true) })
	m.fixture("BT58", "Batten for one tube, magnetic ballast", "G13", "integral", 1, 58, nil).DriverModelID = of(idOf("driver", "MB58"))
	m.fixture("RC2X58", "Recessed luminaire for two tubes, electronic ballast", "G13", "integral", 2, 58, nil).DriverModelID = of(idOf("driver", "EB2X58"))
	m.fixture("RCSH", "Recessed luminaire for two tubes, shunted holders", "G13", "integral", 2, 58, func(f *loading.Fitting) { f.Shunted = of(true) }).DriverModelID = of(idOf("driver", "EB2X58"))
	m.fixture("HB150", "High bay for a discharge lamp", "E40", "integral", 1, 250, func(f *loading.Fitting) { f.Discharge = of(true) }).DriverModelID = of(idOf("driver", "HG150"))
	m.fixture("LN24", "Line of 24 V LED strip", "", "remote", 1, 30, func(f *loading.Fitting) { f.Class = "III" })
	m.fixture("PN", "LED panel of modules", "", "remote", 8, 20, nil)
	m.fixture("EX1", "Emergency exit luminaire", "E27", "none", 1, 20, func(f *loading.Fitting) { f.Emergency = of(true) })

	pair := func(lamp, driver string, least, most int) {
		p := &plant.Pairing{LampModelID: of(idOf("lamp", lamp)), DriverModelID: of(idOf("driver", driver)), LeastLamps: of(least), MostLamps: of(most),
			StatedBy: "invented list", StatedOn: of(domain.Date("2026-01-15")), Note: inventedNote}
		p.ID = idOf("pairing", lamp, driver)
		m.pairings = append(m.pairings, p)
	}
	pair("L7HF", "ET105", 5, 12)
	pair("L7HF", "ET60", 3, 7)
	for code, amount := range map[string]string{"H20": "1.80", "H35": "1.90", "H50": "2.00", "L5": "5.20", "L7": "5.90", "L7HF": "8.40", "L6DC": "5.50", "L9E27": "3.10", "F58": "3.40",
		"LT20S": "9.80", "LT16G": "11.20"} {
		p := &plant.Price{ModelKind: plant.KindLamp, ModelID: idOf("lamp", code), FromDate: "2026-01-01", Amount: domain.Decimal(amount), Currency: "EUR", Source: "invented"}
		p.ID = idOf("price", code)
		m.prices = append(m.prices, p)
	}
	for code, amount := range map[string]string{"ET60": "9.50", "ET105": "12.40", "CV12": "24.00", "CV24": "31.00", "WT150": "28.00"} {
		p := &plant.Price{ModelKind: plant.KindDriver, ModelID: idOf("driver", code), FromDate: "2026-01-01", Amount: domain.Decimal(amount), Currency: "EUR", Source: "invented"}
		p.ID = idOf("price", code)
		m.prices = append(m.prices, p)
	}
	slices.SortFunc(m.prices, func(a, b *plant.Price) int { return strings.Compare(a.ID.String(), b.ID.String()) })
	for _, u := range []struct {
		use       string
		hours, lx float64
	}{{"corridor", 2750, 100}, {"classroom", 1260, 300}, {"office", 2750, 500}, {"reading room", 3600, 500}, {"workshop", 2750, 500}, {"hall", 4500, 300}, {"washroom", 2750, 200},
		{"stair", 8760, 100}, {"store", 1000, 100}} {
		row := &site.SpaceUse{Use: u.use, YearlyHours: of(u.hours), RequiredLX: of(u.lx), Source: "passive-building guidebook v3.02 table N-10, rounded; stair and store: common practice"}
		row.ID = idOf("use", u.use)
		m.uses = append(m.uses, row)
	}
	return m
}

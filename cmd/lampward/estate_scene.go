package main

import (
	"fmt"
	"time"

	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/site"
)

// sketch gathers the records of one invented building and what happened in it.
type sketch struct {
	code   string
	bulk   plant.Bulk
	events []func(*telling) error // told after the records are stored, each as its own change
	space  domain.ID              // where places are put now
	ways   int
	tags   map[string]int
	lit    int // luminaires so far
}

func newSketch(code string) *sketch { return &sketch{code: code, tags: map[string]int{}} }

func (k *sketch) tag(letter string) string {
	k.tags[letter]++
	return fmt.Sprintf("%s-%03d", letter, k.tags[letter])
}

func (k *sketch) id(kind, name string) domain.ID { return idOf(k.code, kind, name) }

// room begins a space: what follows stands in it.
func (k *sketch) room(level, name, use, reach string, height float64) {
	p := site.Space{Level: level, Name: name, Use: use, Reach: reach, MountingM: of(height), Cleanliness: "normal", Asbestos: "clear", SurveyState: "done",
		Ceiling: "tiles", FactSource: loading.SeenOnNameplate}
	p.ID = k.id("space", level+"/"+name)
	k.space = p.ID
	k.bulk.Spaces = append(k.bulk.Spaces, p)
}

// way begins a circuit on which everything is known; change makes it the one that is wanted.
func (k *sketch) way(change func(*plant.Circuit)) domain.ID {
	k.ways++
	c := plant.Circuit{Board: "DB-" + fmt.Sprint(1+k.ways/24), Way: fmt.Sprint(1 + k.ways%24)}
	c.CircuitFacts = loading.CircuitFacts{NominalV: of(230.0), Phases: of(1), Curve: "C", RatingA: of(16.0), Listed100: of(false), RCD: "none", CableMM2: of(2.5), CableM: of(25.0),
		Neutral: "own", CentralBattery: "none", FactSource: loading.SeenOnNameplate}
	c.ID = k.id("circuit", c.Board+"/"+c.Way)
	c.SpaceID = of(k.space)
	if change != nil {
		change(&c)
	}
	k.bulk.Circuits = append(k.bulk.Circuits, c)
	return c.ID
}

func (k *sketch) head(letter string, circuit, place *domain.ID) plant.PlaceHead {
	h := plant.PlaceHead{Tag: k.tag(letter), SpaceID: of(k.space), FedByCircuitID: circuit, FedByPlaceID: place, FactSource: loading.SeenOnNameplate,
		FittedAt: of(time.Date(2021, 5, 3, 8, 0, 0, 0, time.UTC))}
	h.ID = k.id("place", h.Tag)
	return h
}

func (k *sketch) dimmer(model string, circuit domain.ID, change func(*plant.Dimmer)) domain.ID {
	d := plant.Dimmer{PlaceHead: k.head("D", &circuit, nil), DimmerModelID: of(idOf("dimmer", model))}
	d.Neutral = of(true)
	if change != nil {
		change(&d)
	}
	k.bulk.Dimmers = append(k.bulk.Dimmers, d)
	return d.ID
}

// feed is where something gets its power from: a circuit or a place.
type feed struct{ circuit, place *domain.ID }

func from(circuit domain.ID) feed { return feed{circuit: &circuit} }
func via(place domain.ID) feed    { return feed{place: &place} }

func (k *sketch) driver(model string, f feed, change func(*plant.Driver)) domain.ID {
	d := plant.Driver{PlaceHead: k.head("G", f.circuit, f.place), DriverModelID: of(idOf("driver", model))}
	d.DriverFacts = loading.DriverFacts{Polarity: "right", CableM: of(1.2), CableMM2: of(2.5), CableClass: "5", CableRatedA: of(20.0), TerminalRatedA: of(20.0), Segregated: of(true),
		TouchableLive: of(false), AirC: of(35.0), InsulationOver: of(false), InEnclosure: of(false)}
	if change != nil {
		change(&d)
	}
	k.bulk.Drivers = append(k.bulk.Drivers, d)
	return d.ID
}

// lights puts n alike luminaires with lamps of one model; it returns the first.
func (k *sketch) lights(n int, model string, f feed, lamp string, lamps int, change func(*plant.Fixture)) domain.ID {
	var first domain.ID
	for i := range n {
		x := plant.Fixture{PlaceHead: k.head("L", f.circuit, f.place), FixtureModelID: of(idOf("fixture", model)), LampModelID: of(idOf("lamp", lamp)), LampCount: of(lamps),
			LampsFittedAt: of(time.Date(2024, 3, 4, 9, 0, 0, 0, time.UTC))}
		x.FixtureFacts = loading.FixtureFacts{Zone: "dry", Earth: of(true), Conversion: "none", TouchableLive: of(false), InsulationOver: of(false), InEnclosure: of(false), EmergencyMode: "none"}
		switch model {
		case "BT58":
			x.FedEnds, x.Starter = "gear", "glow"
		case "RC2X58", "RCSH":
			x.FedEnds, x.Starter = "gear", "none"
		}
		if change != nil {
			change(&x)
		}
		if i == 0 {
			first = x.ID
		}
		k.lit++
		k.bulk.Fixtures = append(k.bulk.Fixtures, x)
	}
	return first
}

func (k *sketch) control(dimmer domain.ID, place domain.ID, path, found string) {
	c := plant.ControlLink{DimmerID: dimmer, PlaceID: &place, Path: path, Position: 1, VoltageFound: found}
	c.ID = k.id("control", dimmer.String()+place.String())
	k.bulk.Controls = append(k.bulk.Controls, c)
}

func (k *sketch) tell(f func(*telling) error) { k.events = append(k.events, f) }

// months is a time so many months before the estate was made.
func months(ago int, at time.Time) time.Time { return at.AddDate(0, -ago, 0).Truncate(time.Hour) }

// A scene is one circuit's worth of lighting with a story. The name says what is wrong with it.
type scene struct {
	name string
	draw func(*sketch)
}

// sound are scenes in which nothing is wrong.
var sound = []scene{
	{"three halogen lamps on their transformer", func(k *sketch) {
		k.lights(3, "DL1", via(k.driver("ET105", from(k.way(nil)), nil)), "H35", 1, nil)
	}},
	{"strip on its driver", func(k *sketch) { k.lights(3, "LN24", via(k.driver("CV24", from(k.way(nil)), nil)), "LSTRIP24", 2, nil) }},
	{"tubes on electronic ballasts", func(k *sketch) { k.lights(5, "RC2X58", from(k.way(nil)), "F58", 2, nil) }},
	{"listed LED lamps, enough of them", func(k *sketch) {
		k.lights(6, "DL1", via(k.driver("ET105", from(k.way(nil)), nil)), "L7HF", 1, nil)
	}},
	{"modules on their current", func(k *sketch) { k.lights(2, "PN", via(k.driver("CC500", from(k.way(nil)), nil)), "LMOD500", 1, nil) }},
	{"spotlights on the mains", func(k *sketch) { k.lights(4, "SP1", from(k.way(nil)), "HM50", 1, nil) }},
	{"LED lamps on a 12 V LED driver", func(k *sketch) { k.lights(4, "DL1", via(k.driver("CV12", from(k.way(nil)), nil)), "L6DC", 1, nil) }},
}

// faulty are scenes that somebody made worse, one lamp at a time.
var faulty = []scene{
	{"more lamps than the transformer carries", func(k *sketch) {
		k.lights(2, "DL1", via(k.driver("ET60", from(k.way(nil)), nil)), "H50", 1, nil)
	}},
	{"one small lamp left on a large transformer", func(k *sketch) {
		k.lights(1, "DL1", via(k.driver("ET105", from(k.way(nil)), nil)), "H20", 1, nil)
	}},
	{"just enough load until one fails", func(k *sketch) {
		k.lights(2, "DL1", via(k.driver("ET105", from(k.way(nil)), nil)), "H20", 1, nil)
	}},
	{"LED lamps from the shelf", func(k *sketch) {
		k.lights(3, "DL1", via(k.driver("ET105", from(k.way(nil)), nil)), "L7", 1, nil)
	}},
	{"one halogen lamp among LED lamps", func(k *sketch) {
		g := k.driver("ET105", from(k.way(nil)), nil)
		k.lights(2, "DL1", via(g), "L7", 1, nil)
		k.lights(1, "DL1", via(g), "H35", 1, nil)
	}},
	{"dc lamps on an electronic transformer", func(k *sketch) {
		k.lights(4, "DL1", via(k.driver("ET60", from(k.way(nil)), nil)), "L6DC", 1, nil)
	}},
	{"dc lamps on a wound transformer", func(k *sketch) {
		k.lights(4, "DL1", via(k.driver("WT150", from(k.way(nil)), nil)), "L6DC", 1, nil)
	}},
	{"a soft wound transformer with little left on it", func(k *sketch) {
		g := k.driver("WT60", from(k.way(nil)), nil)
		k.lights(1, "DL1", via(g), "H20", 1, nil)
		k.lights(2, "DL1", via(g), "L5", 1, nil)
	}},
	{"hot gear above a kitchen", func(k *sketch) {
		k.lights(3, "DL1", via(k.driver("ET105", from(k.way(nil)), func(d *plant.Driver) { d.AirC = of(62.0) })), "H35", 1, nil)
	}},
	{"24 V gear on 12 V lamps", func(k *sketch) {
		k.lights(2, "DL1", via(k.driver("CV24", from(k.way(nil)), nil)), "L6DC", 1, nil)
	}},
	{"a wound transformer on the battery way", func(k *sketch) {
		k.lights(2, "DL1", via(k.driver("WT150", from(k.way(func(c *plant.Circuit) { c.CentralBattery = "dc" })), nil)), "H50", 1, nil)
	}},
	{"gear not for dc on the battery way", func(k *sketch) {
		k.lights(2, "LN24", via(k.driver("CV24", from(k.way(func(c *plant.Circuit) { c.CentralBattery = "dc" })), nil)), "LSTRIP24", 2, nil)
	}},
	{"a strip the wrong way round", func(k *sketch) {
		k.lights(2, "LN24", via(k.driver("CV24", from(k.way(nil)), func(d *plant.Driver) { d.Polarity = "reversed" })), "LSTRIP24", 2, nil)
	}},
	{"current modules on a voltage driver", func(k *sketch) {
		k.lights(1, "PN", via(k.driver("CV24", from(k.way(nil)), nil)), "LMOD500", 1, nil)
	}},
	{"a strip on a current driver", func(k *sketch) {
		k.lights(1, "LN24", via(k.driver("CC500", from(k.way(nil)), nil)), "LSTRIP24", 1, nil)
	}},
	{"too much current", func(k *sketch) {
		k.lights(1, "PN", via(k.driver("CC700", from(k.way(nil)), nil)), "LMOD500", 2, func(f *plant.Fixture) { f.Strings = of(1) })
	}},
	{"too little current", func(k *sketch) {
		k.lights(1, "PN", via(k.driver("CC250", from(k.way(nil)), nil)), "LMOD500", 2, func(f *plant.Fixture) { f.Strings = of(1) })
	}},
	{"too many modules in a row", func(k *sketch) {
		k.lights(1, "PN", via(k.driver("CC500", from(k.way(nil)), nil)), "LMOD500", 5, func(f *plant.Fixture) { f.Strings = of(1) })
	}},
	{"too few modules in a row", func(k *sketch) {
		k.lights(1, "PN", via(k.driver("CC500", from(k.way(nil)), nil)), "LMOD500", 1, func(f *plant.Fixture) { f.Strings = of(1) })
	}},
	{"two strings that share a current", func(k *sketch) {
		k.lights(1, "PN", via(k.driver("CC700", from(k.way(nil)), nil)), "LMOD500", 4, func(f *plant.Fixture) { f.Strings = of(2) })
	}},
	{"a long thin cable", func(k *sketch) {
		k.lights(2, "DL1", via(k.driver("WT150", from(k.way(nil)), func(d *plant.Driver) { d.CableM, d.CableMM2 = of(9.0), of(1.0) })), "H50", 1, nil)
	}},
	{"a long lead on an electronic transformer", func(k *sketch) {
		k.lights(3, "DL1", via(k.driver("ET105", from(k.way(nil)), func(d *plant.Driver) { d.CableM = of(4.5) })), "H35", 1, nil)
	}},
	{"a cable for half the current", func(k *sketch) {
		k.lights(2, "DL1", via(k.driver("WT150", from(k.way(nil)), func(d *plant.Driver) { d.CableRatedA = of(6.0) })), "H50", 1, nil)
	}},
	{"a lamp without approval, live parts in reach", func(k *sketch) {
		k.lights(1, "BH1", from(k.way(nil)), "L9BARE", 1, nil)
		k.lights(1, "SP1", from(k.way(nil)), "HM50", 1, func(f *plant.Fixture) { f.TouchableLive = of(true) })
	}},
	{"an open lamp in closed luminaires", func(k *sketch) { k.lights(3, "FR1", from(k.way(nil)), "L6OPEN", 1, nil) }},
	{"50 W behind a 35 W label", func(k *sketch) {
		k.lights(2, "DL35", via(k.driver("ET105", from(k.way(nil)), nil)), "H50", 1, nil)
	}},
	{"insulation laid over the gear", func(k *sketch) {
		k.lights(3, "DL1", via(k.driver("ET105", from(k.way(nil)), func(d *plant.Driver) { d.InsulationOver = of(true) })), "H35", 1, nil)
	}},
	{"tubes for one end in shunted holders", func(k *sketch) {
		k.lights(2, "RCSH", from(k.way(nil)), "LT20S", 2, func(f *plant.Fixture) {
			f.Conversion, f.FedEnds, f.ConversionLabel, f.ConversionPaper, f.Shunted = "gear_bypassed", "one", of(true), of(true), of(true)
		})
	}},
	{"tubes for one end, wired for both", func(k *sketch) {
		k.lights(2, "RC2X58", from(k.way(nil)), "LT20S", 2, func(f *plant.Fixture) {
			f.Conversion, f.FedEnds, f.ConversionLabel, f.ConversionPaper, f.Shunted = "gear_bypassed", "both", of(true), of(true), of(false)
		})
	}},
	{"converted and nobody wrote it down", func(k *sketch) {
		k.lights(2, "RC2X58", from(k.way(nil)), "LT20D", 2, func(f *plant.Fixture) {
			f.Conversion, f.FedEnds, f.ConversionLabel, f.ConversionPaper, f.Shunted = "gear_bypassed", "both", of(false), of(false), of(false)
		})
	}},
	{"LED tubes on a ballast nobody listed", func(k *sketch) { k.lights(2, "BT58", from(k.way(nil)), "LT16G", 1, nil) }},
	{"heavy LED lamps under the high bay's ignitor", func(k *sketch) { k.lights(2, "HB150", from(k.way(nil)), "L60E40", 1, nil) }},
	{"gear without separation, parts in reach", func(k *sketch) {
		k.lights(1, "PN", via(k.driver("CC500N", from(k.way(nil)), func(d *plant.Driver) { d.SeparationBefore, d.TouchableLive = "selv", of(true) })), "LMOD500", 2,
			func(f *plant.Fixture) { f.Strings = of(1) })
	}},
	{"a spotlight without its earth", func(k *sketch) {
		k.lights(1, "SP1", from(k.way(nil)), "HM50", 1, func(f *plant.Fixture) { f.Earth = of(false) })
	}},
	{"spotlights above the wash basins", func(k *sketch) {
		k.lights(2, "SP1", from(k.way(nil)), "HM50", 1, func(f *plant.Fixture) { f.Zone = "wet" })
	}},
	{"a leading edge on gear for the trailing edge", func(k *sketch) {
		d := k.dimmer("LE400", k.way(nil), nil)
		k.lights(3, "DL1", via(k.driver("ET105", via(d), nil)), "H35", 1, nil)
	}},
	{"lamps that do not dim behind a dimmer", func(k *sketch) {
		k.lights(5, "BH1", via(k.dimmer("TE250", k.way(nil), nil)), "L9E27", 1, nil)
	}},
	{"more than the dimmer carries", func(k *sketch) {
		k.lights(10, "SP1", via(k.dimmer("LE400", k.way(nil), nil)), "HM50", 1, nil)
	}},
	{"one lamp left on a dimmer", func(k *sketch) {
		d := k.dimmer("LE400", k.way(nil), nil)
		k.lights(1, "DL1", via(k.driver("WT150", via(d), nil)), "H20", 1, nil)
	}},
	{"wound and electronic gear on one dimmer", func(k *sketch) {
		d := k.dimmer("LE400", k.way(nil), nil)
		k.lights(2, "DL1", via(k.driver("WT150", via(d), nil)), "H50", 1, nil)
		k.lights(3, "DL1", via(k.driver("ET105", via(d), nil)), "H35", 1, nil)
	}},
	{"a controller and gear that both source", func(k *sketch) {
		c := k.way(nil)
		g := k.driver("CC500", from(c), nil)
		k.lights(1, "PN", via(g), "LMOD500", 2, func(f *plant.Fixture) { f.Strings = of(1) })
		k.control(k.dimmer("AN10", c, nil), g, loading.Signal, "elv")
	}},
	{"mains on a control pair", func(k *sketch) {
		c := k.way(nil)
		g := k.driver("CC500", from(c), nil)
		k.lights(1, "PN", via(g), "LMOD500", 2, func(f *plant.Fixture) { f.Strings = of(1) })
		k.control(k.dimmer("DA64", c, nil), g, loading.Signal, "mains")
	}},
	{"LED lamps on a dimmed wound transformer", func(k *sketch) {
		d := k.dimmer("LE400", k.way(nil), nil)
		k.lights(3, "DL1", via(k.driver("WT150", via(d), nil)), "L5", 1, nil)
	}},
	{"mains LED lamps on a dimmer of unknown edge", func(k *sketch) {
		k.lights(4, "SP1", via(k.dimmer("LE400", k.way(nil), nil)), "L6OPEN", 1, nil)
	}},
	{"LED lamps that glow behind an electronic switch", func(k *sketch) {
		k.lights(3, "BH1", via(k.dimmer("ES300", k.way(nil), func(d *plant.Dimmer) { d.Neutral = of(false) })), "L9E27", 1, nil)
	}},
	{"twelve drivers on a small detector contact", func(k *sketch) {
		d := k.dimmer("PD5", k.way(nil), nil)
		for range 12 {
			k.lights(1, "LN24", via(k.driver("CV24", via(d), nil)), "LSTRIP24", 1, nil)
		}
	}},
	{"wound transformers behind a detector that welded", func(k *sketch) {
		c := k.way(func(c *plant.Circuit) { c.Curve = "B" })
		d := k.dimmer("PD5", c, nil)
		for range 2 {
			k.lights(1, "DL1", via(k.driver("WT150", via(d), nil)), "H50", 1, nil)
		}
		k.tell(func(t *telling) error {
			return t.failure(plant.Failure{PlaceID: &d, Part: plant.KindDimmer, Mode: "contact_welded", NoticedAt: months(3, t.at)})
		})
		k.tell(func(t *telling) error { return t.trip(c, months(2, t.at)) })
	}},
	{"gear for 230 V on 110 V", func(k *sketch) {
		k.lights(2, "LN24", via(k.driver("CV24", from(k.way(func(c *plant.Circuit) { c.NominalV = of(110.0) })), nil)), "LSTRIP24", 1, nil)
	}},
	{"a long row on a small breaker", func(k *sketch) {
		k.lights(14, "RC2X58", from(k.way(func(c *plant.Circuit) { c.RatingA = of(6.0) })), "F58", 2, nil)
	}},
	{"a breaker that trips at switch-on", func(k *sketch) {
		c := k.way(func(c *plant.Circuit) { c.RatingA, c.Curve = of(6.0), "B" })
		for range 14 {
			k.lights(1, "LN24", via(k.driver("CV24", from(c), nil)), "LSTRIP24", 1, nil)
		}
		k.tell(func(t *telling) error { return t.trip(c, months(1, t.at)) })
	}},
	{"much leakage behind one device", func(k *sketch) {
		c := k.way(func(c *plant.Circuit) { c.RCD, c.RCDMA, c.RCDType = "RCD-1", of(30.0), "A" })
		k.lights(22, "RC2X58", from(c), "F58", 2, nil)
	}},
	{"a neutral borrowed from the next way", func(k *sketch) {
		k.lights(4, "SP1", from(k.way(func(c *plant.Circuit) { c.Neutral = "borrowed" })), "HM50", 1, nil)
	}},
	{"three phases, one neutral, poor drivers", func(k *sketch) {
		c := k.way(func(c *plant.Circuit) { c.Neutral, c.Phases, c.NominalV = "common", of(3), of(230.0) })
		for range 6 {
			k.lights(1, "LN24", via(k.driver("LEDLOWPF", from(c), nil)), "LSTRIP24", 1, nil)
		}
	}},
	{"the same lamp, six times up the ladder", func(k *sketch) {
		x := k.lights(1, "BH1", from(k.way(nil)), "L9E27", 1, nil)
		for n := range 3 {
			k.tell(func(t *telling) error {
				return t.swap(plant.Swap{PlaceID: x, Part: plant.KindLamp, Holder: 1, ModelID: of(idOf("lamp", "L9E27")), DoneAt: months(9-3*n, t.at), Why: "failed", Mode: "dark"})
			})
		}
	}},
	{"an emergency luminaire changed after its test", func(k *sketch) {
		x := k.lights(1, "EX1", from(k.way(nil)), "L9E27", 1, func(f *plant.Fixture) {
			f.EmergencyMode, f.EmergencySource, f.EmergencyMin, f.Battery, f.SelfTest = "maintained", "own_battery", of(60.0), "NiCd 3.6 V", of(false)
		})
		k.tell(func(t *telling) error {
			return t.test(plant.EmergencyTest{PlaceID: x, Test: "function", TestedAt: months(5, t.at), Passed: true})
		})
		k.tell(func(t *telling) error {
			return t.swap(plant.Swap{PlaceID: x, Part: plant.KindLamp, Holder: 1, ModelID: of(idOf("lamp", "L9BARE")), DoneAt: months(4, t.at), Why: "failed", Mode: "dark"})
		})
	}},
	{"a transformer that hums since somebody fitted LED", func(k *sketch) {
		g := k.driver("ET105", from(k.way(nil)), nil)
		x := k.lights(3, "DL1", via(g), "H35", 1, nil)
		k.tell(func(t *telling) error {
			return t.swap(plant.Swap{PlaceID: x, Part: plant.KindLamp, Holder: 1, ModelID: of(idOf("lamp", "L7")), DoneAt: months(6, t.at), Why: "failed", Mode: "dark"})
		})
		k.tell(func(t *telling) error {
			return t.failure(plant.Failure{PlaceID: &g, Part: plant.KindDriver, Mode: "noise", NoticedAt: months(5, t.at)})
		})
	}},
	{"nobody has looked yet", func(k *sketch) {
		c := k.way(func(c *plant.Circuit) { c.CircuitFacts = loading.CircuitFacts{} })
		g := k.driver("ET105", from(c), func(d *plant.Driver) { d.DriverModelID, d.DriverFacts = nil, loading.DriverFacts{} })
		k.lights(3, "DL1", via(g), "L7", 1, func(f *plant.Fixture) { f.LampModelID, f.FixtureFacts = nil, loading.FixtureFacts{} })
	}},
}

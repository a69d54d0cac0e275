package retrofit

import (
	"reflect"
	"strings"

	"lampward/calc/loading"
)

// tubeRules judge tubes in luminaires made for fluorescent lamps.
var tubeRules = []Rule{
	{
		ID: "single_ended_tube_in_shunted_holders", Severity: Danger, Blocks: true, Subject: OnFixture,
		Trigger:  "tube fed at one end in holders whose contacts are joined",
		Why:      "The joined contacts put a dead short on the mains as the tube goes in.",
		Basis:    "UL safety alert on tubular LED retrofit kits, 2010",
		Remedy:   "Fit holders with separate contacts, and the label; or a tube fed at both ends.",
		Cautions: []string{"CA-01", "CA-10"},
		Asks:     []Field{FieldFittingShunted, FieldFixtureShunted},
		Hides:    []string{"tube_wiring_differs"},
		fixture:  singleEndedTubeInShuntedHolders,
		only:     tubes,
	},
	{
		ID: "tube_wiring_differs", Severity: Danger, Blocks: true, Subject: OnFixture,
		Trigger:  "the tube's feed (one end, both ends, by gear) differs from how the luminaire is wired; a fluorescent lamp in a bypassed luminaire, or a bypass tube in an unconverted one",
		Why:      "A dead short, or a free end that is live in the hand.",
		Basis:    "UL warning on LED lamps and ballasts, 2018",
		Remedy:   "Fit the tube the wiring is for, label the luminaire, and clear the store of the wrong ones.",
		Cautions: []string{"CA-01", "CA-06", "CA-10"},
		Asks:     []Field{FieldFixtureFedEnds, FieldTubeWiring},
		fixture:  tubeWiringDiffers,
		only:     tubes,
	},
	{
		ID: "converted_without_label", Severity: High, Subject: OnFixture,
		Trigger:  "gear bypassed or removed, and no warning label on the luminaire",
		Why:      "The next person fits the wrong tube.",
		Basis:    "conversion kits and their listings ask for the label",
		Remedy:   "Fit the label.",
		Cautions: []string{"CA-01", "CA-10"},
		Asks:     []Field{FieldFixtureLabel},
		fixture:  convertedWithoutLabel,
		only:     rewired,
	},
	{
		ID: "tube_gear_not_listed", Severity: High, Subject: OnFixture,
		Trigger:  "LED tube fed by a ballast that is not on its list, unsuitable for that kind of ballast, or with the wrong starter",
		Why:      "Without modification only what the maker lists is covered.",
		Basis:    "scope of IEC 62776",
		Remedy:   "Fit a tube that lists the ballast, and the right starter.",
		Cautions: []string{"CA-01"},
		Asks:     []Field{FieldPairing, FieldFixtureStarter, FieldTubeWiring},
		fixture:  tubeGearNotListed,
		only:     tubes,
	},
	{
		ID: "conversion_papers_missing", Severity: Medium, Subject: OnFixture,
		Trigger:  "rewired luminaire without its papers: high where NFPA 70 applies (listed kit), else medium (converter's declaration)",
		Why:      "The luminaire's approval is void; whoever rewired it answers for it.",
		Basis:    "inspectors' association on luminaire conversion kits, 2010",
		Remedy:   "Use a listed kit; file the listing or the declaration.",
		Cautions: []string{"CA-10"},
		Asks:     []Field{FieldFixturePapers},
		fixture:  conversionPapersMissing,
		only:     rewired,
	},
}

// How a tube luminaire is wired now.
const (
	fedOne       = "one"
	fedBoth      = "both"
	fedGear      = "gear"
	fedDriver    = "driver"    // by a driver made for the tube
	fedConverted = "converted" // without the old gear, the ends not told
)

// fed is how a luminaire's tube holders are wired now, "" where that is not known.
func (v *fixtureView) fed() string {
	switch {
	case v.f.Conversion == "external_driver":
		return fedDriver
	case v.f.FedEnds == fedOne || v.f.FedEnds == fedBoth || v.f.FedEnds == fedGear:
		return v.f.FedEnds
	case v.f.Conversion == "none":
		return fedGear
	case v.converted():
		return fedConverted
	case v.driver != nil && v.driver.kind.ledDriver():
		return fedDriver
	}
	return ""
}

// converted reports whether the luminaire was rewired.
func (v *fixtureView) converted() bool {
	switch v.f.Conversion {
	case "gear_bypassed", "gear_removed", "external_driver":
		return true
	}
	return false
}

// onBallast reports whether a ballast feeds the luminaire.
func (v *fixtureView) onBallast() bool {
	return v.driver != nil && (v.driver.kind == magneticBallast || v.driver.kind == electronicBallast)
}

func singleEndedTubeInShuntedHolders(v *fixtureView) {
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil || l.model.TubeWiring != "single_ended" {
			continue
		}
		shunted := v.f.Shunted
		if shunted == nil {
			shunted = v.m.Shunted
		}
		switch {
		case is(shunted):
			f := v.foundLamp(l, Danger, certain)
			f.say("%s fed at one end %s in holders whose contacts are joined: a dead short on the mains.", plural(l.count, "tube"), v.verb(l.count, "sits", "sit"))
			f.shows("tube and holders", "tube: fed at one end; holder contacts: joined")
		case shunted == nil && v.f.Model != nil:
			v.ask(FieldFittingShunted, aboutFitting(v.m))
		case shunted == nil:
			v.ask(FieldFixtureShunted, v.aboutPlace())
		}
	}
}

func tubeWiringDiffers(v *fixtureView) {
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil {
			continue
		}
		need, tube := "", "LED tube"
		switch {
		case l.model.Technology == loading.Fluorescent:
			need, tube = fedGear, "fluorescent lamp"
		case l.model.Technology != loading.LEDTube:
			continue
		case l.model.TubeWiring == "single_ended":
			need = fedOne
		case l.model.TubeWiring == "double_ended":
			need = fedBoth
		case l.model.TubeWiring == "gear_fed":
			need = fedGear
		case l.model.TubeWiring == "external_driver":
			need = fedDriver
		default:
			v.ask(FieldTubeWiring, aboutLamp(l.model))
			continue
		}
		fed := v.fed()
		switch {
		case fed == need:
		case fed == "" && l.class == fluorescent && v.onBallast():
			// a lamp on the ballast it was made for, and no word of a conversion
		case fed == "" || fed == fedConverted && need != fedGear:
			v.ask(FieldFixtureFedEnds, v.aboutPlace())
		default:
			f := v.foundLamp(l, Danger, certain)
			f.say("%s %s %s in a luminaire wired %s.", plural(l.count, tube), needWords[need], v.verb(l.count, "sits", "sit"), fedWords[fed])
			f.shows("tube and wiring", "tube: "+needWords[need]+"; luminaire wired "+fedWords[fed])
		}
	}
}

var needWords = map[string]string{
	fedOne: "to be fed at one end", fedBoth: "to be fed at both ends", fedGear: "to be fed by a ballast", fedDriver: "to be fed by a driver of its own",
}

var fedWords = map[string]string{
	fedOne: "to feed one end", fedBoth: "to feed both ends", fedGear: "through its ballast", fedDriver: "from a driver", fedConverted: "without its ballast",
}

func convertedWithoutLabel(v *fixtureView) {
	if !v.converted() {
		return
	}
	switch {
	case v.f.ConversionLabel == nil:
		v.ask(FieldFixtureLabel, v.aboutPlace())
	case !*v.f.ConversionLabel:
		f := v.found(High, certain)
		f.say("The gear of this luminaire was bypassed or removed, and no label says so.")
		f.shows("luminaire", "conversion: "+strings.ReplaceAll(v.f.Conversion, "_", " ")+"; label: none")
	}
}

func tubeGearNotListed(v *fixtureView) {
	if !v.onBallast() || v.converted() || v.fed() == fedOne || v.fed() == fedBoth {
		return
	}
	for i := range v.lamps {
		l := &v.lamps[i]
		if l.model == nil || l.model.Technology != loading.LEDTube || l.model.TubeWiring != "gear_fed" {
			continue
		}
		wound := v.driver.kind == magneticBallast
		switch {
		case !wound && isNot(l.model.HighFrequency):
			f := v.foundLamp(l, High, certain)
			f.say("%s for wound ballasts %s on an electronic ballast.", plural(l.count, "LED tube"), v.verb(l.count, "hangs", "hang"))
			f.shows("tube and ballast", "tube for high frequency: no; ballast: electronic")
			continue
		case wound && (v.f.Starter == "glow" || v.f.Starter == "electronic"):
			f := v.foundLamp(l, High, certain)
			f.say("%s %s with the starter of a fluorescent lamp; it takes a dummy starter.", plural(l.count, "LED tube"), v.verb(l.count, "works", "work"))
			f.shows("tube and starter", "tube: LED, fed by the ballast; starter: "+v.f.Starter)
			continue
		case wound && v.f.Starter == "":
			v.ask(FieldFixtureStarter, v.aboutPlace())
		}
		if v.driver.d.Model == nil {
			continue // its model is asked for
		}
		if ok, _ := v.driver.listed(l); ok {
			continue
		}
		if l.model.Key != (loading.Key{}) && v.by.lists(l.model.Key) {
			f := v.foundLamp(l, High, certain)
			f.say("%s %s on %s, which is not on the tube's list of ballasts.", plural(l.count, "LED tube"), v.verb(l.count, "hangs", "hang"), v.driver.name())
			f.shows("tube and ballast", "ballasts are listed for this tube; this one is not among them")
			continue
		}
		v.ask(FieldPairing, About{Kind: AboutPairing, Key: l.model.Key, With: v.driver.g.Key, Index: -1, Name: l.model.Name})
	}
}

// lists reports whether pairings name any gear for a lamp, so that a list of its maker is on record. The set is made
// once for one map of pairings.
func (c *Checker) lists(lamp loading.Key) bool {
	at := reflect.ValueOf(c.sys.Pairings).Pointer()
	if c.withList == nil || c.withListOf != at || c.withListLen != len(c.sys.Pairings) {
		c.withList = make(map[loading.Key]struct{})
		c.withListOf, c.withListLen = at, len(c.sys.Pairings)
		for k := range c.sys.Pairings {
			if k.Gear != (loading.Key{}) {
				c.withList[k.Lamp] = struct{}{}
			}
		}
	}
	_, ok := c.withList[lamp]
	return ok
}

func conversionPapersMissing(v *fixtureView) {
	if !v.converted() || is(v.m.ListedRetrofit) {
		return
	}
	severity, what := Medium, "the converter's declaration"
	if v.by.sys.WiringRules == loading.NFPA70 {
		severity, what = High, "the listing of its kit"
	}
	switch {
	case v.f.ConversionPaper == nil:
		v.askAt(FieldFixturePapers, v.aboutPlace(), severity, false)
	case !*v.f.ConversionPaper:
		f := v.found(severity, certain)
		f.say("This luminaire was rewired, and %s is not on file.", what)
		f.shows("luminaire", "conversion: "+strings.ReplaceAll(v.f.Conversion, "_", " ")+"; papers: none")
	}
}

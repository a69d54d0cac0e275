package retrofit

import (
	"strings"

	"lampward/calc/loading"
)

// A Caution is what people must know before they work at a place. It is never a finding.
type Caution struct {
	ID   string `json:"id"`
	When string `json:"when"` // when it is shown
	Text string `json:"text"`
}

var cautions = []Caution{
	{"CA-01", "any job that opens gear",
		"Switch off, lock off and tag the supply. Prove the tester on a known source, prove every conductor dead, then prove the tester again. " +
			"A non-contact pen is no proof. Follow the rules for work on electrical equipment that hold here (from memory: Electricity at Work " +
			"Regulations and HSE GS38; OSHA 1910.333)."},
	{"CA-02", "the luminaire was on",
		"Let it cool first. Halogen and discharge lamps burn skin and scorch what they touch, and their glass can break when hot. Do not touch a " +
			"quartz bulb with bare fingers."},
	{"CA-03", "discharge gear or drivers",
		"Wait for capacitors to discharge and check that less than about 50 V is left. Ignitors give pulses of kilovolts. Never open the output of a " +
			"constant-current driver while it is live, and never plug a module into it."},
	{"CA-04", "out of reach from a step",
		"Plan the work at height: the right platform, a second person, nobody in the drop zone. Do not lift heavy gear from a ladder."},
	{"CA-05", "unless the register says clear",
		"Asbestos may be present. Look at the register or have a survey made before lifting tiles, drilling, or touching flash guards and textured " +
			"finishes."},
	{"CA-06", "fluorescent, compact fluorescent and discharge lamps",
		"These lamps hold mercury. Keep them whole, box them and hand them to recycling; none goes into a bin. If one breaks: leave, air the room, " +
			"sweep with card and tape, use no vacuum cleaner."},
	{"CA-07", "old ballasts not marked free of PCB",
		"The capacitor of this ballast may hold PCB, or DEHP after that. Wear gloves; never open it. A leaking one goes to a specialist for " +
			"incineration."},
	{"CA-08", "emergency luminaires",
		"Do not modify this luminaire unless the change is certified with it. Test its function after the work and its full duration when the battery " +
			"is charged, and write both down; monthly function and yearly duration tests go on as before."},
	{"CA-09", "always",
		"What is shown here is a screening estimate from the record. The work is for a licensed or otherwise competent person, with the permit the " +
			"site asks for. Local rules, the maker's instructions and the marking on the gear come first. Whoever converts a luminaire answers for it."},
	{"CA-10", "rewiring a listed or approved luminaire",
		"Rewiring can void the luminaire's listing or approval. Use a kit that is listed for it, fit the label, and file the papers."},
	{"CA-11", "a change to dimming",
		"Reset and commission the dimmer after the change, check that it has the neutral it needs, and write down the pair that was tested."},
	{"CA-12", "outdoor, wet or explosive places",
		"Keep the degree of protection: seals, glands and zones. Think of lightning and surge. Equipment for explosive atmospheres is for its own " +
			"specialists."},
	{"CA-13", "people below",
		"Clear the area below: glass, heavy lamps and tools fall."},
	{"CA-14", "work from a lift or tower",
		"Only trained people operate it, and never alone."},
	{"CA-15", "more than one supply",
		"More than one supply reaches this place: isolate every point listed. Battery units and central systems come on when the mains fail; time " +
			"switches, sensors and remote controls switch on by themselves; control pairs are at mains unless marked SELV; a neutral can be live. Tell " +
			"the fire warden, allow 24 h to recharge, and test the function before leaving."},
}

// Cautions returns all cautions in order of their ids as they are shown.
func Cautions() []Caution {
	out := make([]Caution, len(cautions))
	copy(out, cautions)
	return out
}

// CautionOf returns the caution with the given id.
func CautionOf(id string) (Caution, bool) {
	for _, c := range cautions {
		if c.ID == id {
			return c, true
		}
	}
	return Caution{}, false
}

// A Job is what is to be done at a place, and what the place is like as far as loading.System does not say. What is
// unknown shows its caution.
type Job struct {
	OpensGear     bool   // gear, a luminaire or an accessory is opened
	Rewires       bool   // the luminaire is converted
	DimmingChange bool   // a dimmer, or what hangs on one, changes
	WasOn         *bool  // the luminaire was on just before
	Reach         string // floor, steps, tower, lift, rope
	Asbestos      string // clear, presumed, present, not_surveyed
	PeopleBelow   *bool
}

// JobCautions returns the cautions for a job at a luminaire, a driver with all it feeds, a dimmer or a circuit.
func JobCautions(sys *loading.System, at Subject, job Job) []Caution {
	p := placeOf(sys, at)
	show := map[string]bool{
		"CA-01": job.OpensGear || job.Rewires,
		"CA-02": job.WasOn == nil || *job.WasOn,
		"CA-03": p.storesCharge,
		"CA-04": job.Reach != "floor",
		"CA-05": job.Asbestos != "clear",
		"CA-06": p.mercury,
		"CA-07": p.pcb,
		"CA-08": p.emergency,
		"CA-09": true,
		"CA-10": job.Rewires || p.converted,
		"CA-11": job.DimmingChange,
		"CA-12": p.wet,
		"CA-13": job.Reach != "floor" && (job.PeopleBelow == nil || *job.PeopleBelow),
		"CA-14": job.Reach == "lift" || job.Reach == "tower",
		"CA-15": p.supplies,
	}
	var out []Caution
	for _, c := range cautions {
		if show[c.ID] {
			out = append(out, c)
		}
	}
	return out
}

// A place is what the cautions need to know of all that hangs on a subject.
type place struct{ storesCharge, mercury, pcb, emergency, converted, wet, supplies bool }

func placeOf(sys *loading.System, at Subject) place {
	var p place
	within := func(n, of int) bool { return n >= 0 && n < of }
	circuit := func(n int) {
		if within(n, len(sys.Circuits)) {
			c := &sys.Circuits[n]
			p.supplies = p.supplies || c.Neutral == "borrowed" || c.Neutral == "common" || c.CentralBattery == "ac" || c.CentralBattery == "dc"
		}
	}
	controls := func(list []loading.Controlled) {
		for _, c := range list {
			p.supplies = p.supplies || c.Path == loading.Signal
		}
	}
	driver := func(n int) {
		if !within(n, len(sys.Drivers)) {
			return
		}
		d := &sys.Drivers[n]
		kind := kindOf(d.Model)
		p.storesCharge = p.storesCharge || kind != magneticTransformer && kind != electronicTransformer
		p.emergency = p.emergency || kind == emergencyPack
		p.pcb = p.pcb || mayHoldPCB(sys, d.Model, kind)
		circuit(d.Circuit)
		controls(d.Controls)
	}
	fixture := func(f *loading.Fixture) {
		driver(f.Driver)
		if !within(f.Driver, len(sys.Drivers)) && !f.GearNone {
			p.storesCharge = true // nobody knows what gear is there
			for _, g := range f.Lamps {
				if class := classOf(g.Model); class == fluorescent || class == discharge || class == classUnknown {
					p.pcb = true
				}
			}
		}
		circuit(f.Circuit)
		controls(f.Controls)
		p.mercury = p.mercury || f.LampsUnknown
		for _, g := range f.Lamps {
			class := classOf(g.Model)
			p.mercury = p.mercury || class == fluorescent || class == discharge || class == classUnknown ||
				g.Model.HazardousContent == "mercury"
			p.storesCharge = p.storesCharge || class == discharge
		}
		p.emergency = p.emergency || f.EmergencyMode == "maintained" || f.EmergencyMode == "non_maintained" ||
			f.EmergencyMode == "" && f.Model != nil && is(f.Model.Emergency)
		p.converted = p.converted || strings.HasPrefix(f.Conversion, "gear_") || f.Conversion == "external_driver"
		p.wet = p.wet || f.Zone != "" && f.Zone != "dry"
		p.supplies = p.supplies || f.FurtherFeeds > 0
	}
	switch at.Kind {
	case OnFixture:
		if within(at.Index, len(sys.Fixtures)) {
			fixture(&sys.Fixtures[at.Index])
		}
	case OnDriver:
		driver(at.Index)
		for i := range sys.Fixtures {
			if sys.Fixtures[i].Driver == at.Index {
				fixture(&sys.Fixtures[i])
			}
		}
	case OnDimmer:
		for i := range sys.Drivers {
			if controlled(sys.Drivers[i].Controls, at.Index) {
				driver(i)
			}
		}
		for i := range sys.Fixtures {
			f := &sys.Fixtures[i]
			if controlled(f.Controls, at.Index) || within(f.Driver, len(sys.Drivers)) && controlled(sys.Drivers[f.Driver].Controls, at.Index) {
				fixture(f)
			}
		}
		if within(at.Index, len(sys.Dimmers)) {
			circuit(sys.Dimmers[at.Index].Circuit)
		}
	case OnCircuit:
		circuit(at.Index)
		for i := range sys.Fixtures {
			f := &sys.Fixtures[i]
			if f.Circuit == at.Index || within(f.Driver, len(sys.Drivers)) && sys.Drivers[f.Driver].Circuit == at.Index {
				fixture(f)
			}
		}
	}
	p.supplies = p.supplies || p.emergency
	return p
}

func controlled(list []loading.Controlled, dimmer int) bool {
	for _, c := range list {
		if c.Dimmer == dimmer {
			return true
		}
	}
	return false
}

// Last years in which ballast capacitors were made with PCB, from memory: the United States, and elsewhere.
const (
	lastPCBYearUS        = 1979
	lastPCBYearElsewhere = 1989
)

func mayHoldPCB(sys *loading.System, g *loading.Gear, kind gearKind) bool {
	if kind != magneticBallast && kind != hidGear && kind != gearUnknown || g != nil && is(g.PCBFree) {
		return false
	}
	last := lastPCBYearElsewhere
	if sys.WiringRules == loading.NFPA70 {
		last = lastPCBYearUS
	}
	return g == nil || g.MadeYear == nil || *g.MadeYear <= last
}

package retrofit

import (
	"math"

	"lampward/calc/loading"
)

// gearKind is a loading.Gear's Kind, told apart once.
type gearKind uint8

const (
	gearUnknown gearKind = iota
	electronicTransformer
	magneticTransformer
	constantVoltage
	constantCurrent
	electronicBallast
	magneticBallast
	hidGear
	emergencyPack
)

func kindOf(g *loading.Gear) gearKind {
	if g == nil {
		return gearUnknown
	}
	switch g.Kind {
	case loading.ElectronicTransformer:
		return electronicTransformer
	case loading.MagneticTransformer:
		return magneticTransformer
	case loading.LEDConstantVoltage:
		return constantVoltage
	case loading.LEDConstantCurrent:
		return constantCurrent
	case loading.ElectronicBallast:
		return electronicBallast
	case loading.MagneticBallast:
		return magneticBallast
	case loading.HIDGearWithIgnitor:
		return hidGear
	case loading.EmergencyPack:
		return emergencyPack
	}
	return gearUnknown
}

// word names a kind of gear in a sentence.
func (k gearKind) word() string {
	return [...]string{"control gear", "electronic transformer", "magnetic transformer", "LED driver", "constant-current driver",
		"electronic ballast", "magnetic ballast", "discharge gear", "emergency pack"}[k]
}

// voltageSource is gear that lamps hang on in parallel at one voltage.
func (k gearKind) voltageSource() bool { return k >= electronicTransformer && k <= constantVoltage }

// wound is gear of copper on iron.
func (k gearKind) wound() bool {
	return k == magneticTransformer || k == magneticBallast || k == hidGear
}

// ledDriver is gear made for LED alone.
func (k gearKind) ledDriver() bool { return k == constantVoltage || k == constantCurrent }

// lampClass is a lamp's technology as far as the rules tell them apart.
type lampClass uint8

const (
	classUnknown lampClass = iota
	led
	filament
	fluorescent
	discharge
)

func classOf(m *loading.Lamp) lampClass {
	if m == nil {
		return classUnknown
	}
	switch m.Technology {
	case loading.LEDLamp, loading.LEDTube, loading.LEDModule:
		return led
	case loading.Halogen, loading.Incandescent:
		return filament
	case loading.CFL, loading.Fluorescent:
		return fluorescent
	case loading.MetalHalide, loading.Sodium:
		return discharge
	}
	return classUnknown
}

func (c lampClass) word() string {
	return [...]string{"lamp", "LED lamp", "filament lamp", "fluorescent lamp", "discharge lamp"}[c]
}

// A view is what is common to the places rules look at.
type view struct {
	by       *Checker
	subject  Subject // where findings are shown
	level    Kind    // what it is
	link     links
	proposed bool // something proposed hangs on it
	quiet    bool // its gear kind is unknown: it asks only that
}

// lampLoad is the lamps of one model on one driver or in one luminaire.
type lampLoad struct {
	model    *loading.Lamp // nil: unknown
	class    lampClass
	count    int
	dark     int
	proposed bool
	unproven bool    // some of them lack ProvenHours without a failure
	watts    float64 // each
	known    bool    // watts are
}

func (l *lampLoad) working() int { return l.count - l.dark }

// lowVoltage reports whether the lamp is for an extra-low voltage supply, as far as it says.
func (l *lampLoad) lowVoltage() bool {
	if l.model == nil {
		return false
	}
	switch l.model.Supply {
	case loading.SupplyELVAC, loading.SupplyELVDC, loading.SupplyELVACDC:
		return true
	case "":
		v, ok := positive(l.model.RatedV)
		return !ok || v <= 60
	}
	return false
}

// load is what lamps add up to. A sum with a lamp of unknown power in it has no upper end.
type load struct {
	count, working       int
	led, ledWorking      int
	filament, otherKinds int // otherKinds: neither LED nor filament, unknown ones included
	w, workingW          span
	va, workingVA        span
	ledW, ledWorkingW    span
	largestW             float64 // of the working lamps
	largestLED           bool
	unseen               bool // holders nobody has looked at
}

// add puts one lampLoad into the sums.
func (s *load) add(l *lampLoad) {
	n := l.working()
	s.count += l.count
	s.working += n
	w, working := nothingKnown, nothingKnown
	if l.known {
		w, working = exactly(float64(l.count)*l.watts), exactly(float64(n)*l.watts)
		if n > 0 && (l.watts > s.largestW || l.watts == s.largestW && l.class == led) {
			s.largestW, s.largestLED = l.watts, l.class == led
		}
	} else if n == 0 {
		working = span{}
	}
	s.w, s.workingW = s.w.plus(w), s.workingW.plus(working)
	inverse := l.inversePowerFactor()
	s.va, s.workingVA = s.va.plus(w.divided(inverse)), s.workingVA.plus(working.divided(inverse))
	switch l.class {
	case led:
		s.led += l.count
		s.ledWorking += n
		s.ledW, s.ledWorkingW = s.ledW.plus(w), s.ledWorkingW.plus(working)
	case filament:
		s.filament += l.count
	default:
		s.otherKinds += l.count
	}
}

// inversePowerFactor is 1/PF: 1 for a filament, the stated one, the plausible range of an LED lamp, and no less than
// 1 for any other.
func (l *lampLoad) inversePowerFactor() span {
	if l.class == filament {
		return exactly(1)
	}
	if l.model != nil {
		if pf, ok := positive(l.model.PowerFactor); ok && pf <= 1 && pf >= 0.01 {
			return exactly(1 / pf)
		}
	}
	if l.class == led {
		return span{1 / ledPowerFactor.Hi, 1 / ledPowerFactor.Lo, ledPowerFactor.Mark}
	}
	return span{1, math.Inf(1), ""}
}

// divided multiplies by an inverse, keeping 0 x infinity at 0.
func (s span) divided(inverse span) span {
	return span{product(s.lo, inverse.lo), product(s.hi, inverse.hi), weaker(s.mark, inverse.mark)}
}

func product(a, b float64) float64 {
	if a == 0 || b == 0 {
		return 0
	}
	return a * b
}

// gatherLamp turns a lamp group into a lampLoad.
func gatherLamp(g *loading.LampGroup) lampLoad {
	l := lampLoad{model: g.Model, class: classOf(g.Model), proposed: g.Proposed}
	l.count = min(max(g.Count, 0), 1e6)
	l.dark = min(max(g.Dark, 0), l.count)
	if g.Model != nil {
		l.watts, l.known = known(g.Model.PowerW)
	}
	h, ok := known(g.HoursFitted)
	l.unproven = g.Proposed || !ok || h <= ProvenHours || g.FailureKnown
	return l
}

// sameLamp reports whether two lampLoads are of one model.
func sameLamp(a, b *loading.Lamp) bool {
	return a == b || a != nil && b != nil && a.Key == b.Key && a.Key != loading.Key{}
}

// A driverView is a driver with the lamps on it.
type driverView struct {
	view
	d        *loading.Driver
	g        *loading.Gear // never nil; the empty Gear where the model is unknown
	kind     gearKind
	fixtures []int32    // fed by it
	lamps    []lampLoad // by model
	load     load
	lit      load // what is lit at the least: the smallest switched group, its working lamps
	circuit  *loading.Circuit
}

// A fixtureView is a luminaire.
type fixtureView struct {
	view
	f       *loading.Fixture
	m       *loading.Fitting // never nil; the empty Fitting where the model is unknown
	driver  *driverView      // nil: none known, or none there
	bare    bool             // somebody looked: no control gear
	circuit *loading.Circuit
	lamps   []lampLoad
}

// traits are what a luminaire has that few have.
func (v *fixtureView) traits() (t trait) {
	for i := range v.lamps {
		if m := v.lamps[i].model; m != nil && (m.Technology == loading.LEDTube || m.Technology == loading.Fluorescent) {
			t |= tubes
		}
	}
	if v.f.Conversion != "" && v.f.Conversion != "none" {
		t |= rewired
	}
	if is(v.m.Discharge) || v.driver != nil && v.driver.kind == hidGear {
		t |= forDischarge
	}
	if v.emergency() {
		t |= forEmergency
	}
	if v.bare {
		t |= straight
	}
	if v.proposed || v.f.Zone != "" && v.f.Zone != "dry" {
		t |= wet
	}
	return t
}

// A dimmerView is a dimmer or switch with what hangs on it.
type dimmerView struct {
	view
	d       *loading.Dimmer
	m       *loading.Control // never nil; the empty Control where the model is unknown
	members []member
	circuit *loading.Circuit
}

// A member is one driver, or one luminaire without a driver, behind a dimmer.
type member struct {
	driver     *driverView  // or
	fixture    *fixtureView // straight on the circuit, or its gear unknown
	controlled *loading.Controlled
}

// signal reports whether the dimmer acts through a control pair or bus instead of the load's current.
func (m *member) signal() bool { return m.controlled.Path == loading.Signal }

// A circuitView is a circuit with what hangs on it.
type circuitView struct {
	view
	c        *loading.Circuit
	drivers  []int32 // fed by it
	fixtures []int32 // fed by it without a driver, or their gear unknown
}

var (
	noGear    loading.Gear
	noFitting loading.Fitting
	noControl loading.Control
)

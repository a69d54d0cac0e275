package retrofit

import (
	"math"

	"lampward/calc/loading"
)

// tolerance is how far past a limit a computed value must lie to fail it, relative: a sum of nameplate numbers that
// equals its limit is not above it.
const tolerance = 1e-9

// blockingFactor is how far both ends of a rule-of-thumb range must fail before a finding on it refuses anything.
const blockingFactor = 1.5

// Mark says how well a range is founded.
type Mark string

// Marks of a range.
const (
	FromSource   Mark = "a" // stated by a source
	FromStandard Mark = "b" // of a standard or handbook, from memory
	FromPractice Mark = "c" // common practice of the trade, no source
)

// A Range is what is plausible for a field that nobody has read.
type Range struct {
	Field Field   `json:"field"`
	What  string  `json:"what"`
	Lo    float64 `json:"lo"`
	Hi    float64 `json:"hi"`
	Unit  string  `json:"unit"`
	Mark  Mark    `json:"mark"`
}

// The plausible ranges.
var (
	transformerMinimum = Range{FieldGearMinLoad, "minimum load of an electronic transformer, share of its rating", loading.ElectronicMinShareLow, loading.ElectronicMinShareHigh, "", FromPractice}
	ledPowerFactor     = Range{FieldLampPowerFactor, "power factor of an LED lamp", loading.LEDPowerFactorLow, loading.LEDPowerFactorHigh, "", FromPractice}
	woundRegulation    = Range{FieldRegulation, "regulation of a wound transformer", loading.RegulationLowPct, loading.RegulationHighPct, "%", FromStandard}
	woundEfficiency    = Range{FieldEfficiency, "efficiency of wound gear", loading.WoundEfficiencyLow, loading.WoundEfficiencyHigh, "", FromStandard}
	moduleHot          = Range{FieldForwardVHot, "lowest voltage of a hot module, share of the typical one", 1 - loading.ModuleVoltageSpread, 1 + loading.ModuleVoltageSpread, "", FromPractice}
	moduleCold         = Range{FieldForwardVCold, "highest voltage of a module at a cold start, share of the typical one", (1 - loading.ModuleVoltageSpread) * (1 + loading.ModuleColdRise), (1 + loading.ModuleVoltageSpread) * (1 + loading.ModuleColdRise), "", FromPractice}
	currentTolerance   = Range{FieldCurrentTolerance, "tolerance of a driver's current", 0, loading.DriverCurrentTolerancePct, "%", FromStandard}
	dimmerLEDShare     = Range{FieldDimmerLEDMaxLoad, "rating of a dimmer for LED lamps, share of its filament rating", loading.DimmerLEDShareLow, loading.DimmerLEDShareHigh, "", FromPractice}
)

// Ranges returns every plausible range the rules use.
func Ranges() []Range {
	return []Range{transformerMinimum, ledPowerFactor, woundRegulation, woundEfficiency, electronicEfficiency, moduleHot, moduleCold, currentTolerance, dimmerLEDShare}
}

// A span is a number known to lie between two ends. Ends that come from a plausible range carry its mark; ends that
// are certain (a sum of what is known, with no upper end where a part is not) carry none.
type span struct {
	lo, hi float64
	mark   Mark
}

var nothingKnown = span{0, math.Inf(1), ""}

func exactly(x float64) span { return span{x, x, ""} }

// times scales a range by a known number.
func (r Range) times(x float64) span { return span{x * r.Lo, x * r.Hi, r.Mark} }

func (s span) exact() bool { return s.lo == s.hi }

func (s span) plus(t span) span { return span{s.lo + t.lo, s.hi + t.hi, weaker(s.mark, t.mark)} }

func (s span) scaled(k float64) span { return span{s.lo * k, s.hi * k, s.mark} }

// weaker returns the less well founded of two marks.
func weaker(a, b Mark) Mark {
	if b == "" || a > b {
		return a
	}
	return b
}

// A judgement is the outcome of a comparison.
type judgement struct {
	fails  bool // at both ends
	open   bool // at one end only: a missing fact decides
	sure   Sureness
	mark   Mark
	excess float64 // times the limit, at the end that favours the gear
}

// certain is a judgement that rests on recorded facts and has no number.
var certain = judgement{fails: true, sure: Recorded}

// byThumb is a judgement against a rule of thumb.
func byThumb(excess float64) judgement {
	return judgement{fails: true, sure: Screening, excess: excess}
}

// above judges "value > limit".
func above(value, limit span) judgement {
	return judged(value.lo, limit.hi, value.hi, limit.lo, weaker(value.mark, limit.mark))
}

// below judges "value < limit".
func below(value, limit span) judgement {
	return judged(limit.lo, value.hi, limit.hi, value.lo, weaker(value.mark, limit.mark))
}

// judged compares big > small at the end that favours the gear and at the other.
func judged(kindBig, kindSmall, harshBig, harshSmall float64, mark Mark) judgement {
	if exceeds(kindBig, kindSmall) {
		j := judgement{fails: true, sure: Recorded, mark: mark, excess: ratio(kindBig, kindSmall)}
		if mark != "" {
			j.sure = OnRange
		}
		return j
	}
	return judgement{open: exceeds(harshBig, harshSmall)}
}

func exceeds(a, b float64) bool { return a > b*(1+tolerance) }

// ratio is a/b kept finite: a limit of 0 is passed a thousandfold.
func ratio(a, b float64) float64 {
	if b <= 0 || a > 1000*b {
		return 1000
	}
	return a / b
}

// blocks reports whether a failed judgement refuses a proposal, if its rule can.
func (j judgement) blocks() bool {
	switch j.sure {
	case Recorded:
		return true
	case OnRange:
		return j.mark == FromSource || j.mark == FromStandard || j.excess >= blockingFactor*(1-tolerance)
	}
	return false
}

// Bounds of a usable number on a nameplate. What lies outside cannot be a rating of lighting gear: it is treated as
// not known.
const (
	smallest = 1e-6
	largest  = 1e9
)

// known returns a recorded number that cannot be negative.
func known(p *float64) (float64, bool) {
	if p == nil || !(*p == 0 || *p >= smallest && *p <= largest) {
		return 0, false
	}
	return *p, true
}

// positive returns a recorded number that must be above 0.
func positive(p *float64) (float64, bool) {
	x, ok := known(p)
	return x, ok && x > 0
}

// degrees returns a recorded temperature, degC.
func degrees(p *float64) (float64, bool) {
	if p == nil || !(*p > -274 && *p < 1000) {
		return 0, false
	}
	return *p, true
}

func is(p *bool) bool    { return p != nil && *p }
func isNot(p *bool) bool { return p != nil && !*p }

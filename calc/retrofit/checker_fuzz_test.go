package retrofit

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"lampward/calc/loading"
)

// A wild makes systems nobody could record: any number, any word, any index, anything left out.
type wild struct{ *rand.Rand }

func (w wild) number() *float64 {
	odd := []float64{0, -1, 1e-320, 1e-7, 1e9, 1e300, math.MaxFloat64, math.Inf(1), math.Inf(-1), math.NaN()}
	switch w.IntN(10) {
	case 0, 1, 2:
		return nil
	case 3:
		return &odd[w.IntN(len(odd))]
	}
	x := math.Exp(12*w.Float64() - 3)
	return &x
}

func (w wild) count() int {
	odd := []int{0, -1, 1, 2, 3, 6, 1000, math.MaxInt, math.MinInt}
	return odd[w.IntN(len(odd))]
}

func (w wild) whole() *int {
	if w.IntN(3) == 0 {
		return nil
	}
	n := w.count()
	return &n
}

func (w wild) fact() *bool {
	switch w.IntN(3) {
	case 0:
		return nil
	case 1:
		return yes()
	}
	return no()
}

func (w wild) word(words ...string) string {
	n := w.IntN(len(words) + 2)
	switch {
	case n < len(words):
		return words[n]
	case n == len(words):
		return ""
	}
	return "ÿ%s\x00"
}

func (w wild) key() loading.Key { return loading.Key{byte(w.IntN(5))} }

func (w wild) index(n int) int { return w.IntN(n+3) - 1 }

func (w wild) dimming() []string {
	switch w.IntN(3) {
	case 0:
		return nil
	case 1:
		return []string{}
	}
	return []string{w.word(loading.LeadingEdge, loading.TrailingEdge, loading.PhaseCut, loading.DALI, loading.Analogue0to10V)}
}

func (w wild) lamp() *loading.Lamp {
	if w.IntN(8) == 0 {
		return nil
	}
	return &loading.Lamp{
		Key: w.key(), Technology: w.word(loading.Halogen, loading.Incandescent, loading.CFL, loading.Fluorescent, loading.MetalHalide, loading.LEDLamp, loading.LEDTube, loading.LEDModule),
		Cap: w.word("E27", "E40"), Supply: w.word(loading.SupplyMainsAC, loading.SupplyELVAC, loading.SupplyELVDC, loading.SupplyELVACDC, loading.SupplyConstantCurrent, loading.SupplyGear),
		RatedV: w.number(), MaxV: w.number(), NominalMA: w.number(), MaxMA: w.number(), PowerW: w.number(), PowerFactor: w.number(),
		ForwardV: w.number(), ForwardVCold: w.number(), ForwardVHot: w.number(), Bridge: w.fact(), HighFrequency: w.fact(), Dimming: w.dimming(),
		RepetitivePeakA: w.number(), InrushA: w.number(), InrushUS: w.number(), SuitableEnclosed: w.fact(), TubeWiring: w.word("single_ended", "double_ended", "gear_fed", "external_driver"),
		HIDGearCompatible: w.fact(), MassG: w.number(), Approval: w.fact(), FactSource: w.word(loading.DataSheet),
	}
}

func (w wild) gear() *loading.Gear {
	if w.IntN(8) == 0 {
		return nil
	}
	g := &loading.Gear{
		Key: w.key(), Kind: w.word(loading.ElectronicTransformer, loading.MagneticTransformer, loading.LEDConstantVoltage, loading.LEDConstantCurrent, loading.ElectronicBallast,
			loading.MagneticBallast, loading.HIDGearWithIgnitor, loading.EmergencyPack),
		Toroid: w.fact(), InputMinV: w.number(), InputMaxV: w.number(), InputMinHz: w.number(), InputMaxHz: w.number(), InputDC: w.fact(),
		OutputForm: w.word(loading.OutputHFAC, loading.OutputMainsAC, loading.OutputDC), OutputV: w.number(), NoLoadV: w.number(), Outputs: w.whole(), OutputMaxW: w.number(),
		OutputMinMA: w.number(), OutputMaxMA: w.number(), CurrentTolerance: w.number(), ComplianceMinV: w.number(), ComplianceMaxV: w.number(), MinLoadW: w.number(),
		MaxLoadW: w.number(), MaxLoadVA: w.number(), LEDMaxLoadW: w.number(), LEDMaxCount: w.whole(), RegulationPct: w.number(), Efficiency: w.number(), PowerFactor: w.number(),
		InrushA: w.number(), InrushUS: w.number(), LeakageMA: w.number(), UnitsPerBreaker: w.whole(), UnitsBreakerA: w.number(), UnitsBreakerCurve: w.word("B", "C", "D"),
		OutputLeadM: w.number(), TaC: w.number(), TcC: w.number(), Dimming: w.dimming(), AnalogueRole: w.word(loading.Sinks, loading.Sources), Separation: w.word("selv", "none"),
		ThermalProtection: w.fact(), InsulationCovering: w.fact(), MadeYear: w.whole(),
	}
	for range w.IntN(4) {
		p := loading.CurvePoint{}
		if x := w.number(); x != nil {
			p.AirC = *x
		}
		if x := w.number(); x != nil {
			p.SharePct = *x
		}
		g.Derating = append(g.Derating, p)
	}
	return g
}

func (w wild) controls(n int) []loading.Controlled {
	var out []loading.Controlled
	for range w.IntN(3) {
		out = append(out, loading.Controlled{Dimmer: w.index(n), Path: w.word(loading.PowerPath, loading.Signal), VoltageFound: w.word("none", "elv", "mains")})
	}
	return out
}

func (w wild) system() *loading.System {
	s := &loading.System{Supply: loading.Supply{MainsV: w.number(), MainsHz: w.number(), WiringRules: w.word(loading.IEC60364, loading.NFPA70)}, Proposal: w.IntN(2) == 0}
	nc, nm, nd, nf := w.IntN(3), w.IntN(3), w.IntN(4), w.IntN(6)
	for range nc {
		s.Circuits = append(s.Circuits, loading.Circuit{CircuitFacts: loading.CircuitFacts{
			NominalV: w.number(), Phases: w.whole(), Curve: w.word("B", "C", "D"), RatingA: w.number(), Listed100: w.fact(), RCD: w.word("none", "a"), RCDMA: w.number(),
			Neutral: w.word("own", "common", "borrowed"), CentralBattery: w.word("none", "ac", "dc"),
		}, TripsInYear: w.count()})
	}
	for range nm {
		d := loading.Dimmer{DimmerFacts: loading.DimmerFacts{SetEdge: w.word(loading.LeadingEdge, loading.TrailingEdge), Neutral: w.fact()}, Circuit: w.index(nc), Proposed: w.IntN(5) == 0}
		if w.IntN(6) > 0 {
			d.Model = &loading.Control{
				Key: w.key(), Kind: w.word(loading.LeadingEdge, loading.TrailingEdge, loading.UniversalPhase, loading.DALI, loading.PWMDC, loading.SwitchContact, loading.SwitchElectronic, loading.Contactor),
				Marking: w.word("R", "RL", "RC"), MinLoadW: w.number(), MaxLoadW: w.number(), MaxLoadVA: w.number(), CapacitiveMaxW: w.number(), LEDMinLoadW: w.number(), LEDMaxLoadW: w.number(),
				LEDMaxCount: w.whole(), ChannelMaxA: w.number(), RepetitivePeakA: w.number(), Toroids: w.fact(), NeedsNeutral: w.fact(), ContactA: w.number(), CapacitiveA: w.number(), CapacitiveCount: w.whole(),
			}
		}
		s.Dimmers = append(s.Dimmers, d)
	}
	for range nd {
		s.Drivers = append(s.Drivers, loading.Driver{
			DriverFacts: loading.DriverFacts{
				SetMA: w.number(), Polarity: w.word("right", "reversed"), CableM: w.number(), CableMM2: w.number(), CableClass: w.word("1", "5"), CableRatedA: w.number(), TerminalRatedA: w.number(),
				Segregated: w.fact(), TouchableLive: w.fact(), AirC: w.number(), InsulationOver: w.fact(), InEnclosure: w.fact(), SeparationBefore: w.word("selv", "none"),
			},
			Model: w.gear(), Circuit: w.index(nc), Controls: w.controls(nm), Integral: w.IntN(2) == 0, HeatFailure: w.IntN(2) == 0, FailuresInYear: w.count(), Proposed: w.IntN(5) == 0,
		})
	}
	for range nf {
		f := loading.Fixture{
			FixtureFacts: loading.FixtureFacts{
				SwitchGroup: w.word("a", "b"), Strings: w.whole(), FedEnds: w.word("one", "both", "gear"), Starter: w.word("none", "glow", "dummy"), Earth: w.fact(),
				Conversion: w.word("none", "gear_bypassed", "gear_removed", "external_driver"), ConversionLabel: w.fact(), ConversionPaper: w.fact(), Shunted: w.fact(), TouchableLive: w.fact(),
				InsulationOver: w.fact(), InEnclosure: w.fact(), Zone: w.word("dry", "wet", "bath_0", "pool_2"), EmergencyMode: w.word("none", "maintained"), EmergencySource: w.word("own_battery", "central"),
			},
			GearNone: w.IntN(3) == 0, Driver: w.index(nd), Output: w.count(), Circuit: w.index(nc), FurtherFeeds: w.count(), Controls: w.controls(nm), LampsUnknown: w.IntN(5) == 0, FailuresInYear: w.count(),
			Emergency: loading.EmergencyRecord{Tested: w.IntN(2) == 0, Lamp: w.key(), Gear: w.key(), ChangedLater: w.IntN(2) == 0},
		}
		if w.IntN(3) > 0 {
			f.Model = &loading.Fitting{
				Key: w.key(), Holders: w.whole(), Cap: w.word("E27", "E40"), Shunted: w.fact(), MaxLampMassG: w.number(), MaxLampW: w.number(), Gear: w.word("integral", "remote", "none"), Class: w.word("I", "II", "III"),
				IP: w.word("IP20", "IP65", "IP", "IPX", "ip x", "IP2X"), Enclosed: w.fact(), InsulationRated: w.fact(), FireRated: w.fact(), Discharge: w.fact(), Emergency: w.fact(), ListedRetrofit: w.fact(),
			}
		}
		for range w.IntN(4) {
			f.Lamps = append(f.Lamps, loading.LampGroup{Model: w.lamp(), Count: w.count(), Dark: w.count(), HoursFitted: w.number(), FailureKnown: w.IntN(2) == 0, Proposed: w.IntN(2) == 0})
		}
		s.Fixtures = append(s.Fixtures, f)
	}
	// One key is one model.
	lamps := map[loading.Key]*loading.Lamp{}
	for i := range s.Fixtures {
		for k := range s.Fixtures[i].Lamps {
			g := &s.Fixtures[i].Lamps[k]
			if g.Model == nil || g.Model.Key == (loading.Key{}) {
				continue
			}
			if lamps[g.Model.Key] == nil {
				lamps[g.Model.Key] = g.Model
			}
			g.Model = lamps[g.Model.Key]
		}
	}
	if w.IntN(2) == 0 {
		s.Pairings = map[loading.PairingKey]loading.Pairing{}
		for range w.IntN(20) {
			s.Pairings[loading.PairingKey{Lamp: w.key(), Gear: w.key()}] = loading.Pairing{LeastLamps: w.whole(), MostLamps: w.whole()}
		}
	}
	return s
}

// judge checks what must hold of any answer about any system.
func judge(t *testing.T, c *Checker, s *loading.System) {
	t.Helper()
	r := c.Check(s)
	for _, f := range r.Findings {
		text := f.Sentence
		if len(f.Steps) == 0 || f.Remedy == "" || f.Basis == "" || f.Source == "" || f.Severity.Rank() == 0 {
			t.Errorf("not whole: %+v", f)
		}
		for _, x := range f.Steps {
			if x.What == "" || x.Sum == "" || x.Basis == "" {
				t.Errorf("%s: an empty step: %+v", f.Rule, x)
			}
			text += "\n" + x.What + ": " + x.Sum
		}
		for _, bad := range []string{"NaN", "Inf", "%!", "e+"} {
			if strings.Contains(text, bad) {
				t.Errorf("%s says %q", f.Rule, text)
			}
		}
		if f.Sentence == "" || strings.HasPrefix(f.Sentence, " ") || strings.Contains(f.Sentence, "  ") {
			t.Errorf("%s says %q", f.Rule, f.Sentence)
		}
		rule, ok := RuleOf(f.Rule)
		if !ok || f.Blocks && !rule.Blocks || f.Blocks && f.Sureness == Screening || f.Sureness == Screening && f.Severity != Low {
			t.Errorf("%s: blocks %v, %s, %s", f.Rule, f.Blocks, f.Severity, f.Sureness)
		}
		if math.IsNaN(f.Excess) || math.IsInf(f.Excess, 0) || f.Lamps < 0 {
			t.Errorf("%s: excess %g, %d lamps", f.Rule, f.Excess, f.Lamps)
		}
	}
	for _, q := range r.Questions {
		rule, ok := RuleOf(q.Rule)
		if !ok || !slices.Contains(rule.Asks, q.Field) || q.Places < 1 || q.About.Kind == "" {
			t.Errorf("%+v", q)
		}
	}
	if r.Coverage.Known < 0 || r.Coverage.Known > r.Coverage.Places {
		t.Errorf("%+v", r.Coverage)
	}
	if _, err := json.Marshal(r); err != nil {
		t.Error(err)
	}
	if _, err := json.Marshal(Loads(s)); err != nil {
		t.Error(err)
	}
	if got := Verdict(Result{}, r); got.Answer == Fit && unread(s) {
		t.Errorf("fits with an unread rating: %s", got.Sum)
	}
	for i := range s.Fixtures {
		JobCautions(s, Subject{Kind: OnFixture, Index: i}, Job{})
	}
	JobCautions(s, Subject{Kind: OnDriver, Index: -1}, Job{})
}

// unread reports whether a proposed lamp, or the gear it would hang on, lacks a rating that no rule can do without.
func unread(s *loading.System) bool {
	for i := range s.Fixtures {
		f := &s.Fixtures[i]
		for _, g := range f.Lamps {
			if !g.Proposed || g.Count <= 0 {
				continue
			}
			if g.Model == nil || g.Model.Technology == "" {
				return true
			}
			if w, ok := known(g.Model.PowerW); !ok || w < 0 {
				return true
			}
			if f.Driver < 0 || f.Driver >= len(s.Drivers) {
				if !f.GearNone && f.Conversion != "gear_removed" && f.Conversion != "gear_bypassed" && (f.Model == nil || f.Model.Gear != "none") {
					return true
				}
				continue
			}
			m := s.Drivers[f.Driver].Model
			if m == nil || kindOf(m) == gearUnknown {
				return true
			}
			if _, ok := positive(m.MaxLoadW); ok || kindOf(m) == emergencyPack {
				continue
			}
			if _, ok := positive(m.MaxLoadVA); !ok || kindOf(m) == constantCurrent {
				return true
			}
		}
	}
	return false
}

// TestAnySystem: nothing that can be recorded, or not even recorded, breaks a check.
func TestAnySystem(t *testing.T) {
	t.Parallel()
	var c Checker
	for seed := range uint64(8000) {
		judge(t, &c, wild{rand.New(rand.NewPCG(seed, 1))}.system())
		if t.Failed() {
			t.Fatalf("seed %d", seed)
		}
	}
}

func FuzzAnySystem(f *testing.F) {
	for seed := range uint64(20) {
		f.Add(seed, seed)
	}
	f.Fuzz(func(t *testing.T, a, b uint64) {
		var c Checker
		judge(t, &c, wild{rand.New(rand.NewPCG(a, b))}.system())
	})
}

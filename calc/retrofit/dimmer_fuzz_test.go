package retrofit

import (
	"math"
	"strings"
	"testing"

	"lampward/calc/loading"
)

// FuzzDimmedCircuit writes free numbers and words on the nameplates of a dimmed circuit. Whatever they are, the rules
// answer with finite numbers and whole sentences.
func FuzzDimmedCircuit(f *testing.F) {
	f.Add(7.0, 0.9, 300.0, 16.0, 0.88, 6, "leading_edge", "R,L", "B", "trailing_edge")
	f.Add(0.0, 0.0, 0.0, 0.0, 0.0, 0, "", "", "", "")
	f.Add(math.NaN(), math.Inf(1), -1.0, 1e308, 5e-324, -5, "universal_phase", "C", "Z", "phase_cut")
	f.Add(50.0, 1.0, 60.0, 1e9, 1e-6, 1000000, "switch_electronic", "R", "D", "dali")
	f.Add(1e9, 0.01, 1e-6, 3.0, 1.0, 3, "pwm_dc", "L", "C", "analogue_1_10v")
	f.Fuzz(func(t *testing.T, w, pf, limit, amps, eff float64, n int, kind, marking, curve, dims string) {
		control := loading.Control{
			Kind: kind, Marking: marking, MinLoadW: &w, MaxLoadW: &limit, LEDMinLoadW: &pf, RepetitivePeakA: &amps, ChannelMaxA: &amps,
			ContactA: &amps, CapacitiveA: &eff, LEDMaxCount: &n, CapacitiveCount: &n, AnalogueRole: dims,
		}
		lamp := loading.Lamp{
			Technology: loading.LEDLamp, Supply: loading.SupplyMainsAC, PowerW: &w, PowerFactor: &pf, RatedV: &limit, MaxV: &amps,
			RepetitivePeakA: &eff, InrushA: &amps, InrushUS: &limit, Dimming: []string{dims},
		}
		gear := loading.Gear{
			Kind: loading.LEDConstantVoltage, OutputV: &pf, MaxLoadW: &limit, MinLoadW: &amps, Efficiency: &eff, PowerFactor: &pf,
			InputMinV: &w, InputMaxV: &limit, InputMinHz: &amps, InputMaxHz: &eff, LeakageMA: &amps, InrushA: &amps, InrushUS: &w,
			UnitsPerBreaker: &n, UnitsBreakerA: &limit, UnitsBreakerCurve: curve, Dimming: []string{dims},
		}
		for _, proposal := range []bool{false, true} {
			r := newRig()
			r.MainsV = &limit
			r.Proposal = proposal
			way := r.way(loading.CircuitFacts{
				NominalV: &w, Curve: curve, RatingA: &amps, Phases: &n, RCD: "A", RCDMA: &limit, Neutral: "common",
				PulseCurve: []loading.PulsePoint{{WidthUS: w, PeakA: amps}, {WidthUS: limit, PeakA: eff}},
			})
			r.Circuits[way].TripsInYear = n
			d := r.control(control, way)
			r.Dimmers[d].SetEdge = dims
			group := of(n, lamp)
			group.Dark, group.Proposed = n/2, proposal
			r.straight(way, by(d), group)
			for _, k := range []string{loading.LEDConstantVoltage, loading.MagneticTransformer, loading.ElectronicTransformer, loading.ElectronicBallast} {
				g := gear
				g.Kind = k
				r.gear(g, way, by(d), of(n, led12(math.Abs(w))), group)
			}
			got := Check(&r.System)
			for _, x := range got.Findings {
				text := x.Sentence
				for _, s := range x.Steps {
					text += s.Sum
				}
				if x.Sentence == "" || strings.Contains(text, "NaN") || strings.Contains(text, "Inf") || strings.Contains(text, "%!") {
					t.Errorf("%s says %q", x.Rule, text)
				}
				if math.IsNaN(x.Excess) || math.IsInf(x.Excess, 0) {
					t.Errorf("%s has excess %v", x.Rule, x.Excess)
				}
			}
		}
	})
}

package retrofit

import (
	"strings"
	"testing"

	"lampward/calc/loading"
)

// A rig is a small building put together for one test: 230 V, 50 Hz, IEC 60364.
type rig struct {
	loading.System
	keys byte
}

func newRig() *rig {
	r := &rig{}
	r.MainsV, r.MainsHz, r.WiringRules = some(230.0), some(50.0), loading.IEC60364
	return r
}

func some[T any](v T) *T { return &v }

// key makes a key that no other thing of the rig has.
func (r *rig) key() loading.Key {
	r.keys++
	return loading.Key{15: r.keys}
}

// way adds a circuit and returns its index.
func (r *rig) way(c loading.CircuitFacts) int {
	r.Circuits = append(r.Circuits, loading.Circuit{CircuitFacts: c, Key: r.key()})
	return len(r.Circuits) - 1
}

// control adds a dimmer or switch on a circuit (-1 for none) and returns its index.
func (r *rig) control(m loading.Control, circuit int) int {
	if m.Key == (loading.Key{}) {
		m.Key = r.key()
	}
	r.Dimmers = append(r.Dimmers, loading.Dimmer{Key: r.key(), Model: &m, Circuit: circuit})
	return len(r.Dimmers) - 1
}

// by returns the control of a power path through a dimmer.
func by(dimmer int) []loading.Controlled {
	return []loading.Controlled{{Dimmer: dimmer, Path: loading.PowerPath}}
}

// over returns the control through a signal pair.
func over(dimmer int) []loading.Controlled {
	return []loading.Controlled{{Dimmer: dimmer, Path: loading.Signal}}
}

// gear adds a driver with one luminaire of lamps and returns its index.
func (r *rig) gear(g loading.Gear, circuit int, controls []loading.Controlled, lamps ...loading.LampGroup) int {
	if g.Key == (loading.Key{}) {
		g.Key = r.key()
	}
	d := len(r.Drivers)
	r.Drivers = append(r.Drivers, loading.Driver{Key: r.key(), Model: &g, Circuit: circuit, Controls: controls})
	r.Fixtures = append(r.Fixtures, loading.Fixture{Key: r.key(), Driver: d, Circuit: circuit, Lamps: r.keyed(lamps)})
	return d
}

// straight adds a luminaire without control gear and returns its index.
func (r *rig) straight(circuit int, controls []loading.Controlled, lamps ...loading.LampGroup) int {
	r.Fixtures = append(r.Fixtures, loading.Fixture{
		Key: r.key(), GearNone: true, Driver: -1, Circuit: circuit, Controls: controls, Lamps: r.keyed(lamps),
	})
	return len(r.Fixtures) - 1
}

func (r *rig) keyed(lamps []loading.LampGroup) []loading.LampGroup {
	for i := range lamps {
		if m := lamps[i].Model; m != nil && m.Key == (loading.Key{}) {
			m.Key = r.key()
		}
	}
	return lamps
}

// of makes a group of lamps.
func of(n int, m loading.Lamp) loading.LampGroup { return loading.LampGroup{Model: &m, Count: n} }

// mainsLED is a 230 V LED lamp that takes the given kinds of dimming; nil for unknown.
func mainsLED(w float64, dimming []string) loading.Lamp {
	return loading.Lamp{
		Name: "LED lamp", Technology: loading.LEDLamp, Supply: loading.SupplyMainsAC, RatedV: some(230.0), PowerW: some(w), PowerFactor: some(0.9),
		Dimming: dimming, Approval: some(true),
	}
}

func mainsHalogen(w float64) loading.Lamp {
	return loading.Lamp{
		Name: "halogen lamp", Technology: loading.Halogen, Supply: loading.SupplyMainsAC, RatedV: some(230.0), PowerW: some(w), Approval: some(true),
	}
}

func halogen12(w float64) loading.Lamp {
	return loading.Lamp{
		Name: "12 V halogen lamp", Technology: loading.Halogen, Supply: loading.SupplyELVACDC, RatedV: some(12.0), PowerW: some(w), Approval: some(true),
	}
}

func led12(w float64) loading.Lamp {
	return loading.Lamp{
		Name: "12 V LED lamp", Technology: loading.LEDLamp, Supply: loading.SupplyELVACDC, RatedV: some(12.0), PowerW: some(w), PowerFactor: some(0.9),
		Dimming: []string{loading.PhaseCut}, Approval: some(true),
	}
}

func wound(va float64) loading.Gear {
	return loading.Gear{
		Name: "wound transformer", Kind: loading.MagneticTransformer, OutputForm: loading.OutputMainsAC, OutputV: some(12.0), MaxLoadVA: some(va), MaxLoadW: some(va),
		MinLoadW: some(0.0), Efficiency: some(0.85), RegulationPct: some(5.0), ThermalProtection: some(true), Toroid: some(false),
		InputMinV: some(230.0), InputMaxV: some(240.0), Separation: "selv", Dimming: []string{loading.LeadingEdge}, LeakageMA: some(0.0),
	}
}

func electronic(w float64, dimming []string) loading.Gear {
	return loading.Gear{
		Name: "electronic transformer", Kind: loading.ElectronicTransformer, OutputForm: loading.OutputHFAC, OutputV: some(11.8), MaxLoadW: some(w), MaxLoadVA: some(w),
		MinLoadW: some(10.0), Efficiency: some(0.95), InputMinV: some(220.0), InputMaxV: some(240.0), Separation: "selv", Dimming: dimming, LeakageMA: some(0.0),
	}
}

func ledDriver(w float64, dimming []string) loading.Gear {
	return loading.Gear{
		Name: "LED driver", Kind: loading.LEDConstantVoltage, OutputForm: loading.OutputDC, OutputV: some(24.0), MaxLoadW: some(w), MinLoadW: some(0.0),
		Efficiency: some(0.88), PowerFactor: some(0.95), InputMinV: some(220.0), InputMaxV: some(240.0), Separation: "selv", Dimming: dimming,
		LeakageMA: some(0.5), InrushA: some(30.0), InrushUS: some(200.0),
	}
}

func strip24(w float64) loading.Lamp {
	return loading.Lamp{
		Name: "24 V strip", Technology: loading.LEDModule, Supply: loading.SupplyELVDC, RatedV: some(24.0), PowerW: some(w), PowerFactor: some(1.0), Approval: some(true),
	}
}

// A ruleCase builds a small building and says what one rule makes of it.
type ruleCase struct {
	name     string
	build    func(*rig)
	findings int
	severity Severity
	blocks   bool
	sure     Sureness
	asks     []Field // of the rule, where it finds nothing
	says     string  // part of the sentence or of a step of the first finding
}

func (tt *ruleCase) run(t *testing.T, rule string) {
	t.Parallel()
	r := newRig()
	tt.build(r)
	var c Checker
	got := c.Check(&r.System)
	var found []Finding
	for _, f := range got.Findings {
		if f.Rule == rule {
			found = append(found, f)
		}
	}
	if len(found) != tt.findings {
		t.Fatalf("%d findings of %s, want %d; all: %s", len(found), rule, tt.findings, ids(got.Findings))
	}
	for _, f := range found {
		if f.Severity != tt.severity || f.Blocks != tt.blocks || f.Sureness != tt.sure {
			t.Errorf("%s, blocks %v, %s; want %s, %v, %s (%s)", f.Severity, f.Blocks, f.Sureness, tt.severity, tt.blocks, tt.sure, f.Sentence)
		}
		if f.Sentence == "" || len(f.Steps) == 0 || f.Remedy == "" || f.Basis == "" || f.Source == "" {
			t.Errorf("a finding must tell its sentence, steps, remedy, basis and source: %+v", f)
		}
		text := f.Sentence
		for _, s := range f.Steps {
			text += " | " + s.Sum
			if s.What == "" || s.Sum == "" || s.Basis == "" {
				t.Errorf("an incomplete step: %+v", s)
			}
		}
		if strings.Contains(text, "NaN") || strings.Contains(text, "Inf") || strings.Contains(text, "%!") {
			t.Errorf("a number or word is missing: %s", text)
		}
		if tt.says != "" && !strings.Contains(text, tt.says) {
			t.Errorf("%q does not say %q", text, tt.says)
		}
	}
	asked := map[Field]bool{}
	for _, a := range c.asks {
		if a.rule.ID == rule {
			asked[a.field] = true
		}
	}
	if tt.findings == 0 {
		for _, f := range tt.asks {
			if !asked[f] {
				t.Errorf("did not ask for %s; asked %v", f, asked)
			}
		}
		if len(asked) != len(tt.asks) {
			t.Errorf("asked for %v, want %v", asked, tt.asks)
		}
	}
	entry, ok := RuleOf(rule)
	if !ok {
		t.Fatalf("no rule %s", rule)
	}
	for f := range asked {
		listed := false
		for _, x := range entry.Asks {
			listed = listed || x == f
		}
		if !listed {
			t.Errorf("asks for %s, which its entry does not list", f)
		}
		if f.Text().Short == string(f) {
			t.Errorf("field %s has no words to ask with", f)
		}
	}
}

func ids(findings []Finding) string {
	var s []string
	for _, f := range findings {
		s = append(s, f.Rule+" ("+f.Sentence+")")
	}
	return strings.Join(s, "; ")
}

// runCases runs the cases of several rules.
func runCases(t *testing.T, cases map[string][]ruleCase) {
	t.Helper()
	t.Parallel()
	for rule, list := range cases {
		for i := range list {
			tt := &list[i]
			t.Run(rule+"/"+tt.name, func(t *testing.T) { tt.run(t, rule) })
		}
	}
}

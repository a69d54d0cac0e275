package retrofit

import (
	"encoding/json"
	"fmt"
	"maps"
	"math"
	"math/rand/v2"
	"regexp"
	"slices"
	"strings"
	"testing"

	"lampward/calc/loading"
)

// rulesOf are the ids of what was found.
func rulesOf(r Result) []string {
	var out []string
	for _, f := range r.Findings {
		out = append(out, f.Rule)
	}
	return out
}

// fieldsOf are the fields that are asked for.
func fieldsOf(r Result) []Field {
	var out []Field
	for _, q := range r.Questions {
		out = append(out, q.Field)
	}
	return out
}

func TestPrecedence(t *testing.T) {
	t.Parallel()
	dcOnly := with(led12(7), func(m *loading.Lamp) { m.Supply = loading.SupplyELVDC })
	tests := []struct {
		name        string
		build       func(*rig)
		shown, gone []string
	}{
		{"dc lamp underloads a transformer", fed(transformer(105, 35), of(1, dcOnly)),
			[]string{"dc_led_on_electronic_transformer"}, []string{"led_on_electronic_transformer", "led_underloads_electronic_transformer", "driver_underloaded", "driver_underloaded_on_lamp_loss"}},
		{"LED lamp underloads a transformer", fed(transformer(105, 35), of(3, led12(7))),
			[]string{"led_on_electronic_transformer", "led_underloads_electronic_transformer"}, []string{"driver_underloaded", "driver_underloaded_on_lamp_loss"}},
		{"module on a voltage", fed(with(ledDriver(60, fixed), func(g *loading.Gear) { g.OutputV = some(48.0) }), of(1, with(module(), func(m *loading.Lamp) { m.RatedV = some(9.0) }))),
			[]string{"current_module_on_voltage_supply"}, []string{"output_voltage_mismatch"}},
		{"12 V halogen on a 24 V wound transformer", fed(with(wound(60), func(g *loading.Gear) { g.OutputV = some(24.0) }), of(1, halogen12(20))),
			[]string{"output_voltage_mismatch"}, []string{"lamp_overvoltage"}},
		{"dc lamp on a wound transformer of 20 %", fed(with(wound(60), func(g *loading.Gear) { g.RegulationPct = some(20.0) }), of(1, dcOnly)),
			[]string{"dc_lamp_on_ac"}, []string{"led_overvoltage_on_magnetic_transformer"}},
		{"one-ended tube in joined holders wired for both ends", seen(hang(with(downlight(), func(m *loading.Fitting) { m.Shunted = some(true) }), of(1, loading.Lamp{Technology: loading.LEDTube, TubeWiring: "single_ended"})),
			func(f *loading.FixtureFacts) { f.Conversion, f.FedEnds = "gear_removed", "both" }),
			[]string{"single_ended_tube_in_shunted_holders"}, []string{"tube_wiring_differs"}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			t.Parallel()
			r := newRig()
			tt.build(r)
			have := rulesOf(Check(&r.System))
			for _, id := range tt.shown {
				if !slices.Contains(have, id) {
					t.Errorf("%s is not shown: %v", id, have)
				}
			}
			for _, id := range tt.gone {
				if slices.Contains(have, id) {
					t.Errorf("%s is shown: %v", id, have)
				}
			}
		})
	}
}

// TestPrecedenceStaysWithTheLamp: two lamp models on one transformer; what one of them hides is not hidden for the other.
func TestPrecedenceStaysWithTheLamp(t *testing.T) {
	t.Parallel()
	r := newRig()
	r.gear(transformer(60, 5), -1, nil, of(2, with(led12(7), func(m *loading.Lamp) { m.Supply = loading.SupplyELVDC })), of(2, led12(6)))
	other := r.Fixtures[0].Lamps[1].Model.Key
	for _, f := range Check(&r.System).Findings {
		if f.Rule == "led_on_electronic_transformer" {
			if f.Lamp != other {
				t.Errorf("shown for the dc lamp: %s", f.Sentence)
			}
			return
		}
	}
	t.Error("hidden for the ac lamp too")
}

// TestHiddenRulesAskNothing: a question that cannot change what is shown is not asked.
func TestHiddenRulesAskNothing(t *testing.T) {
	t.Parallel()
	r := newRig()
	fed(with(transformer(105, 35), func(g *loading.Gear) { g.MinLoadW = nil }), of(4, with(led12(7), func(m *loading.Lamp) { m.Supply, m.HighFrequency = loading.SupplyELVDC, nil })))(r)
	for _, q := range Check(&r.System).Questions {
		if q.Field == FieldLampHighFreq || q.Field == FieldGearMinLoad && q.Rule == "led_underloads_electronic_transformer" {
			t.Errorf("asks for %s of %s", q.Field, q.Rule)
		}
	}
}

// TestUnknownGearKindAsksOnlyThat: one question a place, whatever else is unknown about it.
func TestUnknownGearKindAsksOnlyThat(t *testing.T) {
	t.Parallel()
	unknown := loading.Lamp{Name: "lamp", Technology: loading.LEDLamp}
	tests := []struct {
		name  string
		build func(*rig)
		want  Field
		about string
	}{
		{"driver model without a kind", fed(loading.Gear{Name: "box"}, of(3, unknown)), FieldGearKind, AboutGear},
		{"driver without a model", and(fed(loading.Gear{}, of(3, unknown)), func(r *rig) { r.Drivers[0].Model = nil }), FieldDriverModel, string(OnDriver)},
		{"luminaire without a feed", and(hang(loading.Fitting{Gear: "remote"}, of(3, unknown)), func(r *rig) { r.Fixtures[0].GearNone = false }), FieldFixtureFeed, string(OnFixture)},
		{"luminaire model without a word of gear", and(hang(loading.Fitting{}, of(3, unknown)), func(r *rig) { r.Fixtures[0].GearNone = false }), FieldFittingGear, AboutFitting},
		{"luminaire model with unknown gear inside", and(hang(loading.Fitting{Gear: "integral"}, of(3, unknown)), func(r *rig) { r.Fixtures[0].GearNone = false }), FieldFittingDriver, AboutFitting},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			t.Parallel()
			r := newRig()
			tt.build(r)
			got := Check(&r.System)
			if len(got.Findings) != 0 {
				t.Errorf("found %v", rulesOf(got))
			}
			if len(got.Questions) != 1 || got.Questions[0].Field != tt.want || got.Questions[0].About.Kind != tt.about || got.Questions[0].Places != 1 {
				t.Errorf("asked %+v", got.Questions)
			}
			if got.Coverage != (Coverage{Places: 1}) {
				t.Errorf("coverage %+v", got.Coverage)
			}
		})
	}
}

// TestQuestionsByModel: forty transformers of one model ask for its minimum once, and before what is at stake less.
func TestQuestionsByModel(t *testing.T) {
	t.Parallel()
	r := newRig()
	g := with(transformer(105, 0), func(g *loading.Gear) { g.MinLoadW, g.Key = nil, loading.Key{99} })
	l := with(halogen12(35), func(m *loading.Lamp) { m.Key = loading.Key{98} })
	for range 40 {
		r.gear(g, -1, nil, loading.LampGroup{Model: &l, Count: 1})
		r.Drivers[len(r.Drivers)-1].CableM, r.Drivers[len(r.Drivers)-1].CableMM2, r.Drivers[len(r.Drivers)-1].CableClass = some(1.0), some(1.5), "5"
	}
	var asked []Question
	for _, q := range Check(&r.System).Questions {
		if q.Field == FieldGearMinLoad {
			asked = append(asked, q)
		}
	}
	if len(asked) != 1 || asked[0].Places != 40 || asked[0].About != (About{Kind: AboutGear, Key: loading.Key{99}, Index: -1, Name: g.Name}) {
		t.Errorf("asked %+v", asked)
	}
}

// TestQuestionsRank: severity at stake times places settled, danger before everything.
func TestQuestionsRank(t *testing.T) {
	t.Parallel()
	q := []Question{
		{Field: "d", Severity: Low, Places: 5},
		{Field: "c", Severity: Medium, Places: 4},
		{Field: "a", Severity: Danger, Places: 1},
		{Field: "b", Severity: High, Places: 3},
	}
	SortQuestions(q)
	var order string
	for _, x := range q {
		order += string(x.Field)
	}
	// Danger first; then 3 × 3 = 9, 2 × 4 = 8, 1 × 5 = 5.
	if order != "abcd" {
		t.Errorf("order %s", order)
	}
}

func TestGroup(t *testing.T) {
	t.Parallel()
	k := func(b byte) loading.Key { return loading.Key{b} }
	findings := []Finding{
		{Rule: "x", Severity: High, Lamp: k(1), Gear: k(1), Lamps: 3},
		{Rule: "x", Severity: Medium, Lamp: k(1), Gear: k(1), Lamps: 2, Blocks: true},
		{Rule: "x", Severity: High, Lamp: k(2), Gear: k(1), Lamps: 40},
		{Rule: "y", Severity: Danger, Lamps: 1},
		{Rule: "z", Severity: Low, Lamps: 15},
		{Rule: "w", Severity: High, Lamps: 5},
	}
	got := Group(findings, []float64{0, 0, 0, 0, 9, 1})
	// y is a danger; x on lamp 2 is 3 × 40; x on lamp 1 is 3 × 5, as are w, which is older, and z at 1 × 15, the oldest.
	var order []string
	for _, c := range got {
		order = append(order, c.Rule)
	}
	if want := []string{"y", "x", "z", "w", "x"}; !slices.Equal(order, want) {
		t.Fatalf("order %v, want %v", order, want)
	}
	last := got[4]
	if last.Lamps != 5 || last.Places != 2 || last.Severity != High || !last.Blocks || !slices.Equal(last.Findings, []int{0, 1}) {
		t.Errorf("%+v", last)
	}
}

func TestWeakestSource(t *testing.T) {
	t.Parallel()
	r := newRig()
	fed(transformer(105, 35), of(1, halogen12(20)))(r)
	set := func(gear, place, fixture, lamp string) {
		r.Drivers[0].Model.FactSource, r.Drivers[0].FactSource, r.Fixtures[0].FactSource, r.Fixtures[0].Lamps[0].Model.FactSource = gear, place, fixture, lamp
	}
	for _, tt := range []struct{ gear, place, fixture, lamp, want string }{
		{loading.SeenOnNameplate, loading.SeenOnNameplate, loading.SeenOnNameplate, loading.SeenOnNameplate, loading.SeenOnNameplate},
		{loading.SeenOnNameplate, loading.SeenOnNameplate, loading.Drawing, loading.DataSheet, loading.Drawing},
		{loading.SeenOnNameplate, loading.HandedOver, loading.Drawing, loading.SaidByPerson, loading.SaidByPerson},
		{loading.SeenOnNameplate, "", loading.Drawing, loading.DataSheet, loading.Assumed},
	} {
		set(tt.gear, tt.place, tt.fixture, tt.lamp)
		f := Check(&r.System).Findings
		if len(f) == 0 || f[0].Source != tt.want {
			t.Errorf("%+v: %+v", tt, f)
		}
	}
}

// TestIntegralGear: what is wrong with gear inside a luminaire is told of the luminaire.
func TestIntegralGear(t *testing.T) {
	t.Parallel()
	r := newRig()
	fed(transformer(105, 35), of(1, halogen12(20)))(r)
	r.Drivers[0].Integral = true
	got := Check(&r.System)
	if len(got.Findings) != 1 || got.Findings[0].Subject != (Subject{OnFixture, 0, r.Fixtures[0].Key}) {
		t.Errorf("%+v", got.Findings)
	}
}

func TestCoverage(t *testing.T) {
	t.Parallel()
	r := newRig()
	w := r.way(loading.CircuitFacts{})
	r.gear(transformer(105, 35), w, nil, of(1, halogen12(35)))                                                   // known
	r.gear(transformer(105, 35), -1, nil, of(1, halogen12(35)))                                                  // feed unknown
	r.gear(loading.Gear{}, w, nil, of(1, halogen12(35)))                                                         // kind unknown
	r.gear(with(transformer(105, 35), func(g *loading.Gear) { g.MaxLoadW = nil }), w, nil, of(1, halogen12(35))) // rating unknown
	r.gear(transformer(105, 35), w, nil, of(1, with(halogen12(35), func(m *loading.Lamp) { m.PowerW = nil })))   // power unknown
	r.straight(w, nil, of(1, mainsHalogen(35)))                                                                  // known
	if got := Check(&r.System).Coverage; got != (Coverage{Places: 6, Known: 2}) {
		t.Errorf("%+v", got)
	}
}

// TestResultInJSON: names are snake_case and keys stay inside.
func TestResultInJSON(t *testing.T) {
	t.Parallel()
	r := newRig()
	fed(transformer(105, 35), of(1, led12(7)))(r)
	text, err := json.Marshal(Check(&r.System))
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range regexp.MustCompile(`"([^"]+)":`).FindAllStringSubmatch(string(text), -1) {
		if !regexp.MustCompile(`^[a-z][a-z0-9_]*$`).MatchString(name[1]) {
			t.Errorf("member %q", name[1])
		}
	}
	for _, want := range []string{`"rule":"led_underloads_electronic_transformer"`, `"severity":"high"`, `"sureness":"recorded"`, `"steps":[{"what":`, `"coverage":{"places":1,"known":0}`} {
		if !strings.Contains(string(text), want) {
			t.Errorf("no %s in %s", want, text)
		}
	}
	if strings.Contains(string(text), "[0,0") {
		t.Errorf("a key shows: %s", text)
	}
}

// TestCheckerKeepsNothing: a second check does not see the first, and checks of one system are equal.
func TestCheckerKeepsNothing(t *testing.T) {
	t.Parallel()
	a, b := newRig(), newRig()
	fed(transformer(105, 35), of(1, led12(7)))(a)
	fed(ledDriver(60, fixed), of(1, strip24(90)))(b)
	var c Checker
	for range 3 {
		for _, r := range []*rig{a, b} {
			got := c.Check(&r.System)
			want := Check(&r.System)
			if !slices.Equal(rulesOf(got), rulesOf(want)) || !slices.Equal(fieldsOf(got), fieldsOf(want)) {
				t.Errorf("%v %v, want %v %v", rulesOf(got), fieldsOf(got), rulesOf(want), fieldsOf(want))
			}
		}
	}
}

// TestSentencesHaveNoClock: hours in service and counts of failures change by themselves; sentences tell only the side of
// the threshold, so that a finding does not change by itself.
func TestSentencesHaveNoClock(t *testing.T) {
	t.Parallel()
	text := func(hours float64, failures int) string {
		r := newRig()
		way := r.way(loading.CircuitFacts{NominalV: some(230.0), Curve: "B", RatingA: some(1.0)})
		r.Circuits[way].TripsInYear = failures
		r.gear(transformer(60, 5), way, nil, of(3, led12(7)))
		contact := r.control(loading.Control{Kind: loading.Contactor}, way)
		r.Dimmers[contact].WeldsInYear = failures
		r.gear(wound(60), way, by(contact), of(2, halogen12(20)))
		r.Drivers[1].FailuresInYear = failures
		r.gear(ledDriver(60, fixed), way, nil, of(1, strip24(20)))
		r.Fixtures[0].Lamps[0].HoursFitted = &hours
		r.Fixtures[0].FailuresInYear = failures
		b, err := json.Marshal(Check(&r.System).Findings)
		if err != nil {
			t.Fatal(err)
		}
		return string(b)
	}
	if text(2001, 2) != text(87654, 7) {
		t.Error("the text changes with the hours or the number of failures")
	}
	if text(1999, 2) == text(2001, 2) {
		t.Error("the text does not change with the side of the threshold")
	}
}

// TestRanges: each range is a range, and says how well it is founded.
func TestRanges(t *testing.T) {
	t.Parallel()
	for _, r := range Ranges() {
		if !(r.Lo < r.Hi) || math.IsInf(r.Hi, 0) || r.What == "" || !slices.Contains([]Mark{FromSource, FromStandard, FromPractice}, r.Mark) {
			t.Errorf("%+v", r)
		}
	}
}

// TestOrderDoesNotMatter: the luminaires of a system in another order make the same findings.
func TestOrderDoesNotMatter(t *testing.T) {
	t.Parallel()
	count := func(s *loading.System) map[string]int {
		out := make(map[string]int)
		for _, f := range Check(s).Findings {
			out[fmt.Sprint(f.Rule, f.Severity, f.Blocks, f.Sureness, f.Lamps, f.Source)]++
		}
		return out
	}
	for seed := range uint64(500) {
		s := wild{rand.New(rand.NewPCG(seed, 2))}.system()
		for i := range s.Fixtures {
			s.Fixtures[i].Controls = nil
		}
		before := count(s)
		slices.Reverse(s.Fixtures)
		if after := count(s); !maps.Equal(before, after) {
			t.Fatalf("seed %d: %v, reversed %v", seed, before, after)
		}
	}
}

// TestMergeQuestions: questions about a model add up over systems, those about places stay apart.
func TestMergeQuestions(t *testing.T) {
	t.Parallel()
	model := func(key byte, places int, s Severity) Question {
		return Question{Field: FieldGearMinLoad, About: About{Kind: AboutGear, Key: loading.Key{key}, Index: -1}, Severity: s, Places: places}
	}
	place := func(key byte) Question {
		return Question{Field: FieldDriverCable, About: About{Kind: string(OnDriver), Key: loading.Key{key}}, Severity: Low, Places: 1}
	}
	got := MergeQuestions([]Question{model(1, 3, Medium), place(7)}, []Question{model(2, 1, Medium), model(1, 4, High), place(8)})
	if len(got) != 4 || got[0].About.Key != (loading.Key{1}) || got[0].Places != 7 || got[0].Severity != High {
		t.Errorf("%+v", got)
	}
}

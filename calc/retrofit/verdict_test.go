package retrofit

import (
	"math"
	"slices"
	"testing"

	"lampward/calc/loading"
)

// suited is a place where everything is known and a proposed LED lamp suits: three 7 W lamps for dc on a 60 W dc driver.
func suited() *rig {
	r := newRig()
	lamp := with(led12(7), func(m *loading.Lamp) {
		m.Supply, m.PowerFactor, m.SuitableEnclosed, m.RepetitivePeakA, m.InrushA, m.InrushUS = loading.SupplyELVDC, some(1.0), some(true), some(0.1), some(1.0), some(100.0)
	})
	g := with(ledDriver(60, fixed), func(g *loading.Gear) { g.OutputV = some(12.0) })
	w := r.way(loading.CircuitFacts{NominalV: some(230.0), Phases: some(1), Curve: "C", RatingA: some(10.0), Listed100: some(false), RCD: "none", Neutral: "own", CentralBattery: "none"})
	r.gear(g, w, nil, of(3, lamp))
	d := &r.Drivers[0]
	d.CableM, d.CableMM2, d.CableClass, d.CableRatedA = some(1.5), some(1.5), "5", some(16.0)
	r.Proposal = true
	r.Fixtures[0].Lamps[0].Proposed = true
	return r
}

func TestVerdict(t *testing.T) {
	t.Parallel()
	lamp := func(r *rig) *loading.Lamp { return r.Fixtures[0].Lamps[0].Model }
	gear := func(r *rig) *loading.Gear { return r.Drivers[0].Model }
	tests := []struct {
		name   string
		change func(*rig)
		want   Answer
		sum    string
		miss   Field
	}{
		{"all known and well", func(*rig) {}, Fit, "3 × 7 W = 21 W on this 60 W LED driver, 35.0 % of 60 W", ""},
		{"overloaded", func(r *rig) { r.Fixtures[0].Lamps[0].Count = 9 }, DoNotFit, "9 lamps of 7 W would load this 60 W LED driver with 63 W; it may carry at most 60 W.", ""},
		{"little reserve is only told", func(r *rig) { r.Fixtures[0].Lamps[0].Count = 8 }, Fit, "93.3 %", ""},
		{"power unknown", func(r *rig) { lamp(r).PowerW = nil }, FitOnlyIf, "", FieldLampPower},
		{"rating unknown", func(r *rig) { gear(r).MaxLoadW = nil }, FitOnlyIf, "", FieldGearMaxLoad},
		{"gear unknown", func(r *rig) { gear(r).Kind = "" }, FitOnlyIf, "", FieldGearKind},
		{"what the lamp is unknown", func(r *rig) { lamp(r).Technology = "" }, FitOnlyIf, "", FieldLampTechnology},
		{"below a minimum", func(r *rig) { gear(r).MinLoadW = some(25.0) }, FitOnlyIf, "3 lamps of 7 W would load this 60 W LED driver with 21 W; it needs at least 25 W.", ""},
		{"on an electronic transformer", func(r *rig) {
			*gear(r) = with(transformer(105, 35), func(g *loading.Gear) { g.Key = loading.Key{50} })
			lamp(r).Supply = loading.SupplyELVACDC
		}, DoNotFit, "21 W", ""},
		{"nothing there", func(r *rig) { r.Fixtures, r.Drivers = nil, nil }, FitOnlyIf, "Nothing is on record", ""},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			t.Parallel()
			r := suited()
			tt.change(r)
			got := Verdict(Result{}, Check(&r.System))
			if got.Answer != tt.want {
				t.Errorf("%s, want %s; %v, missing %v", got.Answer, tt.want, got.Sum, got.Missing)
			}
			if !contains(got.Sum, tt.sum) {
				t.Errorf("%q does not say %q", got.Sum, tt.sum)
			}
			if tt.miss != "" && (len(got.Missing) == 0 || !slices.ContainsFunc(got.Missing, func(q Question) bool { return q.Field == tt.miss })) {
				t.Errorf("%s is not missed: %v", tt.miss, got.Missing)
			}
			if got.Answer == Fit && len(got.Missing) > 0 {
				t.Errorf("fits although %v is not known", got.Missing)
			}
		})
	}
}

// TestVerdictLeavesOldTroubleAlone: what is wrong elsewhere on the circuit does not refuse a lamp that has no part in it.
func TestVerdictLeavesOldTroubleAlone(t *testing.T) {
	t.Parallel()
	r := suited()
	r.gear(with(ledDriver(60, fixed), func(g *loading.Gear) { g.OutputV = some(12.0) }), 0, nil, of(12, with(*r.Fixtures[0].Lamps[0].Model, func(*loading.Lamp) {})))
	after := Check(&r.System)
	if !slices.Contains(rulesOf(after), "driver_overloaded") {
		t.Fatal("the other driver is not overloaded")
	}
	r.Proposal = false
	r.Fixtures[0].Lamps[0].Proposed, r.Fixtures[0].Lamps[0].Count = false, 2
	before := Check(&r.System)
	if got := Verdict(before, after); got.Answer == DoNotFit {
		t.Errorf("refused for %q", got.Sum)
	}
	if got := Verdict(Result{}, after); got.Answer != DoNotFit {
		t.Error("with nothing on record before, the overload is part of the proposal")
	}
}

// TestNothingUnknownFits: take away one rating at a time from a place where the lamp fits; it never fits without asking
// unless the rule that reads it has another way to know.
func TestNothingUnknownFits(t *testing.T) {
	t.Parallel()
	for name, forget := range map[string]func(*rig){
		"lamp power":       func(r *rig) { r.Fixtures[0].Lamps[0].Model.PowerW = nil },
		"lamp voltage":     func(r *rig) { r.Fixtures[0].Lamps[0].Model.RatedV = nil },
		"lamp supply":      func(r *rig) { r.Fixtures[0].Lamps[0].Model.Supply = "" },
		"lamp technology":  func(r *rig) { r.Fixtures[0].Lamps[0].Model.Technology = "" },
		"lamp":             func(r *rig) { r.Fixtures[0].Lamps[0].Model = nil },
		"gear":             func(r *rig) { r.Drivers[0].Model = nil },
		"gear kind":        func(r *rig) { r.Drivers[0].Model.Kind = "" },
		"gear maximum":     func(r *rig) { r.Drivers[0].Model.MaxLoadW = nil },
		"gear minimum":     func(r *rig) { r.Drivers[0].Model.MinLoadW = nil },
		"gear output":      func(r *rig) { r.Drivers[0].Model.OutputV = nil },
		"gear input":       func(r *rig) { r.Drivers[0].Model.InputMaxV = nil },
		"feed":             func(r *rig) { r.Fixtures[0].Driver = -1 },
		"other lamps":      func(r *rig) { r.Fixtures[0].LampsUnknown = true },
		"absurd maximum":   func(r *rig) { r.Drivers[0].Model.MaxLoadW = some(math.Inf(1)) },
		"negative maximum": func(r *rig) { r.Drivers[0].Model.MaxLoadW = some(-60.0) },
		"power not a number": func(r *rig) {
			r.Fixtures[0].Lamps[0].Model.PowerW = some(math.NaN())
		},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			r := suited()
			if got := Verdict(Result{}, Check(&r.System)); got.Answer != Fit {
				t.Fatalf("does not fit to begin with: %s", got.Sum)
			}
			forget(r)
			got := Verdict(Result{}, Check(&r.System))
			if got.Answer == Fit || len(got.Missing) == 0 && got.Answer == FitOnlyIf {
				t.Errorf("%s, missing %v", got.Answer, got.Missing)
			}
		})
	}
}

// TestToConfirm: what cannot be seen from a ladder is told and does not spoil the answer about a place nobody recorded;
// of a place on record it does, but for approval, which silence says nothing against.
func TestToConfirm(t *testing.T) {
	t.Parallel()
	recorded := Result{Coverage: Coverage{Places: 1}}
	for name, tt := range map[string]struct {
		forget func(*rig)
		field  Field
		record Answer
	}{
		"approval": {func(r *rig) { r.Fixtures[0].Lamps[0].Model.Approval = nil }, FieldLampApproval, Fit},
		"breaker":  {func(r *rig) { r.Circuits[0].RatingA = nil }, FieldCircuitRating, FitOnlyIf},
		"cable":    {func(r *rig) { r.Drivers[0].CableM = nil }, FieldDriverCable, FitOnlyIf},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			r := suited()
			tt.forget(r)
			bare := Verdict(Result{}, Check(&r.System))
			if bare.Answer != Fit || len(bare.Missing) != 0 || !slices.ContainsFunc(bare.ToConfirm, func(q Question) bool { return q.Field == tt.field }) {
				t.Errorf("off the ladder %s, missing %v, to confirm %v", bare.Answer, bare.Missing, bare.ToConfirm)
			}
			if got := Verdict(recorded, Check(&r.System)); got.Answer != tt.record {
				t.Errorf("on record %s, missing %v, to confirm %v", got.Answer, got.Missing, got.ToConfirm)
			}
		})
	}
}

func TestCompare(t *testing.T) {
	t.Parallel()
	at := func(i int) Subject { return Subject{Kind: OnDriver, Index: i} }
	one := func(f ...Finding) Result { return Result{Findings: f} }
	base := Finding{Rule: "driver_overloaded", Subject: at(0), Severity: High, Blocks: true, Lamps: 4, Excess: 1.05}
	change := func(c func(*Finding)) Finding {
		f := base
		c(&f)
		return f
	}
	tests := []struct {
		name          string
		before, after Result
		want          int
	}{
		{"the same", one(base), one(base), 0},
		{"new", one(), one(base), 1},
		{"gone", one(base), one(), 0},
		{"better", one(change(func(f *Finding) { f.Excess = 1.4 })), one(base), 0},
		{"further over", one(base), one(change(func(f *Finding) { f.Excess = 1.08 })), 1},
		{"more severe", one(base), one(change(func(f *Finding) { f.Severity = Danger })), 1},
		{"more lamps", one(base), one(change(func(f *Finding) { f.Lamps = 5 })), 1},
		{"now blocks", one(change(func(f *Finding) { f.Blocks = false })), one(base), 1},
		{"blocks no more", one(base), one(change(func(f *Finding) { f.Blocks = false })), 0},
		{"elsewhere", one(base), one(base, change(func(f *Finding) { f.Subject = at(1) })), 1},
		{"another lamp of the same trouble", one(change(func(f *Finding) { f.Lamp = loading.Key{1} })), one(change(func(f *Finding) { f.Lamp = loading.Key{2} })), 0},
	}
	for _, tt := range tests {
		if got := Compare(tt.before, tt.after); len(got) != tt.want {
			t.Errorf("%s: %d refused, want %d", tt.name, len(got), tt.want)
		}
	}
}

func TestLoads(t *testing.T) {
	t.Parallel()
	r := newRig()
	w := r.way(loading.CircuitFacts{NominalV: some(230.0), RatingA: some(10.0)})
	dim := r.control(loading.Control{Kind: loading.TrailingEdge, MaxLoadW: some(250.0), CapacitiveMaxW: some(200.0), MinLoadW: some(20.0)}, w)
	g := with(transformer(105, 35), func(g *loading.Gear) {
		g.Derating = []loading.CurvePoint{{AirC: 50, SharePct: 100}, {AirC: 70, SharePct: 0}}
	})
	d := r.gear(g, w, by(dim), of(2, halogen12(35)), of(1, halogen12(20)))
	r.Drivers[d].AirC = some(60.0)
	r.Fixtures[0].Lamps[1].Dark = 1
	r.gear(loading.Gear{Kind: loading.LEDConstantVoltage}, -1, nil, of(1, with(strip24(5), func(m *loading.Lamp) { m.PowerW = nil })))
	got := Loads(&r.System)
	if len(got) != 4 {
		t.Fatalf("%d lines: %+v", len(got), got)
	}
	check := func(what string, have *float64, want float64) {
		t.Helper()
		if have == nil || math.Abs(*have-want) > 1e-9*want {
			t.Errorf("%s is %v, want %g", what, have, want)
		}
	}
	first := got[0]
	check("present", first.Present, 90)           // 2 × 35 + 20
	check("working", first.Working, 70)           // the 20 W lamp is dark
	check("after loss", first.AfterLossOfOne, 35) // 70 − 35
	check("minimum", first.Min, 35)               // nameplate
	check("maximum", first.Max, 105)              // nameplate
	check("derated", first.DeratedMax, 52.5)      // half of 105 at 60 °C
	check("share", first.Pct, 9000/52.5)          // of what is allowed there
	if unknown := got[1]; unknown.Present != nil || unknown.Max != nil || unknown.Pct != nil {
		t.Errorf("%+v", unknown)
	}
	dimmer := got[2]
	check("dimmer", dimmer.Present, 90/0.95) // efficiency 0.95
	check("dimmer maximum", dimmer.Max, 200) // its C rating
	check("dimmer minimum", dimmer.Min, 20)
	circuit := got[3]
	check("circuit", circuit.Present, 90/0.95/230) // filament lamps: power factor 1
	check("circuit share", circuit.Pct, 100*90/0.95/230/10)
}

func TestCautions(t *testing.T) {
	t.Parallel()
	if len(Cautions()) != 15 {
		t.Errorf("%d cautions", len(Cautions()))
	}
	for i, c := range Cautions() {
		if c.When == "" || c.Text == "" || i > 0 && c.ID <= Cautions()[i-1].ID {
			t.Errorf("%+v", c)
		}
	}
	ids := func(r *rig, at Subject, j Job) []string {
		var out []string
		for _, c := range JobCautions(&r.System, at, j) {
			out = append(out, c.ID)
		}
		return out
	}
	plain := newRig()
	plain.straight(-1, nil, of(1, mainsLED(7, fixed)))
	quiet := Job{WasOn: some(false), Reach: "floor", Asbestos: "clear"}
	at := Subject{Kind: OnFixture}
	tests := []struct {
		name string
		rig  func() *rig
		at   Subject
		job  Job
		want []string
	}{
		{"a known lamp at floor level", func() *rig { return plain }, at, quiet, []string{"CA-09"}},
		{"nothing known of the job", func() *rig { return plain }, at, Job{}, []string{"CA-02", "CA-04", "CA-05", "CA-09", "CA-13"}},
		{"from a lift over people, opening gear", func() *rig { return plain }, at, with(quiet, func(j *Job) { j.OpensGear, j.Reach = true, "lift" }), []string{"CA-01", "CA-04", "CA-09", "CA-13", "CA-14"}},
		{"a dimmer changes", func() *rig { return plain }, at, with(quiet, func(j *Job) { j.DimmingChange = true }), []string{"CA-09", "CA-11"}},
		{"fluorescent on an old ballast", func() *rig {
			r := newRig()
			fed(ballast(loading.MagneticBallast), of(1, loading.Lamp{Technology: loading.Fluorescent}))(r)
			return r
		}, at, quiet, []string{"CA-03", "CA-06", "CA-07", "CA-09"}},
		{"ballast marked free of PCB", func() *rig {
			r := newRig()
			fed(with(ballast(loading.MagneticBallast), func(g *loading.Gear) { g.PCBFree = some(true) }), of(1, loading.Lamp{Technology: loading.Fluorescent}))(r)
			return r
		}, at, quiet, []string{"CA-03", "CA-06", "CA-09"}},
		{"made in 1985, United States", func() *rig {
			r := newRig()
			nfpa(fed(with(ballast(loading.MagneticBallast), func(g *loading.Gear) { g.MadeYear = some(1985) }), of(1, loading.Lamp{Technology: loading.Fluorescent})))(r)
			return r
		}, at, quiet, []string{"CA-03", "CA-06", "CA-09"}},
		{"fluorescent on nobody knows what", func() *rig {
			r := newRig()
			r.Fixtures = append(r.Fixtures, loading.Fixture{Driver: -1, Circuit: -1, Lamps: []loading.LampGroup{of(1, loading.Lamp{Technology: loading.Fluorescent})}})
			return r
		}, at, quiet, []string{"CA-03", "CA-06", "CA-07", "CA-09"}},
		{"emergency outdoors", func() *rig {
			r := newRig()
			r.straight(-1, nil, of(1, mainsLED(7, fixed)))
			r.Fixtures[0].EmergencyMode, r.Fixtures[0].Zone = "maintained", "outdoor"
			return r
		}, at, quiet, []string{"CA-08", "CA-09", "CA-12", "CA-15"}},
		{"rewired by driver, further feeds", func() *rig {
			r := newRig()
			fed(ledDriver(60, fixed), of(1, strip24(5)))(r)
			r.Fixtures[0].FurtherFeeds = 1
			return r
		}, Subject{Kind: OnDriver}, with(quiet, func(j *Job) { j.Rewires = true }), []string{"CA-01", "CA-03", "CA-09", "CA-10", "CA-15"}},
	}
	for _, tt := range tests {
		if got := ids(tt.rig(), tt.at, tt.job); !slices.Equal(got, tt.want) {
			t.Errorf("%s: %v, want %v", tt.name, got, tt.want)
		}
	}
}

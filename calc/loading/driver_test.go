package loading

import (
	"errors"
	"math"
	"testing"
)

// near reports whether got equals want within tol, both absolute.
func near(got, want, tol float64) bool { return math.Abs(got-want) <= tol }

// ptr returns a pointer to v.
func ptr[T any](v T) *T { return &v }

// must fails the test on an error and returns the value.
func must[T any](v T, err error) func(testing.TB) T {
	return func(t testing.TB) T {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
}

func load(t testing.TB, pfLow, pfHigh float64, parts ...Part) Load {
	t.Helper()
	var l Load
	for _, p := range parts {
		if err := l.Add(p.Count, p.PowerW, pfLow, pfHigh); err != nil {
			t.Fatal(err)
		}
	}
	return l
}

func TestCheckLoad(t *testing.T) {
	t.Parallel()
	// Sums and quotients by hand; percentages printed to one decimal.
	tests := []struct {
		name          string
		parts         []Part
		pfLow, pfHigh float64
		window        Window
		wantW         float64
		wantPct       float64 // of W
		wantVAPct     float64 // of VA at the highest power factor; 0: no VA rating
		over          Verdict
		under         Verdict
		loss          Verdict
	}{
		{
			name:  "60 W transformer, least 20 W, 4 × 5 W: at the minimum exactly",
			parts: []Part{{4, 5}}, pfLow: 1, pfHigh: 1,
			window: Window{MinW: ptr(20.0), MaxW: ptr(60.0)},
			wantW:  20, wantPct: 33.3, over: Passes, under: Passes, loss: Fails,
		},
		{
			name:  "150 W transformer, 4 × 50 W",
			parts: []Part{{4, 50}}, pfLow: 1, pfHigh: 1,
			window: Window{MinW: ptr(0.0), MaxW: ptr(150.0)},
			wantW:  200, wantPct: 133.3, over: Fails, under: Passes, loss: Passes,
		},
		{
			name:  "105 W transformer, least 35 W, 1 × 7 W",
			parts: []Part{{1, 7}}, pfLow: 0.5, pfHigh: 0.9,
			window: Window{MinW: ptr(35.0), MaxW: ptr(105.0)},
			wantW:  7, wantPct: 6.7, over: Passes, under: Fails, loss: Passes,
		},
		{
			name:  "60 VA wound transformer, 4 × 5 W at 0.5: 66.7 % VA, 33.3 % W",
			parts: []Part{{4, 5}}, pfLow: 0.5, pfHigh: 0.5,
			window: Window{MinW: ptr(0.0), MaxW: ptr(60.0), MaxVA: ptr(60.0)},
			wantW:  20, wantPct: 33.3, wantVAPct: 66.7, over: Passes, under: Passes, loss: Passes,
		},
		{
			name:  "105 W, least 35 W, 2 × 35 W and 3 × 6 W: one halogen lost leaves 53 W",
			parts: []Part{{2, 35}, {3, 6}}, pfLow: 1, pfHigh: 1,
			window: Window{MinW: ptr(35.0), MaxW: ptr(105.0)},
			wantW:  88, wantPct: 83.8, over: Passes, under: Passes, loss: Passes,
		},
		{
			name:  "the same with both halogens lost",
			parts: []Part{{3, 6}}, pfLow: 1, pfHigh: 1,
			window: Window{MinW: ptr(35.0), MaxW: ptr(105.0)},
			wantW:  18, wantPct: 17.1, over: Passes, under: Fails, loss: Passes,
		},
		{
			name:  "48 W strip on a 60 W driver",
			parts: []Part{{1, 48}}, pfLow: 1, pfHigh: 1,
			window: Window{MinW: ptr(0.0), MaxW: ptr(60.0)},
			wantW:  48, wantPct: 80.0, over: Passes, under: Passes, loss: Passes,
		},
		{
			// 20 W: 22.2 VA at 0.9 fits 30 VA, 40 VA at 0.5 does not.
			name:  "only VA marked and the power factor unknown: straddles",
			parts: []Part{{4, 5}}, pfLow: 0.5, pfHigh: 0.9,
			window: Window{MaxVA: ptr(30.0)},
			wantW:  20, wantVAPct: 74.1, over: Open, under: Open, loss: Open,
		},
		{
			name:  "nothing known of the gear",
			parts: []Part{{4, 5}}, pfLow: 1, pfHigh: 1,
			wantW: 20, over: Open, under: Open, loss: Open,
		},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			t.Parallel()
			l := load(t, tt.pfLow, tt.pfHigh, tt.parts...)
			c := CheckLoad(l, tt.window)
			if !near(l.W, tt.wantW, 1e-9) || !near(100*c.Share, tt.wantPct, 0.05) || !near(100*c.VAShareLow, tt.wantVAPct, 0.05) {
				t.Errorf("W = %v (%.2f %%, %.2f %% VA), want %v (%v %%, %v %% VA)", l.W, 100*c.Share, 100*c.VAShareLow, tt.wantW, tt.wantPct, tt.wantVAPct)
			}
			if c.Over != tt.over || c.Under != tt.under || c.LampLoss != tt.loss {
				t.Errorf("over %v, under %v, lamp loss %v; want %v, %v, %v", c.Over, c.Under, c.LampLoss, tt.over, tt.under, tt.loss)
			}
			// Apparent power is never below power, and a range of power factors brackets it.
			if l.VALow < l.W-1e-9 || l.VAHigh < l.VALow-1e-9 {
				t.Errorf("W %v, VA %v to %v out of order", l.W, l.VALow, l.VAHigh)
			}
		})
	}
}

func TestCheckLoadWithUnknownLamps(t *testing.T) {
	t.Parallel()
	l := load(t, 1, 1, Part{3, 50})
	if err := l.AddUnknown(1); err != nil {
		t.Fatal(err)
	}
	// 150 W and more: proves an overload of 105 W, proves nothing of 200 W, never an underload of 160 W.
	if c := CheckLoad(l, Window{MinW: ptr(160.0), MaxW: ptr(105.0)}); c.Over != Fails || c.Under != Open {
		t.Errorf("on 105 W: over %v, under %v; want fails, open", c.Over, c.Under)
	}
	if c := CheckLoad(l, Window{MinW: ptr(100.0), MaxW: ptr(200.0)}); c.Over != Open || c.Under != Passes || c.LampLoss != Passes {
		t.Errorf("on 200 W: over %v, under %v, loss %v; want open, passes, passes (150 − 50 = 100 W)", c.Over, c.Under, c.LampLoss)
	}
}

func TestSmallestDriverW(t *testing.T) {
	t.Parallel()
	// 48 / 0.8 = 60 W.
	if got := must(SmallestDriverW(48, HighLoadShare))(t); !near(got, 60, 1e-9) {
		t.Errorf("SmallestDriverW(48, 0.8) = %v, want 60", got)
	}
}

func TestLoadSteps(t *testing.T) {
	t.Parallel()
	steps := LoadSteps([]Part{{4, 50}}, 0, 150, "rating on the gear")
	if want := "4 × 50 W = 200 W; 200 / 150 = 133.3 %"; len(steps) != 1 || steps[0].Sum != want {
		t.Errorf("LoadSteps = %+v, want one line %q", steps, want)
	}
	steps = LoadSteps([]Part{{2, 35}, {3, 6}}, 35, 105, "rating on the gear")
	if len(steps) != 2 || steps[0].Sum != "2 × 35 W + 3 × 6 W = 88 W; 88 / 105 = 83.8 %" ||
		steps[1].Sum != "2 × 35 W + 3 × 6 W = 88 W; 88 W ≥ 35 W" {
		t.Errorf("LoadSteps = %+v", steps)
	}
	if got := LampLossSteps(20, 5, 20)[0].Sum; got != "20 − 5 = 15 W against a minimum of 20 W" {
		t.Errorf("LampLossSteps = %q", got)
	}
	if got := ApparentSteps([]Part{{4, 5}}, 0.5, 0.9, 60, "x")[0].Sum; got !=
		"4 × 5 W = 20 W; 20 / 0.9 = 22.22 VA to 20 / 0.5 = 40 VA; 22.22 / 60 = 37.0 %" {
		t.Errorf("ApparentSteps = %q", got)
	}
}

func TestFigure(t *testing.T) {
	t.Parallel()
	for v, want := range map[float64]string{
		0: "0", 20: "20", 133.333: "133.3", 0.0266: "0.0266", 30778.6: "30779", 4.16667: "4.167", -1.5: "-1.5", 99.999: "100", 1e-15: "0",
	} {
		if got := Figure(v); got != want {
			t.Errorf("Figure(%v) = %q, want %q", v, got, want)
		}
	}
}

func TestInputErrorNamesTheNumber(t *testing.T) {
	t.Parallel()
	var l Load
	for _, bad := range []float64{math.NaN(), math.Inf(1), -1, 1e12} {
		err := l.Add(1, bad, 1, 1)
		e, ok := errors.AsType[*InputError](err)
		if !ok || e.Name != "power_w" {
			t.Errorf("Add(1, %v) = %v, want an *InputError naming power_w", bad, err)
		}
	}
	if l != (Load{}) {
		t.Errorf("a refused lamp changed the load: %+v", l)
	}
	if Above(0.1+0.2, 0.3) || !Above(0.31, 0.3) || !Below(0.29, 0.3) {
		t.Error("Above and Below must forgive rounding and nothing else")
	}
}

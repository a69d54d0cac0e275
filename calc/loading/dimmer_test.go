package loading

import "testing"

func TestDimmerLimits(t *testing.T) {
	t.Parallel()
	// 400 W dimmer without an LED rating, 12 × 7 W = 84 W: 10 % is 40 W and fails, 25 % is 100 W and passes.
	low, high, err := ScreeningLEDW(400)
	if err != nil || low != 40 || high != 100 || !Above(84, low) || Above(84, high) {
		t.Errorf("ScreeningLEDW(400) = %v, %v, %v; want 40, 100", low, high, err)
	}
	// 300 VA, 250 W of lamps at 0.85: 294 VA, 98 %.
	if s := must(WoundInputVA(250, 0.85))(t); !near(s, 294, 0.5) || !near(100*s/300, 98, 0.5) {
		t.Errorf("WoundInputVA = %v, want 294", s)
	}
	// 250 W trailing edge, 4 × 50 W with losses of 5 to 10 %: 210 to 220 W, 84 to 88 %.
	for _, tt := range []struct{ input, pct float64 }{{210, 84}, {220, 88}} {
		if Above(tt.input, 250) || !near(100*tt.input/250, tt.pct, 0.5) {
			t.Errorf("%v W of 250 W is not %v %%", tt.input, tt.pct)
		}
	}
	// Holding 50 mA: 6.0 W at 120 V, 11.5 W at 230 V.
	for v, want := range map[float64]float64{120: 6.0, 230: 11.5} {
		if got := must(HoldingW(50, v))(t); !near(got, want, 0.05) {
			t.Errorf("HoldingW(50, %v) = %v, want %v", v, got, want)
		}
	}
	// 3 × 7 W = 21 W on a minimum of 40 W.
	l := load(t, 0.5, 0.9, Part{3, 7})
	if c := CheckLoad(l, Window{MinW: ptr(40.0)}); l.W != 21 || c.Under != Fails {
		t.Errorf("21 W on a minimum of 40 W: %v W, %v", l.W, c.Under)
	}
	if got := must(RepetitivePeakA(12, 0.5))(t); got != 6 {
		t.Errorf("12 × 0.5 A = %v, want 6", got)
	}
	if got := WoundInputSteps(250, 0.85, 300, "y")[0].Sum; got != "250 W / 0.85 = 294.1 VA; 294.1 / 300 = 98.0 %" {
		t.Errorf("WoundInputSteps = %q", got)
	}
	if got := RatingSteps(84, 40, "W", "x", "y")[0].Sum; got != "84 W against 40 W; 84 / 40 = 210.0 %" {
		t.Errorf("RatingSteps = %q", got)
	}
}

func TestBus(t *testing.T) {
	t.Parallel()
	// DALI electrical guidelines: bus up to 250 mA, gear 2 mA each. 64 × 2 = 128 mA.
	if got := must(BusMA(DALIAddresses, DALIGearMA))(t); got != 128 || got > DALIBusMA {
		t.Errorf("64 gear draw %v mA, want 128", got)
	}
	// The rule of 300 m at 1.5 mm2: 2 × 300 m × 12.1 ohm/km × 0.25 A = 1.815 V, below 2 V; the next smaller size,
	// 1 mm2 at 18.1 ohm/km, would lose 2.715 V.
	d := must(DropV(DALIBusMA/1000, 300, must(ResistanceOhmPerKM(1.5, "1", 20))(t)))(t)
	if !near(d, 1.815, 0.0005) || d > DALIDropLimitV {
		t.Errorf("drop along 300 m of 1.5 mm2 = %v V, want 1.815", d)
	}
	if d := must(DropV(DALIBusMA/1000, 300, must(ResistanceOhmPerKM(1, "1", 20))(t)))(t); d <= DALIDropLimitV {
		t.Errorf("drop along 300 m of 1 mm2 = %v V, want above 2", d)
	}
}

func TestFlickerLimitsPct(t *testing.T) {
	t.Parallel()
	// IEEE 1789-2015 (limits from memory): 100 Hz 8.0 % and 3.33 %, 120 Hz 9.6 % and 4.0 %; below 90 Hz 0.025 f and 0.01 f.
	for _, tt := range []struct{ hz, low, none float64 }{
		{100, 8.0, 3.33}, {120, 9.6, 4.0}, {50, 1.25, 0.5}, {1250, 100, 41.6}, {2000, 100, 66.6}, {5000, 100, 100},
	} {
		low, none, err := FlickerLimitsPct(tt.hz)
		if err != nil || !near(low, tt.low, 0.005) || !near(none, tt.none, 0.03) {
			t.Errorf("FlickerLimitsPct(%v) = %v, %v, %v; want %v, %v", tt.hz, low, none, err, tt.low, tt.none)
		}
		if none > low {
			t.Errorf("at %v Hz no effect %v above low risk %v", tt.hz, none, low)
		}
	}
}

func TestCapacitiveMA(t *testing.T) {
	t.Parallel()
	// I = 2 π f C V.
	for _, tt := range []struct{ nf, v, hz, want float64 }{
		{10, 230, 50, 0.72}, {100, 230, 50, 7.23}, {15, 230, 50, 1.08}, {10, 120, 60, 0.45},
	} {
		got := must(CapacitiveMA(tt.nf, tt.v, tt.hz))(t)
		if !near(got, tt.want, 0.005) {
			t.Errorf("CapacitiveMA(%v nF, %v V, %v Hz) = %.4f, want %v", tt.nf, tt.v, tt.hz, got, tt.want)
		}
		if twice := must(CapacitiveMA(2*tt.nf, tt.v, tt.hz))(t); !near(twice, 2*got, 1e-12) {
			t.Errorf("twice the capacitance leaks %v, want twice %v", twice, got)
		}
	}
	// 100 m of strappers at 150 pF/m is 15 nF, and passes 1 mA.
	if got := must(CapacitiveMA(100*0.150, 230, 50))(t); !Above(got, GlowMA) {
		t.Errorf("100 m of strappers leak %v mA, want above 1", got)
	}
}

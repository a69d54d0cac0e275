package loading

import (
	"errors"
	"math"
	"testing"
)

// iec60228 is IEC 60228:2004, maximum resistance of plain and tinned copper conductors at 20 degC, ohm/km.
var iec60228 = []struct{ mm2, solid, flexible, tinned float64 }{
	{0.5, 36.0, 39.0, 40.1},
	{0.75, 24.5, 26.0, 26.7},
	{1, 18.1, 19.5, 20.0},
	{1.5, 12.1, 13.3, 13.7},
	{2.5, 7.41, 7.98, 8.21},
	{4, 4.61, 4.95, 5.09},
	{6, 3.08, 3.30, 3.39},
	{10, 1.83, 1.91, 1.95},
	{16, 1.15, 1.21, 1.24},
}

func TestResistanceOhmPerKM(t *testing.T) {
	t.Parallel()
	before := math.Inf(1)
	for _, tt := range iec60228 {
		for class, want := range map[string]float64{"1": tt.solid, "2": tt.solid, "5": tt.flexible, "6": tt.flexible, "": tt.flexible} {
			if got := must(ResistanceOhmPerKM(tt.mm2, class, 20))(t); !near(got, want, 1e-12) {
				t.Errorf("%v mm2 class %q = %v, want %v (IEC 60228:2004)", tt.mm2, class, got, want)
			}
		}
		if got := must(TinnedOhmPerKM(tt.mm2, 20))(t); !near(got, tt.tinned, 1e-12) {
			t.Errorf("%v mm2 tinned = %v, want %v (IEC 60228:2004)", tt.mm2, got, tt.tinned)
		}
		// Thicker has less resistance; each maximum lies at or up to a tenth above that of the nominal section of copper
		// (1000 · 0.017241/S), and tinned flexible is the highest.
		r := must(ResistanceOhmPerKM(tt.mm2, "1", 20))(t)
		if pure := 1000 * 0.017241 / tt.mm2; r >= before || r < pure || r > 1.10*pure {
			t.Errorf("%v mm2: %v ohm/km after %v, pure copper %v", tt.mm2, r, before, pure)
		}
		if !(tt.solid < tt.flexible && tt.flexible < tt.tinned) {
			t.Errorf("%v mm2: classes out of order", tt.mm2)
		}
		before = r
	}
	if _, err := ResistanceOhmPerKM(3, "5", 20); !errors.Is(err, ErrSection) {
		t.Errorf("3 mm2: %v, want ErrSection", err)
	}
	if _, err := TinnedOhmPerKM(3, 20); !errors.Is(err, ErrSection) {
		t.Errorf("3 mm2 tinned: %v, want ErrSection", err)
	}
	// A wire gauge given in mm2: 14 AWG is 2.08 mm2 and 8.29 ohm/km.
	if got := must(ResistanceOhmPerKM(2.08, "1", 20))(t); !near(got, 8.29, 0.02) {
		t.Errorf("2.08 mm2 = %v, want 8.29", got)
	}
}

func TestCopperFactor(t *testing.T) {
	t.Parallel()
	// 1 + 0.00393 (T − 20), to four decimals.
	for c, want := range map[float64]float64{20: 1, 30: 1.0393, 40: 1.0786, 50: 1.1179, 60: 1.1572, 70: 1.1965, 75: 1.2162, 90: 1.2751} {
		if got := must(CopperFactor(c))(t); !near(got, want, 0.00006) {
			t.Errorf("CopperFactor(%v) = %v, want %v", c, got, want)
		}
	}
}

func TestGauge(t *testing.T) {
	t.Parallel()
	// Geometry of ASTM B258 with 0.017241 ohm mm2/m. The 75 degC row in ohm/kft agrees with NFPA 70 chapter 9 table 8,
	// solid uncoated copper (18: 7.77, 16: 4.89, 14: 3.07, 12: 1.93, 10: 1.21, 8: 0.764): column nec, 0 where the table
	// was not at hand. An open table of the ohm/km column prints 18: 20.94, 14: 8.28, 12: 5.21, 10: 3.28.
	const kftPerKM = 0.3048
	tests := []struct {
		gauge                             int
		mm, mmTol, mm2, mm2Tol, km, kmTol float64
		kft, kft75, nec, necTol           float64
	}{
		{22, 0.644, 0.0005, 0.326, 0.0005, 52.96, 0.02, 16.14, 19.63, 0, 0},
		{20, 0.812, 0.0005, 0.518, 0.0005, 33.31, 0.01, 10.15, 12.35, 0, 0},
		{18, 1.024, 0.0005, 0.823, 0.0005, 20.95, 0.01, 6.385, 7.765, 7.77, 0.01},
		{16, 1.291, 0.0005, 1.309, 0.0005, 13.17, 0.01, 4.015, 4.883, 4.89, 0.01},
		{14, 1.628, 0.0005, 2.081, 0.0005, 8.29, 0.01, 2.525, 3.071, 3.07, 0.01},
		{12, 2.053, 0.0005, 3.309, 0.0005, 5.21, 0.005, 1.588, 1.932, 1.93, 0.01},
		{10, 2.588, 0.0005, 5.261, 0.0005, 3.28, 0.005, 0.999, 1.215, 1.21, 0.01},
		{8, 3.264, 0.0005, 8.366, 0.0005, 2.06, 0.005, 0.628, 0.764, 0.764, 0.001},
		{6, 4.115, 0.0005, 13.30, 0.005, 1.30, 0.005, 0.395, 0.480, 0, 0},
		{4, 5.189, 0.0005, 21.15, 0.005, 0.82, 0.005, 0.248, 0.302, 0, 0},
	}
	for _, tt := range tests {
		d, a, r, err := Gauge(tt.gauge, 20)
		if err != nil {
			t.Fatal(err)
		}
		_, _, r75, err := Gauge(tt.gauge, 75)
		if err != nil {
			t.Fatal(err)
		}
		if !near(d, tt.mm, tt.mmTol) || !near(a, tt.mm2, tt.mm2Tol) || !near(r, tt.km, tt.kmTol) {
			t.Errorf("gauge %d = %.4f mm, %.4f mm2, %.4f ohm/km; want %v, %v, %v", tt.gauge, d, a, r, tt.mm, tt.mm2, tt.km)
		}
		if k := r * kftPerKM; !near(k, tt.kft, 0.0006*math.Max(1, tt.kft)) {
			t.Errorf("gauge %d = %.4f ohm/kft, want %v", tt.gauge, k, tt.kft)
		}
		k75 := r75 * kftPerKM
		if !near(k75, tt.kft75, 0.0006*math.Max(1, tt.kft75)) {
			t.Errorf("gauge %d at 75 degC = %.4f ohm/kft, want %v", tt.gauge, k75, tt.kft75)
		}
		if tt.nec > 0 && !near(k75, tt.nec, tt.necTol) {
			t.Errorf("gauge %d at 75 degC = %.4f ohm/kft, NFPA 70 chapter 9 table 8 prints %v", tt.gauge, k75, tt.nec)
		}
		// Six gauges halve the diameter, closely: the rule every electrician knows.
		d6, _, _, err := Gauge(tt.gauge+6, 20)
		if err != nil {
			t.Fatal(err)
		}
		if !near(d/d6, 2, 0.01) {
			t.Errorf("gauge %d over gauge %d = %v, want about 2", tt.gauge, tt.gauge+6, d/d6)
		}
	}
}

func TestDropV(t *testing.T) {
	t.Parallel()
	// dV = 2 L I r / 1000, by hand from the tables above.
	tests := []struct {
		name              string
		w, v, lengthM     float64
		mm2               float64
		class             string
		tempC             float64
		wantA, aTol       float64
		wantV, vTol       float64
		wantPct, pctTol   float64
		gauge             int // instead of mm2
		limitPct, longest float64
	}{
		{name: "50 W 12 V, 2 m, 1.5 mm2", w: 50, v: 12, lengthM: 2, mm2: 1.5, class: "5", tempC: 20, wantA: 4.167, aTol: 0.0005, wantV: 0.222, vTol: 0.0005, wantPct: 1.85, pctTol: 0.005},
		{name: "the same, 10 m at 50 degC", w: 50, v: 12, lengthM: 10, mm2: 1.5, class: "5", tempC: 50, wantA: 4.167, aTol: 0.0005, wantV: 1.239, vTol: 0.0005, wantPct: 10.33, pctTol: 0.005},
		{name: "200 W 12 V, 10 m, 2.5 mm2 at 60 degC", w: 200, v: 12, lengthM: 10, mm2: 2.5, class: "5", tempC: 60, wantA: 16.67, aTol: 0.005, wantV: 3.078, vTol: 0.0005, wantPct: 25.7, pctTol: 0.06},
		{name: "the same, 4 mm2", w: 200, v: 12, lengthM: 10, mm2: 4, class: "5", tempC: 60, wantA: 16.67, aTol: 0.005, wantV: 1.909, vTol: 0.0006, wantPct: 15.9, pctTol: 0.05},
		{name: "the same, 10 mm2", w: 200, v: 12, lengthM: 10, mm2: 10, class: "5", tempC: 60, wantA: 16.67, aTol: 0.005, wantV: 0.737, vTol: 0.0005, wantPct: 6.14, pctTol: 0.005},
		{name: "60 W 24 V, 15 m, 1.5 mm2 at 40 degC", w: 60, v: 24, lengthM: 15, mm2: 1.5, class: "5", tempC: 40, wantA: 2.5, aTol: 0.0005, wantV: 1.076, vTol: 0.0005, wantPct: 4.48, pctTol: 0.005},
		{name: "100 W 12 V, 25 ft, 14 AWG", w: 100, v: 12, lengthM: 25 * 0.3048, gauge: 14, tempC: 20, wantA: 8.333, aTol: 0.0005, wantV: 1.052, vTol: 0.0005, wantPct: 8.77, pctTol: 0.005},
		{name: "100 W 12 V, 1.5 mm2 at 50 degC: longest run", w: 100, v: 12, lengthM: 2.42, mm2: 1.5, class: "5", tempC: 50, wantA: 8.333, aTol: 0.0005, wantV: 0.6, vTol: 0.0005, wantPct: 5, pctTol: 0.005, limitPct: 5, longest: 2.42},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			t.Parallel()
			var r float64
			if tt.gauge > 0 {
				var err error
				if _, _, r, err = Gauge(tt.gauge, tt.tempC); err != nil {
					t.Fatal(err)
				}
			} else {
				r = must(ResistanceOhmPerKM(tt.mm2, tt.class, tt.tempC))(t)
			}
			i := must(CurrentA(tt.w, tt.v, 1))(t)
			d := must(DropV(i, tt.lengthM, r))(t)
			if !near(i, tt.wantA, tt.aTol) || !near(d, tt.wantV, tt.vTol) || !near(100*d/tt.v, tt.wantPct, tt.pctTol) {
				t.Errorf("%.4f A, %.4f V, %.3f %%; want %v A, %v V, %v %%", i, d, 100*d/tt.v, tt.wantA, tt.wantV, tt.wantPct)
			}
			if tt.longest > 0 {
				if got := must(LongestRunM(tt.limitPct, tt.v, i, r))(t); !near(got, tt.longest, 0.005) {
					t.Errorf("longest run %.4f m, want %v", got, tt.longest)
				}
			}
			// Twice the length loses twice the voltage, and the same load at twice the voltage a quarter of the share.
			twice := must(DropV(i, 2*tt.lengthM, r))(t)
			half := must(DropV(i/2, tt.lengthM, r))(t)
			if !near(twice, 2*d, 1e-12) || !near(half/(2*tt.v), d/tt.v/4, 1e-12) {
				t.Errorf("drop %v does not scale: %v at twice the length, %v at half the current", d, twice, half)
			}
		})
	}
	// Common practice, no source: a 100 W 12 V unit carries about 8 A.
	if got := must(CurrentA(100, 12, 1))(t); !near(got, 8.33, 0.005) {
		t.Errorf("CurrentA(100, 12) = %v, want 8.33", got)
	}
}

func TestAppendTapDropsV(t *testing.T) {
	t.Parallel()
	// Three 20 W lamps at 2, 4 and 6 m of 2.5 mm2 class 5: the segments carry 5, 3.33 and 1.67 A.
	i := 20.0 / 12
	got, err := AppendTapDropsV(nil, []float64{2, 4, 6}, []float64{i, i, i}, 7.98)
	if err != nil {
		t.Fatal(err)
	}
	for k, want := range []struct{ v, pct float64 }{{0.160, 1.33}, {0.266, 2.22}, {0.319, 2.66}} {
		if !near(got[k], want.v, 0.0005) || !near(100*got[k]/12, want.pct, 0.005) {
			t.Errorf("tap %d: %.4f V (%.3f %%), want %v (%v %%)", k+1, got[k], 100*got[k]/12, want.v, want.pct)
		}
	}
	// All load at the end is the worst case.
	if end := must(DropV(3*i, 6, 7.98))(t); got[2] >= end {
		t.Errorf("spread load loses %v V, more than %v V with all of it at the end", got[2], end)
	}
	if _, err := AppendTapDropsV(nil, []float64{4, 2}, []float64{1, 1}, 8); !errors.Is(err, ErrCurve) {
		t.Errorf("taps out of order: %v, want ErrCurve", err)
	}
}

func TestFilamentAtEndV(t *testing.T) {
	t.Parallel()
	// 50 W 12 V at the end of 10 m of 1.5 mm2 class 5 at 50 degC, R_loop = 20 · 13.3 · 1.1179/1000 = 0.29736 ohm:
	// 3.919 A, 1.165 V lost, lamp 10.835 V, light 70.7 %, power 84.9 %.
	loop := 20 * must(ResistanceOhmPerKM(1.5, "5", 50))(t) / 1000
	v, i, err := FilamentAtEndV(12, 12, 50.0/12, loop)
	if err != nil {
		t.Fatal(err)
	}
	s := must(GeneralFilament.At(v / 12))(t)
	if !near(v, 10.835, 0.0005) || !near(i, 3.919, 0.0005) || !near(12-v, 1.165, 0.0005) || !near(100*s.Light, 70.7, 0.05) || !near(100*s.Power, 84.9, 0.05) {
		t.Errorf("lamp %.4f V, %.4f A, light %.2f %%, power %.2f %%", v, i, 100*s.Light, 100*s.Power)
	}
	// Kirchhoff: what the lamp sees and the cable loses make the supply.
	if !near(v+i*loop, 12, 1e-9) {
		t.Errorf("%v + %v V does not make 12 V", v, i*loop)
	}
}

func TestConstantPowerAtEndV(t *testing.T) {
	t.Parallel()
	// V² − 12 V + 27 = 0 has the roots 9 and 3: 27 W through 1 ohm leaves 9 V, 3 A.
	v, i, err := ConstantPowerAtEndV(12, 27, 1)
	if err != nil || !near(v, 9, 1e-12) || !near(i, 3, 1e-12) {
		t.Errorf("ConstantPowerAtEndV = %v V, %v A, %v; want 9 V, 3 A", v, i, err)
	}
	if !near(v+i*1, 12, 1e-12) {
		t.Errorf("%v V at the load and %v V in the cable do not make 12 V", v, i)
	}
	// 36 W is the most 12 V delivers through 1 ohm.
	if _, _, err := ConstantPowerAtEndV(12, 36.01, 1); !errors.Is(err, ErrCollapse) {
		t.Errorf("36.01 W: %v, want ErrCollapse", err)
	}
}

func TestConductorSteps(t *testing.T) {
	t.Parallel()
	got := DropSteps(8, 10, 10, 24, 5, "y")
	// 2 · 10 · 8 · 0.01 = 1.6 V; 1.6/24 = 6.7 %; longest 0.05 · 24/(2 · 8 · 0.01) = 7.5 m.
	if got[0].Sum != "2 × 10 m × 8 A × 0.01 Ω/m = 1.6 V; 1.6 / 24 = 6.7 %" || got[1].Sum != "5 % × 24 V / (2 × 8 A × 0.01 Ω/m) = 7.5 m" {
		t.Errorf("DropSteps = %+v", got)
	}
	if got := CurrentSteps(100, 12, 1, 6, "x", "y")[0].Sum; got != "100 W / 12 V = 8.333 A; 8.333 / 6 = 138.9 %" {
		t.Errorf("CurrentSteps = %q", got)
	}
}

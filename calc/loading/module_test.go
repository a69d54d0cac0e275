package loading

import "testing"

func TestStringWindow(t *testing.T) {
	t.Parallel()
	// 700 mA driver, 27..54 V; module 9.3 V typical, hot 0.92, cold 1.10.
	// ceil(27/8.556) = ceil(3.156) = 4; floor(54/10.23) = floor(5.279) = 5.
	least := must(LeastModules(27, 9.3*0.92))(t)
	most := must(MostModules(54, 9.3*1.10))(t)
	if least != 4 || most != 5 {
		t.Errorf("window holds %d to %d modules, want 4 to 5", least, most)
	}
	// Five modules: nominal 32.55 W; running, bin +5 % and hot 0.96, 32.8 W, which 35 W carries; a cold start of 35.8 W
	// is no matter of power. floor(35/(0.7 · 9.3744)) = floor(5.33) = 5; at the cold voltage it would be floor(4.89).
	nominal := must(StringPowerW(0.7, 9.3, 5))(t)
	running := must(StringPowerW(0.7, 9.3*1.05*0.96, 5))(t)
	cold := must(StringPowerW(0.7, 9.3*1.10, 5))(t)
	if !near(nominal, 32.55, 0.005) || !near(running, 32.8, 0.05) || !near(cold, 35.8, 0.05) {
		t.Errorf("nominal %.3f, running %.3f, cold %.3f W; want 32.55, 32.8, 35.8", nominal, running, cold)
	}
	if n := must(MostModulesByPower(35, 0.7, 9.3*1.05*0.96))(t); n != 5 {
		t.Errorf("35 W carries %d modules, want 5", n)
	}
	// Three modules: 27.9 V nominal looks inside the window, 25.67 V hot is below 27 V.
	if v := 3 * 9.3 * 0.92; !near(v, 25.67, 0.005) || least <= 3 {
		t.Errorf("three modules hot: %.3f V, least %d", v, least)
	}
	// Exact fits count: 5 × 10.8 V = 54 V, 3 × 9 V = 27 V.
	if n := must(MostModules(54, 10.8))(t); n != 5 {
		t.Errorf("MostModules(54, 10.8) = %d, want 5", n)
	}
	if n := must(LeastModules(27, 9))(t); n != 3 {
		t.Errorf("LeastModules(27, 9) = %d, want 3", n)
	}
}

func TestForwardV(t *testing.T) {
	t.Parallel()
	// 12 dies of 3.0 V, −2 mV/K: at 85 degC 36 − 0.024 · 60 = 34.56 V; at −20 degC 36 + 0.024 · 45 = 37.08 V.
	for junctionC, want := range map[float64]float64{85: 34.56, -20: 37.08, 25: 36} {
		if got := must(ForwardV(36, 1, -2, 12, junctionC))(t); !near(got, want, 0.005) {
			t.Errorf("ForwardV at %v degC = %.3f, want %v", junctionC, got, want)
		}
	}
	// 25 degC at 0.7 A: 25.2 W.
	if got := must(StringPowerW(0.7, 36, 1))(t); !near(got, 25.2, 0.05) {
		t.Errorf("power at 25 degC = %v, want 25.2", got)
	}
}

func TestCascade(t *testing.T) {
	t.Parallel()
	// 4 strings of 350 mA on 1400 mA, one opens: 466.7 mA each, 133 % of 350.
	each := must(StringCurrentMA(1400, 4))(t)
	left := must(CascadeMA(1400, 4))(t)
	if each != 350 || !near(left, 466.7, 0.05) || !near(100*left/each, 133, 0.5) {
		t.Errorf("each %v, after one opens %.2f (%.1f %%); want 350, 466.7 (133 %%)", each, left, 100*left/each)
	}
	if _, err := CascadeMA(700, 1); err == nil {
		t.Error("one string has no others to cascade to")
	}
}

func TestModuleSteps(t *testing.T) {
	t.Parallel()
	if got := StringCurrentSteps(1400, 0, 3, 350, "x", "y")[0].Sum; got != "1400 mA / 3 = 466.7 mA; 466.7 / 350 = 133.3 %" {
		t.Errorf("StringCurrentSteps = %q", got)
	}
	if got := WindowSteps(3, 9.3*0.92, 0, 27, 54, "y"); len(got) != 1 || got[0].Sum != "3 × 8.556 V = 25.67 V; the window begins at 27 V" {
		t.Errorf("WindowSteps = %+v", got)
	}
	if got := StringPowerSteps(700, 9.3, 5, 35, "y")[0].Sum; got != "0.7 A × 5 × 9.3 V = 32.55 W; 32.55 / 35 = 93.0 %" {
		t.Errorf("StringPowerSteps = %q", got)
	}
}

package loading

import (
	"math"
	"testing"
)

func TestFilamentLaw(t *testing.T) {
	t.Parallel()
	// x^3.4, x^3.0, x^1.6, x^-13, x^-14 to three decimals.
	tests := []struct{ x, light34, light30, power, life13, life14 float64 }{
		{1.05, 1.180, 1.158, 1.081, 0.530, 0.505},
		{0.95, 0.840, 0.857, 0.921, 1.948, 2.051},
		{0.90, 0.699, 0.729, 0.845, 3.934, 4.371},
		{1.10, 1.383, 1.331, 1.165, 0.290, 0.263},
		{11.5 / 12, 0.865, 0.880, 0.934, 1.739, 1.815},
	}
	const tol = 0.0006
	for _, tt := range tests {
		g := must(GeneralFilament.At(tt.x))(t)
		h := must(HalogenFilament.At(tt.x))(t)
		if !near(g.Light, tt.light34, tol) || !near(g.Power, tt.power, tol) || !near(g.Life, tt.life13, tol) {
			t.Errorf("general at %v: light %.4f, power %.4f, life %.4f; want %v, %v, %v", tt.x, g.Light, g.Power, g.Life, tt.light34, tt.power, tt.life13)
		}
		if !near(h.Light, tt.light30, tol) || !near(h.Life, tt.life14, tol) {
			t.Errorf("halogen at %v: light %.4f, life %.4f; want %v, %v", tt.x, h.Light, h.Life, tt.light30, tt.life14)
		}
		// Power is voltage times current: the exponents must agree.
		if !near(g.Power, tt.x*g.Current, 1e-12) || g.OutOfRange {
			t.Errorf("at %v power %v is not x times current %v, or out of range", tt.x, g.Power, g.Current)
		}
	}
	// Halogen data print: 5 % more voltage gives 15 % more light, 6.5 % more efficacy, half the life.
	h := must(HalogenFilament.At(1.05))(t)
	if !near(100*(h.Light-1), 15, 1) || !near(100*(math.Pow(1.05, 1.3)-1), 6.5, 0.06) || !near(h.Life, 0.5, 0.01) {
		t.Errorf("halogen at +5 %%: light %v, life %v", h.Light, h.Life)
	}
	// Handbook rule: 3.5 % light per 1 % voltage (exponents 3.0 and 3.4 lie at and below it), 5 % over halves life, 5 %
	// under doubles it.
	g := must(GeneralFilament.At(1.01))(t)
	if !near(100*(g.Light-1), 3.5, 0.1) {
		t.Errorf("light at +1 %% = %v, want +3.5 %%", g.Light)
	}
	// Half the life at 2^(1/13) = 1.055.
	if s := must(GeneralFilament.At(math.Pow(2, 1.0/13)))(t); !near(s.Life, 0.5, 1e-12) || !near(math.Pow(2, 1.0/13), 1.055, 0.0005) {
		t.Errorf("life at 1.055 = %v, want half", s.Life)
	}
	// A 12 V halogen on 24 V would draw 3.03 times its power.
	if s := must(HalogenFilament.At(2))(t); !near(s.Power, 3.03, 0.005) || !s.OutOfRange {
		t.Errorf("power at twice the voltage = %v (out of range %v), want 3.03, out of range", s.Power, s.OutOfRange)
	}
	// No life is credited to a dimmed halogen below 0.9.
	if s := must(HalogenFilament.At(0.8))(t); s.Life != 1 || !s.OutOfRange {
		t.Errorf("halogen at 0.8: life %v, out of range %v; want 1, true", s.Life, s.OutOfRange)
	}
	if _, err := GeneralFilament.At(0); err == nil {
		t.Error("no voltage was accepted")
	}
	if got := GeneralFilament.LifeSteps(12.96, 12)[0].Sum; got != "(12.96 / 12)^−13 = 0.3677 of the rated life" {
		t.Errorf("LifeSteps = %q", got)
	}
}

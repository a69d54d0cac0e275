package loading

import (
	"errors"
	"testing"
)

func TestCaseC(t *testing.T) {
	t.Parallel()
	// ta 50, tc 85: air at 40 degC and 60 % load 40 + 35 · 0.6 = 61.0; air at 60 degC and full load 95.
	for _, tt := range []struct{ air, load, want float64 }{{40, 0.6, 61.0}, {60, 1, 95}, {50, 1, 85}} {
		if got := must(CaseC(tt.air, 50, 85, tt.load))(t); !near(got, tt.want, 0.05) {
			t.Errorf("CaseC(%v, load %v) = %v, want %v", tt.air, tt.load, got, tt.want)
		}
	}
}

func TestAllowedShare(t *testing.T) {
	t.Parallel()
	curve := []CurvePoint{{50, 100}, {70, 0}}
	// 105 W, straight line from 100 % at 50 degC to 0 at 70 degC: 52.5 W at 60 degC.
	if got := 105 * must(AllowedShare(curve, 60))(t); !near(got, 52.5, 0.05) {
		t.Errorf("at 60 degC %v W, want 52.5", got)
	}
	last := 2.0
	for _, air := range []float64{20, 50, 55, 60, 69, 70, 80} {
		got := must(AllowedShare(curve, air))(t)
		if got > last || got < 0 {
			t.Errorf("share %v at %v degC after %v: hotter air must not allow more", got, air, last)
		}
		last = got
	}
	// A curve that stops at half load says nothing of hotter air.
	if _, err := AllowedShare([]CurvePoint{{50, 100}, {60, 50}}, 61); !errors.Is(err, ErrOutsideCurve) {
		t.Errorf("beyond the curve: %v, want ErrOutsideCurve", err)
	}
	if _, err := AllowedShare([]CurvePoint{{60, 50}, {50, 100}}, 55); !errors.Is(err, ErrCurve) {
		t.Errorf("a falling curve: %v, want ErrCurve", err)
	}
}

func TestCapacitorLifeH(t *testing.T) {
	t.Parallel()
	// 5000 h at 105 degC by the 10 K rule: 95: 10 000, 85: 20 000, 75: 40 000, 65: 80 000 h.
	for caseC, want := range map[float64]float64{105: 5000, 95: 10000, 85: 20000, 75: 40000, 65: 80000} {
		got, capped, err := CapacitorLifeH(5000, 105, caseC, 1)
		if err != nil || capped || !near(got, want, 0.5) {
			t.Errorf("life at %v degC = %v, %v, %v; want %v", caseC, got, capped, err, want)
		}
	}
	// 50 000 h at tc 75, measured 82: 30 779 h.
	if got, _, err := CapacitorLifeH(50000, 75, 82, 1); err != nil || !near(got, 30779, 0.5) {
		t.Errorf("life at 82 degC = %v, %v; want 30779", got, err)
	}
	// A lamp moved from 40 to 60 degC: factor 0.25.
	if got := must(TenKelvinFactor(40, 60))(t); !near(got, 0.25, 1e-12) {
		t.Errorf("factor = %v, want 0.25", got)
	}
	// Not beyond 15 years of 8760 h: 5000 h at 105 degC would give 160 000 h at 55 degC.
	if got, capped, err := CapacitorLifeH(5000, 105, 55, 1); err != nil || !capped || got != 131400 {
		t.Errorf("life at 55 degC = %v, %v, %v; want 131400 h, capped", got, capped, err)
	}
	if _, _, err := CapacitorLifeH(5000, 105, 20, 1); err == nil {
		t.Error("20 degC lies outside the rule and was accepted")
	}
}

func TestArrheniusFactor(t *testing.T) {
	t.Parallel()
	// Between 75 and 85 degC: 0.75 eV 2.01, 0.6 eV 1.75, 0.94 eV 2.40.
	for ev, want := range map[float64]float64{0.75: 2.01, 0.6: 1.75, 0.94: 2.40} {
		if got := must(ArrheniusFactor(ev, 75, 85))(t); !near(got, want, 0.005) {
			t.Errorf("ArrheniusFactor(%v) = %.4f, want %v", ev, got, want)
		}
	}
}

func TestTemperatureSteps(t *testing.T) {
	t.Parallel()
	if got := CaseSteps(60, 50, 85, 1)[0].Sum; got != "60 °C + (85 − 50) K × 100.0 % = 95 °C; tc 85 °C" {
		t.Errorf("CaseSteps = %q", got)
	}
	if got := DeratingSteps(60, 0.5, 105, 60)[0].Sum; got != "at 60 °C 50.0 % × 105 W = 52.5 W; load 60 W" {
		t.Errorf("DeratingSteps = %q", got)
	}
}

package loading

import (
	"math"
	"testing"
)

func TestBurstPeakV(t *testing.T) {
	t.Parallel()
	// V_pk = √2 · V · m and V_pp = 2 · V_pk, worked out to two decimals. The last two rows are the trade's measured
	// case (common practice, no source): 11.6-11.8 V rms at a light load and 37 V peak to peak, whose clean floor at
	// nominal mains is 32.8 to 33.4 V.
	tests := []struct{ rms, m, pk, pp, tol float64 }{
		{11.5, 1.0, 16.26, 32.53, 0.005},
		{12.0, 1.0, 16.97, 33.94, 0.005},
		{11.5, 1.1, 17.89, 35.78, 0.005},
		{12.0, 1.1, 18.67, 37.34, 0.005},
		{11.6, 1.0, 16.4, 32.8, 0.05},
		{11.8, 1.0, 16.7, 33.4, 0.05},
	}
	for _, tt := range tests {
		pk, pp, err := BurstPeakV(tt.rms, tt.m)
		if err != nil {
			t.Fatal(err)
		}
		if !near(pk, tt.pk, tt.tol) || !near(pp, tt.pp, tt.tol) {
			t.Errorf("BurstPeakV(%v, %v) = %.3f, %.3f; want %v, %v", tt.rms, tt.m, pk, pp, tt.pk, tt.pp)
		}
		// The floor lies below what was measured, and a wave's peak is never below its rms value.
		if tt.rms > 11.5 && tt.rms < 12 && !(pp < 37) {
			t.Errorf("floor %.2f V is not below the measured 37 V", pp)
		}
		if pk < tt.rms {
			t.Errorf("peak %v below rms %v", pk, tt.rms)
		}
	}
}

func TestLateStartPeakV(t *testing.T) {
	t.Parallel()
	// No late start: √2 · V. Half the crest cut off at 90 degrees leaves half the mean square: 2 · V. At 40 degrees the
	// closed form by hand: ((π − 0.69813)/2 + sin 80°/4)/π = (1.22173 + 0.24620)/π = 0.46726; 11.5/√0.46726 = 16.82 V.
	for _, tt := range []struct{ deg, want, tol float64 }{
		{0, 11.5 * math.Sqrt2, 1e-12}, {40, 16.82, 0.005}, {90, 23, 1e-12},
	} {
		if got := must(LateStartPeakV(11.5, tt.deg))(t); !near(got, tt.want, tt.tol) {
			t.Errorf("LateStartPeakV(11.5, %v) = %.4f, want %v", tt.deg, got, tt.want)
		}
	}
}

func TestBurstsPerSecond(t *testing.T) {
	t.Parallel()
	// Common practice, no source: 100 bursts a second at 50 Hz, 120 at 60 Hz.
	for hz, want := range map[float64]float64{50: 100, 60: 120} {
		if got := must(BurstsPerSecond(hz))(t); got != want {
			t.Errorf("BurstsPerSecond(%v) = %v, want %v", hz, got, want)
		}
	}
	// A carrier of 68 kHz (one measured value, no source) turns over 680 times in a burst at 50 Hz: the burst is an
	// envelope, not the carrier.
	if got := 68e3 / must(BurstsPerSecond(50))(t); got != 680 {
		t.Errorf("cycles a burst = %v, want 680", got)
	}
}

func TestWoundOutputV(t *testing.T) {
	t.Parallel()
	// V = 12 (1 + reg (1 − load)) m; peak √2 V; dc after a bridge: peak − 1.4 V. Printed to two decimals.
	tests := []struct{ reg, load, m, v, peak, dc float64 }{
		{10, 0.12, 1, 13.06, 18.46, 17.06},
		{15, 0.10, 1, 13.62, 19.26, 17.86},
		{10, 0.12, 1.1, 14.36, 20.31, 18.91},
		{10, 0.20, 1, 12.96, 18.33, 16.93},
	}
	for _, tt := range tests {
		v := must(WoundOutputV(12, tt.reg, tt.load, tt.m))(t)
		dc := must(SmoothedDCV(v))(t)
		if !near(v, tt.v, 0.005) || !near(math.Sqrt2*v, tt.peak, 0.005) || !near(dc, tt.dc, 0.006) {
			t.Errorf("reg %v load %v m %v: %.3f V, peak %.3f, dc %.3f; want %v, %v, %v", tt.reg, tt.load, tt.m, v, math.Sqrt2*v, dc, tt.v, tt.peak, tt.dc)
		}
		full := must(WoundOutputV(12, tt.reg, 1, 1))(t)
		over := must(WoundOutputV(12, tt.reg, 1.5, 1))(t)
		if full != 12 || over != full {
			t.Errorf("full load %v, overload %v; want the rated 12 V for both", full, over)
		}
	}
	// 100 VA, 10 %, the last 20 W halogen alone: life × 0.368 by V^-13.
	s := must(GeneralFilament.At(must(WoundOutputV(12, 10, 0.2, 1))(t) / 12))(t)
	if !near(s.Life, 0.368, 0.0005) {
		t.Errorf("life at 12.96 V = %.4f, want 0.368", s.Life)
	}
	// 12 V ac smoothed: 12 √2 − 1.4 = 15.6 V dc.
	if got := must(SmoothedDCV(12))(t); !near(got, 15.6, 0.05) {
		t.Errorf("SmoothedDCV(12) = %v, want 15.6", got)
	}
}

func TestInputLimitsV(t *testing.T) {
	t.Parallel()
	// Common practice, no source: a unit sold for a 230-240 V supply is good for 172-264 V (whole volts, rounded down).
	low, high, err := InputLimitsV(230, 240)
	if err != nil || math.Floor(low) != 172 || !near(high, 264, 1e-9) {
		t.Errorf("InputLimitsV(230, 240) = %v, %v, %v; want 172, 264", low, high, err)
	}
	// A stated wide range is no nominal voltage: it stands.
	low, high, err = InputLimitsV(198, 264)
	if err != nil || low != 198 || high != 264 {
		t.Errorf("InputLimitsV(198, 264) = %v, %v, %v; want it unchanged", low, high, err)
	}
	if _, _, err := InputLimitsV(240, 230); err == nil {
		t.Error("a range the wrong way round was accepted")
	}
}

func TestVoltageSteps(t *testing.T) {
	t.Parallel()
	s := BurstSteps(12, 50)
	if s[0].Sum != "2 × √2 × 12 V = 33.94 V peak to peak, plus ringing on every edge" ||
		s[1].Sum != "2 × 50 Hz = 100 bursts a second, with a gap at each zero crossing" {
		t.Errorf("BurstSteps = %+v", s)
	}
	if got := WoundSteps(12, 10, 0.12, 1, 12.6, "x")[0].Sum; got != "12 V × (1 + 10 % × (1 − 0.12)) = 13.06 V; limit 12.6 V" {
		t.Errorf("WoundSteps = %q", got)
	}
}

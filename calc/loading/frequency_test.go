package loading

import "testing"

func TestSkinDepthMM(t *testing.T) {
	t.Parallel()
	// √(ρ/(π f μ₀)) of copper. 60 Hz is also printed as about 8.5 mm in encyclopaedias.
	for _, tt := range []struct{ hz, want, tol float64 }{
		{60, 8.53, 0.005}, {60, 8.5, 0.05}, {20e3, 0.467, 0.0005}, {30e3, 0.382, 0.0006}, {40e3, 0.330, 0.0005}, {60e3, 0.270, 0.0005}, {70e3, 0.250, 0.0005},
	} {
		got := must(SkinDepthMM(tt.hz))(t)
		if !near(got, tt.want, tt.tol) {
			t.Errorf("SkinDepthMM(%v) = %.5f, want %v", tt.hz, got, tt.want)
		}
		// Four times the frequency, half the depth.
		if q := must(SkinDepthMM(4 * tt.hz))(t); !near(q, got/2, 1e-12) {
			t.Errorf("at four times %v Hz %v, want half of %v", tt.hz, q, got)
		}
	}
}

func TestSkinFactor(t *testing.T) {
	t.Parallel()
	tests := []struct{ mm2, mm, k20, k40, k70 float64 }{
		{0.75, 0.977, 1.02, 1.09, 1.25},
		{1.5, 1.382, 1.09, 1.30, 1.65},
		{2.5, 1.784, 1.23, 1.61, 2.06},
		{4, 2.257, 1.46, 1.98, 2.53},
		{6, 2.764, 1.75, 2.36, 3.03},
	}
	for _, tt := range tests {
		d := must(SectionDiameterMM(tt.mm2))(t)
		if !near(d, tt.mm, 0.0005) {
			t.Errorf("%v mm2 is %.4f mm, want %v", tt.mm2, d, tt.mm)
		}
		last := 1.0
		for _, c := range []struct{ hz, want float64 }{{20e3, tt.k20}, {40e3, tt.k40}, {70e3, tt.k70}} {
			got := must(SkinFactor(d, c.hz))(t)
			if !near(got, c.want, 0.0055) {
				t.Errorf("%v mm2 at %v Hz: factor %.4f, want %v", tt.mm2, c.hz, got, c.want)
			}
			if got < last {
				t.Errorf("%v mm2: factor %v falls at %v Hz", tt.mm2, got, c.hz)
			}
			last = got
		}
	}
	// The series and the large-argument form meet: at 25 skin depths of radius, x/2 + 1/4 + 3/(32x) = 12.75375.
	delta := must(SkinDepthMM(40e3))(t)
	below, above := must(SkinFactor(2*delta*24.9999, 40e3))(t), must(SkinFactor(2*delta*25.0001, 40e3))(t)
	if !near(below, above, 2e-4) || !near(above, 12.75375, 2e-4) {
		t.Errorf("factors %v and %v either side of 25 skin depths, want 12.75375", below, above)
	}
	// Small radii: 1 + x⁴/48, the first term of the series.
	if got := must(SkinFactor(2*delta*0.1, 40e3))(t); !near(got-1, 1e-4/48, 1e-9) {
		t.Errorf("factor at a tenth of a skin depth = 1 + %v, want 1 + %v", got-1, 1e-4/48)
	}
}

func TestPairInductance(t *testing.T) {
	t.Parallel()
	d := must(SectionDiameterMM(1.5))(t)
	// (μ₀/π) acosh(D/2a) of 1.5 mm2, and its reactance at 40 kHz.
	last := 0.0
	for _, tt := range []struct{ spacing, uh, ohm float64 }{{3, 0.564, 0.142}, {10, 1.067, 0.268}, {50, 1.713, 0.430}} {
		l := must(PairInductanceUHPerM(d, tt.spacing))(t)
		x := must(ReactanceOhmPerM(l, 40e3))(t)
		if !near(l, tt.uh, 0.0006) || !near(x, tt.ohm, 0.0006) {
			t.Errorf("%v mm apart: %.4f uH/m, %.4f ohm/m; want %v, %v", tt.spacing, l, x, tt.uh, tt.ohm)
		}
		if l <= last {
			t.Errorf("inductance %v does not rise with spacing", l)
		}
		last = l
	}
}

func TestHighFrequencyLampV(t *testing.T) {
	t.Parallel()
	// 50 W 12 V lamp (2.88 ohm), 1.5 mm2 class 5, 40 kHz.
	d := must(SectionDiameterMM(1.5))(t)
	k := must(SkinFactor(d, 40e3))(t)
	for _, tt := range []struct{ lengthM, spacing, want, pct float64 }{
		{2, 3, 11.66, -2.8}, {5, 3, 11.03, -8.1}, {10, 3, 9.81, -18.3}, {2, 50, 11.25, -6.3},
	} {
		x := must(ReactanceOhmPerM(must(PairInductanceUHPerM(d, tt.spacing))(t), 40e3))(t) * tt.lengthM
		r := 2 * tt.lengthM * 13.3 / 1000
		v := must(HighFrequencyLampV(12, 2.88, r*k, x))(t)
		if !near(v, tt.want, 0.01) || !near(100*(v/12-1), tt.pct, 0.06) {
			t.Errorf("%v m, %v mm: %.4f V (%.2f %%), want %v (%v %%)", tt.lengthM, tt.spacing, v, 100*(v/12-1), tt.want, tt.pct)
		}
		// Direct current would lose less.
		if dc := must(HighFrequencyLampV(12, 2.88, r, 0))(t); dc <= v {
			t.Errorf("dc %v V is not above %v V", dc, v)
		}
	}
	// The dc estimate of 2 m: 1.8 % lost.
	if dc := must(HighFrequencyLampV(12, 2.88, 2*2*13.3/1000, 0))(t); !near(100*(1-dc/12), 1.8, 0.05) {
		t.Errorf("dc loss %.3f %%, want 1.8", 100*(1-dc/12))
	}
	// Four times the copper does not save a long lead. 6 mm2 with the same insulation is 4.382 mm apart:
	// 0.4 uH/m · acosh(4.382/2.764) = 0.414 uH/m, 1.041 ohm over 10 m; R_ac = 0.066 · 2.36 = 0.156 ohm;
	// 12 · 2.88/|3.036 + j1.041| = 10.77 V, still 10 % lost where 10 m of 1.5 mm2 lose 18 %.
	d6 := must(SectionDiameterMM(6))(t)
	x6 := must(ReactanceOhmPerM(must(PairInductanceUHPerM(d6, 4.382))(t), 40e3))(t) * 10
	v6 := must(HighFrequencyLampV(12, 2.88, 20*3.30/1000*must(SkinFactor(d6, 40e3))(t), x6))(t)
	if !near(v6, 10.77, 0.01) {
		t.Errorf("10 m of 6 mm2 leave %.3f V, want 10.77", v6)
	}
}

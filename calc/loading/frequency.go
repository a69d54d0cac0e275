package loading

import (
	"math"
	"math/cmplx"
)

const (
	mu0 = 4e-7 * math.Pi // magnetic constant, H/m

	// LeadLimitM is the longest output lead of an electronic transformer that marks none, m. Common practice, no
	// source; some units mark 4 m or more, and their mark is what counts.
	LeadLimitM = 2.0
)

// SkinDepthMM returns the depth, mm, to which current of a frequency uses copper at 20 degC: √(ρ/(π f μ₀)).
func SkinDepthMM(hz float64) (float64, error) {
	if err := positive("hz", hz); err != nil {
		return 0, err
	}
	return 1000 * math.Sqrt(copperOhmMM2M*1e-6/(math.Pi*hz*mu0)), nil
}

// SkinFactor returns the resistance of a round solid copper conductor at a frequency over that at dc:
//
//	Re[k a J₀(k a) / (2 J₁(k a))], k = (1−j)/δ
//
// Flexible conductors are treated as one solid core and the proximity of the return is ignored: within 20 %. Beyond
// 25 skin depths of radius the first terms of the large-argument series are exact to 1e-5.
func SkinFactor(diameterMM, hz float64) (float64, error) {
	if err := within("diameter_mm", diameterMM, 1e-3, 1e3); err != nil {
		return 0, err
	}
	delta, err := SkinDepthMM(hz)
	if err != nil {
		return 0, err
	}
	x := diameterMM / 2 / delta
	if x < 1e-3 {
		return 1, nil
	}
	if x > 25 {
		return x/2 + 0.25 + 3/(32*x), nil
	}
	z := complex(x, -x)
	// J₀ and J₁ from their power series, which converge everywhere; with |z| below 36 the terms stay below 1e15 of
	// the smallest double and cancel by less than 1e5.
	q := -z * z / 4
	j0, j1 := complex(1, 0), complex(1, 0) // j1 without its factor z/2
	t0, t1 := complex(1, 0), complex(1, 0)
	for n := 1.0; n < 200; n++ {
		t0 *= q / complex(n*n, 0)
		t1 *= q / complex(n*(n+1), 0)
		j0 += t0
		j1 += t1
		if cmplx.Abs(t0) < 1e-17*cmplx.Abs(j0) && cmplx.Abs(t1) < 1e-17*cmplx.Abs(j1) {
			break
		}
	}
	// z J₀ / (2 J₁) with J₁ = (z/2) j1.
	return real(j0 / j1), nil
}

// PairInductanceUHPerM returns the inductance of two parallel conductors, uH per metre of pair: (μ₀/π) acosh(D/2a).
// spacingMM is between their centres and at least their diameter.
func PairInductanceUHPerM(diameterMM, spacingMM float64) (float64, error) {
	if err := within("diameter_mm", diameterMM, 1e-3, 1e3); err != nil {
		return 0, err
	}
	if err := within("spacing_mm", spacingMM, diameterMM, 1e6); err != nil {
		return 0, err
	}
	return 1e6 * mu0 / math.Pi * math.Acosh(spacingMM/diameterMM), nil
}

// ReactanceOhmPerM returns the reactance of an inductance, ohm per metre, at a frequency: 2 π f L.
func ReactanceOhmPerM(uhPerM, hz float64) (float64, error) {
	if err := notNegative("uh_per_m", uhPerM); err != nil {
		return 0, err
	}
	if err := notNegative("hz", hz); err != nil {
		return 0, err
	}
	return 2 * math.Pi * hz * uhPerM * 1e-6, nil
}

// SectionDiameterMM returns the diameter of a solid round conductor of a section, mm.
func SectionDiameterMM(sectionMM2 float64) (float64, error) {
	if err := positive("section_mm2", sectionMM2); err != nil {
		return 0, err
	}
	return math.Sqrt(4 * sectionMM2 / math.Pi), nil
}

// HighFrequencyLampV returns what a resistive lamp sees at the end of a high-frequency lead, V:
// V_s · R / |R + R_ac + jX|. The waveform is square, so its harmonics make the true value lower.
func HighFrequencyLampV(supplyV, lampOhm, leadOhm, leadReactanceOhm float64) (float64, error) {
	if err := positive("supply_v", supplyV); err != nil {
		return 0, err
	}
	if err := positive("lamp_ohm", lampOhm); err != nil {
		return 0, err
	}
	if err := notNegative("lead_ohm", leadOhm); err != nil {
		return 0, err
	}
	if err := notNegative("lead_reactance_ohm", leadReactanceOhm); err != nil {
		return 0, err
	}
	return supplyV * lampOhm / math.Hypot(lampOhm+leadOhm, leadReactanceOhm), nil
}

// LeadSteps shows an electronic transformer's output lead against its limit, m.
func LeadSteps(lengthM, limitM float64, basis string) []Step {
	return []Step{{
		What:  "output lead",
		Sum:   Figure(lengthM) + " m; longest " + Figure(limitM) + " m",
		Basis: basis,
	}}
}

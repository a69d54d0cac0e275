package loading

import (
	"errors"
	"math"
)

// ErrOutsideCurve says that a temperature lies outside the points of a derating curve: it is not extrapolated.
var ErrOutsideCurve = errors.New("the temperature lies outside the derating curve on file")

// ErrCurve says that a curve has fewer than two points or that its points do not rise along the first axis.
var ErrCurve = errors.New("a curve needs two points or more, in rising order")

const (
	boltzmannEVPerK = 8.617e-5 // eV/K
	zeroC           = 273.15   // K at 0 degC

	// longestProjectionH is the longest capacitor life that is projected, h: 15 years of 8,760 h. Electrolyte dries out
	// and seals age whatever the temperature. From memory of handbooks.
	longestProjectionH = 15 * 8760
)

// CaseC estimates the case temperature of gear, degC, from the air at it, the load and the two marks:
//
//	tc_est = Ta + (tc − ta) · P_load / P_rated
//
// It is a linear estimate; a measurement at the tc point beats it.
func CaseC(airC, taC, tcC, loadShare float64) (float64, error) {
	if err := within("air_c", airC, -60, 200); err != nil {
		return 0, err
	}
	if err := within("ta_c", taC, -60, 200); err != nil {
		return 0, err
	}
	if err := within("tc_c", tcC, taC, 300); err != nil {
		return 0, err
	}
	if err := within("load_share", loadShare, 0, 1000); err != nil {
		return 0, err
	}
	return airC + (tcC-taC)*loadShare, nil
}

// AllowedShare returns the share of its rating that gear may carry at an air temperature, by straight lines between
// the points of its derating curve. Below the first point it returns ErrOutsideCurve unless the first point is the
// full rating (cooler air allows no less); above the last one always, unless the last allows nothing (hotter air
// allows no more). It returns ErrCurve for a curve of fewer than two points or in the wrong order.
func AllowedShare(curve []CurvePoint, airC float64) (float64, error) {
	if err := within("air_c", airC, -60, 200); err != nil {
		return 0, err
	}
	if len(curve) < 2 {
		return 0, ErrCurve
	}
	for i, p := range curve {
		if within("share_pct", p.SharePct, 0, 200) != nil || within("air_c", p.AirC, -60, 200) != nil ||
			i > 0 && !(p.AirC > curve[i-1].AirC) {
			return 0, ErrCurve
		}
	}
	first, last := curve[0], curve[len(curve)-1]
	switch {
	case airC < first.AirC:
		if first.SharePct >= 100 {
			return first.SharePct / 100, nil
		}
		return 0, ErrOutsideCurve
	case airC > last.AirC:
		if last.SharePct == 0 {
			return 0, nil
		}
		return 0, ErrOutsideCurve
	}
	for i := 1; i < len(curve); i++ {
		a, b := curve[i-1], curve[i]
		if airC <= b.AirC {
			t := (airC - a.AirC) / (b.AirC - a.AirC)
			return ((1-t)*a.SharePct + t*b.SharePct) / 100, nil
		}
	}
	return last.SharePct / 100, nil
}

// TenKelvinFactor returns what a move from fromC to toC does to life under the rule that 10 K more halve it:
// 2^((from − to)/10). The rule holds for about 40 to 105 degC; it returns an *InputError outside.
func TenKelvinFactor(fromC, toC float64) (float64, error) {
	if err := within("from_c", fromC, 40, 105); err != nil {
		return 0, err
	}
	if err := within("to_c", toC, 40, 105); err != nil {
		return 0, err
	}
	return math.Exp2((fromC - toC) / 10), nil
}

// CapacitorLifeH returns the life, h, of an electrolytic capacitor, or of gear by its case temperature:
//
//	L = L₀ · 2^((T₀ − T)/10) · K_ripple
//
// lifeH is stated at ratedC; both temperatures must lie in 40..105 degC, rippleFactor in 0..2 (1 = as rated). capped
// says that the result was cut to 15 years of 8,760 h, beyond which nothing is projected.
func CapacitorLifeH(lifeH, ratedC, caseC, rippleFactor float64) (h float64, capped bool, err error) {
	if err := notNegative("rated_life_h", lifeH); err != nil {
		return 0, false, err
	}
	if err := within("ripple_factor", rippleFactor, 0, 2); err != nil {
		return 0, false, err
	}
	f, err := TenKelvinFactor(ratedC, caseC)
	if err != nil {
		return 0, false, err
	}
	h = lifeH * f * rippleFactor
	if h > longestProjectionH {
		return longestProjectionH, true, nil
	}
	return h, false, nil
}

// ArrheniusFactor returns how much faster ageing runs at hotC than at coolC for an activation energy in eV:
// exp((Ea/k)(1/T₁ − 1/T₂)), k = 8.617e-5 eV/K.
func ArrheniusFactor(activationEV, coolC, hotC float64) (float64, error) {
	if err := within("activation_ev", activationEV, 0, 3); err != nil {
		return 0, err
	}
	if err := within("cool_c", coolC, -60, 300); err != nil {
		return 0, err
	}
	if err := within("hot_c", hotC, -60, 300); err != nil {
		return 0, err
	}
	return math.Exp(activationEV / boltzmannEVPerK * (1/(coolC+zeroC) - 1/(hotC+zeroC))), nil
}

// CaseSteps shows the estimate of a case temperature against its mark.
func CaseSteps(airC, taC, tcC, loadShare float64) []Step {
	return []Step{{
		What: "case temperature, linear estimate",
		Sum: Figure(airC) + " °C + (" + Figure(tcC) + " − " + Figure(taC) + ") K × " + Percent(loadShare) + " = " +
			Figure(airC+(tcC-taC)*loadShare) + " °C; tc " + Figure(tcC) + " °C",
		Basis: "tc and ta marks, IEC 61347-1",
	}}
}

// DeratingSteps shows what a derating curve allows at an air temperature.
func DeratingSteps(airC, allowedShare, ratedW, loadW float64) []Step {
	return []Step{{
		What: "load allowed at this air temperature",
		Sum: "at " + Figure(airC) + " °C " + Percent(allowedShare) + " × " + Figure(ratedW) + " W = " +
			Figure(allowedShare*ratedW) + " W; load " + Figure(loadW) + " W",
		Basis: "derating curve of the data sheet",
	}}
}

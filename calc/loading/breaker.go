package loading

import (
	"errors"
	"math"
)

// ErrBreakerCurve says that a breaker curve is not B, C or D.
var ErrBreakerCurve = errors.New("the breaker curve must be B, C or D")

const (
	// ContinuousShare is the share of a breaker's rating that a load of 3 h or more may use where NFPA 70 applies and
	// the breaker is not listed for 100 % (210.20(A): device at 125 % of the load or more).
	ContinuousShare = 0.8
	// FilamentColdFactor is a filament lamp's switch-on current over its running current (from memory: 10..15).
	FilamentColdFactor = 15.0

	pulseMargin     = 0.7    // published very-short-pulse curves bend from constant I²t toward constant I·t
	halfCycleUS     = 10000  // half cycle at 50 Hz, us
	largerRatingCut = 0.9    // further margin where a count is scaled to a larger rating; common practice, no source
	steadyCountMost = 100000 // no final circuit carries more fittings
)

// standardBreakersA are the standard ratings of overcurrent devices up to 100 A (NFPA 70 240.6(A), from memory).
var standardBreakersA = [...]float64{10, 15, 20, 25, 30, 35, 40, 45, 50, 60, 70, 80, 90, 100}

// FittingCurrentA returns the steady current of one luminaire, A: P_out / (η · V · PF).
func FittingCurrentA(outputW, efficiency, voltV, powerFactor float64) (float64, error) {
	if err := within("efficiency", efficiency, 0.01, 1); err != nil {
		return 0, err
	}
	if err := notNegative("output_w", outputW); err != nil {
		return 0, err
	}
	return CurrentA(outputW/efficiency, voltV, powerFactor)
}

// SteadyUnits returns how many luminaires of a current fit under a share of a breaker's rating.
func SteadyUnits(ratingA, share, eachA float64) (int, error) {
	if err := notNegative("rating_a", ratingA); err != nil {
		return 0, err
	}
	if err := within("share", share, 0, 1); err != nil {
		return 0, err
	}
	if err := positive("each_a", eachA); err != nil {
		return 0, err
	}
	return min(whole(share*ratingA/eachA), steadyCountMost), nil
}

// ContinuousBreakerA returns the least rating, A, for a continuous load where NFPA 70 applies, and the next standard
// rating up to 100 A; standardA is 0 above that.
func ContinuousBreakerA(loadA float64) (leastA, standardA float64, err error) {
	if err := notNegative("load_a", loadA); err != nil {
		return 0, 0, err
	}
	leastA = loadA / ContinuousShare
	for _, a := range standardBreakersA {
		if !Above(leastA, a) {
			return leastA, a, nil
		}
	}
	return leastA, 0, nil
}

// TripMultiple returns the lowest multiple of its rating at which a breaker may trip at once: B 3, C 5, D 10
// (IEC 60898-1, from memory). It returns ErrBreakerCurve for any other curve.
func TripMultiple(curve string) (float64, error) {
	switch curve {
	case "B":
		return 3, nil
	case "C":
		return 5, nil
	case "D":
		return 10, nil
	}
	return 0, ErrBreakerCurve
}

// PulseFactor returns how far a short pulse may exceed the instantaneous trip current of a breaker. The magnetic
// release needs a roughly constant impulse, so a half sine of base time t = 1.5 · T₅₀ may be
//
//	k = max(1, 0.7 · √2 · √(10 ms / t))
//
// times as high. Derived here, in no standard: results are estimates, and a breaker's own pulse curve or a maker's
// count beats them.
func PulseFactor(halfValueUS float64) (float64, error) {
	if err := within("inrush_us", halfValueUS, 0.1, 1e7); err != nil {
		return 0, err
	}
	return max(1, pulseMargin*math.Sqrt2*math.Sqrt(halfCycleUS/(1.5*halfValueUS))), nil
}

// InrushLimitA returns the highest peak, A, of a pulse that a breaker is estimated to carry without tripping:
// m · I_n · k.
func InrushLimitA(curve string, ratingA, halfValueUS float64) (float64, error) {
	m, err := TripMultiple(curve)
	if err != nil {
		return 0, err
	}
	if err := positive("rating_a", ratingA); err != nil {
		return 0, err
	}
	k, err := PulseFactor(halfValueUS)
	if err != nil {
		return 0, err
	}
	return m * ratingA * k, nil
}

// PulseLimitA returns the highest peak, A, that a breaker carries at a pulse width, by its own pulse curve: straight
// between points, the first point's peak for shorter pulses (a curve falls with width, so that is the safe side), and
// ErrOutsideCurve beyond the last. It returns ErrCurve for an empty curve or points out of order.
func PulseLimitA(curve []PulsePoint, halfValueUS float64) (float64, error) {
	if err := within("inrush_us", halfValueUS, 0.1, 1e7); err != nil {
		return 0, err
	}
	if len(curve) == 0 {
		return 0, ErrCurve
	}
	for i, p := range curve {
		if positive("width_us", p.WidthUS) != nil || positive("peak_a", p.PeakA) != nil ||
			i > 0 && !(p.WidthUS > curve[i-1].WidthUS) {
			return 0, ErrCurve
		}
	}
	if halfValueUS <= curve[0].WidthUS {
		return curve[0].PeakA, nil
	}
	for i := 1; i < len(curve); i++ {
		a, b := curve[i-1], curve[i]
		if halfValueUS <= b.WidthUS {
			t := (halfValueUS - a.WidthUS) / (b.WidthUS - a.WidthUS)
			return (1-t)*a.PeakA + t*b.PeakA, nil
		}
	}
	return 0, ErrOutsideCurve
}

// InrushUnits returns how many gears of a peak fit under a limit, switched on together at the worst instant. The sum
// of peaks is conservative: a data sheet's peak is at a stated low impedance, and the supply's own limits the total.
func InrushUnits(limitA, eachPeakA float64) (int, error) {
	if err := notNegative("limit_a", limitA); err != nil {
		return 0, err
	}
	if err := positive("inrush_a", eachPeakA); err != nil {
		return 0, err
	}
	return whole(limitA / eachPeakA), nil
}

// ProspectivePeakA returns the most a supply of a voltage and loop impedance can deliver, A: √2 · V / Z.
func ProspectivePeakA(voltV, loopOhm float64) (float64, error) {
	if err := positive("volt_v", voltV); err != nil {
		return 0, err
	}
	if err := positive("loop_ohm", loopOhm); err != nil {
		return 0, err
	}
	return math.Sqrt2 * voltV / loopOhm, nil
}

// CurveRatio returns by how much a count grows from one breaker curve to another: the smaller of the handbook's ratio
// (B 0.5, C 1, D 1.5: Electrical Installation Guide, fig. N72) and the ratio of trip multiples (B 0.6, C 1, D 2).
func CurveRatio(from, to string) (float64, error) {
	f, err := TripMultiple(from)
	if err != nil {
		return 0, err
	}
	t, err := TripMultiple(to)
	if err != nil {
		return 0, err
	}
	return min(t/f, handbookShare(to)/handbookShare(from)), nil
}

// handbookShare is the count a curve allows over that of curve C (Electrical Installation Guide, fig. N72).
func handbookShare(curve string) float64 {
	switch curve {
	case "B":
		return 0.5
	case "D":
		return 1.5
	}
	return 1
}

// ScaledCount returns a maker's count of gears restated for another breaker: N · c₂/c₁ · I₂/I₁, rounded down. To a
// larger rating a further tenth is taken off, because published counts grow a little less than the rating (common
// practice, no source).
func ScaledCount(count int, fromCurve string, fromA float64, toCurve string, toA float64) (int, error) {
	if err := within("count", float64(count), 0, 1e6); err != nil {
		return 0, err
	}
	c, err := CurveRatio(fromCurve, toCurve)
	if err != nil {
		return 0, err
	}
	if err := positive("from_a", fromA); err != nil {
		return 0, err
	}
	if err := positive("to_a", toA); err != nil {
		return 0, err
	}
	n := float64(count) * c * toA / fromA
	if Above(toA, fromA) {
		n *= largerRatingCut
	}
	return whole(n), nil
}

// SteadySteps shows the steady current of a circuit against its breaker.
func SteadySteps(powerW, voltV, totalA, ratingA, share float64, basis string) []Step {
	limit := ratingA * share
	line := Figure(totalA) + " A against " + Figure(ratingA) + " A"
	if share != 1 {
		line = Figure(totalA) + " A against " + Percent(share) + " × " + Figure(ratingA) + " A = " + Figure(limit) + " A"
	}
	return []Step{{
		What:  "steady current, cable capacity not checked",
		Sum:   Figure(powerW) + " W at " + Figure(voltV) + " V, power factor counted, = " + line + "; " + Percent(totalA/limit),
		Basis: basis,
	}}
}

// InrushSteps shows an estimate of how many gears a breaker carries at switch-on.
func InrushSteps(curve string, ratingA, peakA, halfValueUS float64) []Step {
	m, _ := TripMultiple(curve)
	k := max(1, pulseMargin*math.Sqrt2*math.Sqrt(halfCycleUS/(1.5*halfValueUS)))
	limit := m * ratingA * k
	return []Step{{
		What:  "highest peak the breaker carries for a pulse this short, estimate",
		Sum:   Figure(m) + " × " + Figure(ratingA) + " A × " + Figure(k) + " = " + Figure(limit) + " A",
		Basis: "lowest instantaneous trip of IEC 60898-1 and constant impulse, derived; not in a standard",
	}, {
		What:  "gears that may be switched on together",
		Sum:   Figure(limit) + " A / " + Figure(peakA) + " A = " + Figure(float64(whole(limit/peakA))) + " (rounded down)",
		Basis: "inrush peak of the data sheet",
	}}
}

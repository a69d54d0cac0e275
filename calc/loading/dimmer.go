package loading

import "math"

// Numbers of control protocols.
const (
	DALIGearMA      = 2.0   // current one gear draws from the bus, mA (DALI electrical guidelines of the consortium)
	DALIBusMA       = 250.0 // highest bus current, mA (the same)
	DALIAddresses   = 64    // gear on one bus (from memory of IEC 62386-101)
	DALIDropLimitV  = 2.0   // highest drop along the bus, V (the same)
	AnalogueLeastMA = 0.01  // least current gear sources on an analogue pair, mA (from memory of IEC 60929 annex E)
	AnalogueMostMA  = 2.0   // most current gear sources on an analogue pair, mA (the same)

	// GlowMA is the leakage through a switch that can make LED lamps glow or flash, mA. Common practice, no source.
	GlowMA = 1.0
	// SwitchedGearLimit and SwitchedPowerW are the gear count and power from which a contact needs a rating for them.
	SwitchedGearLimit = 10
	SwitchedPowerW    = 200.0
)

// WoundInputVA returns what lamps on a wound transformer draw from the dimmer, VA: Σ P / η. efficiency lies in 0.1..1;
// where it is unknown, 0.80..0.92 is plausible (from memory of handbooks).
func WoundInputVA(lampsW, efficiency float64) (float64, error) {
	if err := notNegative("lamps_w", lampsW); err != nil {
		return 0, err
	}
	if err := within("efficiency", efficiency, 0.1, 1); err != nil {
		return 0, err
	}
	return lampsW / efficiency, nil
}

// ScreeningLEDW returns the two ends of a dimmer's likely rating for LED lamps where none is marked, W: 10 % and 25 %
// of its filament rating. Common practice, no source.
func ScreeningLEDW(filamentW float64) (lowW, highW float64, err error) {
	if err := notNegative("max_load_w", filamentW); err != nil {
		return 0, 0, err
	}
	return DimmerLEDShareLow * filamentW, DimmerLEDShareHigh * filamentW, nil
}

// HoldingW returns the load, W, that keeps a triac of a holding current conducting at a mains voltage.
func HoldingW(holdingMA, mainsV float64) (float64, error) {
	if err := notNegative("holding_ma", holdingMA); err != nil {
		return 0, err
	}
	if err := positive("mains_v", mainsV); err != nil {
		return 0, err
	}
	return holdingMA / 1000 * mainsV, nil
}

// RepetitivePeakA returns the sum of the current spikes capacitor-input lamps take each half cycle, A.
func RepetitivePeakA(count int, eachA float64) (float64, error) {
	if err := within("count", float64(count), 0, 1e6); err != nil {
		return 0, err
	}
	if err := notNegative("repetitive_peak_a", eachA); err != nil {
		return 0, err
	}
	return float64(count) * eachA, nil
}

// BusMA returns what gear draws from a control bus, mA. Control devices draw more than gear: read their sheets.
func BusMA(gear int, eachMA float64) (float64, error) {
	if err := within("gear", float64(gear), 0, 1e6); err != nil {
		return 0, err
	}
	if err := notNegative("each_ma", eachMA); err != nil {
		return 0, err
	}
	return float64(gear) * eachMA, nil
}

// FlickerLimitsPct returns the highest modulation, %, of light at a frequency for low risk and for no observable
// effect (IEEE 1789-2015, limits from memory): 0.025 f and 0.01 f below 90 Hz, 0.08 f and 0.0333 f from 90 Hz. Low
// risk is stated up to 1250 Hz and no effect up to 3000 Hz; above, 100 % is returned: no limit. A limit is never
// above 100 %.
func FlickerLimitsPct(hz float64) (lowRiskPct, noEffectPct float64, err error) {
	if err := positive("hz", hz); err != nil {
		return 0, 0, err
	}
	if hz < 90 {
		return 0.025 * hz, 0.01 * hz, nil
	}
	lowRiskPct, noEffectPct = 100, 100
	if hz <= 1250 {
		lowRiskPct = min(100, 0.08*hz)
	}
	if hz <= 3000 {
		noEffectPct = min(100, 0.0333*hz)
	}
	return lowRiskPct, noEffectPct, nil
}

// CapacitiveMA returns the current that leaks through a capacitance across an open switch, mA: 2 π f C V. Snubbers
// and long strappers both count; 150 pF a metre of strapper is common practice, no source.
func CapacitiveMA(nanofarad, voltV, hz float64) (float64, error) {
	if err := notNegative("nanofarad", nanofarad); err != nil {
		return 0, err
	}
	if err := notNegative("volt_v", voltV); err != nil {
		return 0, err
	}
	if err := notNegative("hz", hz); err != nil {
		return 0, err
	}
	return 2 * math.Pi * hz * nanofarad * 1e-9 * voltV * 1000, nil
}

// RatingSteps shows a load against a control's rating, in the rating's unit (W, VA, A, lamps). A rating of 0 has no
// share.
func RatingSteps(load, rating float64, unit, what, basis string) []Step {
	sum := Figure(load) + " " + unit + " against " + Figure(rating) + " " + unit
	if rating > 0 {
		sum += "; " + Figure(load) + " / " + Figure(rating) + " = " + Percent(load/rating)
	}
	return []Step{{What: what, Sum: sum, Basis: basis}}
}

// WoundInputSteps shows what lamps on a wound transformer draw against a dimmer's VA rating.
func WoundInputSteps(lampsW, efficiency, ratingVA float64, basis string) []Step {
	s := lampsW / efficiency
	return []Step{{
		What: "apparent power at the dimmer",
		Sum: Figure(lampsW) + " W / " + Figure(efficiency) + " = " + Figure(s) + " VA; " + Figure(s) + " / " + Figure(ratingVA) +
			" = " + Percent(s/ratingVA),
		Basis: basis,
	}}
}

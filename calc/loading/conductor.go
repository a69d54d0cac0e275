package loading

import (
	"errors"
	"math"
)

// ErrSection says that a conductor section is neither one of IEC 60228 nor an American wire gauge.
var ErrSection = errors.New("the conductor section is neither a listed mm2 size nor a wire gauge")

// ErrCollapse says that a constant-power load asks for more than the cable can pass at any voltage.
var ErrCollapse = errors.New("the cable cannot carry that power at that voltage")

const (
	copperPerK    = 0.00393  // temperature coefficient of copper at 20 degC, 1/K (IEC 60287 table 1, as repeated by open code tables)
	copperOhmMM2M = 0.017241 // resistivity of copper at 20 degC, ohm mm2/m (the same)

	// FurthestDropPct is the largest drop from transformer to the furthest luminaire, % (IEC 60364-7-715 clause
	// 715.525, from memory).
	FurthestDropPct = 5.0
	// ELVSmallestMM2 is the smallest copper conductor of an extra-low-voltage run, mm2, and ELVSmallestFlexMM2 that of
	// a flexible one of up to 3 m (IEC 60364-7-715 clause 715.524, from memory).
	ELVSmallestMM2     = 1.5
	ELVSmallestFlexMM2 = 1.0
	// SecondaryLimitA is the most one secondary circuit may carry under NFPA 70 article 411, A (from memory).
	SecondaryLimitA = 25.0

	filamentCurrentExponent = 0.6 // of voltage: consistent with power^1.6
)

// sections holds the maximum resistance of plain copper conductors at 20 degC, ohm/km: IEC 60228:2004, identical in
// several independent reproductions of its tables.
var sections = [...]struct{ mm2, solid, flexible, flexibleTinned float64 }{
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

// CopperFactor returns the resistance of copper at tempC over that at 20 degC: 1 + 0.00393 (T − 20). It answers for
// −40 to 160 degC.
func CopperFactor(tempC float64) (float64, error) {
	if err := within("temp_c", tempC, -40, 160); err != nil {
		return 0, err
	}
	return 1 + copperPerK*(tempC-20), nil
}

// ResistanceOhmPerKM returns the highest resistance of one plain copper conductor, ohm/km, at tempC. class is the
// conductor class of IEC 60228: "1" or "2" (solid, stranded), "5" or "6" (flexible); an empty class takes the
// flexible, higher value. A section that is not one of the standard's but within 1 % of a wire gauge from 22 to 4 is
// worked out from its area; any other returns ErrSection.
func ResistanceOhmPerKM(sectionMM2 float64, class string, tempC float64) (float64, error) {
	f, err := CopperFactor(tempC)
	if err != nil {
		return 0, err
	}
	if err := positive("section_mm2", sectionMM2); err != nil {
		return 0, err
	}
	for i := range sections {
		s := &sections[i]
		if math.Abs(s.mm2-sectionMM2) > slack {
			continue
		}
		if class == "1" || class == "2" {
			return s.solid * f, nil
		}
		return s.flexible * f, nil
	}
	for gauge := 22; gauge >= 4; gauge -= 2 {
		d := gaugeMM(gauge)
		area := math.Pi / 4 * d * d
		if math.Abs(sectionMM2-area) <= 0.01*area {
			return 1000 * copperOhmMM2M / sectionMM2 * f, nil
		}
	}
	return 0, ErrSection
}

// TinnedOhmPerKM returns the highest resistance of one tinned flexible conductor (class 5 or 6), ohm/km, at tempC. It
// returns ErrSection for a section IEC 60228 does not list.
func TinnedOhmPerKM(sectionMM2, tempC float64) (float64, error) {
	f, err := CopperFactor(tempC)
	if err != nil {
		return 0, err
	}
	for i := range sections {
		if math.Abs(sections[i].mm2-sectionMM2) <= slack {
			return sections[i].flexibleTinned * f, nil
		}
	}
	return 0, ErrSection
}

// gaugeMM returns the diameter of an American wire gauge, mm: 0.127 · 92^((36−n)/39), the geometry of ASTM B258.
func gaugeMM(gauge int) float64 { return 0.127 * math.Pow(92, float64(36-gauge)/39) }

// Gauge returns the diameter, mm, section, mm2, and resistance, ohm/km, of solid copper of an American wire gauge at
// tempC. It answers for gauges 40 to 0.
func Gauge(gauge int, tempC float64) (diameterMM, sectionMM2, ohmPerKM float64, err error) {
	if err := within("gauge", float64(gauge), 0, 40); err != nil {
		return 0, 0, 0, err
	}
	f, err := CopperFactor(tempC)
	if err != nil {
		return 0, 0, 0, err
	}
	d := gaugeMM(gauge)
	area := math.Pi / 4 * d * d
	return d, area, 1000 * copperOhmMM2M / area * f, nil
}

// CurrentA returns the current of a load, A: P / (V · PF). A filament lamp and a dc load have a power factor of 1.
func CurrentA(powerW, voltV, powerFactor float64) (float64, error) {
	if err := notNegative("power_w", powerW); err != nil {
		return 0, err
	}
	if err := positive("volt_v", voltV); err != nil {
		return 0, err
	}
	if err := within("power_factor", powerFactor, 0.01, 1); err != nil {
		return 0, err
	}
	return powerW / (voltV * powerFactor), nil
}

// DropV returns the voltage lost in a two-core run, V, at a steady current: 2 · L · I · r / 1000. The length is one
// way, the resistance that of one conductor at its working temperature.
func DropV(currentA, lengthM, ohmPerKM float64) (float64, error) {
	if err := notNegative("current_a", currentA); err != nil {
		return 0, err
	}
	if err := notNegative("cable_m", lengthM); err != nil {
		return 0, err
	}
	if err := notNegative("ohm_per_km", ohmPerKM); err != nil {
		return 0, err
	}
	return 2 * lengthM * currentA * ohmPerKM / 1000, nil
}

// AppendTapDropsV appends to dst the voltage lost up to each lamp along one run, V. tapsM are the distances of the
// lamps from the supply, rising, tapA the current each draws. It returns ErrCurve if the distances fall or the two
// slices differ in length.
func AppendTapDropsV(dst, tapsM, tapA []float64, ohmPerKM float64) ([]float64, error) {
	if len(tapsM) != len(tapA) {
		return dst, ErrCurve
	}
	left := 0.0
	for _, a := range tapA {
		if err := notNegative("current_a", a); err != nil {
			return dst, err
		}
		left += a
	}
	at, drop := 0.0, 0.0
	for i, m := range tapsM {
		if err := notNegative("cable_taps_m", m); err != nil {
			return dst, err
		}
		if m < at {
			return dst, ErrCurve
		}
		d, err := DropV(max(left, 0), m-at, ohmPerKM)
		if err != nil {
			return dst, err
		}
		drop += d
		dst = append(dst, drop)
		at = m
		left -= tapA[i]
	}
	return dst, nil
}

// FilamentAtEndV returns what a filament lamp at the end of a run sees, V, and draws, A. Its current goes with
// voltage to the power 0.6, so that
//
//	V = V_s − I_r (V/V_r)^0.6 R_loop
//
// which has one root between 0 and V_s, found by halving to 1e-12 of V_s.
func FilamentAtEndV(supplyV, ratedV, ratedA, loopOhm float64) (lampV, lampA float64, err error) {
	if err := positive("supply_v", supplyV); err != nil {
		return 0, 0, err
	}
	if err := positive("rated_v", ratedV); err != nil {
		return 0, 0, err
	}
	if err := notNegative("rated_a", ratedA); err != nil {
		return 0, 0, err
	}
	if err := notNegative("loop_ohm", loopOhm); err != nil {
		return 0, 0, err
	}
	low, high := 0.0, supplyV
	for range 60 {
		mid := (low + high) / 2
		if mid+ratedA*math.Pow(mid/ratedV, filamentCurrentExponent)*loopOhm > supplyV {
			high = mid
		} else {
			low = mid
		}
		if high-low <= 1e-12*supplyV {
			break
		}
	}
	return high, ratedA * math.Pow(high/ratedV, filamentCurrentExponent), nil
}

// ConstantPowerAtEndV returns what an LED load of constant power at the end of a run sees, V, and draws, A: it takes
// more current as the voltage falls. V² − V_s V + P R = 0 gives the stable root V = (V_s + √(V_s² − 4PR))/2. It
// returns ErrCollapse where there is none.
func ConstantPowerAtEndV(supplyV, powerW, loopOhm float64) (loadV, loadA float64, err error) {
	if err := positive("supply_v", supplyV); err != nil {
		return 0, 0, err
	}
	if err := notNegative("power_w", powerW); err != nil {
		return 0, 0, err
	}
	if err := notNegative("loop_ohm", loopOhm); err != nil {
		return 0, 0, err
	}
	d := supplyV*supplyV - 4*powerW*loopOhm
	if d < 0 {
		return 0, 0, ErrCollapse
	}
	v := (supplyV + math.Sqrt(d)) / 2
	return v, powerW / v, nil
}

// LongestRunM returns the longest one-way run, m, that loses no more than dropPct of voltV at a current.
func LongestRunM(dropPct, voltV, currentA, ohmPerKM float64) (float64, error) {
	if err := within("drop_pct", dropPct, 0, 100); err != nil {
		return 0, err
	}
	if err := positive("volt_v", voltV); err != nil {
		return 0, err
	}
	if err := positive("current_a", currentA); err != nil {
		return 0, err
	}
	if err := positive("ohm_per_km", ohmPerKM); err != nil {
		return 0, err
	}
	return dropPct / 100 * voltV / (2 * currentA * ohmPerKM / 1000), nil
}

// DropSteps shows the drop of a run with its load at the end, and the longest run the limit allows.
func DropSteps(currentA, lengthM, ohmPerKM, voltV, limitPct float64, basis string) []Step {
	drop := 2 * lengthM * currentA * ohmPerKM / 1000
	steps := []Step{{
		What: "voltage lost to the furthest lamp",
		Sum: "2 × " + Figure(lengthM) + " m × " + Figure(currentA) + " A × " + Figure(ohmPerKM/1000) + " Ω/m = " +
			Figure(drop) + " V; " + Figure(drop) + " / " + Figure(voltV) + " = " + Percent(drop/voltV),
		Basis: basis,
	}}
	if currentA > 0 && ohmPerKM > 0 {
		longest := limitPct / 100 * voltV / (2 * currentA * ohmPerKM / 1000)
		steps = append(steps, Step{
			What: "longest run at this load",
			Sum: Figure(limitPct) + " % × " + Figure(voltV) + " V / (2 × " + Figure(currentA) + " A × " + Figure(ohmPerKM/1000) +
				" Ω/m) = " + Figure(longest) + " m",
			Basis: basis,
		})
	}
	return steps
}

// CurrentSteps shows the current of a load against a limit.
func CurrentSteps(powerW, voltV, powerFactor, limitA float64, what, basis string) []Step {
	i := powerW / (voltV * powerFactor)
	line := Figure(powerW) + " W / " + Figure(voltV) + " V = " + Figure(i) + " A"
	if powerFactor != 1 {
		line = Figure(powerW) + " W / (" + Figure(voltV) + " V × " + Figure(powerFactor) + ") = " + Figure(i) + " A"
	}
	return []Step{{
		What:  what,
		Sum:   line + "; " + Figure(i) + " / " + Figure(limitA) + " = " + Percent(i/limitA),
		Basis: basis,
	}}
}

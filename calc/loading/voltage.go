package loading

import "math"

// MainsHigh is the highest mains voltage over nominal that gear has to live with: 10 % above.
const MainsHigh = 1.1

// Limits to the voltage of an ordinary class III luminaire's exposed parts, quoted from IEC 60598-1:2008 clause
// 8.2.3 c).
const (
	SELVLoadedV       = 25.0 // rms, under load
	SELVNoLoadPeakV   = 35.0 // peak, without load
	SELVNoLoadDCV     = 60.0 // ripple-free dc, without load
	LampVoltageFactor = 1.05 // highest output over the rating of a filament lamp; common practice, no source
	LEDVoltageFactor  = 1.10 // the same of an LED lamp that states no maximum; common practice, no source
)

// bridgeDropV is what two conducting diodes of a bridge take, V.
const bridgeDropV = 1.4

// BurstsPerSecond returns how often the output of an electronic transformer starts and stops: twice a mains period,
// because nothing is stored between half cycles.
func BurstsPerSecond(mainsHz float64) (float64, error) {
	if err := positive("mains_hz", mainsHz); err != nil {
		return 0, err
	}
	return 2 * mainsHz, nil
}

// BurstPeakV returns the peak and the peak-to-peak output, V, of an electronic transformer of rmsV at nominal mains,
// the mains standing at mainsFactor of nominal:
//
//	V_pk = √2 · V_rms · m;  V_pp = 2 · V_pk
//
// The output is a high-frequency square wave under the rectified mains, so both polarities occur. It is a clean
// floor: ringing on each edge and a light load add to it by an amount no source states.
func BurstPeakV(rmsV, mainsFactor float64) (peakV, peakToPeakV float64, err error) {
	if err := positive("rms_v", rmsV); err != nil {
		return 0, 0, err
	}
	if err := within("mains_factor", mainsFactor, 0.5, 2); err != nil {
		return 0, 0, err
	}
	peakV = math.Sqrt2 * rmsV * mainsFactor
	return peakV, 2 * peakV, nil
}

// LateStartPeakV returns the peak, V, of an electronic transformer that starts startDeg into each half cycle of
// 180 degrees and still gives rmsV. With V(t) = V_pk |sin| from the start on,
//
//	V_rms² = V_pk² · ((π − θ)/2 + sin(2θ)/4) / π
//
// It answers for 0 to 90 degrees; later, the crest itself is missing.
func LateStartPeakV(rmsV, startDeg float64) (float64, error) {
	if err := positive("rms_v", rmsV); err != nil {
		return 0, err
	}
	if err := within("start_deg", startDeg, 0, 90); err != nil {
		return 0, err
	}
	t := startDeg * math.Pi / 180
	return rmsV / math.Sqrt(((math.Pi-t)/2+math.Sin(2*t)/4)/math.Pi), nil
}

// WoundOutputV returns the rms output, V, of a wound transformer:
//
//	V = V_rated · (1 + reg · (1 − load)) · m
//
// regulationPct is (no-load − full-load)/full-load in %, loadShare the load over the rated VA (1 and above: the
// rated voltage is at rated VA, and an overload is not credited with a lower voltage), mainsFactor the mains over
// nominal. That the rise is linear in VA is common practice, no source.
func WoundOutputV(ratedV, regulationPct, loadShare, mainsFactor float64) (float64, error) {
	if err := positive("rated_v", ratedV); err != nil {
		return 0, err
	}
	if err := within("regulation_pct", regulationPct, 0, 100); err != nil {
		return 0, err
	}
	if err := notNegative("load_share", loadShare); err != nil {
		return 0, err
	}
	if err := within("mains_factor", mainsFactor, 0.5, 2); err != nil {
		return 0, err
	}
	return ratedV * (1 + regulationPct/100*(1-min(loadShare, 1))) * mainsFactor, nil
}

// SmoothedDCV returns the dc voltage a sine of rmsV charges a capacitor to through a bridge: the peak less two diodes
// of 0.7 V. It is never below 0.
func SmoothedDCV(rmsV float64) (float64, error) {
	if err := notNegative("rms_v", rmsV); err != nil {
		return 0, err
	}
	return max(0, math.Sqrt2*rmsV-bridgeDropV), nil
}

// InputLimitsV returns the mains voltages that gear stated for minV to maxV is good for. A marking of one nominal
// voltage or of a narrow band of them (up to a tenth apart: 230 V, 230-240 V, 220-240 V) is a name for a supply, and
// such gear is good for 0.75 of the lower to 1.10 of the upper value (230-240 V: 172-264 V; common practice, no
// source). A wider range is taken as it stands.
func InputLimitsV(minV, maxV float64) (lowV, highV float64, err error) {
	if err := positive("input_min_v", minV); err != nil {
		return 0, 0, err
	}
	if err := within("input_max_v", maxV, minV, huge); err != nil {
		return 0, 0, err
	}
	if Above(maxV, 1.1*minV) {
		return minV, maxV, nil
	}
	return 0.75 * minV, 1.10 * maxV, nil
}

// BurstSteps shows the clean floor of an electronic transformer's output.
func BurstSteps(rmsV, mainsHz float64) []Step {
	steps := []Step{{
		What: "clean peak-to-peak output at nominal mains, ringing not counted",
		Sum: "2 × √2 × " + Figure(rmsV) + " V = " + Figure(2*math.Sqrt2*rmsV) +
			" V peak to peak, plus ringing on every edge",
		Basis: "square wave under the rectified mains, derived",
	}}
	if mainsHz > 0 {
		steps = append(steps, Step{
			What:  "bursts",
			Sum:   "2 × " + Figure(mainsHz) + " Hz = " + Figure(2*mainsHz) + " bursts a second, with a gap at each zero crossing",
			Basis: "common practice, no source",
		})
	}
	return steps
}

// WoundSteps shows the output of a wound transformer against the voltage a lamp may see.
func WoundSteps(ratedV, regulationPct, loadShare, mainsFactor, limitV float64, basis string) []Step {
	v := ratedV * (1 + regulationPct/100*(1-min(loadShare, 1))) * mainsFactor
	mains := ""
	if mainsFactor != 1 {
		mains = " × " + Figure(mainsFactor)
	}
	return []Step{{
		What: "output voltage at this load",
		Sum: Figure(ratedV) + " V × (1 + " + Figure(regulationPct) + " % × (1 − " + Figure(min(loadShare, 1)) + "))" + mains +
			" = " + Figure(v) + " V; limit " + Figure(limitV) + " V",
		Basis: basis,
	}}
}

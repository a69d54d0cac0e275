package loading

import "strings"

// HighLoadShare is the share of an LED driver's rating above which no reserve is left. Common practice, no source.
const HighLoadShare = 0.80

// A Load is what lamps together draw from one supply. The zero Load is no lamps; Add and AddUnknown fill it. It
// holds only sums, so that checking a driver allocates nothing.
type Load struct {
	Lamps    int     // count, those of unknown power included
	Unknown  int     // lamps whose power nobody knows: the sums are then lower bounds
	W        float64 // sum of nameplate power, W
	VALow    float64 // sum of power over the highest power factor, VA
	VAHigh   float64 // sum of power over the lowest power factor, VA
	LargestW float64 // power of the largest lamp, W
}

// Add puts count lamps of powerW each on the supply. The power factor lies between pfLow and pfHigh; pass the same
// number twice where it is known. It returns an *InputError, and adds nothing, for a count outside 0..1,000,000, a
// negative power or a power factor outside 0.01..1.
func (l *Load) Add(count int, powerW, pfLow, pfHigh float64) error {
	if err := within("count", float64(count), 0, 1e6); err != nil {
		return err
	}
	if err := notNegative("power_w", powerW); err != nil {
		return err
	}
	if err := within("power_factor", pfLow, 0.01, 1); err != nil {
		return err
	}
	if err := within("power_factor", pfHigh, pfLow, 1); err != nil {
		return err
	}
	if count == 0 {
		return nil
	}
	l.Lamps += count
	w := float64(count) * powerW
	l.W += w
	l.VALow += w / pfHigh
	l.VAHigh += w / pfLow
	l.LargestW = max(l.LargestW, powerW)
	return nil
}

// AddUnknown puts count lamps of unknown power on the supply: what is known becomes "at least".
func (l *Load) AddUnknown(count int) error {
	if err := within("count", float64(count), 0, 1e6); err != nil {
		return err
	}
	l.Lamps += count
	l.Unknown += count
	return nil
}

// A Verdict is the outcome of a comparison whose inputs may be unknown.
type Verdict int

// The three outcomes. Open means that the answer depends on what nobody has recorded.
const (
	Open Verdict = iota
	Passes
	Fails
)

// String returns the verdict as a word.
func (v Verdict) String() string {
	switch v {
	case Passes:
		return "passes"
	case Fails:
		return "fails"
	}
	return "open"
}

// A Window is what a supply states it may carry. Nil is unknown; a minimum of 0 says that none is stated on the gear.
type Window struct {
	MinW  *float64 // W
	MaxW  *float64 // W
	MaxVA *float64 // VA
}

// A LoadCheck compares a load with a window.
type LoadCheck struct {
	Over        Verdict // power or apparent power above the highest stated
	Under       Verdict // power below the lowest stated
	LampLoss    Verdict // two or more lamps, load at or above the minimum, and below it once the largest lamp fails
	Share       float64 // power over the highest power; 0 where that is unknown
	VAShareLow  float64 // apparent power over the highest apparent power; 0 where that is unknown
	VAShareHigh float64
	AfterLossW  float64 // power once the largest lamp has failed, W
}

// CheckLoad compares the load on one output, steady and all lamps in parallel, with its window:
//
//	P = Σ nᵢPᵢ, S = Σ nᵢPᵢ/PFᵢ;  over: P > P_max or S > S_max;  under: P < P_min
//	lamp loss: n ≥ 2, P ≥ P_min and P − max Pᵢ < P_min
//
// Loads equal to a limit pass. Lamps of unknown power can prove an overload, never an underload. A supply that marks
// only VA, or only W, is judged by what it marks; where that leaves the answer to a range of power factors that
// straddles the limit, the verdict is Open, as it is for every limit that is unknown.
//
// Standards: IEC 61347-2-2 (electronic step-down convertors), IEC 61347-2-13 (LED gear).
func CheckLoad(l Load, w Window) LoadCheck {
	c := LoadCheck{AfterLossW: l.W - l.LargestW}
	overW, overVA := Open, Open
	if w.MaxW != nil && *w.MaxW > 0 {
		c.Share = l.W / *w.MaxW
		switch {
		case Above(l.W, *w.MaxW):
			overW = Fails
		case l.Unknown == 0:
			overW = Passes
		}
	}
	if w.MaxVA != nil && *w.MaxVA > 0 {
		c.VAShareLow, c.VAShareHigh = l.VALow / *w.MaxVA, l.VAHigh / *w.MaxVA
		switch {
		case Above(l.VALow, *w.MaxVA):
			overVA = Fails
		case l.Unknown == 0 && !Above(l.VAHigh, *w.MaxVA):
			overVA = Passes
		}
	}
	switch {
	case overW == Fails || overVA == Fails:
		c.Over = Fails
	case w.MaxVA == nil:
		c.Over = overW
	case w.MaxW == nil, overW == Passes:
		c.Over = overVA
	}

	if w.MinW == nil {
		return c
	}
	switch {
	case !Below(l.W, *w.MinW):
		c.Under = Passes
	case l.Unknown == 0:
		c.Under = Fails
	}
	switch {
	case l.Lamps < 2 || *w.MinW == 0 || !Below(c.AfterLossW, *w.MinW):
		c.LampLoss = Passes
	case l.Unknown == 0 && c.Under == Passes:
		c.LampLoss = Fails
	case c.Under == Fails:
		c.LampLoss = Passes // the underload is the finding
	}
	return c
}

// SmallestDriverW returns the rating, W, that a load may use up to a share of, e.g. 48 W at 0.80 needs 60 W.
func SmallestDriverW(loadW, share float64) (float64, error) {
	if err := notNegative("load_w", loadW); err != nil {
		return 0, err
	}
	if err := within("share", share, 0.01, 1); err != nil {
		return 0, err
	}
	return loadW / share, nil
}

// A Part is one line of a sum of lamps.
type Part struct {
	Count  int
	PowerW float64 // each, W
}

// SumWords writes a sum of lamps, e.g. "2 × 35 W + 3 × 6 W = 88 W".
func SumWords(parts []Part) string {
	if len(parts) == 0 {
		return "no lamps = 0 W"
	}
	var b strings.Builder
	total := 0.0
	for i, p := range parts {
		if i > 0 {
			b.WriteString(" + ")
		}
		b.WriteString(Figure(float64(p.Count)))
		b.WriteString(" × ")
		b.WriteString(Figure(p.PowerW))
		b.WriteString(" W")
		total += float64(p.Count) * p.PowerW
	}
	b.WriteString(" = ")
	b.WriteString(Figure(total))
	b.WriteString(" W")
	return b.String()
}

// LoadSteps shows a load against the highest power of what carries it, e.g.
// "4 × 50 W = 200 W; 200 / 150 = 133.3 %". Limits that are not above 0 are left out.
func LoadSteps(parts []Part, minW, maxW float64, basis string) []Step {
	total := 0.0
	for _, p := range parts {
		total += float64(p.Count) * p.PowerW
	}
	sum := SumWords(parts)
	steps := make([]Step, 0, 2)
	if maxW > 0 {
		steps = append(steps, Step{
			What:  "load against the highest load",
			Sum:   sum + "; " + Figure(total) + " / " + Figure(maxW) + " = " + Percent(total/maxW),
			Basis: basis,
		})
	}
	if minW > 0 {
		sign := " ≥ "
		if Below(total, minW) {
			sign = " < "
		}
		steps = append(steps, Step{
			What:  "load against the lowest load",
			Sum:   sum + "; " + Figure(total) + " W" + sign + Figure(minW) + " W",
			Basis: basis,
		})
	}
	return steps
}

// ApparentSteps shows apparent power against a VA rating; the power factor lies between pfLow and pfHigh.
func ApparentSteps(parts []Part, pfLow, pfHigh, maxVA float64, basis string) []Step {
	total := 0.0
	for _, p := range parts {
		total += float64(p.Count) * p.PowerW
	}
	line := SumWords(parts) + "; " + Figure(total) + " / " + Figure(pfHigh) + " = " + Figure(total/pfHigh) + " VA"
	if pfLow < pfHigh {
		line += " to " + Figure(total) + " / " + Figure(pfLow) + " = " + Figure(total/pfLow) + " VA"
	}
	if maxVA > 0 {
		line += "; " + Figure(total/pfHigh) + " / " + Figure(maxVA) + " = " + Percent(total/pfHigh/maxVA)
	}
	return []Step{{What: "apparent power against the rating", Sum: line, Basis: basis}}
}

// LampLossSteps shows what is left once the largest lamp has failed.
func LampLossSteps(loadW, largestW, minW float64) []Step {
	return []Step{{
		What: "load once the largest lamp has failed",
		Sum: Figure(loadW) + " − " + Figure(largestW) + " = " + Figure(loadW-largestW) + " W against a minimum of " +
			Figure(minW) + " W",
		Basis: "minimum load on the gear",
	}}
}

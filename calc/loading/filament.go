package loading

import "math"

// A FilamentLaw holds the exponents by which a filament lamp follows x, its voltage over its rating: light x^Light,
// power x^Power, current x^Current, life x^-Life, colour temperature x^Colour.
type FilamentLaw struct {
	Light, Power, Current, Life, Colour float64
	Halogen                             bool // leaves the halogen cycle when dimmed: no life is credited below 0.9
}

// The laws in use. Current 0.6 follows from power 1.6; handbooks print 0.55, which would let the two disagree. Life 13
// is handbook practice (from memory); the halogen exponents reproduce +5 % voltage: +15 % light, half the life.
var (
	GeneralFilament = FilamentLaw{Light: 3.4, Power: 1.6, Current: 0.6, Life: 13, Colour: 0.42}
	HalogenFilament = FilamentLaw{Light: 3.0, Power: 1.6, Current: 0.6, Life: 14, Colour: 0.42, Halogen: true}
)

// A FilamentState is what a filament lamp does at a voltage, each over its rated value.
type FilamentState struct {
	Light, Power, Current, Life, Colour float64
	OutOfRange                          bool // the voltage lies outside 0.90..1.10 of the rating: an indication only
}

// At returns the state at a voltage ratio. It answers for 0.01 to 4, with OutOfRange set outside 0.90..1.10. For a
// halogen lamp below 0.90 the life is 1: the gain the law would give is not credited.
func (f FilamentLaw) At(ratio float64) (FilamentState, error) {
	if err := within("voltage_ratio", ratio, 0.01, 4); err != nil {
		return FilamentState{}, err
	}
	s := FilamentState{
		Light:      math.Pow(ratio, f.Light),
		Power:      math.Pow(ratio, f.Power),
		Current:    math.Pow(ratio, f.Current),
		Life:       math.Pow(ratio, -f.Life),
		Colour:     math.Pow(ratio, f.Colour),
		OutOfRange: Below(ratio, 0.9) || Above(ratio, 1.1),
	}
	if f.Halogen && Below(ratio, 0.9) {
		s.Life = 1
	}
	return s, nil
}

// LifeSteps shows what a voltage does to the life of a filament lamp.
func (f FilamentLaw) LifeSteps(lampV, ratedV float64) []Step {
	x := lampV / ratedV
	return []Step{{
		What: "life at this voltage, an average of many lamps",
		Sum: "(" + Figure(lampV) + " / " + Figure(ratedV) + ")^−" + Figure(f.Life) + " = " + Figure(math.Pow(x, -f.Life)) +
			" of the rated life",
		Basis: "filament lamp law, lighting handbooks",
	}}
}

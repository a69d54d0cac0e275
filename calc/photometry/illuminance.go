package photometry

import (
	"fmt"
	"math"
	"slices"

	"lampward/calc/loading"
)

// Space is what the light of a space depends on as time passes.
type Space struct {
	InitialLx     float64 // when new (after 100 h of burning where the lamps are discharge lamps) and clean
	RequiredLx    float64 // maintained
	BurnHPerYear  float64 // how long its lamps burn
	LampAgeH      float64 // mean age of its lamps today, h of burning
	Cleanliness   string  // clean, normal, dirty
	Category      string  // of its luminaires, A to F
	Room          string  // small, medium_large
	Distribution  string  // direct, direct_indirect, indirect
	CleanEveryY   float64 // interval between cleanings, years; 0 where it is never cleaned
	SinceCleanY   float64 // since the last cleaning
	SurfaceEveryY float64 // interval between cleanings of the surfaces; 0 where never
	SinceSurfaceY float64
	SpotReplaced  bool // failed lamps are replaced at once

	// Flux returns LLMF and LSF at an age in hours of burning, and whether that is beyond what its source allows.
	Flux func(ageH float64) (LampFactor, bool, error)
}

// Moment is the light of a space at a time.
type Moment struct {
	Years float64 // from today
	Lx    float64
	MF    float64
	Part  Maintenance
}

// FluxOfKind makes Flux of a kind of lamp. Past the end of its table it is beyond.
func FluxOfKind(kind string) func(float64) (LampFactor, bool, error) {
	return func(ageH float64) (LampFactor, bool, error) {
		table, ok := lampFactors[kind]
		if !ok {
			return LampFactor{}, false, fmt.Errorf("%w: lamps of kind %q", ErrNoTable, kind)
		}
		if end := table[len(table)-1]; ageH > end.Hours {
			return end, true, nil
		}
		f, err := LampAt(kind, ageH)
		return f, false, err
	}
}

// FluxOfProjection makes Flux of a projection. LEDs die of other causes than fading: their survival is not told here
// and taken as 1.
func FluxOfProjection(p Projection) func(float64) (LampFactor, bool, error) {
	return func(ageH float64) (LampFactor, bool, error) {
		if math.IsNaN(ageH) || ageH < 0 {
			return LampFactor{}, false, ErrAge
		}
		share, beyond := p.Share(ageH)
		return LampFactor{ageH, share, 1}, beyond, nil
	}
}

// At returns the light of the space after years from today, just before a cleaning that falls on that moment.
func (s Space) At(years float64) (m Moment, beyond bool, err error) {
	if math.IsNaN(years) || years < 0 {
		return Moment{}, false, ErrAge
	}
	f, beyond, err := s.Flux(s.LampAgeH + years*s.BurnHPerYear)
	if err != nil {
		return Moment{}, false, err
	}
	lmf, past, err := ending(LuminaireAt, s.Category, s.Cleanliness, saw(s.SinceCleanY+years, s.CleanEveryY))
	if err != nil {
		return Moment{}, false, err
	}
	beyond = beyond || past
	rsmf, past, err := ending(func(_, c string, y float64) (float64, error) { return SurfaceAt(s.Room, s.Distribution, c, y) },
		"", s.Cleanliness, saw(s.SinceSurfaceY+years, s.SurfaceEveryY))
	if err != nil {
		return Moment{}, false, err
	}
	part, err := MaintenanceOf(f.LLMF, f.LSF, lmf, rsmf, s.SpotReplaced)
	if err != nil {
		return Moment{}, false, err
	}
	return Moment{Years: years, Lx: s.InitialLx * part.MF, MF: part.MF, Part: part}, beyond || past, nil
}

// ending holds a factor at its last figure where years are past the end of its table.
func ending(f func(a, b string, years float64) (float64, error), a, b string, years float64) (v float64, beyond bool, err error) {
	if end := factorYears[len(factorYears)-1]; years > end {
		v, err = f(a, b, end)
		return v, true, err
	}
	v, err = f(a, b, years)
	return v, false, err
}

// saw is the age of dirt: the time since the last of a row of cleanings, its full interval at the moment of one.
func saw(years, every float64) float64 {
	if every <= 0 || years <= every {
		return years
	}
	if r := math.Mod(years, every); r > 1e-9 {
		return r
	}
	return every
}

// Remedies, in the order in which they are tried.
const (
	RemedyNone    = ""
	RemedyClean   = "clean"   // cleaning alone brings the light back
	RemedyRelamp  = "relamp"  // new lamps do, cleaned or not
	RemedyReplace = "replace" // neither does: more or other luminaires
)

// Crossing says when the light of a space falls below what is required.
type Crossing struct {
	Years     *float64 // from today; nil where it does not within the horizon, or the answer is beyond the cap
	BeyondCap bool     // the sources end before the light would fall below; after EndYears nothing is known
	EndYears  float64  // how far the sources reach from today, at most the horizon
	Low       *Moment  // the first moment below
	Remedy    string   // RemedyNone where the light does not fall below
	Steps     []loading.Step
}

// Falls finds the first moment within the horizon, in years from today, at which the light is below what is required.
// Dirt makes the light a saw-tooth, so moments are looked at every month and just before each cleaning; between the
// two the crossing is found by halving. It fails where the space lacks what the sum needs.
func (s Space) Falls(horizonY float64) (Crossing, error) {
	if err := s.check(horizonY); err != nil {
		return Crossing{}, err
	}
	c := Crossing{}
	last := 0.0
	for _, y := range s.moments(horizonY) {
		m, beyond, err := s.At(y)
		if err != nil {
			return Crossing{}, err
		}
		if beyond {
			c.BeyondCap = true
			return c, nil
		}
		c.EndYears = y
		if m.Lx < s.RequiredLx {
			at, low, err := s.cross(last, y, m)
			if err != nil {
				return Crossing{}, err
			}
			c.Years, c.Low = &at, &low
			c.Remedy, err = s.remedy(at)
			c.Steps = append(low.Part.Steps, loading.Step{
				What:  "illuminance maintained against required",
				Sum:   fmt.Sprintf("%.4g lx x %.4f = %.0f lx < %.4g lx after %.2f years", s.InitialLx, low.MF, low.Lx, s.RequiredLx, at),
				Basis: "E(t) = E0 x MF(t)",
			})
			return c, err
		}
		last = y
	}
	return c, nil
}

func (s Space) check(horizonY float64) error {
	for _, v := range []struct {
		name string
		v    float64
		zero bool
	}{{"the initial illuminance", s.InitialLx, false}, {"the required illuminance", s.RequiredLx, false}, {"the hours a year", s.BurnHPerYear, true},
		{"the age of the lamps", s.LampAgeH, true}, {"the cleaning interval", s.CleanEveryY, true}, {"the time since cleaning", s.SinceCleanY, true},
		{"the interval of the surfaces", s.SurfaceEveryY, true}, {"the time since the surfaces were cleaned", s.SinceSurfaceY, true}, {"the horizon", horizonY, true}} {
		if math.IsNaN(v.v) || math.IsInf(v.v, 0) || v.v < 0 || v.v == 0 && !v.zero {
			return fmt.Errorf("%w: %s is %g", ErrAge, v.name, v.v)
		}
	}
	if horizonY > 100 || s.BurnHPerYear > 8784 {
		return fmt.Errorf("%w: at most 100 years of at most 8,784 h", ErrAge)
	}
	return nil
}

// moments are every month of the horizon and each cleaning, ascending.
func (s Space) moments(horizonY float64) []float64 {
	var out []float64
	for k := 0; ; k++ {
		y := float64(k) / 12
		if y > horizonY {
			break
		}
		out = append(out, y)
	}
	for _, p := range [][2]float64{{s.CleanEveryY, s.SinceCleanY}, {s.SurfaceEveryY, s.SinceSurfaceY}} {
		if p[0] <= 0 {
			continue
		}
		for k := math.Ceil(p[1] / p[0]); ; k++ {
			y := k*p[0] - p[1]
			if y > horizonY || len(out) > 20000 {
				break
			}
			if y >= 0 {
				out = append(out, y)
			}
		}
	}
	slices.Sort(out)
	return out
}

// cross halves the time between a moment with enough light and one without.
func (s Space) cross(enough, low float64, at Moment) (float64, Moment, error) {
	for range 40 {
		mid := (enough + low) / 2
		m, _, err := s.At(mid)
		if err != nil {
			return 0, Moment{}, err
		}
		if m.Lx < s.RequiredLx {
			low, at = mid, m
		} else {
			enough = mid
		}
	}
	return low, at, nil
}

// remedy asks what the light would be after cleaning, and with new lamps, at the moment it is too low.
func (s Space) remedy(years float64) (string, error) {
	clean := s
	clean.LampAgeH += years * s.BurnHPerYear
	clean.SinceCleanY, clean.SinceSurfaceY = 0, saw(s.SinceSurfaceY+years, s.SurfaceEveryY)
	fresh := clean
	fresh.LampAgeH = 0
	for _, try := range []struct {
		space  Space
		remedy string
	}{{clean, RemedyClean}, {fresh, RemedyRelamp}} {
		// A remedy is worth it where its light lasts to the next cleaning, a year where there is none.
		ahead := try.space.CleanEveryY
		if ahead == 0 {
			ahead = 1
		}
		m, beyond, err := try.space.At(ahead)
		if err != nil {
			return "", err
		}
		if !beyond && m.Lx >= s.RequiredLx {
			return try.remedy, nil
		}
	}
	return RemedyReplace, nil
}

// LEDCrossing is the closed form for an LED with its dirt held at its worst: t = ln(B E0 LMF RSMF / Em) / alpha, in hours. It
// is 0 or less where the light is too low from the start.
func LEDCrossing(p Projection, initialLx, requiredLx, lmf, rsmf float64) (hours, neededShare float64, err error) {
	if !(p.Alpha > 0) || !(initialLx > 0) || !(requiredLx > 0) || !(lmf > 0) || !(rsmf > 0) {
		return 0, 0, fmt.Errorf("%w: all of the sum must be above 0", ErrAge)
	}
	neededShare = requiredLx / (initialLx * lmf * rsmf)
	return math.Log(p.B/neededShare) / p.Alpha, neededShare, nil
}

// InitialFrom works back from one reading to the illuminance when new and clean: E0 = E / (LLMF x LMF x RSMF).
func InitialFrom(readLx, llmf, lmf, rsmf float64) (float64, error) {
	if !(readLx > 0) || !(llmf > 0) || !(lmf > 0) || !(rsmf > 0) {
		return 0, fmt.Errorf("%w: all of the sum must be above 0", ErrAge)
	}
	return readLx / (llmf * lmf * rsmf), nil
}

package photometry

import (
	"errors"
	"fmt"
	"math"
	"sort"

	"lampward/calc/loading"
)

// LampFactor is what a lamp of some age gives: LLMF, the share of its flux, and LSF, the share of lamps that burn.
type LampFactor struct {
	Hours, LLMF, LSF float64
}

// Faults of factors.
var (
	ErrNoTable = errors.New("there is no table for this")
	ErrBeyond  = errors.New("this is beyond the end of the table")
	ErrAge     = errors.New("an age must be a number of at least 0")
)

const basisLamp = "lamp table, from memory of the lineage of CIE 97:2005; editable"

// LampKinds are the kinds of lamp with a table of their own.
func LampKinds() []string {
	out := make([]string, 0, len(lampFactors))
	for k := range lampFactors {
		out = append(out, k)
	}
	sort.Strings(out)
	return out
}

// LampAt returns the factors of a kind of lamp after hours of burning, by straight line between the lines of its table.
// Before the first line both are 1. It fails with ErrNoTable, ErrBeyond or ErrAge.
func LampAt(kind string, hours float64) (LampFactor, error) {
	table, ok := lampFactors[kind]
	if !ok {
		return LampFactor{}, fmt.Errorf("%w: lamps of kind %q", ErrNoTable, kind)
	}
	if math.IsNaN(hours) || hours < 0 {
		return LampFactor{}, ErrAge
	}
	before := LampFactor{0, 1, 1}
	for _, l := range table {
		if hours <= l.Hours {
			w := (hours - before.Hours) / (l.Hours - before.Hours)
			return LampFactor{hours, before.LLMF + w*(l.LLMF-before.LLMF), before.LSF + w*(l.LSF-before.LSF)}, nil
		}
		before = l
	}
	return LampFactor{}, fmt.Errorf("%w: %s after %g h; it ends at %g h", ErrBeyond, kind, hours, before.Hours)
}

// Surroundings are the words for how dirty a space is.
var surroundings = map[string]int{"clean": 0, "normal": 1, "dirty": 2}

// LuminaireAt returns the luminaire maintenance factor of a category A to F (CIE 97) after years since the last
// cleaning, in clean, normal or dirty surroundings.
func LuminaireAt(category, cleanliness string, years float64) (float64, error) {
	rows, ok := luminaireFactors[category]
	if !ok {
		return 0, fmt.Errorf("%w: luminaires of category %q", ErrNoTable, category)
	}
	return byYear(rows, cleanliness, years)
}

// SurfaceAt returns the room surface maintenance factor of a room (small, medium_large) and distribution (direct,
// direct_indirect, indirect) after years since the surfaces were cleaned. It is a simplified model that ignores the
// room's geometry.
func SurfaceAt(room, distribution, cleanliness string, years float64) (float64, error) {
	rows, ok := surfaceFactors[[2]string{room, distribution}]
	if !ok {
		return 0, fmt.Errorf("%w: room %q with %q light", ErrNoTable, room, distribution)
	}
	return byYear(rows, cleanliness, years)
}

// OutdoorAt returns the luminaire maintenance factor outdoors by IP code (IP2X, IP5X, IP6X) and pollution (low, medium,
// high), from 1 at 0 years through the figures at 1 and 3 years.
func OutdoorAt(ip, pollution string, years float64) (float64, error) {
	f, ok := outdoorFactors[[2]string{ip, pollution}]
	switch {
	case !ok:
		return 0, fmt.Errorf("%w: %q in %q pollution", ErrNoTable, ip, pollution)
	case math.IsNaN(years) || years < 0:
		return 0, ErrAge
	case years <= 1:
		return 1 + (f[0]-1)*years, nil
	case years <= 3:
		return f[0] + (f[1]-f[0])*(years-1)/2, nil
	}
	return 0, fmt.Errorf("%w: %g years; it ends at 3", ErrBeyond, years)
}

func byYear(rows [3][len(factorYears)]float64, cleanliness string, years float64) (float64, error) {
	e, ok := surroundings[cleanliness]
	if !ok {
		return 0, fmt.Errorf("%w: %q surroundings", ErrNoTable, cleanliness)
	}
	if math.IsNaN(years) || years < 0 {
		return 0, ErrAge
	}
	beforeY, before := 0.0, 1.0
	for k, y := range factorYears {
		if years <= y {
			return before + (rows[e][k]-before)*(years-beforeY)/(y-beforeY), nil
		}
		beforeY, before = y, rows[e][k]
	}
	return 0, fmt.Errorf("%w: %g years; it ends at %g", ErrBeyond, years, beforeY)
}

// Maintenance is the maintenance factor and what it is made of.
type Maintenance struct {
	LLMF, LSF, LMF, RSMF float64
	MF                   float64
	Steps                []loading.Step
}

// MaintenanceOf multiplies the four factors: MF = LLMF x LSF x LMF x RSMF (ISO/CIE TS 22012:2019 on top of CIE 97:2005; the
// product from memory). Where failed lamps are replaced at once LSF is 1.
func MaintenanceOf(llmf, lsf, lmf, rsmf float64, spotReplaced bool) (Maintenance, error) {
	if spotReplaced {
		lsf = 1
	}
	for _, f := range []float64{llmf, lsf, lmf, rsmf} {
		if !(f >= 0 && f <= 1.2) { // the flux of some LEDs rises at first
			return Maintenance{}, fmt.Errorf("%w: a factor of %g", ErrAge, f)
		}
	}
	m := Maintenance{LLMF: llmf, LSF: lsf, LMF: lmf, RSMF: rsmf, MF: llmf * lsf * lmf * rsmf}
	m.Steps = []loading.Step{{
		What:  "maintenance factor: flux x survival x luminaire x surfaces",
		Sum:   fmt.Sprintf("%.3g x %.3g x %.3g x %.3g = %.4f", llmf, lsf, lmf, rsmf, m.MF),
		Basis: "ISO/CIE TS 22012:2019; factors: " + basisLamp,
	}}
	return m, nil
}

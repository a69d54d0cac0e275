package loading

import (
	"fmt"
	"math"
	"strconv"
)

// An InputError names a number that a function cannot answer for.
type InputError struct {
	Name  string  // of the number, with its unit, as the function's parameter
	Value float64 // as given
	Least float64 // lowest value answered for
	Most  float64 // highest value answered for
}

// Error says which number it was and what would have been accepted.
func (e *InputError) Error() string {
	return fmt.Sprintf("%s is %g; it must lie between %g and %g", e.Name, e.Value, e.Least, e.Most)
}

// Smallest and largest magnitude any quantity of a lighting installation is answered for, in the quantity's own
// unit. They are far outside every real value; inside them no product or quotient of this package overflows.
const (
	tiny = 1e-9
	huge = 1e9
)

// within returns an *InputError unless least <= v <= most. NaN is never within.
func within(name string, v, least, most float64) error {
	if v >= least && v <= most {
		return nil
	}
	return &InputError{Name: name, Value: v, Least: least, Most: most}
}

// positive refuses what is not a number above zero.
func positive(name string, v float64) error { return within(name, v, tiny, huge) }

// notNegative refuses what is not a number from zero up.
func notNegative(name string, v float64) error { return within(name, v, 0, huge) }

// slack is the relative difference taken for equality: sums of nameplate values meet their limit exactly in
// decimals but not always in binary.
const slack = 1e-9

// Above reports whether v exceeds limit by more than rounding. A load that meets its limit exactly is not above it.
func Above(v, limit float64) bool { return v-limit > slack*math.Max(math.Abs(v), math.Abs(limit)) }

// Below reports whether v lies under limit by more than rounding.
func Below(v, limit float64) bool { return Above(limit, v) }

// whole returns how many times a quantity fits, forgiving rounding, and at most a million.
func whole(times float64) int {
	if !(times > 0) {
		return 0
	}
	return int(math.Floor(math.Min(times*(1+slack), 1e6)))
}

// Figure writes a number for a line of arithmetic: four significant figures, no exponent, no trailing zeros, whole
// numbers in full.
func Figure(v float64) string {
	if v == 0 || math.IsNaN(v) || math.IsInf(v, 0) {
		return strconv.FormatFloat(v, 'f', -1, 64)
	}
	decimals := 3 - int(math.Floor(math.Log10(math.Abs(v))))
	decimals = min(max(decimals, 0), 12)
	s := strconv.FormatFloat(v, 'f', decimals, 64)
	if decimals == 0 {
		return s
	}
	end := len(s)
	for s[end-1] == '0' {
		end--
	}
	if s[end-1] == '.' {
		end--
	}
	return s[:end]
}

// Percent writes a share of 1 as a percentage with one decimal, e.g. "133.3 %".
func Percent(share float64) string { return strconv.FormatFloat(100*share, 'f', 1, 64) + " %" }

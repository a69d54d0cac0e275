package survival

import (
	"errors"
	"fmt"
	"math"
)

// A Life is what is known of one unit, or of several alike.
type Life struct {
	Entry float64 // its age when it was first seen; 0: from new
	Lower float64 // it worked at this age
	Upper float64 // it had failed by this age: Lower for a failure seen at that age, +Inf for one that still works
	Count float64 // how many; 1 where 0
}

// Failed is a failure at an age; Working a unit that works at an age; Between a failure found between two looks.
func Failed(at float64) Life         { return Life{Lower: at, Upper: at, Count: 1} }
func Working(at float64) Life        { return Life{Lower: at, Upper: math.Inf(1), Count: 1} }
func Between(last, now float64) Life { return Life{Lower: last, Upper: now, Count: 1} }
func (l Life) exact() bool           { return l.Lower == l.Upper }
func (l Life) censored() bool        { return math.IsInf(l.Upper, 1) }
func (l Life) count() float64 {
	if l.Count == 0 {
		return 1
	}
	return l.Count
}

// Faults of data.
var (
	ErrData    = errors.New("a life is not possible")
	ErrNone    = errors.New("there are no lives to learn from")
	ErrNoFit   = errors.New("the data have no most likely curve")
	ErrNumber  = errors.New("a number is out of range")
	ErrNoLimit = errors.New("the data set no limit on this side")
)

// check fails with ErrData for a life that cannot be, and returns how many lives and failures there are. A life that
// ends before it was seen says nothing and is left out by the fits; it is no fault.
func check(lives []Life) (n, failures float64, err error) {
	for i, l := range lives {
		c := l.count()
		if !(l.Entry >= 0) || math.IsInf(l.Entry, 0) || !(l.Lower >= 0) || math.IsInf(l.Lower, 0) || !(l.Upper >= l.Lower) || !(c > 0) || math.IsInf(c, 0) ||
			l.exact() && l.Lower == 0 {
			return 0, 0, fmt.Errorf("%w: life %d, seen from %g, worked at %g, failed by %g, counted %g times", ErrData, i+1, l.Entry, l.Lower, l.Upper, c)
		}
		if l.useful() {
			n += c
			if !l.censored() {
				failures += c
			}
		}
	}
	if n == 0 {
		return 0, 0, ErrNone
	}
	return n, failures, nil
}

// useful reports whether a life says anything beyond its own entry.
func (l Life) useful() bool {
	if l.censored() {
		return l.Lower > l.Entry && l.Lower > 0
	}
	return l.Upper > l.Entry
}

package burnhours

import (
	"errors"
	"math"
	"sort"
	"time"
)

// Kind says what the readings at both ends of an interval tell of it.
type Kind string

// The kinds. Only OK and Rollover are clean: what they say is exact within the meter's own resolution.
const (
	OK       Kind = "ok"       // the counter rose by no more than the time that passed
	Rollover Kind = "rollover" // the counter passed its greatest value and began again at zero
	Reset    Kind = "reset"    // the counter was set to zero, or a new device took its place
	Swap     Kind = "swap"     // another device, which had run before, took its place
	Jump     Kind = "jump"     // the counter rose by more than the time that passed: a wrong reading or unit
	Gap      Kind = "gap"      // the meter was silent for longer than it may be
)

// Clean reports whether an interval of this kind is evidence of duty.
func (k Kind) Clean() bool { return k == OK || k == Rollover }

// Reading is what a meter showed at an instant: hours of a counter, 1 or 0 of a state, or kilowatt-hours.
type Reading struct {
	At    time.Time
	Value float64
}

// Interval is the time between two readings. LowH <= BurnH <= HighH <= its length, all in hours.
type Interval struct {
	From, To time.Time
	Kind     Kind
	BurnH    float64
	LowH     float64
	HighH    float64
	Starts   int // times that the light was switched on; known of states only
}

// LengthH is the time between both ends, in hours.
func (i Interval) LengthH() float64 { return i.To.Sub(i.From).Hours() }

// Faults of readings. Each is wrapped with the instant it is about.
var (
	ErrOrder  = errors.New("readings are not in the order of time, or two have the same time")
	ErrNumber = errors.New("a reading is not a number of the kind this point sends")
	ErrOption = errors.New("an option of the point is out of range")
)

// ordered fails where readings do not follow each other in time or hold what is no finite number of at least 0.
func ordered(rs []Reading) error {
	for i, r := range rs {
		if math.IsNaN(r.Value) || math.IsInf(r.Value, 0) || r.Value < 0 {
			return at(ErrNumber, r.At)
		}
		if i > 0 && !r.At.After(rs[i-1].At) {
			return at(ErrOrder, r.At)
		}
	}
	return nil
}

type atError struct {
	err error
	at  time.Time
}

func (e *atError) Error() string { return e.err.Error() + " at " + e.at.Format(time.RFC3339) }
func (e *atError) Unwrap() error { return e.err }

func at(err error, t time.Time) error { return &atError{err, t} }

// Hours is an amount of burning with its bounds, in hours.
type Hours struct {
	PointH float64 `json:"point_h"`
	LowH   float64 `json:"low_h"`
	HighH  float64 `json:"high_h"`
}

// Add returns the sum of two amounts.
func (h Hours) Add(o Hours) Hours {
	return Hours{h.PointH + o.PointH, h.LowH + o.LowH, h.HighH + o.HighH}
}

// Sub returns h less o; the bounds stay those of a difference of the same running total.
func (h Hours) Sub(o Hours) Hours {
	return Hours{h.PointH - o.PointH, h.LowH - o.LowH, h.HighH - o.HighH}
}

// scaled returns the share of an amount.
func (h Hours) scaled(share float64) Hours {
	return Hours{h.PointH * share, h.LowH * share, h.HighH * share}
}

func (i Interval) hours() Hours { return Hours{i.BurnH, i.LowH, i.HighH} }

// Total adds up all intervals.
func Total(is []Interval) Hours {
	var h Hours
	for _, i := range is {
		h = h.Add(i.hours())
	}
	return h
}

// Between returns the burning from one instant to another, by straight line inside an interval. Time that no interval
// covers counts nothing; coveredH tells how much was covered.
func Between(is []Interval, from, to time.Time) (h Hours, coveredH float64) {
	first := sort.Search(len(is), func(k int) bool { return is[k].To.After(from) })
	for _, i := range is[first:] {
		if !i.From.Before(to) {
			break
		}
		a, b := i.From, i.To
		if from.After(a) {
			a = from
		}
		if to.Before(b) {
			b = to
		}
		part := b.Sub(a).Hours()
		if part <= 0 {
			continue
		}
		h = h.Add(share(i, part))
		coveredH += part
	}
	return h, coveredH
}

// share is what an interval puts into a part of itself: the point value by straight line, the bounds such that the
// part holds no more than its own length and at least what the rest cannot hold.
func share(i Interval, partH float64) Hours {
	length := i.LengthH()
	h := i.hours().scaled(partH / length)
	if partH >= length {
		return i.hours()
	}
	if i.Kind == OK || i.Kind == Rollover {
		return h // the counter's own resolution; when inside the interval the light burned is not told
	}
	h.LowH = math.Max(0, i.LowH-(length-partH))
	h.HighH = math.Min(partH, i.HighH)
	return h
}

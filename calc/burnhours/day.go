package burnhours

import (
	"errors"
	"time"
)

// Day is what a point tells of one local day. BurnH to HighH are hours of burning, CoveredH the hours of the day that
// readings cover, LengthH those the day has: 23 or 25 where the clock changes.
type Day struct {
	Date     time.Time // its first instant
	Hours    Hours
	CoveredH float64
	LengthH  float64
	Starts   int
}

// Midnight returns the first instant of t's local day. Where the clock skips midnight it is the first instant after.
func Midnight(t time.Time, loc *time.Location) time.Time {
	y, m, d := t.In(loc).Date()
	return dayStart(y, m, d, loc)
}

func dayStart(y int, m time.Month, d int, loc *time.Location) time.Time {
	t := time.Date(y, m, d, 0, 0, 0, 0, loc)
	if ty, tm, td := t.Date(); ty == y && tm == m && td == d {
		// Where midnight comes twice, the first of both begins the day.
		if e := t.Add(-time.Hour); e.Day() == t.Day() && e.Hour() == 0 {
			return e
		}
		return t
	}
	// Midnight is skipped and time.Date went back to the day before: the day begins where the clock lands.
	for t.In(loc).Day() != time.Date(y, m, d, 12, 0, 0, 0, loc).Day() {
		t = t.Add(15 * time.Minute)
	}
	return t
}

// Next returns the first instant of the local day after the one that begins at day.
func Next(day time.Time, loc *time.Location) time.Time {
	y, m, d := day.In(loc).Date()
	noon := time.Date(y, m, d+1, 12, 0, 0, 0, loc)
	return Midnight(noon, loc)
}

// Days spreads intervals over the local days they touch, from the day of the first to the day of the last.
func Days(is []Interval, loc *time.Location) []Day {
	if len(is) == 0 {
		return nil
	}
	var out []Day
	k, begun := 0, 0 // the first interval that reaches into the day; the first whose start is not yet counted
	end := is[len(is)-1].To
	for from := Midnight(is[0].From, loc); from.Before(end); {
		to := Next(from, loc)
		d := Day{Date: from, LengthH: to.Sub(from).Hours()}
		for k < len(is) && !is[k].To.After(from) {
			k++
		}
		d.Hours, d.CoveredH = Between(is[k:], from, to)
		for begun < len(is) && (is[begun].To.Before(to) || !to.Before(end)) {
			d.Starts += is[begun].Starts // a start is at the end of its interval
			begun++
		}
		out = append(out, d)
		from = to
	}
	return out
}

// Faults of a local time that is given without an offset.
var (
	ErrSkipped = errors.New("the clock skipped this local time; give the time with its offset")
	ErrDoubled = errors.New("this local time came twice; give the time with its offset")
)

// Local returns the instant of a local time without an offset (the fields of wall, whatever its location). It fails
// with ErrSkipped or ErrDoubled where the clock change leaves none or two.
func Local(wall time.Time, loc *time.Location) (time.Time, error) {
	y, m, d := wall.Date()
	t := time.Date(y, m, d, wall.Hour(), wall.Minute(), wall.Second(), wall.Nanosecond(), loc)
	same := func(u time.Time) bool {
		u = u.In(loc)
		uy, um, ud := u.Date()
		return uy == y && um == m && ud == d && u.Hour() == wall.Hour() && u.Minute() == wall.Minute() && u.Second() == wall.Second()
	}
	if !same(t) {
		return time.Time{}, ErrSkipped
	}
	// Clocks change by an hour, in one place by half of one.
	for _, by := range []time.Duration{time.Hour, 30 * time.Minute} {
		if same(t.Add(by)) || same(t.Add(-by)) {
			return time.Time{}, ErrDoubled
		}
	}
	return t, nil
}

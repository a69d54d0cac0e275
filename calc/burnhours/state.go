package burnhours

import (
	"math"
	"slices"
	"time"
)

// States returns the intervals of readings that are 1 while the light is on and 0 while it is off. A state holds until
// the next reading, but a silence longer than longest is a gap and not bridged: how long the light burned in it is
// told as unknown, with the duty of the rest as its point value. Other values than 0 and 1 fail with ErrNumber.
func States(rs []Reading, longest time.Duration, p Prior) ([]Interval, Duty, error) {
	if longest <= 0 {
		return nil, Duty{}, ErrOption
	}
	if err := (Counter{}).check(p); err != nil {
		return nil, Duty{}, err
	}
	if err := ordered(rs); err != nil {
		return nil, Duty{}, err
	}
	var is []Interval
	for k, r := range rs {
		if r.Value != 0 && r.Value != 1 {
			return nil, Duty{}, at(ErrNumber, r.At)
		}
		if k == 0 {
			continue
		}
		i := Interval{From: rs[k-1].At, To: r.At, Kind: OK}
		if i.To.Sub(i.From) > longest {
			i.Kind, i.HighH = Gap, i.LengthH()
		} else if rs[k-1].Value == 1 {
			i.BurnH = i.LengthH()
			i.LowH, i.HighH = i.BurnH, i.BurnH
		}
		if rs[k-1].Value == 0 && r.Value == 1 {
			i.Starts = 1
		}
		is = append(is, i)
	}
	d := dutyOf(is, p)
	fill(is, d)
	return is, d, nil
}

// Energy returns the intervals of a counter of kilowatt-hours. The light burned in an interval where the mean power is
// above onW; below it the power is that of standby, which is not burning. A silence longer than longest is a gap; so
// is a counter that falls. Within an interval nothing is known finer than its whole, so readings should be no
// further apart than lights are usually on.
func Energy(rs []Reading, onW float64, longest time.Duration, p Prior) ([]Interval, Duty, error) {
	if longest <= 0 || math.IsNaN(onW) || math.IsInf(onW, 0) || onW <= 0 {
		return nil, Duty{}, ErrOption
	}
	if err := (Counter{}).check(p); err != nil {
		return nil, Duty{}, err
	}
	if err := ordered(rs); err != nil {
		return nil, Duty{}, err
	}
	var is []Interval
	for k := 1; k < len(rs); k++ {
		i := Interval{From: rs[k-1].At, To: rs[k].At, Kind: OK}
		w, fell := meanW(rs[k-1], rs[k])
		switch {
		case fell:
			i.Kind, i.HighH = Reset, i.LengthH()
		case i.To.Sub(i.From) > longest:
			i.Kind, i.HighH = Gap, i.LengthH()
		case w > onW:
			i.BurnH = i.LengthH()
			i.LowH, i.HighH = i.BurnH, i.BurnH
		}
		is = append(is, i)
	}
	d := dutyOf(is, p)
	fill(is, d)
	return is, d, nil
}

func meanW(a, b Reading) (w float64, fell bool) {
	dx := b.Value - a.Value
	return dx * 1000 / b.At.Sub(a.At).Hours(), dx < 0
}

// threshold: a learned one needs at least this many intervals on each side, and the means of both sides this far apart.
const (
	leastOnSide   = 12
	leastContrast = 2.0
)

// LearnOnW finds the power above which a light is on, from readings of a counter of kilowatt-hours: the split of the
// intervals' mean powers that leaves the least variance on both sides (Otsu, IEEE Trans. Syst. Man Cybern. 9, 1979,
// from memory). ok is false where there are too few intervals, or both sides are too much alike to be two states: then
// the threshold must be given.
func LearnOnW(rs []Reading) (onW float64, ok bool, err error) {
	if err := ordered(rs); err != nil {
		return 0, false, err
	}
	var ws []float64
	for k := 1; k < len(rs); k++ {
		if w, fell := meanW(rs[k-1], rs[k]); !fell {
			ws = append(ws, w)
		}
	}
	slices.Sort(ws)
	n := len(ws)
	if n < 2*leastOnSide {
		return 0, false, nil
	}
	sum := 0.0
	for _, w := range ws {
		sum += w
	}
	best, cut, below := -1.0, 0, 0.0
	for k := 1; k < n; k++ {
		below += ws[k-1]
		if k < leastOnSide || n-k < leastOnSide || ws[k] == ws[k-1] {
			continue
		}
		gap := below/float64(k) - (sum-below)/float64(n-k)
		if between := float64(k) * float64(n-k) * gap * gap; between > best {
			best, cut = between, k
		}
	}
	if cut == 0 {
		return 0, false, nil
	}
	low, high := mean(ws[:cut]), mean(ws[cut:])
	// Two states stand apart: the upper mean is well above the lower, and no interval's power lies in the middle third
	// of the way between them more often than one in twenty.
	third := (high - low) / 3
	middle := 0
	for _, w := range ws {
		if w > low+third && w < high-third {
			middle++
		}
	}
	if high < leastContrast*low || middle*20 > n {
		return 0, false, nil
	}
	return (low + high) / 2, true, nil
}

func mean(xs []float64) float64 {
	sum := 0.0
	for _, x := range xs {
		sum += x
	}
	return sum / float64(len(xs))
}

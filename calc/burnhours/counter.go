package burnhours

import (
	"math"
	"time"
)

// Counter says how a counter of hours counts.
type Counter struct {
	ModulusH   float64       // the value at which it begins again at 0; 0 where not known
	ToleranceH float64       // its resolution and the skew of its clock together, over any run of intervals
	StepH      float64       // readings nearer to each other than this are one interval; 0 where each counts
	LongestGap time.Duration // a longer silence is told as a gap where the counter does not bridge it; 0 for none
}

// Duty is the share of time that a light burned, from clean intervals: a ratio estimate (Cochran, Sampling
// Techniques, 1977, chapter 6), and its value pulled towards a default while little is known (Buhlmann's credibility
// form).
type Duty struct {
	CleanIntervals int
	CalendarH      float64  // time in clean intervals
	BurnH          float64  // burning in them
	Ratio          *float64 // 0 to 1; nil without a clean interval
	SE             *float64 // standard error of Ratio; nil with fewer than two
	Shrunk         float64  // 0 to 1
}

// Prior is what is believed of a duty before anything is measured.
type Prior struct {
	Ratio     float64 // 0 to 1
	ExposureH float64 // how much time of measuring it is worth
}

// Intervals classifies what happened between readings of a counter in hours and returns the duty found. Readings are
// in the order of time. It fails with ErrOrder, ErrNumber or ErrOption.
//
// A counter rises by no more than time passes. What it rises more than that, within the tolerance, is carried to the
// next interval, so that a counter of whole hours read every quarter is not taken for one that jumps; the tolerance
// is of the sum carried, not of each interval. An interval that is not clean takes the duty found in the others,
// held within its bounds.
func (c Counter) Intervals(rs []Reading, p Prior) ([]Interval, Duty, error) {
	if err := c.check(p); err != nil {
		return nil, Duty{}, err
	}
	if err := ordered(rs); err != nil {
		return nil, Duty{}, err
	}
	rs = c.thinned(rs)
	var is []Interval
	carried := 0.0
	for k := 1; k < len(rs); k++ {
		i := Interval{From: rs[k-1].At, To: rs[k].At}
		dt, dx := i.LengthH(), rs[k].Value-rs[k-1].Value
		i.Kind = OK
		if dx < 0 {
			switch {
			case c.ModulusH > 0 && rs[k-1].Value < c.ModulusH && rs[k].Value < c.ModulusH && carried+dx+c.ModulusH <= dt+c.ToleranceH:
				i.Kind, dx = Rollover, dx+c.ModulusH
			case rs[k].Value <= dt+c.ToleranceH:
				i.Kind = Reset
			default:
				i.Kind = Swap
			}
		} else if carried+dx > dt+c.ToleranceH {
			i.Kind = Jump
		}
		switch i.Kind {
		case OK, Rollover:
			burn := math.Min(carried+dx, dt)
			carried += dx - burn
			i.BurnH, i.LowH, i.HighH = burn, burn, burn
		case Reset:
			carried = 0
			i.LowH, i.HighH = math.Min(rs[k].Value, dt), dt
		default:
			carried = 0
			i.LowH, i.HighH = 0, dt
		}
		is = append(is, i)
	}
	d := dutyOf(is, p)
	fill(is, d)
	return is, d, nil
}

// fill gives intervals that are not clean the point value of the shrunk duty, within their bounds.
func fill(is []Interval, d Duty) {
	for k := range is {
		if i := &is[k]; !i.Kind.Clean() {
			i.BurnH = math.Min(math.Max(d.Shrunk*i.LengthH(), i.LowH), i.HighH)
		}
	}
}

func (c Counter) check(p Prior) error {
	for _, v := range []float64{c.ModulusH, c.ToleranceH, c.StepH, p.Ratio, p.ExposureH} {
		if math.IsNaN(v) || math.IsInf(v, 0) || v < 0 {
			return ErrOption
		}
	}
	if p.Ratio > 1 {
		return ErrOption
	}
	return nil
}

// thinned leaves out readings that follow the one before within a step, as long as the counter does not fall: they
// say nothing that the next does not.
func (c Counter) thinned(rs []Reading) []Reading {
	if c.StepH == 0 || len(rs) < 3 {
		return rs
	}
	out := []Reading{rs[0]}
	for k := 1; k < len(rs); k++ {
		last := out[len(out)-1]
		falls := rs[k].Value < rs[k-1].Value || k+1 < len(rs) && rs[k+1].Value < rs[k].Value
		if k+1 == len(rs) || falls || rs[k].At.Sub(last.At).Hours() >= c.StepH {
			out = append(out, rs[k])
		}
	}
	return out
}

// DutyOf returns the duty that intervals show.
func DutyOf(is []Interval, p Prior) (Duty, error) {
	if err := (Counter{}).check(p); err != nil {
		return Duty{}, err
	}
	return dutyOf(is, p), nil
}

func dutyOf(is []Interval, p Prior) Duty {
	var d Duty
	for _, i := range is {
		if i.Kind.Clean() {
			d.CleanIntervals++
			d.CalendarH += i.LengthH()
			d.BurnH += i.BurnH
		}
	}
	if d.CalendarH > 0 {
		r := d.BurnH / d.CalendarH
		d.Ratio = &r
		if k := float64(d.CleanIntervals); k > 1 {
			sum := 0.0
			for _, i := range is {
				if i.Kind.Clean() {
					e := i.BurnH - r*i.LengthH()
					sum += e * e
				}
			}
			se := math.Sqrt(k/(k-1)*sum) / d.CalendarH
			d.SE = &se
		}
	}
	d.Shrunk = p.Ratio
	if t := d.CalendarH + p.ExposureH; t > 0 {
		d.Shrunk = math.Min(1, math.Max(0, (d.BurnH+p.Ratio*p.ExposureH)/t))
	}
	return d
}

// Ahead extends a total beyond the last reading: the shrunk duty times the hours that follow, with the standard error
// of the extension (nil where the duty has none). The bounds grow by nothing and by all of the time.
func (d Duty) Ahead(total Hours, aheadH float64) (h Hours, se *float64) {
	h = Hours{total.PointH + d.Shrunk*aheadH, total.LowH, total.HighH + aheadH}
	if d.SE != nil {
		e := aheadH * *d.SE
		se = &e
	}
	return h, se
}

package forecast

import (
	"cmp"
	"fmt"
	"math"
	"runtime"
	"slices"
	"sync"

	"lampward/calc/survival"
)

// A Group is places alike: units of one age that burn alike.
type Group struct {
	Age           float64 // burning hours of the unit now there
	HoursPerMonth float64 // that it will burn
	Count         int
}

// A Month is what is foreseen of one month.
type Month struct {
	Expected            float64 // failures in it
	Low, High           int     // limits of them
	ByThen              float64 // failures from the start to its end
	ByThenLow           int
	ByThenMedian        int
	ByThenHigh          int
	demand, accumulated Count
}

// Demand is the distribution of the failures from the start to the month's end.
func (m *Month) Demand() Count { return m.accumulated }

// A Prediction is what is foreseen of a kind of unit.
type Prediction struct {
	Months []Month
	Places int
	Binned bool // ages and duties were gathered in bins
}

// mostExact is how many different ages and duties are followed one by one.
const mostExact = 5000

// ageBins and dutyBins are how many bins of age, in each of duty, stand for more.
const ageBins, dutyBins = 96, 8

// finest and leastSteps bound the steps of a course.
const finest, leastSteps = 4000, 4

// Predict foresees the failures of places in each of the coming months, each failed unit being replaced by a new one of the
// same kind at once. draws are the lives that the data allow, with weights: limits hold a share of all that may come,
// what is not known of the life included. A place is taken to fail at most once in a month, or as often as it must.
func Predict(groups []Group, draws []survival.Draw, months int, share float64) (*Prediction, error) {
	if months < 1 || months > 120 || !(share > 0 && share < 1) || len(draws) == 0 {
		return nil, fmt.Errorf("%w: %d months, limits of %g, %d lives", ErrNumber, months, share, len(draws))
	}
	out := &Prediction{}
	for _, g := range groups {
		if !(g.Age >= 0) || math.IsInf(g.Age, 0) || !(g.HoursPerMonth >= 0 && g.HoursPerMonth <= 745) || g.Count < 0 {
			return nil, fmt.Errorf("%w: %d places of age %g h, %g h a month", ErrNumber, g.Count, g.Age, g.HoursPerMonth)
		}
		out.Places += g.Count
	}
	groups = gathered(groups)
	if len(groups) > mostExact {
		groups, out.Binned = binned(groups), true
	}
	inMonth, byThen := make([][]Weighted, months), make([][]Weighted, months)
	for m := range months {
		inMonth[m], byThen[m] = make([]Weighted, len(draws)), make([]Weighted, len(draws))
	}
	var wg sync.WaitGroup
	fault := make([]error, runtime.GOMAXPROCS(0))
	for w := range fault {
		wg.Go(func() {
			for k := w; k < len(draws) && fault[w] == nil; k += len(fault) {
				fault[w] = one(groups, draws[k], months, func(m int, in, then Count) {
					inMonth[m][k], byThen[m][k] = Weighted{in, draws[k].Weight}, Weighted{then, draws[k].Weight}
				})
			}
		})
	}
	wg.Wait()
	for _, err := range fault {
		if err != nil {
			return nil, err
		}
	}
	for m := range months {
		var month Month
		var err error
		if month.demand, err = Mix(inMonth[m]); err != nil {
			return nil, err
		}
		if month.accumulated, err = Mix(byThen[m]); err != nil {
			return nil, err
		}
		month.Expected, month.ByThen = month.demand.Mean(), month.accumulated.Mean()
		month.Low, month.High = month.demand.Interval(share)
		month.ByThenLow, month.ByThenHigh = month.accumulated.Interval(share)
		month.ByThenMedian = month.accumulated.Quantile(0.5)
		out.Months = append(out.Months, month)
	}
	return out, nil
}

// one follows the groups where the life is a given one.
func one(groups []Group, life survival.Draw, months int, put func(m int, in, then Count)) error {
	in, then := make([]total, months), make([]total, months)
	courses := map[float64]*Course{}
	for _, g := range groups {
		if g.HoursPerMonth == 0 {
			continue
		}
		c := courses[g.HoursPerMonth]
		per := stepsPerMonth(life, g.HoursPerMonth, months)
		if c == nil {
			var err error
			if c, err = NewCourse(life, g.HoursPerMonth*float64(months), per*months); err != nil {
				return err
			}
			courses[g.HoursPerMonth] = c
		}
		first := make([]float64, per*months+1)
		for i := 1; i < len(first); i++ {
			first[i] = survival.Conditional(life.Family, life.Mu, life.Sigma, g.Age, c.Step*float64(i))
		}
		before := 0.0
		for m := range months {
			place := c.Place(first, per*(m+1))
			mean := place.Mean()
			whole, part := math.Modf(math.Max(mean-before, 0))
			before = mean
			in[m].add(Count{int(whole), []float64{1 - part, part}}, g.Count)
			then[m].add(place, g.Count)
		}
	}
	for m := range months {
		put(m, in[m].count(), then[m].count())
	}
	return nil
}

// stepsPerMonth makes a step no longer than a fortieth of the median life.
func stepsPerMonth(life survival.Draw, hours float64, months int) int {
	per := int(math.Ceil(hours / (life.B(0.5) / 40)))
	return max(1, leastSteps/months, min(per, finest/months))
}

// total is the count of groups added up: exactly while it is small, by its moments as well.
type total struct {
	parts                 []Count
	times                 []int
	mean, variance, third float64
}

func (t *total) add(c Count, n int) {
	m, v, k := c.moments()
	t.mean, t.variance, t.third = t.mean+m*float64(n), t.variance+v*float64(n), t.third+k*float64(n)
	t.parts, t.times = append(t.parts, c), append(t.times, n)
}

// count is exact where the deviation is 5 or less, or the places are few.
func (t *total) count() Count {
	places := 0
	for _, n := range t.times {
		places += n
	}
	if t.variance > 25 && places > 200 {
		return near(t.mean, t.variance, t.third)
	}
	out := none()
	for i, c := range t.parts {
		if n := t.times[i]; n > 8 {
			out = out.Plus(c.times(n))
		} else {
			for range n {
				out.absorb(c)
			}
		}
	}
	return out
}

// gathered puts groups alike together.
func gathered(groups []Group) []Group {
	all := slices.Clone(groups)
	slices.SortFunc(all, func(a, b Group) int {
		return cmp.Or(cmp.Compare(a.HoursPerMonth, b.HoursPerMonth), cmp.Compare(a.Age, b.Age))
	})
	out := all[:0]
	for _, g := range all {
		if n := len(out); n > 0 && out[n-1].Age == g.Age && out[n-1].HoursPerMonth == g.HoursPerMonth {
			out[n-1].Count += g.Count
		} else if g.Count > 0 {
			out = append(out, g)
		}
	}
	return out
}

// binned puts places of like duty and age together, each bin at the means of its places.
func binned(groups []Group) []Group {
	var out []Group
	for _, duty := range cut(groups, dutyBins) {
		hours, n := 0.0, 0
		for _, g := range duty {
			hours, n = hours+g.HoursPerMonth*float64(g.Count), n+g.Count
		}
		slices.SortFunc(duty, func(a, b Group) int { return cmp.Compare(a.Age, b.Age) })
		for _, ages := range cut(duty, ageBins) {
			bin := Group{HoursPerMonth: hours / float64(n)}
			sum := 0.0
			for _, g := range ages {
				sum, bin.Count = sum+g.Age*float64(g.Count), bin.Count+g.Count
			}
			bin.Age = sum / float64(bin.Count)
			out = append(out, bin)
		}
	}
	return out
}

// cut divides groups into runs of about as many places each.
func cut(groups []Group, runs int) [][]Group {
	places := 0
	for _, g := range groups {
		places += g.Count
	}
	var out [][]Group
	at, seen := 0, 0
	for k := 1; k <= runs && at < len(groups); k++ {
		start := at
		for at < len(groups) && (seen < places*k/runs || at == start) {
			seen += groups[at].Count
			at++
		}
		out = append(out, groups[start:at])
	}
	return out
}

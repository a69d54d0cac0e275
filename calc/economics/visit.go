package economics

import (
	"fmt"
	"math"
	"math/bits"
	"slices"
	"sort"
)

// Activity is work that has a best time of its own and costs more when it is moved.
type Activity struct {
	At       float64 // its best time, years from today
	Earliest float64 // bounds of moving it, years from today
	Latest   float64
	Setups   []string // what must be set up for it: a lift, a closed hall, an isolated circuit

	// Penalty is what moving it by so many years costs; 0 at 0, convex.
	Penalty func(shiftY float64) float64
}

// Visit is a group of activities done at one time.
type Visit struct {
	At         float64 // years from today
	Activities []int   // indexes, ascending
	Penalty    float64 // of moving them there
	Shared     float64 // set-up cost that is spent once instead of for each
}

// Grouping is a division of all activities into visits.
type Grouping struct {
	Visits []Visit
	Saving float64 // against each activity alone: shared set-ups less penalties
	Exact  bool    // no division saves more; otherwise the best of those that keep the order of time
}

// exactUpTo is how many activities are divided exactly, by all subsets.
const exactUpTo = 11

// Group joins activities so that set-ups are shared, after the dynamic grouping of Wildeman, Dekker and Smit (European
// Journal of Operational Research 99, 1997): the saving of a visit is the set-up cost it shares less the least penalty of
// moving its activities to one moment. Up to eleven activities are divided exactly; more are divided in the order of
// their best times, which is the best there is where all have the same set-up and penalties of one shape. It fails
// with ErrInput.
func Group(as []Activity, setupCost map[string]float64) (Grouping, error) {
	if err := checkActivities(as, setupCost); err != nil {
		return Grouping{}, err
	}
	if len(as) <= exactUpTo {
		return groupExact(as, setupCost), nil
	}
	return groupInOrder(as, setupCost), nil
}

func checkActivities(as []Activity, setupCost map[string]float64) error {
	for name, c := range setupCost {
		if !(c >= 0) || math.IsInf(c, 0) {
			return fmt.Errorf("%w: setting up %s costs %g", ErrInput, name, c)
		}
	}
	for k, a := range as {
		if math.IsNaN(a.At) || math.IsInf(a.At, 0) || !(a.Earliest <= a.At && a.At <= a.Latest) || math.IsInf(a.Earliest, 0) || math.IsInf(a.Latest, 0) {
			return fmt.Errorf("%w: activity %d is best at %g, between %g and %g", ErrInput, k, a.At, a.Earliest, a.Latest)
		}
		for _, s := range a.Setups {
			if _, ok := setupCost[s]; !ok {
				return fmt.Errorf("%w: setting up %s has no cost", ErrInput, s)
			}
		}
	}
	return nil
}

// visitOf is the best single visit for some activities; ok is false where they have no moment in common.
func visitOf(as []Activity, which []int, setupCost map[string]float64) (v Visit, ok bool) {
	low, high := math.Inf(-1), math.Inf(1)
	from, to := math.Inf(1), math.Inf(-1)
	count := map[string]int{}
	for _, k := range which {
		a := &as[k]
		low, high = math.Max(low, a.Earliest), math.Min(high, a.Latest)
		from, to = math.Min(from, a.At), math.Max(to, a.At)
		setups := slices.Clone(a.Setups)
		slices.Sort(setups)
		for _, s := range slices.Compact(setups) {
			count[s]++
		}
	}
	if low > high {
		return Visit{}, false
	}
	cost := func(t float64) float64 {
		sum := 0.0
		for _, k := range which {
			sum += as[k].Penalty(t - as[k].At)
		}
		return sum
	}
	at := golden(cost, math.Max(low, math.Min(from, high)), math.Min(high, math.Max(to, low)))
	v = Visit{At: at, Activities: which, Penalty: cost(at)}
	names := make([]string, 0, len(count))
	for s := range count {
		names = append(names, s)
	}
	sort.Strings(names) // sums of floating numbers depend on their order
	for _, s := range names {
		v.Shared += float64(count[s]-1) * setupCost[s]
	}
	return v, true
}

// golden returns where a convex function is least between two bounds.
func golden(f func(float64) float64, a, b float64) float64 {
	if a >= b {
		return a
	}
	const ratio = 0.6180339887498949
	c, d := b-ratio*(b-a), a+ratio*(b-a)
	fc, fd := f(c), f(d)
	for range 80 {
		if fc <= fd {
			b, d, fd = d, c, fc
			c = b - ratio*(b-a)
			fc = f(c)
		} else {
			a, c, fc = c, d, fd
			d = a + ratio*(b-a)
			fd = f(d)
		}
	}
	m := (a + b) / 2
	for _, e := range []float64{a, b} {
		if f(e) < f(m) {
			m = e
		}
	}
	return m
}

// groupExact divides by all subsets: best[s] is the most that the activities in s can save.
func groupExact(as []Activity, setupCost map[string]float64) Grouping {
	n := len(as)
	full := 1<<n - 1
	visits := make([]Visit, full+1)
	can := make([]bool, full+1)
	for s := 1; s <= full; s++ {
		var which []int
		for k := range n {
			if s&(1<<k) != 0 {
				which = append(which, k)
			}
		}
		visits[s], can[s] = visitOf(as, which, setupCost)
	}
	best := make([]float64, full+1)
	cut := make([]int, full+1)
	for s := 1; s <= full; s++ {
		best[s] = math.Inf(-1)
		first := 1 << bits.TrailingZeros(uint(s))
		for sub := s; sub > 0; sub = (sub - 1) & s {
			if sub&first == 0 || !can[sub] {
				continue
			}
			if v := visits[sub].Shared - visits[sub].Penalty + best[s&^sub]; v > best[s]+1e-12 {
				best[s], cut[s] = v, sub
			}
		}
	}
	g := Grouping{Saving: best[full], Exact: true}
	for s := full; s > 0; s &^= cut[s] {
		g.Visits = append(g.Visits, visits[cut[s]])
	}
	g.sort()
	return g
}

// groupInOrder divides the activities, in the order of their best times, into runs.
func groupInOrder(as []Activity, setupCost map[string]float64) Grouping {
	order := make([]int, len(as))
	for k := range order {
		order[k] = k
	}
	slices.SortStableFunc(order, func(a, b int) int {
		switch {
		case as[a].At < as[b].At:
			return -1
		case as[a].At > as[b].At:
			return 1
		}
		return 0
	})
	n := len(as)
	best := make([]float64, n+1)
	last := make([]Visit, n+1)
	for j := 1; j <= n; j++ {
		best[j] = math.Inf(-1)
		for i := j; i >= 1; i-- {
			which := slices.Clone(order[i-1 : j])
			slices.Sort(which)
			v, ok := visitOf(as, which, setupCost)
			if !ok {
				break // a longer run has even less time in common
			}
			if s := best[i-1] + v.Shared - v.Penalty; s > best[j]+1e-12 {
				best[j], last[j] = s, v
			}
		}
	}
	g := Grouping{Saving: best[n]}
	for j := n; j > 0; j -= len(last[j].Activities) {
		g.Visits = append(g.Visits, last[j])
	}
	g.sort()
	return g
}

func (g *Grouping) sort() {
	slices.SortStableFunc(g.Visits, func(a, b Visit) int {
		switch {
		case a.At < b.At:
			return -1
		case a.At > b.At:
			return 1
		}
		return a.Activities[0] - b.Activities[0]
	})
}

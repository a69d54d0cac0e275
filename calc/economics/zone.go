package economics

import (
	"fmt"
	"math"
)

// AgeGroup is a number of places whose units have burned so long.
type AgeGroup struct {
	AgeH  float64
	Count float64
}

// Zone is what is relamped together, as it stands today.
type Zone struct {
	Life         Life // of a new unit, h of burning
	Ages         []AgeGroup
	HoursPerYear float64
	SpotCost     float64 // of one unit replaced alone, all included
	GroupCost    float64 // of one unit replaced with all others
	SetupCost    float64 // of each group visit, whatever its size
	DarkPerYear  float64 // what a dark place costs a year, where nothing is replaced between visits
	Discount     float64 // per year
}

// Plan is a way of keeping a zone burning over a horizon.
type Plan struct {
	FirstY      float64 // the first group visit, years from today; +Inf for none
	EveryY      float64 // between later visits; 0 for no later one
	SpotBetween bool    // failed units are replaced at once, not at the next visit
}

// Cost is what a plan costs over a horizon, discounted to today.
type Cost struct {
	Total, Spot, Group, Dark float64
	SpotCount                float64 // expected units replaced alone, not discounted
	GroupCount               float64 // units replaced in groups
	Visits                   int
}

// stepsPerYear is how finely the horizon is cut; money moves in the middle of a step, visits at its start.
const stepsPerYear = 24

// Cost works out a plan from the real mix of ages: expected failures of the units there are, then of their successors.
// Horizons are above 0 and at most 30 years. It fails with ErrInput.
func (z Zone) Cost(p Plan, horizonY float64) (Cost, error) {
	if err := z.check(p, horizonY); err != nil {
		return Cost{}, err
	}
	steps := int(math.Ceil(horizonY * stepsPerYear))
	places := 0.0
	for _, g := range z.Ages {
		places += g.Count
	}
	fresh, err := z.course([]AgeGroup{{0, places}}, steps, p.SpotBetween)
	if err != nil {
		return Cost{}, err
	}
	now, err := z.course(z.Ages, steps, p.SpotBetween)
	if err != nil {
		return Cost{}, err
	}
	var c Cost
	course, since := now, 0
	next := steps + 1
	if first := p.FirstY * stepsPerYear; first < float64(steps) {
		next = int(math.Round(first))
	}
	for k := range steps {
		if k == next {
			worth := math.Pow(1+z.Discount, -float64(k)/stepsPerYear)
			c.Group += worth * (z.SetupCost + z.GroupCost*places)
			c.GroupCount += places
			c.Visits++
			course, since = fresh, k
			if every := int(math.Round(p.EveryY * stepsPerYear)); every > 0 {
				next = k + every
			}
		}
		worth := math.Pow(1+z.Discount, -(float64(k)+0.5)/stepsPerYear)
		if p.SpotBetween {
			c.Spot += worth * z.SpotCost * course[k-since]
			c.SpotCount += course[k-since]
		} else {
			c.Dark += worth * z.DarkPerYear / stepsPerYear * course[k-since]
		}
	}
	c.Total = c.Spot + c.Group + c.Dark
	return c, nil
}

// course is, for each step from now on, the expected number of replacements where units are replaced at once, otherwise
// the mean number that are dark.
func (z Zone) course(ages []AgeGroup, steps int, replaced bool) ([]float64, error) {
	out := make([]float64, steps)
	h := z.HoursPerYear / stepsPerYear
	if h == 0 {
		return out, nil
	}
	var r *Renewals
	if replaced {
		var err error
		if r, err = NewRenewals(z.Life, h*float64(steps+1), steps+1); err != nil {
			return nil, err
		}
	}
	f := make([]float64, steps+1)
	n := make([]float64, steps+1)
	for _, g := range ages {
		s0 := z.Life.Survival(g.AgeH)
		for k := range f {
			if s0 > 0 {
				f[k] = 1 - z.Life.Survival(g.AgeH+h*float64(k))/s0
			} else if k > 0 {
				f[k] = 1 // older than any unit lives: it is replaced in the first step
			}
		}
		if !replaced {
			for k := range steps {
				out[k] += g.Count * (f[k] + f[k+1]) / 2
			}
			continue
		}
		for k := range n {
			n[k] = f[k]
			for j := 1; j <= k; j++ {
				n[k] += (f[j] - f[j-1]) * (r.M[k-j] + r.M[k-j+1]) / 2
			}
		}
		for k := range steps {
			out[k] += g.Count * (n[k+1] - n[k])
		}
	}
	return out, nil
}

func (z Zone) check(p Plan, horizonY float64) error {
	if err := costs(z.SpotCost, z.GroupCost, z.SetupCost, z.DarkPerYear); err != nil {
		return err
	}
	switch {
	case !(horizonY > 0 && horizonY <= 30):
		return fmt.Errorf("%w: a horizon of %g years; above 0 and at most 30", ErrInput, horizonY)
	case !(z.HoursPerYear >= 0 && z.HoursPerYear <= 8784):
		return fmt.Errorf("%w: %g hours a year", ErrInput, z.HoursPerYear)
	case !(z.Discount >= 0 && z.Discount <= 1):
		return fmt.Errorf("%w: a discount of %g a year", ErrInput, z.Discount)
	case math.IsNaN(p.FirstY) || p.FirstY < 0:
		return fmt.Errorf("%w: a first visit after %g years", ErrInput, p.FirstY)
	case !(p.EveryY >= 0) || p.EveryY > 0 && p.EveryY < 1.0/stepsPerYear:
		return fmt.Errorf("%w: a visit every %g years", ErrInput, p.EveryY)
	}
	for _, g := range z.Ages {
		if !(g.AgeH >= 0) || math.IsInf(g.AgeH, 0) || !(g.Count >= 0) || math.IsInf(g.Count, 0) {
			return fmt.Errorf("%w: %g places of %g h", ErrInput, g.Count, g.AgeH)
		}
	}
	return nil
}

// Draw is one of the lives that the data allow, with its weight.
type Draw struct {
	Life   Life
	Weight float64
}

// GroupWins is the share of draws in which a group plan costs less than one by one over the horizon: how sure the
// better of the two is.
func (z Zone) GroupWins(draws []Draw, group Plan, horizonY float64) (float64, error) {
	spot := Plan{FirstY: math.Inf(1), SpotBetween: true}
	won, all := 0.0, 0.0
	for _, d := range draws {
		if !(d.Weight >= 0) {
			return 0, fmt.Errorf("%w: a weight of %g", ErrInput, d.Weight)
		}
		z.Life = d.Life
		a, err := z.Cost(group, horizonY)
		if err != nil {
			return 0, err
		}
		b, err := z.Cost(spot, horizonY)
		if err != nil {
			return 0, err
		}
		all += d.Weight
		if a.Total < b.Total {
			won += d.Weight
		}
	}
	if all == 0 {
		return 0, fmt.Errorf("%w: no draws", ErrInput)
	}
	return won / all, nil
}

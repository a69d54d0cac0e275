package economics

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/integrate/quad"
)

// Optimum is the cheapest interval of a policy: its cost per place and unit of time, against one-by-one replacement.
// Interval is nil where no interval is better than waiting longer.
type Optimum struct {
	Interval *float64
	Rate     float64 // cost per place and unit of time; that of SpotRate where Interval is nil
	SpotRate float64 // replacing one by one for ever: spot cost over mean life
	Beats    bool    // cheaper than one by one
	AtFail   float64 // expected spot replacements a place in an interval; share dark at the visit where they wait
}

// scanPoints and scanMeans: the search looks at so many intervals up to so many mean lives before it closes in.
const (
	scanPoints = 600
	scanMeans  = 4.0
)

func costs(cs ...float64) error {
	for _, c := range cs {
		if !(c >= 0) || math.IsInf(c, 0) {
			return fmt.Errorf("%w: a cost of %g", ErrInput, c)
		}
	}
	return nil
}

func meanOf(l Life) (float64, error) {
	m := l.Mean()
	if !(m > 0) || math.IsInf(m, 0) {
		return 0, fmt.Errorf("%w: a mean life of %g", ErrInput, m)
	}
	return m, nil
}

// lived is the mean time lived up to t: the integral of survival. Panels are short near 0, where survival may be
// rough.
func lived(l Life, t float64) float64 {
	const panels = 24
	sum, from := 0.0, 0.0
	for k := 1; k <= panels; k++ {
		u := float64(k) / panels
		to := t * u * u * u
		sum += quad.Fixed(l.Survival, from, to, 16, quad.Legendre{}, 0)
		from = to
	}
	return sum
}

// Age replaces a unit when it fails, at failCost, or when it reaches an age, at planCost: C(T) = (cp S + cf F) / integral of S
// (Barlow and Proschan, Mathematical Theory of Reliability, 1965). All local minima up to four mean lives are compared
// with run to failure. It fails with ErrInput.
func Age(l Life, planCost, failCost float64) (Optimum, error) {
	if err := costs(planCost, failCost); err != nil {
		return Optimum{}, err
	}
	mean, err := meanOf(l)
	if err != nil {
		return Optimum{}, err
	}
	rate := func(t float64) float64 {
		s := l.Survival(t)
		return (planCost*s + failCost*(1-s)) / lived(l, t)
	}
	o := Optimum{Rate: failCost / mean, SpotRate: failCost / mean}
	t, c, found := least(rate, mean)
	if found {
		o.Interval, o.Rate, o.Beats, o.AtFail = &t, c, c < o.SpotRate, 1-l.Survival(t)
	}
	return o, nil
}

// Block replaces all places together every T and one that fails in between at once: C(T) = (cg + cs M(T)) / T. The best
// of all local minima is returned even where one by one is cheaper; Beats tells. It fails with ErrInput.
func Block(l Life, groupCost, spotCost float64) (Optimum, error) {
	if err := costs(groupCost, spotCost); err != nil {
		return Optimum{}, err
	}
	mean, err := meanOf(l)
	if err != nil {
		return Optimum{}, err
	}
	r, err := NewRenewals(l, scanMeans*mean, 2*scanPoints)
	if err != nil {
		return Optimum{}, err
	}
	o := Optimum{Rate: spotCost / mean, SpotRate: spotCost / mean}
	if spotCost == 0 {
		return o, nil
	}
	// A minimum is where T m(T) - M(T) passes cg/cs upwards.
	excess := func(t float64) float64 {
		m, d := r.At(t)
		return t*d - m - groupCost/spotCost
	}
	best := math.Inf(1)
	for k := 1; k < 2*scanPoints-2; k++ {
		a, b := float64(k)*r.StepT, float64(k+1)*r.StepT
		if !(excess(a) < 0 && excess(b) >= 0) {
			continue
		}
		for range 60 {
			if mid := (a + b) / 2; excess(mid) < 0 {
				a = mid
			} else {
				b = mid
			}
		}
		m, _ := r.At(b)
		if c := (groupCost + spotCost*m) / b; c < best {
			best = c
			t := b
			o.Interval, o.Rate, o.AtFail = &t, c, m
		}
	}
	o.Beats = o.Rate < o.SpotRate
	return o, nil
}

// Dark replaces all places together every T and leaves what fails dark until then: C(T) = (cg + cd integral of F) / T, where
// darkCost is what a dark place costs per unit of time. The share dark at the visit stays within mostDark, 0 to 1. It
// fails with ErrInput.
func Dark(l Life, groupCost, darkCost, mostDark float64) (Optimum, error) {
	if err := costs(groupCost, darkCost, mostDark); err != nil {
		return Optimum{}, err
	}
	mean, err := meanOf(l)
	if err != nil {
		return Optimum{}, err
	}
	rate := func(t float64) float64 { return (groupCost + darkCost*(t-lived(l, t))) / t }
	o := Optimum{Rate: darkCost, SpotRate: darkCost}
	t, c, found := least(rate, mean)
	if most := longestDark(l, mean, mostDark); !found || t > most {
		if math.IsInf(most, 1) {
			return o, nil
		}
		t, c = most, rate(most)
	}
	o.Interval, o.Rate, o.AtFail, o.Beats = &t, c, 1-l.Survival(t), c < darkCost
	return o, nil
}

// longestDark is the longest interval after which no more than a share is dark; +Inf where any is.
func longestDark(l Life, mean, most float64) float64 {
	if most >= 1 {
		return math.Inf(1)
	}
	a, b := 0.0, mean
	for 1-l.Survival(b) < most {
		if b *= 2; b > 1e6*mean {
			return math.Inf(1)
		}
	}
	for range 80 {
		if mid := (a + b) / 2; 1-l.Survival(mid) <= most {
			a = mid
		} else {
			b = mid
		}
	}
	return a
}

// least finds the least interior minimum of a rate up to four mean lives; found is false where there is none.
func least(rate func(float64) float64, mean float64) (t, c float64, found bool) {
	h := scanMeans * mean / scanPoints
	v := make([]float64, scanPoints+1)
	v[0] = math.Inf(1)
	for k := 1; k <= scanPoints; k++ {
		v[k] = rate(h * float64(k))
	}
	c = math.Inf(1)
	for k := 1; k < scanPoints; k++ {
		if v[k] <= v[k-1] && v[k] < v[k+1] && v[k] < c {
			t = golden(rate, h*float64(k-1)+h*1e-6, h*float64(k+1))
			c, found = rate(t), true
		}
	}
	return t, c, found
}

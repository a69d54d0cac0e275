package forecast

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// ErrNumber is told of a number that cannot be.
var ErrNumber = errors.New("a number is out of range")

// A Count is the distribution of a number of failures: P[i] is the probability of From+i.
type Count struct {
	From int
	P    []float64
}

// nothing is a probability too small to be carried along.
const nothing = 1e-18

// none is the count of no places.
func none() Count { return Count{P: []float64{1}} }

// Of is the count among units that fail with probabilities p, each by itself (the Poisson-binomial distribution: Hong, CSDA
// 59, 2013, 41), by adding one unit after another; every term is positive, so nothing cancels.
func Of(p []float64) (Count, error) {
	c := none()
	for i, x := range p {
		if !(x >= 0 && x <= 1) {
			return Count{}, fmt.Errorf("%w: probability %d is %g", ErrNumber, i+1, x)
		}
		c.absorb(Count{P: []float64{1 - x, x}})
	}
	return c, nil
}

// absorb is Plus in place, for a d that is short: each probability is written once those it needs are the last to need it.
func (c *Count) absorb(d Count) {
	q := d.P
	c.From += d.From
	for range len(q) - 1 {
		c.P = append(c.P, 0)
	}
	for i := len(c.P) - 1; i >= 0; i-- {
		sum := 0.0
		for k := range min(i+1, len(q)) {
			sum += c.P[i-k] * q[k]
		}
		c.P[i] = sum
	}
	*c = c.trimmed()
}

// Plus is the count of two groups together.
func (c Count) Plus(d Count) Count {
	sum := c.plus(d.P)
	sum.From += d.From
	return sum
}

// plus adds a group whose count starts at 0. It writes a new slice.
func (c Count) plus(q []float64) Count {
	out := make([]float64, len(c.P)+len(q)-1)
	for i, a := range c.P {
		for k, b := range q {
			out[i+k] += a * b
		}
	}
	return Count{c.From, out}.trimmed()
}

func (c Count) trimmed() Count {
	for len(c.P) > 1 && c.P[0] < nothing {
		c.P, c.From = c.P[1:], c.From+1
	}
	for len(c.P) > 1 && c.P[len(c.P)-1] < nothing {
		c.P = c.P[:len(c.P)-1]
	}
	return c
}

// times is the count of n groups like c.
func (c Count) times(n int) Count {
	out := none()
	for ; n > 0; n >>= 1 {
		if n&1 == 1 {
			out = out.Plus(c)
		}
		if n > 1 {
			c = c.Plus(c)
		}
	}
	return out
}

// Mean is the expected count.
func (c Count) Mean() float64 {
	sum := 0.0
	for i, p := range c.P {
		sum += float64(c.From+i) * p
	}
	return sum
}

// moments are mean, variance and third central moment.
func (c Count) moments() (mean, variance, third float64) {
	mean = c.Mean()
	for i, p := range c.P {
		x := float64(c.From+i) - mean
		variance += x * x * p
		third += x * x * x * p
	}
	return mean, variance, third
}

// Variance is its variance.
func (c Count) Variance() float64 {
	_, v, _ := c.moments()
	return v
}

// At is the probability of just k.
func (c Count) At(k int) float64 {
	if i := k - c.From; i >= 0 && i < len(c.P) {
		return c.P[i]
	}
	return 0
}

// CDF is the probability of k or fewer.
func (c Count) CDF(k int) float64 {
	sum := 0.0
	for i := 0; i < len(c.P) && c.From+i <= k; i++ {
		sum += c.P[i]
	}
	return math.Min(sum, 1)
}

// Quantile is the smallest k with a probability of k or fewer of at least a level.
func (c Count) Quantile(level float64) int {
	sum := 0.0
	for i, p := range c.P {
		if sum += p; sum >= level-1e-12 {
			return c.From + i
		}
	}
	return c.From + len(c.P) - 1
}

// Interval holds a share of the probability, the rest cut off in equal parts: the two quantiles.
func (c Count) Interval(share float64) (low, high int) {
	return c.Quantile((1 - share) / 2), c.Quantile((1 + share) / 2)
}

// A Weighted count is one of several that may be the case.
type Weighted struct {
	Count
	Weight float64
}

// Mix is the count where one of several is the case, with their weights.
func Mix(all []Weighted) (Count, error) {
	if len(all) == 0 {
		return Count{}, fmt.Errorf("%w: nothing to mix", ErrNumber)
	}
	from, to, sum := math.MaxInt, math.MinInt, 0.0
	for _, w := range all {
		if !(w.Weight >= 0) || len(w.P) == 0 {
			return Count{}, fmt.Errorf("%w: a weight of %g", ErrNumber, w.Weight)
		}
		from, to, sum = min(from, w.From), max(to, w.From+len(w.P)), sum+w.Weight
	}
	out := Count{from, make([]float64, to-from)}
	for _, w := range all {
		for i, p := range w.P {
			out.P[w.From-from+i] += p * w.Weight / sum
		}
	}
	return out.trimmed(), nil
}

// near is the count of many places by its first three moments: the refined normal approximation (Volkova, Theory of
// Probability and its Applications 40, 1996, 791, as in Hong 2013). Its error is below 0.001 where the deviation is above 5.
func near(mean, variance, third float64) Count {
	sd := math.Sqrt(variance)
	gamma := third / (variance * sd)
	from, to := max(0, int(mean-9*sd)), int(mean+9*sd)+1
	out := Count{from, make([]float64, to-from+1)}
	before := 0.0
	for i := range out.P {
		x := (float64(from+i) + 0.5 - mean) / sd
		f := distuv.UnitNormal.CDF(x) + gamma*(1-x*x)*math.Exp(-x*x/2)/(6*math.Sqrt(2*math.Pi))
		f = math.Max(before, math.Min(1, f))
		if i == len(out.P)-1 {
			f = 1
		}
		out.P[i], before = f-before, f
	}
	return out.trimmed()
}

// Poisson is the count of rare failures among many places, where nothing but the mean is known.
func Poisson(mean float64) (Count, error) { return counted(mean, 0) }

// NegativeBinomial is the same where the mean itself is known with a coefficient of variation only.
func NegativeBinomial(mean, variation float64) (Count, error) {
	if !(variation > 0) || math.IsInf(variation, 0) {
		return Count{}, fmt.Errorf("%w: a coefficient of variation of %g", ErrNumber, variation)
	}
	return counted(mean, variation)
}

func counted(mean, variation float64) (Count, error) {
	if !(mean >= 0) || mean > 1e6 {
		return Count{}, fmt.Errorf("%w: a mean of %g", ErrNumber, mean)
	}
	if mean == 0 {
		return none(), nil
	}
	variance := mean + mean*variation*mean*variation
	most := int(mean + 12*math.Sqrt(variance) + 60)
	logP := func(k float64) float64 {
		a, _ := math.Lgamma(k + 1)
		if variation == 0 {
			return k*math.Log(mean) - mean - a
		}
		r := 1 / (variation * variation)
		b, _ := math.Lgamma(k + r)
		c, _ := math.Lgamma(r)
		return b - c - a + r*math.Log(r/(r+mean)) + k*math.Log(mean/(r+mean))
	}
	out := Count{P: make([]float64, most+1)}
	for k := range out.P {
		out.P[k] = math.Exp(logP(float64(k)))
	}
	return out.trimmed(), nil
}

// A Stock is how many to keep on the shelf.
type Stock struct {
	Count    int
	Level    float64 // probability that they last
	FillRate float64 // share of the expected demand that they meet
}

// Spares is the smallest stock that lasts with at least a probability.
func Spares(demand Count, level float64) (Stock, error) {
	if !(level > 0 && level < 1) || len(demand.P) == 0 {
		return Stock{}, fmt.Errorf("%w: a service level of %g", ErrNumber, level)
	}
	s := Stock{Count: demand.Quantile(level), FillRate: 1}
	s.Level = demand.CDF(s.Count)
	if mean := demand.Mean(); mean > 0 {
		met := 0.0
		for i, p := range demand.P {
			met += p * float64(min(demand.From+i, s.Count))
		}
		s.FillRate = met / mean
	}
	return s, nil
}

// A Told is one forecast that time has since overtaken.
type Told struct {
	Expected  float64
	Low, High int
	Failed    int // what came of it
}

// A Score is how forecasts did.
type Score struct {
	Coverage float64 // share that came within their limits
	Bias     float64 // failures over those expected, less 1
	Of       int     // forecasts scored
}

// ScoreOf compares forecasts with what came. ok is false where there is nothing to compare.
func ScoreOf(all []Told) (s Score, ok bool) {
	var within, failed, expected float64
	for _, t := range all {
		if t.Failed >= t.Low && t.Failed <= t.High {
			within++
		}
		failed += float64(t.Failed)
		expected += t.Expected
	}
	if len(all) == 0 || expected == 0 {
		return Score{}, false
	}
	return Score{within / float64(len(all)), failed/expected - 1, len(all)}, true
}

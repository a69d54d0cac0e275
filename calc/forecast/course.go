package forecast

import (
	"fmt"
	"math"
)

// Life is how long a new unit lives, in burning hours.
type Life interface {
	// Survival is the share that lives longer than t.
	Survival(t float64) float64
}

// mostRenewals is how many replacements of one place are followed.
const mostRenewals = 200

// A Course tells how soon a place that starts with a new unit has had its k-th failure: H[k-1][i] is the probability that it
// has after i steps.
type Course struct {
	Step float64
	H    [][]float64
}

// NewCourse works the course out to a time in equal steps, by the product rule: exact increments of the life times the mean
// of what follows at both ends of each step. Its error falls with the square of the step.
func NewCourse(l Life, upTo float64, steps int) (*Course, error) {
	if !(upTo > 0) || math.IsInf(upTo, 0) || steps < 1 || steps > 20_000 {
		return nil, fmt.Errorf("%w: a course of %g h in %d steps", ErrNumber, upTo, steps)
	}
	c := &Course{Step: upTo / float64(steps)}
	f := make([]float64, steps+1)
	for i := 1; i <= steps; i++ {
		f[i] = 1 - l.Survival(c.Step*float64(i))
		if !(f[i] >= f[i-1]-1e-12 && f[i] <= 1) {
			return nil, fmt.Errorf("%w: survival is %g at %g h", ErrNumber, 1-f[i], c.Step*float64(i))
		}
	}
	for h := f; h[steps] > 1e-15 && len(c.H) < mostRenewals; h = follow(f, h) {
		c.H = append(c.H, h)
	}
	return c, nil
}

// follow is the probability, by each step, that what f begins is over and what h tells has then come too.
func follow(f, h []float64) []float64 {
	out := make([]float64, len(f))
	for i := 1; i < len(f); i++ {
		sum := 0.0
		for j := 1; j <= i; j++ {
			sum += (f[j] - f[j-1]) * (h[i-j+1] + h[i-j])
		}
		out[i] = sum / 2
	}
	return out
}

// Place is the count of failures, by a step, at a place whose first unit has failed by each step with probability first.
func (c *Course) Place(first []float64, step int) Count {
	p := []float64{1 - first[step]}
	before := first[step]
	for _, h := range c.H {
		g := followAt(first, h, step)
		p = append(p, math.Max(before-g, 0))
		if before = g; g < 1e-13 {
			break
		}
	}
	p = append(p, before)
	return Count{P: p}.trimmed()
}

// followAt is follow at one step alone.
func followAt(f, h []float64, i int) float64 {
	sum := 0.0
	for j := 1; j <= i; j++ {
		sum += (f[j] - f[j-1]) * (h[i-j+1] + h[i-j])
	}
	return sum / 2
}

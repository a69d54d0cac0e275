package economics

import (
	"fmt"
	"math"
)

// Life is the distribution of how long a unit lives, in any one unit of time.
type Life interface {
	// Survival is the share that lives longer than t >= 0: 1 at 0, never rising.
	Survival(t float64) float64
	// Mean is the mean life.
	Mean() float64
}

// Renewals is the expected number of replacements M of a place that starts with a new unit, on a grid of equal steps.
type Renewals struct {
	StepT float64
	M     []float64 // M[k] at k steps

	slope []float64 // dM/dt at each step
}

// NewRenewals solves the renewal equation M(t) = F(t) + integral of M(t-s) dF(s) up to a time, by the piecewise-linear
// product rule on two grids and Richardson's step, so that the error falls with the fourth power of the step where
// the life is smooth at 0. It fails with ErrInput.
func NewRenewals(l Life, upTo float64, steps int) (*Renewals, error) {
	if !(upTo > 0) || math.IsInf(upTo, 0) || steps < 2 || steps > 20000 {
		return nil, fmt.Errorf("%w: renewals up to %g in %d steps", ErrInput, upTo, steps)
	}
	coarse, err := product(l, upTo, steps)
	if err != nil {
		return nil, err
	}
	fine, err := product(l, upTo, 2*steps)
	if err != nil {
		return nil, err
	}
	r := &Renewals{StepT: upTo / float64(steps), M: make([]float64, steps+1)}
	for k := range r.M {
		r.M[k] = (4*fine[2*k] - coarse[k]) / 3
	}
	r.slope = slopes(r.M, r.StepT)
	return r, nil
}

// product is the product rule: exact increments of F times the mean of M at both ends of each step.
func product(l Life, upTo float64, steps int) ([]float64, error) {
	h := upTo / float64(steps)
	f := make([]float64, steps+1)
	p := make([]float64, steps+1)
	for k := 1; k <= steps; k++ {
		f[k] = 1 - l.Survival(h*float64(k))
		p[k] = f[k] - f[k-1]
		if !(p[k] >= -1e-12 && f[k] <= 1) {
			return nil, fmt.Errorf("%w: survival is %g at %g", ErrInput, 1-f[k], h*float64(k))
		}
	}
	m := make([]float64, steps+1)
	for i := 1; i <= steps; i++ {
		sum := f[i] + p[1]*m[i-1]/2
		for j := 2; j <= i; j++ {
			sum += p[j] * (m[i-j+1] + m[i-j]) / 2
		}
		m[i] = sum / (1 - p[1]/2)
	}
	return m, nil
}

// slopes are fourth-order differences; second order at the ends.
func slopes(m []float64, h float64) []float64 {
	n := len(m) - 1
	d := make([]float64, n+1)
	for k := range d {
		switch {
		case k == 0:
			d[k] = (-3*m[0] + 4*m[1] - m[2]) / (2 * h)
		case k == n:
			d[k] = (3*m[n] - 4*m[n-1] + m[n-2]) / (2 * h)
		case k == 1 || k == n-1:
			d[k] = (m[k+1] - m[k-1]) / (2 * h)
		default:
			d[k] = (m[k-2] - 8*m[k-1] + 8*m[k+1] - m[k+2]) / (12 * h)
		}
	}
	return d
}

// At returns M and its slope at a time inside the grid, by cubic Hermite interpolation.
func (r *Renewals) At(t float64) (m, slope float64) {
	x := math.Max(0, t/r.StepT)
	k := min(int(x), len(r.M)-2)
	u, h := x-float64(k), r.StepT
	a, b, da, db := r.M[k], r.M[k+1], r.slope[k]*h, r.slope[k+1]*h
	c2, c3 := 3*(b-a)-2*da-db, 2*(a-b)+da+db
	return a + u*(da+u*(c2+u*c3)), (da + u*(2*c2+3*u*c3)) / h
}

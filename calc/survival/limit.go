package survival

import (
	"math"
)

// Limits are the ends of an interval; nil where the data set none on that side.
type Limits struct{ Low, High *float64 }

// chi95 is the 0.95 quantile of chi-square with one degree of freedom.
const chi95 = 3.841458820694124

// Wald are the 95 % limits of the age by which a share p has failed, from the curvature at the peak, in log age.
func (f *Fit) Wald(p float64) Limits {
	w := f.Sigma * f.Family.quantile(p)
	se := math.Sqrt(f.Cov[0][0] + 2*w*f.Cov[0][1] + w*w*f.Cov[1][1])
	b := f.B(p)
	low, high := b*math.Exp(-z95*se), b*math.Exp(z95*se)
	return Limits{&low, &high}
}

// ScaleWald are the 95 % limits of sigma from the curvature at the peak.
func (f *Fit) ScaleWald() Limits {
	se := math.Sqrt(f.Cov[1][1])
	low, high := f.Sigma*math.Exp(-z95*se), f.Sigma*math.Exp(z95*se)
	return Limits{&low, &high}
}

// LikelihoodRatio are the 95 % limits of the age by which a share p has failed: the ages at which the likelihood, the rest
// chosen best, falls by half of chi-square (Meeker and Escobar 1998, chapter 8). They are to be preferred below about
// thirty failures.
func (f *Fit) LikelihoodRatio(p float64) Limits {
	w := f.Family.quantile(p)
	profile := func(logQ, tau float64) (best, at float64) {
		q := logQ - f.data.shift
		return f.data.ridge(tau, func(tau float64) (mu, dmu, ddmu float64) {
			s := math.Exp(tau)
			return q - s*w, -s * w, -s * w
		})
	}
	centre := f.Mu + f.Sigma*w
	wald := f.Wald(p)
	step := math.Max(math.Log(*wald.High)-centre, 1e-3) / z95 * 2
	return f.cross(centre, step, math.Log(f.Sigma), profile)
}

// ScaleLikelihoodRatio are the 95 % limits of sigma by likelihood ratio; the shape of a Weibull life is its inverse.
func (f *Fit) ScaleLikelihoodRatio() Limits {
	profile := func(tau, mu float64) (best, at float64) { return f.data.along(mu, tau) }
	out := f.cross(math.Log(f.Sigma), 2*math.Sqrt(f.Cov[1][1]), f.Mu-f.data.shift, profile)
	return out
}

// cross finds where a profile falls by half of chi-square on both sides of its peak. profile returns the best value at x
// and the other parameter there, beginning from one that is near.
func (f *Fit) cross(centre, step, other float64, profile func(x, near float64) (float64, float64)) Limits {
	peak, other := profile(centre, other)
	drop := func(x, near float64) (float64, float64) {
		v, at := profile(x, near)
		return 2*(peak-v) - chi95, at
	}
	side := func(sign float64) *float64 {
		a, near, h := centre, other, step
		for range 60 {
			b := a + sign*h
			v, at := drop(b, near)
			if math.IsNaN(v) {
				return nil
			}
			if v >= 0 {
				x := root(func(x float64) float64 { v, _ := drop(x, at); return v }, a, b)
				e := math.Exp(x)
				return &e
			}
			if math.Abs(b-centre) > 60 {
				return nil
			}
			a, near = b, at
			h *= 1.6
		}
		return nil
	}
	return Limits{side(-1), side(1)}
}

// root is Brent's method between two ages of which one is below and one above.
func root(f func(float64) float64, a, b float64) float64 {
	fa, fb := f(a), f(b)
	c, fc := a, fa
	d := b - a
	e := d
	for range 200 {
		if fb*fc > 0 {
			c, fc = a, fa
			d = b - a
			e = d
		}
		if math.Abs(fc) < math.Abs(fb) {
			a, b, c = b, c, b
			fa, fb, fc = fb, fc, fb
		}
		tol := 2e-16*math.Abs(b) + 1e-14
		m := (c - b) / 2
		if math.Abs(m) <= tol || fb == 0 {
			return b
		}
		if math.Abs(e) >= tol && math.Abs(fa) > math.Abs(fb) {
			var p, q float64
			s := fb / fa
			if a == c {
				p, q = 2*m*s, 1-s
			} else {
				q0, r := fa/fc, fb/fc
				p = s * (2*m*q0*(q0-r) - (b-a)*(r-1))
				q = (q0 - 1) * (r - 1) * (s - 1)
			}
			if p > 0 {
				q = -q
			}
			p = math.Abs(p)
			if 2*p < math.Min(3*m*q-math.Abs(tol*q), math.Abs(e*q)) {
				e, d = d, p/q
			} else {
				d, e = m, m
			}
		} else {
			d, e = m, m
		}
		a, fa = b, fb
		if math.Abs(d) > tol {
			b += d
		} else {
			b += math.Copysign(tol, m)
		}
		fb = f(b)
	}
	return b
}

// ridge maximises the likelihood over tau where mu is a function of it, by Newton's method from a near tau.
func (d *sample) ridge(tau float64, muOf func(tau float64) (mu, first, second float64)) (best, at float64) {
	value := func(tau float64) (l, g, h float64) {
		mu, d1, d2 := muOf(tau)
		s := d.objective(mu, tau)
		return s.l, s.m*d1 + s.t, s.mm*d1*d1 + 2*s.mt*d1 + s.tt + s.m*d2
	}
	return climbOne(value, tau)
}

// along maximises the likelihood over mu at a fixed tau.
func (d *sample) along(mu, tau float64) (best, at float64) {
	return climbOne(func(mu float64) (l, g, h float64) {
		s := d.objective(mu, tau)
		return s.l, s.m, s.mm
	}, mu)
}

func climbOne(value func(float64) (l, g, h float64), x float64) (best, at float64) {
	l, g, h := value(x)
	for range 200 {
		step := g / math.Max(math.Abs(h), 1e-12)
		if math.Abs(step) > 1 {
			step = math.Copysign(1, step)
		}
		a := 1.0
		var nl, ng, nh float64
		for ; ; a /= 2 {
			if nl, ng, nh = value(x + a*step); nl >= l || a < 1e-10 {
				break
			}
		}
		if !(nl >= l) {
			return l, x
		}
		x, l, g, h = x+a*step, nl, ng, nh
		if math.Abs(a*step) < 1e-12 {
			break
		}
	}
	return l, x
}

// ExponentialRate is the failure rate where units fail at random: failures over time lived, with 95 % limits; without
// failures the upper one alone, 3/T. The limits are the exact ones of chi-square; sums of time must be above 0.
func ExponentialRate(lives []Life) (rate float64, limits Limits, err error) {
	_, failures, err := check(lives)
	if err != nil {
		return 0, Limits{}, err
	}
	lived := 0.0
	for _, l := range lives {
		if !l.useful() {
			continue
		}
		end := l.Upper
		if l.censored() {
			end = l.Lower
		}
		lived += l.count() * (end - math.Min(l.Entry, end))
	}
	if failures == 0 {
		high := -math.Log(0.05) / lived
		return 0, Limits{nil, &high}, nil
	}
	low, high := chiSquare(2*failures, 0.025)/(2*lived), chiSquare(2*failures+2, 0.975)/(2*lived)
	return failures / lived, Limits{&low, &high}, nil
}

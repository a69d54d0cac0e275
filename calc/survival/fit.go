package survival

import (
	"fmt"
	"math"
	"runtime"
	"sync"
)

// A Fit is the most likely life of a family.
type Fit struct {
	Family   Family
	Mu       float64 // location of log life
	Sigma    float64 // scale of log life
	LogLik   float64
	Cov      [2][2]float64 // of Mu and log Sigma, from the observed information
	N        float64
	Failures float64
	Prior    *Prior // that it was drawn towards; nil for the data alone

	data *sample
}

// Shape and Scale are those of a Weibull life: scale is the age by which 63.2 % have failed.
func (f *Fit) Shape() float64 { return 1 / f.Sigma }

// Scale is exp(Mu): of a Weibull life its scale, of the others the median.
func (f *Fit) Scale() float64 { return math.Exp(f.Mu) }

// AIC is Akaike's criterion; comparable on the same data alone.
func (f *Fit) AIC() float64 { return -2*f.LogLik + 4 }

// Survival is the share that lives longer than t.
func (f *Fit) Survival(t float64) float64 { return math.Exp(f.Family.logS(f.Mu, f.Sigma, t)) }

// Mean is the mean life; +Inf for a log-logistic life whose scale is 1 or more.
func (f *Fit) Mean() float64 {
	switch f.Family {
	case Weibull:
		return math.Exp(f.Mu) * math.Gamma(1+f.Sigma)
	case Lognormal:
		return math.Exp(f.Mu + f.Sigma*f.Sigma/2)
	default:
		if f.Sigma >= 1 {
			return math.Inf(1)
		}
		x := math.Pi * f.Sigma
		return math.Exp(f.Mu) * x / math.Sin(x)
	}
}

// B is the age by which a share p has failed.
func (f *Fit) B(p float64) float64 { return math.Exp(f.Mu + f.Sigma*f.Family.quantile(p)) }

// Conditional is the probability that a unit of an age fails within x more.
func (f *Fit) Conditional(age, x float64) float64 {
	return Conditional(f.Family, f.Mu, f.Sigma, age, x)
}

// Conditional is the probability that a unit of an age fails within x more, 1 - S(age+x)/S(age), without cancellation for
// small x.
func Conditional(f Family, mu, sigma, age, x float64) float64 {
	if x <= 0 {
		return 0
	}
	if f == Weibull {
		if age <= 0 {
			return -math.Expm1(-math.Exp((math.Log(x) - mu) / sigma))
		}
		h := math.Exp((math.Log(age) - mu) / sigma)
		return -math.Expm1(-h * math.Expm1(math.Log1p(x/age)/sigma))
	}
	return -math.Expm1(f.logS(mu, sigma, age+x) - f.logS(mu, sigma, age))
}

// A Prior is what a data sheet makes one expect: normal in log B50 (of the share P) and in log sigma, independent. The
// numbers are choices, to be shown and changed by whoever plans.
type Prior struct {
	P        float64 // share failed by the rated life: 0.5, or 0.1 for a B10
	LogLife  float64 // log of the rated life
	LifeSD   float64 // 0.5: trusted to a factor of 2.7 either way
	LogScale float64 // log sigma
	ScaleSD  float64
}

// Rated returns the prior for a rated life by which a share p has failed, with a Weibull shape expected of that kind of
// thing: 2 for electronics, 5 for filaments.
func Rated(lifeH, p, shape float64) (Prior, error) {
	if !(lifeH > 0) || math.IsInf(lifeH, 0) || !(p > 0 && p < 1) || !(shape > 0) || math.IsInf(shape, 0) {
		return Prior{}, fmt.Errorf("%w: a rated life of %g h for %g, shape %g", ErrNumber, lifeH, p, shape)
	}
	return Prior{P: p, LogLife: math.Log(lifeH), LifeSD: 0.5, LogScale: -math.Log(shape), ScaleSD: 0.4}, nil
}

// FitLives finds the most likely life of a family: exact, right-, left- and interval-censored lives, late entry and counts.
// With a prior it finds the most probable one instead, which exists even without failures. It fails with ErrNoFit where
// the data have no maximum: no failures, all at one age, or a likelihood that rises without end.
func FitLives(family Family, lives []Life, prior *Prior) (*Fit, error) {
	n, failures, err := check(lives)
	if err != nil {
		return nil, err
	}
	if prior == nil {
		if failures == 0 {
			return nil, fmt.Errorf("%w: nothing has failed", ErrNoFit)
		}
		if oneAge(lives) {
			return nil, fmt.Errorf("%w: all failures are of one age", ErrNoFit)
		}
	} else if !(prior.LifeSD > 0) || !(prior.ScaleSD > 0) || !(prior.P > 0 && prior.P < 1) || math.IsNaN(prior.LogLife+prior.LogScale) {
		return nil, fmt.Errorf("%w: a prior of %+v", ErrNumber, *prior)
	}
	d := newSample(family, lives, prior)
	mu, tau := d.begin()
	mu, tau, ll, hess, ok := d.climb(mu, tau)
	if !ok {
		return nil, fmt.Errorf("%w: the likelihood rises without end", ErrNoFit)
	}
	det := hess[0][0]*hess[1][1] - hess[0][1]*hess[1][0]
	if !(det > 0) || !(hess[0][0] < 0) {
		return nil, fmt.Errorf("%w: the likelihood has no peak", ErrNoFit)
	}
	f := &Fit{Family: family, Mu: mu + d.shift, Sigma: math.Exp(tau), N: n, Failures: failures, Prior: prior, data: d}
	f.Cov = [2][2]float64{{-hess[1][1] / det, hess[0][1] / det}, {hess[1][0] / det, -hess[0][0] / det}}
	f.LogLik = ll
	if prior != nil {
		v, _, _ := d.penalty(mu, tau)
		f.LogLik = ll - v
	}
	return f, nil
}

// oneAge reports whether everything that failed did so at one age that nothing outlived or surrounds.
func oneAge(lives []Life) bool {
	age, most := -1.0, 0.0
	for _, l := range lives {
		if !l.useful() {
			continue
		}
		if l.censored() {
			most = math.Max(most, l.Lower)
			continue
		}
		if !l.exact() || age >= 0 && l.Lower != age {
			return false
		}
		age = l.Lower
	}
	return most <= age
}

// A sample is lives made ready for the likelihood: logarithms taken once, ages divided by a typical one so that the
// location lies near 0.
type sample struct {
	family Family
	shift  float64 // log of the divisor
	prior  *Prior

	exact, exactW       []float64 // log ages of failures
	right, rightW       []float64 // of those that work
	late, lateW         []float64 // of entries
	from, to, intervalW []float64 // of looks; from is -Inf for 0
	sumExact            float64   // counts of exact failures
	sumLog              float64   // of their unshifted log ages
}

func newSample(family Family, lives []Life, prior *Prior) *sample {
	d := &sample{family: family, prior: prior}
	sum, w := 0.0, 0.0
	for _, l := range lives {
		if !l.useful() {
			continue
		}
		end := l.Upper
		if l.censored() {
			end = l.Lower
		}
		sum += l.count() * math.Log(end)
		w += l.count()
	}
	d.shift = sum / w
	for _, l := range lives {
		if !l.useful() {
			continue
		}
		c := l.count()
		if l.Entry > 0 {
			d.late, d.lateW = append(d.late, math.Log(l.Entry)-d.shift), append(d.lateW, c)
		}
		switch {
		case l.censored():
			d.right, d.rightW = append(d.right, math.Log(l.Lower)-d.shift), append(d.rightW, c)
		case l.exact():
			d.exact, d.exactW = append(d.exact, math.Log(l.Lower)-d.shift), append(d.exactW, c)
			d.sumExact += c
			d.sumLog += c * math.Log(l.Lower)
		default:
			from := math.Max(l.Lower, l.Entry)
			d.from, d.to, d.intervalW = append(d.from, math.Log(from)-d.shift), append(d.to, math.Log(l.Upper)-d.shift), append(d.intervalW, c)
		}
	}
	return d
}

// begin is where the climb starts: moments of the failures' ages.
func (d *sample) begin() (mu, tau float64) {
	var n, sum, sq float64
	add := func(x, w float64) { n, sum, sq = n+w, sum+w*x, sq+w*x*x }
	for i, x := range d.exact {
		add(x, d.exactW[i])
	}
	for i := range d.to {
		from := d.from[i]
		if math.IsInf(from, -1) {
			from = d.to[i] - 1
		}
		add((from+d.to[i])/2, d.intervalW[i])
	}
	if n == 0 {
		return d.prior.LogLife - d.shift - math.Exp(d.prior.LogScale)*d.family.quantile(d.prior.P), d.prior.LogScale
	}
	m := sum / n
	s := math.Sqrt(math.Max(sq/n-m*m, 0))
	switch d.family {
	case Weibull:
		tau = math.Log(math.Max(0.1, s*math.Sqrt(6)/math.Pi))
		beta := math.Exp(-tau)
		total := 0.0
		for i, x := range d.exact {
			total += d.exactW[i] * math.Exp(beta*x)
		}
		for i, x := range d.to {
			total += d.intervalW[i] * math.Exp(beta*x)
		}
		for i, x := range d.right {
			total += d.rightW[i] * math.Exp(beta*x)
		}
		for i, x := range d.late {
			total -= d.lateW[i] * math.Exp(beta*x)
		}
		if total > 0 {
			return math.Log(total/n) / beta, tau
		}
		return m, tau
	case Lognormal:
		return m + 0.3*s, math.Log(math.Max(s, 0.05))
	default:
		return m + 0.3*s, math.Log(math.Max(s*math.Sqrt(3)/math.Pi, 0.03))
	}
}

// sums are a log-likelihood with its gradient and Hessian in mu and tau = log sigma.
type sums struct{ l, m, t, mm, mt, tt float64 }

func (a *sums) add(b sums) {
	a.l += b.l
	a.m += b.m
	a.t += b.t
	a.mm += b.mm
	a.mt += b.mt
	a.tt += b.tt
}

// piece adds w times g(z) by the chain rule: dz/dmu = -1/sigma, dz/dtau = -z.
func (a *sums) piece(w, z, inv, g, g1, g2 float64) {
	a.l += w * g
	a.m -= w * g1 * inv
	a.t -= w * z * g1
	a.mm += w * g2 * inv * inv
	a.mt += w * (z*g2 + g1) * inv
	a.tt += w * (z*z*g2 + z*g1)
}

// workers share a long sample.
const longSample = 20_000

// likelihood is the log-likelihood at (mu, tau) with its derivatives, without the prior.
func (d *sample) likelihood(mu, tau float64) sums {
	n := len(d.exact) + len(d.right) + len(d.late) + len(d.to)
	parts := 1
	if n > longSample {
		parts = runtime.GOMAXPROCS(0)
	}
	out := make([]sums, parts)
	if parts == 1 {
		d.part(mu, tau, 0, 1, &out[0])
	} else {
		var wg sync.WaitGroup
		for k := range parts {
			wg.Go(func() { d.part(mu, tau, k, parts, &out[k]) })
		}
		wg.Wait()
	}
	total := out[0]
	for _, o := range out[1:] {
		total.add(o)
	}
	// Of an exact failure's density: -log sigma - log t.
	total.l -= d.sumExact*tau + d.sumLog
	total.t -= d.sumExact
	return total
}

func span(n, k, parts int) (int, int) { return n * k / parts, n * (k + 1) / parts }

func (d *sample) part(mu, tau float64, k, parts int, out *sums) {
	inv := math.Exp(-tau)
	var s sums
	from, to := span(len(d.exact), k, parts)
	if d.family == Weibull {
		s = weibullExact(d.exact[from:to], d.exactW[from:to], mu, inv)
		from, to = span(len(d.right), k, parts)
		s.add(weibullRight(d.right[from:to], d.rightW[from:to], mu, inv, 1))
		from, to = span(len(d.late), k, parts)
		s.add(weibullRight(d.late[from:to], d.lateW[from:to], mu, inv, -1))
	} else {
		for i := from; i < to; i++ {
			z := (d.exact[i] - mu) * inv
			g, g1, g2 := d.family.density(z)
			s.piece(d.exactW[i], z, inv, g, g1, g2)
		}
		from, to = span(len(d.right), k, parts)
		for i := from; i < to; i++ {
			z := (d.right[i] - mu) * inv
			g, g1, g2 := d.family.survive(z)
			s.piece(d.rightW[i], z, inv, g, g1, g2)
		}
		from, to = span(len(d.late), k, parts)
		for i := from; i < to; i++ {
			z := (d.late[i] - mu) * inv
			g, g1, g2 := d.family.survive(z)
			s.piece(-d.lateW[i], z, inv, g, g1, g2)
		}
	}
	from, to = span(len(d.to), k, parts)
	for i := from; i < to; i++ {
		d.interval(&s, d.intervalW[i], d.from[i], d.to[i], mu, inv)
	}
	*out = s
}

// weibullExact and weibullRight are the loops of large samples: one exponential a life.
func weibullExact(x, w []float64, mu, inv float64) sums {
	var l, t, tt, mt, sw, swh float64
	for i, v := range x {
		z := (v - mu) * inv
		h := math.Exp(z)
		c := w[i]
		zh := z * h
		l += c * (z - h)
		t += c * (zh - z)
		mt += c * (1 - h - zh)
		tt += c * (z - z*(1+z)*h)
		sw += c
		swh += c * h
	}
	return sums{l: l, m: (swh - sw) * inv, t: t, mm: -swh * inv * inv, mt: mt * inv, tt: tt}
}

func weibullRight(x, w []float64, mu, inv, sign float64) sums {
	var sh, szh, szzh float64
	for i, v := range x {
		z := (v - mu) * inv
		h := w[i] * math.Exp(z)
		sh += h
		szh += z * h
		szzh += z * z * h
	}
	return sums{l: -sign * sh, m: sign * sh * inv, t: sign * szh, mm: -sign * sh * inv * inv, mt: -sign * (sh + szh) * inv, tt: -sign * (szh + szzh)}
}

// interval adds a failure between two looks: log(S_a - S_b).
func (d *sample) interval(s *sums, w, from, to, mu, inv float64) {
	type side struct{ log, m, t, mm, mt, tt float64 }
	at := func(x float64) side {
		if math.IsInf(x, -1) {
			return side{}
		}
		z := (x - mu) * inv
		g, g1, g2 := d.family.survive(z)
		g2 += g1 * g1 // of S itself, over S
		return side{g, -g1 * inv, -z * g1, g2 * inv * inv, (z*g2 + g1) * inv, z*z*g2 + z*g1}
	}
	a, b := at(from), at(to)
	r := math.Exp(b.log - a.log)
	dd := -math.Expm1(b.log - a.log)
	if !(dd > 1e-300) {
		s.l = math.Inf(-1)
		return
	}
	m, t := (a.m-r*b.m)/dd, (a.t-r*b.t)/dd
	s.l += w * (a.log + math.Log(dd))
	s.m += w * m
	s.t += w * t
	s.mm += w * ((a.mm-r*b.mm)/dd - m*m)
	s.mt += w * ((a.mt-r*b.mt)/dd - m*t)
	s.tt += w * ((a.tt-r*b.tt)/dd - t*t)
}

// penalty is the logarithm of the prior, without its constants, with gradient and Hessian.
func (d *sample) penalty(mu, tau float64) (v float64, grad [2]float64, hess [2][2]float64) {
	p := d.prior
	if p == nil {
		return 0, grad, hess
	}
	sw := math.Exp(tau) * d.family.quantile(p.P)
	y := mu + d.shift + sw
	a, b := (y-p.LogLife)/(p.LifeSD*p.LifeSD), (tau-p.LogScale)/(p.ScaleSD*p.ScaleSD)
	v = -0.5*((y-p.LogLife)/p.LifeSD)*((y-p.LogLife)/p.LifeSD) - 0.5*((tau-p.LogScale)/p.ScaleSD)*((tau-p.LogScale)/p.ScaleSD)
	i := 1 / (p.LifeSD * p.LifeSD)
	return v, [2]float64{-a, -a*sw - b}, [2][2]float64{{-i, -i * sw}, {-i * sw, -i*sw*sw - a*sw - 1/(p.ScaleSD*p.ScaleSD)}}
}

// objective is what is climbed: the log-likelihood and the prior.
func (d *sample) objective(mu, tau float64) sums {
	s := d.likelihood(mu, tau)
	v, g, h := d.penalty(mu, tau)
	s.l += v
	s.m += g[0]
	s.t += g[1]
	s.mm += h[0][0]
	s.mt += h[0][1]
	s.tt += h[1][1]
	return s
}

// climb is Newton's method with the curvature made positive, steps of at most 1 and halving until the objective does not
// fall. ok is false where it runs away.
func (d *sample) climb(mu, tau float64) (float64, float64, float64, [2][2]float64, bool) {
	s := d.objective(mu, tau)
	for range 200 {
		if math.IsNaN(s.l) || math.Abs(mu) > 50 || tau < -12 || tau > 5 {
			return 0, 0, 0, [2][2]float64{}, false
		}
		dm, dt := newton(s)
		if big := math.Max(math.Abs(dm), math.Abs(dt)); big > 1 {
			dm, dt = dm/big, dt/big
		}
		a := 1.0
		var next sums
		for {
			next = d.objective(mu+a*dm, tau+a*dt)
			if next.l >= s.l || a < 1e-8 {
				break
			}
			a /= 2
		}
		if a < 1e-8 && !(next.l >= s.l) {
			next, a = s, 0 // rounding: the peak is here
		}
		mu, tau, s = mu+a*dm, tau+a*dt, next
		if math.Max(math.Abs(a*dm), math.Abs(a*dt)) < 1e-11 {
			break
		}
	}
	if scale := math.Max(1, math.Abs(s.mm)+math.Abs(s.tt)); math.Abs(s.m) > 1e-5*scale || math.Abs(s.t) > 1e-5*scale {
		return 0, 0, 0, [2][2]float64{}, false
	}
	return mu, tau, s.l, [2][2]float64{{s.mm, s.mt}, {s.mt, s.tt}}, true
}

// newton solves the step with the eigenvalues of minus the Hessian made positive.
func newton(s sums) (dm, dt float64) {
	a, b, c := -s.mm, -s.mt, -s.tt
	mid, half := (a+c)/2, math.Hypot((a-c)/2, b)
	l1, l2 := mid+half, mid-half
	floor := 1e-8 * math.Max(math.Abs(l1), math.Abs(l2))
	p1, p2 := math.Max(math.Abs(l1), floor), math.Max(math.Abs(l2), floor)
	// Eigenvector of l1.
	vx, vy := b, l1-a
	if math.Hypot(vx, vy) < 1e-300 || math.Abs(l1-c) > math.Abs(l1-a) {
		vx, vy = l1-c, b
	}
	n := math.Hypot(vx, vy)
	if n == 0 {
		vx, vy, n = 1, 0, 1
	}
	vx, vy = vx/n, vy/n
	along, across := (vx*s.m+vy*s.t)/p1, (-vy*s.m+vx*s.t)/p2
	return vx*along - vy*across, vy*along + vx*across
}

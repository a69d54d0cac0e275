package survival

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"
)

// nist is NIST/SEMATECH e-Handbook of Statistical Methods, 8.4.1.3: 20 units on test for 500 h, 10 failures.
var nist = []Life{Failed(54), Failed(187), Failed(216), Failed(240), Failed(244), Failed(335), Failed(361), Failed(373), Failed(375), Failed(386),
	{Lower: 500, Upper: math.Inf(1), Count: 10}}

// TestPublished: the handbook prints scale 606.528, shape 1.7208, minus log likelihood 75.135, AIC 154.27 and 154.39.
func TestPublished(t *testing.T) {
	t.Parallel()
	f, err := FitLives(Weibull, nist, nil)
	if err != nil {
		t.Fatal(err)
	}
	n, err := FitLives(Lognormal, nist, nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, x := range []struct{ got, want, within float64 }{{f.Scale(), 606.528, 5e-4}, {f.Shape(), 1.7208, 5e-5}, {-f.LogLik, 75.135, 5e-4},
		{f.AIC(), 154.27, 5e-3}, {n.AIC(), 154.39, 5e-3}, {f.Mean(), 540.737, 5e-4}} {
		if math.Abs(x.got-x.want) > x.within {
			t.Errorf("%.8g, not %g", x.got, x.want)
		}
	}
}

// TestNoFit: data that no curve is most likely for say so; the rated life still speaks.
func TestNoFit(t *testing.T) {
	t.Parallel()
	working := []Life{Working(1000), Working(2000), {Lower: 3000, Upper: math.Inf(1), Count: 50}}
	one := []Life{Failed(500), Failed(500), Working(400)}
	for name, lives := range map[string][]Life{"nothing failed": working, "one age": one} {
		if f, err := FitLives(Weibull, lives, nil); !errors.Is(err, ErrNoFit) {
			t.Errorf("%s: %+v, %v", name, f, err)
		}
	}
	prior, err := Rated(50_000, 0.5, 2)
	if err != nil {
		t.Fatal(err)
	}
	f, err := FitLives(Weibull, working, &prior)
	if err != nil || !(f.B(0.5) > 49_000) {
		t.Errorf("%+v, %v", f, err) // 52 that work say little against a rated life far beyond them
	}
	if _, err := FitLives(Weibull, nil, nil); !errors.Is(err, ErrNone) {
		t.Error(err)
	}
	nan := math.NaN()
	for _, l := range []Life{{Lower: nan, Upper: 1}, {Lower: 2, Upper: 1}, {Lower: -1, Upper: 1}, {Entry: nan, Lower: 1, Upper: 1}, {Lower: 1, Upper: 1, Count: -1},
		{Lower: 0, Upper: 0}, {Entry: math.Inf(1), Lower: 1, Upper: 1}} {
		if _, err := FitLives(Weibull, []Life{l}, nil); !errors.Is(err, ErrData) {
			t.Errorf("%+v: %v", l, err)
		}
		if _, err := ProductLimit([]Life{l}, true); !errors.Is(err, ErrData) {
			t.Errorf("%+v: %v", l, err)
		}
	}
	for _, bad := range [][3]float64{{0, 0.5, 2}, {nan, 0.5, 2}, {1, 0, 2}, {1, 1, 2}, {1, 0.5, 0}} {
		if _, err := Rated(bad[0], bad[1], bad[2]); !errors.Is(err, ErrNumber) {
			t.Errorf("%v: %v", bad, err)
		}
	}
}

// TestCounts: a life counted three times is three lives; one that ends before it was seen is none.
func TestCounts(t *testing.T) {
	t.Parallel()
	a := []Life{{Lower: 100, Upper: 100, Count: 3}, Failed(200), {Entry: 50, Lower: 300, Upper: math.Inf(1), Count: 2}, Between(100, 150)}
	b := []Life{Failed(100), Failed(100), Failed(100), Failed(200), {Entry: 50, Lower: 300, Upper: math.Inf(1)}, {Entry: 50, Lower: 300, Upper: math.Inf(1), Count: 1},
		Between(100, 150), {Entry: 400, Lower: 300, Upper: math.Inf(1), Count: 1}, {Entry: 100, Lower: 90, Upper: 90, Count: 1}}
	for _, family := range Families {
		x, err := FitLives(family, a, nil)
		y, err2 := FitLives(family, b, nil)
		if err != nil || err2 != nil {
			t.Fatal(err, err2)
		}
		if math.Abs(x.Mu-y.Mu) > 1e-9 || math.Abs(x.Sigma-y.Sigma) > 1e-9 || x.N != 7 || y.N != 7 || x.Failures != 5 || y.Failures != 5 {
			t.Errorf("%s: %+v %+v", family, x, y)
		}
	}
}

// TestDerivatives holds gradient and Hessian against central differences of the likelihood, prior included.
func TestDerivatives(t *testing.T) {
	t.Parallel()
	prior := Prior{P: 0.5, LogLife: 5, LifeSD: 0.5, LogScale: -0.7, ScaleSD: 0.4}
	lives := append([]Life{Between(50, 120), {Lower: 0, Upper: 80, Count: 2}, {Entry: 60, Lower: 130, Upper: 200, Count: 1}, {Entry: 90, Lower: 310, Upper: 310, Count: 1}}, nist...)
	for _, family := range Families {
		d := newSample(family, lives, &prior)
		for _, at := range [][2]float64{{0.1, -0.3}, {0.4, -0.8}, {-0.2, 0.2}} {
			const h = 1e-5
			s := d.objective(at[0], at[1])
			right, left := d.objective(at[0]+h, at[1]), d.objective(at[0]-h, at[1])
			up, down := d.objective(at[0], at[1]+h), d.objective(at[0], at[1]-h)
			for i, x := range [][2]float64{{s.m, (right.l - left.l) / (2 * h)}, {s.t, (up.l - down.l) / (2 * h)}, {s.mm, (right.m - left.m) / (2 * h)},
				{s.mt, (up.m - down.m) / (2 * h)}, {s.mt, (right.t - left.t) / (2 * h)}, {s.tt, (up.t - down.t) / (2 * h)}} {
				if math.Abs(x[0]-x[1]) > 1e-6*math.Max(1, math.Abs(x[1])) {
					t.Errorf("%s at %v, %d: %g, by differences %g", family, at, i, x[0], x[1])
				}
			}
		}
	}
}

// TestLongSample: a sample that is shared among processors gives the sums of one that is not.
func TestLongSample(t *testing.T) {
	t.Parallel()
	random := rand.New(rand.NewPCG(1, 2))
	var lives []Life
	for range 3 * longSample {
		age := 1000 * math.Pow(-math.Log(random.Float64()), 0.4)
		l := Failed(age)
		if age > 1200 {
			l = Working(1200)
		}
		if random.IntN(3) == 0 {
			l.Entry = 100 * random.Float64()
		}
		lives = append(lives, l)
	}
	for _, family := range Families {
		d := newSample(family, lives, nil)
		got := d.likelihood(0, -0.9)
		var one sums
		d.part(0, -0.9, 0, 1, &one)
		one.l -= d.sumExact*-0.9 + d.sumLog
		one.t -= d.sumExact
		if math.Abs(got.l-one.l) > 1e-9*math.Abs(one.l) || math.Abs(got.tt-one.tt) > 1e-9*math.Abs(one.tt) {
			t.Errorf("%s: %+v, in one go %+v", family, got, one)
		}
	}
	// Drawn from shape 2.5, scale 1000: the fit lies within four of its own standard errors.
	f, err := FitLives(Weibull, lives, nil)
	if err != nil || math.Abs(f.Mu-math.Log(1000)) > 4*math.Sqrt(f.Cov[0][0]) || math.Abs(math.Log(f.Sigma)-math.Log(0.4)) > 4*math.Sqrt(f.Cov[1][1]) {
		t.Errorf("%+v, %v", f, err)
	}
}

// TestExponentialRate: with no failure in T the upper 95 % limit is 2.996/T; with d the ends are chi-square over 2T. Check
// by the distribution itself: at the upper end, d or fewer failures have 2.5 %.
func TestExponentialRate(t *testing.T) {
	t.Parallel()
	_, l, err := ExponentialRate([]Life{{Entry: 100, Lower: 600, Upper: math.Inf(1), Count: 4}})
	if err != nil || l.Low != nil || math.Abs(*l.High*2000-2.9957) > 1e-4 {
		t.Errorf("%+v, %v", l, err)
	}
	r, l, err := ExponentialRate(nist)
	if err != nil || math.Abs(r-10/7771.0) > 1e-12 { // 2,771 h lived by those that failed and 10 x 500 h
		t.Errorf("%g, %v", r, err)
	}
	poisson := func(mean float64, most int) float64 {
		sum, term := 0.0, math.Exp(-mean)
		for k := 0; k <= most; k++ {
			sum += term
			term *= mean / float64(k+1)
		}
		return sum
	}
	if p := poisson(*l.High*7771, 10); math.Abs(p-0.025) > 1e-9 {
		t.Errorf("%g at the upper end", p)
	}
	if p := 1 - poisson(*l.Low*7771, 9); math.Abs(p-0.025) > 1e-9 {
		t.Errorf("%g at the lower end", p)
	}
}

func TestGrid(t *testing.T) {
	t.Parallel()
	f, err := FitLives(Weibull, nist, nil)
	if err != nil {
		t.Fatal(err)
	}
	var w, m, v, c float64
	for _, d := range f.Grid() {
		a, b := d.Mu-f.Mu, math.Log(d.Sigma/f.Sigma)
		w, m, v, c = w+d.Weight, m+d.Weight*a, v+d.Weight*a*a, c+d.Weight*a*b
	}
	// A rule of 15 nodes is exact for the moments.
	if len(f.Grid()) != 225 || math.Abs(w-1) > 1e-12 || math.Abs(m) > 1e-12 || math.Abs(v-f.Cov[0][0]) > 1e-12 || math.Abs(c-f.Cov[0][1]) > 1e-12 {
		t.Errorf("%d nodes: %g %g %g %g", len(f.Grid()), w, m, v, c)
	}
}

// TestChoose: few failures keep to the rated life; a Weibull sample chooses Weibull; none and no rated life says so.
func TestChoose(t *testing.T) {
	t.Parallel()
	prior, err := Rated(600, 0.5, 2)
	if err != nil {
		t.Fatal(err)
	}
	if c, err := Choose(nist[:5], &prior); err != nil || c.Fit.Prior == nil || c.Chosen != Weibull {
		t.Errorf("%+v, %v", c, err)
	}
	if c, err := Choose(nist, &prior); err != nil || c.Fit.Prior != nil || c.Chosen != Weibull {
		t.Errorf("%+v, %v", c, err)
	}
	if c, err := Choose([]Life{Working(10)}, nil); !errors.Is(err, ErrNoFit) {
		t.Errorf("%+v, %v", c, err)
	}
}

// FuzzLives: whatever lives are told, a fit is one or says why not, and its numbers are numbers.
func FuzzLives(f *testing.F) {
	f.Add(uint64(1), 12, true)
	f.Add(uint64(7), 3, false)
	f.Fuzz(func(t *testing.T, seed uint64, n int, late bool) {
		random := rand.New(rand.NewPCG(seed, 5))
		lives := make([]Life, max(0, n%60))
		for i := range lives {
			a := math.Exp(random.NormFloat64() * float64(1+seed%9))
			switch random.IntN(4) {
			case 0:
				lives[i] = Working(a)
			case 1:
				lives[i] = Between(a, a*(1+random.Float64()))
			case 2:
				lives[i] = Life{Upper: a}
			default:
				lives[i] = Failed(math.Ceil(a))
			}
			if late && random.IntN(2) == 0 {
				lives[i].Entry = a * random.Float64() * 1.2
			}
		}
		prior := Prior{P: 0.1, LogLife: random.NormFloat64() * 5, LifeSD: 0.5, LogScale: -1, ScaleSD: 0.4}
		for _, p := range []*Prior{nil, &prior} {
			for _, family := range Families {
				fit, err := FitLives(family, lives, p)
				if err != nil {
					continue
				}
				if math.IsNaN(fit.Mu+fit.Sigma+fit.LogLik+fit.Cov[0][0]+fit.Cov[1][1]) || !(fit.Sigma > 0) || !(fit.Cov[0][0] > 0) {
					t.Errorf("%+v", fit)
				}
				if l := fit.LikelihoodRatio(0.1); l.Low != nil && !(*l.Low <= fit.B(0.1)*1.0001) || l.High != nil && !(*l.High >= fit.B(0.1)*0.9999) {
					t.Errorf("limits %v %v around %g", l.Low, l.High, fit.B(0.1))
				}
			}
		}
		if c, err := ProductLimit(lives, true); err == nil {
			before := 1.0
			for _, s := range c.Steps {
				if !(s.Survival >= 0 && s.Survival <= before) {
					t.Errorf("%+v after %g", s, before)
				}
				before = s.Survival
			}
		}
	})
}

func BenchmarkFit(b *testing.B) {
	for b.Loop() {
		if _, err := FitLives(Weibull, nist, nil); err != nil {
			b.Fatal(err)
		}
	}
}

// TestPublishedCurve: the 21 patients on 6-mercaptopurine of Freireich et al. (Blood 21, 1963, 699), whose curve and
// standard errors textbooks print to three and four places (Klein and Moeschberger 1997, section 4.2; from memory).
func TestPublishedCurve(t *testing.T) {
	t.Parallel()
	var lives []Life
	for _, x := range []float64{6, 6, 6, 7, 10, 13, 16, 22, 23} {
		lives = append(lives, Failed(x))
	}
	for _, x := range []float64{6, 9, 10, 11, 17, 19, 20, 25, 32, 32, 34, 35} {
		lives = append(lives, Working(x))
	}
	c, err := ProductLimit(lives, true)
	if err != nil || len(c.Steps) != 7 {
		t.Fatalf("%+v, %v", c, err)
	}
	for i, want := range []struct{ at, risk, survival, se float64 }{{6, 21, 0.857, 0.0764}, {7, 17, 0.807, 0.0869}, {10, 15, 0.753, 0.0963},
		{13, 12, 0.690, 0.1068}, {16, 11, 0.627, 0.1141}, {22, 7, 0.538, 0.1282}, {23, 6, 0.448, 0.1346}} {
		s := c.Steps[i]
		if s.Time != want.at || s.AtRisk != want.risk || math.Abs(s.Survival-want.survival) > 5e-4 || math.Abs(s.SE-want.se) > 5e-5 {
			t.Errorf("%+v, not %+v", s, want)
		}
	}
	if m := c.Quantile(0.5); m == nil || *m != 23 {
		t.Errorf("median %v, not 23 weeks", m)
	}
}

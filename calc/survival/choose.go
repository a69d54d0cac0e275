package survival

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

func chiSquare(degrees, p float64) float64 { return distuv.ChiSquared{K: degrees}.Quantile(p) }

// A Verdict is how well a family fits.
type Verdict struct {
	Family   Family
	Fit      *Fit    // nil where it has none
	A2       float64 // Anderson and Darling's statistic, corrected for the estimated parameters; 0 where the sample is not complete
	Limit    float64 // its 1 % point
	Gap      float64 // greatest distance between the curve and the fit, over ages with five at risk
	GapLimit float64
	Rejected bool // at 1 %
}

// onePercent are the 1 % points of the corrected statistic: Stephens 1977 (Weibull), D'Agostino and Stephens 1986 (lognormal),
// Stephens 1979 (log-logistic).
var onePercent = map[Family]float64{Weibull: 1.038, Lognormal: 1.035, Loglogistic: 0.906}

// gapFactor times 1/sqrt(n) is the distance at which a fit to censored lives is rejected.
const gapFactor = 1.36

// leastToReject is how many failures it takes to reject a family.
const leastToReject = 30

// A Choice is the life that the data choose: the first family in the order Weibull, lognormal, log-logistic that is not
// rejected at 1 %; the curve itself where all are; the fit drawn towards the rated life where failures are few.
type Choice struct {
	Verdicts []Verdict
	Chosen   Family // empty where the curve itself is chosen, or nothing could be
	Fit      *Fit   // the chosen one; nil where the curve itself is
	Curve    *Curve
	Why      string
}

// few is below how many failures the prior decides.
const few = 10

// Choose fits every family and chooses. prior may be nil; then few failures are fitted alone, and none cannot be.
func Choose(lives []Life, prior *Prior) (*Choice, error) {
	_, failures, err := check(lives)
	if err != nil {
		return nil, err
	}
	c := &Choice{}
	if c.Curve, err = ProductLimit(lives, true); err != nil {
		return nil, err
	}
	if failures < few && prior != nil {
		if c.Fit, err = FitLives(Weibull, lives, prior); err != nil {
			return nil, err
		}
		c.Chosen = Weibull
		c.Why = fmt.Sprintf("%g failures are fewer than %d: drawn towards the rated life", failures, few)
		return c, nil
	}
	for _, family := range Families {
		v := Verdict{Family: family, Limit: onePercent[family]}
		v.Fit, err = FitLives(family, lives, nil)
		if err == nil {
			v.judge(lives, c.Curve.Steps, failures)
		}
		c.Verdicts = append(c.Verdicts, v)
	}
	for i := range c.Verdicts {
		if v := &c.Verdicts[i]; v.Fit != nil && !v.Rejected {
			c.Chosen, c.Fit = v.Family, v.Fit
			c.Why = "the first family that the data do not reject at 1 %"
			return c, nil
		}
	}
	if c.Verdicts[0].Fit == nil && prior != nil {
		if c.Fit, err = FitLives(Weibull, lives, prior); err != nil {
			return nil, err
		}
		c.Chosen, c.Why = Weibull, "the data have no most likely curve of their own: drawn towards the rated life"
		return c, nil
	}
	if !slices.ContainsFunc(c.Verdicts, func(v Verdict) bool { return v.Fit != nil }) {
		return nil, fmt.Errorf("%w: %g failures", ErrNoFit, failures)
	}
	c.Why = "every family is rejected at 1 %: the curve itself is used, and extended beyond its last failure"
	return c, nil
}

func (v *Verdict) judge(lives []Life, curve []Step, failures float64) {
	if a, ok := v.Fit.AndersonDarling(lives); ok {
		v.A2 = a
		v.Rejected = failures >= leastToReject && a > v.Limit
		return
	}
	v.Gap = v.Fit.gap(curve)
	v.GapLimit = gapFactor / math.Sqrt(failures)
	v.Rejected = failures >= leastToReject && v.Gap > v.GapLimit
}

// AndersonDarling is the statistic of a complete sample, corrected for the parameters having been estimated; ok is false
// where lives are censored, were seen late, or were found between looks.
func (f *Fit) AndersonDarling(lives []Life) (a2 float64, ok bool) {
	var ages []float64
	for _, l := range lives {
		if !l.exact() || l.Entry > 0 || l.count() != math.Trunc(l.count()) {
			return 0, false
		}
		for range int(l.count()) {
			ages = append(ages, l.Lower)
		}
	}
	slices.Sort(ages)
	n := float64(len(ages))
	mu, sigma := f.Mu, f.Sigma
	if f.Family == Lognormal && n > 1 {
		sigma *= math.Sqrt(n / (n - 1)) // the points are those of the deviation with n-1
	}
	sum := 0.0
	for i := range ages {
		logF := math.Log(-math.Expm1(f.Family.logS(mu, sigma, ages[i])))
		if f.Family == Weibull {
			logF = math.Log(-math.Expm1(-math.Exp((math.Log(ages[i]) - mu) / sigma)))
		}
		sum += (2*float64(i) + 1) * (logF + f.Family.logS(mu, sigma, ages[len(ages)-1-i]))
	}
	a2 = -n - sum/n
	switch f.Family {
	case Weibull:
		return a2 * (1 + 0.2/math.Sqrt(n)), true
	case Lognormal:
		return a2 * (1 + 0.75/n + 2.25/(n*n)), true
	default:
		return a2 * (1 + 0.25/n), true
	}
}

// gap is the greatest distance between the curve and the fit, over ages with five at risk; the fit is that of the units
// that reach the curve's beginning.
func (f *Fit) gap(curve []Step) float64 {
	worst, before, base := 0.0, 1.0, 0.0
	for k, s := range curve {
		if s.AtRisk < leastAtRisk {
			continue
		}
		if k == 0 {
			base = f.Family.logS(f.Mu, f.Sigma, math.Nextafter(s.Time, 0))
			if s.AtRisk > 0 && base > -1e-3 {
				base = 0
			}
		}
		want := math.Exp(f.Family.logS(f.Mu, f.Sigma, s.Time) - base)
		worst = math.Max(worst, math.Max(math.Abs(s.Survival-want), math.Abs(before-want)))
		before = s.Survival
	}
	return worst
}

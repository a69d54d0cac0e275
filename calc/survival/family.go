package survival

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// A Family is a family of lives: the logarithm of a life is a location mu and a scale sigma times a standard variable.
type Family string

// The families, in the order in which they are tried.
const (
	Weibull     Family = "weibull"
	Lognormal   Family = "lognormal"
	Loglogistic Family = "loglogistic"
)

// Families lists all.
var Families = []Family{Weibull, Lognormal, Loglogistic}

var halfLog2Pi = 0.5 * math.Log(2*math.Pi)

// density returns the logarithm of the standard density at z with its first two derivatives.
func (f Family) density(z float64) (g, g1, g2 float64) {
	switch f {
	case Weibull:
		e := math.Exp(z)
		return z - e, 1 - e, -e
	case Lognormal:
		return -z*z/2 - halfLog2Pi, -z, -1
	default:
		p := logistic(z)
		return z - 2*softplus(z), 1 - 2*p, -2 * p * (1 - p)
	}
}

// survive returns the logarithm of the standard survival at z with its first two derivatives.
func (f Family) survive(z float64) (g, g1, g2 float64) {
	switch f {
	case Weibull:
		e := math.Exp(z)
		return -e, -e, -e
	case Lognormal:
		g = logQ(z)
		l := math.Exp(-z*z/2 - halfLog2Pi - g) // Mills's ratio, turned over
		return g, -l, -l * (l - z)
	default:
		p := logistic(z)
		return -softplus(z), -p, -p * (1 - p)
	}
}

// quantile is the standard variable's p quantile.
func (f Family) quantile(p float64) float64 {
	switch f {
	case Weibull:
		return math.Log(-math.Log1p(-p))
	case Lognormal:
		return distuv.UnitNormal.Quantile(p)
	default:
		return math.Log(p) - math.Log1p(-p)
	}
}

func logistic(z float64) float64 {
	if z >= 0 {
		return 1 / (1 + math.Exp(-z))
	}
	e := math.Exp(z)
	return e / (1 + e)
}

func softplus(z float64) float64 {
	if z > 0 {
		return z + math.Log1p(math.Exp(-z))
	}
	return math.Log1p(math.Exp(z))
}

// logQ is the logarithm of the upper tail of the standard normal distribution.
func logQ(z float64) float64 {
	if z > 30 {
		// Asymptotic series of the tail; its next term is below 1e-11 here, and falls fast.
		q := 1 / (z * z)
		return -z*z/2 - math.Log(z) - halfLog2Pi + math.Log1p(-q*(1-3*q*(1-5*q*(1-7*q*(1-9*q)))))
	}
	return math.Log(0.5 * math.Erfc(z/math.Sqrt2))
}

// logS is the logarithm of the share that lives longer than t, for the parameters mu and sigma.
func (f Family) logS(mu, sigma, t float64) float64 {
	if t <= 0 {
		return 0
	}
	g, _, _ := f.survive((math.Log(t) - mu) / sigma)
	return g
}

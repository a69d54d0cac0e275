package survival

import "math"

// A Draw is a life that the data allow, with its weight.
type Draw struct {
	Family    Family
	Mu, Sigma float64
	Weight    float64 // of all, 1 together
}

// Survival is the share that lives longer than t.
func (d Draw) Survival(t float64) float64 { return math.Exp(d.Family.logS(d.Mu, d.Sigma, t)) }

// Mean is the mean life.
func (d Draw) Mean() float64 { return (&Fit{Family: d.Family, Mu: d.Mu, Sigma: d.Sigma}).Mean() }

// A Posterior is what the data and the prior leave possible, on a grid in log B and log sigma.
type Posterior struct {
	Draws []Draw
	life  []float64 // nodes of the log of the age by which the prior's share has failed
	share []float64 // weight of each
}

// Posterior integrates the likelihood and the prior on a grid of cells by cells nodes over eight deviations of the prior.
// It needs a fit made with a prior. 200 are ample for use.
func (f *Fit) Posterior(cells int) (*Posterior, error) {
	if f.Prior == nil || cells < 10 || cells > 4000 {
		return nil, ErrNumber
	}
	p := f.Prior
	const wide = 8.0
	w := f.Family.quantile(p.P)
	out := &Posterior{life: make([]float64, cells), share: make([]float64, cells)}
	logs := make([]float64, 0, cells*cells)
	best := math.Inf(-1)
	node := func(k int) float64 { return -wide + 2*wide*float64(k)/float64(cells-1) }
	for i := range cells {
		tau := p.LogScale + p.ScaleSD*node(i)
		sigma := math.Exp(tau)
		for k := range cells {
			y := p.LogLife + p.LifeSD*node(k)
			mu := y - sigma*w
			l := math.Inf(-1)
			if tau > -15 && tau < 6 {
				l = f.data.objective(mu-f.data.shift, tau).l
			}
			if math.IsNaN(l) {
				l = math.Inf(-1)
			}
			logs = append(logs, l)
			best = math.Max(best, l)
			out.Draws = append(out.Draws, Draw{f.Family, mu, sigma, 0})
		}
	}
	sum := 0.0
	for i, l := range logs {
		out.Draws[i].Weight = math.Exp(l - best)
		sum += out.Draws[i].Weight
		out.share[i%cells] += out.Draws[i].Weight
	}
	for k := range cells {
		out.life[k] = p.LogLife + p.LifeSD*node(k)
		out.share[k] /= sum
	}
	kept := out.Draws[:0]
	for _, d := range out.Draws {
		if d.Weight /= sum; d.Weight > 1e-14 {
			kept = append(kept, d)
		}
	}
	out.Draws = kept
	return out, nil
}

// Mean is the mean of a function over the posterior.
func (p *Posterior) Mean(of func(Draw) float64) float64 {
	sum := 0.0
	for _, d := range p.Draws {
		sum += d.Weight * of(d)
	}
	return sum
}

// B is the q quantile of the age by which the prior's share has failed: the sum of the nodes' weights with the end
// correction of Euler and Maclaurin, and a cubic between nodes.
func (p *Posterior) B(q float64) float64 {
	at := func(k int) float64 {
		if k < 0 || k >= len(p.share) {
			return 0
		}
		return p.share[k]
	}
	sum := 0.0
	cdf := func(k int) float64 { return sum + at(k)/2 - (at(k+1)-at(k-1))/24 }
	low := cdf(0)
	for k := 1; k < len(p.share); k++ {
		sum += at(k - 1)
		high := cdf(k)
		if high < q {
			low = high
			continue
		}
		a, b, h := at(k-1), at(k), p.life[k]-p.life[k-1]
		x := root(func(x float64) float64 { // Hermite's cubic through both values with both slopes
			y := 1 - x
			return low*y*y*(1+2*x) + high*x*x*(1+2*y) + a*x*y*y - b*x*x*y - q
		}, 0, 1)
		return math.Exp(p.life[k-1] + x*h)
	}
	return math.Exp(p.life[len(p.life)-1])
}

// Grid returns the lives that a fit allows, weighted: 15 by 15 nodes of Gauss and Hermite around the fit by its covariance
// (Escobar and Meeker 1999), the same each time.
func (f *Fit) Grid() []Draw {
	x, w := hermite15()
	a := math.Sqrt(f.Cov[0][0])
	b := f.Cov[0][1] / a
	c := math.Sqrt(math.Max(f.Cov[1][1]-b*b, 0))
	out := make([]Draw, 0, len(x)*len(x))
	for i := range x {
		for k := range x {
			out = append(out, Draw{f.Family, f.Mu + a*x[i], f.Sigma * math.Exp(b*x[i]+c*x[k]), w[i] * w[k]})
		}
	}
	return out
}

// B is the age by which a share p has failed.
func (d Draw) B(p float64) float64 { return math.Exp(d.Mu + d.Sigma*d.Family.quantile(p)) }

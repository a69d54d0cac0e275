package survival

import (
	"math"
	"slices"
	"sort"
)

// A Step is the survival curve at an age at which units failed.
type Step struct {
	Time     float64
	AtRisk   float64  // units working just before
	Failed   float64  // at this age
	Survival float64  // share that lives longer
	SE       float64  // Greenwood's standard error of Survival
	Low      *float64 // 95 % limits by the log-log transform; nil where the curve is 1 or 0
	High     *float64
	Hazard   float64 // cumulative, Nelson and Aalen
	HazardSE float64
}

// A Curve is the share that lives longer, by age.
type Curve struct {
	Steps []Step
	From  float64 // where it begins under late entry; 0 otherwise
	Last  float64 // the greatest age at which a unit was still looked at
}

// z95 is the 0.975 quantile of the standard normal distribution.
const z95 = 1.959963984540054

// leastAtRisk is how many units must be at risk where the curve begins under late entry: with fewer, one early failure
// would bring it to 0 for good.
const leastAtRisk = 5

// ProductLimit is the survival curve of Kaplan and Meier (JASA 53, 1958, 457), with Greenwood's variance and log-log
// limits, and the cumulative hazard of Nelson and Aalen. Units that were seen late are at risk from their entry on (Tsai,
// Jewell and Wang 1987); with guard the curve then begins at the first failure age with five units at risk, and is the
// share of those that reached it. Failures found between looks count at the later one.
func ProductLimit(lives []Life, guard bool) (*Curve, error) {
	if _, _, err := check(lives); err != nil {
		return nil, err
	}
	type at struct {
		t             float64
		enter, out, d float64
	}
	var marks []at
	late := false
	for _, l := range lives {
		if !l.useful() {
			continue
		}
		end, d := l.Upper, l.count()
		if l.censored() {
			end, d = l.Lower, 0
		}
		late = late || l.Entry > 0
		marks = append(marks, at{t: l.Entry, enter: l.count()}, at{t: end, out: l.count(), d: d})
	}
	slices.SortFunc(marks, func(a, b at) int {
		switch {
		case a.t < b.t:
			return -1
		case a.t > b.t:
			return 1
		}
		return 0
	})
	risk := 0.0
	out := &Curve{Last: marks[len(marks)-1].t}
	var all []Step
	for i := 0; i < len(marks); {
		j := i
		var enter, out, d float64
		for ; j < len(marks) && marks[j].t == marks[i].t; j++ {
			enter, out, d = enter+marks[j].enter, out+marks[j].out, d+marks[j].d
		}
		if d > 0 {
			all = append(all, Step{Time: marks[i].t, AtRisk: risk, Failed: d})
		}
		risk += enter - out // who enters at an age is at risk after it; who leaves at it still was
		i = j
	}
	if guard && late {
		for len(all) > 0 && all[0].AtRisk < leastAtRisk {
			all = all[1:]
		}
		if len(all) > 0 {
			out.From = all[0].Time
		}
	}
	var logS, g, h, hv float64
	for k := range all {
		s := &all[k]
		logS += math.Log1p(-s.Failed / s.AtRisk)
		if s.AtRisk > s.Failed {
			g += s.Failed / (s.AtRisk * (s.AtRisk - s.Failed))
		}
		h += s.Failed / s.AtRisk
		hv += s.Failed / (s.AtRisk * s.AtRisk)
		s.Survival, s.Hazard, s.HazardSE = math.Exp(logS), h, math.Sqrt(hv)
		if s.AtRisk == s.Failed || math.IsInf(logS, -1) {
			logS = math.Inf(-1)
			s.Survival = 0
			continue
		}
		s.SE = s.Survival * math.Sqrt(g)
		if logS < 0 {
			u := z95 * math.Sqrt(g) / -logS
			low, high := math.Exp(logS*math.Exp(u)), math.Exp(logS*math.Exp(-u))
			s.Low, s.High = &low, &high
		}
	}
	out.Steps = all
	return out, nil
}

// Quantile is the age by which a share p of the units has failed: the first at which the curve is 1-p or less, the
// middle of the flat piece where it is just that; nil where the curve does not come down so far.
func (c *Curve) Quantile(p float64) *float64 {
	for k, s := range c.Steps {
		if diff := s.Survival - (1 - p); diff < -1e-12 {
			return &s.Time
		} else if diff <= 1e-12 {
			end := c.Last
			if k+1 < len(c.Steps) {
				end = c.Steps[k+1].Time
			}
			t := (s.Time + end) / 2
			return &t
		}
	}
	return nil
}

// at is the share that lives longer than t.
func (c *Curve) at(t float64) float64 {
	if k := sort.Search(len(c.Steps), func(k int) bool { return c.Steps[k].Time > t }); k > 0 {
		return c.Steps[k-1].Survival
	}
	return 1
}

// Conditional is the share of units alive at an age that fails within x more, by the curve itself; ok is false beyond its
// last failure, where it says nothing.
func (c *Curve) Conditional(age, x float64) (p float64, ok bool) {
	alive := c.at(age)
	if alive == 0 || len(c.Steps) == 0 || age+x > c.Steps[len(c.Steps)-1].Time {
		return 0, false
	}
	return 1 - c.at(age+x)/alive, true
}

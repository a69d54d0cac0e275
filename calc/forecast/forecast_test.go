package forecast

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"testing"

	"lampward/calc/survival"
)

// Values from the reference files beside the checkout come from SciPy and 50-digit arithmetic, as each file says.
func readGolden(t *testing.T, name string, into any) {
	t.Helper()
	raw, err := os.ReadFile("../../../shared/reference/life/golden/" + name + ".json")
	if os.IsNotExist(err) {
		t.Skip("the reference files beside the checkout are absent: " + name + " is not compared")
	}
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(raw, into); err != nil {
		t.Fatal(err)
	}
}

func weibull(scale, shape float64) survival.Draw {
	return survival.Draw{Family: survival.Weibull, Mu: math.Log(scale), Sigma: 1 / shape, Weight: 1}
}

func sameCount(t *testing.T, name string, c Count, quantiles map[string]int) {
	t.Helper()
	for level, want := range quantiles {
		q, err := strconv.ParseFloat(level, 64)
		if err != nil {
			t.Fatal(err)
		}
		if got := c.Quantile(q); got != want {
			t.Errorf("%s: quantile %s is %d, not %d", name, level, got, want)
		}
	}
}

// TestTen is the example of ten unequal probabilities of the R package poibin (Hong 2013): mean 3, variance 1.9.
func TestTen(t *testing.T) {
	t.Parallel()
	c, err := Of([]float64{.1, .1, .2, .2, .3, .3, .4, .4, .5, .5})
	if err != nil || math.Abs(c.Mean()-3) > 1e-12 || math.Abs(c.Variance()-1.9) > 1e-12 || math.Abs(c.At(0)-0.02286144) > 1e-12 || math.Abs(c.CDF(4)-0.86212984) > 1e-10 {
		t.Errorf("%+v, %v", c, err)
	}
	if _, err := Of([]float64{0.5, math.NaN()}); !errors.Is(err, ErrNumber) {
		t.Error(err)
	}
}

func TestGoldenCounts(t *testing.T) {
	t.Parallel()
	var g struct {
		Sets map[string]struct {
			Mean, Var float64
			Quantiles map[string]int
			K         []int
			PMF, CDF  []float64
		}
	}
	var raw struct{ Sets map[string]json.RawMessage }
	readGolden(t, "poisson_binomial", &raw)
	g.Sets = map[string]struct {
		Mean, Var float64
		Quantiles map[string]int
		K         []int
		PMF, CDF  []float64
	}{}
	sets := map[string][]float64{"hong_example": {.1, .1, .2, .2, .3, .3, .4, .4, .5, .5}}
	for i := range 100 {
		sets["u100"] = append(sets["u100"], (float64(i)+.5)/100)
	}
	for i := range 40 {
		sets["small_p_40"] = append(sets["small_p_40"], .001+.039*float64(i)/39)
	}
	for i := range 5000 {
		sets["fleet5000_weibull50000_2.3_next720h"] = append(sets["fleet5000_weibull50000_2.3_next720h"],
			survival.Conditional(survival.Weibull, math.Log(50000), 1/2.3, float64(7919*i%60000), 720))
	}
	for i := range 417 {
		sets["davis_fleet417_next168h"] = append(sets["davis_fleet417_next168h"],
			survival.Conditional(survival.Weibull, math.Log(1126.504475), 1/5.690547689, float64(37*i%900), 168))
	}
	for name, p := range sets {
		set := g.Sets[name]
		if err := json.Unmarshal(raw.Sets[name], &set); err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		c, err := Of(p)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(c.Mean()-set.Mean) > 1e-8*set.Mean || math.Abs(c.Variance()-set.Var) > 1e-7*set.Var {
			t.Errorf("%s: mean %.12g, variance %.12g, not %.12g, %.12g", name, c.Mean(), c.Variance(), set.Mean, set.Var)
		}
		sameCount(t, name, c, set.Quantiles)
		for i, k := range set.K {
			if math.Abs(c.At(k)-set.PMF[i]) > 1e-9 || math.Abs(c.CDF(k)-set.CDF[i]) > 1e-9 {
				t.Errorf("%s at %d: %.12g %.12g, not %.12g %.12g", name, k, c.At(k), c.CDF(k), set.PMF[i], set.CDF[i])
			}
		}
		// The approximation of many places keeps its promise where the deviation is above 5.
		if mean, variance, third := c.moments(); variance > 25 {
			n := near(mean, variance, third)
			for k := int(mean - 4*math.Sqrt(variance)); k < int(mean+4*math.Sqrt(variance)); k++ {
				if math.Abs(n.CDF(k)-c.CDF(k)) > 1e-3 {
					t.Errorf("%s at %d: approximated %g, not %g", name, k, n.CDF(k), c.CDF(k))
				}
			}
		}
	}
}

func TestGoldenSpares(t *testing.T) {
	t.Parallel()
	var g struct {
		Rows []struct {
			Mean, Level     float64
			Poisson         int
			FillRate        float64 `json:"fill_rate"`
			NegativeBinomal int     `json:"negbin_r25"`
		}
	}
	readGolden(t, "spares", &g)
	for _, r := range g.Rows {
		p, err := Poisson(r.Mean)
		if err != nil {
			t.Fatal(err)
		}
		n, err := NegativeBinomial(r.Mean, 0.2)
		if err != nil {
			t.Fatal(err)
		}
		s, err := Spares(p, r.Level)
		if err != nil || s.Count != r.Poisson || math.Abs(s.FillRate-r.FillRate) > 1e-8 || s.Level < r.Level {
			t.Errorf("%+v, %v, not %+v", s, err, r)
		}
		if s, err := Spares(n, r.Level); err != nil || s.Count != r.NegativeBinomal {
			t.Errorf("%+v, %v, not %+v", s, err, r)
		}
	}
}

// TestGoldenFleet: places renewed at each failure, against convolutions good to 1e-8.
func TestGoldenFleet(t *testing.T) {
	t.Parallel()
	var raw struct{ Sets map[string]json.RawMessage }
	readGolden(t, "fleet_forecast", &raw)
	for _, name := range []string{"new50_weibull_2000_2.5_L8760", "mixed60_weibull_50000_2.3_L20000", "lamps24_davis_L2000"} {
		var s struct {
			Eta, Beta, Horizon float64
			Ages               []float64
			Expected           float64 `json:"expected_failures_with_renewals"`
			Var                float64
			Quantiles          map[string]int
			Unit               map[string]float64 `json:"unit_expected_by_age"`
			PMF                []float64          `json:"unit_pmf_age_first"`
		}
		if err := json.Unmarshal(raw.Sets[name], &s); err != nil {
			t.Fatal(err)
		}
		life := weibull(s.Eta, s.Beta)
		const steps = 1600
		c, err := NewCourse(life, s.Horizon, steps)
		if err != nil {
			t.Fatal(err)
		}
		all, byAge := none(), map[float64]Count{}
		for _, age := range s.Ages {
			place, ok := byAge[age]
			if !ok {
				first := make([]float64, steps+1)
				for i := range first {
					first[i] = survival.Conditional(life.Family, life.Mu, life.Sigma, age, c.Step*float64(i))
				}
				place = c.Place(first, steps)
				byAge[age] = place
			}
			all = all.Plus(place)
		}
		if math.Abs(all.Mean()-s.Expected) > 2e-5*s.Expected || math.Abs(all.Variance()-s.Var) > 2e-4*s.Var {
			t.Errorf("%s: mean %.10g, variance %.10g, not %.10g, %.10g", name, all.Mean(), all.Variance(), s.Expected, s.Var)
		}
		sameCount(t, name, all, s.Quantiles)
		for text, want := range s.Unit {
			age, err := strconv.ParseFloat(text, 64)
			if err != nil {
				t.Fatal(err)
			}
			if got := byAge[age].Mean(); math.Abs(got-want) > 2e-5*want {
				t.Errorf("%s: a place of age %s has %.10g, not %.10g", name, text, got, want)
			}
		}
		for k, want := range s.PMF {
			if got := byAge[s.Ages[0]].At(k); math.Abs(got-want) > 2e-5 {
				t.Errorf("%s: %d failures have %.10g, not %.10g", name, k, got, want)
			}
		}
	}
}

// nist is NIST/SEMATECH e-Handbook 8.4.1.3.
func nist(t *testing.T) *survival.Fit {
	t.Helper()
	lives := []survival.Life{{Lower: 500, Upper: math.Inf(1), Count: 10}}
	for _, h := range []float64{54, 187, 216, 240, 244, 335, 361, 373, 375, 386} {
		lives = append(lives, survival.Failed(h))
	}
	f, err := survival.FitLives(survival.Weibull, lives, nil)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// TestGoldenUncertainty: 100 units in four ages over 100 h, the fit alone and what is not known of it included.
func TestGoldenUncertainty(t *testing.T) {
	t.Parallel()
	var raw struct {
		Sets map[string]struct {
			Ages      []float64
			Units     int `json:"units_per_age"`
			Horizon   float64
			PluginP   []float64      `json:"plugin_p"`
			MixedP    []float64      `json:"mixed_p"`
			Plugin    map[string]int `json:"plugin_quantiles"`
			Mixed     map[string]int `json:"mixed_quantiles"`
			MixedMean float64        `json:"mixed_mean"`
		}
	}
	readGolden(t, "prediction_with_parameter_uncertainty", &raw)
	s := raw.Sets["nist_8413_weibull20"]
	fit := nist(t)
	count := func(d survival.Draw, mixed []float64) Count {
		all := none()
		for i, age := range s.Ages {
			p := survival.Conditional(d.Family, d.Mu, d.Sigma, age, s.Horizon)
			if mixed != nil {
				mixed[i] += p * d.Weight
			}
			all = all.Plus(Count{0, []float64{1 - p, p}}.times(s.Units))
		}
		return all
	}
	sameCount(t, "the fit alone", count(survival.Draw{Family: fit.Family, Mu: fit.Mu, Sigma: fit.Sigma}, nil), s.Plugin)
	mixed := make([]float64, len(s.Ages))
	var parts []Weighted
	for _, d := range fit.Grid() {
		parts = append(parts, Weighted{count(d, mixed), d.Weight})
	}
	c, err := Mix(parts)
	if err != nil || math.Abs(c.Mean()-s.MixedMean) > 1e-6*s.MixedMean {
		t.Errorf("mean %.10g, not %.10g, %v", c.Mean(), s.MixedMean, err)
	}
	sameCount(t, "with what is not known", c, s.Mixed)
	for i, want := range s.MixedP {
		if math.Abs(mixed[i]-want) > 1e-6*want {
			t.Errorf("age %g: %.10g, not %.10g", s.Ages[i], mixed[i], want)
		}
	}
}

// TestPredict: months add up; a place that burns nothing fails never; without renewals in reach the expectation is the sum
// of the conditional probabilities.
func TestPredict(t *testing.T) {
	t.Parallel()
	life := weibull(50_000, 2.3)
	groups := []Group{{Age: 10_000, HoursPerMonth: 300, Count: 40}, {Age: 30_000, HoursPerMonth: 300, Count: 25}, {Age: 30_000, HoursPerMonth: 300, Count: 5},
		{Age: 60_000, HoursPerMonth: 0, Count: 100}}
	p, err := Predict(groups, []survival.Draw{life}, 24, 0.9)
	if err != nil || len(p.Months) != 24 || p.Places != 170 || p.Binned {
		t.Fatalf("%+v, %v", p, err)
	}
	sum := 0.0
	for m, month := range p.Months {
		sum += month.Expected
		if math.Abs(sum-month.ByThen) > 1e-6 || month.Low > month.High || month.ByThenLow > month.ByThenMedian || month.ByThenMedian > month.ByThenHigh {
			t.Errorf("month %d: %+v, %g", m+1, month, sum)
		}
	}
	want := 40*survival.Conditional(survival.Weibull, life.Mu, life.Sigma, 10_000, 300) + 30*survival.Conditional(survival.Weibull, life.Mu, life.Sigma, 30_000, 300)
	if got := p.Months[0].Expected; math.Abs(got-want) > 1e-3*want { // a second failure in the first month adds next to nothing
		t.Errorf("the first month expects %g, not %g", got, want)
	}
	empty, err := Predict(nil, []survival.Draw{life}, 2, 0.9)
	if err != nil || empty.Months[1].ByThen != 0 || empty.Months[1].ByThenHigh != 0 {
		t.Errorf("%+v, %v", empty, err)
	}
	for _, bad := range [][]Group{{{Age: -1, Count: 1}}, {{Age: math.NaN(), Count: 1}}, {{HoursPerMonth: 800, Count: 1}}, {{Count: -1}}} {
		if _, err := Predict(bad, []survival.Draw{life}, 2, 0.9); !errors.Is(err, ErrNumber) {
			t.Errorf("%+v: %v", bad, err)
		}
	}
	if _, err := Predict(groups, nil, 2, 0.9); !errors.Is(err, ErrNumber) {
		t.Error(err)
	}
}

// TestBins: above 5,000 different ages and duties, bins keep the mean within 0.2 % and the limits within one unit.
func TestBins(t *testing.T) {
	t.Parallel()
	random := rand.New(rand.NewPCG(3, 4))
	var groups []Group
	for range mostExact + 500 {
		groups = append(groups, Group{Age: math.Round(60_000 * random.Float64()), HoursPerMonth: math.Round(100 + 500*random.Float64()), Count: 1 + random.IntN(3)})
	}
	life := weibull(50_000, 2.3)
	p, err := Predict(groups, []survival.Draw{life}, 12, 0.9)
	if err != nil || !p.Binned {
		t.Fatalf("%+v, %v", p, err)
	}
	var in, then [12]Count
	if err := one(gathered(groups), life, 12, func(m int, a, b Count) { in[m], then[m] = a, b }); err != nil {
		t.Fatal(err)
	}
	for m, month := range p.Months {
		low, high := in[m].Interval(0.9)
		thenLow, thenHigh := then[m].Interval(0.9)
		off := func(a, b int) bool { return a-b > 1 || b-a > 1 }
		if math.Abs(month.ByThen/then[m].Mean()-1) > 2e-3 || off(low, month.Low) || off(high, month.High) || off(thenLow, month.ByThenLow) || off(thenHigh, month.ByThenHigh) {
			t.Errorf("month %d: %+v; one by one %g, [%d, %d], [%d, %d]", m+1, month, then[m].Mean(), low, high, thenLow, thenHigh)
		}
	}
}

// TestBacktest: over 1,000 simulated fleets the 90 % limits of a fit to what was seen cover what then comes: 85 to 95 % where
// twenty failures or more are expected, at least 88 % where fewer are. Each fleet's life is fitted anew, with late entries.
func TestBacktest(t *testing.T) {
	t.Parallel()
	for name, size := range map[string]int{"twenty and more": 400, "fewer": 100} {
		var told []Told
		random := rand.New(rand.NewPCG(11, uint64(size)))
		for range 500 {
			shape, scale := 1.2+2.5*random.Float64(), 8000+8000*random.Float64()
			draw := func() float64 { return scale * math.Pow(random.ExpFloat64(), 1/shape) }
			var lives []survival.Life
			var alive []Group
			come := 0
			const seen, next = 5000, 1800 // hours of watching; hours to come
			for len(lives) < size {
				entry := 3000 * random.Float64()
				life := draw()
				if life <= entry {
					continue // gone before anybody looked
				}
				end := entry + seen
				if life <= end {
					lives = append(lives, survival.Life{Entry: entry, Lower: life, Upper: life, Count: 1})
					continue
				}
				lives = append(lives, survival.Life{Entry: entry, Lower: end, Upper: math.Inf(1), Count: 1})
				alive = append(alive, Group{Age: end, HoursPerMonth: 600, Count: 1})
				for at := life; at <= end+next; at += draw() {
					come++
				}
			}
			fit, err := survival.FitLives(survival.Weibull, lives, nil)
			if err != nil {
				t.Fatal(err)
			}
			var parts []Weighted
			for _, d := range fit.Grid() {
				if d.Weight < 1e-6 {
					continue
				}
				p := make([]float64, len(alive))
				for i, g := range alive {
					p[i] = survival.Conditional(d.Family, d.Mu, d.Sigma, g.Age, next)
				}
				var sum total
				for _, x := range p {
					sum.mean, sum.variance, sum.third = sum.mean+x, sum.variance+x*(1-x), sum.third+x*(1-x)*(1-2*x)
				}
				if sum.variance > 25 {
					parts = append(parts, Weighted{near(sum.mean, sum.variance, sum.third), d.Weight})
					continue
				}
				c, err := Of(p)
				if err != nil {
					t.Fatal(err)
				}
				parts = append(parts, Weighted{c, d.Weight})
			}
			c, err := Mix(parts)
			if err != nil {
				t.Fatal(err)
			}
			low, high := c.Interval(0.9)
			if c.Mean() >= 20 == (size == 400) {
				told = append(told, Told{c.Mean(), low, high, come})
			}
		}
		s, ok := ScoreOf(told)
		t.Logf("%s: %+v", name, s)
		// Mixing over what is not known of a life lifts the mean a little above what comes: by 6 % in the reference case of 20 units.
		if !ok || s.Of < 100 || s.Coverage < 0.85 || size == 400 && s.Coverage > 0.95 || size != 400 && s.Coverage < 0.88 || math.Abs(s.Bias) > 0.15 {
			t.Errorf("%s: %+v", name, s)
		}
	}
}

func TestScore(t *testing.T) {
	t.Parallel()
	if _, ok := ScoreOf(nil); ok {
		t.Error("nothing was scored")
	}
	s, ok := ScoreOf([]Told{{10, 5, 15, 12}, {10, 5, 15, 18}})
	if !ok || s.Coverage != 0.5 || math.Abs(s.Bias-0.5) > 1e-12 || s.Of != 2 {
		t.Errorf("%+v", s)
	}
}

func BenchmarkPredict(b *testing.B) {
	for _, places := range []int{1000, 500_000} {
		b.Run(fmt.Sprintf("places=%d", places), func(b *testing.B) {
			random := rand.New(rand.NewPCG(3, 4))
			groups := make([]Group, places)
			for i := range groups {
				groups[i] = Group{Age: 60_000 * random.Float64(), HoursPerMonth: 300, Count: 1}
			}
			fit := &survival.Fit{Family: survival.Weibull, Mu: math.Log(50_000), Sigma: 1 / 2.3, Cov: [2][2]float64{{0.002, 0}, {0, 0.004}}}
			for b.Loop() {
				if _, err := Predict(groups, fit.Grid(), 24, 0.9); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

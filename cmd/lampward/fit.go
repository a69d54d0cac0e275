package main

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"
	"text/tabwriter"

	"lampward/calc/survival"
)

type fitCommand struct {
	File   string  `arg:"" help:"CSV of lives, or - for the input." type:"path"`
	Rated  float64 `help:"Rated life, h: adds the fit drawn towards it, which speaks even where nothing has failed." placeholder:"HOURS"`
	Share  float64 `help:"Share failed by the rated life: 0.5 for a B50, 0.1 for a B10." default:"0.5"`
	Shape  float64 `help:"Weibull shape expected of it: about 2 for electronics, 5 for filaments." default:"2"`
	Format string  `enum:"table,json" default:"table" help:"table for people, or json."`
}

// Help shows the columns.
func (fitCommand) Help() string {
	return `Examples:
  lampward fit lives.csv
  lampward fit lives.csv --rated 50000 --shape 2
  lampward fit lives.csv --format json

Columns, with a header: lower,upper,entry,count. Upper is empty for a unit that still burns at lower; the same as lower
for one that failed then; else it failed between the two, lower 0 being from new. Entry is its age when tracking began,
0 or empty from new; count is how many such units, 1 where empty. Any unit of time will do. Limits are of 95 %, by
likelihood ratio. The exit status is 2 where the file cannot be used.`
}

// An ageJSON is an age by which a share has failed, with limits; one that is not there is not set by the data.
type ageJSON struct {
	Value float64  `json:"value"`
	Low   *float64 `json:"low"`
	High  *float64 `json:"high"`
}

// A fitJSON is a fitted life, or why there is none.
type fitJSON struct {
	Shape  *float64 `json:"shape,omitempty"`
	Scale  *float64 `json:"scale,omitempty"`
	Mu     *float64 `json:"mu,omitempty"`
	Sigma  *float64 `json:"sigma,omitempty"`
	LogLik *float64 `json:"loglik,omitempty"`
	AIC    *float64 `json:"aic,omitempty"`
	B10    *ageJSON `json:"b10,omitempty"`
	B50    *ageJSON `json:"b50,omitempty"`
	// How well it fits: the corrected statistic of Anderson and Darling of a complete sample, or the greatest distance from
	// the curve, with the value above which the family is rejected at 1 %.
	Distance *float64 `json:"distance,omitempty"`
	Limit    *float64 `json:"limit,omitempty"`
	Rejected *bool    `json:"rejected,omitempty"`
	None     string   `json:"none,omitempty"`
}

type stepJSON struct {
	Time     float64  `json:"time"`
	AtRisk   float64  `json:"at_risk"`
	Failed   float64  `json:"failed"`
	Survival float64  `json:"survival"`
	Low      *float64 `json:"low"`
	High     *float64 `json:"high"`
}

type fitReport struct {
	Lives       float64    `json:"lives"`
	Failures    float64    `json:"failures"`
	Chosen      string     `json:"chosen"` // empty where the curve itself is
	Why         string     `json:"why"`
	Weibull     fitJSON    `json:"weibull"`
	Lognormal   fitJSON    `json:"lognormal"`
	Loglogistic fitJSON    `json:"loglogistic"`
	Rated       *fitJSON   `json:"rated,omitempty"`
	RatedShare  float64    `json:"rated_share,omitempty"`
	RatedLife   *ageJSON   `json:"rated_life,omitempty"` // of the share, over all lives that data and rated life allow
	From        float64    `json:"from,omitempty"`       // where the curve begins under late entry
	Curve       []stepJSON `json:"kaplan_meier"`
}

// Run fits.
func (c *fitCommand) Run(_ context.Context, s *streams) error {
	in := s.in
	if c.File != "-" {
		file, err := os.Open(c.File)
		if err != nil {
			return err
		}
		defer file.Close()
		in = file
	}
	lives, err := readLives(in)
	if err != nil {
		return err
	}
	var prior *survival.Prior
	if c.Rated != 0 {
		p, err := survival.Rated(c.Rated, c.Share, c.Shape)
		if err != nil {
			return err
		}
		prior = &p
	}
	r, err := newFitReport(lives, prior)
	if err != nil {
		return err
	}
	if c.Format == "json" {
		enc := json.NewEncoder(s.out)
		enc.SetIndent("", "  ")
		return enc.Encode(r)
	}
	return s.fits(r)
}

// of is where the fit of a family is told.
func (r *fitReport) of(f survival.Family) *fitJSON {
	switch f {
	case survival.Weibull:
		return &r.Weibull
	case survival.Lognormal:
		return &r.Lognormal
	}
	return &r.Loglogistic
}

func newFitReport(lives []survival.Life, prior *survival.Prior) (*fitReport, error) {
	curve, err := survival.ProductLimit(lives, true)
	if err != nil {
		return nil, err
	}
	r := &fitReport{From: curve.From, Curve: []stepJSON{}}
	for _, s := range curve.Steps {
		r.Curve = append(r.Curve, stepJSON{s.Time, s.AtRisk, s.Failed, s.Survival, s.Low, s.High})
	}
	for _, family := range survival.Families {
		f, err := survival.FitLives(family, lives, nil)
		if err != nil {
			r.of(family).None = err.Error()
			continue
		}
		*r.of(family) = newFitJSON(f)
	}
	if prior != nil {
		f, err := survival.FitLives(survival.Weibull, lives, prior)
		if err != nil {
			return nil, err
		}
		rated := newFitJSON(f)
		rated.AIC = nil
		r.Rated, r.RatedShare, r.Lives, r.Failures = &rated, prior.P, f.N, f.Failures
		p, err := f.Posterior(400)
		if err != nil {
			return nil, err
		}
		low, high := p.B(0.025), p.B(0.975)
		r.RatedLife = &ageJSON{p.B(0.5), &low, &high}
	}
	choice, err := survival.Choose(lives, prior)
	switch {
	case errors.Is(err, survival.ErrNoFit):
		r.Why = "no family can be fitted: " + err.Error()
		return r, nil
	case err != nil:
		return nil, err
	}
	r.Chosen, r.Why = string(choice.Chosen), choice.Why
	if choice.Fit != nil {
		r.Lives, r.Failures = choice.Fit.N, choice.Fit.Failures
	}
	for i := range choice.Verdicts {
		v := &choice.Verdicts[i]
		if v.Fit == nil {
			continue
		}
		into := r.of(v.Family)
		r.Lives, r.Failures, into.Rejected = v.Fit.N, v.Fit.Failures, &v.Rejected
		into.Distance, into.Limit = &v.A2, &v.Limit
		if v.GapLimit > 0 {
			into.Distance, into.Limit = &v.Gap, &v.GapLimit
		}
	}
	return r, nil
}

func newFitJSON(f *survival.Fit) fitJSON {
	of := func(x float64) *float64 {
		if math.IsInf(x, 0) || math.IsNaN(x) {
			return nil
		}
		return &x
	}
	age := func(p float64) *ageJSON {
		l := f.LikelihoodRatio(p)
		return &ageJSON{f.B(p), l.Low, l.High}
	}
	out := fitJSON{LogLik: of(f.LogLik), AIC: of(f.AIC()), B10: age(0.1), B50: age(0.5)}
	if f.Family == survival.Weibull {
		out.Shape, out.Scale = of(f.Shape()), of(f.Scale())
	} else {
		out.Mu, out.Sigma = of(f.Mu), of(f.Sigma)
	}
	return out
}

// mostLives is how many rows a file of lives may have.
const mostLives = 5_000_000

// readLives reads lives from CSV with a header, columns in any order. A fault is told with its line.
func readLives(r io.Reader) ([]survival.Life, error) {
	in := csv.NewReader(r)
	in.ReuseRecord = true
	header, err := in.Read()
	if err != nil {
		return nil, fmt.Errorf("the header cannot be read: %w", err)
	}
	at := map[string]int{}
	for i, name := range header {
		name = strings.ToLower(strings.TrimSpace(strings.TrimPrefix(name, "\ufeff")))
		if !slices.Contains([]string{"lower", "upper", "entry", "count"}, name) {
			return nil, fmt.Errorf("column %q is none of lower, upper, entry, count", name)
		}
		if _, twice := at[name]; twice {
			return nil, fmt.Errorf("column %q is there twice", name)
		}
		at[name] = i
	}
	for _, name := range []string{"lower", "upper"} {
		if _, ok := at[name]; !ok {
			return nil, fmt.Errorf("column %q is missing", name)
		}
	}
	var lives []survival.Life
	for {
		row, err := in.Read()
		if errors.Is(err, io.EOF) {
			return lives, nil
		}
		if err != nil {
			return nil, err
		}
		line, _ := in.FieldPos(0)
		if len(lives) == mostLives {
			return nil, fmt.Errorf("line %d: there are more than %d lives", line, mostLives)
		}
		number := func(name string, absent float64) float64 {
			i, ok := at[name]
			if !ok || strings.TrimSpace(row[i]) == "" {
				return absent
			}
			x, bad := strconv.ParseFloat(strings.TrimSpace(row[i]), 64)
			if (bad != nil || math.IsNaN(x) || math.IsInf(x, 0) || x < 0 || name == "count" && x == 0) && err == nil {
				err = fmt.Errorf("line %d: %s is %q; a number from 0 up was expected", line, name, row[i])
			}
			return x
		}
		l := survival.Life{Lower: number("lower", math.NaN()), Upper: number("upper", math.Inf(1)), Entry: number("entry", 0), Count: number("count", 1)}
		switch {
		case err != nil:
			return nil, err
		case math.IsNaN(l.Lower):
			return nil, fmt.Errorf("line %d: lower is empty", line)
		case l.Upper < l.Lower:
			return nil, fmt.Errorf("line %d: upper %g is below lower %g", line, l.Upper, l.Lower)
		case l.Upper == 0:
			return nil, fmt.Errorf("line %d: a unit cannot fail at age 0", line)
		}
		lives = append(lives, l)
	}
}

// fits writes the report for people.
func (s *streams) fits(r *fitReport) error {
	fmt.Fprintf(s.out, "%g lives, %g failures\n\n", r.Lives, r.Failures)
	figure := func(x *float64) string {
		if x == nil {
			return "-"
		}
		return strconv.FormatFloat(*x, 'g', 7, 64)
	}
	limits := func(b *ageJSON) string {
		low, high := "no lower limit", "no upper limit"
		if b.Low != nil {
			low = figure(b.Low)
		}
		if b.High != nil {
			high = figure(b.High)
		}
		return fmt.Sprintf("%s (%s to %s)", figure(&b.Value), low, high)
	}
	w := tabwriter.NewWriter(s.out, 0, 0, 2, ' ', 0)
	fmt.Fprintln(w, "FAMILY\tPARAMETERS\tLOG LIKELIHOOD\t10 % FAILED BY\t50 % FAILED BY\tFITS")
	line := func(name string, f *fitJSON) {
		if f.None != "" {
			fmt.Fprintf(w, "%s\t%s\n", name, f.None)
			return
		}
		parameters := fmt.Sprintf("mu %s, sigma %s", figure(f.Mu), figure(f.Sigma))
		if f.Shape != nil {
			parameters = fmt.Sprintf("shape %s, scale %s", figure(f.Shape), figure(f.Scale))
		}
		fits := "-"
		if f.Rejected != nil {
			fits = map[bool]string{true: "rejected", false: "not rejected"}[*f.Rejected] + fmt.Sprintf(", %.3g against %.3g", *f.Distance, *f.Limit)
		}
		fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\t%s\n", name, parameters, figure(f.LogLik), limits(f.B10), limits(f.B50), fits)
	}
	line("Weibull", &r.Weibull)
	line("lognormal", &r.Lognormal)
	line("log-logistic", &r.Loglogistic)
	if r.Rated != nil {
		line("Weibull, towards the rated life", r.Rated)
	}
	if err := w.Flush(); err != nil {
		return err
	}
	if r.RatedLife != nil {
		fmt.Fprintf(s.out, "\nover all lives that data and rated life allow, %g %% have failed by %s\n", 100*r.RatedShare, limits(r.RatedLife))
	}
	chosen := r.Chosen
	if chosen == "" {
		chosen = "none"
	}
	fmt.Fprintf(s.out, "\nchosen: %s; %s\n\n", chosen, r.Why)
	w = tabwriter.NewWriter(s.out, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintln(w, "AGE\tAT RISK\tFAILED\tLIVE LONGER\tLOW\tHIGH\t")
	for i := range r.Curve {
		k := &r.Curve[i]
		fmt.Fprintf(w, "%g\t%g\t%g\t%.4f\t%s\t%s\t\n", k.Time, k.AtRisk, k.Failed, k.Survival, share(k.Low), share(k.High))
	}
	return w.Flush()
}

func share(x *float64) string {
	if x == nil {
		return "-"
	}
	return strconv.FormatFloat(*x, 'f', 4, 64)
}

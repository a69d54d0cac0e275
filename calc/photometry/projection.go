package photometry

import (
	"errors"
	"fmt"
	"math"
)

// Test is a set of readings of lumen maintenance at one case temperature and current (IES LM-80).
type Test struct {
	CaseTempC float64
	TimesH    []float64   // ascending, the first 0
	FluxLm    [][]float64 // one row a unit, one column a time; any unit of flux, as each is divided by its own first
}

// Projection is B*exp(-Alpha*t) fitted to the readings of a test (IES TM-21): the share of the initial flux at t hours.
type Projection struct {
	Alpha float64 // per hour; falling where positive
	B     float64
	Units int     // how many were tested
	TestH float64 // how long, h
	CapH  float64 // no projection reaches beyond this, h
	UsedH []float64

	measured [][2]float64 // hours and mean share, all of the test
}

// Faults of projections.
var (
	ErrTest    = errors.New("these readings are not enough for a projection")
	ErrOutside = errors.New("the case temperature is above the highest tested: there is no projection")
	ErrLevel   = errors.New("the level must be above 0 % and below 100 % of the initial flux")
)

// Limits of the projection: at least 10 units, 6,000 h, readings no more than 1,000 h apart, none before 1,000 h. A test
// of 20 units or more carries six times its length (the source's own figures), one of 10 to 19 five and a half times
// (from memory).
const (
	leastUnits  = 10
	manyUnits   = 20
	leastTestH  = 6000.0
	greatStepH  = 1000.0
	firstUsedH  = 1000.0
	shortTestH  = 10000.0
	lastWindowH = 5000.0
	manyFactor  = 6.0
	fewFactor   = 5.5
)

// Project fits the readings of a test: mean of the normalised units at each time, the readings of the last 5,000 h (of the
// second half where the test is longer than 10,000 h), a straight line through the logarithms by least squares. It
// fails with ErrTest and the reason where the test is too short, too small or too coarse.
func Project(t Test) (Projection, error) {
	n := len(t.FluxLm)
	if n < leastUnits {
		return Projection{}, fmt.Errorf("%w: %d units, of at least %d", ErrTest, n, leastUnits)
	}
	if len(t.TimesH) < 2 || t.TimesH[0] != 0 {
		return Projection{}, fmt.Errorf("%w: the first reading must be at 0 h", ErrTest)
	}
	mean := make([]float64, len(t.TimesH))
	for u, row := range t.FluxLm {
		if len(row) != len(t.TimesH) {
			return Projection{}, fmt.Errorf("%w: unit %d has %d readings of %d", ErrTest, u+1, len(row), len(t.TimesH))
		}
		for k, v := range row {
			if !(v > 0) || math.IsInf(v, 0) {
				return Projection{}, fmt.Errorf("%w: unit %d reads %g at %g h", ErrTest, u+1, v, t.TimesH[k])
			}
			mean[k] += v / row[0] / float64(n)
		}
	}
	for k := 1; k < len(t.TimesH); k++ {
		if !(t.TimesH[k] > t.TimesH[k-1]) || math.IsInf(t.TimesH[k], 0) {
			return Projection{}, fmt.Errorf("%w: the times do not ascend", ErrTest)
		}
	}
	p := Projection{Units: n, TestH: t.TimesH[len(t.TimesH)-1]}
	if p.TestH < leastTestH {
		return Projection{}, fmt.Errorf("%w: %g h, of at least %g h", ErrTest, p.TestH, leastTestH)
	}
	from := p.TestH - lastWindowH
	if p.TestH > shortTestH {
		from = p.TestH / 2
	}
	first := len(t.TimesH)
	for k := len(t.TimesH) - 1; k >= 0 && t.TimesH[k] >= from; k-- {
		first = k
	}
	if p.TestH > shortTestH && t.TimesH[first] > from && first > 0 {
		first-- // no reading at the half: the one just before it counts too
	}
	for t.TimesH[first] < firstUsedH {
		first++
	}
	var sx, sy float64
	for k := first; k < len(t.TimesH); k++ {
		if k > first && t.TimesH[k]-t.TimesH[k-1] > greatStepH {
			return Projection{}, fmt.Errorf("%w: %g h between the readings at %g h and %g h, of at most %g h", ErrTest,
				t.TimesH[k]-t.TimesH[k-1], t.TimesH[k-1], t.TimesH[k], greatStepH)
		}
		p.UsedH = append(p.UsedH, t.TimesH[k])
		sx += t.TimesH[k]
		sy += math.Log(mean[k])
	}
	m := float64(len(p.UsedH))
	if m < 2 {
		return Projection{}, fmt.Errorf("%w: one reading in the part that counts", ErrTest)
	}
	var sxx, sxy float64
	for k := first; k < len(t.TimesH); k++ {
		dx := t.TimesH[k] - sx/m
		sxx += dx * dx
		sxy += dx * (math.Log(mean[k]) - sy/m)
	}
	p.Alpha = -sxy / sxx
	p.B = math.Exp(sy/m + p.Alpha*sx/m)
	p.CapH = fewFactor * p.TestH
	if n >= manyUnits {
		p.CapH = manyFactor * p.TestH
	}
	for k, v := range mean {
		p.measured = append(p.measured, [2]float64{t.TimesH[k], v})
	}
	return p, nil
}

// Share returns the share of the initial flux at t hours of burning. beyond is true past the cap, where the share is
// that of the cap and the truth may be lower. Before the first reading used, the share is the larger of the fit and a
// straight line from 1 at 0 h, because the fit does not begin at 1.
func (p Projection) Share(tH float64) (share float64, beyond bool) {
	if p.CapH > 0 && tH > p.CapH {
		tH, beyond = p.CapH, true
	}
	share = p.B * math.Exp(-p.Alpha*tH)
	if tH < firstUsedH {
		at := p.B * math.Exp(-p.Alpha*firstUsedH)
		share = math.Max(share, 1+(at-1)*tH/firstUsedH)
	}
	return share, beyond
}

// Life is when the flux falls to a level. Hours is nil where it does not within the cap.
type Life struct {
	LevelPercent float64
	Hours        *float64
	Measured     bool    // the crossing was seen during the test
	CapH         float64 // h
	Text         string  // as the method writes it: L70(6k) > 36,000 h
}

// Life returns the hours at which percent of the initial flux are left, to three figures in Text.
func (p Projection) Life(percent float64) (Life, error) {
	if !(percent > 0 && percent < 100) {
		return Life{}, ErrLevel
	}
	l := Life{LevelPercent: percent, CapH: p.CapH}
	name := fmt.Sprintf("L%g(%gk)", percent, math.Round(p.TestH/1000))
	for k := 1; k < len(p.measured); k++ {
		a, b := p.measured[k-1], p.measured[k]
		if level := percent / 100; a[1] > level && b[1] <= level {
			h := a[0] + (a[1]-level)/(a[1]-b[1])*(b[0]-a[0])
			l.Hours, l.Measured = &h, true
			l.Text = name + " = " + figures(h) + " h, measured"
			return l, nil
		}
	}
	if p.Alpha > 0 {
		if h := math.Log(p.B/(percent/100)) / p.Alpha; h <= p.CapH && h > 0 {
			l.Hours = &h
			l.Text = name + " = " + figures(h) + " h"
			return l, nil
		}
	}
	l.Text = name + " > " + grouped(p.CapH) + " h"
	return l, nil
}

// uncapped is the crossing of the fit itself, for comparison with printed figures.
func (p Projection) uncapped(percent float64) float64 { return math.Log(p.B/(percent/100)) / p.Alpha }

// figures writes three significant figures with thousands separated.
func figures(x float64) string {
	if x <= 0 {
		return "0"
	}
	step := math.Pow(10, math.Floor(math.Log10(x))-2)
	return grouped(math.Round(x/step) * step)
}

func grouped(x float64) string {
	s := fmt.Sprintf("%.0f", x)
	for k := len(s) - 3; k > 0; k -= 3 {
		s = s[:k] + "," + s[k:]
	}
	return s
}

const zeroC = 273.15

// At returns the projection for a case temperature between two tested ones at the same current, after Arrhenius. Below
// the lower it is the lower's, above the higher it fails with ErrOutside. Where one of both does not fall the hotter's is taken,
// which is the cautious choice. The cap is that of the shorter test.
func At(caseTempC float64, cool, hot Projection, coolC, hotC float64) (Projection, error) {
	if coolC > hotC {
		cool, hot, coolC, hotC = hot, cool, hotC, coolC
	}
	switch {
	case math.IsNaN(caseTempC) || caseTempC <= -zeroC || coolC == hotC:
		return Projection{}, fmt.Errorf("%w: two different case temperatures are needed", ErrTest)
	case caseTempC > hotC:
		return Projection{}, ErrOutside
	case caseTempC <= coolC:
		return cool, nil
	case caseTempC == hotC:
		return hot, nil
	case cool.Alpha <= 0 || hot.Alpha <= 0:
		return hot, nil
	}
	e := activation(cool.Alpha, hot.Alpha, coolC, hotC)
	a := cool.Alpha * math.Exp(e/(coolC+zeroC))
	out := Projection{
		Alpha: a * math.Exp(-e/(caseTempC+zeroC)),
		B:     math.Sqrt(cool.B * hot.B),
		Units: min(cool.Units, hot.Units),
		TestH: math.Min(cool.TestH, hot.TestH),
		CapH:  math.Min(cool.CapH, hot.CapH),
	}
	return out, nil
}

// activation returns the activation energy over Boltzmann's constant, K.
func activation(a1, a2, t1C, t2C float64) float64 {
	return (math.Log(a1) - math.Log(a2)) / (1/(t2C+zeroC) - 1/(t1C+zeroC))
}

// Declared is the projection that a declared life Lx at hours stands for, with exponential decay from 1 at 0 h (an
// assumption, from memory). It has no cap of its own; capH gives one, 0 none.
func Declared(percent, hours, capH float64) (Projection, error) {
	if !(percent > 0 && percent < 100) {
		return Projection{}, ErrLevel
	}
	if !(hours > 0) || math.IsInf(hours, 0) || math.IsNaN(capH) || capH < 0 {
		return Projection{}, fmt.Errorf("%w: a declared life must be a number of hours above 0", ErrTest)
	}
	return Projection{Alpha: -math.Log(percent/100) / hours, B: 1, CapH: capH}, nil
}

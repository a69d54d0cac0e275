package economics

import (
	"errors"
	"fmt"
	"math"

	"lampward/calc/loading"
)

// ErrInput is a number that cannot be: not finite, negative, or out of its range. It is wrapped with the name.
var ErrInput = errors.New("a number is out of range")

// Retrofit is a change of lamps or gear, as a case to be judged. A nil field is not known.
type Retrofit struct {
	Count        int      // places changed
	OldW, NewW   *float64 // input power of one with its gear, W
	HoursPerYear *float64 // of burning
	EnergyRate   *float64 // per kWh
	DemandRate   *float64 // per kW and month
	Coincidence  *float64 // share of the power that counts at the peak, 0 to 1
	OldLifeH     *float64
	NewLifeH     *float64
	OldLampCost  *float64 // with disposal
	NewLampCost  *float64
	LabourCost   *float64 // of one change, spot
	Outlay       *float64 // what the change costs at its start
	Discount     *float64 // per year, e.g. 0.06
	Years        int      // of the study
	EmissionKg   *float64 // kg of CO2 a kWh
}

// Case is what a retrofit gives. A nil field could not be worked out; Missing says for want of what.
type Case struct {
	SavedKW            *float64
	SavedKWhPerYear    *float64
	EnergyPerYear      *float64 // money
	DemandPerYear      *float64
	MaintenancePerYear *float64
	SavingPerYear      *float64
	CO2KgPerYear       *float64
	PaybackY           *float64 // simple
	PaybackEnergyY     *float64 // of energy alone
	UPV                *float64 // uniform present value factor
	NPV                *float64
	SIR                *float64 // savings-to-investment ratio
	Missing            []string
	Steps              []loading.Step
}

const (
	basisNIST = "NIST Handbook 135, life-cycle costing"
	// longestLEDYears caps what a stated LED life may promise, whatever its hours.
	longestLEDYears = 15.0
)

// Judge works out energy, demand, maintenance, simple payback, net present value and savings-to-investment ratio. Prices
// do not rise and heat and cooling are not changed: both are outside. It fails with ErrInput.
func (r Retrofit) Judge() (Case, error) {
	if err := r.check(); err != nil {
		return Case{}, err
	}
	var c Case
	n := float64(r.Count)
	need := func(name string, v *float64) bool {
		if v == nil {
			for _, m := range c.Missing {
				if m == name {
					return false
				}
			}
			c.Missing = append(c.Missing, name)
		}
		return v != nil
	}
	step := func(what, format string, a ...any) {
		c.Steps = append(c.Steps, loading.Step{What: what, Sum: fmt.Sprintf(format, a...), Basis: basisNIST})
	}
	if both(need("power before", r.OldW), need("power after", r.NewW)) {
		kw := n * (*r.OldW - *r.NewW) / 1000
		c.SavedKW = &kw
		step("power saved", "%d x (%.4g W - %.4g W) / 1000 = %.4g kW", r.Count, *r.OldW, *r.NewW, kw)
		if need("hours a year", r.HoursPerYear) {
			kwh := kw * *r.HoursPerYear
			c.SavedKWhPerYear = &kwh
			step("energy saved", "%.4g kW x %.5g h = %.6g kWh a year", kw, *r.HoursPerYear, kwh)
			if need("price of energy", r.EnergyRate) {
				c.EnergyPerYear = ptr(kwh * *r.EnergyRate)
				step("worth of energy", "%.6g kWh x %.4g = %.2f a year", kwh, *r.EnergyRate, *c.EnergyPerYear)
			}
			if r.EmissionKg != nil {
				c.CO2KgPerYear = ptr(kwh * *r.EmissionKg)
			}
		}
		if r.DemandRate != nil && need("coincidence", r.Coincidence) {
			c.DemandPerYear = ptr(kw * *r.DemandRate * 12 * *r.Coincidence)
			step("worth of demand", "%.4g kW x %.4g x 12 x %.3g = %.2f a year", kw, *r.DemandRate, *r.Coincidence, *c.DemandPerYear)
		}
	}
	c.MaintenancePerYear = r.maintenance(need, step)
	if c.EnergyPerYear == nil || c.MaintenancePerYear == nil {
		return c, nil
	}
	saving := *c.EnergyPerYear + *c.MaintenancePerYear
	if c.DemandPerYear != nil {
		saving += *c.DemandPerYear
	}
	c.SavingPerYear = &saving
	if !need("outlay", r.Outlay) {
		return c, nil
	}
	if saving > 0 {
		c.PaybackY = ptr(*r.Outlay / saving)
		step("simple payback", "%.2f / %.2f = %.3f years", *r.Outlay, saving, *c.PaybackY)
	}
	if *c.EnergyPerYear > 0 {
		c.PaybackEnergyY = ptr(*r.Outlay / *c.EnergyPerYear)
	}
	if r.Years > 0 && need("discount rate", r.Discount) {
		upv := UPV(*r.Discount, r.Years)
		c.UPV = &upv
		c.NPV = ptr(-*r.Outlay + saving*upv)
		step("net present value", "-%.2f + %.2f x %.5f = %.2f over %d years", *r.Outlay, saving, upv, *c.NPV, r.Years)
		if *r.Outlay > 0 {
			c.SIR = ptr(saving * upv / *r.Outlay)
		}
	}
	return c, nil
}

func both(a, b bool) bool { return a && b }

func ptr(x float64) *float64 { return &x }

// maintenance is what lamp changes cost a year before less after.
func (r Retrofit) maintenance(need func(string, *float64) bool, step func(string, string, ...any)) *float64 {
	known := true
	for _, v := range []struct {
		name string
		v    *float64
	}{{"hours a year", r.HoursPerYear}, {"life before", r.OldLifeH}, {"life after", r.NewLifeH}, {"lamp price before", r.OldLampCost},
		{"lamp price after", r.NewLampCost}, {"labour of a change", r.LabourCost}} {
		known = need(v.name, v.v) && known
	}
	if !known {
		return nil
	}
	n := float64(r.Count)
	rate := func(lifeH, lamp float64) float64 { return n * *r.HoursPerYear / lifeH * (lamp + *r.LabourCost) }
	newLife := *r.NewLifeH
	if *r.HoursPerYear > 0 {
		newLife = math.Min(newLife, longestLEDYears**r.HoursPerYear)
	}
	before, after := rate(*r.OldLifeH, *r.OldLampCost), rate(newLife, *r.NewLampCost)
	saved := before - after
	step("lamp changes saved", "%d x %.5g h x ((%.4g + %.4g) / %.5g h - (%.4g + %.4g) / %.5g h) = %.2f - %.2f = %.2f a year",
		r.Count, *r.HoursPerYear, *r.OldLampCost, *r.LabourCost, *r.OldLifeH, *r.NewLampCost, *r.LabourCost, newLife, before, after, saved)
	return &saved
}

func (r Retrofit) check() error {
	if r.Count < 1 || r.Years < 0 || r.Years > 100 {
		return fmt.Errorf("%w: at least one place, and a study of at most 100 years", ErrInput)
	}
	for _, v := range []struct {
		name  string
		v     *float64
		above bool // must be above 0
		most  float64
	}{{"power before", r.OldW, false, 1e6}, {"power after", r.NewW, false, 1e6}, {"hours a year", r.HoursPerYear, false, 8784},
		{"price of energy", r.EnergyRate, false, 1e6}, {"demand rate", r.DemandRate, false, 1e9}, {"coincidence", r.Coincidence, false, 1},
		{"life before", r.OldLifeH, true, 1e7}, {"life after", r.NewLifeH, true, 1e7}, {"lamp price before", r.OldLampCost, false, 1e9},
		{"lamp price after", r.NewLampCost, false, 1e9}, {"labour of a change", r.LabourCost, false, 1e9}, {"outlay", r.Outlay, false, 1e12},
		{"discount rate", r.Discount, false, 1}, {"emission factor", r.EmissionKg, false, 100}} {
		if v.v != nil && (!(*v.v >= 0 && *v.v <= v.most) || v.above && *v.v == 0) {
			return fmt.Errorf("%w: %s is %g", ErrInput, v.name, *v.v)
		}
	}
	return nil
}

// UPV is the present value of 1 at the end of each of n years at a discount rate per year.
func UPV(rate float64, years int) float64 {
	if rate == 0 {
		return float64(years)
	}
	return -math.Expm1(-float64(years)*math.Log1p(rate)) / rate
}

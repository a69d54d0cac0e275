package site

import (
	"context"
	"strings"

	"lampward/domain"
)

// Rates a building may have.
const (
	EnergyRate   = "energy_per_kwh"
	DemandRate   = "demand_per_kw_month"
	LabourRate   = "labour_per_h"
	TravelRate   = "travel_per_visit"
	LiftDayRate  = "lift_per_day"
	DisposalRate = "disposal_per_lamp"
	DiscountRate = "discount_pct_per_year"
	CO2Rate      = "co2_kg_per_kwh"
)

var rates = []string{EnergyRate, DemandRate, LabourRate, TravelRate, LiftDayRate, DisposalRate, DiscountRate, CO2Rate}

// A Rate is what something costs in a building from a date on.
type Rate struct {
	domain.Row
	Rate     string         `json:"rate"`
	FromDate domain.Date    `json:"from_date"`
	Amount   domain.Decimal `json:"amount"`
	Currency string         `json:"currency,omitempty"` // ISO 4217; absent for discount and CO2
	Source   string         `json:"source,omitempty"`
}

// Rates is the table of rates.
var Rates = domain.NewTable[Rate]("building_rate", "rate")

// Validate reports every field of r that breaks a rule.
func (r *Rate) Validate() error {
	c := domain.NewCheck("rate")
	c.OneOf("/rate", r.Rate, rates...)
	if r.Rate == "" {
		c.Add("/rate", "must be one of %s", strings.Join(rates, ", "))
	}
	c.Date("/from_date", &r.FromDate)
	if !r.Amount.Valid() || strings.HasPrefix(string(r.Amount), "-") {
		c.Add("/amount", "must be a decimal of at least 0 with at most ten digits and four places")
	}
	if r.Rate == DiscountRate || r.Rate == CO2Rate {
		if r.Currency != "" {
			c.Add("/currency", "must be absent for this rate")
		}
	} else {
		for _, f := range (domain.Money{Amount: "0", Currency: r.Currency}).Check("") {
			c.Add(f.Pointer, "%s", f.Detail)
		}
	}
	c.Line("/source", r.Source, false)
	return c.Err()
}

// RateOn returns the amount of a rate on a day and its currency, the first by code where several began on one day; ok is
// false where none is on record.
func RateOn(ctx context.Context, s domain.Scope, rate string, day domain.Date) (r Rate, ok bool, err error) {
	list, err := Rates.Select(ctx, s, `
		WHERE building_id = $1 AND rate = $2 AND from_date <= $3 AND retired_at IS NULL
		ORDER BY from_date DESC, currency
		LIMIT 1`, s.Building, rate, day)
	if err != nil || len(list) == 0 {
		return r, false, err
	}
	return list[0], true, nil
}

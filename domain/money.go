package domain

import (
	"math/big"
	"regexp"
)

// Money is an exact amount in one currency. Nothing is ever converted.
type Money struct {
	Amount   string `json:"amount"`   // decimal, at most four places
	Currency string `json:"currency"` // ISO 4217
}

var (
	amountForm   = regexp.MustCompile(`^-?[0-9]{1,10}(\.[0-9]{1,4})?$`)
	currencyForm = regexp.MustCompile(`^[A-Z]{3}$`)
)

// Check returns the fields of m that are wrong, as pointers below at.
func (m Money) Check(at string) []Field {
	var bad []Field
	if !amountForm.MatchString(m.Amount) {
		bad = append(bad, Field{at + "/amount", "must be a decimal with at most ten digits and four places, e.g. 4.50"})
	}
	if !currencyForm.MatchString(m.Currency) {
		bad = append(bad, Field{at + "/currency", "must be three capital letters of ISO 4217, e.g. EUR"})
	}
	return bad
}

// Rat returns the amount as an exact fraction; ok is false where it is not a decimal.
func (m Money) Rat() (r *big.Rat, ok bool) {
	if !amountForm.MatchString(m.Amount) { // SetString reads 1/3 and 1e9 too
		return nil, false
	}
	return new(big.Rat).SetString(m.Amount)
}

package domain

import (
	"encoding/json"
	"strings"

	"github.com/jackc/pgx/v5/pgtype"
)

// Decimal is an exact decimal number as written, at most ten digits and four places.
type Decimal string

// Valid reports whether d is such a number.
func (d Decimal) Valid() bool { return amountForm.MatchString(string(d)) }

// plain returns d as it reads back from the database: with as many places as it needs, two at least, no zeros in front
// and no sign before 0, so that 4.5, 04.50 and 4.5000 are all 4.50. What is no decimal stays.
func (d Decimal) plain() Decimal {
	if !d.Valid() {
		return d
	}
	digits, negative := strings.CutPrefix(string(d), "-")
	whole, places, _ := strings.Cut(digits, ".")
	if whole = strings.TrimLeft(whole, "0"); whole == "" {
		whole = "0"
	}
	places = strings.TrimRight(places, "0")
	for len(places) < 2 {
		places += "0"
	}
	if negative && strings.Trim(whole+places, "0") != "" {
		whole = "-" + whole
	}
	return Decimal(whole + "." + places)
}

// UnmarshalJSON reads a decimal from a JSON string.
func (d *Decimal) UnmarshalJSON(data []byte) error {
	var s string
	if err := json.Unmarshal(data, &s); err != nil {
		return err
	}
	*d = Decimal(s).plain()
	return nil
}

// NumericValue lets pgx write a Decimal.
func (d Decimal) NumericValue() (pgtype.Numeric, error) {
	var n pgtype.Numeric
	if !d.Valid() {
		return n, Invalidf("%q is not a decimal such as 4.50", string(d))
	}
	return n, n.Scan(string(d))
}

// ScanNumeric lets pgx read a Decimal; NULL reads as the empty Decimal.
func (d *Decimal) ScanNumeric(n pgtype.Numeric) error {
	*d = ""
	if !n.Valid {
		return nil
	}
	v, err := n.Value()
	if err != nil {
		return err
	}
	*d = Decimal(v.(string)).plain()
	return nil
}

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

// plain returns d with as many places as it needs, two at least, no zeros in front and no sign of nothing: 4.5 and 04.5000
// are both 4.50. What is no decimal stays.
func (d Decimal) plain() Decimal {
	if !d.Valid() {
		return d
	}
	whole, places, _ := strings.Cut(string(d), ".")
	places = strings.TrimRight(places, "0")
	for len(places) < 2 {
		places += "0"
	}
	digits, minus := strings.CutPrefix(whole, "-")
	if digits = strings.TrimLeft(digits, "0"); digits == "" {
		digits = "0"
	}
	if minus && digits+places != "000" {
		digits = "-" + digits
	}
	return Decimal(digits + "." + places)
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

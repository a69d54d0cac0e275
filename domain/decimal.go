package domain

import "github.com/jackc/pgx/v5/pgtype"

// Decimal is an exact decimal number as written, at most ten digits and four places.
type Decimal string

// Valid reports whether d is such a number.
func (d Decimal) Valid() bool { return amountForm.MatchString(string(d)) }

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
	*d = Decimal(v.(string))
	return nil
}

package domain

import (
	"time"

	"github.com/jackc/pgx/v5/pgtype"
)

// Date is a day of a building's own calendar, YYYY-MM-DD (RFC 3339 full-date).
type Date string

// Valid reports whether d is a day of the calendar.
func (d Date) Valid() bool {
	_, err := time.Parse(time.DateOnly, string(d))
	return err == nil
}

// DateOf returns the day of t in its location.
func DateOf(t time.Time) Date { return Date(t.Format(time.DateOnly)) }

// DateValue lets pgx write a Date.
func (d Date) DateValue() (pgtype.Date, error) {
	t, err := time.Parse(time.DateOnly, string(d))
	if err != nil {
		return pgtype.Date{}, Invalidf("%q is not a date such as 2026-03-31", string(d))
	}
	return pgtype.Date{Time: t, Valid: true}, nil
}

// ScanDate lets pgx read a Date; NULL reads as the empty Date.
func (d *Date) ScanDate(v pgtype.Date) error {
	*d = ""
	if v.Valid {
		*d = DateOf(v.Time)
	}
	return nil
}

// Date wants v absent or a day of the calendar in the years 1900 to 2199.
func (c *Check) Date(pointer string, v *Date) {
	if v == nil {
		return
	}
	day, err := time.Parse(time.DateOnly, string(*v))
	if err != nil {
		c.Add(pointer, "must be a date such as 2026-03-31")
		return
	}
	c.Time(pointer, &day)
}

package domain

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Check gathers every field of a record that breaks a rule, so that a person sees them all at once.
type Check struct {
	what string
	bad  []Field
	at   string
}

// NewCheck starts the check of one record, called what in the message.
func NewCheck(what string) *Check { return &Check{what: what} }

// Under returns a check whose pointers lie below at; its findings are c's.
func (c *Check) Under(at string, f func(*Check)) {
	before := c.at
	c.at += at
	f(c)
	c.at = before
}

// Add notes a field that breaks a rule.
func (c *Check) Add(pointer, format string, a ...any) {
	c.bad = append(c.bad, Field{c.at + pointer, fmt.Sprintf(format, a...)})
}

// Err returns an Invalid error with every field, or nil.
func (c *Check) Err() error {
	if c.bad == nil {
		return nil
	}
	slices.SortStableFunc(c.bad, func(a, b Field) int { return strings.Compare(a.Pointer, b.Pointer) })
	return &Error{Kind: Invalid, Msg: "the " + c.what + " is not valid", Fields: c.bad}
}

// Range wants v absent or from low to high in unit, and a number.
func (c *Check) Range(pointer string, v *float64, low, high float64, unit string) {
	if v != nil && (math.IsNaN(*v) || *v < low || *v > high) {
		c.Add(pointer, "must be from %s to %s %s", plain(low), plain(high), unit)
	}
}

// Count wants v absent or from low to high.
func (c *Check) Count(pointer string, v *int, low, high int) {
	if v != nil && (*v < low || *v > high) {
		c.Add(pointer, "must be from %d to %d", low, high)
	}
}

// OneOf wants v absent or one of the words.
func (c *Check) OneOf(pointer, v string, words ...string) {
	if v != "" && !slices.Contains(words, v) {
		c.Add(pointer, "must be one of %s", strings.Join(words, ", "))
	}
}

// Source wants v absent or a source of a fact.
func (c *Check) Source(pointer, v string) {
	c.OneOf(pointer, v, "seen_on_nameplate", "data_sheet", "drawing", "handed_over", "said_by_person", "assumed")
}

// MaxLine is the longest line of text, in characters; MaxText the longest note.
const (
	MaxLine = 200
	MaxText = 4000
)

// Line wants one line of text a person can read.
func (c *Check) Line(pointer, v string, required bool) {
	if required && strings.TrimSpace(v) == "" {
		c.Add(pointer, "must not be empty")
		return
	}
	c.readable(pointer, v, MaxLine, "")
}

// Text wants text that may run over several lines.
func (c *Check) Text(pointer, v string) { c.readable(pointer, v, MaxText, "\n\t") }

var codeForm = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9._/-]{0,39}$`)

// Code wants a short code without spaces.
func (c *Check) Code(pointer, v string) {
	if !codeForm.MatchString(v) {
		c.Add(pointer, "must be 1 to 40 letters, digits and . _ / - without spaces")
	}
}

func (c *Check) readable(pointer, v string, most int, allowed string) {
	switch {
	case !utf8.ValidString(v):
		c.Add(pointer, "must be UTF-8 text")
	case utf8.RuneCountInString(v) > most:
		c.Add(pointer, "must be at most %d characters", most)
	case strings.ContainsFunc(v, func(r rune) bool {
		return (unicode.IsControl(r) && !strings.ContainsRune(allowed, r)) || steers(r)
	}):
		c.Add(pointer, "must not hold control characters or marks that turn the direction of text")
	case v != strings.TrimSpace(v):
		c.Add(pointer, "must not begin or end with a blank")
	}
}

// steers reports whether r overrides the direction of text: such marks make a label read as another one.
func steers(r rune) bool {
	return r >= 0x202A && r <= 0x202E || r >= 0x2066 && r <= 0x2069 || r == 0x200E || r == 0x200F || r == 0x061C
}

func plain(v float64) string {
	if v == math.Trunc(v) && math.Abs(v) < 1e15 {
		return fmt.Sprintf("%.0f", v)
	}
	return fmt.Sprintf("%g", v)
}

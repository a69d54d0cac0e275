package domain

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strings"
	"time"
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
		c.Add(pointer, "%s", strings.TrimSpace(fmt.Sprintf("must be from %s to %s %s", plain(low), plain(high), unit)))
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

// Text wants text that may run over several lines. It may hold the two joiners that some scripts are written with.
func (c *Check) Text(pointer, v string) { c.readable(pointer, v, MaxText, "\n\t\u200c\u200d") }

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
	case strings.ContainsFunc(v, func(r rune) bool { return unseen(r) && !strings.ContainsRune(allowed, r) }):
		c.Add(pointer, "must not hold control characters, characters without width or marks that turn the direction of text")
	case v != strings.TrimSpace(v):
		c.Add(pointer, "must not begin or end with a blank")
	}
}

// unseen reports whether r cannot be seen: a control, a separator of lines, a character without width, or a mark that
// turns the direction of text (Unicode categories Cc, Cf, Zl, Zp). With such a character two labels look the same and
// are not, or one reads as another.
func unseen(r rune) bool { return unicode.In(r, unicode.Cc, unicode.Cf, unicode.Zl, unicode.Zp) }

// Times that a record may hold. What lies outside is a slip of the pen, and one beyond the year 9999 could be stored
// but never be written as JSON again.
var (
	earliest = time.Date(1900, 1, 1, 0, 0, 0, 0, time.UTC)
	latest   = time.Date(2200, 1, 1, 0, 0, 0, 0, time.UTC)
)

// Time wants v absent or in the years 1900 to 2199.
func (c *Check) Time(pointer string, v *time.Time) {
	if v != nil && (v.Before(earliest) || !v.Before(latest)) {
		c.Add(pointer, "must lie in the years 1900 to 2199")
	}
}

// MostItems is the longest list within one record.
const MostItems = 100

// Items wants a list of n items that is not too long.
func (c *Check) Items(pointer string, n int) {
	if n > MostItems {
		c.Add(pointer, "must hold at most %d items", MostItems)
	}
}

func plain(v float64) string {
	if v == math.Trunc(v) && math.Abs(v) < 1e15 {
		return fmt.Sprintf("%.0f", v)
	}
	return fmt.Sprintf("%g", v)
}

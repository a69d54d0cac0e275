package site

import "lampward/domain"

// A SpaceUse says how long the lights of a use burn and how much light it needs, with the source of both.
type SpaceUse struct {
	domain.CatalogueRow
	Use         string   `json:"use"` // unique
	YearlyHours *float64 `json:"yearly_hours,omitempty"`
	RequiredLX  *float64 `json:"required_lx,omitempty"`
	Source      string   `json:"source,omitempty"`
}

// SpaceUses is the table of uses.
var SpaceUses = domain.NewTable[SpaceUse]("space_use", "use of a space")

// Validate reports every field of u that breaks a rule.
func (u *SpaceUse) Validate() error {
	c := domain.NewCheck("use of a space")
	c.Line("/use", u.Use, true)
	c.Range("/yearly_hours", u.YearlyHours, 0, 8784, "h")
	c.Range("/required_lx", u.RequiredLX, 0, 200000, "lx")
	c.Line("/source", u.Source, false)
	return c.Err()
}

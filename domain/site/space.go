package site

import (
	"context"
	"fmt"

	"lampward/domain"
)

// A Space is a room or an outdoor area: what is done there, how high the lamps hang, what it takes to reach them.
type Space struct {
	domain.Row
	Level          string   `json:"level"` // storey as the building names it
	Name           string   `json:"name"`  // unique on its level
	Use            string   `json:"use,omitempty"`
	AreaM2         *float64 `json:"area_m2,omitempty"`
	MountingM      *float64 `json:"mounting_m,omitempty"`      // height of the luminaires above the floor, m
	Reach          string   `json:"reach,omitempty"`           // floor, steps, tower, lift, rope
	Ceiling        string   `json:"ceiling,omitempty"`         // open, tiles, plaster, metal, none
	Beneath        string   `json:"beneath,omitempty"`         // what is under the luminaires
	Occupier       string   `json:"occupier,omitempty"`        //
	Contact        string   `json:"contact,omitempty"`         // whom to ask
	Notice         string   `json:"notice,omitempty"`          // notice to give
	HoursAllowed   string   `json:"hours_allowed,omitempty"`   // when work may be done
	Escort         *bool    `json:"escort,omitempty"`          //
	Asbestos       string   `json:"asbestos,omitempty"`        // clear, presumed, present, not_surveyed
	Permits        []string `json:"permits,omitzero"`          // permits to ask for; empty: none needed
	InitialLX      *float64 `json:"initial_lx,omitempty"`      // illuminance when new, lx
	RequiredLX     *float64 `json:"required_lx,omitempty"`     // maintained illuminance required, lx
	Cleanliness    string   `json:"cleanliness,omitempty"`     // clean, normal, dirty
	CleaningMonths *float64 `json:"cleaning_months,omitempty"` // interval, months
	YearlyHours    *float64 `json:"yearly_hours,omitempty"`    // burning hours a year where nothing counts them
	SurveyState    string   `json:"survey_state,omitempty"`    // not_started, partial, done
	ExternalID     string   `json:"external_id,omitempty"`     // identifier in the file it came from
	FactSource     string   `json:"fact_source,omitempty"`
	Note           string   `json:"note,omitempty"`
}

// Spaces is the table of spaces. Writes go through plant.Edit: hours and zones change what a review finds.
var Spaces = domain.NewTable[Space]("space", "space")

// Validate reports every field of p that breaks a rule.
func (p *Space) Validate() error {
	c := domain.NewCheck("space")
	c.Line("/level", p.Level, false)
	c.Line("/name", p.Name, true)
	for at, v := range map[string]string{"/use": p.Use, "/beneath": p.Beneath, "/occupier": p.Occupier, "/contact": p.Contact,
		"/notice": p.Notice, "/hours_allowed": p.HoursAllowed, "/external_id": p.ExternalID} {
		c.Line(at, v, false)
	}
	c.Text("/note", p.Note)
	c.Range("/area_m2", p.AreaM2, 0, 1e6, "m2")
	c.Range("/mounting_m", p.MountingM, 0, 200, "m")
	c.Range("/initial_lx", p.InitialLX, 0, 200000, "lx")
	c.Range("/required_lx", p.RequiredLX, 0, 200000, "lx")
	c.Range("/cleaning_months", p.CleaningMonths, 0, 600, "months")
	c.Range("/yearly_hours", p.YearlyHours, 0, 8784, "h")
	c.OneOf("/reach", p.Reach, "floor", "steps", "tower", "lift", "rope")
	c.OneOf("/ceiling", p.Ceiling, "open", "tiles", "plaster", "metal", "none")
	c.OneOf("/asbestos", p.Asbestos, "clear", "presumed", "present", "not_surveyed")
	c.OneOf("/cleanliness", p.Cleanliness, "clean", "normal", "dirty")
	c.OneOf("/survey_state", p.SurveyState, "not_started", "partial", "done")
	c.Source("/fact_source", p.FactSource)
	c.Items("/permits", len(p.Permits))
	for i, permit := range p.Permits {
		c.Line(fmt.Sprintf("/permits/%d", i), permit, true)
	}
	return c.Err()
}

// GetSpace returns the space with the given id.
func GetSpace(ctx context.Context, s domain.Scope, id domain.ID) (Space, error) {
	return Spaces.Get(ctx, s, id)
}

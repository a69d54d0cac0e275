package review

import (
	"time"

	"lampward/domain"
)

// A Waiver says that somebody knows of a finding and lets it be, why and until when. It is in effect while the finding
// rests on the same inputs and its date has not passed; of an older rule set it waits to be confirmed.
type Waiver struct {
	domain.Row
	Rule        string      `json:"rule"`
	RuleSet     int         `json:"rule_set"`
	SubjectKind string      `json:"subject_kind"`
	SubjectID   domain.ID   `json:"subject_id"`
	InputHash   []byte      `json:"-" db:"input_hash"`
	Why         string      `json:"why"`
	Until       domain.Date `json:"until"` // last day, in the building's time zone
	ByKind      string      `json:"by_kind"`
	ByID        domain.ID   `json:"by_id"`

	InEffect bool `json:"in_effect" db:"-"`
	Confirm  bool `json:"confirm" db:"-"` // made under an older rule set
}

// Waivers is the table of waivers.
var Waivers = domain.NewTable[Waiver]("waiver", "waiver")

// covers reports whether w lets f be on the given day.
func (w *Waiver) covers(f *Finding, day domain.Date) bool {
	return w.RetiredAt == nil && w.Rule == f.Rule && w.SubjectID == f.SubjectID && string(w.InputHash) == string(f.InputHash) &&
		day <= w.Until && w.RuleSet >= f.RuleSet
}

// today returns the day it is in a building's time zone.
func today(zone string, at time.Time) domain.Date {
	loc, err := time.LoadLocation(zone)
	if err != nil {
		loc = time.UTC
	}
	return domain.DateOf(at.In(loc))
}

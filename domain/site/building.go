// Package site holds the buildings and their spaces: where the lighting is, who may reach it and when.
package site

import (
	"context"
	"reflect"
	"time"

	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/event"
)

// A Building is one site with its own mains, wiring rules and time zone. Everything else belongs to one building.
type Building struct {
	domain.CatalogueRow
	Code          string `json:"code"` // unique, short, as on the drawings
	Name          string `json:"name"`
	Address       string `json:"address,omitempty"`
	TimeZone      string `json:"time_zone"` // IANA name; days and months are the building's own
	WiringEdition string `json:"wiring_edition,omitempty"`
	Cleanliness   string `json:"cleanliness,omitempty"` // clean, normal, dirty: where a space says nothing
	Note          string `json:"note,omitempty"`
	loading.Supply
}

// Buildings is the table of buildings.
var Buildings = domain.NewTable[Building]("building", "building")

// Validate reports every field of b that breaks a rule.
func (b *Building) Validate() error {
	c := domain.NewCheck("building")
	c.Code("/code", b.Code)
	c.Line("/name", b.Name, true)
	c.Text("/address", b.Address)
	c.Text("/note", b.Note)
	c.Line("/wiring_edition", b.WiringEdition, false)
	if _, err := time.LoadLocation(b.TimeZone); err != nil || b.TimeZone == "" || b.TimeZone == "Local" {
		c.Add("/time_zone", "must be an IANA time zone, e.g. Europe/Dublin")
	}
	c.Range("/mains_v", b.MainsV, 50, 1000, "V")
	c.Range("/mains_hz", b.MainsHz, 16, 400, "Hz")
	c.OneOf("/wiring_rules", b.WiringRules, loading.IEC60364, loading.NFPA70, loading.OtherRules)
	c.OneOf("/cleanliness", b.Cleanliness, "clean", "normal", "dirty")
	return c.Err()
}

// GetBuilding returns the building with the given id.
func GetBuilding(ctx context.Context, s domain.Scope, id domain.ID) (Building, error) {
	return Buildings.Get(ctx, s, id)
}

// Exists reports whether there is a building with the given id, retired or not.
func Exists(ctx context.Context, db domain.Queryer, id domain.ID) (bool, error) {
	var there bool
	err := db.QueryRow(ctx, `SELECT EXISTS (SELECT FROM building WHERE id = $1)`, id).Scan(&there)
	return there, domain.Classify(err, "building")
}

// BuildingByCode returns the building with the given code, retired or not.
func BuildingByCode(ctx context.Context, s domain.Scope, code string) (Building, error) {
	return Buildings.One(ctx, s, "WHERE code = $1", code)
}

// CreateBuilding stores b with its head; s must be b's own scope. It fails with Conflict where the code is taken.
func CreateBuilding(ctx context.Context, s domain.Scope, b *Building) error {
	if err := b.Validate(); err != nil {
		return err
	}
	b.ID, b.Version, b.CreatedAt, b.UpdatedAt, b.RetiredAt = s.Building, 1, s.At, s.At, nil
	if err := Buildings.Insert(ctx, s, b); err != nil {
		return err
	}
	if err := event.CreateHead(ctx, s); err != nil {
		return err
	}
	event.Record(s, event.Act{Action: "building.created", Kind: "building", ID: b.ID, Body: b})
	return nil
}

// UpdateBuilding stores b if the stored version is still b's. A change of the mains or the wiring rules asks for a
// review of the whole building.
func UpdateBuilding(ctx context.Context, s domain.Scope, b *Building) error {
	if err := b.Validate(); err != nil {
		return err
	}
	before, err := Buildings.Lock(ctx, s, s.Building)
	if err != nil {
		return err
	}
	if before.RetiredAt != nil {
		return domain.Conflictf("the building is retired; restore it first")
	}
	b.ID, b.CreatedAt, b.UpdatedAt, b.RetiredAt = s.Building, before.CreatedAt, s.At, nil
	if err := Buildings.Update(ctx, s, b); err != nil {
		return err
	}
	event.Record(s, event.Act{Action: "building.changed", Kind: "building", ID: b.ID, Body: event.Changed(before, b)})
	if reflect.DeepEqual(before.Supply, b.Supply) {
		return nil
	}
	return event.ReviewDue(ctx, s, event.Due{Building: &s.Building, Why: "building changed"})
}

// RetireBuilding takes the building out of use: it is no longer listed or reviewed. It fails with Conflict while
// places stand in it that are not retired.
func RetireBuilding(ctx context.Context, s domain.Scope, version int64) (Building, error) {
	b, err := Buildings.Lock(ctx, s, s.Building)
	if err != nil {
		return Building{}, err
	}
	// Whoever is putting a place there holds the head until it is committed: then it is counted, or refused.
	if err := event.Hold(ctx, s); err != nil {
		return Building{}, err
	}
	var standing int
	if err := s.QueryRow(ctx, `SELECT count(*) FROM place WHERE building_id = $1 AND retired_at IS NULL`, s.Building).Scan(&standing); err != nil {
		return Building{}, domain.Classify(err, "building")
	}
	if standing > 0 {
		return Building{}, domain.Conflictf("%d places in this building are in use; retire them first", standing)
	}
	return setRetired(ctx, s, b, version, &s.At, "building.retired")
}

// RestoreBuilding takes a retired building back into use.
func RestoreBuilding(ctx context.Context, s domain.Scope, version int64) (Building, error) {
	b, err := Buildings.Lock(ctx, s, s.Building)
	if err != nil {
		return Building{}, err
	}
	return setRetired(ctx, s, b, version, nil, "building.restored")
}

func setRetired(ctx context.Context, s domain.Scope, b Building, version int64, at *time.Time, action string) (Building, error) {
	if (b.RetiredAt == nil) == (at == nil) {
		return Building{}, domain.Conflictf("the building is already in that state")
	}
	b.Version, b.RetiredAt, b.UpdatedAt = version, at, s.At
	if err := Buildings.Update(ctx, s, &b); err != nil {
		return Building{}, err
	}
	event.Record(s, event.Act{Action: action, Kind: "building", ID: b.ID})
	return b, nil
}

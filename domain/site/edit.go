package site

import (
	"context"
	"time"

	"lampward/domain"
	"lampward/domain/event"
)

// CreateRate stores a new rate.
func CreateRate(ctx context.Context, s domain.Scope, r *Rate) error {
	if err := r.Validate(); err != nil {
		return err
	}
	if r.ID.IsZero() {
		r.ID = domain.NewID()
	}
	r.BuildingID, r.Version, r.CreatedAt, r.UpdatedAt, r.RetiredAt = s.Building, 1, s.At, s.At, nil
	if err := Rates.Insert(ctx, s, r); err != nil {
		return err
	}
	event.Record(s, event.Act{Action: "rate.created", Kind: "rate", ID: r.ID, Body: r})
	return nil
}

// UpdateRate stores r if the stored version is still r's.
func UpdateRate(ctx context.Context, s domain.Scope, r *Rate) error {
	if err := r.Validate(); err != nil {
		return err
	}
	before, err := Rates.Lock(ctx, s, r.ID)
	if err != nil {
		return err
	}
	if before.RetiredAt != nil {
		return domain.Conflictf("the rate is retired; restore it first")
	}
	r.BuildingID, r.CreatedAt, r.UpdatedAt, r.RetiredAt = s.Building, before.CreatedAt, s.At, nil
	if err := Rates.Update(ctx, s, r); err != nil {
		return err
	}
	event.Record(s, event.Act{Action: "rate.changed", Kind: "rate", ID: r.ID, Body: event.Changed(before, r)})
	return nil
}

// RetireRate takes a rate out of use.
func RetireRate(ctx context.Context, s domain.Scope, id domain.ID, version int64) (Rate, error) {
	return turnRate(ctx, s, id, version, &s.At, "rate.retired")
}

// RestoreRate takes a retired rate back into use. It fails with Conflict where another took its place.
func RestoreRate(ctx context.Context, s domain.Scope, id domain.ID, version int64) (Rate, error) {
	return turnRate(ctx, s, id, version, nil, "rate.restored")
}

func turnRate(ctx context.Context, s domain.Scope, id domain.ID, version int64, at *time.Time, action string) (Rate, error) {
	r, err := Rates.Lock(ctx, s, id)
	if err != nil {
		return r, err
	}
	if (r.RetiredAt == nil) == (at == nil) {
		return r, domain.Conflictf("the rate is already in that state")
	}
	r.Version, r.RetiredAt, r.UpdatedAt = version, at, s.At
	if err := Rates.Update(ctx, s, &r); err != nil {
		return r, err
	}
	event.Record(s, event.Act{Action: action, Kind: "rate", ID: id})
	return r, nil
}

package access

import (
	"context"
	"net/mail"
	"time"

	"lampward/domain"
	"lampward/domain/event"
)

// Validate reports every field of p that breaks a rule.
func (p *Person) Validate() error {
	c := domain.NewCheck("person")
	c.Line("/name", p.Name, true)
	c.Line("/email", p.Email, false)
	if p.Email != "" {
		if a, err := mail.ParseAddress(p.Email); err != nil || a.Address != p.Email {
			c.Add("/email", "must be an address such as ann@example.org")
		}
	}
	return c.Err()
}

// CreatePerson stores a new person. The audit holds the identifier alone, so that a person can be forgotten.
func CreatePerson(ctx context.Context, s domain.Scope, p *Person) error {
	if err := p.Validate(); err != nil {
		return err
	}
	begin(&p.CatalogueRow, s)
	if err := Persons.Insert(ctx, s, p); err != nil {
		return err
	}
	event.Record(s, event.Act{Action: "person.created", Kind: "person", ID: p.ID, Only: "audit"})
	return nil
}

// UpdatePerson stores p if the stored version is still p's.
func UpdatePerson(ctx context.Context, s domain.Scope, p *Person) error {
	if err := p.Validate(); err != nil {
		return err
	}
	before, err := Persons.Lock(ctx, s, p.ID)
	if err != nil {
		return err
	}
	p.CreatedAt, p.UpdatedAt, p.RetiredAt = before.CreatedAt, s.At, before.RetiredAt
	if err := Persons.Update(ctx, s, p); err != nil {
		return err
	}
	event.Record(s, event.Act{Action: "person.changed", Kind: "person", ID: p.ID, Only: "audit"})
	return nil
}

// RetirePerson ends a person's part in the records; their grants and keys end with them.
func RetirePerson(ctx context.Context, s domain.Scope, id domain.ID, version int64) (Person, error) {
	p, err := turnPerson(ctx, s, id, version, &s.At, "person.retired")
	if err != nil {
		return p, err
	}
	for _, table := range []string{"access_grant", "api_key"} {
		if _, err := s.Exec(ctx, `
			UPDATE `+table+`
			   SET retired_at = $2, updated_at = $2, version = version + 1
			 WHERE person_id = $1 AND retired_at IS NULL`, id, s.At); err != nil {
			return p, domain.Classify(err, "person")
		}
	}
	return p, nil
}

// RestorePerson takes a person back; what they may do must be granted anew.
func RestorePerson(ctx context.Context, s domain.Scope, id domain.ID, version int64) (Person, error) {
	return turnPerson(ctx, s, id, version, nil, "person.restored")
}

func turnPerson(ctx context.Context, s domain.Scope, id domain.ID, version int64, at *time.Time, action string) (Person, error) {
	p, err := Persons.Lock(ctx, s, id)
	if err != nil {
		return p, err
	}
	if (p.RetiredAt == nil) == (at == nil) {
		return p, domain.Conflictf("the person is already in that state")
	}
	p.Version, p.RetiredAt, p.UpdatedAt = version, at, s.At
	if err := Persons.Update(ctx, s, &p); err != nil {
		return p, err
	}
	event.Record(s, event.Act{Action: action, Kind: "person", ID: id, Only: "audit"})
	return p, nil
}

package api

import (
	"net/http"
	"time"

	"lampward/domain"
	"lampward/domain/access"
)

// holders are the operations on people, keys and grants.
func (s *Server) holders() []route {
	persons := &resource[access.Person]{
		One: "person", Many: "persons", Path: "/v1/persons", Scope: estate, Read: administer, Make: administer, Edit: administer,
		Table: access.Persons, Filters: []filter{{Name: "name", Op: "contains"}},
		Create: func(c *call, s domain.Scope, p *access.Person) error { return access.CreatePerson(c.ctx, s, p) },
		Update: func(c *call, s domain.Scope, p *access.Person) error { return access.UpdatePerson(c.ctx, s, p) },
		Retire: func(c *call, s domain.Scope, id domain.ID, version int64) (access.Person, error) {
			return access.RetirePerson(c.ctx, s, id, version)
		},
		Restore: func(c *call, s domain.Scope, id domain.ID, version int64) (access.Person, error) {
			return access.RestorePerson(c.ctx, s, id, version)
		},
	}
	keys := &resource[access.Key]{
		One: "key", Many: "keys", Path: "/v1/keys", Scope: estate, Read: administer, Make: administer, Edit: administer,
		Table: access.Keys, Filters: []filter{{Name: "person_id", Kind: idFilter}},
	}
	grants := &resource[access.Grant]{
		One: "grant", Many: "grants", Path: "/v1/grants", Scope: estate, Read: administer, Make: administer, Edit: administer,
		Table:   access.Grants,
		Filters: []filter{{Name: "person_id", Kind: idFilter}, {Name: "api_key_id", Kind: idFilter}, {Name: "building_id", Kind: idFilter}},
		Create:  func(c *call, s domain.Scope, g *access.Grant) error { return access.CreateGrant(c.ctx, s, g) },
	}
	out := append(persons.routes(), keys.routes()...)
	out = append(out, grants.routes()...)
	return append(out,
		route{Method: http.MethodPost, Path: "/v1/keys", Op: "createKey", Right: administer, Scope: estate, Takes: []string{jsonMedia}, Secret: true, Handle: s.createKey},
		route{Method: http.MethodPost, Path: "/v1/keys/{key_id}/withdraw", Op: "withdrawKey", Right: administer, Scope: estate,
			Handle: func(c *call) (reply, error) {
				return withdraw(c, keys, func(s domain.Scope, id domain.ID, version int64) (access.Key, error) {
					return access.RevokeKey(c.ctx, s, id, version)
				})
			}},
		route{Method: http.MethodPost, Path: "/v1/grants/{grant_id}/withdraw", Op: "withdrawGrant", Right: administer, Scope: estate,
			Handle: func(c *call) (reply, error) {
				return withdraw(c, grants, func(s domain.Scope, id domain.ID, version int64) (access.Grant, error) {
					return access.RevokeGrant(c.ctx, s, id, version)
				})
			}},
	)
}

// withdraw ends a record for good. What has ended already is answered as it stands.
func withdraw[T any](c *call, r *resource[T], end func(domain.Scope, domain.ID, int64) (T, error)) (reply, error) {
	id, err := c.id(r.One + "_id")
	if err != nil {
		return reply{}, err
	}
	return c.write(c.building, func(s domain.Scope) (reply, error) {
		row, err := r.Get(c, s, id)
		if err != nil {
			return reply{}, err
		}
		h := headOf(&row)
		if *h.retiredAt == nil {
			if err := c.match.check("the record", *h.version); err != nil {
				return reply{}, err
			}
			if row, err = end(s, id, *h.version); err != nil {
				return reply{}, err
			}
		}
		return r.answer(http.StatusOK, &row), nil
	})
}

// keyAsked is what a new key may do.
type keyAsked struct {
	Name      string     `json:"name"`
	PersonID  *domain.ID `json:"person_id,omitempty"`
	ExpiresAt *time.Time `json:"expires_at,omitempty"`
	Grants    []struct {
		Role       string     `json:"role"`
		BuildingID *domain.ID `json:"building_id,omitempty"`
		Until      *time.Time `json:"until,omitempty"`
	} `json:"grants"`
}

func (s *Server) createKey(c *call) (reply, error) {
	q, err := decode[keyAsked](c)
	if err != nil {
		return reply{}, err
	}
	return c.write(domain.ID{}, func(sc domain.Scope) (reply, error) {
		k := access.Key{Name: q.Name, PersonID: q.PersonID, ExpiresAt: q.ExpiresAt}
		var grants []access.Grant
		for _, g := range q.Grants {
			grants = append(grants, access.Grant{Role: g.Role, BuildingID: g.BuildingID, Until: g.Until})
		}
		if len(grants) == 0 && q.PersonID == nil {
			return reply{}, &domain.Error{Kind: domain.Invalid, Msg: "the body is not valid",
				Fields: []domain.Field{{Pointer: "/grants", Detail: "must say what the key may do"}}}
		}
		secret, err := access.CreateKey(c.ctx, sc, &k, grants)
		if err != nil {
			return reply{}, err
		}
		return reply{status: http.StatusCreated, version: k.Version, body: map[string]any{"key": k, "secret": secret},
			header: [][2]string{{"Location", "/v1/keys/" + k.ID.String()}}}, nil
	})
}

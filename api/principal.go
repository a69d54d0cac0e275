package api

import (
	"context"
	"time"

	"lampward/domain"
)

// Role is what a person or a key is to a building. Roles are not ordered: what each may do is the table below.
type Role uint8

// The roles.
const (
	Viewer Role = iota
	Crew
	Contractor // crew for its assigned orders, until a date
	Integrator // a building management system
	Planner
	Administrator
	roles
)

var roleNames = [roles]string{"viewer", "crew", "contractor", "integrator", "planner", "administrator"}

// String returns the role's name as it is stored and shown.
func (r Role) String() string {
	if r < roles {
		return roleNames[r]
	}
	return "unknown"
}

// ParseRole reads a role's name.
func ParseRole(name string) (Role, bool) {
	for r, n := range roleNames {
		if n == name {
			return Role(r), true
		}
	}
	return 0, false
}

// right is what an operation demands. The zero right is none: nobody has it.
type right uint8

const (
	read          right = iota + 1
	report              // failures, swaps, places kept from a fit check, provisional models
	writeReadings       // points and readings
	plan                // everything in a building
	administer          // people, keys, catalogue, webhooks
	rights
)

var rightNames = [rights]string{"", "read", "report", "write_readings", "plan", "administer"}

func (r right) String() string { return rightNames[r] }

// roleSet has bit r set where role r is in it.
type roleSet uint8

func setOf(rs ...Role) (set roleSet) {
	for _, r := range rs {
		set |= 1 << r
	}
	return set
}

// allowed says which roles have a right.
var allowed = [rights]roleSet{
	read:          setOf(Viewer, Crew, Contractor, Integrator, Planner, Administrator),
	report:        setOf(Crew, Contractor, Integrator, Planner, Administrator),
	writeReadings: setOf(Integrator, Planner, Administrator),
	plan:          setOf(Planner, Administrator),
	administer:    setOf(Administrator),
}

// Grant is a role, until a time where Until is set.
type Grant struct {
	Role  Role
	Until time.Time
}

// Grants are the roles of one principal.
type Grants struct {
	All []Grant               // on every building
	On  map[domain.ID][]Grant // on one
}

func live(grants []Grant, at time.Time) (set roleSet) {
	for _, g := range grants {
		if g.Until.IsZero() || at.Before(g.Until) {
			set |= 1 << g.Role
		}
	}
	return set
}

// everywhere returns the roles held on all buildings.
func (g *Grants) everywhere(at time.Time) roleSet { return live(g.All, at) }

// on returns the roles held on one building.
func (g *Grants) on(building domain.ID, at time.Time) roleSet {
	return live(g.All, at) | live(g.On[building], at)
}

// anywhere returns the roles held on at least one building.
func (g *Grants) anywhere(at time.Time) roleSet {
	set := live(g.All, at)
	for _, on := range g.On {
		set |= live(on, at)
	}
	return set
}

// Principal is who asks. It is read only: the authenticator may hand the same one to many requests.
type Principal struct {
	Actor  domain.Actor
	Grants Grants
}

// String names the principal by kind and identifier, for logs and keys.
func (p *Principal) String() string {
	if p == nil {
		return ""
	}
	return p.Actor.Kind + ":" + p.Actor.ID.String()
}

// Authenticator turns the credentials of an Authorization header ("Bearer" stripped) into a principal. It fails with
// domain.Denied for credentials that are unknown, ended or malformed, and with domain.Unavailable where it cannot
// tell. It is asked for every request, so it keeps what it found for some seconds.
type Authenticator interface {
	Authenticate(ctx context.Context, bearer string) (*Principal, error)
}

// scope is what an operation is about, and so where its right must be held. The zero scope is a fault of the table.
type scope uint8

const (
	public    scope = iota + 1 // no credentials asked for
	building                   // the {building_id} of the path: 404 without any grant there
	catalogue                  // shared by all buildings: the right on any one of them is enough
	estate                     // the service itself: the right on all buildings
)

var scopeNames = [...]string{"", "public", "building", "catalogue", "estate"}

func (s scope) String() string { return scopeNames[s] }

// admit is the one place that decides whether c's principal may use its route.
func (s *Server) admit(c *call) error {
	g := &c.principal.Grants
	var held roleSet
	switch c.route.Scope {
	case building:
		id, err := c.id("building_id")
		if err != nil {
			return err
		}
		if held = g.on(id, c.at); held == 0 {
			return domain.NotFoundf("there is no such building")
		}
		// A grant on one building proves that it exists; a grant on all does not.
		if _, own := g.On[id]; !own && s.opt.BuildingExists != nil {
			if err := s.exists(c.ctx, id); err != nil {
				return err
			}
		}
		c.building = id
	case catalogue:
		held = g.anywhere(c.at)
	case estate:
		held = g.everywhere(c.at)
	}
	if held&allowed[c.route.Right] == 0 {
		return &domain.Error{Kind: domain.Denied, Msg: "this needs the right " + c.route.Right.String() + ", which your role does not have here"}
	}
	return nil
}

// exists asks whether there is such a building. Buildings are never deleted, so a yes is kept for good.
func (s *Server) exists(ctx context.Context, id domain.ID) error {
	if _, known := s.buildings.Load(id); known {
		return nil
	}
	ok, err := s.opt.BuildingExists(ctx, id)
	if err != nil {
		return err
	}
	if !ok {
		return domain.NotFoundf("there is no such building")
	}
	s.buildings.Store(id, struct{}{})
	return nil
}

// may reports whether c's principal has a right on a building: for operations that reach beyond the building of
// their path.
func (c *call) may(r right, building domain.ID) bool {
	return c.principal.Grants.on(building, c.at)&allowed[r] != 0
}

// reach returns the buildings on which c's principal has a right; all is true where that is every building.
func (c *call) reach(r right) (all bool, ids []domain.ID) {
	g := &c.principal.Grants
	if g.everywhere(c.at)&allowed[r] != 0 {
		return true, nil
	}
	for id, on := range g.On {
		if live(on, c.at)&allowed[r] != 0 {
			ids = append(ids, id)
		}
	}
	return false, ids
}

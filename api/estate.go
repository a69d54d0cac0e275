package api

import (
	"net/http"

	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/review"
	"lampward/domain/site"
)

// estate are the operations on buildings, what things cost in them, and the uses of spaces.
func (s *Server) estate() []route {
	out := buildings().routes()
	out = append(out, rates().routes()...)
	out = append(out, spaceUses().routes()...)
	return append(out, route{Method: http.MethodGet, Path: "/v1/summary", Op: "getSummary", Right: read, Scope: catalogue, Handle: s.getSummary})
}

func buildings() *resource[site.Building] {
	return &resource[site.Building]{
		One: "building", Many: "buildings", Path: "/v1/buildings", Scope: catalogue, Item: building, Begin: estate,
		Read: read, Make: administer, Edit: plan,
		Filters: []filter{{Name: "code"}, {Name: "name", Op: "contains"}},
		Owner:   func(b *site.Building) domain.ID { return b.ID },
		List: func(c *call, s domain.Scope, page domain.Page, matches []domain.Match) ([]site.Building, string, error) {
			if all, ids := c.reach(read); !all {
				matches = append(matches, domain.Match{Column: "id", Op: "in", Value: domain.IDs(ids)})
			}
			return site.Buildings.Page(c.ctx, s, page, matches...)
		},
		Get: func(c *call, s domain.Scope, id domain.ID) (site.Building, error) {
			return site.GetBuilding(c.ctx, s, id)
		},
		Create: func(c *call, s domain.Scope, b *site.Building) error {
			return site.CreateBuilding(c.ctx, s, b)
		},
		Update: func(c *call, s domain.Scope, b *site.Building) error { return site.UpdateBuilding(c.ctx, s, b) },
		Retire: func(c *call, s domain.Scope, _ domain.ID, version int64) (site.Building, error) {
			return site.RetireBuilding(c.ctx, s, version)
		},
		Restore: func(c *call, s domain.Scope, _ domain.ID, version int64) (site.Building, error) {
			return site.RestoreBuilding(c.ctx, s, version)
		},
	}
}

func rates() *resource[site.Rate] {
	return &resource[site.Rate]{
		One: "rate", Many: "rates", Path: "/v1/buildings/{building_id}/rates", Scope: building, Read: read, Make: plan, Edit: plan,
		Table: site.Rates, Filters: []filter{{Name: "rate"}},
		Create: func(c *call, s domain.Scope, r *site.Rate) error { return site.CreateRate(c.ctx, s, r) },
		Update: func(c *call, s domain.Scope, r *site.Rate) error { return site.UpdateRate(c.ctx, s, r) },
		Retire: func(c *call, s domain.Scope, id domain.ID, version int64) (site.Rate, error) {
			return site.RetireRate(c.ctx, s, id, version)
		},
		Restore: func(c *call, s domain.Scope, id domain.ID, version int64) (site.Rate, error) {
			return site.RestoreRate(c.ctx, s, id, version)
		},
	}
}

func spaceUses() *resource[site.SpaceUse] {
	r := shared[site.SpaceUse]("space_use", "/v1/space_uses", site.SpaceUses, administer)
	r.Filters = []filter{{Name: "use", Op: "contains"}}
	return r
}

// sharedRecord is a record of the catalogue that plant stores.
type sharedRecord[T any] interface {
	*T
	CatalogueHead() *domain.CatalogueRow
	Validate() error
}

// shared gives a kind of record of the catalogue its operations.
func shared[T any, P sharedRecord[T]](one, path string, t *domain.Table[T], edit right) *resource[T] {
	return &resource[T]{
		One: one, Many: one + "s", Path: path, Scope: catalogue, Read: read, Make: edit, Edit: edit, Table: t,
		Create: func(c *call, s domain.Scope, row *T) error {
			return plant.CreateModel[T, P](c.ctx, s, t, row, one)
		},
		Update: func(c *call, s domain.Scope, row *T) error {
			return plant.UpdateModel[T, P](c.ctx, s, t, row, one)
		},
		Retire: func(c *call, s domain.Scope, id domain.ID, version int64) (T, error) {
			return plant.RetireModel[T, P](c.ctx, s, t, id, version, false, one)
		},
		Restore: func(c *call, s domain.Scope, id domain.ID, version int64) (T, error) {
			return plant.RetireModel[T, P](c.ctx, s, t, id, version, true, one)
		},
	}
}

// estateSummary is how all the buildings somebody may read stand.
type estateSummary struct {
	Buildings  []review.Summary `json:"buildings"`
	Luminaires int              `json:"luminaires"`
	Findings   map[string]int   `json:"findings"`
	Questions  int              `json:"questions"`
	Coverage   review.Coverage  `json:"coverage"`
	Pending    bool             `json:"pending"`
	Reviews    int              `json:"reviews_pending"`
}

func (s *Server) getSummary(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	list, err := review.Summaries(c.ctx, s.opt.Pool, c.readable())
	if err != nil {
		return reply{}, err
	}
	out := estateSummary{Buildings: list, Findings: map[string]int{}}
	for _, b := range list {
		for severity, n := range b.Findings {
			out.Findings[severity] += n
		}
		out.Luminaires += b.Luminaires
		out.Reviews += b.Reviews
		out.Questions += b.Questions
		out.Coverage.Places += b.Coverage.Places
		out.Coverage.Known += b.Coverage.Known
		out.Pending = out.Pending || b.Pending
	}
	if out.Coverage.Places > 0 {
		ratio := float64(out.Coverage.Known) / float64(out.Coverage.Places)
		out.Coverage.Ratio = &ratio
	}
	return reply{body: out}, nil
}

// readable returns the buildings that c's principal may read, nil where that is all of them.
func (c *call) readable() []domain.ID {
	all, ids := c.reach(read)
	if all {
		return nil
	}
	if ids == nil {
		ids = []domain.ID{}
	}
	return ids
}

// anywhere reports whether c's principal has a right on at least one building.
func (c *call) anywhere(r right) bool { return c.principal.Grants.anywhere(c.at)&allowed[r] != 0 }

// noQuery refuses parameters where an operation takes none.
func (c *call) noQuery() error {
	if c.r.URL.RawQuery == "" {
		return nil
	}
	_, err := c.query(nil)
	return err
}

// query reads the parameters of an operation that is no list of records.
func (c *call) query(filters []filter) (map[string]any, error) {
	q, err := c.paged(filters, false)
	if err != nil {
		return nil, err
	}
	return q.values, nil
}

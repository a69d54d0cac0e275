package api

import (
	"net/http"

	"lampward/domain"
	"lampward/domain/plant"
)

// catalogued are the operations on models, pairings and prices.
func (s *Server) catalogued() []route {
	out := models[plant.LampModel](s, "lamp_model", plant.KindLamp, plant.LampModels, filter{Name: "technology"}, filter{Name: "cap"}, filter{Name: "supply"})
	out = append(out, models[plant.DriverModel](s, "driver_model", plant.KindDriver, plant.DriverModels, filter{Name: "kind"})...)
	out = append(out, models[plant.DimmerModel](s, "dimmer_model", plant.KindDimmer, plant.DimmerModels, filter{Name: "kind"})...)
	out = append(out, models[plant.FixtureModel](s, "fixture_model", plant.KindFixture, plant.FixtureModels,
		filter{Name: "gear", Words: []string{"integral", "remote", "none"}})...)
	pairings := shared[plant.Pairing]("pairing", "/v1/pairings", plant.Pairings, administer)
	pairings.Filters = []filter{{Name: "lamp_model_id", Kind: idFilter}, {Name: "driver_model_id", Kind: idFilter}, {Name: "dimmer_model_id", Kind: idFilter}}
	prices := shared[plant.Price]("price", "/v1/prices", plant.Prices, plan)
	prices.Filters = []filter{{Name: "model_kind", Words: []string{"lamp", "driver", "dimmer", "fixture"}}, {Name: "model_id", Kind: idFilter}}
	return append(append(out, pairings.routes()...), prices.routes()...)
}

// model is a record of the catalogue that may be provisional and merged.
type model[T any] interface {
	sharedRecord[T]
	Head() *plant.ModelHead
}

// models gives a kind of model its operations. Crew add models, which stay provisional until a planner confirms or
// merges them; planners complete those; only who may administer changes the others.
func models[T any, P model[T]](s *Server, one, kind string, t *domain.Table[T], filters ...filter) []route {
	r := shared[T, P](one, "/v1/"+one+"s", t, plan)
	r.Make = report
	r.Filters = append([]filter{{Name: "code"}, {Name: "known_as", Column: "also_known_as", Op: "named"}, {Name: "name", Op: "contains"},
		{Name: "provisional", Kind: boolFilter}}, filters...)
	store := r.Create
	r.Create = func(c *call, sc domain.Scope, row *T) error {
		h := P(row).Head()
		if !c.anywhere(administer) {
			h.Provisional = true
		}
		if h.MergedInto != nil {
			return &domain.Error{Kind: domain.Invalid, Msg: "the body is not valid",
				Fields: []domain.Field{{Pointer: "/merged_into", Detail: "is set by merging: leave it out"}}}
		}
		return store(c, sc, row)
	}
	r.Generated = []string{"provisional"}
	change := r.Update
	r.Update = func(c *call, sc domain.Scope, row *T) error {
		if err := settled[T, P](c, sc, t, P(row).Head().ID); err != nil {
			return err
		}
		return change(c, sc, row)
	}
	retire, restore := r.Retire, r.Restore
	r.Retire = func(c *call, sc domain.Scope, id domain.ID, version int64) (T, error) {
		if err := settled[T, P](c, sc, t, id); err != nil {
			var none T
			return none, err
		}
		return retire(c, sc, id, version)
	}
	r.Restore = func(c *call, sc domain.Scope, id domain.ID, version int64) (T, error) {
		if err := settled[T, P](c, sc, t, id); err != nil {
			var none T
			return none, err
		}
		return restore(c, sc, id, version)
	}
	item := r.Path + "/{" + one + "_id}"
	return append(r.routes(),
		route{Method: http.MethodPost, Path: item + "/confirm", Op: "confirm" + camel(one), Right: plan, Scope: catalogue,
			Handle: func(c *call) (reply, error) {
				return actOn(c, r, func(c *call, sc domain.Scope, id domain.ID, version int64) (T, error) {
					return plant.ConfirmModel[T, P](c.ctx, sc, t, id, version, one)
				})
			}},
		route{Method: http.MethodPost, Path: item + "/merge", Op: "merge" + camel(one), Right: plan, Scope: catalogue, Takes: []string{jsonMedia},
			Handle: func(c *call) (reply, error) {
				b, err := decode[struct {
					Into domain.ID `json:"into"`
				}](c)
				if err != nil {
					return reply{}, err
				}
				return actOn(c, r, func(c *call, sc domain.Scope, id domain.ID, version int64) (T, error) {
					if err := settled[T, P](c, sc, t, id); err != nil {
						var none T
						return none, err
					}
					return plant.MergeModel[T, P](c.ctx, sc, t, id, b.Into, version, one)
				})
			}},
		route{Method: http.MethodGet, Path: item + "/uses", Op: "list" + camel(one) + "Uses", Right: read, Scope: catalogue,
			Handle: func(c *call) (reply, error) { return s.listUses(c, one+"_id", kind, exists(t)) }},
	)
}

func exists[T any](t *domain.Table[T]) func(*call, domain.ID) error {
	return func(c *call, id domain.ID) error {
		_, err := t.Get(c.ctx, c.read(), id)
		return err
	}
}

// settled refuses planners who would change a model that is not provisional any more.
func settled[T any, P model[T]](c *call, sc domain.Scope, t *domain.Table[T], id domain.ID) error {
	if c.anywhere(administer) {
		return nil
	}
	row, err := t.Get(c.ctx, sc, id)
	if err != nil {
		return err
	}
	if h := P(&row).Head(); !h.Provisional && h.MergedInto == nil { // what was merged nobody changes, and the room says so
		return &domain.Error{Kind: domain.Denied, Msg: "this model is confirmed: only an administrator changes it"}
	}
	return nil
}

// actOn does something to one record of a resource under the version that If-Match names, if it names one.
func actOn[T any](c *call, r *resource[T], do func(*call, domain.Scope, domain.ID, int64) (T, error)) (reply, error) {
	id, err := c.id(r.One + "_id")
	if err != nil {
		return reply{}, err
	}
	return c.write(c.building, func(s domain.Scope) (reply, error) {
		row, err := r.Get(c, s, id)
		if err != nil {
			return reply{}, err
		}
		if err := c.match.check("the record", *headOf(&row).version); err != nil {
			return reply{}, err
		}
		if row, err = do(c, s, id, *headOf(&row).version); err != nil {
			return reply{}, err
		}
		return r.answer(http.StatusOK, &row), nil
	})
}

// listUses answers which places carry a model, under any id that was merged into it, in the buildings that may be read.
func (s *Server) listUses(c *call, param, kind string, there func(*call, domain.ID) error) (reply, error) {
	id, err := c.id(param)
	if err != nil {
		return reply{}, err
	}
	q, err := c.paged(nil, true)
	if err != nil {
		return reply{}, err
	}
	if err := there(c, id); err != nil {
		return reply{}, err
	}
	cat, err := s.opt.Reviewer.Shelf.At(c.ctx, s.opt.Pool)
	if err != nil {
		return reply{}, err
	}
	ids, _ := cat.Also(kind, id)
	list, next, err := plant.Uses(c.ctx, s.opt.Pool, kind, append(ids, id), c.readable(), q.page)
	if err != nil {
		return reply{}, err
	}
	return c.page(list, next, q), nil
}

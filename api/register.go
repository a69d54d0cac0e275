package api

import (
	"context"
	"net/http"

	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/review"
	"lampward/domain/site"
)

const inBuilding = "/v1/buildings/{building_id}"

// register are the operations on the records of a building.
func (s *Server) register() []route {
	id := func(name string) filter { return filter{Name: name, Kind: idFilter} }
	part := func(name string) filter { return filter{Name: name, Op: "contains"} }
	words := func(name string, w ...string) filter { return filter{Name: name, Words: w} }
	onPlace := []filter{part("tag"), id("space_id"), id("fed_by_circuit_id"), id("fed_by_place_id"), id("make_up_id")}

	spaces := loaded(s, "space", site.Spaces, (*plant.Edit).CreateSpace, (*plant.Edit).UpdateSpace, (*plant.Edit).RetireSpace, (*plant.Edit).RestoreSpace)
	spaces.Filters = []filter{{Name: "level"}, part("name"), {Name: "use"}, words("reach", "floor", "steps", "tower", "lift", "rope"),
		words("survey_state", "not_started", "partial", "done")}
	circuits := loaded(s, "circuit", plant.Circuits, (*plant.Edit).CreateCircuit, (*plant.Edit).UpdateCircuit, (*plant.Edit).RetireCircuit, (*plant.Edit).RestoreCircuit)
	circuits.Filters = []filter{{Name: "board"}, {Name: "way"}, id("space_id")}
	dimmers := standing(loaded(s, "dimmer", plant.Dimmers, (*plant.Edit).CreateDimmer, (*plant.Edit).UpdateDimmer, (*plant.Edit).RetireDimmer, (*plant.Edit).RestoreDimmer))
	dimmers.Filters = append(onPlace[:5:5], id("dimmer_model_id"))
	drivers := standing(loaded(s, "driver", plant.Drivers, (*plant.Edit).CreateDriver, (*plant.Edit).UpdateDriver, (*plant.Edit).RetireDriver, (*plant.Edit).RestoreDriver))
	drivers.Filters = append(onPlace[:5:5], id("driver_model_id"))
	fixtures := standing(loaded(s, "fixture", plant.Fixtures, (*plant.Edit).CreateFixture, (*plant.Edit).UpdateFixture, (*plant.Edit).RetireFixture, (*plant.Edit).RestoreFixture))
	fixtures.Filters = append(onPlace[:5:5], id("fixture_model_id"), id("lamp_model_id"), id("driver_model_id"),
		words("emergency_mode", "none", "maintained", "non_maintained"))
	feeds := loaded(s, "feed", plant.Feeds, (*plant.Edit).CreateFeed, (*plant.Edit).UpdateFeed, (*plant.Edit).RetireFeed, (*plant.Edit).RestoreFeed)
	feeds.Filters = []filter{id("place_id"), id("from_circuit_id"), id("from_place_id")}
	controls := loaded(s, "control", plant.Controls, (*plant.Edit).CreateControl, (*plant.Edit).UpdateControl, (*plant.Edit).RetireControl, (*plant.Edit).RestoreControl)
	controls.Filters = []filter{id("dimmer_id"), id("place_id"), id("circuit_id"), words("path", "power_path", "signal")}
	controls.Generated = []string{"position"}
	makeUps := loaded(s, "make_up", plant.MakeUps, (*plant.Edit).CreateMakeUp, (*plant.Edit).UpdateMakeUp, (*plant.Edit).RetireMakeUp, (*plant.Edit).RestoreMakeUp)
	makeUps.Filters = []filter{part("name")}

	var out []route
	for _, routes := range [][]route{spaces.routes(), circuits.routes(), dimmers.routes(), drivers.routes(), fixtures.routes(), feeds.routes(),
		controls.routes(), makeUps.routes(), s.facts()} {
		out = append(out, routes...)
	}
	post := func(path, op string, r right, handle func(*call) (reply, error)) route {
		return route{Method: http.MethodPost, Path: inBuilding + path, Op: op, Right: r, Scope: building, Takes: []string{jsonMedia}, Handle: handle}
	}
	bulk := post("/bulk", "storeBulk", plan, s.storeBulk)
	bulk.Body, bulk.Timeout = 32<<20, bulkTimeout
	return append(out,
		post("/make_ups/{make_up_id}/put", "putMakeUp", plan, s.putMakeUp),
		post("/make_ups/{make_up_id}/apply", "applyMakeUp", plan, s.applyMakeUp),
		bulk,
		route{Method: http.MethodGet, Path: inBuilding + "/circuits/{circuit_id}/tree", Op: "getCircuitTree", Right: read, Scope: building, Handle: s.getCircuitTree},
		route{Method: http.MethodGet, Path: inBuilding + "/search", Op: "searchBuilding", Right: read, Scope: building, Handle: s.searchBuilding},
	)
}

// through makes a change by the one door, in s's transaction.
func (s *Server) through(c *call, sc domain.Scope, f func(*plant.Edit) error) (review.Outcome, error) {
	return s.opt.Reviewer.Change(c.ctx, sc, review.Touch{}, f)
}

// loaded gives a kind of record that loads may depend on its operations; every write goes through the one door. The
// four methods are plant.Edit's.
func loaded[T any](s *Server, one string, t *domain.Table[T],
	create, update func(*plant.Edit, context.Context, *T) error,
	retire, restore func(*plant.Edit, context.Context, domain.ID, int64) (T, error)) *resource[T] {
	turn := func(do func(*plant.Edit, context.Context, domain.ID, int64) (T, error)) func(*call, domain.Scope, domain.ID, int64) (T, error) {
		return func(c *call, sc domain.Scope, id domain.ID, version int64) (row T, err error) {
			_, err = s.through(c, sc, func(e *plant.Edit) (err error) {
				row, err = do(e, c.ctx, id, version)
				return err
			})
			return row, err
		}
	}
	return &resource[T]{
		One: one, Many: one + "s", Path: inBuilding + "/" + one + "s", Scope: building, Read: read, Make: plan, Edit: plan, Table: t,
		Create: told(s, create), Update: told(s, update), Retire: turn(retire), Restore: turn(restore),
	}
}

// told makes the operation that records a fact by one of plant.Edit's methods.
func told[T any](s *Server, do func(*plant.Edit, context.Context, *T) error) func(*call, domain.Scope, *T) error {
	return func(c *call, sc domain.Scope, row *T) error {
		sent := *row // a change that starts over begins with what was sent
		_, err := s.through(c, sc, func(e *plant.Edit) error {
			*row = sent
			return do(e, c.ctx, row)
		})
		return err
	}
}

// placed is a record of the one table of places.
type placed[T any] interface {
	*T
	Place() *plant.PlaceHead
}

// standing narrows a resource of places to its kind. A place without a label gets one.
func standing[T any, P placed[T]](r *resource[T]) *resource[T] {
	t, kind := r.Table, r.One
	r.Generated = []string{"tag"}
	r.List = func(c *call, s domain.Scope, page domain.Page, matches []domain.Match) ([]T, string, error) {
		return t.Page(c.ctx, s, page, append(matches, domain.Match{Column: "kind", Value: kind})...)
	}
	r.Get = func(c *call, s domain.Scope, id domain.ID) (T, error) {
		row, err := t.Get(c.ctx, s, id)
		if err == nil && P(&row).Place().Kind != kind {
			return row, domain.NotFoundf("there is no such %s", kind)
		}
		return row, err
	}
	return r
}

func (s *Server) storeBulk(c *call) (reply, error) {
	sent, err := decode[plant.Bulk](c)
	if err != nil {
		return reply{}, err
	}
	return c.write(c.building, func(sc domain.Scope) (reply, error) {
		var n plant.BulkCounts
		out, err := s.opt.Reviewer.Change(c.ctx, sc, review.Touch{}, func(e *plant.Edit) (err error) {
			b := sent.Clone()
			n, err = e.Upsert(c.ctx, &b)
			return err
		})
		if err != nil {
			return reply{}, err
		}
		return reply{body: struct {
			plant.BulkCounts
			Opened  int `json:"opened"`
			Cleared int `json:"cleared"`
		}{n, len(out.Opened), len(out.Cleared)}}, nil
	})
}

func (s *Server) putMakeUp(c *call) (reply, error) {
	id, err := c.id("make_up_id")
	if err != nil {
		return reply{}, err
	}
	put, err := decode[struct {
		SpaceID   *domain.ID `json:"space_id"`
		CircuitID *domain.ID `json:"circuit_id"`
		Count     int        `json:"count"`
		Tags      []string   `json:"tags"`
	}](c)
	if err != nil {
		return reply{}, err
	}
	return c.write(c.building, func(sc domain.Scope) (reply, error) {
		var b plant.Bulk
		_, err := s.through(c, sc, func(e *plant.Edit) (err error) {
			b, err = e.PutMakeUp(c.ctx, plant.Put{MakeUpID: id, SpaceID: put.SpaceID, CircuitID: put.CircuitID, Count: put.Count, Tags: put.Tags})
			return err
		})
		if err != nil {
			return reply{}, err
		}
		return reply{body: map[string][]domain.ID{"dimmer_ids": idsOf(b.Dimmers), "driver_ids": idsOf(b.Drivers), "fixture_ids": idsOf(b.Fixtures)}}, nil
	})
}

func idsOf[T any](rows []T) []domain.ID {
	out := make([]domain.ID, len(rows))
	for i := range rows {
		out[i] = *headOf(&rows[i]).id
	}
	return out
}

func (s *Server) applyMakeUp(c *call) (reply, error) {
	id, err := c.id("make_up_id")
	if err != nil {
		return reply{}, err
	}
	q, err := decode[struct {
		PlaceIDs []domain.ID `json:"place_ids"`
	}](c)
	if err != nil {
		return reply{}, err
	}
	return c.write(c.building, func(sc domain.Scope) (reply, error) {
		var n int
		_, err := s.through(c, sc, func(e *plant.Edit) (err error) {
			n, err = e.ApplyMakeUp(c.ctx, id, q.PlaceIDs)
			return err
		})
		return reply{body: map[string]int{"places": n}}, err
	})
}

func (s *Server) getCircuitTree(c *call) (reply, error) {
	id, err := c.id("circuit_id")
	if err != nil {
		return reply{}, err
	}
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	t, err := s.opt.Reviewer.Feeds(c.ctx, c.read(), id)
	return reply{body: t}, err
}

func (s *Server) searchBuilding(c *call) (reply, error) {
	q, err := c.paged([]filter{{Name: "q"}}, false)
	if err != nil {
		return reply{}, err
	}
	text := value[string](q, "q")
	if text == "" || len(text) > 200 {
		return reply{}, &domain.Error{Kind: domain.Invalid, Msg: "the query is not valid",
			Fields: []domain.Field{{Pointer: "/q", Detail: "must hold 1 to 200 characters to look for"}}}
	}
	hits, err := plant.Search(c.ctx, c.read(), text)
	return reply{body: map[string]any{"items": hits}}, err
}

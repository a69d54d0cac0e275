package api

import (
	"net/http"
	"time"

	"lampward/domain"
	"lampward/domain/plant"
	"lampward/domain/review"
)

// bulkTimeout is how long many rows at once may take.
const bulkTimeout = 2 * time.Minute

// facts are the operations that tell what happened at places: swaps, failures, tests, trips. They are facts: none is
// refused because what was done is unsafe.
func (s *Server) facts() []route {
	id := func(name string) filter { return filter{Name: name, Kind: idFilter} }
	since := func(name, column string) []filter {
		return []filter{{Name: name + "_from", Kind: timeFilter, Column: column, Op: "from"}, {Name: name + "_until", Kind: timeFilter, Column: column, Op: "until"}}
	}
	part := filter{Name: "part", Words: []string{"lamp", "driver", "dimmer", "fixture", "battery"}}
	units := &resource[plant.Unit]{One: "unit", Many: "units", Path: inBuilding + "/units", Scope: building, Read: read, Table: plant.Units,
		Filters: []filter{id("place_id"), part, id("lamp_model_id"), id("driver_model_id"), {Name: "current", Kind: boolFilter, Column: "removed_at", Op: "absent"}}}
	failures := &resource[plant.Failure]{One: "failure", Many: "failures", Path: inBuilding + "/failures", Scope: building, Read: read, Make: report,
		Table: plant.Failures, Generated: []string{"unit_id", "reports", "by_kind", "by_id", "cleared_at"},
		Filters: append([]filter{id("place_id"), part, {Name: "mode", Words: plant.FailureModes}, {Name: "open", Kind: boolFilter, Column: "cleared_at", Op: "absent"}},
			since("noticed", "noticed_at")...),
		Create: told(s, (*plant.Edit).Report)}
	tests := &resource[plant.EmergencyTest]{One: "emergency_test", Many: "emergency_tests", Path: inBuilding + "/emergency_tests", Scope: building,
		Read: read, Make: report, Table: plant.EmergencyTests, Generated: []string{"lamp_model_id", "driver_model_id", "battery"},
		Filters: append([]filter{id("place_id"), {Name: "test", Words: []string{"function", "duration"}}, {Name: "passed", Kind: boolFilter}}, since("tested", "tested_at")...),
		Create:  told(s, (*plant.Edit).Test)}
	trips := &resource[plant.Trip]{One: "trip", Many: "trips", Path: inBuilding + "/trips", Scope: building, Read: read, Make: report, Table: plant.Trips,
		Filters: append([]filter{id("circuit_id")}, since("tripped", "tripped_at")...), Create: told(s, (*plant.Edit).Tripped)}

	out := append(units.routes(), failures.routes()...)
	out = append(out, tests.routes()...)
	out = append(out, trips.routes()...)
	return append(out,
		route{Method: http.MethodPost, Path: inBuilding + "/places/{place_id}/swap", Op: "recordSwap", Right: report, Scope: building,
			Takes: []string{jsonMedia}, Handle: s.recordSwap},
		route{Method: http.MethodPost, Path: inBuilding + "/failures/{failure_id}/clear", Op: "clearFailure", Right: report, Scope: building,
			Takes: []string{jsonMedia}, Handle: func(c *call) (reply, error) { return s.clearFailure(c, failures) }},
	)
}

func (s *Server) recordSwap(c *call) (reply, error) {
	place, err := c.id("place_id")
	if err != nil {
		return reply{}, err
	}
	sent, err := decode[plant.Swap](c)
	if err != nil {
		return reply{}, err
	}
	if !sent.PlaceID.IsZero() && sent.PlaceID != place {
		return reply{}, &domain.Error{Kind: domain.Invalid, Msg: "the body is not valid",
			Fields: []domain.Field{{Pointer: "/place_id", Detail: "must be the place of the address, or be left out"}}}
	}
	sent.PlaceID = place
	return c.write(c.building, func(sc domain.Scope) (reply, error) {
		var in plant.Unit
		out, err := s.opt.Reviewer.Change(c.ctx, sc, review.Touch{Places: []domain.ID{place}}, func(e *plant.Edit) (err error) {
			in, err = e.Fit(c.ctx, sent)
			return err
		})
		if err != nil {
			return reply{}, err
		}
		body := map[string]any{"opened": out.Opened, "cleared": out.Cleared}
		if !in.ID.IsZero() {
			body["unit"] = in
		}
		return reply{body: body}, nil
	})
}

func (s *Server) clearFailure(c *call, r *resource[plant.Failure]) (reply, error) {
	id, err := c.id("failure_id")
	if err != nil {
		return reply{}, err
	}
	q, err := decode[struct {
		ClearedAt time.Time `json:"cleared_at"`
		Cause     string    `json:"cause"`
	}](c)
	if err != nil {
		return reply{}, err
	}
	return c.write(c.building, func(sc domain.Scope) (reply, error) {
		f, err := r.Get(c, sc, id)
		if err != nil {
			return reply{}, err
		}
		if err := c.match.check("the record", f.Version); err != nil {
			return reply{}, err
		}
		version := f.Version
		if _, err := s.through(c, sc, func(e *plant.Edit) (err error) {
			f, err = e.Clear(c.ctx, id, version, q.ClearedAt, q.Cause)
			return err
		}); err != nil {
			return reply{}, err
		}
		return r.answer(http.StatusOK, &f), nil
	})
}

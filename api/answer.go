package api

import (
	"net/http"
	"time"

	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/event"
	"lampward/domain/review"
	"lampward/domain/site"
)

func timeOf(q asked, name string) time.Time { return value[time.Time](q, name) }

// answers are the operations that judge what is not fitted yet.
func (s *Server) answers() []route {
	post := func(path, op string, r right, sc scope, handle func(*call) (reply, error)) route {
		return route{Method: http.MethodPost, Path: path, Op: op, Right: r, Scope: sc, Takes: []string{jsonMedia}, Handle: handle}
	}
	return []route{
		post("/v1/fit-check", "checkFit", read, catalogue, s.checkFit),
		post("/v1/what-if", "whatIf", read, catalogue, s.whatIf),
		post(inBuilding+"/proposals", "checkProposal", plan, building, s.checkProposal),
		{Method: http.MethodGet, Path: inBuilding + "/places/{place_id}/options", Op: "listOptions", Right: read, Scope: building, Handle: s.listOptions},
		{Method: http.MethodGet, Path: inBuilding + "/places/{place_id}/cautions", Op: "listCautions", Right: read, Scope: building, Handle: s.listCautions},
	}
}

// checkFit answers "may I fit this here?". A building that is named counts with its mains; who may not read it is told
// that there is none.
func (s *Server) checkFit(c *call) (reply, error) {
	q, err := decode[review.FitRequest](c)
	if err != nil {
		return reply{}, err
	}
	if q.BuildingID != nil {
		if !c.may(read, *q.BuildingID) {
			return reply{}, domain.NotFoundf("there is no such building")
		}
		if q.Keep != nil && !c.may(report, *q.BuildingID) {
			return reply{}, &domain.Error{Kind: domain.Denied, Msg: "keeping a place needs the right " + report.String() + " in that building"}
		}
	}
	if q.PlaceID != nil {
		if q.BuildingID == nil {
			return reply{}, q.Validate(nil)
		}
		a, err := s.opt.Reviewer.FitAtPlace(c.ctx, c.inside(*q.BuildingID), &q)
		return reply{body: a}, err
	}
	cat, err := s.opt.Reviewer.Shelf.At(c.ctx, s.opt.Pool)
	if err != nil {
		return reply{}, err
	}
	supply := loading.Supply{}
	if q.BuildingID != nil {
		b, err := site.GetBuilding(c.ctx, c.inside(*q.BuildingID), *q.BuildingID)
		if err != nil {
			return reply{}, err
		}
		supply = b.Supply
	}
	a, err := review.FitCheck(cat, supply, &q)
	if err != nil || q.Keep == nil {
		return reply{body: a}, err
	}
	return s.keepPlace(c, a, q)
}

// inside returns a scope for reading another building than the path names.
func (c *call) inside(id domain.ID) domain.Scope {
	return domain.On(c.s.opt.Pool, id, c.principal.Actor, c.at)
}

// keepPlace stores what was seen as a place: the models first, in the catalogue, then the place in its building. Where
// the proposal may not be fitted, the place is kept with the lamps that stay.
func (s *Server) keepPlace(c *call, a review.FitAnswer, q review.FitRequest) (reply, error) {
	if out, done, err := c.answered(); done || err != nil {
		return out, err
	}
	// The models come first and by themselves: inside the write they would take a second connection while it holds one,
	// and many at once would wait for each other. Models left behind by a place that could not be stored are
	// provisional: a planner sees and merges them.
	var named review.FitRequest
	err := domain.In(c.ctx, s.opt.Pool, domain.ID{}, c.principal.Actor, c.at, func(central domain.Scope) error {
		named = q
		return review.KeepModels(c.ctx, central, &named)
	})
	if err != nil {
		return reply{}, err
	}
	return c.write(*q.BuildingID, func(sc domain.Scope) (reply, error) {
		kept, _, err := s.opt.Reviewer.Store(c.ctx, sc, &named, a.Answer == review.Fits)
		if err != nil {
			return reply{}, err
		}
		a.Kept = &kept
		return reply{body: a}, nil
	})
}

func (s *Server) whatIf(c *call) (reply, error) {
	q, err := decode[struct {
		review.Proposal
		BuildingIDs []domain.ID `json:"building_ids"`
	}](c)
	if err != nil {
		return reply{}, err
	}
	for _, id := range q.BuildingIDs {
		if !c.may(read, id) {
			return reply{}, domain.NotFoundf("there is no such building")
		}
		if _, err := site.GetBuilding(c.ctx, c.inside(id), id); err != nil {
			return reply{}, err
		}
	}
	if len(q.BuildingIDs) == 1 {
		w, err := s.opt.Reviewer.Try(c.ctx, c.inside(q.BuildingIDs[0]), &q.Proposal)
		return reply{body: w}, err
	}
	ids := q.BuildingIDs
	if ids == nil {
		ids = c.readable()
	}
	w, err := s.opt.Reviewer.TryEverywhere(c.ctx, c.read(), ids, &q.Proposal)
	return reply{body: w}, err
}

// refused is what a refused proposal would cause, and what may be fitted instead.
type refused struct {
	Findings []review.WhatFinding `json:"findings"`
	Options  []review.Option      `json:"options"`
}

func (s *Server) checkProposal(c *call) (reply, error) {
	q, err := decode[struct {
		review.Proposal
		Override *struct {
			Why   string      `json:"why"`
			Until domain.Date `json:"until"`
		} `json:"override"`
	}](c)
	if err != nil {
		return reply{}, err
	}
	return c.write(c.building, func(sc domain.Scope) (reply, error) {
		w, err := s.opt.Reviewer.Try(c.ctx, sc, &q.Proposal)
		if err != nil || !w.Refused {
			return reply{body: w}, err
		}
		if q.Override != nil {
			if err := review.Override(c.ctx, sc, &w, "/override", q.Override.Why, q.Override.Until); err != nil {
				return reply{}, err
			}
			event.Record(sc, event.Act{Action: "proposal.overridden", Kind: "building", ID: c.building,
				Body: map[string]any{"proposal": q.Proposal, "why": q.Override.Why, "until": q.Override.Until, "findings": w.Opened}})
			return reply{body: w}, nil
		}
		more := refused{Findings: w.Opened, Options: []review.Option{}}
		if len(q.PlaceIDs) > 0 {
			if more.Options, err = s.opt.Reviewer.Options(c.ctx, sc, q.PlaceIDs[0]); err != nil && domain.KindOf(err) != domain.Conflict {
				return reply{}, err
			}
			if more.Options == nil {
				more.Options = []review.Option{}
			}
		}
		return reply{}, &domain.Error{Kind: domain.Unsafe, More: more,
			Msg: "this would bring or worsen findings that forbid it; a planner may override with a reason"}
	})
}

func (s *Server) listOptions(c *call) (reply, error) {
	id, err := c.id("place_id")
	if err != nil {
		return reply{}, err
	}
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	list, err := s.opt.Reviewer.Options(c.ctx, c.read(), id)
	return reply{body: map[string]any{"items": list}}, err
}

func (s *Server) listCautions(c *call) (reply, error) {
	id, err := c.id("place_id")
	if err != nil {
		return reply{}, err
	}
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	list, err := s.opt.Reviewer.CautionsAt(c.ctx, c.read(), id)
	return reply{body: map[string]any{"items": list}}, err
}

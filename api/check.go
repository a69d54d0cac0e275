package api

import (
	"net/http"
	"slices"

	"lampward/domain"
	"lampward/domain/event"
	"lampward/domain/review"
)

// checks are the operations on what the rules found and what is not known.
func (s *Server) checks() []route {
	get := func(path, op string, handle func(*call) (reply, error)) route {
		return route{Method: http.MethodGet, Path: inBuilding + path, Op: op, Right: read, Scope: building, Handle: handle}
	}
	shared := func(path, op string, handle func(*call) (reply, error)) route {
		return route{Method: http.MethodGet, Path: path, Op: op, Right: read, Scope: catalogue, Handle: handle}
	}
	waivers := &resource[review.Waiver]{One: "waiver", Table: review.Waivers,
		Get: func(c *call, s domain.Scope, id domain.ID) (review.Waiver, error) {
			return review.Waivers.Get(c.ctx, s, id)
		}}
	return append(s.answers(),
		get("/findings", "listFindings", s.listFindings),
		get("/findings/{finding_id}", "getFinding", s.getFinding),
		get("/causes", "listCauses", s.listCauses),
		shared("/v1/causes", "listEstateCauses", s.listEstateCauses),
		shared("/v1/findings", "listEstateFindings", s.listEstateFindings),
		get("/finding-counts", "countFindings", s.countFindings),
		shared("/v1/finding-counts", "countEstateFindings", s.countEstateFindings),
		get("/questions", "listQuestions", s.listQuestions),
		get("/waivers", "listWaivers", s.listWaivers),
		route{Method: http.MethodPost, Path: inBuilding + "/waivers", Op: "waiveFindings", Right: plan, Scope: building, Takes: []string{jsonMedia}, Handle: s.waiveFindings},
		route{Method: http.MethodPost, Path: inBuilding + "/waivers/{waiver_id}/withdraw", Op: "withdrawWaiver", Right: plan, Scope: building,
			Handle: func(c *call) (reply, error) {
				return withdraw(c, waivers, func(s domain.Scope, id domain.ID, version int64) (review.Waiver, error) {
					return review.EndWaiver(c.ctx, s, id, version)
				})
			}},
		get("/review", "getReview", s.getReview),
		route{Method: http.MethodPost, Path: inBuilding + "/review", Op: "askReview", Right: plan, Scope: building, Handle: s.askReview},
		shared("/v1/rules", "listRules", s.listRules),
		get("/audit", "listAudit", s.listAudit),
		get("/audit/verification", "verifyAudit", s.verifyAudit),
	)
}

// ofFindings are the filters of every list of findings.
var ofFindings = []filter{{Name: "severity", Words: review.Severities()}, {Name: "rule"}, {Name: "sureness", Words: review.Surenesses()},
	{Name: "subject_kind", Words: review.SubjectKinds()}, {Name: "lamp_model_id", Kind: idFilter}, {Name: "driver_model_id", Kind: idFilter},
	{Name: "dimmer_model_id", Kind: idFilter}, {Name: "cleared", Kind: boolFilter}, {Name: "waived", Kind: boolFilter}, {Name: "sort", Words: []string{"worst", "newest"}}}

func findingsAsked(c *call, more ...filter) (asked, review.Filter, error) {
	q, err := c.paged(slices.Concat(ofFindings, more), true)
	if err != nil {
		return q, review.Filter{}, err
	}
	f := review.Filter{Severity: value[string](q, "severity"), Rule: value[string](q, "rule"), Sureness: value[string](q, "sureness"),
		Kind: value[string](q, "subject_kind"), Subject: value[domain.ID](q, "subject_id"), Space: value[domain.ID](q, "space_id"),
		Lamp: value[domain.ID](q, "lamp_model_id"), Driver: value[domain.ID](q, "driver_model_id"), Dimmer: value[domain.ID](q, "dimmer_model_id"),
		Cleared: value[bool](q, "cleared"), Newest: value[string](q, "sort") == "newest"}
	if _, given := q.values["waived"]; given {
		w := value[bool](q, "waived")
		f.Waived = &w
	}
	return q, f, nil
}

func (s *Server) listFindings(c *call) (reply, error) {
	q, f, err := findingsAsked(c, filter{Name: "subject_id", Kind: idFilter}, filter{Name: "space_id", Kind: idFilter})
	if err != nil {
		return reply{}, err
	}
	list, next, err := review.List(c.ctx, c.read(), f, q.page)
	if err != nil {
		return reply{}, err
	}
	return c.page(list, next, q), nil
}

func (s *Server) listEstateFindings(c *call) (reply, error) {
	q, f, err := findingsAsked(c)
	if err != nil {
		return reply{}, err
	}
	list, next, err := review.ListEverywhere(c.ctx, s.opt.Pool, f, c.at, c.readable(), q.page)
	if err != nil {
		return reply{}, err
	}
	return c.page(list, next, q), nil
}

func (s *Server) countFindings(c *call) (reply, error) {
	return s.ruleCounts(c, []domain.ID{c.building})
}

func (s *Server) countEstateFindings(c *call) (reply, error) { return s.ruleCounts(c, c.readable()) }

func (s *Server) ruleCounts(c *call, buildings []domain.ID) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	list, err := review.RuleCounts(c.ctx, s.opt.Pool, c.at, buildings)
	return reply{body: map[string]any{"items": list}}, err
}

func (s *Server) getFinding(c *call) (reply, error) {
	id, err := c.id("finding_id")
	if err != nil {
		return reply{}, err
	}
	f, err := review.Get(c.ctx, c.read(), id)
	return reply{body: f}, err
}

func (s *Server) listCauses(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	cat, err := s.opt.Reviewer.Shelf.At(c.ctx, s.opt.Pool)
	if err != nil {
		return reply{}, err
	}
	list, err := review.Groups(c.ctx, c.read(), cat)
	return reply{body: map[string]any{"items": list}}, err
}

func (s *Server) listEstateCauses(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	cat, err := s.opt.Reviewer.Shelf.At(c.ctx, s.opt.Pool)
	if err != nil {
		return reply{}, err
	}
	list, err := review.GroupsEverywhere(c.ctx, s.opt.Pool, cat, c.at, c.readable())
	return reply{body: map[string]any{"items": list}}, err
}

func (s *Server) listQuestions(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	cat, err := s.opt.Reviewer.Shelf.At(c.ctx, s.opt.Pool)
	if err != nil {
		return reply{}, err
	}
	list, total, err := review.Questions(c.ctx, c.read(), cat)
	if err != nil {
		return reply{}, err
	}
	cover, err := review.Cover(c.ctx, c.read())
	return reply{body: map[string]any{"items": list, "total": total, "coverage": cover}}, err
}

func (s *Server) listWaivers(c *call) (reply, error) {
	q, err := c.paged(nil, true)
	if err != nil {
		return reply{}, err
	}
	list, next, err := review.WaiversOf(c.ctx, c.read(), q.page)
	if err != nil {
		return reply{}, err
	}
	return c.page(list, next, q), nil
}

func (s *Server) waiveFindings(c *call) (reply, error) {
	q, err := decode[struct {
		FindingIDs []domain.ID   `json:"finding_ids"`
		Cause      *review.Cause `json:"cause"`
		Why        string        `json:"why"`
		Until      domain.Date   `json:"until"`
	}](c)
	if err != nil {
		return reply{}, err
	}
	return c.write(c.building, func(sc domain.Scope) (reply, error) {
		list, err := review.Waive(c.ctx, sc, q.FindingIDs, q.Cause, q.Why, q.Until)
		return reply{status: http.StatusCreated, body: map[string]any{"items": list}}, err
	})
}

func (s *Server) getReview(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	return s.reviewState(c, c.read())
}

func (s *Server) reviewState(c *call, sc domain.Scope) (reply, error) {
	state, err := review.StateOf(c.ctx, sc)
	return reply{body: state}, err
}

func (s *Server) askReview(c *call) (reply, error) {
	return c.write(c.building, func(sc domain.Scope) (reply, error) {
		if err := event.ReviewDue(c.ctx, sc, event.Due{Building: &c.building, Why: "asked for"}); err != nil {
			return reply{}, err
		}
		out, err := s.reviewState(c, sc)
		out.status = http.StatusAccepted
		return out, err
	})
}

func (s *Server) listRules(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	return reply{body: map[string]any{"rule_set": review.RuleSet, "items": review.Rules()}}, nil
}

func (s *Server) listAudit(c *call) (reply, error) {
	q, err := c.paged([]filter{{Name: "subject_id", Kind: idFilter}, {Name: "by_id", Kind: idFilter}, {Name: "from", Kind: timeFilter}, {Name: "until", Kind: timeFilter}}, true)
	if err != nil {
		return reply{}, err
	}
	f := event.Filter{Subject: value[domain.ID](q, "subject_id"), By: value[domain.ID](q, "by_id")}
	f.From, f.To = timeOf(q, "from"), timeOf(q, "until")
	list, next, err := event.Audit(c.ctx, c.read(), f, q.page)
	if err != nil {
		return reply{}, err
	}
	return c.page(list, next, q), nil
}

func (s *Server) verifyAudit(c *call) (reply, error) {
	if err := c.noQuery(); err != nil {
		return reply{}, err
	}
	v, err := event.Verify(c.ctx, c.read())
	return reply{body: v}, err
}

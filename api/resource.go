package api

import (
	"bytes"
	"encoding/json"
	"net/http"
	"strings"
	"time"

	"lampward/domain"
)

// resource gives a kind of record its operations: list, create, get, replace, change, retire and restore. What a
// room does not offer is left nil and has no route. A closure runs in a transaction of the building that the path
// names (none for the catalogue), except List and Get, which read outside one.
type resource[T any] struct {
	One   string // in paths and operation ids: lamp_model
	Many  string // lamp_models
	Path  string // of the list: /v1/buildings/{building_id}/drivers
	Scope scope  // of every operation
	Item  scope  // of those on one record, where it differs; Scope where 0
	Begin scope  // of create, where it differs; Scope where 0
	Read  right
	Make  right // create
	Edit  right // replace, change, retire, restore

	Table   *domain.Table[T] // gives List and Get where these are nil
	Filters []filter

	List    func(c *call, s domain.Scope, page domain.Page, matches []domain.Match) (rows []T, next string, err error)
	Get     func(c *call, s domain.Scope, id domain.ID) (T, error)
	Create  func(c *call, s domain.Scope, row *T) error
	Update  func(c *call, s domain.Scope, row *T) error // fails with Stale where row's version is not the stored one
	Retire  func(c *call, s domain.Scope, id domain.ID, version int64) (T, error)
	Restore func(c *call, s domain.Scope, id domain.ID, version int64) (T, error)

	// Owner says in which building's transaction a new row is stored, where that is not the path's.
	Owner func(row *T) domain.ID
	// Generated names the fields that Create fills where the client leaves them out, such as a tag: a repeated
	// create that leaves them out too is still the same.
	Generated []string

	columns []projected
}

// head points at the fields of a row that the service sets, of those it has.
type head struct {
	building, id       *domain.ID
	version            *int64
	createdAt, updated *time.Time
	retiredAt          **time.Time
}

func headOf(row any) head {
	switch r := row.(type) {
	case interface{ Head() *domain.Row }:
		h := r.Head()
		return head{&h.BuildingID, &h.ID, &h.Version, &h.CreatedAt, &h.UpdatedAt, &h.RetiredAt}
	case interface{ CatalogueHead() *domain.CatalogueRow }:
		h := r.CatalogueHead()
		return head{nil, &h.ID, &h.Version, &h.CreatedAt, &h.UpdatedAt, &h.RetiredAt}
	}
	panic("api: a resource's row has a domain.Row or a domain.CatalogueRow")
}

// routes returns the lines of the route table for r.
func (r *resource[T]) routes() []route {
	headOf(new(T)) // fails when the program starts, not when it is asked
	r.columns = projectedOf[T]()
	if r.Table != nil && r.List == nil {
		r.List = func(c *call, s domain.Scope, page domain.Page, matches []domain.Match) ([]T, string, error) {
			return r.Table.Page(c.ctx, s, page, matches...)
		}
	}
	if r.Table != nil && r.Get == nil {
		r.Get = func(c *call, s domain.Scope, id domain.ID) (T, error) { return r.Table.Get(c.ctx, s, id) }
	}
	if r.Item == 0 {
		r.Item = r.Scope
	}
	if r.Begin == 0 {
		r.Begin = r.Scope
	}
	one, many := camel(r.One), camel(r.Many)
	item := r.Path + "/{" + r.One + "_id}"
	var out []route
	add := func(has bool, rt route) {
		if has {
			out = append(out, rt)
		}
	}
	add(r.List != nil, route{Method: http.MethodGet, Path: r.Path, Op: "list" + many, Right: r.Read, Scope: r.Scope,
		Handle: r.list, Gives: listMedia, Timeout: -1})
	add(r.Create != nil, route{Method: http.MethodPost, Path: r.Path, Op: "create" + one, Right: r.Make, Scope: r.Begin,
		Handle: r.create, Takes: []string{jsonMedia}})
	add(r.Get != nil, route{Method: http.MethodGet, Path: item, Op: "get" + one, Right: r.Read, Scope: r.Item, Handle: r.get})
	add(r.Update != nil, route{Method: http.MethodPut, Path: item, Op: "replace" + one, Right: r.Edit, Scope: r.Item,
		Handle: r.replace, Takes: []string{jsonMedia}, Match: true})
	add(r.Update != nil, route{Method: http.MethodPatch, Path: item, Op: "change" + one, Right: r.Edit, Scope: r.Item,
		Handle: r.change, Takes: []string{patchMedia}, Match: true})
	add(r.Retire != nil, route{Method: http.MethodPost, Path: item + "/retire", Op: "retire" + one, Right: r.Edit, Scope: r.Item,
		Handle: r.retire})
	add(r.Restore != nil, route{Method: http.MethodPost, Path: item + "/restore", Op: "restore" + one, Right: r.Edit, Scope: r.Item,
		Handle: r.restore})
	return out
}

// camel turns lamp_model into LampModel.
func camel(name string) string {
	var b strings.Builder
	for part := range strings.SplitSeq(name, "_") {
		b.WriteString(strings.ToUpper(part[:1]) + part[1:])
	}
	return b.String()
}

// answer is the reply that shows row, with its tag.
func (r *resource[T]) answer(status int, row *T) reply {
	return reply{status: status, version: *headOf(row).version, body: row}
}

func (r *resource[T]) get(c *call) (reply, error) {
	id, err := c.id(r.One + "_id")
	if err != nil {
		return reply{}, err
	}
	none, err := parseMatch("If-None-Match", c.r.Header["If-None-Match"])
	if err != nil {
		return reply{}, err
	}
	row, err := r.Get(c, c.read(), id)
	if err != nil {
		return reply{}, err
	}
	out := r.answer(http.StatusOK, &row)
	if none.given && none.loose(out.version) {
		return reply{status: http.StatusNotModified, version: out.version}, nil
	}
	return out, nil
}

func (r *resource[T]) create(c *call) (reply, error) {
	asked, err := decode[T](c)
	if err != nil {
		return reply{}, err
	}
	h := headOf(&asked)
	given := !h.id.IsZero()
	if err := c.settle(h, head{}); err != nil {
		return reply{}, err
	}
	if !given {
		*h.id = domain.NewID()
	}
	owner := c.building
	if r.Owner != nil {
		owner = r.Owner(&asked)
	}
	out, err := c.write(owner, func(s domain.Scope) (reply, error) {
		row := asked
		if given {
			if before, err := r.Get(c, s, *headOf(&row).id); err == nil {
				return r.repeated(c, &before, row)
			} else if domain.KindOf(err) != domain.NotFound {
				return reply{}, err
			}
		}
		if err := r.Create(c, s, &row); err != nil {
			return reply{}, err
		}
		return r.created(c, &row), nil
	})
	if given && domain.KindOf(err) == domain.Conflict {
		// Perhaps the same create, sent twice at once: the other one has won.
		s := domain.On(c.s.opt.Pool, owner, c.principal.Actor, c.at)
		if before, gerr := r.Get(c, s, *h.id); gerr == nil {
			return r.repeated(c, &before, asked)
		}
	}
	return out, err
}

func (r *resource[T]) created(c *call, row *T) reply {
	out := r.answer(http.StatusCreated, row)
	out.header = [][2]string{{"Location", strings.TrimSuffix(c.r.URL.Path, "/") + "/" + headOf(row).id.String()}}
	return out
}

// repeated answers a create whose identifier is taken: as the first time where the body is the same, with Conflict
// where it is another.
func (r *resource[T]) repeated(c *call, before *T, asked T) (reply, error) {
	b, a := *before, asked
	was, now := headOf(&b), headOf(&a)
	*now.version, *now.createdAt, *now.updated, *now.retiredAt = *was.version, *was.createdAt, *was.updated, *was.retiredAt
	if now.building != nil {
		*now.building = *was.building
	}
	stored, err := r.comparable(&b, &a)
	if err != nil {
		return reply{}, err
	}
	sent, err := r.comparable(&a, &a)
	if err != nil {
		return reply{}, err
	}
	if !bytes.Equal(stored, sent) {
		return reply{}, domain.Conflictf("this identifier is already taken by another %s", strings.ReplaceAll(r.One, "_", " "))
	}
	return r.created(c, before), nil
}

// comparable is row as JSON with its members in order, without the generated fields that asked leaves out.
func (r *resource[T]) comparable(row, asked *T) ([]byte, error) {
	m, err := members(row)
	if err != nil {
		return nil, err
	}
	given, err := members(asked)
	if err != nil {
		return nil, err
	}
	for _, name := range r.Generated {
		if v, ok := given[name]; !ok || leftOut[string(v)] {
			delete(m, name)
		}
	}
	return json.Marshal(m)
}

// leftOut are the JSON values of a generated field that a client did not send.
var leftOut = map[string]bool{`""`: true, "null": true, "0": true, "false": true, `"00000000-0000-0000-0000-000000000000"`: true}

func members(v any) (map[string]json.RawMessage, error) {
	raw, err := json.Marshal(v)
	if err != nil {
		return nil, err
	}
	var m map[string]json.RawMessage
	return m, json.Unmarshal(raw, &m)
}

// replace answers PUT: the body is the whole record, in the place of the version that If-Match names.
func (r *resource[T]) replace(c *call) (reply, error) {
	asked, err := decode[T](c)
	if err != nil {
		return reply{}, err
	}
	return r.edit(c, func(before T) (T, error) { return asked, nil })
}

// change answers PATCH: an RFC 7396 merge patch of the version that If-Match names.
func (r *resource[T]) change(c *call) (reply, error) {
	body, err := c.body()
	if err != nil {
		return reply{}, err
	}
	if err := checkPatch[T](body); err != nil {
		return reply{}, err
	}
	return r.edit(c, func(before T) (T, error) { return patch(before, body) })
}

func (r *resource[T]) edit(c *call, make func(before T) (T, error)) (reply, error) {
	id, err := c.id(r.One + "_id")
	if err != nil {
		return reply{}, err
	}
	return c.write(c.building, func(s domain.Scope) (reply, error) {
		before, err := r.Get(c, s, id)
		if err != nil {
			return reply{}, err
		}
		was := headOf(&before)
		if err := c.match.check("the record", *was.version); err != nil {
			return reply{}, err
		}
		after, err := make(before)
		if err != nil {
			return reply{}, err
		}
		if err := c.settle(headOf(&after), was); err != nil {
			return reply{}, err
		}
		if err := r.Update(c, s, &after); err != nil {
			return reply{}, err
		}
		return r.answer(http.StatusOK, &after), nil
	})
}

// settle gives a row sent by a client the head it must have: that of the stored row, or that of a new one. What the
// service sets may be left out or sent as it was read; anything else is told.
func (c *call) settle(h, was head) error {
	var bad []domain.Field
	tell := func(name string) {
		bad = append(bad, domain.Field{Pointer: "/" + name, Detail: "is set by the service: leave it out or send it as you read it"})
	}
	if h.building != nil {
		if !h.building.IsZero() && *h.building != c.building {
			bad = append(bad, domain.Field{Pointer: "/building_id", Detail: "must be the building of the address, or be left out"})
		}
		*h.building = c.building
	}
	var zero struct {
		id      domain.ID
		version int64
		at      time.Time
		retired *time.Time
	}
	if was.id == nil { // a new row; its id is the client's to choose
		if id := *h.id; !id.IsZero() && (id[6]>>4 != 7 || id[8]>>6 != 2) {
			bad = append(bad, domain.Field{Pointer: "/id", Detail: "must be a UUIDv7 (RFC 9562), or be left out"})
		}
		was = head{id: h.id, version: &zero.version, createdAt: &zero.at, updated: &zero.at, retiredAt: &zero.retired}
	}
	if *h.id != *was.id && !h.id.IsZero() {
		bad = append(bad, domain.Field{Pointer: "/id", Detail: "must be the identifier of the address, or be left out"})
	}
	if *h.version != 0 && *h.version != *was.version {
		tell("version")
	}
	if !h.createdAt.IsZero() && !h.createdAt.Equal(*was.createdAt) {
		tell("created_at")
	}
	if !h.updated.IsZero() && !h.updated.Equal(*was.updated) {
		tell("updated_at")
	}
	if r := *h.retiredAt; r != nil && (*was.retiredAt == nil || !r.Equal(**was.retiredAt)) {
		tell("retired_at")
	}
	if bad != nil {
		return &domain.Error{Kind: domain.Invalid, Msg: "the body is not valid", Fields: bad}
	}
	*h.id, *h.version, *h.createdAt, *h.updated, *h.retiredAt = *was.id, *was.version, *was.createdAt, *was.updated, *was.retiredAt
	return nil
}

func (r *resource[T]) retire(c *call) (reply, error)  { return r.turn(c, r.Retire, true) }
func (r *resource[T]) restore(c *call) (reply, error) { return r.turn(c, r.Restore, false) }

// turn retires or restores. What is so already is answered as it stands: a repeated write changes nothing.
func (r *resource[T]) turn(c *call, do func(*call, domain.Scope, domain.ID, int64) (T, error), retired bool) (reply, error) {
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
		if (*h.retiredAt != nil) == retired {
			return r.answer(http.StatusOK, &row), nil
		}
		if err := c.match.check("the record", *h.version); err != nil {
			return reply{}, err
		}
		if row, err = do(c, s, id, *h.version); err != nil {
			return reply{}, err
		}
		return r.answer(http.StatusOK, &row), nil
	})
}

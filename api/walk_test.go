package api

import (
	"net/http"
	"os"
	"regexp"
	"slices"
	"strings"
	"testing"

	"lampward/api/apitest"
	"lampward/domain"
	"lampward/domain/access"
	"lampward/domain/domaintest"
)

// street is a yard whose keys are real ones, read from the database, with the same records in both buildings.
type street struct {
	*yard
	records map[domain.ID]map[string]string // building, path parameter, identifier
	shared  map[string]string               // those of the catalogue and the estate
	first   string                          // the key of the first administrator
}

func newStreet(t testing.TB) *street {
	t.Helper()
	y := newYard(t, func(o *Options) { o.Authenticator = NewKeys(o.Pool, o.Clock, o.Log) })
	var first string
	err := domain.In(t.Context(), y.pool, domain.ID{}, domaintest.Tester, now, func(s domain.Scope) (err error) {
		first, err = access.CreateKey(t.Context(), s, &access.Key{Name: "first administrator"}, []access.Grant{{Role: access.Administrator}})
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	y.Client = y.As(first)
	st := &street{yard: y, records: map[domain.ID]map[string]string{}, first: first}
	for _, b := range []domain.ID{buildingA, buildingB} {
		st.records[b] = st.furnish(t, "/v1/buildings/"+b.String(), "1")
	}
	idOf := func(path string, body map[string]any) string {
		return y.Post(path, body).Want(201).Object()["id"].(string)
	}
	idOf("/v1/hues", map[string]any{"name": "amber"})
	person := idOf("/v1/persons", map[string]any{"name": "An invented person"})
	m := y.models
	st.shared = map[string]string{
		"lamp_model_id": m.LED7.ID.String(), "driver_model_id": m.Electronic105.ID.String(), "dimmer_model_id": m.LeadingEdge.ID.String(),
		"fixture_model_id": m.Downlight.ID.String(), "person_id": person,
		"space_use_id": idOf("/v1/space_uses", map[string]any{"use": "reading room"}),
		"pairing_id":   idOf("/v1/pairings", map[string]any{"lamp_model_id": m.LED7.ID.String(), "driver_model_id": m.Electronic60.ID.String(), "stated_by": "an invented list"}),
		"price_id":     idOf("/v1/prices", map[string]any{"model_kind": "lamp", "model_id": m.LED7.ID.String(), "from_date": "2026-01-01", "amount": "4.50", "currency": "EUR"}),
		"grant_id":     idOf("/v1/grants", map[string]any{"person_id": person, "role": "viewer"}),
		"key_id":       y.Get("/v1/keys").Want(200).Object()["items"].([]any)[0].(map[string]any)["id"].(string),
	}
	return st
}

// furnish records one of everything in a building: a dimmed electronic transformer (35 to 105 W) that feeds a halogen lamp
// swapped for a 7 W LED, so that there are findings. n, a digit, tells the records of several calls apart.
func (s *street) furnish(t testing.TB, at, n string) map[string]string {
	t.Helper()
	post := func(path string, body map[string]any) map[string]any {
		t.Helper()
		return s.Post(at+path, body).Want(201).Object()
	}
	m, r := s.models, map[string]string{}
	make := func(param, path string, body map[string]any) { t.Helper(); r[param] = post(path, body)["id"].(string) }
	make("space_id", "/spaces", map[string]any{"name": "Hall " + n, "level": "0"})
	make("circuit_id", "/circuits", map[string]any{"board": "DB1", "way": n})
	make("dimmer_id", "/dimmers", map[string]any{"dimmer_model_id": m.LeadingEdge.ID.String(), "fed_by_circuit_id": r["circuit_id"]})
	make("driver_id", "/drivers", map[string]any{"driver_model_id": m.Electronic105.ID.String(), "fed_by_circuit_id": r["circuit_id"]})
	make("fixture_id", "/fixtures", map[string]any{"space_id": r["space_id"], "fed_by_place_id": r["driver_id"], "gear": "remote", "fixture_model_id": m.Downlight.ID.String(),
		"lamp_model_id": m.Halogen35.ID.String(), "lamp_count": 1, "emergency_mode": "maintained"})
	r["place_id"] = r["fixture_id"]
	make("control_id", "/controls", map[string]any{"dimmer_id": r["dimmer_id"], "place_id": r["driver_id"], "path": "power_path"})
	make("feed_id", "/feeds", map[string]any{"place_id": r["fixture_id"], "from_circuit_id": r["circuit_id"], "purpose": "permanent_live", "input": "L2"})
	make("make_up_id", "/make_ups", map[string]any{"name": "Single " + n, "fixture_model_id": m.Downlight.ID.String(), "gear": "remote", "lamp_count": 1})
	make("rate_id", "/rates", map[string]any{"rate": "energy_per_kwh", "from_date": "2026-01-0" + n, "amount": "0.31", "currency": "EUR"})
	swap := map[string]any{"part": "lamp", "holder": 1, "model_id": m.LED7.ID.String(), "done_at": "2026-02-01T10:00:00Z"}
	r["unit_id"] = s.Post(at+"/places/"+r["place_id"]+"/swap", swap).Want(200).Object()["unit"].(map[string]any)["id"].(string)
	make("failure_id", "/failures", map[string]any{"place_id": r["place_id"], "part": "lamp", "holder": 1, "mode": "flicker", "noticed_at": "2026-02-20T09:00:00Z"})
	make("emergency_test_id", "/emergency_tests", map[string]any{"place_id": r["place_id"], "test": "function", "tested_at": "2026-02-20T09:00:00Z", "passed": true})
	make("trip_id", "/trips", map[string]any{"circuit_id": r["circuit_id"], "tripped_at": "2026-02-20T09:00:00Z"})
	make("beacon_id", "/beacons", map[string]any{"tag": "B" + n, "lit": true, "seen_at": "2026-02-01T00:00:00Z"})
	r["finding_id"] = s.Get(at + "/findings?waived=false").Want(200).Object()["items"].([]any)[0].(map[string]any)["id"].(string)
	waived := post("/waivers", map[string]any{"finding_ids": []any{r["finding_id"]}, "why": "to be replaced", "until": "2026-06-30"})
	r["waiver_id"] = waived["items"].([]any)[0].(map[string]any)["id"].(string)
	return r
}

// address fills the parameters of an operation's path: the building, and records of the building in which they are.
// whole is false where the street has no record of a kind that the path names.
func (s *street) address(o apitest.Operation, building, records domain.ID) (at string, items int, whole bool) {
	whole = true
	at = regexp.MustCompile(`\{(\w+)\}`).ReplaceAllStringFunc(o.Path, func(param string) string {
		name := param[1 : len(param)-1]
		if name == "building_id" {
			return building.String()
		}
		items++
		if id, there := s.records[records][name]; there && o.Scope == "building" {
			return id
		}
		if id, there := s.shared[name]; there {
			return id
		}
		whole = false
		return "01999999-9999-7999-8999-999999999999"
	})
	return at, items, whole
}

// key makes a real key with the given grants.
func (s *street) key(grants ...map[string]any) string {
	return s.Post("/v1/keys", map[string]any{"name": "walker", "grants": grants}).Want(201).Object()["secret"].(string)
}

// statedRights reads who has which right from the table of the contract's description, so that the walk holds the program
// against what its users are told and not against itself.
func statedRights(t *testing.T) map[string]map[string]bool {
	t.Helper()
	doc, err := os.ReadFile("../openapi.yaml")
	if err != nil {
		t.Fatal(err)
	}
	cells := func(line string) []string {
		parts := strings.Split(strings.Trim(strings.TrimSpace(line), "|"), "|")
		for i := range parts {
			parts[i] = strings.TrimSpace(parts[i])
		}
		return parts
	}
	lines := strings.Split(string(doc), "\n")
	head := slices.IndexFunc(lines, func(l string) bool { return strings.HasPrefix(strings.TrimSpace(l), "| right |") })
	if head < 0 {
		t.Fatal("the contract does not say who has which right")
	}
	names, out := cells(lines[head])[1:], map[string]map[string]bool{}
	for _, line := range lines[head+2:] {
		if !strings.HasPrefix(strings.TrimSpace(line), "|") {
			break
		}
		row := cells(line)
		out[row[0]] = map[string]bool{}
		for i, v := range row[1:] {
			out[row[0]][names[i]] = v == "yes"
		}
	}
	if len(out) != int(rights)-1 || len(names) != int(roles) {
		t.Fatalf("the contract knows %d rights and %d roles, the program %d and %d", len(out), len(names), rights-1, roles)
	}
	return out
}

// TestWalk sends every operation of the contract, under a real key of every role on one building and on all of them, to
// that building and to another one. An answer in no acceptable form is only refused as such (406) to those who may.
func TestWalk(t *testing.T) {
	t.Parallel()
	s := newStreet(t)
	stated := statedRights(t)
	type walker struct {
		what, key, role string
		on, everywhere  bool // has the role on building A; on all
	}
	bare := s.Post("/v1/keys", map[string]any{"name": "walker", "person_id": s.shared["person_id"], "grants": []any{}}).Want(201).Object()["secret"].(string)
	s.Post("/v1/grants/"+s.shared["grant_id"]+"/withdraw", nil).Want(200) // the person's only one
	walkers := []walker{{what: "nobody", key: bare}}
	for _, role := range roleNames {
		walkers = append(walkers,
			walker{role + " of one building", s.key(map[string]any{"role": role, "building_id": buildingA.String()}), role, true, false},
			walker{role + " of all", s.key(map[string]any{"role": role}), role, true, true})
	}
	for _, o := range contract().Operations() {
		if o.Public {
			continue
		}
		for _, target := range []domain.ID{buildingA, buildingB} {
			at, _, _ := s.address(o, target, target)
			for _, w := range walkers {
				want := http.StatusNotAcceptable
				switch {
				case o.Scope == "building" && !w.everywhere && !(w.on && target == buildingA):
					want = http.StatusNotFound
				case !stated[o.Right][w.role], o.Scope == "estate" && !w.everywhere:
					want = http.StatusForbidden
				}
				if got := s.As(w.key).Do(o.Method, at, nil, "Accept: image/x-none").Status; got != want {
					t.Errorf("%s: %s at %s was answered %d, want %d", o.ID, w.what, at, got, want)
				}
			}
		}
	}
}

// TestReadersSeeTheirBuilding reads everything there is with a real key of the smallest role: all of the own building is
// answered, nothing of another one, and no shared list names it.
func TestReadersSeeTheirBuilding(t *testing.T) {
	t.Parallel()
	s := newStreet(t)
	reader := s.As(s.key(map[string]any{"role": "viewer", "building_id": buildingA.String()}))
	for _, o := range contract().Operations() {
		if o.Public || o.Method != http.MethodGet || o.Right != "read" {
			continue
		}
		own, _, whole := s.address(o, buildingA, buildingA)
		if !whole {
			t.Errorf("%s: the walk has no record to read at %s; add one to furnish", o.ID, own)
			continue
		}
		a := reader.Get(own)
		switch {
		case a.Status == http.StatusUnprocessableEntity: // it needs a parameter
		case a.Status != http.StatusOK:
			t.Errorf("%s: %s was answered %d", o.ID, own, a.Status)
		case strings.Contains(string(a.Body), buildingB.String()) || strings.Contains(string(a.Body), "YARD-B"):
			t.Errorf("%s shows another building: %s", o.ID, a.Body)
		}
		if o.Scope == "building" {
			other, _, _ := s.address(o, buildingB, buildingB)
			reader.Get(other).Want(http.StatusNotFound)
		}
	}
}

// TestRecordsStayInTheirBuilding takes a key that may do everything everywhere and names records of one building under the
// address of another: there are none, whatever is asked, and nothing is stored in either.
func TestRecordsStayInTheirBuilding(t *testing.T) {
	t.Parallel()
	s := newStreet(t)
	trail := func() string {
		var b strings.Builder
		for _, id := range []domain.ID{buildingA, buildingB} {
			b.Write(s.Get("/v1/buildings/" + id.String() + "/audit?limit=1000").Want(200).Body)
		}
		return b.String()
	}
	before := trail()
	for _, o := range contract().Operations() {
		if o.Scope != "building" {
			continue
		}
		at, items, whole := s.address(o, buildingA, buildingB)
		if items == 0 || !whole {
			continue
		}
		var body any
		headers := []string{"If-Match: *"}
		want := []int{http.StatusNotFound}
		switch {
		case o.Method == http.MethodGet:
			headers = nil
		case o.Method == http.MethodPatch:
			body = "{}"
		case len(o.BodyMedia()) > 0:
			body = "{}"
			want = append(want, http.StatusUnprocessableEntity) // the body is read first
		}
		if got := s.Do(o.Method, at, body, headers...).Status; !slices.Contains(want, got) {
			t.Errorf("%s: a record of another building was answered %d at %s", o.ID, got, at)
		}
	}

	// Nor may a record of one building point to one of another.
	b := s.records[buildingB]
	for _, k := range []struct {
		path string
		body map[string]any
	}{
		{"/circuits", map[string]any{"board": "DB9", "way": "9", "space_id": b["space_id"]}},
		{"/dimmers", map[string]any{"space_id": b["space_id"]}},
		{"/drivers", map[string]any{"fed_by_circuit_id": b["circuit_id"]}},
		{"/fixtures", map[string]any{"fed_by_place_id": b["driver_id"]}},
		{"/fixtures", map[string]any{"make_up_id": b["make_up_id"]}},
		{"/feeds", map[string]any{"place_id": b["fixture_id"], "from_circuit_id": s.records[buildingA]["circuit_id"], "purpose": "normal"}},
		{"/feeds", map[string]any{"place_id": s.records[buildingA]["fixture_id"], "from_circuit_id": b["circuit_id"], "purpose": "normal"}},
		{"/controls", map[string]any{"dimmer_id": b["dimmer_id"], "place_id": s.records[buildingA]["driver_id"], "path": "signal"}},
		{"/controls", map[string]any{"dimmer_id": s.records[buildingA]["dimmer_id"], "place_id": b["driver_id"], "path": "signal"}},
		{"/make_ups/" + s.records[buildingA]["make_up_id"] + "/put", map[string]any{"count": 1, "circuit_id": b["circuit_id"]}},
		{"/make_ups/" + s.records[buildingA]["make_up_id"] + "/put", map[string]any{"count": 1, "space_id": b["space_id"]}},
		{"/failures", map[string]any{"place_id": b["place_id"], "part": "lamp", "mode": "dark", "noticed_at": "2026-02-20T09:00:00Z"}},
		{"/emergency_tests", map[string]any{"place_id": b["place_id"], "test": "function", "tested_at": "2026-02-21T09:00:00Z", "passed": true}},
		{"/trips", map[string]any{"circuit_id": b["circuit_id"], "tripped_at": "2026-02-20T09:00:00Z"}},
		{"/waivers", map[string]any{"finding_ids": []any{b["finding_id"]}, "why": "x", "until": "2026-06-30"}},
		{"/places/" + b["place_id"] + "/swap", map[string]any{"part": "lamp", "model_id": s.models.LED7.ID.String(), "done_at": "2026-02-21T10:00:00Z"}},
	} {
		if got := s.Post(atA+k.path, k.body); got.Status < 400 || got.Status >= 500 {
			t.Errorf("%s %v was answered %d: %s", k.path, k.body, got.Status, got.Body)
		}
	}
	if trail() != before {
		t.Error("what was refused is in the audit")
	}
}

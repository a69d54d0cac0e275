package api

import (
	"context"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"net/url"
	"strings"
	"sync"
	"testing"
	"time"

	"lampward/api/apitest"
	"lampward/calc/loading"
	"lampward/domain"
	"lampward/domain/access"
	"lampward/domain/domaintest"
	"lampward/domain/review"
	"lampward/domain/site"
)

// yard is a bench with two invented buildings on record, an invented catalogue, and a key for each role on the first.
type yard struct {
	*bench
	models domaintest.Models
}

const atA = "/v1/buildings/01000000-0000-7000-8000-00000000000a"

func newYard(t testing.TB, set ...func(*Options)) *yard {
	t.Helper()
	b := dbBench(t, append([]func(*Options){func(o *Options) {
		o.BuildingExists = func(ctx context.Context, id domain.ID) (bool, error) { return site.Exists(ctx, o.Pool, id) }
	}}, set...)...)
	ctx := context.Background()
	for id, code := range map[domain.ID]string{buildingA: "YARD-A", buildingB: "YARD-B"} {
		row := site.Building{Code: code, Name: "Invented building " + code, TimeZone: "Europe/Dublin",
			Supply: loading.Supply{MainsV: domaintest.Of(230.0), MainsHz: domaintest.Of(50.0), WiringRules: loading.IEC60364}}
		err := domain.In(ctx, b.pool, id, domaintest.Tester, now.AddDate(-1, 0, 0), func(s domain.Scope) error { return site.CreateBuilding(ctx, s, &row) })
		if err != nil {
			t.Fatal(err)
		}
	}
	return &yard{b, domaintest.Catalogue(t, b.pool)}
}

// post records something in building A and returns its identifier.
func (y *yard) post(t testing.TB, path string, body map[string]any) string {
	t.Helper()
	return y.Post(atA+path, body).Want(201).Object()["id"].(string)
}

func TestBuildings(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	admin := y.As("all")
	body := map[string]any{"code": "B1", "name": "Invented hall", "time_zone": "Europe/Vienna", "mains_v": 230.0, "mains_hz": 50.0,
		"wiring_rules": "iec_60364", "address": "1 Invented Street\nNowhere", "note": "made up"}
	apitest.Exercise(t, admin, apitest.Kind{List: "/v1/buildings", Body: body, Change: map[string]any{"name": "Another hall", "mains_v": 240.0},
		Wrong: map[string]any{"time_zone": "Nowhere/City"}, Retire: true, Unique: "code", Kept: true})

	// Each sees the buildings they have a grant on.
	if got := y.Get("/v1/buildings").Want(200).Object()["items"].([]any); len(got) != 1 || got[0].(map[string]any)["code"] != "YARD-A" {
		t.Errorf("the planner of one building sees %v", got)
	}
	y.As("nobody").Get("/v1/buildings").Want(403)
	bad := admin.Post("/v1/buildings", map[string]any{"code": "two words", "name": "", "time_zone": "Local", "mains_v": 1e6, "mains_hz": -50, "wiring_rules": "mine"}).Want(422)
	if got := strings.Join(bad.Pointers(), " "); got != "/code /mains_hz /mains_v /name /time_zone /wiring_rules" {
		t.Errorf("wrong fields told at %s", got)
	}
	// A building with places in it stays.
	y.post(t, "/fixtures", map[string]any{"tag": "L1"})
	y.Post(atA+"/retire", nil).Want(409)

	// Nothing is put into one that is out of use, nor is it changed.
	gone := admin.Post("/v1/buildings", map[string]any{"code": "B7", "name": "Invented shed", "time_zone": "Europe/Vienna"}).Want(201).Header.Get("Location")
	admin.Post(gone+"/retire", nil).Want(200)
	admin.Post(gone+"/fixtures", map[string]any{"tag": "L1"}).Want(409)
	admin.Patch(gone, `{"name":"Invented barn"}`, "If-Match: *").Want(409)
	admin.Post(gone+"/restore", nil).Want(200)
	admin.Post(gone+"/fixtures", map[string]any{"tag": "L1"}).Want(201)

	fourth := map[string]any{"id": "0191b3b5-cbcd-4d59-9a8a-7fb6e2d2a5a9", "code": "B8", "name": "x", "time_zone": "UTC"}
	if got := strings.Join(admin.Post("/v1/buildings", fourth).Want(422).Pointers(), " "); got != "/id" {
		t.Errorf("an identifier of another version is refused at %s", got)
	}

	admin.Patch("/v1/lamp_models/"+y.models.LED7.ID.String(), `{"power_w":6.5}`, "If-Match: *").Want(200) // owes a review everywhere
	all := admin.Get("/v1/summary").Want(200).Object()
	if len(all["buildings"].([]any)) < 2 || all["pending"] != true {
		t.Errorf("summary %v", all)
	}
	own := y.Get("/v1/summary").Want(200).Object()
	if own["luminaires"] != 1.0 || own["reviews_pending"].(float64) < 1 || own["coverage"].(map[string]any)["places"] != 1.0 {
		t.Errorf("one luminaire and the review of a changed model: %v", own)
	}
	if own := y.Get("/v1/summary").Want(200).Object()["buildings"].([]any); len(own) != 1 {
		t.Errorf("the planner's summary has %d buildings", len(own))
	}
	y.Get("/v1/summary?x=1").Want(422)
	y.As("nobody").Get("/v1/summary").Want(403)
}

// TestRetiringWhilePlacesArrive holds that a building goes out of use empty, whoever was putting a place there meanwhile.
func TestRetiringWhilePlacesArrive(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	admin := y.As("all")
	for round := range 8 {
		at := admin.Post("/v1/buildings", map[string]any{"code": fmt.Sprint("R", round), "name": "Invented shed", "time_zone": "Europe/Vienna"}).Want(201).Header.Get("Location")
		var wg sync.WaitGroup
		for range 3 {
			wg.Go(func() {
				if a := admin.Post(at+"/fixtures", map[string]any{}); a.Status != 201 && a.Status != 409 {
					t.Errorf("answered %d: %s", a.Status, a.Body)
				}
			})
		}
		wg.Go(func() {
			if a := admin.Post(at+"/retire", nil); a.Status != 200 && a.Status != 409 {
				t.Errorf("answered %d: %s", a.Status, a.Body)
			}
		})
		wg.Wait()
		places := len(admin.Get(at + "/fixtures").Want(200).Object()["items"].([]any))
		retired := admin.Get(at).Want(200).Object()["retired_at"] != nil
		if retired != (places == 0) {
			t.Errorf("%d places arrived and the building is retired: %t", places, retired)
		}
	}
}

func TestRates(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	apitest.Exercise(t, y.Client, apitest.Kind{List: atA + "/rates",
		Body:   map[string]any{"rate": "energy_per_kwh", "from_date": "2026-01-01", "amount": "0.31", "currency": "EUR", "source": "invented"},
		Change: map[string]any{"amount": "0.29"}, Wrong: map[string]any{"amount": "-1"}, Retire: true, Unique: "from_date", Values: []any{"2026-02-01", "2026-03-01"}})
}

func TestSpaceUses(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	apitest.Exercise(t, y.As("all"), apitest.Kind{List: "/v1/space_uses",
		Body:   map[string]any{"use": "reading room", "yearly_hours": 3600.0, "required_lx": 500.0, "source": "invented"},
		Change: map[string]any{"yearly_hours": 3000.0}, Wrong: map[string]any{"yearly_hours": 9000}, Retire: true, Unique: "use"})
}

func TestModels(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	admin := y.As("all")
	for one, kind := range map[string]apitest.Kind{
		"lamp_model": {Body: map[string]any{"code": "X1", "name": "Invented lamp", "technology": "led_lamp", "cap": "GU5.3", "supply": "elv_ac_dc", "rated_v": 12.0,
			"power_w": 5.5, "dimming": []string{}, "also_known_as": []string{"X-1"}, "provisional": false},
			Change: map[string]any{"power_w": 6.0, "dimming": []string{"trailing_edge"}}, Wrong: map[string]any{"power_w": -1}},
		"driver_model": {Body: map[string]any{"code": "X1", "name": "Invented gear", "kind": "electronic_transformer", "output_form": "hf_ac", "output_v": 11.8,
			"min_load_w": 20.0, "max_load_w": 105.0, "derating": []any{map[string]any{"air_c": 40.0, "share_pct": 100.0}, map[string]any{"air_c": 60.0, "share_pct": 50.0}}, "provisional": false},
			Change: map[string]any{"max_load_w": 120.0}, Wrong: map[string]any{"min_load_w": 500}},
		"dimmer_model": {Body: map[string]any{"code": "X1", "name": "Invented dimmer", "kind": "leading_edge", "marking": "RL", "min_load_w": 40.0, "max_load_w": 400.0, "provisional": false},
			Change: map[string]any{"marking": "RLC"}, Wrong: map[string]any{"marking": "RX"}},
		"fixture_model": {Body: map[string]any{"code": "X1", "name": "Invented downlight", "holders": 1, "cap": "GU5.3", "gear": "remote", "class": "III", "ip": "IP20", "provisional": false},
			Change: map[string]any{"ip": "IP65"}, Wrong: map[string]any{"ip": "65"}},
	} {
		kind.List, kind.Retire, kind.Unique = "/v1/"+one+"s", true, "code"
		at := apitest.Exercise(t, admin, kind)
		list := kind.List

		// Crew add what is on the box; it stays provisional until a planner confirms it, whatever was sent.
		crew := map[string]any{"code": "BOX-1", "name": "From the box", "provisional": false}
		made := y.As("crew").Post(list, crew).Want(201)
		box := made.Header.Get("Location")
		if made.Object()["provisional"] != true {
			t.Errorf("%s: crew made a confirmed model: %s", one, made.Body)
		}
		admin.Post(list, map[string]any{"code": "BOX-9", "name": "x", "merged_into": at[len(list)+1:]}).Want(422)
		y.As("crew").Patch(box, `{"name":"Mine"}`, "If-Match: *").Want(403)
		y.Patch(box, `{"name":"Completed"}`, "If-Match: *").Want(200)
		y.Post(box+"/confirm", nil, `If-Match: "v99"`).Want(412)
		y.Post(box+"/confirm", nil).Want(200)
		y.Post(box+"/confirm", nil).Want(409)
		y.Patch(box, `{"name":"Changed by a planner"}`, "If-Match: *").Want(403)
		y.Post(box+"/retire", nil).Want(403)
		admin.Post(box+"/retire", nil).Want(200)
		y.Post(box+"/restore", nil).Want(403)
		admin.Post(box+"/restore", nil).Want(200)

		// Another box of the same is merged into it: uses follow.
		twin := y.As("crew").Post(list, map[string]any{"code": "BOX-2", "name": "The same"}).Want(201)
		into := map[string]any{"into": box[len(list)+1:]}
		y.Post(twin.Header.Get("Location")+"/merge", into, `If-Match: "v99"`).Want(412)
		y.Post(twin.Header.Get("Location")+"/merge", map[string]any{}).Want(422)
		y.Post(twin.Header.Get("Location")+"/merge", map[string]any{"into": "01999999-9999-7999-8999-999999999998"}).Want(422)
		merged := y.Post(twin.Header.Get("Location")+"/merge", into).Want(200).Object()
		if merged["merged_into"] != into["into"] || merged["retired_at"] == nil {
			t.Errorf("%s merged as %v", one, merged)
		}
		y.Post(twin.Header.Get("Location")+"/merge", into).Want(409)
		admin.Post(twin.Header.Get("Location")+"/restore", nil).Want(409)
		admin.Patch(twin.Header.Get("Location"), `{"note":"x"}`, "If-Match: *").Want(409)
		if got := admin.Patch(box, map[string]any{"merged_into": at[len(list)+1:]}, "If-Match: *").Want(422).Pointers(); strings.Join(got, " ") != "/merged_into" {
			t.Errorf("%s: merging by a change is refused at %v", one, got)
		}
		y.Post(box+"/merge", map[string]any{"into": at[len(list)+1:]}).Want(403) // confirmed: not a planner's to merge away
		absent := list + "/01999999-9999-7999-8999-999999999999"
		y.Post(absent+"/confirm", nil).Want(404)
		y.Post(absent+"/merge", into).Want(404)
		y.Get(absent + "/uses").Want(404)
		y.Get(box + "/uses?limit=0").Want(422)
		y.Get(box + "/uses?limit=%zz").Want(400)
		if got := y.Get(box + "/uses").Want(200).Object()["items"].([]any); len(got) != 0 {
			t.Errorf("%s is used by %v", one, got)
		}
	}

	// What is printed on the box finds the model, under whichever of its codes.
	for code, want := range map[string]int{"X1": 1, "X-1": 3 /* Exercise made three of them */, "X-": 0, "x1": 0, "BOX-1": 1, "' OR true --": 0} {
		got := y.Get("/v1/lamp_models?known_as=" + url.QueryEscape(code)).Want(200).Object()["items"].([]any)
		if len(got) != want {
			t.Errorf("known as %s: %v, want %d", code, got, want)
		}
	}

	// Uses, over two pages, also under the id that was merged.
	lamp := y.models.Halogen35.ID.String()
	for _, tag := range []string{"L1", "L2", "L3"} {
		y.post(t, "/fixtures", map[string]any{"tag": tag, "lamp_model_id": lamp, "lamp_count": 1})
	}
	first := y.Get("/v1/lamp_models/" + lamp + "/uses?limit=2").Want(200)
	if got := first.Object()["items"].([]any); len(got) != 2 {
		t.Errorf("%d uses on the first page", len(got))
	}
	link := first.Header.Get("Link")
	second := y.Get(strings.TrimSuffix(strings.TrimPrefix(link, "<"), `>; rel="next"`)).Want(200)
	if got := second.Object()["items"].([]any); len(got) != 1 || got[0].(map[string]any)["tag"] != "L3" || second.Header.Get("Link") != "" {
		t.Errorf("second page %s", second.Body)
	}
	y.Get("/v1/lamp_models/" + lamp + "/uses?cursor=nonsense").Want(422)
}

func TestPairingsAndPrices(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	admin := y.As("all")
	apitest.Exercise(t, admin, apitest.Kind{List: "/v1/pairings",
		Body: map[string]any{"lamp_model_id": y.models.LED7.ID.String(), "driver_model_id": y.models.Electronic60.ID.String(), "least_lamps": 3, "most_lamps": 6,
			"stated_by": "an invented list", "stated_on": "2026-01-15"},
		Change: map[string]any{"most_lamps": 5}, Wrong: map[string]any{"most_lamps": 1}, Retire: true, Unique: "lamp_model_id",
		Values: []any{y.models.Halogen35.ID.String(), y.models.MainsLED9.ID.String()}})
	apitest.Exercise(t, y.Client, apitest.Kind{List: "/v1/prices",
		Body:   map[string]any{"model_kind": "lamp", "model_id": y.models.LED7.ID.String(), "from_date": "2026-01-01", "amount": "4.50", "currency": "EUR"},
		Change: map[string]any{"amount": "4.75"}, Wrong: map[string]any{"currency": "euro"}, Retire: true, Unique: "from_date", Values: []any{"2026-02-01", "2026-03-01"}})
}

// TestCatalogueChangesOweReviews holds that a change of the catalogue asks for a review of what holds the record now and
// of what held it before, that what changes no judgement asks for none, and that a model which does not exist is told.
func TestCatalogueChangesOweReviews(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	admin := y.As("all")
	reviewer := review.New()
	owed := func(what string, want int) {
		t.Helper()
		due, _, err := review.Pending(t.Context(), y.pool, now)
		if err != nil {
			t.Fatal(err)
		}
		if due != want {
			t.Errorf("%s: %d reviews are owed, want %d", what, due, want)
		}
		for more := true; more; {
			if more, err = reviewer.DrainOne(t.Context(), y.pool, func() time.Time { return now }); err != nil {
				t.Fatal(err)
			}
		}
	}
	owed("models that nothing holds yet", 0)
	m := y.models
	pairing := admin.Post("/v1/pairings", map[string]any{"lamp_model_id": m.LED7.ID.String(), "driver_model_id": m.Electronic60.ID.String(), "stated_by": "an invented list"}).
		Want(201).Header.Get("Location")
	owed("a new pairing", 1)
	admin.Patch(pairing, map[string]any{"lamp_model_id": m.LED7DC.ID.String()}, "If-Match: *").Want(200)
	owed("a pairing of another lamp", 2)
	admin.Patch(pairing, `{"note":"seen"}`, "If-Match: *").Want(200)
	owed("a pairing of the same lamp", 1)
	use := admin.Post("/v1/space_uses", map[string]any{"use": "reading room", "yearly_hours": 3600.0}).Want(201).Header.Get("Location")
	owed("a new use", 1)
	admin.Patch(use, `{"yearly_hours":2000}`, "If-Match: *").Want(200)
	owed("other hours of a use", 1)
	admin.Patch(use, `{"required_lx":300}`, "If-Match: *").Want(200)
	owed("other light of a use", 0)
	price := map[string]any{"model_kind": "lamp", "model_id": m.LED7.ID.String(), "from_date": "2026-01-01", "amount": "4.50", "currency": "EUR"}
	y.Post("/v1/prices", price).Want(201)
	owed("a price", 0)

	// What is named must be there, and be of that kind.
	price["model_id"] = m.Electronic60.ID.String()
	if got := y.Post("/v1/prices", price).Want(422).Pointers(); strings.Join(got, " ") != "/model_id" {
		t.Errorf("the price of a driver among lamps is refused at %v", got)
	}
	lost := "01999999-9999-7999-8999-999999999999"
	bad := admin.Post("/v1/pairings", map[string]any{"lamp_model_id": lost, "driver_model_id": lost, "dimmer_model_id": m.LeadingEdge.ID.String(), "stated_by": "x"}).Want(422)
	if got := strings.Join(bad.Pointers(), " "); got != "/driver_model_id /lamp_model_id" {
		t.Errorf("a pairing of nothing is refused at %s", got)
	}
	admin.Post("/v1/fixture_models", map[string]any{"code": "F9", "name": "x", "gear": "integral", "driver_model_id": lost}).Want(422)
	owed("what was refused", 0)
}

func TestHolders(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	admin := y.As("all")
	at := apitest.Exercise(t, admin, apitest.Kind{List: "/v1/persons", Body: map[string]any{"name": "An invented person", "email": "ann@example.org"},
		Change: map[string]any{"email": "bea@example.org"}, Wrong: map[string]any{"email": "not an address"}, Retire: true})
	person := at[len("/v1/persons/"):]
	admin.Post(at+"/restore", nil).Want(200)

	asked := map[string]any{"name": "board reader", "person_id": person, "expires_at": "2027-01-01T00:00:00Z",
		"grants": []any{map[string]any{"role": "integrator", "building_id": buildingA.String(), "until": "2026-12-01T00:00:00Z"}}}
	made := admin.Post("/v1/keys", asked, "Idempotency-Key: one").Want(201)
	secret := made.Object()["secret"].(string)
	if again := admin.Post("/v1/keys", asked, "Idempotency-Key: one").Want(201); string(again.Body) != string(made.Body) {
		t.Error("a repeat makes another key")
	}
	// What is kept for the repeat is no use to who reads the database.
	body, err := json.Marshal(asked)
	if err != nil {
		t.Fatal(err)
	}
	sum := sha256.Sum256(append([]byte("/v1/keys\x00"), body...))
	kept, err := access.Recall(t.Context(), domain.On(y.pool, domain.ID{}, domaintest.Tester, now),
		access.Retry{Principal: testKeys["all"].String(), Route: "createKey", Key: "one", Hash: sum[:]})
	if err != nil || kept == nil || strings.Contains(string(kept.Body), secret) || strings.Contains(string(kept.Body), "lwk_") {
		t.Errorf("kept as %v (%v)", kept, err)
	}
	y.As("all again").Post("/v1/keys", asked, "Idempotency-Key: one").Want(409) // the same holder under another credential
	admin.Post("/v1/keys", asked, "Idempotency-Key: two words").Want(400)
	admin.Post("/v1/keys", map[string]any{"name": "nothing", "grants": []any{}}).Want(422)
	key := made.Header.Get("Location")
	if strings.Contains(string(admin.Get("/v1/keys").Want(200).Body), secret) || strings.Contains(string(admin.Get(key).Want(200).Body), secret) {
		t.Error("the secret is shown again")
	}
	tag := admin.Get(key).ETag()
	admin.Get(key, "If-None-Match: "+tag).Want(304)
	admin.Get(key, "If-None-Match: v1").Want(400)
	admin.Get("/v1/keys/01999999-9999-7999-8999-999999999999").Want(404)
	admin.Get("/v1/keys?person_id=7").Want(422)
	admin.Get("/v1/keys?person_id=%zz").Want(400)

	grants := admin.Get("/v1/grants?building_id=" + buildingA.String()).Want(200).Object()["items"].([]any)
	if len(grants) != 1 {
		t.Fatalf("grants %v", grants)
	}
	grant := map[string]any{"person_id": person, "role": "planner", "building_id": buildingB.String()}
	own := map[string]any{"id": "01999999-9999-7999-8999-00000000000c", "person_id": person, "role": "crew"}
	one := admin.Post("/v1/grants", grant).Want(201)
	admin.Post("/v1/grants", own).Want(201)
	own["role"] = "viewer"
	admin.Post("/v1/grants", own).Want(409)
	admin.Post("/v1/grants", grant, "Idempotency-Key: two words").Want(400)
	admin.Post("/v1/grants", map[string]any{"person_id": person, "role": "owner"}).Want(422)
	admin.Post("/v1/grants", map[string]any{"person_id": person, "role": "crew", "building_id": "01999999-9999-7999-8999-999999999999"}).Want(422)
	g := one.Header.Get("Location")
	admin.Get(g, "If-None-Match: "+one.ETag()).Want(304)
	admin.Get(g).Want(200)
	admin.Get(g, "If-None-Match: v1").Want(400)
	admin.Get("/v1/grants/01999999-9999-7999-8999-999999999999").Want(404)
	admin.Get("/v1/grants?person_id=%zz").Want(400)
	admin.Get("/v1/grants?role=crew").Want(422)
	for _, rec := range []string{key, g} {
		admin.Post(rec+"/withdraw", nil, `If-Match: "v99"`).Want(412)
		ended := admin.Post(rec+"/withdraw", nil).Want(200)
		if again := admin.Post(rec+"/withdraw", nil).Want(200); string(again.Body) != string(ended.Body) || ended.Object()["retired_at"] == nil {
			t.Errorf("withdrawn as %s, again %s", ended.Body, again.Body)
		}
	}
	admin.Post("/v1/keys/01999999-9999-7999-8999-999999999999/withdraw", nil).Want(404)
	admin.Post("/v1/grants/01999999-9999-7999-8999-999999999999/withdraw", nil).Want(404)
}

// TestKeysOverHTTP holds that a key made over the interface opens what it was granted, and nothing ten seconds after it was
// withdrawn.
func TestKeysOverHTTP(t *testing.T) {
	t.Parallel()
	at := now
	clock := func() time.Time { return at }
	y := newYard(t, func(o *Options) { o.Clock, o.Authenticator = clock, NewKeys(o.Pool, clock, o.Log) })
	var first string
	err := domain.In(t.Context(), y.pool, domain.ID{}, domaintest.Tester, now, func(s domain.Scope) (err error) {
		first, err = access.CreateKey(t.Context(), s, &access.Key{Name: "first administrator"}, []access.Grant{{Role: access.Administrator}})
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	admin := y.As(first)
	made := admin.Post("/v1/keys", map[string]any{"name": "board reader", "grants": []any{map[string]any{"role": "integrator", "building_id": buildingA.String()}}}).Want(201)
	reader := y.As(made.Object()["secret"].(string))
	reader.Get(atA).Want(200)
	reader.Get("/v1/buildings/" + buildingB.String()).Want(404)
	reader.Get("/v1/keys").Want(403)
	key := made.Header.Get("Location")
	if admin.Get(key).Want(200).Object()["last_used_at"] == nil {
		t.Error("the use of the key is not noted")
	}
	admin.Post(key+"/withdraw", nil).Want(200)
	at = now.Add(keepHolder)
	reader.Get(atA).Want(401)
	admin.Get(key).Want(200)

	// What cannot hold is told at once, with its field; nothing is made.
	bad := map[string]any{"name": "x", "person_id": "01999999-9999-7999-8999-999999999999", "grants": []any{}}
	if got := strings.Join(admin.Post("/v1/keys", bad).Want(422).Pointers(), " "); got != "/person_id" {
		t.Errorf("a key of nobody is refused at %s", got)
	}
	person := admin.Post("/v1/persons", map[string]any{"name": "An invented person"}).Want(201)
	admin.Post(person.Header.Get("Location")+"/retire", nil).Want(200)
	bad["person_id"] = person.Object()["id"]
	if got := strings.Join(admin.Post("/v1/keys", bad).Want(422).Pointers(), " "); got != "/person_id" {
		t.Errorf("a key of somebody retired is refused at %s", got)
	}
	for pointer, grant := range map[string]map[string]any{
		"/person_id":  {"role": "crew", "person_id": person.Object()["id"]},
		"/api_key_id": {"role": "crew", "api_key_id": made.Object()["key"].(map[string]any)["id"]},
		"/until":      {"role": "crew", "api_key_id": admin.Get("/v1/keys").Want(200).Object()["items"].([]any)[0].(map[string]any)["id"], "until": "2026-01-01T00:00:00Z"},
	} {
		if got := strings.Join(admin.Post("/v1/grants", grant).Want(422).Pointers(), " "); got != pointer {
			t.Errorf("the grant %v is refused at %s, want %s", grant, got, pointer)
		}
	}
}

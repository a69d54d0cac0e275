package api

import (
	"fmt"
	"strings"
	"testing"

	"lampward/api/apitest"
)

func TestSpaces(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	at := apitest.Exercise(t, y.Client, apitest.Kind{List: atA + "/spaces",
		Body: map[string]any{"level": "1", "name": "Reading room", "use": "library", "area_m2": 120.5, "mounting_m": 3.2, "reach": "steps", "permits": []string{},
			"yearly_hours": 3600.0, "required_lx": 500.0, "cleanliness": "clean", "note": "quiet"},
		Change: map[string]any{"reach": "tower", "yearly_hours": 3000.0}, Wrong: map[string]any{"yearly_hours": 9999}, Retire: true, Unique: "name"})
	space := at[len(atA+"/spaces/"):]
	y.Post(at+"/restore", nil).Want(200)
	y.post(t, "/fixtures", map[string]any{"space_id": space})
	y.Post(at+"/retire", nil).Want(409)
}

func TestCircuits(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	at := apitest.Exercise(t, y.Client, apitest.Kind{List: atA + "/circuits",
		Body: map[string]any{"board": "DB1", "way": "3", "nominal_v": 230.0, "phases": 1, "curve": "B", "rating_a": 10.0, "rcd": "none", "neutral": "own",
			"central_battery": "none", "pulse_curve": []any{map[string]any{"width_us": 400.0, "peak_a": 30.0}}},
		Change: map[string]any{"curve": "C"}, Wrong: map[string]any{"rating_a": -1}, Retire: true, Unique: "way"})
	y.Post(at+"/restore", nil).Want(200)
	y.post(t, "/drivers", map[string]any{"fed_by_circuit_id": at[len(atA+"/circuits/"):]})
	y.Post(at+"/retire", nil).Want(409)
}

func TestPlaces(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	circuit := y.post(t, "/circuits", map[string]any{"board": "DB1", "way": "1"})
	dimmer := apitest.Exercise(t, y.Client, apitest.Kind{List: atA + "/dimmers",
		Body:   map[string]any{"tag": "D1", "dimmer_model_id": y.models.LeadingEdge.ID.String(), "fed_by_circuit_id": circuit, "neutral_wired": false},
		Change: map[string]any{"neutral_wired": true}, Wrong: map[string]any{"set_edge": "blunt"}, Retire: true, Unique: "tag", Values: []any{"D8", "D9"}})
	driver := apitest.Exercise(t, y.Client, apitest.Kind{List: atA + "/drivers",
		Body: map[string]any{"tag": "G1", "driver_model_id": y.models.Electronic105.ID.String(), "fed_by_circuit_id": circuit, "cable_m": 2.0, "cable_mm2": 1.5,
			"cable_taps_m": []float64{1, 2}},
		Change: map[string]any{"cable_m": 3.0}, Wrong: map[string]any{"cable_m": -3}, Retire: true, Unique: "tag", Values: []any{"G8", "G7"}})
	fixture := apitest.Exercise(t, y.Client, apitest.Kind{List: atA + "/fixtures",
		Body:   map[string]any{"tag": "L1", "fixture_model_id": y.models.Downlight.ID.String(), "lamp_model_id": y.models.Halogen35.ID.String(), "lamp_count": 1, "zone": "dry"},
		Change: map[string]any{"lamp_count": 2}, Wrong: map[string]any{"zone": "moon"}, Retire: true, Unique: "tag", Values: []any{"L8", "L9"}})
	for _, at := range []string{dimmer, driver, fixture} {
		y.Post(at+"/restore", nil).Want(200)
	}

	// Without a label a place gets one; kinds do not mix; circles and other buildings' feeds are refused.
	if tag := y.Post(atA+"/drivers", map[string]any{}).Want(201).Object()["tag"].(string); len(tag) < 5 {
		t.Errorf("generated label %q", tag)
	}
	y.Get(atA + "/fixtures/" + driver[len(atA+"/drivers/"):]).Want(404)
	g := driver[len(atA+"/drivers/"):]
	second := y.post(t, "/drivers", map[string]any{"fed_by_place_id": g})
	y.Patch(driver, map[string]any{"fed_by_circuit_id": nil, "fed_by_place_id": second}, "If-Match: *").Want(422)
	y.Post(driver+"/retire", nil).Want(409)
	inB := y.As("all").Post("/v1/buildings/"+buildingB.String()+"/circuits", map[string]any{"board": "X", "way": "1"}).Want(201).Object()["id"]
	if p := y.Post(atA+"/fixtures", map[string]any{"fed_by_circuit_id": inB}).Want(422).Pointers(); len(p) != 1 || p[0] != "/fed_by_circuit_id" {
		t.Errorf("another building's circuit is refused at %v", p)
	}
	y.Post(atA+"/fixtures", `{"tag":"NaN","air":1}`).Want(422)
	y.Post(atA+"/drivers", `{"tag":"G9","cable_m":NaN}`).Want(400)
	y.Post(atA+"/drivers", map[string]any{"tag": "G\u202e9"}).Want(422)
	y.Post(atA+"/drivers", map[string]any{"tag": "'; DROP TABLE place; --"}).Want(201)

	// What depends on a place keeps it.
	dim := dimmer[len(atA+"/dimmers/"):]
	control := apitest.Exercise(t, y.Client, apitest.Kind{List: atA + "/controls",
		Body: map[string]any{"dimmer_id": dim, "place_id": g, "path": "power_path"}, Change: map[string]any{"voltage_found": "mains"},
		Wrong: map[string]any{"path": "air"}, Retire: true})
	y.Post(control+"/retire", nil).Want(200)
	y.Patch(control, `{"note":"while retired"}`, "If-Match: *").Want(409)
	y.Put(control, map[string]any{"dimmer_id": dim, "place_id": g, "path": "power_path"}, "If-Match: *").Want(409)
	y.Post(control+"/restore", nil).Want(200)
	y.Post(dimmer+"/retire", nil).Want(409)
	feed := apitest.Exercise(t, y.Client, apitest.Kind{List: atA + "/feeds",
		Body:   map[string]any{"place_id": fixture[len(atA+"/fixtures/"):], "from_circuit_id": circuit, "purpose": "permanent_live", "input": "L2"},
		Change: map[string]any{"input": "L3"}, Wrong: map[string]any{"purpose": "fun"}, Retire: true})
	y.Post(feed+"/retire", nil).Want(200)
	y.Patch(feed, `{"note":"while retired"}`, "If-Match: *").Want(409)
	y.Put(feed, map[string]any{"place_id": fixture[len(atA+"/fixtures/"):], "from_circuit_id": circuit, "purpose": "normal"}, "If-Match: *").Want(409)
	y.Post(feed+"/restore", nil).Want(200)
	y.Post(atA+"/places/"+fixture[len(atA+"/fixtures/"):]+"/swap", map[string]any{"part": "lamp", "model_id": y.models.Halogen35.ID.String(), "done_at": "2026-02-01T10:00:00Z"}).Want(200)
	y.Post(fixture+"/retire", nil).Want(409)
}

func TestMakeUps(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	at := apitest.Exercise(t, y.Client, apitest.Kind{List: atA + "/make_ups",
		Body: map[string]any{"name": "Trio", "fixture_model_id": y.models.Downlight.ID.String(), "gear": "remote", "lamp_model_id": y.models.Halogen35.ID.String(),
			"lamp_count": 1, "driver_model_id": y.models.Electronic105.ID.String(), "fixtures_per_driver": 3},
		Change: map[string]any{"fixtures_per_driver": 2}, Wrong: map[string]any{"gear": "some"}, Retire: true, Unique: "name"})
	y.Post(at+"/restore", nil).Want(200)
	circuit := y.post(t, "/circuits", map[string]any{"board": "DB1", "way": "1"})
	made := y.Post(at+"/put", map[string]any{"count": 5, "circuit_id": circuit, "tags": []string{"A1", "A2"}}, "Idempotency-Key: put").Want(200).Object()
	if len(made["fixture_ids"].([]any)) != 5 || len(made["driver_ids"].([]any)) != 3 || len(made["dimmer_ids"].([]any)) != 0 {
		t.Errorf("made %v", made)
	}
	y.Post(at+"/put", map[string]any{"count": 1, "tags": []string{"A1"}}).Want(409)
	y.Post(at+"/put", map[string]any{"count": 0}).Want(422)
	absent := atA + "/make_ups/01999999-9999-7999-8999-999999999999"
	y.Post(absent+"/put", map[string]any{"count": 1}).Want(404)
	y.Patch(at, map[string]any{"lamp_model_id": y.models.LED7.ID.String()}, "If-Match: *").Want(200)
	if n := y.Post(at+"/apply", map[string]any{}).Want(200).Object()["places"]; n != 8.0 {
		t.Errorf("%v places changed", n)
	}
	y.Post(at+"/apply", map[string]any{"place_ids": []string{circuit}}).Want(422)
	y.Post(absent+"/apply", map[string]any{}).Want(404)
	items := y.Get(atA + "/fixtures?make_up_id=" + at[len(atA+"/make_ups/"):]).Want(200).Object()["items"].([]any)
	if len(items) != 5 || items[0].(map[string]any)["lamp_model_id"] != y.models.LED7.ID.String() {
		t.Errorf("after applying: %v", items)
	}
}

// TestSwaps: a crew member tells that one of three halogen lamps on an electronic transformer (35 to 105 W) became a 7 W
// LED: it is recorded, and the planner sees findings open. Told again it is another fact; a repeat with a key is not.
func TestSwaps(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	circuit := y.post(t, "/circuits", map[string]any{"board": "DB1", "way": "1"})
	driver := y.post(t, "/drivers", map[string]any{"tag": "G1", "driver_model_id": y.models.Electronic105.ID.String(), "fed_by_circuit_id": circuit})
	var fixtures []string
	for n := range 3 {
		fixtures = append(fixtures, y.post(t, "/fixtures", map[string]any{"tag": fmt.Sprint("L", n), "fed_by_place_id": driver, "gear": "remote",
			"fixture_model_id": y.models.Downlight.ID.String(), "lamp_model_id": y.models.Halogen35.ID.String(), "lamp_count": 1}))
	}
	crew := y.As("crew")
	at := atA + "/places/" + fixtures[0] + "/swap"
	told := map[string]any{"part": "lamp", "model_id": y.models.LED7.ID.String(), "done_at": "2026-02-20T09:00:00Z", "why": "failed", "mode": "dark", "serial": "S1"}
	done := crew.Post(at, told, "Idempotency-Key: ladder-1").Want(200)
	if got := done.Object(); len(got["opened"].([]any)) == 0 || got["unit"].(map[string]any)["serial"] != "S1" {
		t.Errorf("told: %s", done.Body)
	}
	if again := crew.Post(at, told, "Idempotency-Key: ladder-1").Want(200); string(again.Body) != string(done.Body) {
		t.Error("the phone's repeat is another fact")
	}
	crew.Post(at, map[string]any{"part": "lamp", "model_id": y.models.LED7.ID.String(), "done_at": "2026-02-19T09:00:00Z"}).Want(409) // before the last
	crew.Post(at, map[string]any{"part": "lamp", "done_at": "2030-01-01T00:00:00Z"}).Want(422)
	crew.Post(at, map[string]any{"part": "lamp", "emptied": true, "done_at": "2026-02-21T09:00:00Z", "place_id": fixtures[1]}).Want(422)
	crew.Post(atA+"/places/01999999-9999-7999-8999-999999999999/swap", told).Want(404)
	crew.Post(at, told, "Idempotency-Key: two words").Want(400)
	crew.Post(at, map[string]any{"part": "lamp", "emptied": true, "done_at": "2026-02-21T09:00:00Z"}).Want(200)

	units := y.Get(atA + "/units?place_id=" + fixtures[0] + "&current=false").Want(200).Object()["items"].([]any)
	if len(units) != 2 {
		t.Errorf("%d units left, want the halogen lamp and the LED", len(units))
	}
	unit := atA + "/units/" + units[0].(map[string]any)["id"].(string)
	tag := y.Get(unit).Want(200).ETag()
	y.Get(unit, "If-None-Match: "+tag).Want(304)
	y.Get(unit, "If-None-Match: v1").Want(400)
	y.Get(atA + "/units/01999999-9999-7999-8999-999999999999").Want(404)
	y.Get(atA + "/units?part=wheel").Want(422)
	y.Get(atA + "/units?part=%zz").Want(400)

	// Gear without separation in the place of separated gear is told: what hangs on it was chosen for the old one.
	open := y.As("all").Post("/v1/driver_models", map[string]any{"code": "OPEN", "name": "Gear without separation", "kind": "led_constant_voltage", "output_v": 12.0, "separation": "none"}).Want(201).Object()["id"]
	gear := y.Get(atA + "/drivers/" + driver).Want(200)
	y.Patch(atA+"/drivers/"+driver, map[string]any{"set_ma": 350.0}, "If-Match: "+gear.ETag()).Want(200)
	crew.Post(atA+"/places/"+driver+"/swap", map[string]any{"part": "driver", "model_id": open, "done_at": "2026-02-22T09:00:00Z"}).Want(200)
	if got := y.Get(atA + "/drivers/" + driver).Want(200).Object(); got["separation_before"] != "selv" || got["driver_model_id"] != open || got["set_ma"] != nil {
		t.Errorf("after the swap the gear is %v", got)
	}
	crew.Post(atA+"/places/"+driver+"/swap", map[string]any{"part": "driver", "model_id": y.models.Electronic105.ID.String(), "done_at": "2026-02-23T09:00:00Z"}).Want(200)

	// The tree with its loads.
	tree := y.Get(atA + "/circuits/" + circuit + "/tree").Want(200)
	if !strings.Contains(string(tree.Body), `"label":"G1"`) || !strings.Contains(string(tree.Body), `"max":105`) {
		t.Errorf("tree %s", tree.Body)
	}
	y.Get(atA + "/circuits/01999999-9999-7999-8999-999999999999/tree").Want(404)
	y.Get(atA + "/circuits/" + circuit + "/tree?x=1").Want(422)

	// Search.
	hits := y.Get(atA + "/search?q=g1").Want(200).Object()["items"].([]any)
	if len(hits) != 1 || hits[0].(map[string]any)["id"] != driver {
		t.Errorf("hits %v", hits)
	}
	if hits := y.Get(atA + "/search?q=%25").Want(200).Object()["items"].([]any); len(hits) != 0 {
		t.Errorf("a per cent sign finds %v", hits)
	}
	y.Get(atA + "/search").Want(422)
}

func TestFailures(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	crew := y.As("crew")
	place := y.post(t, "/fixtures", map[string]any{"tag": "L1", "lamp_model_id": y.models.LED7.ID.String(), "lamp_count": 1, "emergency_mode": "maintained"})
	circuit := y.post(t, "/circuits", map[string]any{"board": "DB1", "way": "1"})
	list := atA + "/failures"
	told := map[string]any{"place_id": place, "part": "lamp", "holder": 1, "mode": "flicker", "noticed_at": "2026-02-20T09:00:00Z"}
	one := crew.Post(list, told).Want(201)
	two := y.As("integrator").Post(list, told).Want(201)
	if one.Object()["id"] != two.Object()["id"] || two.Object()["reports"] != 2.0 {
		t.Errorf("told twice: %s and %s", one.Body, two.Body)
	}
	own := map[string]any{"id": "01999999-9999-7999-8999-00000000000d", "place_id": place, "part": "lamp", "mode": "dark", "noticed_at": "2026-02-21T09:00:00Z"}
	crew.Post(list, own).Want(201)
	crew.Post(list, own).Want(201)
	own["mode"] = "noise"
	crew.Post(list, own).Want(409)
	crew.Post(list, map[string]any{"part": "wheel", "mode": "flat"}).Want(422)
	crew.Post(list, map[string]any{"place_id": circuit, "part": "lamp", "mode": "dark", "noticed_at": "2026-02-21T09:00:00Z"}).Want(404)
	crew.Post(list, told, "Idempotency-Key: two words").Want(400)
	at := list + "/" + one.Object()["id"].(string)
	y.Get(at, "If-None-Match: "+y.Get(at).Want(200).ETag()).Want(304)
	y.Get(at, "If-None-Match: v1").Want(400)
	y.Get(list + "/01999999-9999-7999-8999-999999999999").Want(404)
	if got := y.Get(list + "?open=true&noticed_from=2026-02-21T00:00:00Z").Want(200).Object()["items"].([]any); len(got) != 1 {
		t.Errorf("open since the 21st: %v", got)
	}
	y.Get(list + "?open=maybe").Want(422)
	y.Get(list + "?open=%zz").Want(400)
	crew.Post(at+"/clear", map[string]any{"cleared_at": "2026-02-01T09:00:00Z"}).Want(422)
	crew.Post(at+"/clear", map[string]any{"cleared_at": "2026-02-22T09:00:00Z"}, `If-Match: "v99"`).Want(412)
	crew.Post(at+"/clear", map[string]any{"cleared_at": "2026-02-22T09:00:00Z", "cause": "loose in its holder"}).Want(200)
	crew.Post(at+"/clear", map[string]any{"cleared_at": "2026-02-22T09:00:00Z"}).Want(409)
	crew.Post(list+"/01999999-9999-7999-8999-999999999999/clear", map[string]any{"cleared_at": "2026-02-22T09:00:00Z"}).Want(404)

	for _, k := range []struct {
		list      string
		good, bad map[string]any
		query     string
	}{
		{"/emergency_tests", map[string]any{"place_id": place, "test": "function", "tested_at": "2026-02-20T09:00:00Z", "passed": true},
			map[string]any{"place_id": place, "test": "duration", "tested_at": "2026-02-20T09:00:00Z", "passed": true}, "?passed=true&tested_until=2026-03-01T00:00:00Z"},
		{"/trips", map[string]any{"circuit_id": circuit, "tripped_at": "2026-02-20T09:00:00Z"},
			map[string]any{"circuit_id": circuit, "tripped_at": "2036-02-20T09:00:00Z"}, "?circuit_id=" + circuit},
	} {
		list := atA + k.list
		made := crew.Post(list, k.good).Want(201)
		crew.Post(list, k.bad).Want(422)
		mine := map[string]any{"id": "01999999-9999-7999-8999-00000000000e"}
		for name, v := range k.good {
			mine[name] = v
		}
		crew.Post(list, mine).Want(201)
		mine["note"] = "another"
		crew.Post(list, mine).Want(409)
		crew.Post(list, k.good, "Idempotency-Key: two words").Want(400)
		at := made.Header.Get("Location")
		y.Get(at, "If-None-Match: "+made.ETag()).Want(304)
		y.Get(at).Want(200)
		y.Get(at, "If-None-Match: v1").Want(400)
		y.Get(list + "/01999999-9999-7999-8999-999999999999").Want(404)
		if got := y.Get(list + k.query).Want(200).Object()["items"].([]any); len(got) != 2 {
			t.Errorf("%s: %v", k.list, got)
		}
		y.Get(list + "?nothing=1").Want(422)
		y.Get(list + "?nothing=%zz").Want(400)
		gone := map[string]any{}
		for name, v := range k.good {
			gone[name] = v
			if strings.HasSuffix(name, "_id") {
				gone[name] = "01999999-9999-7999-8999-999999999999"
			}
		}
		crew.Post(list, gone).Want(404)
	}
}

// TestBulk stores many rows at once, twice: the second time changes nothing. A bad row is told by its pointer and
// nothing is stored.
func TestBulk(t *testing.T) {
	t.Parallel()
	y := newYard(t)
	circuit := "01999999-9999-7999-8999-0000000000c1"
	var drivers, fixtures []any
	for n := range 400 {
		g := fmt.Sprintf("01999999-9999-7999-8999-00000001%04x", n)
		drivers = append(drivers, map[string]any{"id": g, "tag": fmt.Sprintf("G%03d", n), "fed_by_circuit_id": circuit, "driver_model_id": y.models.Electronic105.ID.String()})
		fixtures = append(fixtures, map[string]any{"tag": fmt.Sprintf("L%03d", n), "fed_by_place_id": g, "lamp_model_id": y.models.Halogen35.ID.String(), "lamp_count": 1})
	}
	bulk := map[string]any{"spaces": []any{map[string]any{"level": "0", "name": "Hall"}}, "circuits": []any{map[string]any{"id": circuit, "board": "DB1", "way": "1"}},
		"drivers": drivers, "fixtures": fixtures}
	first := y.Post(atA+"/bulk", bulk, "Idempotency-Key: b1").Want(200).Object()
	if first["new"] != 802.0 {
		t.Errorf("first %v", first)
	}
	if again := y.Post(atA+"/bulk", bulk, "Idempotency-Key: b1").Want(200).Object(); again["new"] != 802.0 {
		t.Errorf("a repeat answers %v", again)
	}
	if second := y.Post(atA+"/bulk", bulk).Want(200).Object(); second["unchanged"] != 802.0 || second["new"] != 0.0 || second["changed"] != 0.0 {
		t.Errorf("second %v", second)
	}
	bad := y.Post(atA+"/bulk", map[string]any{"drivers": []any{map[string]any{"tag": "G900"}, map[string]any{"tag": "G901", "cable_m": -1},
		map[string]any{"tag": "G902", "fed_by_place_id": "01999999-9999-7999-8999-999999999999"}}}).Want(422)
	if got := strings.Join(bad.Pointers(), " "); got != "/drivers/1/cable_m /drivers/2/fed_by_place_id" {
		t.Errorf("told at %s", got)
	}
	if hits := y.Get(atA + "/search?q=G900").Want(200).Object()["items"].([]any); len(hits) != 0 {
		t.Error("a refused bulk left a row")
	}
	y.Post(atA+"/bulk", map[string]any{}).Want(422)
	y.Post(atA+"/bulk", bulk, "Idempotency-Key: two words").Want(400)
	// A new row with the label of another is a conflict; an id that is of another kind is told at its pointer.
	y.Post(atA+"/bulk", map[string]any{"fixtures": []any{map[string]any{"id": "01999999-9999-7999-8999-0000000000f1", "tag": "L001"}}}).Want(409)
	y.Post(atA+"/bulk", map[string]any{"fixtures": []any{map[string]any{"id": "01999999-9999-7999-8999-000000010001", "tag": "L900"}}}).Want(422)
	entries := y.Get(atA + "/audit").Want(200).Object()["items"].([]any)
	if n := len(entries); n != 3 { // the building itself, and one of each bulk
		t.Errorf("%d entries of the audit", n)
	}
}

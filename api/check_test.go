package api

import (
	"context"
	"fmt"
	"maps"
	"strings"
	"sync"
	"testing"

	"lampward/domain/review"
)

// lit is a yard with an electronic transformer (35 to 105 W) that three LED lamps of 7 W hang on, and a lone fixture.
type lit struct {
	*yard
	circuit, driver string
	fixtures        []string
}

func newLit(t testing.TB) *lit {
	y := &lit{yard: newYard(t)}
	y.circuit = y.post(t, "/circuits", map[string]any{"board": "DB1", "way": "1", "nominal_v": 230.0, "neutral": "own", "rating_a": 10.0, "curve": "B"})
	y.driver = y.post(t, "/drivers", map[string]any{"tag": "G1", "driver_model_id": y.models.Electronic105.ID.String(), "fed_by_circuit_id": y.circuit,
		"cable_m": 1.0, "cable_mm2": 2.5, "cable_rated_a": 20.0, "terminal_rated_a": 20.0})
	for n := range 3 {
		y.fixtures = append(y.fixtures, y.post(t, "/fixtures", map[string]any{"tag": fmt.Sprint("L", n), "fed_by_place_id": y.driver, "gear": "remote",
			"fixture_model_id": y.models.Downlight.ID.String(), "lamp_model_id": y.models.LED7.ID.String(), "lamp_count": 1, "zone": "dry"}))
	}
	return y
}

const noRecord = "01999999-9999-7999-8999-999999999999"

func TestFindings(t *testing.T) {
	t.Parallel()
	y := newLit(t)
	list := y.Get(atA + "/findings").Want(200).Object()["items"].([]any)
	if len(list) < 2 {
		t.Fatalf("three LED lamps on an electronic transformer bring %d findings", len(list))
	}
	rank := map[string]int{"danger": 4, "high": 3, "medium": 2, "low": 1}
	for i := 1; i < len(list); i++ {
		if a, b := list[i-1].(map[string]any), list[i].(map[string]any); rank[a["severity"].(string)] < rank[b["severity"].(string)] {
			t.Errorf("%s before %s", a["severity"], b["severity"])
		}
	}
	first := list[0].(map[string]any)
	at := atA + "/findings/" + first["id"].(string)
	one := y.Get(at).Want(200).Object()
	steps := one["steps"].([]any)
	if one["sentence"] == "" || one["basis"] == "" || one["remedy"] == "" || len(steps) == 0 || steps[0].(map[string]any)["sum"] == "" {
		t.Errorf("one finding: %v", one)
	}
	y.Get(atA + "/findings/" + noRecord).Want(404)

	// Filters, pages, what is not a filter.
	for query, want := range map[string]int{"?severity=" + first["severity"].(string) + "&rule=" + first["rule"].(string): 1, "?rule=none": 0,
		"?lamp_model_id=" + y.models.Halogen35.ID.String(): 0, "?subject_id=" + y.driver + "&cleared=true": 0, "?waived=true": 0} {
		if got := y.Get(atA + "/findings" + query).Want(200).Object()["items"].([]any); len(got) != want && !(want == 1 && len(got) >= 1) {
			t.Errorf("%s gives %d", query, len(got))
		}
	}
	var joined []string
	for next := atA + "/findings?limit=1"; next != ""; {
		a := y.Get(next).Want(200)
		for _, f := range a.Object()["items"].([]any) {
			joined = append(joined, f.(map[string]any)["id"].(string))
		}
		next = strings.TrimSuffix(strings.TrimPrefix(a.Header.Get("Link"), "<"), `>; rel="next"`)
	}
	if len(joined) != len(list) {
		t.Errorf("%d findings page by page, %d at once", len(joined), len(list))
	}
	y.Get(atA + "/findings?severity=awful").Want(422)

	// Over all buildings, by kind of subject, the newest first, counted by rule.
	for kind, want := range map[string]int{"driver": len(list), "circuit": 0} {
		if got := y.Get(atA + "/findings?subject_kind=" + kind).Want(200).Object()["items"].([]any); len(got) != want {
			t.Errorf("%d of %d are about a %s", len(got), len(list), kind)
		}
	}
	all := y.As("all").Get("/v1/findings?sort=newest").Want(200).Object()["items"].([]any)
	if len(all) != len(list) {
		t.Errorf("%d findings in all buildings, %d in the only one with any", len(all), len(list))
	}
	for i := 1; i < len(all); i++ {
		if a, b := all[i-1].(map[string]any), all[i].(map[string]any); a["opened_at"].(string) < b["opened_at"].(string) {
			t.Errorf("%s before %s", a["opened_at"], b["opened_at"])
		}
	}
	for _, order := range []string{"worst", "newest"} {
		seen := map[string]bool{}
		for next := "/v1/findings?limit=1&sort=" + order; next != ""; {
			a := y.As("all").Get(next).Want(200)
			for _, f := range a.Object()["items"].([]any) {
				seen[f.(map[string]any)["id"].(string)] = true
			}
			next = strings.TrimSuffix(strings.TrimPrefix(a.Header.Get("Link"), "<"), `>; rel="next"`)
		}
		if len(seen) != len(list) {
			t.Errorf("%d findings page by page, the %s first, %d at once", len(seen), order, len(list))
		}
	}
	y.Get("/v1/findings?sort=odd").Want(422)
	sum := func(at string) (n, waived int) {
		for _, r := range y.Get(at).Want(200).Object()["items"].([]any) {
			n += int(r.(map[string]any)["findings"].(float64))
			waived += int(r.(map[string]any)["waived"].(float64))
		}
		return n, waived
	}
	for _, at := range []string{atA + "/finding-counts", "/v1/finding-counts"} {
		if n, w := sum(at); n != len(list) || w != 0 {
			t.Errorf("%s counts %d, %d waived", at, n, w)
		}
		y.Get(at + "?x=1").Want(422)
	}

	// Grouped by cause, here and over all buildings.
	groups := y.Get(atA + "/causes").Want(200).Object()["items"].([]any)
	everywhere := y.As("all").Get("/v1/causes").Want(200).Object()["items"].([]any)
	if len(groups) == 0 || len(everywhere) != len(groups) {
		t.Errorf("%d causes in the building, %d in all", len(groups), len(everywhere))
	}
	y.Get(atA + "/causes?x=1").Want(422)
	y.Get("/v1/causes?x=1").Want(422)

	questions := y.Get(atA + "/questions").Want(200).Object()
	if n := len(questions["items"].([]any)); n == 0 || n > 20 || questions["coverage"].(map[string]any)["places"] != 3.0 {
		t.Errorf("questions %v", questions)
	}
	y.Get(atA + "/questions?x=1").Want(422)

	// Waive, list, withdraw.
	y.Post(atA+"/waivers", map[string]any{"finding_ids": []any{first["id"]}, "why": "", "until": "2025-01-01"}).Want(422)
	y.Post(atA+"/waivers", map[string]any{"finding_ids": []any{noRecord}, "why": "known", "until": "2026-06-30"}).Want(404)
	y.Post(atA+"/waivers", map[string]any{"finding_ids": []any{first["id"]}, "why": "x", "until": "2026-06-30"}, "Idempotency-Key: two words").Want(400)
	w := y.Post(atA+"/waivers", map[string]any{"finding_ids": []any{first["id"]}, "why": "to be replaced in May", "until": "2026-06-30"}).Want(201).Object()["items"].([]any)[0].(map[string]any)
	if got := y.Get(at).Want(200).Object()["waiver"]; got == nil {
		t.Error("the finding does not show its waiver")
	}
	if got := y.Get(atA + "/findings?waived=true").Want(200).Object()["items"].([]any); len(got) != 1 {
		t.Errorf("%d waived", len(got))
	}
	if _, waived := sum("/v1/finding-counts"); waived != 1 {
		t.Errorf("%d waived", waived)
	}
	if got := y.Get(atA + "/waivers").Want(200).Object()["items"].([]any); len(got) != 1 || got[0].(map[string]any)["in_effect"] != true {
		t.Errorf("waivers %v", got)
	}
	y.Get(atA + "/waivers?limit=0").Want(422)
	end := atA + "/waivers/" + w["id"].(string) + "/withdraw"
	y.Post(end, nil, `If-Match: "v99"`).Want(412)
	y.Post(end, nil).Want(200)
	y.Post(end, nil).Want(200)
	y.Post(atA+"/waivers/"+noRecord+"/withdraw", nil).Want(404)
	cause := map[string]any{"rule": first["rule"], "lamp_model_id": first["lamp_model_id"], "driver_model_id": first["driver_model_id"], "dimmer_model_id": first["dimmer_model_id"]}
	for name, v := range cause {
		if v == nil {
			delete(cause, name)
		}
	}
	y.Post(atA+"/waivers", map[string]any{"cause": cause, "why": "all of them", "until": "2026-06-30"}).Want(201)

	// Review: asked for, owed, done by a job.
	ctx := context.Background()
	drain := func() {
		for {
			did, err := y.opt.Reviewer.DrainOne(ctx, y.pool, y.opt.Clock)
			if err != nil {
				t.Fatal(err)
			}
			if !did {
				return
			}
		}
	}
	drain()
	if got := y.Get(atA + "/review").Want(200).Object(); got["pending"] != false {
		t.Errorf("nothing is asked for: %v", got)
	}
	if got := y.Post(atA+"/review", nil).Want(202).Object(); got["pending"] != true || got["reviews_owed"].(float64) < 1 || got["owed_since"] == nil || got["rule_set"] != float64(review.RuleSet) {
		t.Errorf("asked for: %v", got)
	}
	drain()
	if got := y.Get(atA + "/review").Want(200).Object(); got["pending"] != false {
		t.Errorf("after the job: %v", got)
	}
	y.Get(atA + "/review?x=1").Want(422)
	if now := y.Get(atA + "/findings").Want(200).Object()["items"].([]any); len(now) != len(list) {
		t.Errorf("%d findings after a full review, %d before", len(now), len(list))
	}

	rules := y.Get("/v1/rules").Want(200).Object()["items"].([]any)
	if len(rules) != 61 {
		t.Errorf("%d rules", len(rules))
	}
	y.Get("/v1/rules?x=1").Want(422)
}

func TestAuditIsShown(t *testing.T) {
	t.Parallel()
	y := newLit(t)
	a := y.Get(atA + "/audit?limit=2").Want(200)
	if got := a.Object()["items"].([]any); len(got) != 2 || a.Header.Get("Link") == "" {
		t.Errorf("audit %s", a.Body)
	}
	if got := y.Get(atA + "/audit?subject_id=" + y.driver).Want(200).Object()["items"].([]any); len(got) != 1 || got[0].(map[string]any)["action"] != "driver.created" {
		t.Errorf("of the driver: %v", got)
	}
	if got := y.Get(atA + "/audit?from=2026-06-01T00:00:00Z&until=2026-07-01T00:00:00Z").Want(200).Object()["items"].([]any); len(got) != 0 {
		t.Errorf("of June: %v", got)
	}
	y.Get(atA + "/audit?by_id=me").Want(422)
	if v := y.Get(atA + "/audit/verification").Want(200).Object(); v["broken_at"] != nil || v["entries"].(float64) < 6 {
		t.Errorf("verification %v", v)
	}
	y.Get(atA + "/audit/verification?x=1").Want(422)
	if _, err := y.pool.Exec(context.Background(), `UPDATE audit SET body = replace(body, 'driver', 'dimmer') WHERE building_id = $1 AND seq = 3`, buildingA); err != nil {
		t.Fatal(err)
	}
	if v := y.Get(atA + "/audit/verification").Want(200).Object(); v["broken_at"] != 3.0 {
		t.Errorf("a changed entry is not found: %v", v)
	}
}

// TestFitCheck asks with what a person on a ladder sees: an electronic transformer of 105 W with a least load of 35 W, three
// LED lamps of 7 W, no dimmer.
func TestFitCheck(t *testing.T) {
	t.Parallel()
	y := newLit(t)
	ask := map[string]any{"gear": map[string]any{"name": "", "kind": "electronic_transformer", "min_load_w": 35.0, "max_load_w": 105.0},
		"lamp": map[string]any{"name": "", "technology": "led_lamp", "supply": "elv_ac_dc", "power_w": 7.0}, "lamps": 3, "dimmer_none": true}
	crew := y.As("crew")
	no := crew.Post("/v1/fit-check", ask).Want(200).Object()
	if no["answer"] != "do_not_fit" || no["sum"] == "" || len(no["findings"].([]any)) == 0 {
		t.Errorf("answer %v", no)
	}
	if no["options"] != nil {
		t.Errorf("options nobody asked for: %v", no["options"])
	}
	named := map[string]any{"lamp_model_id": y.models.LED7.ID.String(), "driver_model_id": y.models.Electronic105.ID.String(), "lamps": 3, "dimmer_none": true, "options": true}
	if got, _ := crew.Post("/v1/fit-check", named).Want(200).Object()["options"].([]any); len(got) == 0 {
		t.Error("a refusal names nothing that would do")
	}
	halogen := map[string]any{"gear": ask["gear"], "lamp": map[string]any{"name": "", "technology": "halogen", "supply": "elv_ac_dc", "power_w": 35.0, "rated_v": 12.0}, "lamps": 2, "dimmer_none": true,
		"building_id": buildingA.String()}
	if yes := crew.Post("/v1/fit-check", halogen).Want(200).Object(); yes["answer"] == "do_not_fit" {
		t.Errorf("two halogen lamps: %v", yes)
	}
	// Kept: the place is on record; who may only read is refused; of another building nothing is said.
	halogen["keep"] = map[string]any{"tag": "KEPT-1", "position": "over the desk"}
	kept := crew.Post("/v1/fit-check", halogen, "Idempotency-Key: k1").Want(200).Object()["kept"].(map[string]any)
	if kept["tag"] != "KEPT-1" {
		t.Errorf("kept %v", kept)
	}
	y.Get(atA + "/fixtures/" + kept["fixture_ids"].([]any)[0].(string)).Want(200)
	if again := crew.Post("/v1/fit-check", halogen, "Idempotency-Key: k1").Want(200).Object()["kept"].(map[string]any); again["driver_id"] != kept["driver_id"] {
		t.Error("a repeat kept another place")
	}
	crew.Post("/v1/fit-check", halogen).Want(409) // the label is taken
	// More at once than there are connections: each is kept, none waits for another's connection.
	var wg sync.WaitGroup
	for n := range 12 {
		one := map[string]any{}
		maps.Copy(one, halogen)
		one["keep"] = map[string]any{"tag": fmt.Sprint("AT-ONCE-", n)}
		wg.Go(func() {
			if a := crew.Post("/v1/fit-check", one); a.Status != 200 {
				t.Errorf("kept at once: %d %s", a.Status, a.Body)
			}
		})
	}
	wg.Wait()
	y.As("viewer").Post("/v1/fit-check", halogen).Want(403)
	halogen["building_id"] = buildingB.String()
	crew.Post("/v1/fit-check", halogen).Want(404)

	// At a luminaire on record.
	at := map[string]any{"building_id": buildingA.String(), "place_id": y.fixtures[0], "lamp_model_id": y.models.Halogen35.ID.String()}
	if got := crew.Post("/v1/fit-check", at).Want(200).Object(); got["answer"] == "" {
		t.Errorf("at a place %v", got)
	}
	at["place_id"] = y.driver
	crew.Post("/v1/fit-check", at).Want(409)
	at["place_id"] = noRecord
	crew.Post("/v1/fit-check", at).Want(404)
	delete(at, "building_id")
	crew.Post("/v1/fit-check", at).Want(422)
	crew.Post("/v1/fit-check", map[string]any{"lamps": -1}).Want(422)
	crew.Post("/v1/fit-check", `{"lamp":{"name":"","power_w":Infinity}}`).Want(400)
	y.As("nobody").Post("/v1/fit-check", ask).Want(403)
}

func TestWhatIf(t *testing.T) {
	t.Parallel()
	y := newLit(t)
	halogen, led := y.models.Halogen35.ID.String(), y.models.LED7.ID.String()
	back := map[string]any{"building_ids": []any{buildingA.String()}, "circuit_id": y.circuit, "lamp_model_id": halogen}
	w := y.Post("/v1/what-if", back).Want(200).Object()
	if w["lamps"] != 3.0 || w["cleared_count"].(float64) == 0 || w["power_before_w"] != 21.0 || w["power_after_w"] != 105.0 {
		t.Errorf("back to halogen: %v", w)
	}
	all := y.As("all").Post("/v1/what-if", map[string]any{"from_lamp_model_id": led, "lamp_model_id": halogen}).Want(200).Object()
	if all["lamps"] != 3.0 || all["buildings"] != 1.0 {
		t.Errorf("everywhere: %v", all)
	}
	y.Post("/v1/what-if", map[string]any{}).Want(422)
	y.Post("/v1/what-if", map[string]any{"building_ids": []any{buildingB.String()}, "from_lamp_model_id": led, "lamp_model_id": halogen}).Want(404)
	y.As("nobody").Post("/v1/what-if", back).Want(403)

	// A proposal that brings a blocking finding is refused with findings and options, unless a planner says why.
	y.Post(atA+"/places/"+y.fixtures[0]+"/swap", map[string]any{"part": "lamp", "model_id": halogen, "done_at": "2026-02-20T09:00:00Z"}).Want(200)
	p := map[string]any{"place_ids": []any{y.fixtures[0]}, "lamp_model_id": y.models.MainsLED9.ID.String()}
	refused := y.Post(atA+"/proposals", p).Want(409)
	if refused.Problem() != "unsafe" || len(refused.Object()["findings"].([]any)) == 0 {
		t.Errorf("refused as %s", refused.Body)
	}
	p["override"] = map[string]any{"why": "", "until": "2026-06-30"}
	y.Post(atA+"/proposals", p).Want(422)
	p["override"] = map[string]any{"why": "bench test under supervision", "until": "2026-06-30"}
	if got := y.Post(atA+"/proposals", p).Want(200).Object(); len(got["waivers"].([]any)) == 0 {
		t.Errorf("the override waives nothing: %v", got)
	}
	if got := y.Get(atA + "/audit?limit=1").Want(200).Object()["items"].([]any)[0].(map[string]any); got["action"] != "proposal.overridden" {
		t.Errorf("the override is not in the audit: %v", got)
	}
	y.Post(atA+"/proposals", map[string]any{"place_ids": []any{y.fixtures[0]}, "lamp_model_id": halogen}).Want(200)
	y.Post(atA+"/proposals", map[string]any{"place_ids": []any{noRecord}, "lamp_model_id": halogen}).Want(404)
	y.Post(atA+"/proposals", p, "Idempotency-Key: two words").Want(400)

	options := y.Get(atA + "/places/" + y.fixtures[1] + "/options").Want(200).Object()["items"].([]any)
	if len(options) == 0 {
		t.Error("no option is safe, although halogen lamps are")
	}
	y.Get(atA + "/places/" + y.driver + "/options").Want(409)
	y.Get(atA + "/places/" + noRecord + "/options").Want(404)
	y.Get(atA + "/places/" + y.fixtures[1] + "/options?x=1").Want(422)
	if got := y.Get(atA + "/places/" + y.fixtures[1] + "/cautions").Want(200).Object()["items"].([]any); len(got) == 0 {
		t.Error("no caution for work at a luminaire")
	}
	y.Get(atA + "/places/" + noRecord + "/cautions").Want(404)
	y.Get(atA + "/places/" + y.fixtures[1] + "/cautions?x=1").Want(422)
}

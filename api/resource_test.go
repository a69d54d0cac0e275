package api

import (
	"bufio"
	"bytes"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"slices"
	"strings"
	"sync"
	"testing"

	"lampward/api/apitest"
	"lampward/domain"
)

func TestResource(t *testing.T) {
	t.Parallel()
	b := dbBench(t)
	apitest.Exercise(t, b.Client, apitest.Kind{
		List: listA,
		Body: map[string]any{"tag": "B1", "colour": "red", "reach_m": 12.5, "lamps": 3, "lit": false, "permits": []string{},
			"seen_at": "2026-02-01T00:00:00Z", "built": "1901-05-06", "maker": map[string]any{"town": "Ardmore"}, "note": "two\nlines"},
		Change: map[string]any{"colour": "white", "reach_m": 14},
		Wrong:  map[string]any{"colour": "green"},
		Retire: true,
		Unique: "tag",
	})
}

// TestAbsentStaysAbsent holds that null takes a value away, that an empty list is not an absent one, and that a
// generated tag does not make a repeated create another one.
func TestAbsentStaysAbsent(t *testing.T) {
	t.Parallel()
	b := dbBench(t)
	own := map[string]any{"id": "01999999-9999-7999-8999-00000000000a", "lamps": 0, "permits": []string{}}
	first := b.Post(listA, own).Want(201)
	row := first.Object()
	if _, there := row["colour"]; there || row["lamps"] != 0.0 || row["permits"] == nil || row["tag"] == "" {
		t.Errorf("stored as %s", first.Body)
	}
	if again := b.Post(listA, own).Want(201); !bytes.Equal(again.Body, first.Body) {
		t.Errorf("repeated as %s", again.Body)
	}
	at := first.Header.Get("Location")
	gone := b.Patch(at, `{"lamps":null,"permits":null}`, "If-Match: "+first.ETag()).Want(200)
	if row := gone.Object(); row["lamps"] != nil || row["permits"] != nil {
		t.Errorf("after null: %s", gone.Body)
	}
	// A part of an object is changed by itself.
	tag := b.Patch(at, `{"maker":{"town":"Ardmore","year":1900}}`, "If-Match: *").Want(200).ETag()
	part := b.Patch(at, `{"maker":{"year":null}}`, "If-Match: "+tag).Want(200)
	if !strings.Contains(string(part.Body), `"maker":{"town":"Ardmore"}`) {
		t.Errorf("after the change of a part: %s", part.Body)
	}
}

func TestLists(t *testing.T) {
	t.Parallel()
	b := dbBench(t)
	const n = 25
	for i := range n {
		colour := []string{"red", "white"}[i%2]
		b.Post(listA, map[string]any{"id": fmt.Sprintf("01999999-9999-7999-8999-0000000000%02x", i), "tag": fmt.Sprintf("T%02d", i),
			"colour": colour, "lamps": i, "lit": i%5 == 0, "note": "=SUM(A1:A9), \"quoted\""}).Want(201)
	}
	type page struct{ Items []map[string]any }

	// Pages join without a gap or a repeat, whatever their size.
	for _, limit := range []int{1, 7, 24, 25, 1000} {
		var tags []string
		next := fmt.Sprintf("%s?limit=%d&colour=white", listA, limit)
		for next != "" {
			a := b.Get(next).Want(200)
			var p page
			a.JSON(&p)
			for _, row := range p.Items {
				tags = append(tags, row["tag"].(string))
			}
			link := a.Header.Get("Link")
			next = ""
			if link != "" {
				next = strings.TrimSuffix(strings.TrimPrefix(link, "<"), `>; rel="next"`)
			}
		}
		if len(tags) != 12 || !slices.IsSorted(tags) || tags[0] != "T01" || tags[11] != "T23" {
			t.Errorf("by %d: %v", limit, tags)
		}
	}

	for query, want := range map[string]int{
		"lit=true": 5, "lamps=3": 1, "tag=t1": 10, "keeper_id=01999999-9999-7999-8999-000000000000": 0,
		"lit=false&colour=red": 10, "seen_from=2026-01-01T00:00:00Z": 0, "built=1901-05-06": 0, "tag=%25": 0, "tag='%20OR%201=1": 0,
	} {
		var p page
		b.Get(listA + "?" + query).Want(200).JSON(&p)
		if len(p.Items) != want {
			t.Errorf("%s gives %d, want %d", query, len(p.Items), want)
		}
	}

	bad := b.Get(listA + "?limit=1001&colour=green&lit=maybe&lamps=1.5&keeper_id=7&seen_from=today&built=2026-02-30&tag=a%00b&fields=tag,secret&with_retired=x&lamps2=1&cursor=a&cursor=b").Want(422)
	want := []string{"/built", "/colour", "/cursor", "/fields", "/keeper_id", "/lamps", "/lamps2", "/limit", "/lit", "/seen_from", "/tag", "/with_retired"}
	if got := bad.Pointers(); !slices.Equal(got, want) {
		t.Errorf("wrong parameters told at %v, want %v", got, want)
	}

	// Chosen fields, the head always among them.
	var p page
	b.Get(listA + "?fields=tag,lamps&limit=1").Want(200).JSON(&p)
	row := p.Items[0]
	if len(row) != 7 || row["tag"] != "T00" || row["lamps"] != 0.0 || row["id"] == nil || row["version"] != 1.0 {
		t.Errorf("chosen fields: %v", row)
	}

	// NDJSON: a line a row; CSV: a cell a field, formulas disarmed.
	lines := strings.Split(strings.TrimSpace(string(b.Get(listA, "Accept: application/x-ndjson").Want(200).Body)), "\n")
	if len(lines) != n {
		t.Errorf("%d lines, want %d", len(lines), n)
	}
	records, err := csv.NewReader(bytes.NewReader(b.Get(listA+"?fields=tag,note,lamps,reach_m", "Accept: text/csv").Want(200).Body)).ReadAll()
	if err != nil || len(records) != n+1 {
		t.Fatalf("%d records: %v", len(records), err)
	}
	if got := strings.Join(records[0], ","); got != "building_id,id,version,created_at,updated_at,retired_at,tag,note,reach_m,lamps" {
		t.Errorf("header %s", got)
	}
	if got := records[4][6:]; !slices.Equal(got, []string{"T03", `'=SUM(A1:A9), "quoted"`, "", "3"}) {
		t.Errorf("record %q", got)
	}
	// With a limit, a streamed form is one page with its link.
	if a := b.Get(listA+"?limit=10", "Accept: text/csv").Want(200); a.Header.Get("Link") == "" {
		t.Error("no link to the next page")
	}
}

// TestStreamedList holds that a whole list is streamed piece by piece, compressed or not, and that a failure in the
// middle cuts the connection instead of looking like the end.
func TestStreamedList(t *testing.T) {
	t.Parallel()
	b := dbBench(t)
	const n = 2*piece + 17
	s := domain.On(b.pool, buildingA, domain.Actor{}, now)
	err := beacons.Copy(t.Context(), s, n, func(i int) *beacon {
		row := &beacon{Tag: fmt.Sprintf("T%05d", i), Permits: nil}
		row.BuildingID, row.ID, row.Version, row.CreatedAt, row.UpdatedAt = buildingA, domain.NewID(), 1, now, now
		return row
	})
	if err != nil {
		t.Fatal(err)
	}
	for _, coding := range []string{"", "gzip", "zstd"} {
		a := b.Get(listA, "Accept: application/x-ndjson", "Accept-Encoding: "+coding).Want(200)
		if got := a.Header.Get("Content-Encoding"); got != coding {
			t.Errorf("coded as %q, want %q", got, coding)
		}
		sc := bufio.NewScanner(bytes.NewReader(a.Plain()))
		seen := map[string]bool{}
		for sc.Scan() {
			var row beacon
			if err := json.Unmarshal(sc.Bytes(), &row); err != nil {
				t.Fatal(err)
			}
			seen[row.Tag] = true
		}
		if len(seen) != n {
			t.Errorf("%q: %d rows, want %d", coding, len(seen), n)
		}
	}

	broken := beaconResource()
	calls := 0
	broken.List = func(c *call, s domain.Scope, page domain.Page, m []domain.Match) ([]beacon, string, error) {
		if calls++; calls == 2 {
			return nil, "", &domain.Error{Kind: domain.Unavailable, Msg: "the database is busy"}
		}
		return beacons.Page(c.ctx, s, page, m...)
	}
	srv := newServer(Options{Pool: b.pool, Registerer: freshRegistry(b), Gatherer: b.reg, Authenticator: testKeys, Log: b.opt.Log}, broken.routes()...)
	a := contract().Client(t, srv, "planner").Get(listA, "Accept: application/x-ndjson")
	if !a.Cut {
		t.Error("a list that broke off in the middle looks whole")
	}
	if last := b.log.lines(); !strings.Contains(last[len(last)-1], "the database is busy") {
		t.Errorf("the log does not say why: %s", last[len(last)-1])
	}
}

// TestCreateAtOnce holds that many equal creates at once make one record and all answer the same, with the client's
// identifier and with an idempotency key (where a running request may also be told).
func TestCreateAtOnce(t *testing.T) {
	t.Parallel()
	b := dbBench(t)
	own := map[string]any{"id": "01999999-9999-7999-8999-00000000000a", "tag": "X"}
	var wg sync.WaitGroup
	for range 8 {
		wg.Go(func() {
			if a := b.Post(listA, own); a.Status != 201 {
				t.Errorf("answered %d: %s", a.Status, a.Body)
			}
			if a := b.Post(listA, map[string]any{"tag": "Y"}, "Idempotency-Key: k1"); a.Status != 201 && a.Status != 409 {
				t.Errorf("answered %d: %s", a.Status, a.Body)
			}
		})
	}
	wg.Wait()
	b.Post(listA, map[string]any{"tag": "Y"}, "Idempotency-Key: k1").Want(201)
	var p struct{ Items []beacon }
	b.Get(listA).Want(200).JSON(&p)
	if len(p.Items) != 2 {
		t.Errorf("%d records, want 2", len(p.Items))
	}
}

func TestSharedRecords(t *testing.T) {
	t.Parallel()
	b := dbBench(t)
	admin := b.As("all")
	a := admin.Post("/v1/hues", map[string]any{"name": "amber"}).Want(201)
	if a.Header.Get("Location") != "/v1/hues/"+a.Object()["id"].(string) {
		t.Errorf("Location %q", a.Header.Get("Location"))
	}
	admin.Post("/v1/hues", map[string]any{"name": "amber"}).Want(409)
	b.Post("/v1/hues", map[string]any{"name": "blue"}).Want(403)
	b.As("viewer").Get("/v1/hues").Want(200)
	b.Get("/v1/hues", "Accept: text/csv").Want(200)
	b.Get("/v1/hues?with_retired=true").Want(422) // they cannot be retired
	b.Get("/v1/hues?limit=%zz").Want(400)
	admin.Post("/v1/hues", map[string]any{"name": "x", "building_id": buildingA.String()}).Want(422)
}

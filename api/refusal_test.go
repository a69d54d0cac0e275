package api

import (
	"net/http"
	"slices"
	"strings"
	"testing"

	"lampward/domain"
)

// TestEveryOperationRefuses walks every operation of the route table through what is refused before its handler runs,
// and every role through the decision who may.
func TestEveryOperationRefuses(t *testing.T) {
	t.Parallel()
	refusals(t, dbBench(t))
}

// address fills the parameters of a route's path.
func address(r *route, building domain.ID) string {
	parts := strings.Split(r.Path, "/")
	for i, p := range parts {
		switch {
		case p == "{building_id}":
			parts[i] = building.String()
		case strings.HasSuffix(p, "_id}"):
			parts[i] = "01999999-9999-7999-8999-999999999999"
		case strings.HasPrefix(p, "{"):
			parts[i] = "missing"
		}
	}
	return strings.Join(parts, "/")
}

// refusals is also for the routes of a real server: it needs no record to exist.
func refusals(t *testing.T, b *bench) {
	narrow := newBench(t, b.pool, func(o *Options) { o.Limits = Limits{Rate: 0.1, Burst: 1, Body: b.opt.Limits.Body} })
	for i := range b.routes {
		r := &b.routes[i]
		at := address(r, buildingA)
		do := func(client *bench, key string, body any, headers ...string) int {
			t.Helper()
			return client.As(key).Do(r.Method, at, body, headers...).Status
		}
		want := func(what string, got, want int) {
			t.Helper()
			if got != want {
				t.Errorf("%s, %s: answered %d, want %d", r.Op, what, got, want)
			}
		}
		if r.Gives[0] != "" {
			want("unacceptable", do(b, "all", nil, "Accept: image/x-none;q=1, "+r.Gives[0]+";q=0"), http.StatusNotAcceptable)
		}
		if r.Scope == public {
			continue
		}
		a := b.As("").Do(r.Method, at, nil)
		want("no credentials", a.Status, http.StatusUnauthorized)
		if got := a.Header.Get("Www-Authenticate"); got != `Bearer realm="lampward"` {
			t.Errorf("%s: challenge %q", r.Op, got)
		}
		want("unknown key", do(b, "stranger", nil), http.StatusUnauthorized)
		want("other scheme", do(b, "", nil, "Authorization: Basic YTpi"), http.StatusUnauthorized)
		want("authenticator away", do(b, "locked", nil), http.StatusServiceUnavailable)

		narrow.limiter.take(limitKey{addr: "192.0.2.1"}, now) // whence httptest's requests come
		want("quota of an address", do(narrow, "stranger", nil), http.StatusTooManyRequests)
		narrow.limiter.take(limitKey{kind: "api_key", id: testKeys["all"].Actor.ID}, now)
		want("quota", do(narrow, "all", nil), http.StatusTooManyRequests)

		// Who may: every role against the table of rights, on this building, on another, ended, without grants.
		for role := range roles {
			got := do(b, role.String(), nil)
			may := allowed[r.Right]&setOf(role) != 0 && r.Scope != estate
			if (got == http.StatusForbidden) == may {
				t.Errorf("%s: %s was answered %d", r.Op, role, got)
			}
			if r.Scope == building {
				other := b.As(role.String()).Do(r.Method, address(r, buildingB), nil)
				want(role.String()+" on another building", other.Status, http.StatusNotFound)
			}
		}
		outside := http.StatusForbidden
		if r.Scope == building {
			outside = http.StatusNotFound
			none := b.As("all").Do(r.Method, address(r, domain.ID{15: 9}), nil)
			want("a building that does not exist", none.Status, http.StatusNotFound)
		}
		want("without grants", do(b, "nobody", nil), outside)
		want("with an ended grant", do(b, "ended", nil), outside)
		if allowed[r.Right] != allowed[read] {
			want("watcher", do(b, "watcher", nil), http.StatusForbidden)
		}

		if r.Method == http.MethodGet {
			continue
		}
		match := ""
		if r.Match {
			match = `"v1"`
		}
		ifMatch := "If-Match: " + match
		if len(r.Takes) == 0 {
			want("a body where none is taken", do(b, "all", "[1]", ifMatch), http.StatusUnprocessableEntity)
			want("a large body where none is taken", do(b, "all", strings.Repeat(" ", int(r.body)+1), ifMatch), http.StatusRequestEntityTooLarge)
			want("broken If-Match", do(b, "all", nil, "If-Match: 7"), http.StatusBadRequest)
			continue
		}
		bad := b.As("all").Do(r.Method, at, "a,b", ifMatch, "Content-Type: text/x-none")
		want("other media type", bad.Status, http.StatusUnsupportedMediaType)
		header := "Accept"
		if r.Method == http.MethodPatch {
			header = "Accept-Patch"
		}
		if got := bad.Header.Get(header); got != strings.Join(r.Takes, ", ") {
			t.Errorf("%s: %s is %q", r.Op, header, got)
		}
		want("other charset", do(b, "all", "{}", ifMatch, "Content-Type: "+r.Takes[0]+"; charset=latin1"), http.StatusUnsupportedMediaType)
		want("other coding", do(b, "all", "{}", ifMatch, "Content-Encoding: br"), http.StatusUnsupportedMediaType)
		large := strings.Repeat(" ", int(r.body)+1)
		want("large body", do(b, "all", large, ifMatch), http.StatusRequestEntityTooLarge)
		for _, coding := range []string{"gzip", "zstd"} {
			bomb := packed(t, []byte(large), coding)
			want("small body that becomes large", do(b, "all", bomb, ifMatch, "Content-Encoding: "+coding), http.StatusRequestEntityTooLarge)
			want("body that is not "+coding, do(b, "all", "{}", ifMatch, "Content-Encoding: "+coding), http.StatusBadRequest)
			want("body cut short", do(b, "all", bomb[:len(bomb)/2], ifMatch, "Content-Encoding: "+coding), http.StatusBadRequest)
		}
		if slices.Contains(r.Takes, jsonMedia) || slices.Contains(r.Takes, patchMedia) {
			want("not JSON", do(b, "all", `{"a":`, ifMatch), http.StatusBadRequest)
			want("unknown field", do(b, "all", `{"no_such_field":1}`, ifMatch), http.StatusUnprocessableEntity)
		}
		if r.Match {
			want("no If-Match", do(b, "all", "{}"), http.StatusPreconditionRequired)
		}
	}
}

package api

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/base64"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
	"github.com/prometheus/client_golang/prometheus"
	"github.com/prometheus/client_golang/prometheus/testutil/promlint"

	"lampward/domain"
)

func freshRegistry(b *bench) *prometheus.Registry {
	b.reg = prometheus.NewRegistry()
	return b.reg
}

func packed(t testing.TB, data []byte, coding string) []byte {
	t.Helper()
	var b bytes.Buffer
	var w io.WriteCloser
	switch coding {
	case "gzip":
		w = gzip.NewWriter(&b)
	case "zstd":
		var err error
		if w, err = zstd.NewWriter(&b); err != nil {
			t.Fatal(err)
		}
	default:
		return data
	}
	if _, err := w.Write(data); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func TestHealth(t *testing.T) {
	t.Parallel()
	var fault error
	b := newBench(t, nil, func(o *Options) {
		o.Ready = []Check{{"database", func(context.Context) error { return fault }}, {"schema", func(context.Context) error { return nil }}}
	})
	b.Get("/livez").Want(200)
	b.Do("HEAD", "/livez", nil).Want(200)
	b.Get("/readyz").Want(200)
	fault = errors.New("dial tcp 10.0.0.7:5432: connection refused")
	a := b.Get("/readyz").Want(503)
	if a.Header.Get("Retry-After") == "" || a.Object()["detail"] != "not ready: database" {
		t.Errorf("not ready: %v %s", a.Header, a.Body)
	}
	b.Get("/livez").Want(200)
	fault = nil
	b.draining.Store(true)
	b.Get("/readyz").Want(503)
}

func TestDocs(t *testing.T) {
	t.Parallel()
	b := newBench(t, nil)
	a := b.Get("/docs").Want(200)
	page := string(a.Body)
	if regexp.MustCompile(`(src|href)="(https?:)?//`).MatchString(page) {
		t.Error("the page asks another host")
	}
	assets := regexp.MustCompile(`(?:src|href)="/docs/([^"]+)"`).FindAllStringSubmatch(page, -1)
	if len(assets) != len(docsAssets) {
		t.Errorf("the page has %d parts, want %d", len(assets), len(docsAssets))
	}
	for _, m := range assets {
		part := b.Get("/docs/"+m[1], "Accept-Encoding: ").Want(200)
		if got := part.Header.Get("Content-Type"); !strings.HasPrefix(got, docsAssets[m[1]]) || len(part.Body) == 0 {
			t.Errorf("%s is %s, %d bytes", m[1], got, len(part.Body))
		}
	}
	b.Get("/docs/passwd").Want(404)
	b.Get("/docs/index.html").Want(404)

	// The policy names each inline script by the hash of what stands in the page, and no other host.
	policy := a.Header.Get("Content-Security-Policy")
	scripts := regexp.MustCompile(`(?s)<script>(.*?)</script>`).FindAllStringSubmatch(page, -1)
	if len(scripts) == 0 {
		t.Error("the page has no inline script: the policy needs no hash")
	}
	for _, m := range scripts {
		sum := sha256.Sum256([]byte(m[1]))
		if !strings.Contains(policy, "'sha256-"+base64.StdEncoding.EncodeToString(sum[:])+"'") {
			t.Errorf("the policy %s does not allow an inline script", policy)
		}
	}
	if strings.Contains(policy, "http") || strings.Contains(policy, "unsafe-eval") {
		t.Errorf("policy %s", policy)
	}
}

func TestProblems(t *testing.T) {
	t.Parallel()
	b := newBench(t, nil)
	admin := b.As("all")
	for k, p := range problemKinds {
		if a := b.Get("/problems/" + string(k)).Want(200); !strings.Contains(string(a.Body), p.title) || !strings.Contains(string(a.Body), fmt.Sprint(p.status)) {
			t.Errorf("the page of %s: %s", k, a.Body)
		}
	}
	b.Get("/problems/no_such").Want(404)

	// Each kind of the records has its status.
	for kind, want := range map[domain.Kind]int{domain.Invalid: 422, domain.NotFound: 404, domain.Conflict: 409, domain.Stale: 412,
		domain.Denied: 403, domain.Unavailable: 503, domain.Unsafe: 409, domain.Internal: 500} {
		if out := problem(&domain.Error{Kind: kind, Msg: "x"}, "r"); out.status != want {
			t.Errorf("kind %d answers %d, want %d", kind, out.status, want)
		}
	}

	a := admin.Get("/v1/failing/unsafe").Want(409)
	if doc := a.Object(); a.Problem() != "unsafe" || len(doc["findings"].([]any)) != 1 || doc["status"] != 409.0 {
		t.Errorf("unsafe: %s", a.Body)
	}
	for _, how := range []string{"panic", "internal", "unwritable"} {
		a := admin.Get("/v1/failing/" + how).Want(500)
		if doc := a.Object(); doc["detail"] != "the request could not be done because of a fault of the service; tell its operator the request_id" {
			t.Errorf("%s: %s", how, a.Body)
		}
	}
	if a := admin.Get("/v1/failing/unavailable").Want(503); a.Header.Get("Retry-After") == "" {
		t.Error("no Retry-After")
	}
	admin.Get("/v1/failing/other").Want(404)

	// Addresses and methods that are not there.
	for _, path := range []string{"/", "/v1", "/v1/none", "/livez/", "/%2e%2e/etc/passwd", "/v1/failing/" + strings.Repeat("x/", 50)} {
		if a := b.Get(path).Want(404); a.Problem() != "not_found" {
			t.Errorf("%s: %s", path, a.Body)
		}
	}
	a = b.Do("DELETE", listA, nil).Want(405)
	allow := strings.Split(a.Header.Get("Allow"), ", ")
	slices.Sort(allow)
	if !slices.Equal(allow, []string{"GET", "HEAD", "POST"}) || a.Problem() != "method_not_allowed" {
		t.Errorf("Allow %v: %s", allow, a.Body)
	}
	b.Do("BREW", listA, nil).Want(405)
	b.Do("HEAD", "/none", nil).Want(404)
}

func TestLog(t *testing.T) {
	t.Parallel()
	b := newBench(t, nil)
	b.As("all").Get("/v1/failing/internal", "X-Request-Id: trace-1.a_B").Want(500)
	b.As("all").Get("/v1/failing/panic").Want(500)
	b.As("").Get("/livez", "X-Request-Id: two words").Want(200)
	b.As("stranger").Get(listA).Want(401)
	b.Get("/none\"%0aforged=1").Want(404)
	lines := b.log.lines()
	if len(lines) != 5 {
		t.Fatalf("%d lines for 5 requests:\n%s", len(lines), strings.Join(lines, "\n"))
	}
	rows := make([]map[string]any, len(lines))
	for i, l := range lines {
		if err := json.Unmarshal([]byte(l), &rows[i]); err != nil {
			t.Fatal(err)
		}
	}
	first := rows[0]
	if first["request_id"] != "trace-1.a_B" || first["status"] != 500.0 || first["level"] != "ERROR" || first["route"] != "/v1/failing/{how}" ||
		first["principal"] != "api_key:00000000-0000-0000-0000-000000000064" || !strings.Contains(first["error"].(string), "SQLSTATE 28P01") ||
		first["bytes"].(float64) < 100 || first["method"] != "GET" {
		t.Errorf("first line: %s", lines[0])
	}
	if stack := fmt.Sprint(rows[1]["stack"]); !strings.Contains(stack, "server_test.go") || !strings.Contains(rows[1]["error"].(string), "nil pointer") {
		t.Errorf("second line: %s", lines[1])
	}
	if id := fmt.Sprint(rows[2]["request_id"]); len(id) != 36 || rows[2]["principal"] != nil || rows[2]["level"] != "INFO" {
		t.Errorf("third line: %s", lines[2])
	}
	if !strings.Contains(rows[3]["error"].(string), "the key is unknown") {
		t.Errorf("fourth line: %s", lines[3])
	}
	if rows[4]["route"] != "none" {
		t.Errorf("fifth line: %s", lines[4])
	}
}

func TestMetrics(t *testing.T) {
	t.Parallel()
	b := newBench(t, nil)
	b.As("all").Get("/v1/failing/panic")
	b.As("all").Get("/v1/failing/unsafe")
	b.As("all").Get("/v1/failing/unsafe")
	b.Get("/none")
	b.Do("BREW", "/none", nil)
	b.Do("BREW", listA, nil)
	text := string(b.Get("/metrics", "Accept: application/openmetrics-text; version=1.0.0; charset=utf-8").Want(200).Body)
	for _, want := range []string{
		`lampward_http_requests_total{code="409",method="GET",route="/v1/failing/{how}"} 2.0`,
		`lampward_http_requests_total{code="500",method="GET",route="/v1/failing/{how}"} 1.0`,
		`lampward_http_requests_total{code="404",method="GET",route="none"} 1.0`,
		`lampward_http_requests_total{code="404",method="other",route="none"} 1.0`,
		`lampward_http_requests_total{code="405",method="other",route="none"} 1.0`,
		`lampward_http_request_duration_seconds_count{method="GET",route="/v1/failing/{how}"} 3`,
		`lampward_http_requests_in_flight 1.0`,
		`lampward_http_panics_total 1.0`,
		"# EOF\n",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("no %s in\n%s", want, text)
		}
	}
	if a := b.Get("/metrics", "Accept: text/plain").Want(200); !strings.HasPrefix(a.Header.Get("Content-Type"), "text/plain") {
		t.Errorf("metrics as %s", a.Header.Get("Content-Type"))
	}
	families, err := b.reg.Gather()
	if err != nil {
		t.Fatal(err)
	}
	faults, err := promlint.NewWithMetricFamilies(families).Lint()
	if err != nil || len(faults) > 0 {
		t.Errorf("names: %v %v", faults, err)
	}
}

func TestCompression(t *testing.T) {
	t.Parallel()
	b := newBench(t, nil)
	admin := b.As("all")
	want := bytes.Repeat([]byte("0123456789"), 1000)
	for header, coding := range map[string]string{"": "", "gzip": "gzip", "zstd": "zstd", "gzip, zstd": "zstd", "gzip, deflate, br": "gzip",
		"gzip;q=1, zstd;q=0.5": "gzip", "*": "zstd", "identity": "", "zstd;q=0, gzip;q=0": "", "br": ""} {
		a := admin.Get("/v1/failing/large", "Accept: text/plain", "Accept-Encoding: "+header).Want(200)
		if got := a.Header.Get("Content-Encoding"); got != coding || !bytes.Equal(a.Plain(), want) {
			t.Errorf("%q: coded as %q, want %q", header, got, coding)
		}
		if coding != "" && len(a.Body) > len(want)/10 {
			t.Errorf("%s: %d bytes of %d", coding, len(a.Body), len(want))
		}
		if got := a.Header.Get("Vary"); got != "Accept, Accept-Encoding" {
			t.Errorf("Vary %q", got)
		}
	}
	if a := admin.Get("/v1/failing/unsafe", "Accept-Encoding: gzip"); a.Header.Get("Content-Encoding") != "" {
		t.Error("a small answer is compressed")
	}

	db := dbBench(t)
	body, err := json.Marshal(map[string]any{"tag": "T", "note": strings.Repeat("x", 3000)})
	if err != nil {
		t.Fatal(err)
	}
	for _, coding := range []string{"gzip", "zstd"} {
		made := db.Post(listA, packed(t, bytes.ReplaceAll(body, []byte(`"T"`), []byte(`"`+coding+`"`)), coding), "Content-Encoding: "+coding).Want(201)
		at := made.Header.Get("Location")
		got := db.Get(at, "Accept-Encoding: "+coding).Want(200)
		if got.ETag() != `"v1-`+coding+`"` || !bytes.Equal(got.Plain(), made.Body) {
			t.Errorf("%s: tag %s", coding, got.ETag())
		}
		db.Get(at, "Accept-Encoding: "+coding, "If-None-Match: "+got.ETag()).Want(304)
		db.Patch(at, `{"lamps":1}`, "If-Match: "+got.ETag()).Want(200)
	}
}

func TestHeaders(t *testing.T) {
	t.Parallel()
	b := newBench(t, nil, func(o *Options) { o.Limits = Limits{Rate: 0.5, Burst: 4} })
	a := b.As("all").Get("/v1/failing/unsafe")
	for name, want := range map[string]string{
		"X-Content-Type-Options":  "nosniff",
		"Referrer-Policy":         "no-referrer",
		"Content-Security-Policy": "default-src 'none'; frame-ancestors 'none'",
		"Cache-Control":           "no-store",
		"RateLimit-Policy":        `"principal";q=4;w=8`,
		"RateLimit":               `"principal";r=3;t=2`,
	} {
		if got := a.Header.Get(name); got != want {
			t.Errorf("%s is %q, want %q", name, got, want)
		}
	}
	for range 3 {
		b.As("all").Get("/v1/failing/unsafe").Want(409)
	}
	over := b.As("all").Get("/v1/failing/unsafe").Want(429)
	if over.Header.Get("Retry-After") != "2" || over.Header.Get("RateLimit") != `"principal";r=0;t=8` {
		t.Errorf("over the quota: %v", over.Header)
	}
	b.As("watcher").Get("/v1/failing/unsafe").Want(403) // another's quota is another's
	b.Get("/livez").Want(200)
}

// TestLimiterForgets holds that the quota of many principals takes bounded memory.
func TestLimiterForgets(t *testing.T) {
	t.Parallel()
	l := newLimiter(1, 2, 3)
	for i := range 100 {
		l.take(limitKey{kind: "api_key", id: [16]byte{byte(i)}}, now)
	}
	if len(l.byKey) != 3 || l.order.Len() != 3 {
		t.Errorf("%d and %d remembered, want 3", len(l.byKey), l.order.Len())
	}
	last := limitKey{kind: "api_key", id: [16]byte{99}}
	if left, _, ok := l.take(last, now); left != 0 || !ok {
		t.Errorf("the last was forgotten: %d left", left)
	}
	if _, wait, ok := l.take(last, now.Add(500*time.Millisecond)); ok || wait != 1 {
		t.Errorf("the third at once is let through or told to wait %d s", wait)
	}
	if _, _, ok := l.take(last, now.Add(1500*time.Millisecond)); !ok {
		t.Error("refused although a token was due")
	}
}

// TestTimeout holds that a request ends at its time and is told as busy, not as a fault.
func TestTimeout(t *testing.T) {
	t.Parallel()
	b := newBench(t, nil, func(o *Options) { o.Limits.Timeout = time.Millisecond })
	b.As("all").Get("/v1/failing/wait").Want(503)
}

func TestRoles(t *testing.T) {
	t.Parallel()
	for r := range roles {
		if got, ok := ParseRole(r.String()); !ok || got != r {
			t.Errorf("%s reads as %s", r, got)
		}
	}
	if _, ok := ParseRole("owner"); ok {
		t.Error("an unknown role is read")
	}
	g := Grants{All: []Grant{{Role: Viewer}}, On: map[domain.ID][]Grant{buildingA: {{Role: Crew, Until: now}, {Role: Integrator}}}}
	for _, tt := range []struct {
		got, want roleSet
	}{
		{g.everywhere(now), setOf(Viewer)},
		{g.on(buildingA, now.Add(-1)), setOf(Viewer, Crew, Integrator)},
		{g.on(buildingA, now), setOf(Viewer, Integrator)},
		{g.on(buildingB, now), setOf(Viewer)},
		{g.anywhere(now), setOf(Viewer, Integrator)},
	} {
		if tt.got != tt.want {
			t.Errorf("roles %b, want %b", tt.got, tt.want)
		}
	}
	c := &call{principal: &Principal{Grants: g}, at: now}
	if all, _ := c.reach(read); !all || !c.may(writeReadings, buildingA) || c.may(writeReadings, buildingB) {
		t.Error("reach")
	}
	if all, ids := c.reach(report); all || !slices.Equal(ids, []domain.ID{buildingA}) {
		t.Errorf("reports in %v %v", all, ids)
	}
}

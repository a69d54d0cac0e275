package apitest

import (
	"net/http"
	"net/http/httptest"
	"os"
	"strings"
	"testing"
)

func load(t *testing.T) *Contract {
	t.Helper()
	doc, err := os.ReadFile("../../openapi.yaml")
	if err != nil {
		t.Fatal(err)
	}
	c, err := Load(doc)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// TestCheck holds that the check of an exchange fails where it must.
func TestCheck(t *testing.T) {
	t.Parallel()
	c := load(t)
	problem := func(detail string) string {
		return `{"type":"/problems/not_found","title":"x","status":404,"detail":"` + detail + `","request_id":"r"}`
	}
	tests := []struct {
		name, method, path, media, body string
		status                          int
		want                            string // a part of the fault; none where empty
	}{
		{"good", "GET", "/livez", "application/json", `{"status":"alive"}`, 200, ""},
		{"undocumented status", "GET", "/livez", "application/json", `{"status":"alive"}`, 201, "does not document"},
		{"undocumented failure", "GET", "/livez", "application/problem+json", problem("x"), 404, "does not document"},
		{"wrong body", "GET", "/livez", "application/json", `{"state":"alive"}`, 200, "not as the contract says"},
		{"wrong media type", "GET", "/livez", "text/html", `x`, 200, "not as the contract says"},
		{"missing header", "GET", "/openapi.yaml", "application/yaml", `x`, 200, `header "ETag" missing`},
		{"unexpected failure", "GET", "/livez", "application/problem+json", problem("x"), 500, ""},
		{"failure that is no problem", "GET", "/none", "text/plain", "404 page not found", 404, "not as a problem"},
		{"incomplete problem", "GET", "/none", "application/problem+json", `{"type":"/problems/x"}`, 404, "not as the contract says"},
		{"no such address", "GET", "/none", "application/problem+json", problem("there is nothing here"), 404, ""},
		{"no such address, but answered", "GET", "/none", "application/json", "{}", 200, "not in the contract"},
		{"forbidden request that is answered", "GET", "/problems/9", "text/plain", "x", 200, "forbids this request"},
		{"SQL", "GET", "/none", "application/problem+json", problem("select id from driver"), 404, "the inside"},
		{"SQLSTATE", "GET", "/none", "application/problem+json", problem("failed (SQLSTATE 23505)"), 404, "the inside"},
		{"constraint", "GET", "/none", "application/problem+json", problem(`violates constraint \"driver_pkey\"`), 404, "the inside"},
		{"file", "GET", "/none", "application/problem+json", problem("open /etc/passwd: denied"), 404, "the inside"},
		{"source", "GET", "/none", "application/problem+json", problem("call.go:17"), 404, "the inside"},
		{"type", "GET", "/none", "application/problem+json", problem("cannot unmarshal into domain.ID"), 404, "the inside"},
		{"pointer", "GET", "/none", "application/problem+json", problem("nil pointer"), 404, "the inside"},
	}
	for _, tt := range tests {
		h := http.Header{"Content-Type": {tt.media}, "X-Request-Id": {"r"}}
		err := c.check(httptest.NewRequest(tt.method, tt.path, nil), tt.status, h, []byte(tt.body))
		if tt.want == "" && err != nil || tt.want != "" && (err == nil || !strings.Contains(err.Error(), tt.want)) {
			t.Errorf("%s: %v, want %q", tt.name, err, tt.want)
		}
	}
}

type passing struct{}

func (passing) Run() int { return 0 }

// TestCovering holds that what no test produced is told.
func TestCovering(t *testing.T) {
	t.Parallel()
	c := load(t)
	all := c.Uncovered()
	if len(all) < 10 {
		t.Fatalf("%v", all)
	}
	c.count("live", 200)
	if left := c.Uncovered(); len(left) != len(all)-1 {
		t.Errorf("%d left of %d after one", len(left), len(all))
	}
	for _, o := range c.Operations() {
		for _, s := range o.Statuses() {
			c.count(o.ID, s)
		}
	}
	if code := c.Covering(passing{}).Run(); code != 0 || len(c.Uncovered()) != 0 {
		t.Errorf("all covered, but ends with %d", code)
	}
}

func TestLoadRefuses(t *testing.T) {
	t.Parallel()
	for _, doc := range []string{"", "openapi: 3.0.3\ninfo: {title: x, version: '1'}\npaths: {}\n", "openapi: 3.1.0\npaths: {/a: {get: {responses: {}}}}\n", "{"} {
		if _, err := Load([]byte(doc)); err == nil {
			t.Errorf("%q is taken for a contract", doc)
		}
	}
}

package api

import (
	"fmt"
	"io"
	"log/slog"
	"os"
	"slices"
	"strings"
	"testing"

	"github.com/prometheus/client_golang/prometheus"

	"lampward/api/apitest"
)

// TestTableEqualsContract holds the route table and openapi.yaml equal, both ways.
func TestTableEqualsContract(t *testing.T) {
	t.Parallel()
	doc, err := os.ReadFile("../openapi.yaml")
	if err != nil {
		t.Fatal(err)
	}
	c, err := apitest.Load(doc)
	if err != nil {
		t.Fatal(err)
	}
	reg := prometheus.NewRegistry()
	plain := New(Options{Registerer: reg, Gatherer: reg, Authenticator: testKeys, Log: slog.New(slog.NewTextHandler(io.Discard, nil))})
	compareTable(t, plain.routes, c)
	compareTable(t, newBench(t, nil).routes, contract())
}

func compareTable(t *testing.T, routes []route, c *apitest.Contract) {
	t.Helper()
	line := func(method, path, op, right, scope string) string {
		return fmt.Sprintf("%s %s: operationId %s, right %q in %s", method, path, op, right, scope)
	}
	var table, said []string
	for _, r := range routes {
		table = append(table, line(r.Method, r.Path, r.Op, r.Right.String(), r.Scope.String()))
	}
	for _, o := range c.Operations() {
		scope := o.Scope
		if o.Public {
			scope = "public"
		}
		said = append(said, line(o.Method, o.Path, o.ID, o.Right, scope))
	}
	for _, l := range table {
		if !slices.Contains(said, l) {
			t.Errorf("in the route table, not in the contract: %s", l)
		}
	}
	for _, l := range said {
		if !slices.Contains(table, l) {
			t.Errorf("in the contract, not in the route table: %s", l)
		}
	}
	slices.Sort(table)
	if n := len(slices.Compact(table)); n != len(routes) {
		t.Errorf("%d of %d routes are there twice", len(routes)-n, len(routes))
	}
}

// TestServedContract holds the served copy equal to the root's, byte for byte.
func TestServedContract(t *testing.T) {
	t.Parallel()
	root, err := os.ReadFile("../openapi.yaml")
	if err != nil {
		t.Fatal(err)
	}
	b := newBench(t, nil)
	a := b.Get("/openapi.yaml").Want(200)
	if string(a.Body) != string(root) {
		t.Error("api/openapi.yaml differs from openapi.yaml: copy it (cp openapi.yaml api/openapi.yaml)")
	}
	b.Get("/openapi.yaml", "If-None-Match: "+a.ETag()).Want(304)
}

// TestContractStatesRequirements holds that what the table demands is documented: the statuses every caller may meet.
func TestContractStatesRequirements(t *testing.T) {
	t.Parallel()
	b := newBench(t, nil)
	said := map[string][]int{}
	for _, o := range contract().Operations() {
		said[o.ID] = o.Statuses()
	}
	for _, r := range b.routes {
		want := []int{406}
		if r.Scope != public {
			want = append(want, 401, 429)
		}
		if r.Scope == building {
			want = append(want, 404)
		}
		if allowed[r.Right] != allowed[read] || r.Scope == catalogue || r.Scope == estate {
			want = append(want, 403)
		}
		if r.Scope == public {
			want = []int{406}
		}
		if r.Match {
			want = append(want, 412, 428)
		}
		if len(r.Takes) > 0 {
			want = append(want, 413, 415)
		}
		if strings.HasPrefix(r.Op, "list") {
			want = append(want, 422)
		}
		for _, s := range want {
			if !slices.Contains(said[r.Op], s) {
				t.Errorf("%s may answer %d, which the contract does not say", r.Op, s)
			}
		}
	}
}

// TestRouteSaysWho holds that a line of the table that forgets who may use it cannot be served.
func TestRouteSaysWho(t *testing.T) {
	t.Parallel()
	for _, r := range []route{
		{Method: "GET", Path: "/x", Op: "x"},
		{Method: "GET", Path: "/x", Op: "x", Scope: building},
		{Method: "GET", Path: "/x", Op: "x", Right: read},
		{Method: "GET", Path: "/x", Op: "x", Right: read, Scope: public},
	} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("right %q in scope %q is served", r.Right, r.Scope)
				}
			}()
			reg := prometheus.NewRegistry()
			newServer(Options{Registerer: reg, Gatherer: reg, Authenticator: testKeys}, r)
		}()
	}
}

package api

import (
	"fmt"
	"net/http"
	"slices"
	"strings"
	"testing"

	"lampward/api/apitest"
)

// hostile returns JSON texts that a field must not hold: another type, a number no lamp has, an unknown word, marks that
// hide what a label says, far too much.
func hostile(t *testing.T, o apitest.Operation, f apitest.Field) []string {
	t.Helper()
	kind := f.Type
	if kind == "" && f.Enum != nil {
		kind = "string"
	}
	switch kind {
	case "string":
		bad := []string{`7`, `"a\u0000b"`, `"a\u202eb"`, `"` + strings.Repeat("x", 5000) + `"`}
		if f.Enum != nil {
			bad = append(bad, `"no such word"`)
		}
		if f.Format != "" {
			bad = append(bad, `"no such form"`)
		}
		return bad
	case "number", "integer":
		return []string{`"7"`, `1e300`, `-1e300`}
	case "boolean":
		return []string{`"yes"`}
	case "array":
		return []string{`{}`, `[[[]]]`}
	case "object":
		return []string{`[]`, `"x"`}
	}
	t.Errorf("%s: the contract does not say what %s is", o.ID, f.Name)
	return nil
}

// TestHostileChanges changes every field of every record that can be changed to what it must not hold. Each is refused by
// its name, and nothing is stored.
func TestHostileChanges(t *testing.T) {
	t.Parallel()
	s := newStreet(t)
	for _, o := range contract().Operations() {
		if o.Method != http.MethodPut { // its body names the fields; a patch sends one of them
			continue
		}
		at, _, whole := s.address(o, buildingA, buildingA)
		if !whole || len(o.Fields()) == 0 {
			t.Errorf("%s: there is no record to change at %s (add one to furnish), or the contract names no field", o.ID, at)
			continue
		}
		before := s.Get(at).Want(http.StatusOK)
		for _, f := range o.Fields() {
			for _, v := range hostile(t, o, f) {
				a := s.Patch(at, fmt.Sprintf(`{%q:%s}`, f.Name, v), "If-Match: *")
				named := slices.ContainsFunc(a.Pointers(), func(p string) bool { return p == "/"+f.Name || strings.HasPrefix(p, "/"+f.Name+"/") })
				if a.Status != http.StatusUnprocessableEntity || !named {
					t.Errorf("%s: %s: %.40s was answered %d: %.300s", o.ID, f.Name, v, a.Status, a.Body)
				}
			}
			if f.Type != "number" && f.Type != "integer" {
				continue
			}
			for _, v := range []string{"NaN", "-Infinity", "1e999", "0x10"} {
				if a := s.Patch(at, fmt.Sprintf(`{%q:%s}`, f.Name, v), "If-Match: *"); a.Status != http.StatusBadRequest && a.Status != http.StatusUnprocessableEntity {
					t.Errorf("%s: %s: %s was answered %d: %.300s", o.ID, f.Name, v, a.Status, a.Body)
				}
			}
		}
		if now := s.Get(at).Want(http.StatusOK); string(now.Body) != string(before.Body) {
			t.Errorf("%s: a refused change is stored: %s, before %s", o.ID, now.Body, before.Body)
		}
	}
}

// TestHostilePosts sends what no field may hold to every other operation that reads a body.
func TestHostilePosts(t *testing.T) {
	t.Parallel()
	s := newStreet(t)
	changed := map[string]bool{} // kinds that TestHostileChanges walks, by their list
	for _, o := range contract().Operations() {
		if o.Method == http.MethodPut {
			changed[o.Path[:strings.LastIndexByte(o.Path, '/')]] = true
		}
	}
	for _, o := range contract().Operations() {
		if o.Method != http.MethodPost || !slices.Contains(o.BodyMedia(), jsonMedia) || changed[o.Path] || o.ID == "createHue" {
			continue
		}
		at, _, _ := s.address(o, buildingA, buildingA)
		for _, f := range o.Fields() {
			for _, v := range hostile(t, o, f) {
				if a := s.Post(at, fmt.Sprintf(`{%q:%s}`, f.Name, v)); a.Status != http.StatusUnprocessableEntity {
					t.Errorf("%s: %s: %.40s was answered %d: %.300s", o.ID, f.Name, v, a.Status, a.Body)
				}
			}
		}
	}
}

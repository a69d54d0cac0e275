package api

import (
	"encoding/json"
	"fmt"
	"net/http"
	"net/url"
	"slices"
	"strings"
	"testing"

	"lampward/api/apitest"
)

// TestEveryListPagesAndFilters walks every paged list of the contract one row at a time, and narrows it by every filter to
// what its first row holds: that row is left, and all that are left hold the same.
func TestEveryListPagesAndFilters(t *testing.T) {
	t.Parallel()
	s := newStreet(t)
	s.furnish(t, atA, "2") // so that there is a second page
	for _, o := range contract().Operations() {
		query := o.Query()
		if o.Public || o.Method != http.MethodGet || !slices.ContainsFunc(query, func(f apitest.Field) bool { return f.Name == "limit" }) {
			continue
		}
		at, _, whole := s.address(o, buildingA, buildingA)
		if !whole {
			t.Errorf("%s: there is no record at %s; add one to furnish", o.ID, at)
			continue
		}
		all := s.rows(t, at+"?limit=1000")
		if len(all) == 0 {
			t.Errorf("%s: %s is empty; add a record to furnish", o.ID, at)
			continue
		}
		var paged []string
		for next := at + "?limit=1"; next != ""; {
			a := s.Get(next).Want(http.StatusOK)
			rows := rowsOf(a)
			if len(rows) != 1 {
				t.Fatalf("%s: a page of one has %d rows at %s", o.ID, len(rows), next)
			}
			paged = append(paged, rows...)
			if next = ""; a.Header.Get("Link") != "" {
				next = strings.TrimSuffix(strings.TrimPrefix(a.Header.Get("Link"), "<"), `>; rel="next"`)
			}
		}
		if !slices.Equal(paged, all) {
			t.Errorf("%s: page by page there are %d rows, at once %d:\n%s\n%s", o.ID, len(paged), len(all), paged, all)
		}
		for _, f := range query {
			if !slices.Contains([]string{"limit", "cursor", "fields", "with_retired", "sort"}, f.Name) {
				s.narrow(t, o, at, f, all)
			}
		}
	}
}

// narrow asks for the rows that hold in field f what the first row that has it holds.
func (s *street) narrow(t *testing.T, o apitest.Operation, at string, f apitest.Field, all []string) {
	t.Helper()
	for _, row := range all {
		want, there := heldIn(t, row, f.Name)
		if !there {
			continue
		}
		left := s.rows(t, at+"?limit=1000&"+f.Name+"="+url.QueryEscape(want))
		if !slices.Contains(left, row) {
			t.Errorf("%s: %s=%s leaves out %s", o.ID, f.Name, want, row)
		}
		for _, l := range left {
			if got, _ := heldIn(t, l, f.Name); !strings.Contains(strings.ToLower(got), strings.ToLower(want)) {
				t.Errorf("%s: %s=%s shows %s", o.ID, f.Name, want, l)
			}
		}
		return
	}
	switch {
	case f.Type == "boolean": // not a field of the row: the two answers share nothing
		yes, no := s.rows(t, at+"?limit=1000&"+f.Name+"=true"), s.rows(t, at+"?limit=1000&"+f.Name+"=false")
		if len(yes)+len(no) == 0 || slices.ContainsFunc(yes, func(r string) bool { return slices.Contains(no, r) }) {
			t.Errorf("%s: %s=true shows %d rows, %s=false %d, some of them the same or none at all", o.ID, f.Name, len(yes), f.Name, len(no))
		}
	case f.Format == "date-time":
		early, late := s.rows(t, at+"?limit=1000&"+f.Name+"=2001-01-01T00:00:00Z"), s.rows(t, at+"?limit=1000&"+f.Name+"=2099-01-01T00:00:00Z")
		if strings.HasSuffix(f.Name, "until") {
			early, late = late, early
		}
		if len(early) != len(all) || len(late) != 0 {
			t.Errorf("%s: %s lets %d rows pass at its widest and %d at its narrowest, of %d", o.ID, f.Name, len(early), len(late), len(all))
		}
	case f.Format == "uuid":
		if left := s.rows(t, at+"?limit=1000&"+f.Name+"=01999999-9999-7999-8999-999999999999"); len(left) != 0 {
			t.Errorf("%s: %s narrows nothing: %s", o.ID, f.Name, left)
		}
	default:
		if left := s.rows(t, at+"?limit=1000&"+f.Name+"="+url.QueryEscape(word(f))); len(left) == len(all) {
			t.Errorf("%s: %s=%s narrows nothing", o.ID, f.Name, word(f))
		}
	}
}

// word is a value of a filter that no row of the street holds.
func word(f apitest.Field) string {
	if len(f.Enum) > 0 {
		return fmt.Sprint(f.Enum[len(f.Enum)-1])
	}
	switch {
	case f.Format == "date":
		return "2001-01-01"
	case f.Type == "integer":
		return "987654321"
	}
	return "nowhere"
}

func (s *street) rows(t *testing.T, at string) []string {
	t.Helper()
	return rowsOf(s.For(t).Get(at).Want(http.StatusOK))
}

func rowsOf(a *apitest.Answer) []string {
	var page struct{ Items []json.RawMessage }
	a.JSON(&page)
	out := make([]string, len(page.Items))
	for i, r := range page.Items {
		out[i] = string(r)
	}
	return out
}

// heldIn returns a member of a row as a query parameter says it.
func heldIn(t *testing.T, row, name string) (string, bool) {
	t.Helper()
	var m map[string]any
	if err := json.Unmarshal([]byte(row), &m); err != nil {
		t.Fatal(err)
	}
	v, there := m[name]
	return fmt.Sprint(v), there
}

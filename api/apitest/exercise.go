package apitest

import (
	"encoding/json"
	"fmt"
	"hash/fnv"
	"net/http"
	"reflect"
	"strings"
	"testing"
)

// Kind is a kind of record with the usual operations, as Exercise walks through them.
type Kind struct {
	List   string         // address of the list, with its identifiers filled in
	Body   map[string]any // makes a valid record, without id
	Change map[string]any // a merge patch that changes it
	Wrong  map[string]any // a merge patch that must be refused as invalid
	Retire bool           // it can be retired and restored
	// Unique is a field that no two records may share, empty where there is none.
	Unique string
	// Values are two values of Unique besides Body's; words where nil.
	Values []any
	// Kept says that the field stays taken after a record is retired.
	Kept bool
}

// Exercise creates, reads, lists, replaces, changes, retires and restores a record, and holds what is common to all
// kinds: tags, preconditions, repeats, identifiers of the client. It returns the address of the record.
func Exercise(t *testing.T, c *Client, k Kind) string {
	t.Helper()
	c = c.For(t)
	if k.Values == nil {
		k.Values = []any{"own-1", "keyed-1"}
	}
	made := c.Post(k.List, k.Body).Want(http.StatusCreated)
	row := made.Object()
	at := made.Header.Get("Location")
	if at != k.List+"/"+row["id"].(string) {
		t.Errorf("Location is %q", at)
	}
	for name, v := range k.Body {
		if !sameJSON(row[name], v) {
			t.Errorf("%s was sent as %v and stored as %v", name, v, row[name])
		}
	}
	tag := made.ETag()

	// Read, with and without the tag; another identifier is not found.
	if got := c.Get(at).Want(http.StatusOK); got.ETag() != tag || !sameJSON(got.Object(), row) {
		t.Errorf("read as %s %s, made as %s %s", got.ETag(), got.Body, tag, made.Body)
	}
	c.Get(at, "If-None-Match: "+tag).Want(http.StatusNotModified)
	c.Get(at, `If-None-Match: "v999"`).Want(http.StatusOK)
	c.Get(at, "If-None-Match: v1").Want(http.StatusBadRequest)
	absent := k.List + "/01999999-9999-7999-8999-999999999999"
	c.Get(absent).Want(http.StatusNotFound)
	c.Get(k.List + "/nonsense").Want(http.StatusNotFound)

	// The list shows it in each form.
	if !strings.Contains(string(c.Get(k.List+"?limit=1000").Want(http.StatusOK).Body), row["id"].(string)) {
		t.Error("the list does not show it")
	}
	for _, media := range []string{"application/x-ndjson", "text/csv"} {
		if a := c.Get(k.List, "Accept: "+media).Want(http.StatusOK); !strings.Contains(string(a.Body), row["id"].(string)) {
			t.Errorf("the list as %s does not show it", media)
		}
	}
	c.Get(k.List + "?no_such_parameter=1").Want(http.StatusUnprocessableEntity)
	c.Get(k.List + "?limit=0&cursor=!").Want(http.StatusUnprocessableEntity)
	c.Get(k.List + "?cursor=%ff%zz").Want(http.StatusBadRequest)

	// The client's own identifier: the same body answers the same, another body does not.
	own := clone(k.Body)
	sum := fnv.New64a()
	sum.Write([]byte(k.List))
	own["id"] = fmt.Sprintf("01999999-9999-7999-8999-%012x", sum.Sum64()>>16)
	if k.Unique != "" {
		own[k.Unique] = k.Values[0]
	}
	first := c.Post(k.List, own).Want(http.StatusCreated)
	again := c.Post(k.List, own).Want(http.StatusCreated)
	if string(first.Body) != string(again.Body) || first.ETag() != again.ETag() {
		t.Errorf("the same create answered first %s, then %s", first.Body, again.Body)
	}
	other := clone(own)
	for name, v := range k.Change {
		other[name] = v
	}
	c.Post(k.List, other).Want(http.StatusConflict)
	if k.Unique != "" {
		c.Post(k.List, map[string]any{}, "Content-Type: text/plain").Want(http.StatusUnsupportedMediaType)
		taken := clone(k.Body)
		taken[k.Unique] = k.Values[0]
		c.Post(k.List, taken).Want(http.StatusConflict)
		c.Patch(at, map[string]any{k.Unique: k.Values[0]}, "If-Match: "+tag).Want(http.StatusConflict)
		c.Put(at, taken, "If-Match: "+tag).Want(http.StatusConflict)
	}

	// An idempotency key: the same again, never twice, not for another body.
	keyed := clone(k.Body)
	if k.Unique != "" {
		keyed[k.Unique] = k.Values[1]
	}
	once := c.Post(k.List, keyed, `Idempotency-Key: "exercise"`).Want(http.StatusCreated)
	twice := c.Post(k.List, keyed, "Idempotency-Key: exercise").Want(http.StatusCreated)
	if string(once.Body) != string(twice.Body) || once.Header.Get("Location") != twice.Header.Get("Location") || once.ETag() != twice.ETag() {
		t.Errorf("a repeat with the key answered %s, first %s", twice.Body, once.Body)
	}
	c.Post(k.List, own, "Idempotency-Key: exercise").Want(http.StatusUnprocessableEntity)
	c.Post(k.List, own, "Idempotency-Key: two words").Want(http.StatusBadRequest)

	// Replace: what was read, sent back, is accepted; an old version is not.
	replaced := c.Put(at, row, "If-Match: "+tag).Want(http.StatusOK)
	if replaced.ETag() == tag {
		t.Error("the tag did not change")
	}
	c.Put(at, row, "If-Match: "+tag).Want(http.StatusPreconditionFailed)
	c.Put(at, k.Body, "If-Match: W/"+replaced.ETag()).Want(http.StatusPreconditionFailed)
	c.Put(at, k.Body, "If-Match: v1").Want(http.StatusBadRequest)
	c.Put(absent, k.Body, "If-Match: *").Want(http.StatusNotFound)
	c.Put(at, map[string]any{"no_such_field": 1}, "If-Match: *").Want(http.StatusUnprocessableEntity)

	// Change: only what is named; what the service sets cannot be.
	changed := c.Patch(at, k.Change, "If-Match: "+replaced.ETag()).Want(http.StatusOK)
	for name, v := range k.Change {
		if !sameJSON(changed.Object()[name], v) {
			t.Errorf("%s was changed to %v and is %v", name, v, changed.Object()[name])
		}
	}
	c.Patch(at, k.Change, "If-Match: "+tag).Want(http.StatusPreconditionFailed)
	c.Patch(absent, k.Change, "If-Match: *").Want(http.StatusNotFound)
	c.Patch(at, k.Wrong, "If-Match: *").Want(http.StatusUnprocessableEntity)
	if got := c.Patch(at, map[string]any{"version": 77, "created_at": "2020-01-01T00:00:00Z"}, "If-Match: *").Want(http.StatusUnprocessableEntity).Pointers(); !reflect.DeepEqual(got, []string{"/version", "/created_at"}) {
		t.Errorf("a change of the head was refused at %v", got)
	}
	if now := c.Get(at).Want(http.StatusOK); string(now.Body) != string(changed.Body) {
		t.Errorf("a refused change was stored: %s, before %s", now.Body, changed.Body)
	}

	if k.Retire {
		retired := c.Post(at+"/retire", nil, "If-Match: "+changed.ETag()).Want(http.StatusOK)
		if retired.Object()["retired_at"] == nil {
			t.Error("it is not retired")
		}
		if repeat := c.Post(at+"/retire", nil).Want(http.StatusOK); string(repeat.Body) != string(retired.Body) {
			t.Errorf("a second retire answered %s, the first %s", repeat.Body, retired.Body)
		}
		if strings.Contains(string(c.Get(k.List+"?limit=1000").Want(http.StatusOK).Body), row["id"].(string)) {
			t.Error("the list shows it although it is retired")
		}
		if !strings.Contains(string(c.Get(k.List+"?limit=1000&with_retired=true").Want(http.StatusOK).Body), row["id"].(string)) {
			t.Error("the list with the retired does not show it")
		}
		c.Post(absent+"/retire", nil).Want(http.StatusNotFound)
		c.Post(absent+"/restore", nil).Want(http.StatusNotFound)
		c.Post(at+"/restore", nil, "If-Match: "+tag).Want(http.StatusPreconditionFailed)
		c.Post(at+"/restore", map[string]any{"a": 1}).Want(http.StatusUnprocessableEntity)
		c.Post(at+"/restore", nil, "If-Match: nonsense").Want(http.StatusBadRequest)
		if k.Unique != "" && !k.Kept { // meanwhile another takes its place
			usurper := clone(k.Body)
			usurper[k.Unique] = retired.Object()[k.Unique]
			there := c.Post(k.List, usurper).Want(http.StatusCreated).Header.Get("Location")
			c.Post(at+"/restore", nil).Want(http.StatusConflict)
			c.Post(there+"/retire", nil).Want(http.StatusOK)
		}
		back := c.Post(at+"/restore", nil).Want(http.StatusOK)
		if back.Object()["retired_at"] != nil {
			t.Error("it is still retired")
		}
		c.Post(at+"/retire", nil, "If-Match: "+tag).Want(http.StatusPreconditionFailed)
	}
	return at
}

func clone(m map[string]any) map[string]any {
	out := map[string]any{}
	for k, v := range m {
		out[k] = v
	}
	return out
}

// sameJSON compares two values by what they are as JSON.
func sameJSON(a, b any) bool {
	var x, y any
	p, err1 := json.Marshal(a)
	q, err2 := json.Marshal(b)
	return err1 == nil && err2 == nil && json.Unmarshal(p, &x) == nil && json.Unmarshal(q, &y) == nil && reflect.DeepEqual(x, y)
}

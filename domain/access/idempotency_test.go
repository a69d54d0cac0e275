package access

import (
	"testing"
	"time"

	"lampward/domain"
	"lampward/domain/domaintest"
)

func TestMain(m *testing.M) { domaintest.Main(m) }

func TestRecall(t *testing.T) {
	t.Parallel()
	pool := domaintest.DB(t)
	at := time.Date(2026, 3, 1, 8, 30, 0, 0, time.UTC)
	in := func(at time.Time, f func(domain.Scope) error) error {
		return domain.In(t.Context(), pool, domain.ID{}, domain.Actor{Kind: "command"}, at, f)
	}
	r := Retry{Principal: "api_key:1", Route: "createDriver", Key: "k", Hash: []byte{1}}
	recall := func(at time.Time, r Retry) (a *Answer, err error) {
		err = in(at, func(s domain.Scope) (err error) { a, err = Recall(t.Context(), s, r); return err })
		return a, err
	}
	remember := func(at time.Time, r Retry, a Answer) {
		t.Helper()
		if err := in(at, func(s domain.Scope) error { return Remember(t.Context(), s, r, a) }); err != nil {
			t.Fatal(err)
		}
	}

	if a, err := recall(at, r); a != nil || err != nil {
		t.Errorf("nothing kept gives %v, %v", a, err)
	}
	remember(at, r, Answer{Status: 201, Header: map[string]string{"Etag": `"v1"`}, Body: []byte(`{"a": 1}`)})
	a, err := recall(at.Add(KeepAnswers-1), r)
	if err != nil || a == nil || a.Status != 201 || a.Header["Etag"] != `"v1"` || string(a.Body) != `{"a": 1}` {
		t.Errorf("kept as %+v, %v", a, err)
	}
	other := r
	other.Hash = []byte{2}
	if _, err := recall(at, other); domain.KindOf(err) != domain.Invalid {
		t.Errorf("another body gives %v", err)
	}
	for _, stranger := range []Retry{{"api_key:2", "createDriver", "k", r.Hash}, {"api_key:1", "createDimmer", "k", r.Hash}, {"api_key:1", "createDriver", "l", r.Hash}} {
		if a, err := recall(at, stranger); a != nil || err != nil {
			t.Errorf("%v gives %v, %v", stranger, a, err)
		}
	}

	// After a day the key is free again, for another body too.
	later := at.Add(KeepAnswers)
	if a, err := recall(later, other); a != nil || err != nil {
		t.Errorf("after a day: %v, %v", a, err)
	}
	remember(later, other, Answer{Status: 200})
	if a, err := recall(later, other); err != nil || a == nil || a.Status != 200 || len(a.Body) != 0 {
		t.Errorf("kept anew as %+v, %v", a, err)
	}

	// While one transaction runs the request, another is told so; a different key is not held up.
	err = in(at, func(s domain.Scope) error {
		running := r
		running.Key = "running"
		if _, err := Recall(t.Context(), s, running); err != nil {
			return err
		}
		if _, err := recall(at, running); domain.KindOf(err) != domain.Conflict {
			t.Errorf("a running request gives %v", err)
		}
		if _, err := recall(at, Retry{"api_key:1", "createDriver", "free", r.Hash}); err != nil {
			t.Errorf("another key gives %v", err)
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}

	if n, err := ForgetAnswers(t.Context(), pool, later.Add(KeepAnswers-1)); n != 0 || err != nil {
		t.Errorf("forgot %d young answers, %v", n, err)
	}
	if n, err := ForgetAnswers(t.Context(), pool, later.Add(KeepAnswers)); n != 1 || err != nil {
		t.Errorf("forgot %d of 1, %v", n, err)
	}
}

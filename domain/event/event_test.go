package event_test

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/event"
)

func TestMain(m *testing.M) { domaintest.Main(m) }

// act records n acts in one transaction of a building (none: the central chain).
func act(t *testing.T, db *pgxpool.Pool, building domain.ID, n int) {
	t.Helper()
	err := domain.In(t.Context(), db, building, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error {
		for i := range n {
			event.Record(s, event.Act{Action: "thing.done", Kind: "thing", ID: domain.NewID(), Body: map[string]any{"n": i, "text": `<"é'; DROP TABLE audit; -->`}})
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}

func verify(t *testing.T, db *pgxpool.Pool, building domain.ID) event.Verification {
	t.Helper()
	v, err := event.Verify(t.Context(), domain.On(db, building, domaintest.Tester, domaintest.Noon))
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// sequence returns the numbers of a table's rows of a building, in order.
func sequence(t *testing.T, db *pgxpool.Pool, table string, building domain.ID) []int64 {
	t.Helper()
	rows, err := db.Query(t.Context(), `SELECT seq FROM `+table+` WHERE building_id = $1 ORDER BY seq`, building)
	if err != nil {
		t.Fatal(err)
	}
	out, err := pgx.CollectRows(rows, pgx.RowTo[int64])
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// Eight writers of one building make a chain without gaps, and events in the same order; what is rolled back leaves
// nothing.
func TestChainWithoutGaps(t *testing.T) {
	t.Parallel()
	db := domaintest.DB(t)
	b := domaintest.Building(t, db, "A") // its creation is entry 1
	gone := errors.New("given up")
	var wg sync.WaitGroup
	for w := range 8 {
		wg.Go(func() {
			for i := range 10 {
				err := domain.In(context.Background(), db, b.ID, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error {
					event.Record(s, event.Act{Action: "thing.done", Kind: "thing", ID: domain.NewID(), Body: map[string]any{"w": w, "i": i}})
					event.Record(s, event.Act{Action: "thing.told", Kind: "thing", ID: domain.NewID(), Only: "audit"})
					if i%5 == 4 {
						return gone
					}
					return nil
				})
				if err != nil && !errors.Is(err, gone) {
					t.Error(err)
				}
			}
		})
	}
	wg.Wait()
	// 8 writers, 8 of 10 transactions each kept, two entries each, one of them an event too.
	for table, want := range map[string]int{"audit": 1 + 8*8*2, "event": 1 + 8*8} {
		seqs := sequence(t, db, table, b.ID)
		if len(seqs) != want {
			t.Errorf("%s has %d rows, want %d", table, len(seqs), want)
		}
		for i, seq := range seqs {
			if seq != int64(i+1) {
				t.Fatalf("row %d of %s has number %d", i+1, table, seq)
			}
		}
	}
	if v := verify(t, db, b.ID); v.Broken != 0 || v.Entries != 1+8*8*2 {
		t.Errorf("verified as %+v", v)
	}
}

// Verifying while others write never tells of a break that is not there.
func TestVerifyBesideWriters(t *testing.T) {
	t.Parallel()
	db := domaintest.DB(t)
	b := domaintest.Building(t, db, "A")
	done := make(chan struct{})
	go func() {
		defer close(done)
		for range 150 {
			err := domain.In(context.Background(), db, b.ID, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error {
				event.Record(s, event.Act{Action: "thing.done", Kind: "thing", ID: domain.NewID()})
				return nil
			})
			if err != nil {
				t.Error(err)
			}
		}
	}()
	for {
		if v := verify(t, db, b.ID); v.Broken != 0 {
			t.Fatalf("told of a break: %+v", v)
		}
		select {
		case <-done:
			return
		default:
		}
	}
}

// Every way to tamper with a chain is found, and the first entry that does not fit is named.
func TestTampering(t *testing.T) {
	t.Parallel()
	db := domaintest.DB(t)
	for i, c := range []struct {
		name, do string
		at       int64
	}{
		{"nothing", `SELECT $1::uuid`, 0},
		{"a body changed", `UPDATE audit SET body = replace(body, 'thing.done', 'thing.gone') WHERE building_id = $1 AND seq = 3`, 3},
		{"a hash changed", `UPDATE audit SET hash = sha256('x') WHERE building_id = $1 AND seq = 3`, 3},
		{"an entry in the middle removed", `DELETE FROM audit WHERE building_id = $1 AND seq = 3`, 3},
		{"the first removed", `DELETE FROM audit WHERE building_id = $1 AND seq = 1`, 1},
		{"the last removed", `DELETE FROM audit WHERE building_id = $1 AND seq = 5`, 5},
		{"all removed", `DELETE FROM audit WHERE building_id = $1`, 1},
		{"two changed places", `UPDATE audit SET seq = CASE seq WHEN 3 THEN 40 ELSE seq END WHERE building_id = $1`, 3},
		{"one added behind the head", `INSERT INTO audit SELECT building_id, 6, body, hash, subject_kind, subject_id, by_id, at FROM audit WHERE building_id = $1 AND seq = 5`, 6},
		{"the head's hash changed", `UPDATE building_head SET audit_hash = sha256('x') WHERE building_id = $1`, 5},
		{"the head counted back", `UPDATE building_head SET audit_seq = 4 WHERE building_id = $1`, 5},
		{"hidden from its subject", `UPDATE audit SET subject_id = '0192f0c1-2345-7abc-8def-0123456789ab' WHERE building_id = $1 AND seq = 2`, 2},
		{"hidden from its kind", `UPDATE audit SET subject_kind = 'other' WHERE building_id = $1 AND seq = 2`, 2},
		{"put on somebody else", `UPDATE audit SET by_id = '0192f0c1-2345-7abc-8def-0123456789ab' WHERE building_id = $1 AND seq = 4`, 4},
		{"put on another day", `UPDATE audit SET at = at - interval '1 day' WHERE building_id = $1 AND seq = 4`, 4},
	} {
		b := domaintest.Building(t, db, fmt.Sprintf("T%d", i))
		act(t, db, b.ID, 4)
		if _, err := db.Exec(t.Context(), c.do, b.ID); err != nil {
			t.Fatalf("%s: %v", c.name, err)
		}
		v := verify(t, db, b.ID)
		// An added entry that copies the one before carries that one's number: any break at 6 is right.
		if v.Broken != c.at || (v.Broken != 0) != (v.Why != "") {
			t.Errorf("%s: told as %+v, want a break at %d", c.name, v, c.at)
		}
	}
	if _, err := event.Verify(t.Context(), domain.On(db, domain.NewID(), domaintest.Tester, domaintest.Noon)); domain.KindOf(err) != domain.NotFound {
		t.Errorf("a building that is not there gives %v", err)
	}
}

// Acts without a building make a chain of their own.
func TestCentralChain(t *testing.T) {
	t.Parallel()
	db := domaintest.DB(t)
	if v := verify(t, db, domain.ID{}); v.Broken != 0 || v.Entries != 0 {
		t.Errorf("an empty chain is verified as %+v", v)
	}
	act(t, db, domain.ID{}, 3)
	act(t, db, domain.ID{}, 2)
	if v := verify(t, db, domain.ID{}); v.Broken != 0 || v.Entries != 5 {
		t.Errorf("verified as %+v", v)
	}
	list, next, err := event.Audit(t.Context(), domain.On(db, domain.ID{}, domaintest.Tester, domaintest.Noon), event.Filter{}, domain.Page{Limit: 3})
	if err != nil || len(list) != 3 || list[0].Seq != 5 || next == "" {
		t.Errorf("the central chain lists as %+v, %q, %v", list, next, err)
	}
	if _, err := db.Exec(t.Context(), `UPDATE audit_central SET body = replace(body, 'thing.done', 'thing.gone') WHERE seq = 2`); err != nil {
		t.Fatal(err)
	}
	if v := verify(t, db, domain.ID{}); v.Broken != 2 {
		t.Errorf("a changed entry is verified as %+v", v)
	}
}

// The audit is listed from the newest, page by page without a gap, by subject, actor and time.
func TestAuditList(t *testing.T) {
	t.Parallel()
	db := domaintest.DB(t)
	b := domaintest.Building(t, db, "A")
	other := domaintest.Building(t, db, "B")
	act(t, db, other.ID, 3)
	subject, actor := domain.NewID(), domain.Actor{Kind: "person", ID: domain.NewID()}
	for i := range 5 {
		by := domaintest.Tester
		if i%2 == 0 {
			by = actor
		}
		at := domaintest.Noon.Add(time.Duration(i) * time.Hour)
		err := domain.In(t.Context(), db, b.ID, by, at, func(s domain.Scope) error {
			event.Record(s, event.Act{Action: "thing.done", Kind: "thing", ID: subject})
			return nil
		})
		if err != nil {
			t.Fatal(err)
		}
	}
	s := domain.On(db, b.ID, domaintest.Tester, domaintest.Noon)
	seqs := func(f event.Filter, limit int) string {
		var out []string
		var cursor string
		for {
			list, next, err := event.Audit(t.Context(), s, f, domain.Page{Limit: limit, Cursor: cursor})
			if err != nil {
				t.Fatal(err)
			}
			for _, e := range list {
				out = append(out, fmt.Sprint(e.Seq))
			}
			if cursor = next; next == "" {
				return strings.Join(out, " ")
			}
		}
	}
	for _, c := range []struct {
		f     event.Filter
		limit int
		want  string
	}{
		{event.Filter{}, 2, "6 5 4 3 2 1"},
		{event.Filter{}, 6, "6 5 4 3 2 1"},
		{event.Filter{}, 0, "6 5 4 3 2 1"}, // one at a time
		{event.Filter{Subject: subject}, 3, "6 5 4 3 2"},
		{event.Filter{By: actor.ID}, 100, "6 4 2"},
		{event.Filter{From: domaintest.Noon.Add(2 * time.Hour), To: domaintest.Noon.Add(4 * time.Hour)}, 100, "5 4"},
		{event.Filter{Subject: domain.NewID()}, 100, ""},
	} {
		if got := seqs(c.f, c.limit); got != c.want {
			t.Errorf("%+v by %d: %s, want %s", c.f, c.limit, got, c.want)
		}
	}
	if _, _, err := event.Audit(t.Context(), s, event.Filter{}, domain.Page{Cursor: "no"}); domain.KindOf(err) != domain.Invalid {
		t.Errorf("a bad cursor gives %v", err)
	}
}

// A body that cannot be written fails the transaction: nothing is done that the audit does not tell.
func TestUnwritableAct(t *testing.T) {
	t.Parallel()
	db := domaintest.DB(t)
	b := domaintest.Building(t, db, "A")
	err := domain.In(t.Context(), db, b.ID, domaintest.Tester, domaintest.Noon, func(s domain.Scope) error {
		event.Record(s, event.Act{Action: "thing.done", Kind: "thing", ID: domain.NewID(), Body: func() {}})
		return nil
	})
	if err == nil {
		t.Error("an act that cannot be written is passed over")
	}
	if v := verify(t, db, b.ID); v.Entries != 1 || v.Broken != 0 {
		t.Errorf("left behind: %+v", v)
	}
}

// What an act tells is what differs, as JSON says it, without what every change moves.
func TestChanged(t *testing.T) {
	t.Parallel()
	type row struct {
		Version int      `json:"version"`
		A       *float64 `json:"a,omitempty"`
		B       string   `json:"b,omitempty"`
		C       string   `json:"c"`
	}
	got := event.Changed(row{1, domaintest.Of(2.0), "", "same"}, row{2, nil, "new", "same"})
	want := `map[a:map[from:2 to:<nil>] b:map[from:<nil> to:new]]`
	if fmt.Sprint(got) != want {
		t.Errorf("told as %v, want %s", got, want)
	}
}

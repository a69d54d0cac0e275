package access

import (
	"crypto/sha256"
	"encoding/base64"
	"errors"
	"strings"
	"testing"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/event"
)

// desk is the estate's own records in a database.
type desk struct {
	t  *testing.T
	db *pgxpool.Pool
}

func (d desk) at(at time.Time, f func(domain.Scope) error) error {
	return domain.In(d.t.Context(), d.db, domain.ID{}, domaintest.Tester, at, f)
}

func (d desk) must(f func(domain.Scope) error) {
	d.t.Helper()
	if err := d.at(domaintest.Noon, f); err != nil {
		d.t.Fatal(err)
	}
}

func (d desk) key(k *Key, grants ...Grant) (secret string) {
	d.t.Helper()
	d.must(func(s domain.Scope) (err error) { secret, err = CreateKey(d.t.Context(), s, k, grants); return err })
	return secret
}

func (d desk) who(secret string, at time.Time) (Holder, error) {
	return Authenticate(d.t.Context(), d.db, secret, at)
}

func (d desk) unknown(why, secret string, at time.Time) {
	d.t.Helper()
	if h, err := d.who(secret, at); !errors.Is(err, ErrUnknownKey) {
		d.t.Errorf("%s: %+v, %v", why, h, err)
	}
}

func TestKey(t *testing.T) {
	t.Parallel()
	d := desk{t, domaintest.DB(t)}
	b := domaintest.Building(t, d.db, "A")
	noon := domaintest.Noon
	ends := noon.Add(time.Hour)
	k := Key{Name: "gateway", ExpiresAt: &ends, LastUsedAt: &noon}
	secret := d.key(&k, Grant{Role: Integrator, BuildingID: &b.ID, Until: domaintest.Of(noon.Add(30 * time.Minute))}, Grant{Role: Viewer})

	// 32 random bytes behind a lead that names them as a key of this service; kept as their SHA-256 alone.
	raw, err := base64.RawURLEncoding.DecodeString(strings.TrimPrefix(secret, "lwk_"))
	if err != nil || len(raw) != 32 || !strings.HasPrefix(secret, "lwk_") {
		t.Errorf("the secret is %d bytes, %v", len(raw), err)
	}
	var kept []byte
	var used *time.Time
	if err := d.db.QueryRow(t.Context(), `SELECT hash, last_used_at FROM api_key WHERE id = $1`, k.ID).Scan(&kept, &used); err != nil {
		t.Fatal(err)
	}
	if sum := sha256.Sum256([]byte(secret)); string(kept) != string(sum[:]) {
		t.Error("what is kept is not the SHA-256 of the secret")
	}
	if used != nil {
		t.Error("a new key was used already")
	}
	var told int
	if err := d.db.QueryRow(t.Context(), `SELECT count(*) FROM audit_central WHERE body LIKE '%' || $1 || '%'`, strings.TrimPrefix(secret, "lwk_")).Scan(&told); err != nil || told != 0 {
		t.Errorf("the audit tells the secret %d times, %v", told, err)
	}

	h, err := d.who(secret, noon)
	if err != nil || h.Actor != (domain.Actor{Kind: "api_key", ID: k.ID}) || len(h.Roles) != 2 {
		t.Fatalf("held by %+v, %v", h, err)
	}
	for _, r := range h.Roles {
		if everywhere := r.Building.IsZero(); everywhere != (r.Name == Viewer) || !everywhere && r.Building != b.ID {
			t.Errorf("role %+v", r)
		}
	}
	if h, err := d.who(secret, noon.Add(30*time.Minute)); err != nil || len(h.Roles) != 1 || h.Roles[0].Name != Viewer {
		t.Errorf("after the end of a grant: %+v, %v", h, err)
	}
	d.unknown("at its end", secret, ends)
	d.unknown("another secret", NewSecret(), noon)
	d.unknown("no secret", "", noon)
	d.unknown("without its lead", strings.TrimPrefix(secret, "lwk_"), noon)
	d.unknown("too long", secret+strings.Repeat("A", 100), noon)
	d.unknown("SQL", "lwk_' OR '1'='1", noon)

	if err := Used(t.Context(), d.db, k.ID, noon.Add(time.Minute)); err != nil {
		t.Fatal(err)
	}
	if err := Used(t.Context(), d.db, k.ID, noon); err != nil { // an older one moves nothing
		t.Fatal(err)
	}
	if got, err := Keys.Get(t.Context(), domain.On(d.db, domain.ID{}, domaintest.Tester, noon), k.ID); err != nil || got.LastUsedAt == nil || !got.LastUsedAt.Equal(noon.Add(time.Minute)) || got.Version != 1 {
		t.Errorf("used is kept as %+v, %v", got, err)
	}
	if err := d.at(noon, func(s domain.Scope) error { _, err := RevokeKey(t.Context(), s, k.ID, 9); return err }); domain.KindOf(err) != domain.Stale {
		t.Errorf("revoking another version gives %v", err)
	}
	d.must(func(s domain.Scope) error { _, err := RevokeKey(t.Context(), s, k.ID, 1); return err })
	d.unknown("revoked", secret, noon)
	if err := d.at(noon, func(s domain.Scope) error { _, err := RevokeKey(t.Context(), s, k.ID, 2); return err }); domain.KindOf(err) != domain.Conflict {
		t.Errorf("revoking twice gives %v", err)
	}
	if v, err := event.Verify(t.Context(), domain.On(d.db, domain.ID{}, domaintest.Tester, noon)); err != nil || v.Broken != 0 {
		t.Errorf("the central chain: %+v, %v", v, err)
	}
}

func TestKeyRefused(t *testing.T) {
	t.Parallel()
	d := desk{t, domaintest.DB(t)}
	noon := domaintest.Noon
	nobody := domain.NewID()
	for pointer, do := range map[string]func(domain.Scope) error{
		"/name": func(s domain.Scope) error { _, err := CreateKey(t.Context(), s, &Key{Name: " "}, nil); return err },
		"/expires_at": func(s domain.Scope) error {
			_, err := CreateKey(t.Context(), s, &Key{Name: "a", ExpiresAt: &noon}, nil)
			return err
		},
		"/person_id": func(s domain.Scope) error {
			_, err := CreateKey(t.Context(), s, &Key{Name: "a", PersonID: &nobody}, nil)
			return err
		},
		"/role": func(s domain.Scope) error {
			_, err := CreateKey(t.Context(), s, &Key{Name: "a"}, []Grant{{Role: "owner"}})
			return err
		},
		"/building_id": func(s domain.Scope) error {
			_, err := CreateKey(t.Context(), s, &Key{Name: "a"}, []Grant{{Role: Viewer, BuildingID: &nobody}})
			return err
		},
		"/until": func(s domain.Scope) error {
			_, err := CreateKey(t.Context(), s, &Key{Name: "a"}, []Grant{{Role: Viewer, Until: &noon}})
			return err
		},
		"":            func(s domain.Scope) error { return CreateGrant(t.Context(), s, &Grant{Role: Viewer}) },
		"/api_key_id": func(s domain.Scope) error { return CreateGrant(t.Context(), s, &Grant{Role: Viewer, KeyID: &nobody}) },
		"/email": func(s domain.Scope) error {
			return CreatePerson(t.Context(), s, &Person{Name: "An Example", Email: "an example"})
		},
	} {
		err := d.at(noon, do)
		told := domain.FieldsOf(err)
		if domain.KindOf(err) != domain.Invalid || len(told) != 1 || told[0].Pointer != pointer {
			t.Errorf("%q: %v", pointer, err)
		}
	}
	var kept int
	if err := d.db.QueryRow(t.Context(), `SELECT (SELECT count(*) FROM api_key) + (SELECT count(*) FROM access_grant) + (SELECT count(*) FROM person) + (SELECT count(*) FROM audit_central)`).Scan(&kept); err != nil || kept != 0 {
		t.Errorf("%d rows are stored, %v", kept, err)
	}
}

// What a person may do ends with them, whatever was granted beside, and does not come back with them.
func TestPersonLeaves(t *testing.T) {
	t.Parallel()
	d := desk{t, domaintest.DB(t)}
	p := Person{Name: "An Example", Email: "an@example.org"}
	d.must(func(s domain.Scope) error { return CreatePerson(t.Context(), s, &p) })
	k := Key{Name: "phone", PersonID: &p.ID}
	secret := d.key(&k)
	d.must(func(s domain.Scope) error { return CreateGrant(t.Context(), s, &Grant{Role: Crew, PersonID: &p.ID}) })
	if h, err := d.who(secret, domaintest.Noon); err != nil || len(h.Roles) != 1 || h.Roles[0].Name != Crew {
		t.Errorf("a key has the roles of its person: %+v, %v", h, err)
	}
	var told int
	if err := d.db.QueryRow(t.Context(), `SELECT count(*) FROM audit_central WHERE body LIKE '%Example%' OR body LIKE '%example.org%'`).Scan(&told); err != nil || told != 0 {
		t.Errorf("the audit names a person %d times, %v", told, err)
	}

	turn := func(do func(s domain.Scope) (Person, error), want domain.Kind) {
		t.Helper()
		var got Person
		err := d.at(domaintest.Noon, func(s domain.Scope) (err error) { got, err = do(s); return err })
		switch {
		case want != domain.Internal && domain.KindOf(err) != want:
			t.Errorf("gives %v", err)
		case want == domain.Internal && err != nil:
			t.Fatal(err)
		case want == domain.Internal:
			p = got
		}
	}
	retire := func(s domain.Scope) (Person, error) { return RetirePerson(t.Context(), s, p.ID, p.Version) }
	restore := func(s domain.Scope) (Person, error) { return RestorePerson(t.Context(), s, p.ID, p.Version) }
	turn(restore, domain.Conflict)
	turn(retire, domain.Internal)
	d.unknown("of a person who left", secret, domaintest.Noon)
	// Even a key that was made at the same moment, and so was not seen by the leaving, opens nothing.
	if _, err := d.db.Exec(t.Context(), `UPDATE api_key SET retired_at = NULL WHERE id = $1`, k.ID); err != nil {
		t.Fatal(err)
	}
	d.unknown("of a person who left, itself in use", secret, domaintest.Noon)
	turn(retire, domain.Conflict)
	turn(restore, domain.Internal)
	if h, err := d.who(secret, domaintest.Noon); err != nil || len(h.Roles) != 0 {
		t.Errorf("roles came back with the person: %+v, %v", h, err)
	}
	p.Name = "Another Example"
	d.must(func(s domain.Scope) error { return UpdatePerson(t.Context(), s, &p) })
	stale := p
	stale.Version = 1
	if err := d.at(domaintest.Noon, func(s domain.Scope) error { return UpdatePerson(t.Context(), s, &stale) }); domain.KindOf(err) != domain.Stale {
		t.Errorf("an old version gives %v", err)
	}
}

func TestRevokeGrant(t *testing.T) {
	t.Parallel()
	d := desk{t, domaintest.DB(t)}
	k := Key{Name: "gateway"}
	secret := d.key(&k)
	g := Grant{Role: Planner, KeyID: &k.ID}
	d.must(func(s domain.Scope) error { return CreateGrant(t.Context(), s, &g) })
	if h, err := d.who(secret, domaintest.Noon); err != nil || len(h.Roles) != 1 {
		t.Fatalf("%+v, %v", h, err)
	}
	d.must(func(s domain.Scope) error { _, err := RevokeGrant(t.Context(), s, g.ID, g.Version); return err })
	if h, err := d.who(secret, domaintest.Noon); err != nil || len(h.Roles) != 0 {
		t.Errorf("a revoked grant gives %+v, %v", h, err)
	}
}

// Package access holds who may do what: people, keys for programs, and the roles both have in buildings.
package access

import (
	"context"
	"crypto/rand"
	"crypto/sha256"
	"encoding/base64"
	"errors"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"lampward/domain"
	"lampward/domain/event"
)

// Roles. Only an administrator has rights beyond buildings.
const (
	Viewer        = "viewer"
	Crew          = "crew"
	Contractor    = "contractor"
	Integrator    = "integrator"
	Planner       = "planner"
	Administrator = "administrator"
)

// Roles lists every role.
var Roles = []string{Viewer, Crew, Contractor, Integrator, Planner, Administrator}

// A Key is what a program proves itself with. Only its hash is kept.
type Key struct {
	domain.CatalogueRow
	Name       string     `json:"name"`
	PersonID   *domain.ID `json:"person_id,omitempty"` // acts for this person; absent: for itself
	Hash       []byte     `json:"-" db:"hash"`
	ExpiresAt  *time.Time `json:"expires_at,omitempty"`
	LastUsedAt *time.Time `json:"last_used_at,omitempty"`
}

// A Grant is a role of a person or a key in one building, or in all of them.
type Grant struct {
	domain.CatalogueRow
	PersonID   *domain.ID `json:"person_id,omitempty"`
	KeyID      *domain.ID `json:"api_key_id,omitempty"`
	Role       string     `json:"role"`
	BuildingID *domain.ID `json:"building_id,omitempty"` // absent: every building
	Until      *time.Time `json:"until,omitempty"`
}

// A Person is somebody who works with the records.
type Person struct {
	domain.CatalogueRow
	Name  string `json:"name"`
	Email string `json:"email,omitempty"`
}

// Tables of access.
var (
	Keys    = domain.NewTable[Key]("api_key", "key")
	Grants  = domain.NewEstateTable[Grant]("access_grant", "grant")
	Persons = domain.NewTable[Person]("person", "person")
)

// keyLead begins every key, so that one pasted in the wrong place is recognised as a secret.
const keyLead = "lwk_"

// NewSecret returns a new key as its holder will send it: 32 random bytes.
func NewSecret() string {
	var b [32]byte
	rand.Read(b[:]) // never fails: crypto/rand ends the program instead
	return keyLead + base64.RawURLEncoding.EncodeToString(b[:])
}

// hash is what is kept of a secret: 32 random bytes need no slow hash.
func hash(secret string) []byte {
	sum := sha256.Sum256([]byte(secret))
	return sum[:]
}

// Validate reports every field of k that breaks a rule, as of now.
func (k *Key) Validate(now time.Time) error {
	c := domain.NewCheck("key")
	c.Line("/name", k.Name, true)
	c.Time("/expires_at", k.ExpiresAt)
	if k.ExpiresAt != nil && !k.ExpiresAt.After(now) {
		c.Add("/expires_at", "must lie ahead")
	}
	return c.Err()
}

// Validate reports every field of g that breaks a rule.
func (g *Grant) Validate() error {
	c := domain.NewCheck("grant")
	if (g.PersonID == nil) == (g.KeyID == nil) {
		c.Add("", "must name one of person_id and api_key_id")
	}
	if !slices.Contains(Roles, g.Role) {
		c.Add("/role", "must be one of %s", strings.Join(Roles, ", "))
	}
	c.Time("/until", g.Until)
	return c.Err()
}

// CreateKey stores a new key with its grants and returns the secret, which can never be read again.
func CreateKey(ctx context.Context, s domain.Scope, k *Key, grants []Grant) (secret string, err error) {
	if err := k.Validate(s.At); err != nil {
		return "", err
	}
	if k.PersonID != nil {
		if err := inUse(ctx, s, "key", "person", "person_id", *k.PersonID); err != nil {
			return "", err
		}
	}
	secret = NewSecret()
	k.Hash, k.LastUsedAt = hash(secret), nil
	begin(&k.CatalogueRow, s)
	if err := Keys.Insert(ctx, s, k); err != nil {
		return "", err
	}
	event.Record(s, event.Act{Action: "api_key.created", Kind: "api_key", ID: k.ID, Body: k, Only: "audit"})
	for i := range grants {
		grants[i].KeyID, grants[i].PersonID = &k.ID, nil
		if err := CreateGrant(ctx, s, &grants[i]); err != nil {
			return "", err
		}
	}
	return secret, nil
}

func begin(h *domain.CatalogueRow, s domain.Scope) {
	if h.ID.IsZero() {
		h.ID = domain.NewID()
	}
	h.Version, h.CreatedAt, h.UpdatedAt, h.RetiredAt = 1, s.At, s.At, nil
}

// inUse fails with Invalid where the record that a field of what names is not there or has ended.
func inUse(ctx context.Context, s domain.Scope, what, table, field string, id domain.ID) error {
	var there bool
	if err := s.QueryRow(ctx, `SELECT EXISTS (SELECT FROM `+table+` WHERE id = $1 AND retired_at IS NULL)`, id).Scan(&there); err != nil {
		return domain.Classify(err, what)
	}
	if !there {
		return &domain.Error{Kind: domain.Invalid, Msg: "the " + what + " is not valid",
			Fields: []domain.Field{{Pointer: "/" + field, Detail: "names nothing that is in use"}}}
	}
	return nil
}

// CreateGrant stores a new grant to a person or a key in use. It fails with Invalid where its end lies behind.
func CreateGrant(ctx context.Context, s domain.Scope, g *Grant) error {
	if err := g.Validate(); err != nil {
		return err
	}
	if g.Until != nil && !g.Until.After(s.At) {
		return &domain.Error{Kind: domain.Invalid, Msg: "the grant is not valid", Fields: []domain.Field{{Pointer: "/until", Detail: "must lie ahead"}}}
	}
	for _, n := range []struct {
		table, field string
		id           *domain.ID
	}{{"person", "person_id", g.PersonID}, {"api_key", "api_key_id", g.KeyID}, {"building", "building_id", g.BuildingID}} {
		if n.id == nil {
			continue
		}
		if err := inUse(ctx, s, "grant", n.table, n.field, *n.id); err != nil {
			return err
		}
	}
	begin(&g.CatalogueRow, s)
	if err := Grants.Insert(ctx, s, g); err != nil {
		return err
	}
	event.Record(s, event.Act{Action: "access_grant.created", Kind: "access_grant", ID: g.ID, Body: g, Only: "audit"})
	return nil
}

// RevokeKey ends a key at once.
func RevokeKey(ctx context.Context, s domain.Scope, id domain.ID, version int64) (Key, error) {
	return end(ctx, s, Keys, id, version, "api_key")
}

// RevokeGrant ends a grant at once.
func RevokeGrant(ctx context.Context, s domain.Scope, id domain.ID, version int64) (Grant, error) {
	return end(ctx, s, Grants, id, version, "access_grant")
}

func end[T any, P interface {
	*T
	CatalogueHead() *domain.CatalogueRow
}](ctx context.Context, s domain.Scope, t *domain.Table[T], id domain.ID, version int64, kind string) (T, error) {
	row, err := t.Lock(ctx, s, id)
	if err != nil {
		return row, err
	}
	h := P(&row).CatalogueHead()
	if h.RetiredAt != nil {
		return row, domain.Conflictf("the %s is already revoked", t.What)
	}
	h.Version, h.RetiredAt, h.UpdatedAt = version, &s.At, s.At
	if err := t.Update(ctx, s, &row); err != nil {
		return row, err
	}
	event.Record(s, event.Act{Action: kind + ".revoked", Kind: kind, ID: id, Only: "audit"})
	return row, nil
}

// A Role is what somebody may do where.
type Role struct {
	Name     string
	Building domain.ID // zero: every building
	Until    *time.Time
}

// A Holder is who a secret belongs to, with every role now held.
type Holder struct {
	Actor   domain.Actor
	Name    string
	Expires *time.Time // of the key itself
	Roles   []Role
}

// ErrUnknownKey says that no key in use has this secret.
var ErrUnknownKey = errors.New("access: no key in use has this secret")

// Authenticate finds who holds a secret as of now. It fails with ErrUnknownKey for one that is unknown, revoked or
// expired, or acts for a person who has left.
func Authenticate(ctx context.Context, db domain.Queryer, secret string, now time.Time) (Holder, error) {
	var h Holder
	if !strings.HasPrefix(secret, keyLead) || len(secret) > 100 {
		return h, ErrUnknownKey
	}
	var key domain.ID
	var person *domain.ID
	err := db.QueryRow(ctx, `
		SELECT k.id, k.name, k.person_id, k.expires_at
		  FROM api_key k
		  LEFT JOIN person p ON p.id = k.person_id
		 WHERE k.hash = $1 AND k.retired_at IS NULL AND p.retired_at IS NULL AND (k.expires_at IS NULL OR k.expires_at > $2)`, hash(secret), now).Scan(&key, &h.Name, &person, &h.Expires)
	if errors.Is(err, pgx.ErrNoRows) {
		return h, ErrUnknownKey
	}
	if err != nil {
		return h, domain.Classify(err, "key")
	}
	h.Actor = domain.Actor{Kind: "api_key", ID: key}
	rows, err := db.Query(ctx, `
		SELECT role, building_id, until
		  FROM access_grant
		 WHERE (api_key_id = $1 OR person_id = $2) AND retired_at IS NULL AND (until IS NULL OR until > $3)`, key, person, now)
	if err != nil {
		return h, domain.Classify(err, "grant")
	}
	h.Roles, err = pgx.CollectRows(rows, func(row pgx.CollectableRow) (r Role, err error) {
		return r, row.Scan(&r.Name, &r.Building, &r.Until)
	})
	return h, domain.Classify(err, "grant")
}

// Used notes when a key was last used; the edge calls it at most once a minute and key.
func Used(ctx context.Context, db domain.Queryer, key domain.ID, at time.Time) error {
	_, err := db.Exec(ctx, `UPDATE api_key SET last_used_at = $2 WHERE id = $1 AND (last_used_at IS NULL OR last_used_at < $2)`, key, at)
	return domain.Classify(err, "key")
}

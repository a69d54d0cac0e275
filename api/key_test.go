package api

import (
	"io"
	"log/slog"
	"slices"
	"testing"
	"time"

	"lampward/domain"
	"lampward/domain/access"
	"lampward/domain/domaintest"
)

func TestKeys(t *testing.T) {
	t.Parallel()
	pool := domaintest.DB(t)
	at := now
	k := NewKeys(pool, func() time.Time { return at }, slog.New(slog.NewTextHandler(io.Discard, nil)))
	until, expires := now.Add(time.Hour), now.Add(2*time.Hour)
	key := access.Key{Name: "panel", ExpiresAt: &expires}
	var secret string
	err := domain.In(t.Context(), pool, domain.ID{}, domain.Actor{Kind: "command"}, now, func(s domain.Scope) (err error) {
		secret, err = access.CreateKey(t.Context(), s, &key, []access.Grant{{Role: access.Viewer}, {Role: access.Planner, Until: &until}})
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	p, err := k.Authenticate(t.Context(), secret)
	if err != nil {
		t.Fatal(err)
	}
	if p.Actor != (domain.Actor{Kind: "api_key", ID: key.ID}) || p.Grants.everywhere(at) != setOf(Viewer, Planner) || p.Grants.everywhere(until) != setOf(Viewer) {
		t.Errorf("%+v", p)
	}
	if stored, err := access.Keys.Get(t.Context(), domain.On(pool, domain.ID{}, domain.Actor{}, now), key.ID); err != nil || stored.LastUsedAt == nil || !stored.LastUsedAt.Equal(now) {
		t.Errorf("use noted as %v (%v)", stored.LastUsedAt, err)
	}
	for _, wrong := range []string{"", "lwk_", secret + "x", secret[:len(secret)-1], "lwk_' OR '1'='1"} {
		if _, err := k.Authenticate(t.Context(), wrong); domain.KindOf(err) != domain.Denied {
			t.Errorf("%q: %v", wrong, err)
		}
	}

	// A revoked key works for ten seconds where it was used just before, and not at all elsewhere.
	err = domain.In(t.Context(), pool, domain.ID{}, domain.Actor{Kind: "command"}, now, func(s domain.Scope) error {
		stored, err := access.Keys.Get(t.Context(), s, key.ID)
		if err != nil {
			return err
		}
		_, err = access.RevokeKey(t.Context(), s, key.ID, stored.Version)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	at = now.Add(keepHolder - 1)
	if _, err := k.Authenticate(t.Context(), secret); err != nil {
		t.Errorf("within the ten seconds: %v", err)
	}
	at = now.Add(keepHolder)
	if _, err := k.Authenticate(t.Context(), secret); domain.KindOf(err) != domain.Denied {
		t.Errorf("after the ten seconds: %v", err)
	}
}

// TestKeyExpires holds that a key ends at its time, whatever is remembered of it.
func TestKeyExpires(t *testing.T) {
	t.Parallel()
	pool := domaintest.DB(t)
	at := now
	k := NewKeys(pool, func() time.Time { return at }, slog.New(slog.NewTextHandler(io.Discard, nil)))
	expires := now.Add(time.Second)
	var secret string
	err := domain.In(t.Context(), pool, domain.ID{}, domain.Actor{Kind: "command"}, now, func(s domain.Scope) (err error) {
		secret, err = access.CreateKey(t.Context(), s, &access.Key{Name: "short", ExpiresAt: &expires}, nil)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := k.Authenticate(t.Context(), secret); err != nil {
		t.Error(err)
	}
	at = expires
	if _, err := k.Authenticate(t.Context(), secret); domain.KindOf(err) != domain.Denied {
		t.Errorf("at its end: %v", err)
	}
}

// TestRolesAreThoseOfAccess holds the two lists of roles equal.
func TestRolesAreThoseOfAccess(t *testing.T) {
	t.Parallel()
	if !slices.Equal(roleNames[:], access.Roles) {
		t.Errorf("%v here, %v in the records", roleNames, access.Roles)
	}
}

package api

import (
	"context"
	"crypto/sha256"
	"errors"
	"log/slog"
	"sync"
	"time"

	"lampward/domain"
	"lampward/domain/access"
)

const (
	// keepHolder is how long a replica believes what it read of a key: a revoked key works no longer than this.
	keepHolder = 10 * time.Second
	// mostHolders bounds the keys a replica remembers.
	mostHolders = 10_000
	// noteUse is how often the use of a key is noted.
	noteUse = time.Minute
)

// Keys authenticates the API keys of domain/access. It keeps hashes of them, never the keys.
type Keys struct {
	db    domain.Queryer
	clock func() time.Time
	log   *slog.Logger

	mu      sync.RWMutex
	holders map[[sha256.Size]byte]held
}

type held struct {
	principal *Principal
	expires   *time.Time // of the key
	read      time.Time
	noted     time.Time // when its use was last written down
}

// NewKeys returns an authenticator that reads keys from db.
func NewKeys(db domain.Queryer, clock func() time.Time, log *slog.Logger) *Keys {
	return &Keys{db: db, clock: clock, log: log, holders: map[[sha256.Size]byte]held{}}
}

// Authenticate finds who holds a key. See Authenticator.
func (k *Keys) Authenticate(ctx context.Context, bearer string) (*Principal, error) {
	now, sum := k.clock(), sha256.Sum256([]byte(bearer))
	k.mu.RLock()
	h, known := k.holders[sum]
	k.mu.RUnlock()
	if known && now.Sub(h.read) < keepHolder && (h.expires == nil || now.Before(*h.expires)) {
		return h.principal, nil
	}
	found, err := access.Authenticate(ctx, k.db, bearer, now)
	if errors.Is(err, access.ErrUnknownKey) {
		k.forget(sum)
		return nil, &domain.Error{Kind: domain.Denied, Msg: "the key is unknown, ended or withdrawn", Err: err}
	}
	if err != nil {
		return nil, err
	}
	h.principal, err = principalOf(found)
	if err != nil {
		return nil, err
	}
	h.expires, h.read = found.Expires, now
	if now.Sub(h.noted) >= noteUse {
		h.noted = now
		// A database that may only be read still lets people read.
		if err := access.Used(ctx, k.db, found.Actor.ID, now); err != nil {
			k.log.WarnContext(ctx, "the use of a key was not noted", "api_key", found.Actor.ID.String(), "error", err)
		}
	}
	k.mu.Lock()
	defer k.mu.Unlock()
	if _, there := k.holders[sum]; !there && len(k.holders) >= mostHolders {
		for other := range k.holders { // any: it is read again when it is next used
			delete(k.holders, other)
			break
		}
	}
	k.holders[sum] = h
	return h.principal, nil
}

func (k *Keys) forget(sum [sha256.Size]byte) {
	k.mu.Lock()
	defer k.mu.Unlock()
	delete(k.holders, sum)
}

func principalOf(h access.Holder) (*Principal, error) {
	p := &Principal{Actor: h.Actor, Grants: Grants{On: map[domain.ID][]Grant{}}}
	for _, r := range h.Roles {
		role, ok := ParseRole(r.Name)
		if !ok {
			return nil, errors.New("api: a grant has the unknown role " + r.Name)
		}
		g := Grant{Role: role}
		if r.Until != nil {
			g.Until = *r.Until
		}
		if r.Building.IsZero() {
			p.Grants.All = append(p.Grants.All, g)
		} else {
			p.Grants.On[r.Building] = append(p.Grants.On[r.Building], g)
		}
	}
	return p, nil
}

package access

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"time"

	"github.com/jackc/pgx/v5"

	"lampward/domain"
)

// KeepAnswers is how long the answer to a request with an idempotency key is kept.
const KeepAnswers = 24 * time.Hour

// An Answer is what a request was answered with.
type Answer struct {
	Status int
	Header map[string]string // of those that belong to the result: ETag, Location
	Body   []byte
}

// Retry names a request that may be sent again: by whom, for what operation, under which key, and the hash of all
// that must be the same the second time.
type Retry struct {
	Principal string
	Route     string
	Key       string
	Hash      []byte // SHA-256 of path and body
}

// Recall takes the lock of r until s's transaction ends and returns the answer that was kept for it, nil where there
// is none younger than KeepAnswers. It fails with Conflict while another transaction holds the lock (the same request
// is still running) and with Invalid where the key was used for another body. It is the first lock in the order of
// locks.
func Recall(ctx context.Context, s domain.Scope, r Retry) (*Answer, error) {
	var mine bool
	err := s.QueryRow(ctx, `
		SELECT pg_try_advisory_xact_lock(hashtextextended($1 || chr(31) || $2 || chr(31) || $3, 0))`,
		r.Principal, r.Route, r.Key).Scan(&mine)
	if err != nil {
		return nil, domain.Classify(err, "request")
	}
	if !mine {
		return nil, domain.Conflictf("the same request is still running; send it again in a moment")
	}
	var a Answer
	var hash, header []byte
	err = s.QueryRow(ctx, `
		SELECT body_hash, status, headers, body
		  FROM idempotency
		 WHERE principal = $1 AND route = $2 AND key = $3 AND created_at > $4`,
		r.Principal, r.Route, r.Key, s.At.Add(-KeepAnswers)).Scan(&hash, &a.Status, &header, &a.Body)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, nil
	}
	if err != nil {
		return nil, domain.Classify(err, "request")
	}
	if !bytes.Equal(hash, r.Hash) {
		return nil, domain.Invalidf("this Idempotency-Key was used for another request; a new request needs a new key")
	}
	return &a, json.Unmarshal(header, &a.Header)
}

// Remember keeps the answer of r in s's transaction: it is kept if what the request did is kept.
func Remember(ctx context.Context, s domain.Scope, r Retry, a Answer) error {
	header, err := json.Marshal(a.Header)
	if err != nil {
		return err
	}
	body := a.Body
	if body == nil {
		body = []byte{}
	}
	_, err = s.Exec(ctx, `
		INSERT INTO idempotency (principal, route, key, body_hash, status, headers, body, created_at)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8)
		    ON CONFLICT (principal, route, key) DO UPDATE
		   SET body_hash = excluded.body_hash, status = excluded.status, headers = excluded.headers,
		       body = excluded.body, created_at = excluded.created_at`,
		r.Principal, r.Route, r.Key, r.Hash, a.Status, string(header), body, s.At)
	return domain.Classify(err, "request")
}

// ForgetAnswers removes the answers older than KeepAnswers and returns how many there were.
func ForgetAnswers(ctx context.Context, db domain.Queryer, at time.Time) (int64, error) {
	tag, err := db.Exec(ctx, `DELETE FROM idempotency WHERE created_at <= $1`, at.Add(-KeepAnswers))
	return tag.RowsAffected(), domain.Classify(err, "request")
}

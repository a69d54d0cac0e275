package api

import (
	"crypto/aes"
	"crypto/cipher"
	"crypto/hkdf"
	"crypto/sha256"
	"net/http"
	"strings"

	"lampward/domain"
	"lampward/domain/access"
)

// write runs f in a transaction on a building (none for the catalogue and the estate) and answers what f returns.
// Where a POST carries an Idempotency-Key, the answer is stored in that same transaction, and a request that repeats
// the key is answered from there without running f. f may run more than once, so it must set what it returns afresh.
func (c *call) write(building domain.ID, f func(domain.Scope) (reply, error)) (reply, error) {
	retry, err := c.retry()
	if err != nil {
		return reply{}, err
	}
	var out reply
	err = domain.In(c.ctx, c.s.opt.Pool, building, c.principal.Actor, c.at, func(s domain.Scope) error {
		out = reply{}
		if retry != nil {
			a, err := c.recall(s, *retry)
			if err != nil {
				return err
			}
			if a != nil {
				out = *a
				return nil
			}
		}
		r, err := f(s)
		if err != nil {
			return err
		}
		if err := r.encode(); err != nil {
			return err
		}
		if retry != nil {
			a := r.kept()
			if c.route.Secret {
				if a.Body, err = c.seal(a.Body); err != nil {
					return err
				}
			}
			if err := access.Remember(c.ctx, s, *retry, a); err != nil {
				return err
			}
		}
		out = r
		return nil
	})
	if err != nil {
		return reply{}, err
	}
	return out, nil
}

// recall returns what the same request was answered with before, nil where it was not.
func (c *call) recall(s domain.Scope, r access.Retry) (*reply, error) {
	a, err := access.Recall(c.ctx, s, r)
	if err != nil || a == nil {
		return nil, err
	}
	if c.route.Secret {
		if a.Body, err = c.unseal(a.Body); err != nil {
			return nil, err
		}
	}
	out := recalled(a)
	return &out, nil
}

// answered is for a handler that must do something before its write: it returns what the same request was answered with
// before, and whether it was.
func (c *call) answered() (out reply, done bool, err error) {
	retry, err := c.retry()
	if err != nil || retry == nil {
		return reply{}, false, err
	}
	err = domain.In(c.ctx, c.s.opt.Pool, domain.ID{}, c.principal.Actor, c.at, func(s domain.Scope) error {
		a, err := c.recall(s, *retry)
		if done = a != nil; done {
			out = *a
		}
		return err
	})
	return out, done, err
}

// seal encrypts an answer that holds a secret with a key made of the caller's own credentials, which the database does
// not hold: who reads the database, or a backup of it, learns no key.
func (c *call) seal(body []byte) ([]byte, error) {
	lock, err := c.lock()
	if err != nil {
		return nil, err
	}
	return lock.Seal(nil, nil, body, []byte(c.route.Op)), nil
}

// unseal opens what seal closed. It fails with Conflict where other credentials closed it.
func (c *call) unseal(sealed []byte) ([]byte, error) {
	lock, err := c.lock()
	if err != nil {
		return nil, err
	}
	body, err := lock.Open(nil, nil, sealed, []byte(c.route.Op))
	if err != nil {
		return nil, &domain.Error{Kind: domain.Conflict, Msg: "this was done before under other credentials, and its secret is shown to those alone", Err: err}
	}
	return body, nil
}

// lock is AES-256-GCM with random nonces under a key derived from the credentials (RFC 5869).
func (c *call) lock() (cipher.AEAD, error) {
	bearer, err := credentials(c.r)
	if err != nil {
		return nil, err
	}
	key, err := hkdf.Key(sha256.New, []byte(bearer), nil, "kept answer", 32)
	if err != nil {
		return nil, err
	}
	block, err := aes.NewCipher(key)
	if err != nil {
		return nil, err
	}
	return cipher.NewGCMWithRandomNonce(block)
}

// retry returns what makes a repeat of this request the same request, nil without an Idempotency-Key
// (draft-ietf-httpapi-idempotency-key-header-07; the quotes of its syntax may be left out).
func (c *call) retry() (*access.Retry, error) {
	v := c.r.Header["Idempotency-Key"]
	if len(v) == 0 || c.r.Method != http.MethodPost {
		return nil, nil
	}
	key := strings.TrimSpace(v[0])
	if len(key) > 2 && key[0] == '"' && key[len(key)-1] == '"' {
		key = key[1 : len(key)-1]
	}
	ok := len(v) == 1 && len(key) > 0 && len(key) <= 255
	for i := range len(key) {
		ok = ok && key[i] > ' ' && key[i] < 0x7f && key[i] != '"' && key[i] != '\\'
	}
	if !ok {
		return nil, refuse(malformed, "Idempotency-Key must be 1 to 255 visible ASCII characters, such as a UUID, in double quotes or without")
	}
	body, err := c.body()
	if err != nil {
		return nil, err
	}
	h := sha256.New()
	h.Write([]byte(c.r.URL.RequestURI()))
	h.Write([]byte{0})
	h.Write(body)
	return &access.Retry{Principal: c.principal.String(), Route: c.route.Op, Key: key, Hash: h.Sum(nil)}, nil
}

// kept is the part of an encoded reply that a repeat is answered with.
func (r *reply) kept() access.Answer {
	a := access.Answer{Status: r.status, Header: map[string]string{}, Body: r.raw}
	if a.Status == 0 {
		a.Status = http.StatusOK
	}
	for _, kv := range r.header {
		a.Header[kv[0]] = kv[1]
	}
	if r.version > 0 {
		a.Header["Etag"] = etag(r.version)
	}
	if r.media != "" {
		a.Header["Content-Type"] = r.media
	}
	return a
}

func recalled(a *access.Answer) reply {
	out := reply{status: a.Status, raw: a.Body}
	for name, v := range a.Header {
		switch name {
		case "Etag":
			if m, err := parseMatch(name, []string{v}); err == nil && len(m.versions) == 1 {
				out.version = m.versions[0]
			}
		case "Content-Type":
			out.media = v
		default:
			out.header = append(out.header, [2]string{name, v})
		}
	}
	return out
}

package apitest

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"

	"github.com/getkin/kin-openapi/openapi3"
	"github.com/getkin/kin-openapi/routers"
	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
)

func route(doc *openapi3.T, o *Operation) *routers.Route {
	return &routers.Route{Spec: doc, Path: o.Path, PathItem: o.item, Method: o.Method, Operation: o.op}
}

// Client sends requests to a handler and fails the test where an exchange breaks the contract.
type Client struct {
	t        testing.TB
	contract *Contract
	handler  http.Handler
	key      string
}

// Client returns a client that sends key as its credentials; none where key is empty.
func (c *Contract) Client(t testing.TB, h http.Handler, key string) *Client {
	return &Client{t: t, contract: c, handler: h, key: key}
}

// As returns the client with other credentials.
func (c *Client) As(key string) *Client {
	d := *c
	d.key = key
	return &d
}

// For returns the client for another test (a subtest).
func (c *Client) For(t testing.TB) *Client {
	d := *c
	d.t = t
	return &d
}

// Answer is what came back.
type Answer struct {
	t      testing.TB
	what   string
	Status int
	Header http.Header
	Body   []byte
	Cut    bool // the connection was cut in the middle
}

// Do sends one request. A body that is not nil, text or bytes is sent as JSON. Headers are given as "Name: value"; the
// Content-Type is what the operation reads, unless given.
func (c *Client) Do(method, target string, body any, headers ...string) *Answer {
	c.t.Helper()
	var sent []byte
	switch b := body.(type) {
	case nil:
	case []byte:
		sent = b
	case string:
		sent = []byte(b)
	default:
		var err error
		if sent, err = json.Marshal(b); err != nil {
			c.t.Fatal(err)
		}
	}
	make := func() *http.Request {
		r := httptest.NewRequestWithContext(c.t.Context(), method, target, bytes.NewReader(sent))
		if body == nil {
			r.Body, r.ContentLength = http.NoBody, 0
		}
		if c.key != "" {
			r.Header.Set("Authorization", "Bearer "+c.key)
		}
		if o, _ := c.contract.find(method, r.URL.Path); o != nil && body != nil && len(o.BodyMedia()) > 0 {
			r.Header.Set("Content-Type", o.BodyMedia()[0])
		}
		for _, h := range headers {
			name, value, ok := strings.Cut(h, ":")
			if !ok {
				c.t.Fatalf("%q is not a header", h)
			}
			if value = strings.TrimSpace(value); value == "" {
				r.Header.Del(name)
			} else {
				r.Header.Set(name, value)
			}
		}
		return r
	}
	w := httptest.NewRecorder()
	a := &Answer{t: c.t, what: method + " " + target}
	func() {
		defer func() {
			if v := recover(); v == http.ErrAbortHandler {
				a.Cut = true
			} else if v != nil {
				panic(v)
			}
		}()
		c.handler.ServeHTTP(w, make())
	}()
	res := w.Result()
	a.Status, a.Header = res.StatusCode, res.Header
	var err error
	if a.Body, err = io.ReadAll(res.Body); err != nil {
		c.t.Fatal(err)
	}
	if a.Header.Get("X-Request-Id") == "" {
		c.t.Errorf("%s: no X-Request-Id", a.what)
	}
	if a.Cut {
		return a
	}
	r := make()
	if coding := r.Header.Get("Content-Encoding"); coding != "" {
		if plain, err := decoded(sent, coding); err == nil { // else it is sent broken on purpose
			r.Body, r.ContentLength = io.NopCloser(bytes.NewReader(plain)), int64(len(plain))
		}
	}
	shown, err := decoded(a.Body, a.Header.Get("Content-Encoding"))
	if err == nil {
		err = c.contract.check(r, a.Status, a.Header, shown)
	}
	if err != nil {
		c.t.Errorf("%s: %v\n%.2000s", a.what, err, shown)
	}
	return a
}

// decoded takes a content coding off a body.
func decoded(body []byte, coding string) ([]byte, error) {
	switch coding {
	case "gzip":
		z, err := gzip.NewReader(bytes.NewReader(body))
		if err != nil {
			return nil, err
		}
		return io.ReadAll(z)
	case "zstd":
		z, err := zstd.NewReader(bytes.NewReader(body), zstd.WithDecoderMaxMemory(1<<28))
		if err != nil {
			return nil, err
		}
		defer z.Close()
		return io.ReadAll(z)
	}
	return body, nil
}

// Plain returns the body without its content coding.
func (a *Answer) Plain() []byte {
	a.t.Helper()
	plain, err := decoded(a.Body, a.Header.Get("Content-Encoding"))
	if err != nil {
		a.t.Fatalf("%s: %v", a.what, err)
	}
	return plain
}

// Get, Post, Put and Patch are Do with the method of their name.
func (c *Client) Get(target string, headers ...string) *Answer {
	c.t.Helper()
	return c.Do(http.MethodGet, target, nil, headers...)
}

// Post sends a POST.
func (c *Client) Post(target string, body any, headers ...string) *Answer {
	c.t.Helper()
	return c.Do(http.MethodPost, target, body, headers...)
}

// Put sends a PUT.
func (c *Client) Put(target string, body any, headers ...string) *Answer {
	c.t.Helper()
	return c.Do(http.MethodPut, target, body, headers...)
}

// Patch sends a PATCH.
func (c *Client) Patch(target string, body any, headers ...string) *Answer {
	c.t.Helper()
	return c.Do(http.MethodPatch, target, body, headers...)
}

// Want ends the test where the status is another.
func (a *Answer) Want(status int) *Answer {
	a.t.Helper()
	if a.Status != status {
		a.t.Fatalf("%s answered %d, want %d\n%.2000s", a.what, a.Status, status, a.Body)
	}
	return a
}

// JSON reads the body into v.
func (a *Answer) JSON(v any) *Answer {
	a.t.Helper()
	if err := json.Unmarshal(a.Body, v); err != nil {
		a.t.Fatalf("%s: %v\n%.2000s", a.what, err, a.Body)
	}
	return a
}

// Object returns the body as a JSON object.
func (a *Answer) Object() map[string]any {
	a.t.Helper()
	var v map[string]any
	a.JSON(&v)
	return v
}

// ETag returns the entity tag, and ends the test where there is none.
func (a *Answer) ETag() string {
	a.t.Helper()
	tag := a.Header.Get("Etag")
	if tag == "" {
		a.t.Fatalf("%s: no ETag", a.what)
	}
	return tag
}

// Pointers returns the pointers of a problem's errors.
func (a *Answer) Pointers() []string {
	a.t.Helper()
	var p struct {
		Errors []struct{ Pointer, Detail string }
	}
	a.JSON(&p)
	out := make([]string, len(p.Errors))
	for i, e := range p.Errors {
		out[i] = e.Pointer
	}
	return out
}

// Problem returns the last part of a problem's type.
func (a *Answer) Problem() string {
	a.t.Helper()
	return strings.TrimPrefix(fmt.Sprint(a.Object()["type"]), "/problems/")
}

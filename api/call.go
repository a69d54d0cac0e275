package api

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"net/http"
	"runtime/debug"
	"strconv"
	"strings"
	"time"

	"github.com/gin-gonic/gin"

	"lampward/domain"
)

// call is one request on its way through the edge.
type call struct {
	ctx       context.Context
	gin       *gin.Context
	w         gin.ResponseWriter
	r         *http.Request
	s         *Server
	route     *route
	requestID string
	at        time.Time // one time for all that the request does
	principal *Principal
	building  domain.ID // of the path, where the route's scope is building
	media     string    // of the answer, as Accept chose it
	takesIn   string    // of the body
	whole     []byte    // the body, once read
	match     match     // If-Match
	values    [8]string // of headers; see set
	valued    int
}

// set puts one header into the answer. Its value lies in the call itself, which saves an allocation for each.
func (c *call) set(name, value string) {
	i := c.valued
	if i == len(c.values) {
		c.w.Header()[name] = []string{value}
		return
	}
	c.valued++
	c.values[i] = value
	c.w.Header()[name] = c.values[i : i+1 : i+1]
}

// id returns the identifier a path parameter holds. A malformed one names nothing, so it fails with NotFound.
func (c *call) id(name string) (domain.ID, error) {
	id, err := domain.ParseID(c.gin.Param(name))
	if err != nil {
		return id, domain.NotFoundf("%.60q is not an identifier, so there is no such %s", c.gin.Param(name), strings.TrimSuffix(name, "_id"))
	}
	return id, nil
}

// read returns a scope for reading the building of the path (or the catalogue, or the estate) outside a transaction.
func (c *call) read() domain.Scope {
	return domain.On(c.s.opt.Pool, c.building, c.principal.Actor, c.at)
}

// within runs one piece of a long answer in the time that a whole short one has.
func (c *call) within(f func() error) error {
	outer := c.ctx
	ctx, cancel := context.WithTimeout(outer, c.s.opt.Limits.Timeout)
	defer func() { cancel(); c.ctx = outer }()
	c.ctx = ctx
	return f()
}

// serve is the one wrapper around every handler: it decides who may, answers, counts and logs.
func (s *Server) serve(r *route) gin.HandlerFunc {
	return func(g *gin.Context) {
		start := time.Now()
		s.meters.inFlight.Inc()
		c := &call{gin: g, w: g.Writer, r: g.Request, s: s, route: r, requestID: requestID(g.Request), at: s.opt.Clock()}
		c.set("X-Request-Id", c.requestID)
		secure(g.Writer.Header(), g.Request)

		ctx, cancel := g.Request.Context(), context.CancelFunc(func() {})
		if r.Timeout > 0 {
			ctx, cancel = context.WithTimeout(ctx, r.Timeout)
		}
		c.ctx = ctx
		defer cancel()

		fault := c.answer()

		status := g.Writer.Status()
		if gone := errors.Is(g.Request.Context().Err(), context.Canceled) && fault != nil; gone {
			status = statusGone
		}
		took := time.Since(start)
		s.meters.inFlight.Dec()
		if r.Method == "" { // no route: a stranger's method is no label
			s.meters.of(r.Path, knownMethod(g.Request.Method)).count(status, took.Seconds())
		} else {
			r.count(status, took.Seconds())
		}
		c.log(status, took, fault)
		if _, ok := errors.AsType[*brokenStream](fault); ok {
			// The status is sent; only a cut connection tells the receiver that what it has is not all.
			panic(http.ErrAbortHandler)
		}
	}
}

// statusGone is what the log and the metrics say of a request whose sender went away before the answer.
const statusGone = 499

type brokenStream struct{ err error }

func (b *brokenStream) Error() string { return "the answer broke off: " + b.err.Error() }
func (b *brokenStream) Unwrap() error { return b.err }

// answer runs the handler and writes what it returns. The error it returns is for the log.
func (c *call) answer() (fault error) {
	defer func() {
		v := recover()
		if v == nil {
			return
		}
		c.s.meters.panics.Inc()
		p := &panicked{value: v, stack: debug.Stack()}
		fault = p
		if c.w.Written() {
			fault = &brokenStream{p}
			return
		}
		out := problem(p, c.requestID)
		if err := c.send(&out); err != nil {
			fault = errors.Join(p, err)
		}
	}()
	out, err := c.handle()
	if err == nil {
		err = out.encode()
	}
	if err != nil {
		out = problem(err, c.requestID)
	}
	if werr := c.send(&out); werr != nil {
		return &brokenStream{errors.Join(werr, err)}
	}
	return err
}

type panicked struct {
	value any
	stack []byte
}

func (p *panicked) Error() string { return fmt.Sprintf("panic: %v", p.value) }

// handle does all that comes before the handler, in the order in which a caller needs to know of it.
func (c *call) handle() (reply, error) {
	r := c.route
	if r.Scope != public {
		if err := c.identify(); err != nil {
			return reply{}, err
		}
		if err := c.s.admit(c); err != nil {
			return reply{}, err
		}
	}
	if err := c.accepts(); err != nil {
		return reply{}, err
	}
	if r.Method != http.MethodGet && r.Method != "" {
		var err error
		if c.takesIn, err = c.takes(); err != nil {
			return reply{}, err
		}
		if c.match, err = parseMatch("If-Match", c.r.Header["If-Match"]); err != nil {
			return reply{}, err
		}
		if r.Match && !c.match.given {
			return reply{}, refuse(preconditionRequired, "send the ETag of the version you read as If-Match")
		}
	}
	return r.Handle(c)
}

// identify finds out who asks and takes one of the requests they may make.
func (c *call) identify() error {
	bearer, err := credentials(c.r)
	if err == nil {
		c.principal, err = c.s.opt.Authenticator.Authenticate(c.ctx, bearer)
	}
	if err == nil {
		return c.spend(limitKey{kind: c.principal.Actor.Kind, id: c.principal.Actor.ID})
	}
	if k := domain.KindOf(err); k != domain.Denied {
		if _, ok := errors.AsType[*refusal](err); !ok {
			return err
		}
	}
	addr, _, splitErr := net.SplitHostPort(c.r.RemoteAddr)
	if splitErr != nil {
		addr = c.r.RemoteAddr
	}
	if err := c.spend(limitKey{addr: addr}); err != nil {
		return err
	}
	challenge := `Bearer realm="lampward"`
	msg := "send Authorization: Bearer followed by an API key"
	if bearer != "" {
		challenge += `, error="invalid_token"`
		msg = "the key is unknown, ended or withdrawn"
	}
	return &refusal{kind: unauthenticated, msg: msg, header: [][2]string{{"Www-Authenticate", challenge}}, err: err}
}

var errNoCredentials = &refusal{kind: unauthenticated, msg: "no credentials"}

func credentials(r *http.Request) (string, error) {
	const scheme = "bearer "
	v := r.Header["Authorization"]
	if len(v) != 1 || len(v[0]) <= len(scheme) || !strings.EqualFold(v[0][:len(scheme)], scheme) {
		return "", errNoCredentials
	}
	token := strings.TrimSpace(v[0][len(scheme):])
	if token == "" || len(token) > 8192 {
		return "", errNoCredentials
	}
	return token, nil
}

func (c *call) spend(key limitKey) error {
	left, wait, ok := c.s.limiter.take(key, c.at)
	c.w.Header()["Ratelimit-Policy"] = c.s.limiter.policy
	c.set("Ratelimit", c.s.limiter.header(left))
	if !ok {
		return refuse(rateLimited, "too many requests; wait %d s", wait).with("Retry-After", strconv.Itoa(wait))
	}
	return nil
}

// requestID takes the caller's X-Request-Id where it is short and plain, so that one id follows a request through
// several services, and makes one otherwise.
func requestID(r *http.Request) string {
	if v := r.Header["X-Request-Id"]; len(v) == 1 && plainID(v[0]) {
		return v[0]
	}
	return domain.NewID().String()
}

func plainID(s string) bool {
	if len(s) < 1 || len(s) > 64 {
		return false
	}
	for i := range len(s) {
		switch c := s[i]; {
		case c >= '0' && c <= '9', c >= 'a' && c <= 'z', c >= 'A' && c <= 'Z', c == '-', c == '_', c == '.':
		default:
			return false
		}
	}
	return true
}

// log writes the one line of the access log.
func (c *call) log(status int, took time.Duration, fault error) {
	level := slog.LevelInfo
	if status >= 500 {
		level = slog.LevelError
	}
	if !c.s.opt.Log.Enabled(c.ctx, level) {
		return
	}
	var b [12]slog.Attr
	attrs := append(b[:0],
		slog.String("request_id", c.requestID),
		slog.String("method", c.r.Method),
		slog.String("route", c.route.Path),
		slog.String("path", c.r.URL.Path),
		slog.Int("status", status),
		slog.Int("bytes", max(0, c.w.Size())),
		slog.Float64("ms", float64(took.Microseconds())/1000),
	)
	if c.principal != nil {
		attrs = append(attrs, slog.String("principal", c.principal.String()))
	}
	if fault != nil {
		attrs = append(attrs, slog.String("error", fault.Error()))
	}
	if p, ok := errors.AsType[*panicked](fault); ok {
		attrs = append(attrs, slog.String("stack", string(p.stack)))
	}
	c.s.opt.Log.LogAttrs(c.ctx, level, "request", attrs...)
}

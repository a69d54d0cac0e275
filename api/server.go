package api

import (
	"context"
	"log/slog"
	"net/http"
	"sync"
	"sync/atomic"
	"time"

	"github.com/gin-gonic/gin"
	"github.com/jackc/pgx/v5/pgxpool"
	"github.com/prometheus/client_golang/prometheus"

	"lampward/domain"
	"lampward/domain/review"
)

// Limits bound what one request, and one principal, may ask for. Zero fields take the default.
type Limits struct {
	Body       int64         // bytes of a body after decompression; 1 MiB
	Timeout    time.Duration // of a request; 30 s
	Rate       float64       // requests a second of one principal, in the long run; 200
	Burst      int           // requests of one principal at once; 400
	Principals int           // principals whose quota is remembered; 10,000
}

// Check is one thing that must work before the service is ready.
type Check struct {
	Name string
	Run  func(context.Context) error
}

// Options is what the edge needs. Pool may be nil where no route uses it.
type Options struct {
	Pool           *pgxpool.Pool
	Clock          func() time.Time // time.Now where nil
	Log            *slog.Logger     // slog.Default where nil
	Registerer     prometheus.Registerer
	Gatherer       prometheus.Gatherer
	Authenticator  Authenticator
	Reviewer       *review.Reviewer                               // review.New() where nil
	BuildingExists func(context.Context, domain.ID) (bool, error) // asked for grants on all buildings; not asked where nil
	Ready          []Check
	Limits         Limits
	DrainDelay     time.Duration // between "not ready" and closing the listener, for a load balancer to notice; 0
	DrainTimeout   time.Duration // for requests in flight to end; 30 s
}

// Server answers every route of the table. It is an http.Handler.
type Server struct {
	opt       Options
	engine    *gin.Engine
	routes    []route
	more      []route // of tests
	meters    *meters
	limiter   *limiter
	buildings sync.Map // domain.ID of buildings known to exist
	page      docsPage
	draining  atomic.Bool
	stopping  context.Context // ended when the server stops, so that endless streams end
	stop      context.CancelFunc
}

// New returns a server. It panics where Registerer, Gatherer or Authenticator is missing: a fault of the program.
func New(o Options) *Server { return newServer(o) }

func newServer(o Options, more ...route) *Server {
	if o.Registerer == nil || o.Gatherer == nil || o.Authenticator == nil {
		panic("api: New needs a Registerer, a Gatherer and an Authenticator")
	}
	o = o.withDefaults()
	s := &Server{opt: o, more: more, meters: newMeters(o.Registerer), page: newDocsPage()}
	s.limiter = newLimiter(o.Limits.Rate, o.Limits.Burst, o.Limits.Principals)
	s.stopping, s.stop = context.WithCancel(context.Background())
	gin.SetMode(gin.ReleaseMode)
	s.engine = gin.New()
	s.engine.ContextWithFallback = true
	s.engine.HandleMethodNotAllowed = true
	s.engine.RedirectTrailingSlash = false
	s.engine.RedirectFixedPath = false
	s.routes = s.table()
	for i := range s.routes {
		r := &s.routes[i]
		s.prepare(r)
		handle := s.serve(r)
		s.engine.Handle(r.Method, braces.Replace(r.Path), handle)
		if r.Method == http.MethodGet {
			s.engine.Handle(http.MethodHead, braces.Replace(r.Path), handle)
		}
	}
	s.engine.NoRoute(s.serve(s.prepare(&route{Path: "none", Scope: public, Handle: func(*call) (reply, error) {
		return reply{}, domain.NotFoundf("there is nothing at this address; /docs shows what there is")
	}})))
	s.engine.NoMethod(s.serve(s.prepare(&route{Path: "none", Scope: public, Handle: func(*call) (reply, error) {
		return reply{}, refuse(methodNotAllowed, "this address does not take this method; Allow lists those it does")
	}})))
	return s
}

// prepare completes a line of the table. It panics where the line does not say who may: a fault of the program.
func (s *Server) prepare(r *route) *route {
	if r.Scope == 0 || (r.Right == 0) != (r.Scope == public) {
		panic("api: the route " + r.Op + " does not say who may use it")
	}
	if len(r.Gives) == 0 {
		r.Gives = []string{jsonMedia}
	}
	if r.body = r.Body; r.body == 0 {
		r.body = s.opt.Limits.Body
	}
	if r.Timeout == 0 {
		r.Timeout = s.opt.Limits.Timeout
	}
	if r.Method != "" {
		r.meter = s.meters.of(r.Path, r.Method)
	}
	return r
}

func (o Options) withDefaults() Options {
	if o.Clock == nil {
		o.Clock = time.Now
	}
	if o.Reviewer == nil {
		o.Reviewer = review.New()
	}
	if o.Log == nil {
		o.Log = slog.Default()
	}
	l := &o.Limits
	if l.Body == 0 {
		l.Body = 1 << 20
	}
	if l.Timeout == 0 {
		l.Timeout = 30 * time.Second
	}
	if l.Rate == 0 {
		l.Rate = 200
	}
	if l.Burst == 0 {
		l.Burst = 400
	}
	if l.Principals == 0 {
		l.Principals = 10_000
	}
	if o.DrainTimeout == 0 {
		o.DrainTimeout = 30 * time.Second
	}
	return o
}

// ServeHTTP answers one request.
func (s *Server) ServeHTTP(w http.ResponseWriter, r *http.Request) { s.engine.ServeHTTP(w, r) }

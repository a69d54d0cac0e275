package api

import (
	"bytes"
	"context"
	"errors"
	"log/slog"
	"net/http"
	"os"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"
	"github.com/prometheus/client_golang/prometheus"
	"go.yaml.in/yaml/v4"

	"lampward/api/apitest"
	"lampward/domain"
	"lampward/domain/domaintest"
)

// The tests here use two records of their own, a beacon of a building and a hue of the catalogue, and an operation
// that fails as it is told to. Their contract is testdata/beacon.yaml, their tables testdata/beacon.sql.

type beacon struct {
	domain.Row
	Tag      string       `json:"tag"`
	Colour   string       `json:"colour,omitempty"`
	Note     string       `json:"note,omitempty"`
	ReachM   *float64     `json:"reach_m,omitempty"`
	Lamps    *int64       `json:"lamps,omitempty"`
	Lit      *bool        `json:"lit,omitempty"`
	KeeperID *domain.ID   `json:"keeper_id,omitempty"`
	SeenAt   *time.Time   `json:"seen_at,omitempty"`
	Built    *domain.Date `json:"built,omitempty"`
	Permits  []string     `json:"permits,omitzero"`
	Maker    *maker       `json:"maker,omitempty"`
}

type maker struct {
	Town string `json:"town"`
	Year int    `json:"year,omitempty"`
}

type hue struct {
	domain.CatalogueRow
	Name string `json:"name"`
}

var (
	beacons = domain.NewTable[beacon]("beacon", "beacon")
	hues    = domain.NewTable[hue]("hue", "hue")
)

func (b *beacon) validate() error {
	c := domain.NewCheck("beacon")
	c.Line("/tag", b.Tag, false)
	c.OneOf("/colour", b.Colour, "red", "white")
	c.Text("/note", b.Note)
	c.Range("/reach_m", b.ReachM, 0, 100, "m")
	c.Date("/built", b.Built)
	return c.Err()
}

func beaconResource() *resource[beacon] {
	turn := func(at func(domain.Scope) *time.Time) func(*call, domain.Scope, domain.ID, int64) (beacon, error) {
		return func(c *call, s domain.Scope, id domain.ID, version int64) (beacon, error) {
			b, err := beacons.Lock(c.ctx, s, id)
			if err != nil {
				return b, err
			}
			b.Version, b.UpdatedAt, b.RetiredAt = version, s.At, at(s)
			return b, beacons.Update(c.ctx, s, &b)
		}
	}
	return &resource[beacon]{
		One: "beacon", Many: "beacons", Path: "/v1/buildings/{building_id}/beacons",
		Scope: building, Read: read, Make: plan, Edit: plan,
		Table: beacons, Generated: []string{"tag"},
		Filters: []filter{
			{Name: "colour", Words: []string{"red", "white"}},
			{Name: "tag", Op: "contains"},
			{Name: "lit", Kind: boolFilter},
			{Name: "keeper_id", Kind: idFilter},
			{Name: "lamps", Kind: intFilter},
			{Name: "seen_from", Kind: timeFilter, Column: "seen_at", Op: "from"},
			{Name: "built", Kind: dateFilter},
		},
		Create: func(c *call, s domain.Scope, b *beacon) error {
			if err := b.validate(); err != nil {
				return err
			}
			if b.Tag == "" {
				b.Tag = "B-" + b.ID.String()[28:]
			}
			b.Version, b.CreatedAt, b.UpdatedAt = 1, s.At, s.At
			return beacons.Insert(c.ctx, s, b)
		},
		Update: func(c *call, s domain.Scope, b *beacon) error {
			if err := b.validate(); err != nil {
				return err
			}
			b.UpdatedAt = s.At
			return beacons.Update(c.ctx, s, b)
		},
		Retire:  turn(func(s domain.Scope) *time.Time { return &s.At }),
		Restore: turn(func(domain.Scope) *time.Time { return nil }),
	}
}

func hueResource() *resource[hue] {
	return &resource[hue]{
		One: "hue", Many: "hues", Path: "/v1/hues", Scope: catalogue, Read: read, Make: administer, Edit: administer,
		List: func(c *call, s domain.Scope, page domain.Page, matches []domain.Match) ([]hue, string, error) {
			return hues.Page(c.ctx, s, page, matches...)
		},
		Create: func(c *call, s domain.Scope, h *hue) error {
			if h.Name == "" {
				return &domain.Error{Kind: domain.Invalid, Msg: "hue is not valid", Fields: []domain.Field{{Pointer: "/name", Detail: "must not be empty"}}}
			}
			h.Version, h.CreatedAt, h.UpdatedAt = 1, s.At, s.At
			return hues.Insert(c.ctx, s, h)
		},
	}
}

// failing is an operation that fails in the way its path says.
var failing = route{Method: http.MethodGet, Path: "/v1/failing/{how}", Op: "failing", Right: administer, Scope: estate,
	Gives: []string{jsonMedia, "text/plain"}, Handle: func(c *call) (reply, error) {
		switch c.gin.Param("how") {
		case "panic":
			var none *beacon
			none.Tag = "x"
		case "unsafe":
			return reply{}, &domain.Error{Kind: domain.Unsafe, Msg: "this would overload the driver", More: map[string]any{
				"findings": []map[string]any{{"rule": "overload"}}, "options": []map[string]any{}, "status": 200}}
		case "internal":
			return reply{}, errors.New("dial tcp 10.0.0.7:5432: password authentication failed (SQLSTATE 28P01)")
		case "unavailable":
			return reply{}, &domain.Error{Kind: domain.Unavailable, Msg: "the database is busy; try again"}
		case "unwritable":
			return reply{body: func() {}}, nil
		case "large":
			return reply{raw: bytes.Repeat([]byte("0123456789"), 1000), media: "text/plain"}, nil
		case "wait":
			<-c.ctx.Done()
			return reply{}, domain.Classify(c.ctx.Err(), "record")
		}
		return reply{}, domain.NotFoundf("there is no such way to fail")
	}}

// keys are the credentials of tests: a key for each role on buildingA, "all" for an administrator of everything,
// "nobody" for somebody without any grant.
type keys map[string]*Principal

func (k keys) Authenticate(_ context.Context, bearer string) (*Principal, error) {
	if bearer == "locked" {
		return nil, &domain.Error{Kind: domain.Unavailable, Msg: "the database is busy; try again"}
	}
	if p := k[bearer]; p != nil {
		return p, nil
	}
	return nil, &domain.Error{Kind: domain.Denied, Msg: "the key is unknown"}
}

var (
	buildingA = domain.ID{0: 1, 6: 0x70, 8: 0x80, 15: 0xa}
	buildingB = domain.ID{0: 1, 6: 0x70, 8: 0x80, 15: 0xb}
	now       = time.Date(2026, 3, 1, 8, 30, 0, 0, time.UTC)
	testKeys  = func() keys {
		k := keys{}
		for r := range roles {
			k[r.String()] = &Principal{Actor: domain.Actor{Kind: "api_key", ID: domain.ID{15: byte(r) + 1}},
				Grants: Grants{On: map[domain.ID][]Grant{buildingA: {{Role: r}}}}}
		}
		k["all"] = &Principal{Actor: domain.Actor{Kind: "api_key", ID: domain.ID{15: 100}}, Grants: Grants{All: []Grant{{Role: Administrator}}}}
		k["all again"] = k["all"]
		k["watcher"] = &Principal{Actor: domain.Actor{Kind: "api_key", ID: domain.ID{15: 103}}, Grants: Grants{All: []Grant{{Role: Viewer}}}}
		k["nobody"] = &Principal{Actor: domain.Actor{Kind: "api_key", ID: domain.ID{15: 101}}}
		k["ended"] = &Principal{Actor: domain.Actor{Kind: "api_key", ID: domain.ID{15: 102}},
			Grants: Grants{On: map[domain.ID][]Grant{buildingA: {{Role: Planner, Until: now}}}}}
		return k
	}()
)

// contract is openapi.yaml with the operations of tests.
var contract = sync.OnceValue(func() *apitest.Contract {
	root, err := os.ReadFile("../openapi.yaml")
	if err != nil {
		panic(err)
	}
	extra, err := os.ReadFile("testdata/beacon.yaml")
	if err != nil {
		panic(err)
	}
	var a, b map[string]any
	if err := errors.Join(yaml.Unmarshal(root, &a), yaml.Unmarshal(extra, &b)); err != nil {
		panic(err)
	}
	graft(a, b)
	merged, err := yaml.Marshal(a)
	if err != nil {
		panic(err)
	}
	c, err := apitest.Load(merged)
	if err != nil {
		panic(err)
	}
	return c
})

func graft(to, from map[string]any) {
	for k, v := range from {
		if below, ok := v.(map[string]any); ok {
			if there, ok := to[k].(map[string]any); ok {
				graft(there, below)
				continue
			}
		}
		to[k] = v
	}
}

func TestMain(m *testing.M) {
	domaintest.Main(contract().Covering(m), func(ctx context.Context, url string) error {
		ddl, err := os.ReadFile("testdata/beacon.sql")
		if err != nil {
			return err
		}
		conn, err := pgx.Connect(ctx, url)
		if err != nil {
			return err
		}
		defer conn.Close(ctx)
		_, err = conn.Exec(ctx, string(ddl))
		return err
	})
}

// bench is a server under test and what it wrote to its log.
type bench struct {
	*Server
	*apitest.Client
	pool *pgxpool.Pool
	log  *logBook
	reg  *prometheus.Registry
}

// logBook keeps the log; several requests may write to it.
type logBook struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (l *logBook) Write(b []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.Write(b)
}

func (l *logBook) lines() []string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return strings.Split(strings.TrimSuffix(l.b.String(), "\n"), "\n")
}

// newBench returns a server with a database (none where pool is nil) and a client with the planner's key.
func newBench(t testing.TB, pool *pgxpool.Pool, set ...func(*Options)) *bench {
	t.Helper()
	b := &bench{pool: pool, log: &logBook{}, reg: prometheus.NewRegistry()}
	o := Options{
		Pool: pool, Clock: func() time.Time { return now }, Log: slog.New(slog.NewJSONHandler(b.log, nil)),
		Registerer: b.reg, Gatherer: b.reg, Authenticator: testKeys,
		BuildingExists: func(_ context.Context, id domain.ID) (bool, error) { return id == buildingA || id == buildingB, nil },
		Limits:         Limits{Rate: 1, Burst: 100_000},
	}
	for _, f := range set {
		f(&o)
	}
	more := append(beaconResource().routes(), hueResource().routes()...)
	b.Server = newServer(o, append(more, failing)...)
	b.Client = contract().Client(t, b.Server, "planner")
	return b
}

// dbBench is newBench with a fresh database.
func dbBench(t testing.TB, set ...func(*Options)) *bench {
	t.Helper()
	return newBench(t, domaintest.DB(t), set...)
}

const listA = "/v1/buildings/01000000-0000-7000-8000-00000000000a/beacons"

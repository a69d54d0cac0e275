package api

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/prometheus/client_golang/prometheus"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/plant"
	"lampward/domain/postgres"
	"lampward/domain/review"
	"lampward/domain/site"
)

// nowhere is a connection that takes the answer and forgets it.
type nowhere struct {
	h      http.Header
	status int
}

func (w *nowhere) Header() http.Header         { return w.h }
func (w *nowhere) Write(b []byte) (int, error) { return len(b), nil }
func (w *nowhere) WriteHeader(status int)      { w.status = status }

// BenchmarkGet reads one record: the bare query, and the whole edge around it (credentials, rights, quota, log,
// metrics, JSON) without the network. Their difference is what the edge costs.
func BenchmarkGet(b *testing.B) {
	pool, err := postgres.Open(b.Context(), domaintest.URL(b), postgres.PoolOptions{MaxConns: 8})
	if err != nil {
		b.Fatal(err)
	}
	defer pool.Close()
	row := beacon{Tag: "T", Colour: "red", Note: "by the gate"}
	row.BuildingID, row.ID, row.Version, row.CreatedAt, row.UpdatedAt = buildingA, domain.NewID(), 1, now, now
	scope := domain.On(pool, buildingA, domain.Actor{}, now)
	if err := beacons.Insert(b.Context(), scope, &row); err != nil {
		b.Fatal(err)
	}
	b.Run("query", func(b *testing.B) {
		b.ReportAllocs()
		b.RunParallel(func(pb *testing.PB) {
			for pb.Next() {
				if _, err := beacons.Get(b.Context(), scope, row.ID); err != nil {
					b.Error(err)
				}
			}
		})
	})
	reg := prometheus.NewRegistry()
	s := newServer(Options{Pool: pool, Registerer: reg, Gatherer: reg, Authenticator: testKeys, Limits: Limits{Rate: 1e9, Burst: 1e9},
		Log: slog.New(slog.NewJSONHandler(io.Discard, nil))}, beaconResource().routes()...)
	b.Run("edge", func(b *testing.B) {
		b.ReportAllocs()
		b.RunParallel(func(pb *testing.PB) {
			for pb.Next() {
				w := nowhere{h: http.Header{}}
				r, err := http.NewRequestWithContext(b.Context(), "GET", listA+"/"+row.ID.String(), nil)
				if err != nil {
					b.Error(err)
					return
				}
				r.Header.Set("Authorization", "Bearer planner")
				if s.ServeHTTP(&w, r); w.status != 200 {
					b.Errorf("answered %d", w.status)
				}
			}
		})
	})
}

// window is how long each load of BenchmarkGetFixture lasts.
const window = 2 * time.Second

// BenchmarkGetFixture reads one luminaire through the whole service over TCP, with a real key, rights, quota, metrics and
// access log, the load generator on the same cores, against pgbench with the same statement, prepared, from as many
// clients. It says also what the driver alone reaches, and the 99th percentile at 80 % of the load it found.
func BenchmarkGetFixture(b *testing.B) {
	const clients = 8
	st := newStreet(b)
	pool, err := postgres.Open(b.Context(), st.pool.Config().ConnString(), postgres.PoolOptions{MaxConns: clients})
	if err != nil {
		b.Fatal(err)
	}
	defer pool.Close()
	reg := prometheus.NewRegistry()
	s := newServer(Options{Pool: pool, Registerer: reg, Gatherer: reg, Authenticator: NewKeys(pool, time.Now, slog.Default()), Limits: Limits{Rate: 1e9, Burst: 1e9},
		Reviewer: review.New(), Log: slog.New(slog.NewJSONHandler(io.Discard, nil)),
		BuildingExists: func(ctx context.Context, id domain.ID) (bool, error) { return site.Exists(ctx, pool, id) }})
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		b.Fatal(err)
	}
	ctx, cancel := context.WithCancel(b.Context())
	done := make(chan error, 1)
	go func() { done <- s.Run(ctx, l) }()
	id := st.records[buildingA]["fixture_id"]
	request := []byte("GET " + atA + "/fixtures/" + id + " HTTP/1.1\r\nHost: x\r\nAuthorization: Bearer " + st.first + "\r\n\r\n")
	fixture, err := domain.ParseID(id)
	if err != nil {
		b.Fatal(err)
	}
	scope := domain.On(pool, buildingA, domain.Actor{}, now)
	bench := pgbench(b, st.pool.Config().ConnString(), buildingA, fixture, clients)
	bare := load(b, clients, 0, func() func() error {
		return func() error { _, err := plant.Fixtures.Get(b.Context(), scope, fixture); return err }
	})
	get := func() func() error {
		conn, err := net.Dial("tcp", l.Addr().String())
		if err != nil {
			return func() error { return err }
		}
		in := bufio.NewReader(conn)
		return func() error { return exchange(conn, in, request) }
	}
	for b.Loop() {
		full := load(b, clients, 0, get)
		paced := load(b, clients, 0.8*full.rate, get)
		b.ReportMetric(full.rate, "req/s")
		b.ReportMetric(float64(paced.p99.Microseconds())/1000, "p99-ms-at-80%")
		if bench > 0 {
			b.ReportMetric(full.rate/bench, "of-pgbench")
			b.ReportMetric(bare.rate/bench, "bare-of-pgbench")
		}
	}
	cancel()
	if err := <-done; err != nil {
		b.Fatal(err)
	}
}

// exchange sends a request and reads its answer.
func exchange(conn net.Conn, in *bufio.Reader, request []byte) error {
	if _, err := conn.Write(request); err != nil {
		return err
	}
	length, first := 0, true
	for {
		line, err := in.ReadSlice('\n')
		if err != nil || first && !bytes.HasPrefix(line, []byte("HTTP/1.1 200 ")) {
			return fmt.Errorf("%q: %w", line, errors.Join(err, errors.New("not answered with 200")))
		}
		first = false
		if v, ok := bytes.CutPrefix(line, []byte("Content-Length: ")); ok {
			if length, err = strconv.Atoi(string(bytes.TrimSpace(v))); err != nil {
				return err
			}
		}
		if len(line) <= 2 {
			_, err := in.Discard(length)
			return err
		}
	}
}

// outcome is what a load met.
type outcome struct {
	rate float64 // a second
	p99  time.Duration
}

// load calls from several clients for a window, as fast as they can or paced to a rate together. A paced call's time runs
// from when it was due, so that one that waits behind a slow one counts as slow.
func load(b *testing.B, clients int, rate float64, client func() func() error) outcome {
	b.Helper()
	var mu sync.Mutex
	var all []time.Duration
	var wg sync.WaitGroup
	start := time.Now()
	for range clients {
		call := client()
		wg.Go(func() {
			var took []time.Duration
			for n := 0; time.Since(start) < window; n++ {
				due := time.Now()
				if rate > 0 {
					due = start.Add(time.Duration(float64(n) * float64(clients) / rate * float64(time.Second)))
					if wait := time.Until(due); wait > 0 {
						<-time.After(wait)
					}
				}
				if err := call(); err != nil {
					b.Error(err)
					return
				}
				took = append(took, time.Since(due))
			}
			mu.Lock()
			defer mu.Unlock()
			all = append(all, took...)
		})
	}
	wg.Wait()
	if len(all) == 0 {
		b.Fatal("nothing was answered")
	}
	slices.Sort(all)
	return outcome{float64(len(all)) / time.Since(start).Seconds(), all[len(all)*99/100]}
}

// pgbench is the rate that pgbench reaches with the statement of one luminaire; 0 where the program is not there.
func pgbench(b *testing.B, url string, building, fixture domain.ID, clients int) float64 {
	b.Helper()
	programs, err := postgres.Find()
	if err != nil {
		b.Fatal(err)
	}
	if _, err := os.Stat(programs.Path("pgbench")); err != nil {
		b.Log("pgbench is not beside PostgreSQL's programs: no ratio")
		return 0
	}
	script := filepath.Join(b.TempDir(), "get.sql")
	text := "\\set x 1\nSELECT " + plant.Fixtures.List("") + " FROM place WHERE building_id = '" + building.String() + "' AND id = '" + fixture.String() + "';\n"
	if err := os.WriteFile(script, []byte(text), 0o600); err != nil {
		b.Fatal(err)
	}
	out, err := exec.CommandContext(b.Context(), programs.Path("pgbench"), "-n", "-M", "prepared", "-c", strconv.Itoa(clients), "-j", "2",
		"-T", strconv.Itoa(int(window.Seconds())), "-f", script, url).CombinedOutput()
	if err != nil {
		b.Fatalf("pgbench: %v: %s", err, out)
	}
	_, after, _ := strings.Cut(string(out), "tps = ")
	rate, err := strconv.ParseFloat(strings.Fields(after + " none")[0], 64)
	if err != nil {
		b.Fatalf("pgbench said %s", out)
	}
	return rate
}

// BenchmarkFitCheck asks whether lamps may be fitted, from four facts and no place on record, inside the server.
func BenchmarkFitCheck(b *testing.B) {
	y := newYard(b)
	reg := prometheus.NewRegistry()
	s := newServer(Options{Pool: y.pool, Registerer: reg, Gatherer: reg, Authenticator: testKeys, Limits: Limits{Rate: 1e9, Burst: 1e9}, Reviewer: review.New(),
		Log: slog.New(slog.NewJSONHandler(io.Discard, nil))})
	ask := []byte(`{"gear": {"name": "", "kind": "electronic_transformer", "max_load_w": 105, "min_load_w": 35}, "lamps": 3, "dimmer_none": true,
		"lamp": {"name": "", "technology": "led_lamp", "supply": "elv_ac_dc", "power_w": 7}}`)
	b.ReportAllocs()
	for b.Loop() {
		w := nowhere{h: http.Header{}}
		r, err := http.NewRequestWithContext(b.Context(), "POST", "/v1/fit-check", bytes.NewReader(ask))
		if err != nil {
			b.Fatal(err)
		}
		r.Header.Set("Authorization", "Bearer planner")
		r.Header.Set("Content-Type", "application/json")
		if s.ServeHTTP(&w, r); w.status != 200 {
			b.Fatalf("answered %d", w.status)
		}
	}
	b.ReportMetric(b.Elapsed().Seconds()*1000/float64(b.N), "ms/check")
}

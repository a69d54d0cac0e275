package api

import (
	"bufio"
	"bytes"
	"context"
	"io"
	"log/slog"
	"net"
	"net/http"
	"strconv"
	"testing"

	"github.com/prometheus/client_golang/prometheus"

	"lampward/domain"
	"lampward/domain/domaintest"
	"lampward/domain/postgres"
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

// BenchmarkGetOverTCP reads one record through the whole service, the load generator on the same cores. Compare it
// with pgbench (prepared, the same statement, as many clients) on the same machine.
func BenchmarkGetOverTCP(b *testing.B) {
	pool, err := postgres.Open(b.Context(), domaintest.URL(b), postgres.PoolOptions{MaxConns: 8})
	if err != nil {
		b.Fatal(err)
	}
	defer pool.Close()
	row := beacon{Tag: "T", Colour: "red", Note: "by the gate"}
	row.BuildingID, row.ID, row.Version, row.CreatedAt, row.UpdatedAt = buildingA, domain.NewID(), 1, now, now
	if err := beacons.Insert(b.Context(), domain.On(pool, buildingA, domain.Actor{}, now), &row); err != nil {
		b.Fatal(err)
	}
	reg := prometheus.NewRegistry()
	s := newServer(Options{Pool: pool, Registerer: reg, Gatherer: reg, Authenticator: testKeys, Limits: Limits{Rate: 1e9, Burst: 1e9},
		Log: slog.New(slog.NewJSONHandler(io.Discard, nil))}, beaconResource().routes()...)
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		b.Fatal(err)
	}
	ctx, cancel := context.WithCancel(b.Context())
	done := make(chan error, 1)
	go func() { done <- s.Run(ctx, l) }()
	request := []byte("GET " + listA + "/" + row.ID.String() + " HTTP/1.1\r\nHost: x\r\nAuthorization: Bearer planner\r\n\r\n")
	b.SetParallelism(4)
	b.ReportAllocs()
	b.ResetTimer()
	b.RunParallel(func(pb *testing.PB) {
		conn, err := net.Dial("tcp", l.Addr().String())
		if err != nil {
			b.Error(err)
			return
		}
		defer conn.Close()
		in := bufio.NewReader(conn)
		for pb.Next() {
			if _, err := conn.Write(request); err != nil {
				b.Error(err)
				return
			}
			length, first := 0, true
			for {
				line, err := in.ReadSlice('\n')
				if err != nil || first && !bytes.HasPrefix(line, []byte("HTTP/1.1 200 ")) {
					b.Errorf("%q: %v", line, err)
					return
				}
				first = false
				if v, ok := bytes.CutPrefix(line, []byte("Content-Length: ")); ok {
					if length, err = strconv.Atoi(string(bytes.TrimSpace(v))); err != nil {
						b.Error(err)
						return
					}
				}
				if len(line) <= 2 {
					break
				}
			}
			if _, err := in.Discard(length); err != nil {
				b.Error(err)
				return
			}
		}
	})
	b.StopTimer()
	b.ReportMetric(float64(b.N)/b.Elapsed().Seconds(), "req/s")
	cancel()
	if err := <-done; err != nil {
		b.Fatal(err)
	}
}

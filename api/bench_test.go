package api

import (
	"io"
	"log/slog"
	"net/http"
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

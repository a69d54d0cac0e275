package api

import (
	"context"
	"log/slog"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"
	"github.com/prometheus/client_golang/prometheus"

	"lampward/domain/review"
)

// Gauges shows what the database knows of the buildings, and how its pool is doing, to monitoring. Every replica shows
// the same numbers of the buildings.
type Gauges struct {
	pool  *pgxpool.Pool
	clock func() time.Time
	log   *slog.Logger

	reviews                                        prometheus.Histogram
	findings, byRule, coverage, pending, conns, up *prometheus.Desc
}

// gaugeWithin is how long a scrape waits for the database.
const gaugeWithin = 3 * time.Second

// NewGauges registers the gauges.
func NewGauges(reg prometheus.Registerer, pool *pgxpool.Pool, clock func() time.Time, log *slog.Logger) *Gauges {
	g := &Gauges{pool: pool, clock: clock, log: log,
		reviews: prometheus.NewHistogram(prometheus.HistogramOpts{
			Name:    "lampward_review_duration_seconds",
			Help:    "How long a review that was owed took.",
			Buckets: []float64{.005, .01, .05, .1, .5, 1, 5, 10, 60, 300},
		}),
		findings: prometheus.NewDesc("lampward_findings", "Open findings, by building and severity.", []string{"building", "severity"}, nil),
		byRule:   prometheus.NewDesc("lampward_findings_by_rule", "Open findings over all buildings, by rule.", []string{"rule"}, nil),
		coverage: prometheus.NewDesc("lampward_coverage_ratio", "Share of luminaires that can be judged, by building.", []string{"building"}, nil),
		pending:  prometheus.NewDesc("lampward_review_pending", "Reviews owed and not yet done.", nil, nil),
		conns:    prometheus.NewDesc("lampward_db_pool_connections", "Connections of this program to the database, by state.", []string{"state"}, nil),
		up:       prometheus.NewDesc("lampward_totals_readable", "Whether the totals of the buildings could be read for this answer.", nil, nil),
	}
	reg.MustRegister(g, g.reviews)
	return g
}

// Reviewed counts one review.
func (g *Gauges) Reviewed(took time.Duration) { g.reviews.Observe(took.Seconds()) }

// Describe names the gauges.
func (g *Gauges) Describe(ch chan<- *prometheus.Desc) {
	for _, d := range []*prometheus.Desc{g.findings, g.byRule, g.coverage, g.pending, g.conns, g.up} {
		ch <- d
	}
}

// Collect reads the gauges.
func (g *Gauges) Collect(ch chan<- prometheus.Metric) {
	gauge := func(d *prometheus.Desc, v float64, labels ...string) {
		ch <- prometheus.MustNewConstMetric(d, prometheus.GaugeValue, v, labels...)
	}
	s := g.pool.Stat()
	gauge(g.conns, float64(s.AcquiredConns()), "acquired")
	gauge(g.conns, float64(s.IdleConns()), "idle")
	gauge(g.conns, float64(s.MaxConns()), "max")
	ctx, cancel := context.WithTimeout(context.Background(), gaugeWithin)
	defer cancel()
	due, rechecks, err := review.Pending(ctx, g.pool, g.clock())
	var buildings []review.BuildingTotal
	var byRule map[string]float64
	if err == nil {
		buildings, byRule, err = review.Totals(ctx, g.pool)
	}
	if err != nil {
		g.log.WarnContext(ctx, "the totals of the buildings were not read", "error", err)
		gauge(g.up, 0)
		return
	}
	gauge(g.up, 1)
	gauge(g.pending, float64(due+rechecks))
	for _, b := range buildings {
		for _, severity := range review.Severities() {
			gauge(g.findings, b.BySeverity[severity], b.Code, severity)
		}
		if b.Places > 0 {
			gauge(g.coverage, b.Known/b.Places, b.Code)
		}
	}
	for rule, n := range byRule {
		gauge(g.byRule, n, rule)
	}
}

package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"syscall"
	"time"

	"github.com/prometheus/client_golang/prometheus"
	"github.com/prometheus/client_golang/prometheus/collectors"

	"lampward/api"
	"lampward/domain"
	"lampward/domain/job"
	"lampward/domain/review"
	"lampward/domain/site"
)

// listening says where and how requests are taken.
type listening struct {
	Listen string        `env:"LAMPWARD_LISTEN" default:"127.0.0.1:8080" help:"Address to take requests at."`
	Drain  time.Duration `env:"LAMPWARD_DRAIN" default:"0s" help:"How long to say 'not ready' before closing, for a load balancer to notice."`
	Rate   float64       `env:"LAMPWARD_RATE" default:"200" help:"Requests a second of one caller, on this replica."`
}

type serveCommand struct {
	database
	listening
	Jobs bool `env:"LAMPWARD_JOBS" default:"true" negatable:"" help:"Do the work that nobody waits for, too."`
}

// Help shows examples.
func (serveCommand) Help() string {
	return `Examples:
  lampward serve
  LAMPWARD_DATABASE_URL=postgres://... lampward serve --listen 0.0.0.0:8080 --drain 5s

/livez says that the program runs, /readyz that requests may be sent, /metrics holds numbers for monitoring, /docs shows
every operation. Any number of programs may serve one database. Interrupt it and it lets requests finish.`
}

// Run serves until interrupted.
func (c *serveCommand) Run(ctx context.Context, s *streams) error {
	db, err := c.open(ctx, s)
	if err != nil {
		return err
	}
	err = current(ctx, db.url)
	if err == nil {
		var r *review.Reviewer
		if r, err = newReviewer(ctx, db, s); err == nil {
			err = serve(ctx, s, db, r, c.listening, c.Jobs, nil)
		}
	}
	return errors.Join(err, db.close())
}

// serve answers requests until ctx ends, then stops in order: readiness off, streams ended, requests finished, jobs
// stopped softly. ready is told the address; it may be nil.
func serve(ctx context.Context, s *streams, db *opened, r *review.Reviewer, l listening, jobs bool, ready func(address string)) error {
	listener, err := (&net.ListenConfig{}).Listen(ctx, "tcp", l.Listen)
	if errors.Is(err, syscall.EADDRINUSE) {
		return fmt.Errorf("another program listens at %s; choose another address with --listen", l.Listen)
	}
	if err != nil {
		return err
	}
	reg := prometheus.NewRegistry()
	reg.MustRegister(collectors.NewGoCollector(), collectors.NewProcessCollector(collectors.ProcessCollectorOpts{}))
	gauges := api.NewGauges(reg, db.pool, s.clock, s.log)
	server := api.New(api.Options{
		Pool: db.pool, Clock: s.clock, Log: s.log, Registerer: reg, Gatherer: reg, Reviewer: r,
		Authenticator:  api.NewKeys(db.pool, s.clock, s.log),
		BuildingExists: func(ctx context.Context, id domain.ID) (bool, error) { return site.Exists(ctx, db.pool, id) },
		Ready: []api.Check{
			{Name: "database", Run: func(ctx context.Context) error { return db.pool.Ping(ctx) }},
			{Name: "schema", Run: func(ctx context.Context) error { return current(ctx, db.url) }},
		},
		Limits: api.Limits{Rate: l.Rate, Burst: int(2 * l.Rate)}, DrainDelay: l.Drain,
	})
	var work *job.Jobs
	if jobs {
		work, err = job.Start(context.WithoutCancel(ctx), job.Options{Pool: db.pool, Reviewer: r, Clock: s.clock,
			Log: slog.New(quiet{s.log.Handler()}), Reviewed: gauges.Reviewed})
		if err != nil {
			return errors.Join(err, listener.Close())
		}
	}
	s.log.InfoContext(ctx, "serving", "address", listener.Addr().String())
	if ready != nil {
		ready(listener.Addr().String())
	}
	err = server.Run(ctx, listener)
	if work != nil {
		soft, cancel := context.WithTimeout(context.WithoutCancel(ctx), 30*time.Second)
		defer cancel()
		err = errors.Join(err, work.Stop(soft))
	}
	s.log.InfoContext(context.WithoutCancel(ctx), "stopped")
	return err
}

// quiet passes on warnings and errors: the jobs' own comings and goings are no news.
type quiet struct{ slog.Handler }

// Enabled reports whether a record is passed on.
func (q quiet) Enabled(_ context.Context, l slog.Level) bool { return l >= slog.LevelWarn }
func (q quiet) WithAttrs(a []slog.Attr) slog.Handler         { return quiet{q.Handler.WithAttrs(a)} }
func (q quiet) WithGroup(name string) slog.Handler           { return quiet{q.Handler.WithGroup(name)} }

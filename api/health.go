package api

import (
	"context"
	"errors"
	"strings"
	"time"

	"github.com/prometheus/client_golang/prometheus/promhttp"

	"lampward/domain"
)

const metricMedia = "application/openmetrics-text"

// live answers GET /livez: the program runs. It asks nothing of the database, so that a database that is away does
// not get the program killed.
func (s *Server) live(*call) (reply, error) {
	return reply{body: map[string]string{"status": "alive"}, header: [][2]string{{"Cache-Control", "no-store"}}}, nil
}

// readyWithin is how long all checks together may take.
const readyWithin = 2 * time.Second

// ready answers GET /readyz: requests may be sent here. It names what is amiss, never why: the log says that.
func (s *Server) ready(c *call) (reply, error) {
	if s.draining.Load() {
		return reply{}, &domain.Error{Kind: domain.Unavailable, Msg: "the service is stopping"}
	}
	ctx, cancel := context.WithTimeout(c.ctx, readyWithin)
	defer cancel()
	var failed []string
	var causes error
	for _, check := range s.opt.Ready {
		if err := check.Run(ctx); err != nil {
			failed = append(failed, check.Name)
			causes = errors.Join(causes, err)
		}
	}
	if failed != nil {
		return reply{}, &domain.Error{Kind: domain.Unavailable, Msg: "not ready: " + strings.Join(failed, ", "), Err: causes}
	}
	return reply{body: map[string]string{"status": "ready"}, header: [][2]string{{"Cache-Control", "no-store"}}}, nil
}

// metrics answers GET /metrics: OpenMetrics to whom accepts it, the older text form to others.
func (s *Server) metrics(*call) (reply, error) {
	return reply{serve: promhttp.HandlerFor(s.opt.Gatherer, promhttp.HandlerOpts{EnableOpenMetrics: true})}, nil
}

package api

import (
	"context"
	"errors"
	"log/slog"
	"net"
	"net/http"
	"time"
)

// Run serves on l until ctx ends or serving fails. Then it says "not ready", waits DrainDelay, ends the streams, lets
// the requests in flight finish within DrainTimeout and closes. It returns nil after an orderly stop; requests that
// did not finish in time are cut and told as an error.
func (s *Server) Run(ctx context.Context, l net.Listener) error {
	srv := &http.Server{
		Handler:           s,
		ReadHeaderTimeout: 10 * time.Second,
		IdleTimeout:       2 * time.Minute,
		MaxHeaderBytes:    64 << 10,
		ErrorLog:          slog.NewLogLogger(s.opt.Log.Handler(), slog.LevelWarn),
	}
	failed := make(chan error, 1)
	go func() { failed <- srv.Serve(l) }() // ends when srv is shut down or closed, below
	select {
	case err := <-failed:
		return err
	case <-ctx.Done():
	}
	s.draining.Store(true)
	if s.opt.DrainDelay > 0 {
		delay := time.NewTimer(s.opt.DrainDelay)
		defer delay.Stop()
		select {
		case err := <-failed:
			return err
		case <-delay.C:
		}
	}
	s.stop()
	drain, cancel := context.WithTimeout(context.WithoutCancel(ctx), s.opt.DrainTimeout)
	defer cancel()
	err := srv.Shutdown(drain)
	if err != nil {
		err = errors.Join(errors.New("requests were cut at the end of the drain time"), err, srv.Close())
	}
	if serr := <-failed; !errors.Is(serr, http.ErrServerClosed) {
		err = errors.Join(err, serr)
	}
	return err
}

package api

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"log/slog"
	"net"
	"net/http"
	"strings"
	"testing"
	"time"

	"github.com/prometheus/client_golang/prometheus"
)

// TestRun holds the order of an orderly stop: not ready, streams ended, what is in flight finished, closed.
func TestRun(t *testing.T) {
	t.Parallel()
	reg := prometheus.NewRegistry()
	entered, finish := make(chan struct{}), make(chan struct{})
	var s *Server
	slow := failing
	slow.Handle = func(c *call) (reply, error) {
		close(entered)
		<-finish
		return reply{body: map[string]bool{"draining": s.draining.Load(), "stopping": s.stopping.Err() != nil}}, nil
	}
	s = newServer(Options{Registerer: reg, Gatherer: reg, Authenticator: testKeys, Log: slog.New(slog.NewTextHandler(io.Discard, nil)), DrainDelay: time.Millisecond}, slow)
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	done := make(chan error, 1)
	go func() { done <- s.Run(ctx, l) }()

	answered := make(chan string, 1)
	go func() {
		req, _ := http.NewRequestWithContext(t.Context(), "GET", "http://"+l.Addr().String()+"/v1/failing/x", nil)
		req.Header.Set("Authorization", "Bearer all")
		res, err := http.DefaultClient.Do(req)
		if err != nil {
			answered <- err.Error()
			return
		}
		defer res.Body.Close()
		b, err := io.ReadAll(res.Body)
		answered <- fmt.Sprint(res.StatusCode, string(b), err)
	}()
	<-entered
	cancel()
	<-s.stopping.Done()
	select {
	case err := <-done:
		t.Fatalf("stopped while a request was in flight: %v", err)
	default:
	}
	close(finish)
	if got, want := <-answered, "200{\"draining\":true,\"stopping\":true}\n<nil>"; got != want {
		t.Errorf("the request in flight was answered %q, want %q", got, want)
	}
	if err := <-done; err != nil {
		t.Error(err)
	}
	if _, err := net.Dial("tcp", l.Addr().String()); err == nil {
		t.Error("still listening")
	}
}

// TestRunCuts holds that a request that does not end is cut, and told.
func TestRunCuts(t *testing.T) {
	t.Parallel()
	reg := prometheus.NewRegistry()
	entered := make(chan struct{})
	stuck := failing
	stuck.Timeout = -1
	stuck.Handle = func(c *call) (reply, error) {
		close(entered)
		<-c.ctx.Done() // ends when the connection is closed
		return reply{}, c.ctx.Err()
	}
	book := &logBook{}
	s := newServer(Options{Registerer: reg, Gatherer: reg, Authenticator: testKeys, Log: slog.New(slog.NewTextHandler(book, nil)), DrainTimeout: time.Millisecond}, stuck)
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	done := make(chan error, 1)
	go func() { done <- s.Run(ctx, l) }()
	conn, err := net.Dial("tcp", l.Addr().String())
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close()
	fmt.Fprint(conn, "GET /v1/failing/x HTTP/1.1\r\nHost: x\r\nAuthorization: Bearer all\r\n\r\n")
	<-entered
	cancel()
	if err := <-done; err == nil || !strings.Contains(err.Error(), "cut") {
		t.Errorf("Run returned %v", err)
	}
	if n, err := io.Copy(io.Discard, conn); n != 0 || err != nil && !strings.Contains(err.Error(), "reset") {
		t.Errorf("%d bytes of an answer: %v", n, err)
	}
}

// TestRunServes holds what only a connection shows: streams in pieces, cut bodies, hostile headers, HEAD.
func TestRunServes(t *testing.T) {
	t.Parallel()
	b := newBench(t, nil)
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	done := make(chan error, 1)
	go func() { done <- b.Run(ctx, l) }()
	t.Cleanup(func() {
		cancel()
		if err := <-done; err != nil {
			t.Error(err)
		}
	})
	ask := func(raw string) string {
		t.Helper()
		conn, err := net.Dial("tcp", l.Addr().String())
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		if _, err := io.WriteString(conn, raw); err != nil {
			t.Fatal(err)
		}
		if c, ok := conn.(*net.TCPConn); ok {
			if err := c.CloseWrite(); err != nil {
				t.Fatal(err)
			}
		}
		out, err := io.ReadAll(conn)
		if err != nil && !strings.Contains(err.Error(), "reset") {
			t.Fatal(err)
		}
		return string(out)
	}
	post := "POST " + listA + " HTTP/1.1\r\nHost: x\r\nConnection: close\r\nAuthorization: Bearer planner\r\nContent-Type: application/json\r\n"
	for raw, want := range map[string]string{
		"GET /livez HTTP/1.1\r\nHost: x\r\nConnection: close\r\n\r\n":                                                                 "HTTP/1.1 200 OK",
		"HEAD /livez HTTP/1.1\r\nHost: x\r\nConnection: close\r\n\r\n":                                                                "HTTP/1.1 200 OK",
		"HEAD /none HTTP/1.1\r\nHost: x\r\nConnection: close\r\n\r\n":                                                                 "HTTP/1.1 404 Not Found",
		post + "Transfer-Encoding: chunked\r\n\r\n5\r\n{\"tag\r\n0\r\n\r\n":                                                           "HTTP/1.1 400 Bad Request",
		post + "Content-Length: 2000000\r\n\r\n{":                                                                                     "HTTP/1.1 413",
		post + "Content-Length: 5\r\n\r\n{\"tag":                                                                                      "HTTP/1.1 400 Bad Request",
		post + "Transfer-Encoding: chunked\r\n\r\n" + strings.Repeat("8000\r\n"+strings.Repeat(" ", 0x8000)+"\r\n", 33) + "0\r\n\r\n": "HTTP/1.1 413",
		"GET /livez HTTP/1.1\r\nHost: x\r\nX-Long: " + strings.Repeat("a", 1<<18) + "\r\n\r\n":                                        "HTTP/1.1 431",
	} {
		if got := ask(raw); !strings.HasPrefix(got, want) {
			t.Errorf("%.150q: %.300q, want %s", raw, got, want)
		}
		if strings.HasPrefix(raw, "HEAD") {
			if _, body, _ := strings.Cut(ask(raw), "\r\n\r\n"); body != "" {
				t.Errorf("HEAD has a body: %q", body)
			}
		}
	}
	if !bytes.Contains([]byte(strings.Join(b.log.lines(), "\n")), []byte(`"status":413`)) {
		t.Error("a refused body is not in the log")
	}
}

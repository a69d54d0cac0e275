package postgres

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"github.com/jackc/pgx/v5/pgconn"
)

// takeOver makes the data folder ready for a start after a run that was killed. The lock is held, so no living program
// owns a server on it: one that lives on is stopped, and traces that would stop a start are made harmless.
func (s *Server) takeOver(ctx context.Context, log *slog.Logger) error {
	path := filepath.Join(s.data, "postmaster.pid")
	content, err := os.ReadFile(path)
	if errors.Is(err, os.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	first, rest, _ := strings.Cut(string(content), "\n")
	pid, err := strconv.Atoi(strings.TrimSpace(first))
	if err != nil || pid <= 0 {
		// Cut short by a power loss: there is no process to it, and a server would refuse to start.
		return os.Remove(path)
	}
	if isPostmaster(s.programs, s.data, pid) {
		if log != nil {
			log.WarnContext(ctx, "stopping the database server that a killed run left behind",
				"process", pid, "folder", s.data)
		}
		return s.stopOrphan(ctx, pid)
	}
	if alive(pid) {
		// Another program has that process id now, and PostgreSQL would take it for a server. It does not when the id
		// is its own parent's. The rest of the file stays: by it PostgreSQL finds backends that are left.
		return os.WriteFile(path, []byte(strconv.Itoa(os.Getpid())+"\n"+rest), 0o600)
	}
	return nil
}

// stopOrphan stops a server that this program did not start, and waits until it is gone.
func (s *Server) stopOrphan(ctx context.Context, pid int) error {
	for _, step := range []struct {
		mode  stopMode
		limit time.Duration
	}{{stopFast, fastLimit}, {stopImmediate, immediateLimit}} {
		if err := stopPostmaster(s.programs, s.data, pid, step.mode); err != nil {
			return fmt.Errorf("stop the database server that a killed run left behind, process %d: %w", pid, err)
		}
		for began := time.Now(); time.Since(began) < step.limit; {
			if !isPostmaster(s.programs, s.data, pid) {
				return nil
			}
			if err := pause(ctx, 20*time.Millisecond); err != nil {
				return err
			}
		}
	}
	return fmt.Errorf("a killed run left a database server behind, process %d on %s, which does not stop: end it by hand",
		pid, s.data)
}

// sqlState returns the five-character SQLSTATE of a server's error, or nothing if the server did not speak.
func sqlState(err error) string {
	if pg, ok := errors.AsType[*pgconn.PgError](err); ok {
		return pg.Code
	}
	return ""
}

// freePort returns a TCP port on the loopback address that was free a moment ago.
func freePort() (int, error) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		return 0, err
	}
	return l.Addr().(*net.TCPAddr).Port, l.Close()
}

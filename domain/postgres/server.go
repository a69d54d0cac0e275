package postgres

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"log/slog"
	"maps"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"slices"
	"strconv"
	"strings"
	"sync"
	"time"

	"github.com/jackc/pgx/v5"
)

const (
	superuser       = "lampward"
	defaultDatabase = "lampward"
	unixPort        = 5432 // names the socket file only; no TCP port is opened

	startLimit     = 10 * time.Minute // recovery of a large write-ahead log is the longest a start takes
	fastLimit      = 60 * time.Second // for a fast shutdown, which writes a checkpoint
	immediateLimit = 10 * time.Second // for an immediate shutdown
	leftoverLimit  = 10 * time.Second // for the backends of a killed server to notice that it is gone

	maxLogBytes = 16 << 20 // a longer log is put aside at the next start
)

// ErrInUse is returned, wrapped, by Start where another program holds the folder.
var ErrInUse = errors.New("the data folder is in use by another program")

// ErrMajor is returned, wrapped, by Start where the folder was made by a PostgreSQL whose programs are not here.
var ErrMajor = errors.New("the data folder was made by another major version of PostgreSQL")

// Options say how a private server is run. Only Dir must be given.
type Options struct {
	// Dir is the folder that holds everything of the server: data/ (the database cluster), postgres.log, password,
	// lock and, while it runs, socket/. It is made where it is absent, and refused where it holds anything else.
	Dir string

	// Programs to run; the zero value takes those that fit the folder, or the newest for a new one.
	Programs Programs

	// Database that Server.URL names, made where it is absent. Empty means "lampward".
	Database string

	// Settings are given to the server on top of its own defaults, such as "max_connections": "200".
	Settings map[string]string

	// NoFsync gives up safety against power loss for speed. For tests only.
	NoFsync bool

	// Log receives a line when the server of a killed run is taken over. May be nil.
	Log *slog.Logger
}

// Server is a private PostgreSQL server that belongs to this program: it listens on a Unix socket in its own folder
// only (on the loopback address on Windows), and ends with this program, by Close or, on Linux and Windows, by the
// death of the program itself. On other systems the server of a killed program lives on until the next Start stops it.
type Server struct {
	dir      string
	data     string
	programs Programs
	account  account
	password string
	database string
	host     string // socket folder or loopback address
	port     int
	lock     *folderLock
	child    *child
	logFrom  int64 // offset of this run in the log

	closing   sync.Once
	closeErr  error
	tempLinks []string // removed on Close
}

// Start runs a private server on the folder of o and returns when it takes connections. An empty folder is
// initialised first: UTF8, the C.UTF-8 locale (C where there is none), data checksums, and scram-sha-256 with a random
// password kept in the folder, readable by its owner only. Started as root, the server runs as the owner of an
// existing folder, else as postgres, else as nobody.
//
// If a killed run left its server behind, that server is stopped first; if it left only its traces, the server
// recovers. Start fails with ErrInUse if a living program holds the folder, with ErrMajor if the folder was made by a
// major version that is not installed, and with ErrNoPrograms if none is. Any other failure quotes the end of the
// server's log. The context bounds the start, not the life of the server.
func Start(ctx context.Context, o Options) (*Server, error) {
	if o.Dir == "" {
		return nil, errors.New("no folder given for the database")
	}
	dir, err := filepath.Abs(o.Dir)
	if err != nil {
		return nil, err
	}
	ctx, cancel := context.WithTimeout(ctx, startLimit)
	defer cancel()

	s := &Server{dir: dir, data: filepath.Join(dir, "data"), database: o.Database}
	if s.database == "" {
		s.database = defaultDatabase
	}
	if err := s.prepareFolder(); err != nil {
		return nil, err
	}
	if s.lock, err = lockFolder(filepath.Join(dir, "lock")); err != nil {
		return nil, err
	}
	if err := s.start(ctx, o); err != nil {
		return nil, errors.Join(err, s.Close())
	}
	return s, nil
}

func (s *Server) start(ctx context.Context, o Options) error {
	var err error
	if s.account, err = serverAccount(s.data); err != nil {
		return err
	}
	if err := s.account.canReach(s.dir); err != nil {
		return err
	}
	if s.programs, err = choosePrograms(s.data, o.Programs); err != nil {
		return err
	}
	if s.password, err = s.readPassword(); err != nil {
		return err
	}
	if _, err := os.Stat(s.data); errors.Is(err, os.ErrNotExist) {
		if err := s.initialise(ctx, o.NoFsync); err != nil {
			return err
		}
	} else if err != nil {
		return err
	} else if err := s.takeOver(ctx, o.Log); err != nil {
		return err
	}
	if err := s.choosePlace(); err != nil {
		return err
	}
	if err := s.launch(ctx, o); err != nil {
		return err
	}
	return s.makeDatabase(ctx)
}

// URL returns the connection URL of the database named in the options. It holds the password.
func (s *Server) URL() string { return s.DatabaseURL(s.database) }

// DatabaseURL returns the connection URL of another database on the server. It holds the password.
func (s *Server) DatabaseURL(database string) string {
	query := url.Values{"host": {s.host}, "port": {strconv.Itoa(s.port)}, "sslmode": {"disable"}}
	u := url.URL{
		Scheme: "postgres", User: url.UserPassword(superuser, s.password),
		Path: "/" + database,
		// The command line client does not read a plus sign as a space.
		RawQuery: strings.ReplaceAll(query.Encode(), "+", "%20"),
	}
	return u.String()
}

// DataDir returns the folder of the database cluster.
func (s *Server) DataDir() string { return s.data }

// LogFile returns the path of the server's log.
func (s *Server) LogFile() string { return filepath.Join(s.dir, "postgres.log") }

// Programs returns the programs that the server runs from.
func (s *Server) Programs() Programs { return s.programs }

// PID returns the process id of the server's first process.
func (s *Server) PID() int { return s.child.cmd.Process.Pid }

// Done is closed when the server has ended, by Close or on its own.
func (s *Server) Done() <-chan struct{} { return s.child.done }

// Close stops the server, breaking off what its connections are doing, and frees the folder. It fails if the server
// had ended on its own, or did not end cleanly; the error then quotes the end of its log. A second call does nothing
// and returns the same error.
func (s *Server) Close() error {
	s.closing.Do(func() {
		if s.child != nil {
			s.closeErr = s.stop()
		}
		for _, path := range s.tempLinks {
			s.closeErr = errors.Join(s.closeErr, os.RemoveAll(path))
		}
		s.closeErr = errors.Join(s.closeErr, s.lock.release())
	})
	return s.closeErr
}

func (s *Server) stop() error {
	select {
	case <-s.child.done:
		return fmt.Errorf("the database server ended on its own: %w%s", s.child.exit(), s.logTail())
	default:
	}
	for _, step := range []struct {
		mode  stopMode
		limit time.Duration
	}{{stopFast, fastLimit}, {stopImmediate, immediateLimit}, {stopKill, immediateLimit}} {
		if err := stopPostmaster(s.programs, s.data, s.PID(), step.mode); err != nil {
			return fmt.Errorf("stop the database server: %w", err)
		}
		select {
		case <-s.child.done:
			if err := s.child.err; err != nil {
				return fmt.Errorf("the database server did not end cleanly: %w%s", err, s.logTail())
			}
			return nil
		case <-time.After(step.limit):
		}
	}
	return fmt.Errorf("the database server, process %d, does not end%s", s.PID(), s.logTail())
}

// prepareFolder makes the folder, and refuses one that is not ours.
func (s *Server) prepareFolder() error {
	if err := os.MkdirAll(s.dir, 0o755); err != nil {
		return fmt.Errorf("make the data folder: %w", err)
	}
	entries, err := os.ReadDir(s.dir)
	if err != nil {
		return fmt.Errorf("read the data folder: %w", err)
	}
	ours := len(entries) == 0
	for _, e := range entries {
		ours = ours || e.Name() == "lock" || e.Name() == "data"
	}
	if !ours {
		return fmt.Errorf("%s holds other files: give the database a folder of its own", s.dir)
	}
	// The server's account must pass through the folder, and nobody needs to list it.
	mode := os.FileMode(0o700)
	if runningAsRoot() {
		mode = 0o711
	}
	info, err := os.Stat(s.dir)
	if err != nil || info.Mode().Perm() == mode {
		return err
	}
	return os.Chmod(s.dir, mode)
}

// choosePrograms returns the programs that fit the data folder.
func choosePrograms(data string, given Programs) (Programs, error) {
	content, err := os.ReadFile(filepath.Join(data, "PG_VERSION"))
	if errors.Is(err, os.ErrNotExist) {
		if _, err := os.Stat(data); err == nil {
			return Programs{}, fmt.Errorf("%s is not a database folder (no PG_VERSION in it): move it away and start again", data)
		}
		if given.Dir != "" {
			return given, nil
		}
		return Find()
	}
	if err != nil {
		return Programs{}, err
	}
	made, err := strconv.Atoi(strings.TrimSpace(string(content)))
	if err != nil {
		return Programs{}, fmt.Errorf("%s: not a major version: %q", filepath.Join(data, "PG_VERSION"), content)
	}
	have := given
	if have.Dir == "" {
		if made >= OldestMajor {
			if p, err := FindMajor(made); err == nil {
				return p, nil
			}
		}
		if have, err = Find(); err != nil {
			return Programs{}, err
		}
	}
	if have.Major == made {
		return have, nil
	}
	return Programs{}, fmt.Errorf("%w: %s was made by PostgreSQL %d, and the programs in %s are of version %d. "+
		"Install PostgreSQL %d beside them and start again; or carry the data over with pg_upgrade or a dump; "+
		"or move the folder away to begin with an empty one",
		ErrMajor, data, made, have.Dir, have.Major, made)
}

// readPassword returns the superuser's password, or a new one for a folder without data.
func (s *Server) readPassword() (string, error) {
	path := filepath.Join(s.dir, "password")
	content, err := os.ReadFile(path)
	if err == nil && len(strings.TrimSpace(string(content))) > 0 {
		return strings.TrimSpace(string(content)), nil
	}
	if err != nil && !errors.Is(err, os.ErrNotExist) {
		return "", err
	}
	if _, err := os.Stat(s.data); err == nil {
		return "", fmt.Errorf("%s is missing, and the data beside it cannot be opened without: put it back, "+
			"or move %s away to begin with an empty database", path, s.data)
	}
	password := rand.Text()
	if err := os.WriteFile(path, []byte(password+"\n"), 0o600); err != nil {
		return "", fmt.Errorf("keep the database password: %w", err)
	}
	return password, nil
}

// initialise makes the cluster in a folder beside its place and moves it there when it is whole, so that a run killed
// meanwhile leaves nothing that looks like data.
func (s *Server) initialise(ctx context.Context, noSync bool) error {
	fresh := s.data + ".new"
	passwordCopy := filepath.Join(s.dir, "password.new")
	defer os.Remove(passwordCopy)
	var err error
	for _, locale := range initialLocales {
		if err = os.RemoveAll(fresh); err != nil {
			return err
		}
		if err = os.Mkdir(fresh, 0o700); err != nil {
			return err
		}
		if err = os.WriteFile(passwordCopy, []byte(s.password+"\n"), 0o600); err != nil {
			return err
		}
		if err = s.account.own(fresh, passwordCopy); err != nil {
			return err
		}
		args := []string{
			"--pgdata", fresh, "--username", superuser, "--pwfile", passwordCopy, "--auth", "scram-sha-256",
			"--encoding", "UTF8", "--locale", locale, "--data-checksums", "--no-instructions",
		}
		if noSync {
			args = append(args, "--no-sync")
		}
		var out strings.Builder
		cmd := exec.CommandContext(ctx, s.programs.Path("initdb"), args...)
		cmd.Stdout, cmd.Stderr = &out, &out
		var c *child
		if c, err = spawn(cmd, s.account, s.dir); err == nil {
			<-c.done
			err = c.err
		}
		if err == nil {
			if err := os.Rename(fresh, s.data); err != nil {
				return err
			}
			return syncFolder(s.dir)
		}
		err = fmt.Errorf("initialise the database in %s: %w\n%s", fresh, err, lastLines(out.String(), 12))
		if !strings.Contains(out.String(), "invalid locale") {
			return err
		}
	}
	return err
}

// choosePlace settles where the server listens: a fresh folder for its socket, so that no trace of an earlier run can
// stand in the way, or a free port where there are no sockets.
func (s *Server) choosePlace() error {
	if runtime.GOOS == "windows" {
		port, err := freePort()
		s.host, s.port = "127.0.0.1", port
		return err
	}
	s.host, s.port = filepath.Join(s.dir, "socket"), unixPort
	if err := os.RemoveAll(s.host); err != nil {
		return err
	}
	// The path of a socket fits 104 bytes on the BSDs and macOS, 108 on Linux, with the zero at its end. And a comma in a
	// connection URL parts two hosts.
	if len(filepath.Join(s.host, ".s.PGSQL.5432.lock")) <= 100 && !strings.Contains(s.host, ",") {
		if err := os.Mkdir(s.host, 0o700); err != nil {
			return err
		}
	} else {
		short, err := os.MkdirTemp("/tmp", "lampward-")
		if err != nil {
			return err
		}
		s.host = short
	}
	s.tempLinks = append(s.tempLinks, s.host)
	return s.account.own(s.host)
}

// launch starts the server and waits until it takes connections.
func (s *Server) launch(ctx context.Context, o Options) error {
	for began := time.Now(); ; {
		if err := s.launchOnce(ctx, o); err == nil || ctx.Err() != nil {
			return err
		} else if !strings.Contains(err.Error(), "shared memory block") || time.Since(began) > leftoverLimit {
			return err
		}
		// The backends of a killed server still hold its memory; they end within moments of noticing.
		if err := pause(ctx, 100*time.Millisecond); err != nil {
			return err
		}
	}
}

func (s *Server) launchOnce(ctx context.Context, o Options) error {
	settings := map[string]string{
		"cluster_name":            "lampward",
		"listen_addresses":        "",
		"unix_socket_directories": `"` + strings.ReplaceAll(s.host, `"`, `""`) + `"`, // a list, by commas
		"unix_socket_permissions": "0700",
		"port":                    strconv.Itoa(s.port),
		"log_destination":         "stderr",
		"logging_collector":       "off",
		"log_line_prefix":         "%m [%p] ",
		"log_timezone":            "UTC",
		"timezone":                "UTC",
		"lc_messages":             "C", // the log is searched for what it says
		"max_connections":         "100",
		"shared_buffers":          "128MB",
	}
	if runtime.GOOS == "windows" {
		settings["listen_addresses"] = s.host
		delete(settings, "unix_socket_directories")
		delete(settings, "unix_socket_permissions")
	}
	if o.NoFsync {
		settings["fsync"] = "off"
		settings["synchronous_commit"] = "off"
		settings["full_page_writes"] = "off"
	}
	maps.Copy(settings, o.Settings)
	args := []string{"-D", s.data}
	for _, name := range slices.Sorted(maps.Keys(settings)) {
		args = append(args, "-c", name+"="+settings[name])
	}

	log, err := s.openLog()
	if err != nil {
		return fmt.Errorf("open the database log: %w", err)
	}
	defer log.Close() // the server keeps its own copy of the file
	cmd := exec.Command(s.programs.Path("postgres"), args...)
	cmd.Stdout, cmd.Stderr = log, log
	if s.child, err = spawn(cmd, s.account, s.data); err != nil {
		s.child = nil
		return fmt.Errorf("start the database server: %w", err)
	}
	if err := s.waitReady(ctx); err != nil {
		select {
		case <-s.child.done:
			s.child = nil // nothing left to stop
		default:
		}
		return err
	}
	return nil
}

// openLog opens the log for appending and notes where this run begins. A long log of earlier runs is put aside, and
// the one put aside before it is dropped.
func (s *Server) openLog() (*os.File, error) {
	if info, err := os.Stat(s.LogFile()); err == nil && info.Size() > maxLogBytes {
		if err := os.Rename(s.LogFile(), s.LogFile()+".1"); err != nil {
			return nil, err
		}
	}
	log, err := os.OpenFile(s.LogFile(), os.O_CREATE|os.O_APPEND|os.O_WRONLY, 0o600)
	if err != nil {
		return nil, err
	}
	info, err := log.Stat()
	if err != nil {
		return nil, errors.Join(err, log.Close())
	}
	s.logFrom = info.Size()
	return log, nil
}

// waitReady tries to connect until the server answers, ends, or the context does.
func (s *Server) waitReady(ctx context.Context) error {
	wait := 5 * time.Millisecond
	for {
		conn, err := pgx.Connect(ctx, s.DatabaseURL("postgres"))
		if err == nil {
			return conn.Close(ctx)
		}
		if refused := sqlState(err); refused != "" && refused != "57P03" { // cannot_connect_now: still starting
			if refused == "28P01" {
				return fmt.Errorf("the password in %s is not that of the data beside it: put the right one back: %w",
					filepath.Join(s.dir, "password"), err)
			}
			return fmt.Errorf("connect to the database server: %w", err)
		}
		timer := time.NewTimer(wait)
		select {
		case <-s.child.done:
			timer.Stop()
			return fmt.Errorf("the database server ended while starting: %w%s", s.child.exit(), s.logTail())
		case <-ctx.Done():
			timer.Stop()
			return fmt.Errorf("the database server did not start in time: %w (the last try to connect: %w)%s",
				ctx.Err(), err, s.logTail())
		case <-timer.C:
		}
		wait = min(wait*3/2, 200*time.Millisecond)
	}
}

// makeDatabase makes the database of the options where it is absent.
func (s *Server) makeDatabase(ctx context.Context) error {
	conn, err := pgx.Connect(ctx, s.DatabaseURL("postgres"))
	if err != nil {
		return fmt.Errorf("connect to the database server: %w", err)
	}
	defer conn.Close(context.WithoutCancel(ctx))
	var exists bool
	err = conn.QueryRow(ctx, `SELECT EXISTS (SELECT FROM pg_database WHERE datname = $1)`, s.database).Scan(&exists)
	if err != nil || exists {
		return err
	}
	if _, err = conn.Exec(ctx, `CREATE DATABASE `+pgx.Identifier{s.database}.Sanitize()); err != nil {
		return fmt.Errorf("make database %s: %w", s.database, err)
	}
	return nil
}

// logTail returns the last lines that this run wrote to the log, introduced by the log's path, or nothing.
func (s *Server) logTail() string {
	content, err := os.ReadFile(s.LogFile())
	if err != nil {
		return "\n(its log cannot be read: " + err.Error() + ")"
	}
	if int64(len(content)) <= s.logFrom {
		return ""
	}
	return "\nthe end of " + s.LogFile() + ":\n" + lastLines(string(content[s.logFrom:]), 12)
}

// lastLines returns the last n lines of text, indented.
func lastLines(text string, n int) string {
	lines := strings.Split(strings.TrimSpace(text), "\n")
	if len(lines) > n {
		lines = lines[len(lines)-n:]
	}
	return "  " + strings.Join(lines, "\n  ")
}

// pause waits for d or the end of the context.
func pause(ctx context.Context, d time.Duration) error {
	timer := time.NewTimer(d)
	defer timer.Stop()
	select {
	case <-ctx.Done():
		return ctx.Err()
	case <-timer.C:
		return nil
	}
}

//go:build unix

package postgres

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
)

// holdFolder, in the environment, makes this test binary a program that runs a server on the folder until its input
// ends: the stand-in for a program that gets killed.
const holdFolder = "LAMPWARD_TEST_HOLD_FOLDER"

func TestMain(m *testing.M) {
	if dir := os.Getenv(holdFolder); dir != "" {
		s, err := Start(context.Background(), Options{Dir: dir})
		if err != nil {
			fmt.Println("failed:", err)
			os.Exit(1)
		}
		fmt.Println(s.PID(), s.URL())
		io.Copy(io.Discard, os.Stdin)
		if err := s.Close(); err != nil {
			fmt.Fprintln(os.Stderr, err)
			os.Exit(1)
		}
		os.Exit(0)
	}
	code := m.Run()
	if err := os.RemoveAll(initialisedDir); err != nil {
		fmt.Fprintln(os.Stderr, err)
		code = 1
	}
	os.Exit(code)
}

// parent is where the tests' folders are made: in memory where the system has a place for that. A data folder is a
// thousand files, and some disks take seconds to make and remove them.
func parent() string {
	const memory = "/dev/shm"
	var fs syscall.Statfs_t
	if err := syscall.Statfs(memory, &fs); err == nil && uint64(fs.Bavail)*uint64(fs.Bsize) > 2<<30 {
		return memory
	}
	return os.TempDir()
}

// folder returns a folder for a server. That of testing.T is closed to other accounts than its own, and for root the
// server's is another.
func folder(t testing.TB) string {
	t.Helper()
	dir, err := os.MkdirTemp(parent(), "lampward-postgres-")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := os.RemoveAll(dir); err != nil {
			t.Error(err)
		}
	})
	if err := os.Chmod(dir, 0o711); err != nil {
		t.Fatal(err)
	}
	return filepath.Join(dir, "db")
}

// initialisedDir is the folder that initialised made, or empty.
var initialisedDir string

// initialised makes one server folder for the copies that ready hands out.
var initialised = sync.OnceValues(func() (string, error) {
	dir, err := os.MkdirTemp(parent(), "lampward-postgres-")
	if err != nil {
		return "", err
	}
	initialisedDir = dir
	s, err := Start(context.Background(), Options{Dir: dir, NoFsync: true})
	if err != nil {
		return dir, err
	}
	return dir, s.Close()
})

// ready returns a folder whose data is initialised already, which saves the test most of its time.
func ready(t testing.TB) string {
	t.Helper()
	from, err := initialised()
	if err != nil {
		t.Fatal(err)
	}
	to := folder(t)
	if out, err := exec.Command("cp", "-a", from, to).CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	return to
}

// start runs a server on the folder for the rest of the test.
func start(t *testing.T, o Options) *Server {
	t.Helper()
	s, err := Start(t.Context(), o)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := s.Close(); err != nil {
			t.Error(err)
		}
	})
	return s
}

func stop(t *testing.T, s *Server) {
	t.Helper()
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
}

func connect(t *testing.T, url string) *pgx.Conn {
	t.Helper()
	conn, err := pgx.Connect(t.Context(), url)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { conn.Close(context.Background()) })
	return conn
}

func exec1(t *testing.T, url, sql string) {
	t.Helper()
	conn := connect(t, url)
	if _, err := conn.Exec(t.Context(), sql); err != nil {
		t.Fatal(err)
	}
	if err := conn.Close(t.Context()); err != nil {
		t.Fatal(err)
	}
}

func ask[T any](t *testing.T, url, sql string) (answer T) {
	t.Helper()
	conn := connect(t, url)
	if err := conn.QueryRow(t.Context(), sql).Scan(&answer); err != nil {
		t.Fatalf("%s: %v", sql, err)
	}
	if err := conn.Close(t.Context()); err != nil {
		t.Fatal(err)
	}
	return answer
}

// until waits for something that happens elsewhere on the machine.
func until(t *testing.T, what string, happened func() bool) {
	t.Helper()
	tick := time.NewTicker(10 * time.Millisecond)
	defer tick.Stop()
	limit := time.After(60 * time.Second)
	for !happened() {
		select {
		case <-tick.C:
		case <-limit:
			t.Fatalf("in a minute this did not happen: %s", what)
		}
	}
}

func TestServerIsPrivateAndKeepsItsData(t *testing.T) {
	t.Parallel()
	dir := folder(t)
	s := start(t, Options{Dir: dir, Settings: map[string]string{"max_connections": "17"}})
	for sql, want := range map[string]string{
		"SHOW server_encoding":  "UTF8",
		"SHOW listen_addresses": "",
		"SHOW max_connections":  "17",
		"SHOW fsync":            "on",
		"SHOW data_checksums":   "on",
		"SHOW timezone":         "UTC",
		"SELECT current_database()::text || current_user::text": "lampwardlampward",
	} {
		if got := ask[string](t, s.URL(), sql); got != want {
			t.Errorf("%s = %q, want %q", sql, got, want)
		}
	}
	// A byte order keeps indexes of text whole when the machine's locale data changes.
	if got := ask[bool](t, s.URL(), `SELECT 'Z' < 'a' AND 'z' < 'ä'`); !got {
		t.Error("text is not compared by code point")
	}
	if got := ask[string](t, s.URL(), `SELECT upper('ä')`); got != "Ä" && got != "ä" {
		t.Errorf("upper('ä') = %q", got)
	}
	exec1(t, s.URL(), `CREATE TABLE kept (n int); INSERT INTO kept SELECT generate_series(1, 1000)`)

	config, err := pgx.ParseConfig(s.URL())
	if err != nil {
		t.Fatal(err)
	}
	config.Password += "x"
	if conn, err := pgx.ConnectConfig(t.Context(), config); err == nil {
		conn.Close(t.Context())
		t.Error("a wrong password is taken")
	} else if sqlState(err) != "28P01" {
		t.Errorf("a wrong password gives %v, want invalid_password", err)
	}

	for path, want := range map[string]os.FileMode{"password": 0o600, "data": 0o700, "lock": 0o600, "postgres.log": 0o600} {
		info, err := os.Stat(filepath.Join(dir, path))
		if err != nil {
			t.Fatal(err)
		}
		if got := info.Mode().Perm(); got != want {
			t.Errorf("mode of %s is %04o, want %04o", path, got, want)
		}
	}

	stop(t, s)
	if err := s.Close(); err != nil {
		t.Errorf("second Close: %v", err)
	}
	if alive(s.PID()) {
		t.Errorf("process %d lives on after Close", s.PID())
	}
	again := start(t, Options{Dir: dir})
	if got := ask[int](t, again.URL(), `SELECT sum(n)::int FROM kept`); got != 1000*1001/2 {
		t.Errorf("after a restart the rows sum to %d, want %d", got, 1000*1001/2)
	}
}

// hold starts a second program with a server on the folder, and returns it with its server's process id and URL.
func hold(t *testing.T, dir string) (program *exec.Cmd, pid int, url string) {
	t.Helper()
	exe, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	program = exec.Command(exe)
	program.Env = append(os.Environ(), holdFolder+"="+dir)
	program.Stderr = os.Stderr
	in, err := program.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	out, err := program.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := program.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		in.Close()
		if program.ProcessState == nil {
			if err := program.Wait(); err != nil {
				t.Error(err)
			}
		}
	})
	line, err := bufio.NewReader(out).ReadString('\n')
	if err != nil {
		t.Fatal(err)
	}
	if _, err := fmt.Sscan(line, &pid, &url); err != nil {
		t.Fatalf("%v in %q", err, line)
	}
	return program, pid, url
}

func TestKilledProgramIsTakenOver(t *testing.T) {
	t.Parallel()
	dir := ready(t)
	program, pid, url := hold(t, dir)
	exec1(t, url, `CREATE TABLE kept (n int); INSERT INTO kept VALUES (42)`)
	// A connection at work, so that the server has a second process to end.
	busy := connect(t, url)
	if err := program.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	if err := program.Wait(); err == nil {
		t.Fatal("the killed program reports success")
	}
	// At once, while the old server may still be on its way down.
	s := start(t, Options{Dir: dir})
	if isPostmaster(s.programs, s.data, pid) && pid != s.PID() {
		t.Errorf("server %d of the killed program lives on beside the new one", pid)
	}
	if got := ask[int](t, s.URL(), `SELECT n FROM kept`); got != 42 {
		t.Errorf("n = %d after taking over, want 42", got)
	}
	if err := busy.Ping(t.Context()); err == nil {
		t.Error("a connection to the killed program's server still answers")
	}
}

func TestLivingServerOfKilledProgramIsStopped(t *testing.T) {
	t.Parallel()
	dir := ready(t)
	s := start(t, Options{Dir: dir})
	exec1(t, s.URL(), `CREATE TABLE kept (n int); INSERT INTO kept VALUES (42)`)
	stop(t, s)
	// A server with no tie to any program, as a killed one leaves on systems without the signal of a parent's death.
	orphan := exec.Command(s.programs.Path("postgres"), "-D", s.data, "-c", "listen_addresses=",
		"-c", "unix_socket_directories="+s.data)
	tie(orphan, s.account)
	untie(orphan)
	orphan.Dir, orphan.Env = s.data, childEnvironment()
	if err := orphan.Start(); err != nil {
		t.Fatal(err)
	}
	ended := make(chan error, 1)
	go func() { ended <- orphan.Wait() }()
	until(t, "the server is up", func() bool {
		content, err := os.ReadFile(filepath.Join(s.data, "postmaster.pid"))
		return err == nil && strings.Contains(string(content), "ready")
	})
	again := start(t, Options{Dir: dir})
	select {
	case err := <-ended:
		if err != nil {
			t.Errorf("the server left behind was not shut down in order: %v", err)
		}
	case <-time.After(time.Minute):
		t.Fatal("the server left behind lives on")
	}
	if got := ask[int](t, again.URL(), `SELECT n FROM kept`); got != 42 {
		t.Errorf("n = %d, want 42", got)
	}
}

func TestTracesOfKilledServerDoNotHinder(t *testing.T) {
	t.Parallel()
	for name, trace := range map[string]string{
		// Process ids come round: the file can name a program that has nothing to do with it, such as this one.
		"process id in use by another program": strconv.Itoa(os.Getppid()) + "\n/elsewhere\n1700000000\n5432\n\n\n",
		"process id of nobody":                 "4194303\n/elsewhere\n1700000000\n5432\n\n\n",
		"cut short":                            "",
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			dir := ready(t)
			data := filepath.Join(dir, "data")
			path := filepath.Join(data, "postmaster.pid")
			if err := os.WriteFile(path, []byte(trace), 0o600); err != nil {
				t.Fatal(err)
			}
			as, err := serverAccount(data)
			if err == nil {
				err = as.own(path)
			}
			if err != nil {
				t.Fatal(err)
			}
			again := start(t, Options{Dir: dir})
			if got := ask[int](t, again.URL(), `SELECT 42`); got != 42 {
				t.Errorf("got %d", got)
			}
		})
	}
}

func TestSecondProgramIsRefused(t *testing.T) {
	t.Parallel()
	dir := ready(t)
	program, _, url := hold(t, dir)
	_, err := Start(t.Context(), Options{Dir: dir})
	if !errors.Is(err, ErrInUse) {
		t.Fatalf("second start on the folder: %v, want ErrInUse", err)
	}
	if want := fmt.Sprintf("process %d", program.Process.Pid); !strings.Contains(err.Error(), want) {
		t.Errorf("the refusal %q does not name %s", err, want)
	}
	if got := ask[int](t, url, `SELECT 42`); got != 42 {
		t.Errorf("the first program's server answers %d", got)
	}
}

func TestFolderIsRefused(t *testing.T) {
	t.Parallel()
	write := func(t *testing.T, content string, parts ...string) {
		t.Helper()
		path := filepath.Join(parts...)
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(content), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	unprivileged := func(t *testing.T, dir string) {
		t.Helper()
		if !runningAsRoot() {
			return
		}
		if err := os.Chown(filepath.Join(dir, "data"), 65534, 65534); err != nil {
			t.Fatal(err)
		}
	}
	tests := []struct {
		name    string
		dir     func(testing.TB) string
		prepare func(t *testing.T, dir string)
		want    error
		words   []string
	}{
		{"another major version", folder, func(t *testing.T, dir string) {
			write(t, "9\n", dir, "data", "PG_VERSION")
			unprivileged(t, dir)
		}, ErrMajor, []string{"PostgreSQL 9", "Install PostgreSQL 9"}},
		{"data of something else", folder, func(t *testing.T, dir string) {
			write(t, "x", dir, "data", "letter.txt")
			unprivileged(t, dir)
		}, nil, []string{"not a database folder"}},
		{"other files", folder, func(t *testing.T, dir string) {
			write(t, "x", dir, "letter.txt")
		}, nil, []string{"holds other files"}},
		{"lost password", ready, func(t *testing.T, dir string) {
			if err := os.Remove(filepath.Join(dir, "password")); err != nil {
				t.Fatal(err)
			}
		}, nil, []string{"password is missing", "put it back"}},
		{"wrong password", ready, func(t *testing.T, dir string) {
			write(t, "guess\n", dir, "password")
		}, nil, []string{"is not that of the data"}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			t.Parallel()
			dir := tt.dir(t)
			tt.prepare(t, dir)
			s, err := Start(t.Context(), Options{Dir: dir})
			if err == nil {
				s.Close()
				t.Fatal("the folder is taken")
			}
			if tt.want != nil && !errors.Is(err, tt.want) {
				t.Errorf("error %v is not %v", err, tt.want)
			}
			for _, w := range tt.words {
				if !strings.Contains(err.Error(), w) {
					t.Errorf("error %q does not say %q", err, w)
				}
			}
			// A refusal frees the folder again.
			lock, err := lockFolder(filepath.Join(dir, "lock"))
			if err != nil {
				t.Fatal(err)
			}
			if err := lock.release(); err != nil {
				t.Fatal(err)
			}
		})
	}
}

func TestStartFailureQuotesTheLog(t *testing.T) {
	t.Parallel()
	dir := folder(t)
	_, err := Start(t.Context(), Options{Dir: dir, Settings: map[string]string{"shared_buffers": "many"}})
	if err == nil {
		t.Fatal("a server with a senseless setting starts")
	}
	for _, want := range []string{"shared_buffers", "many", "postgres.log"} {
		if !strings.Contains(err.Error(), want) {
			t.Errorf("the failure does not say %q: %v", want, err)
		}
	}
	// The folder was initialised, and serves once the setting is right.
	start(t, Options{Dir: dir})
}

func TestStartEndsWithItsContext(t *testing.T) {
	t.Parallel()
	dir := folder(t)
	ctx, cancel := context.WithTimeout(t.Context(), 100*time.Millisecond) // initdb takes several times as long
	defer cancel()
	if s, err := Start(ctx, Options{Dir: dir}); err == nil {
		s.Close()
		t.Fatal("a start within 100 ms: too fast for this test")
	}
	// What was cut short does not look like data: the next start begins anew.
	start(t, Options{Dir: dir})
}

func TestServerThatEndsOnItsOwnIsTold(t *testing.T) {
	t.Parallel()
	s, err := Start(t.Context(), Options{Dir: ready(t)})
	if err != nil {
		t.Fatal(err)
	}
	if err := stopPostmaster(s.programs, s.data, s.PID(), stopImmediate); err != nil {
		t.Fatal(err)
	}
	<-s.Done()
	if err := s.Close(); err == nil || !strings.Contains(err.Error(), "on its own") {
		t.Errorf("Close of a server that ended on its own: %v", err)
	}
}

func TestFolderNameMayHoldAnything(t *testing.T) {
	t.Parallel()
	parent := folder(t)
	if err := os.Mkdir(parent, 0o755); err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(parent, `a "b", c's+d%20 ä`)
	if err := os.Rename(ready(t), dir); err != nil {
		t.Fatal(err)
	}
	s := start(t, Options{Dir: dir, Database: `a "b" c`})
	if got := ask[string](t, s.URL(), `SELECT current_database()`); got != `a "b" c` {
		t.Errorf("database %q", got)
	}
	out, err := exec.Command(s.programs.Path("psql"), "--no-psqlrc", "-Atc", "SELECT 42", s.URL()).CombinedOutput()
	if err != nil || strings.TrimSpace(string(out)) != "42" {
		t.Errorf("the client that comes with the programs: %v\n%s", err, out)
	}
}

func TestLongFolderNameGetsAShortSocket(t *testing.T) {
	t.Parallel()
	dir := filepath.Join(folder(t), strings.Repeat("long", 25))
	s := start(t, Options{Dir: dir})
	if got := ask[int](t, s.URL(), `SELECT 42`); got != 42 {
		t.Errorf("got %d", got)
	}
	stop(t, s)
	if _, err := os.Stat(s.host); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the socket's folder %s is left: %v", s.host, err)
	}
}

func TestFolderOutOfReachIsToldWithWhatToDo(t *testing.T) {
	t.Parallel()
	closed := folder(t)
	if err := os.Mkdir(closed, 0o700); err != nil {
		t.Fatal(err)
	}
	s, err := Start(t.Context(), Options{Dir: filepath.Join(closed, "db")})
	if !runningAsRoot() {
		// The server runs as this user, who may enter.
		if err != nil {
			t.Fatal(err)
		}
		stop(t, s)
		return
	}
	if err == nil {
		s.Close()
		t.Fatal("a folder that the server's account cannot enter is taken")
	}
	for _, want := range []string{"may not enter " + closed, "give another folder"} {
		if !strings.Contains(err.Error(), want) {
			t.Errorf("error %q does not say %q", err, want)
		}
	}
}

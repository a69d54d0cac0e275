package main

import (
	"bufio"
	"errors"
	"io"
	"maps"
	"net/http"
	"os"
	"os/exec"
	"regexp"
	"runtime"
	"slices"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"

	"lampward/domain/domaintest"
)

// TestMain runs the tests, or the program itself where a script calls it.
func TestMain(m *testing.M) {
	if os.Getenv("LAMPWARD_AS_PROGRAM") != "" {
		os.Exit(run(os.Args[1:], os.Stdin, os.Stdout, os.Stderr))
	}
	domaintest.Main(m)
}

// TestScripts runs each script of testdata/script with a database of its own, where it wants one.
func TestScripts(t *testing.T) {
	t.Parallel()
	exe, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	testscript.Run(t, testscript.Params{
		Dir: "testdata/script",
		Setup: func(e *testscript.Env) error {
			e.Setenv("LAMPWARD_AS_PROGRAM", "1")
			e.Setenv("PROGRAM", exe)
			e.Setenv("DATABASE", domaintest.DB(e.T().(testing.TB)).Config().ConnString())
			e.Setenv("OWN", folder(e.T().(testing.TB)))
			return nil
		},
	})
}

// folder is an empty folder that the account of the program's own server may enter.
func folder(t testing.TB) string {
	t.Helper()
	dir, err := os.MkdirTemp("", "lampward-own-")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := os.RemoveAll(dir); err != nil {
			t.Error(err)
		}
	})
	if err := os.Chmod(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	return dir
}

// running is the program in a process of its own.
type running struct {
	*exec.Cmd
	address string
	key     string
	said    *bufio.Scanner
}

// start runs a command of the program until it serves.
func start(t *testing.T, dir string, args ...string) *running {
	t.Helper()
	exe, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	r := &running{Cmd: exec.Command(exe, append(args, "--listen", "127.0.0.1:0")...)}
	r.Env = append(os.Environ(), "LAMPWARD_AS_PROGRAM=1", "LAMPWARD_DATABASE_URL=", "LAMPWARD_DATA="+dir)
	out, err := r.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := r.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if r.ProcessState == nil {
			if err := r.Process.Kill(); err != nil {
				t.Error(err)
			}
		}
	})
	for r.said = bufio.NewScanner(out); r.said.Scan(); {
		if _, after, ok := strings.Cut(r.said.Text(), "Serving at http://"); ok {
			r.address, _, _ = strings.Cut(after, " ")
		}
		if _, after, ok := strings.Cut(r.said.Text(), "KEY="); ok {
			r.key = after
			return r
		}
	}
	t.Fatalf("it ended before it served: %v", r.said.Err())
	return nil
}

func (r *running) get(t *testing.T, path string) int {
	t.Helper()
	status, _ := r.read(t, path)
	return status
}

func (r *running) read(t *testing.T, path string) (status int, body string) {
	t.Helper()
	q, err := http.NewRequest(http.MethodGet, "http://"+r.address+path, nil)
	if err != nil {
		t.Fatal(err)
	}
	q.Header.Set("Authorization", "Bearer "+r.key)
	a, err := http.DefaultClient.Do(q)
	if err != nil {
		t.Fatal(err)
	}
	text, err := io.ReadAll(a.Body)
	if err := errors.Join(err, a.Body.Close()); err != nil {
		t.Fatal(err)
	}
	return a.StatusCode, string(text)
}

// checkMetrics holds the guide's table of metrics equal to what the program serves, names and labels.
func (r *running) checkMetrics(t *testing.T) {
	t.Helper()
	guide, err := os.ReadFile("../../DEVELOPERS.md")
	if err != nil {
		t.Fatal(err)
	}
	told := map[string]bool{}
	for _, found := range regexp.MustCompile("(?m)^\\| `(lampward_[a-z_]+)").FindAllStringSubmatch(string(guide), -1) {
		told[found[1]] = true
	}
	_, text := r.read(t, "/metrics")
	served := map[string]bool{}
	for _, found := range regexp.MustCompile(`(?m)^# TYPE (lampward_[a-z_]+) (\w+)$`).FindAllStringSubmatch(text, -1) {
		name := found[1]
		if found[2] == "counter" && !strings.HasSuffix(name, "_total") {
			name += "_total"
		}
		served[name] = true
	}
	for _, state := range []string{"acquired", "idle", "max"} { // the alerts ask for these
		if !strings.Contains(text, `lampward_db_pool_connections{state="`+state+`"}`) {
			t.Errorf("no connections in the state %q", state)
		}
	}
	if !maps.Equal(told, served) {
		t.Errorf("the guide lists %v; the program serves %v", slices.Sorted(maps.Keys(told)), slices.Sorted(maps.Keys(served)))
	}
}

// TestDemoServes: the demo answers, refuses a second one on its folder, is killed without mercy, comes back with all it had,
// and stops in order when interrupted.
func TestDemoServes(t *testing.T) {
	t.Parallel()
	if runtime.GOOS == "windows" {
		t.Log("signals are tried on systems that have them")
		return
	}
	dir := folder(t) + "/data"
	first := start(t, dir, "demo")
	for _, path := range []string{"/livez", "/readyz", "/metrics", "/docs", "/v1/summary", "/v1/causes"} {
		if got := first.get(t, path); got != http.StatusOK {
			t.Errorf("%s answers %d", path, got)
		}
	}
	first.checkMetrics(t)
	exe, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	second := exec.Command(exe, "demo", "--once")
	second.Env = first.Env
	if said, err := second.CombinedOutput(); err == nil || !strings.Contains(string(said), "another lampward is running") {
		t.Errorf("a second demo on the folder: %v %s", err, said)
	}
	if err := first.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	if err := first.Wait(); err == nil {
		t.Error("a killed program ended well")
	}
	again := start(t, dir, "demo")
	if got := again.get(t, "/v1/summary"); got != http.StatusOK {
		t.Errorf("after the kill: %d", got)
	}
	again.key = first.key
	if got := again.get(t, "/v1/summary"); got != http.StatusOK {
		t.Errorf("the key of before the kill: %d", got)
	}
	if err := again.Process.Signal(os.Interrupt); err != nil {
		t.Fatal(err)
	}
	for again.said.Scan() {
	}
	if err := again.Wait(); err != nil {
		t.Errorf("interrupted, it ended with %v", err)
	}
}

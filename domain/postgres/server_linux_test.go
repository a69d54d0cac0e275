package postgres

import (
	"fmt"
	"os"
	"os/user"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

func TestServerRunsUnprivileged(t *testing.T) {
	t.Parallel()
	s := start(t, Options{Dir: ready(t)})
	info, err := os.Stat(fmt.Sprintf("/proc/%d", s.PID()))
	if err != nil {
		t.Fatal(err)
	}
	owner := ownerOf(info)
	if owner == 0 {
		t.Error("the server runs as root")
	}
	want := uint32(os.Geteuid())
	if want == 0 {
		u, err := user.Lookup("postgres")
		if err != nil {
			u, err = user.Lookup("nobody")
		}
		if err != nil {
			t.Fatal(err)
		}
		id, err := strconv.ParseUint(u.Uid, 10, 32)
		if err != nil {
			t.Fatal(err)
		}
		want = uint32(id)
	}
	if owner != want {
		t.Errorf("the server runs as user %d, want %d", owner, want)
	}
	data, err := os.Stat(s.DataDir())
	if err != nil {
		t.Fatal(err)
	}
	if got := ownerOf(data); got != want {
		t.Errorf("the data folder belongs to user %d, want %d", got, want)
	}
}

func TestKilledProgramLeavesNoProcess(t *testing.T) {
	t.Parallel()
	dir := ready(t)
	program, pid, url := hold(t, dir)
	connect(t, url)
	if err := program.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	if err := program.Wait(); err == nil {
		t.Fatal("the killed program reports success")
	}
	until(t, "the server of a killed program ends", func() bool { return len(processesIn(t, filepath.Join(dir, "data"))) == 0 })
	if isPostmaster(Programs{}, filepath.Join(dir, "data"), pid) {
		t.Errorf("server %d lives on", pid)
	}
}

// processesIn lists the processes at work in the folder.
func processesIn(t *testing.T, dir string) (pids []string) {
	t.Helper()
	entries, err := os.ReadDir("/proc")
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range entries {
		if at, err := os.Readlink("/proc/" + e.Name() + "/cwd"); err == nil && strings.HasPrefix(at, dir) {
			pids = append(pids, e.Name())
		}
	}
	return pids
}

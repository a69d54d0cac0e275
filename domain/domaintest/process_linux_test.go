package domaintest

import (
	"bufio"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

func TestLeftFindsAProcess(t *testing.T) {
	t.Parallel()
	child := exec.Command("sleep", "600")
	if err := child.Start(); err != nil {
		t.Fatal(err)
	}
	if err := left(""); err == nil || !strings.Contains(err.Error(), "sleep 600") {
		t.Errorf("with a child at work: %v, want it named", err)
	}
	if err := child.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	if err := child.Wait(); err == nil {
		t.Error("the killed child reports success")
	}
	if err := left(""); err != nil && strings.Contains(err.Error(), "sleep 600") {
		t.Errorf("after the child's end: %v", err)
	}
}

func TestKilledTestBinaryLeavesNoProcess(t *testing.T) {
	t.Parallel()
	exe, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	binary := exec.Command(exe)
	binary.Env = append(os.Environ(), hang+"=1")
	binary.Stderr = os.Stderr
	out, err := binary.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := binary.Start(); err != nil {
		t.Fatal(err)
	}
	line, err := bufio.NewReader(out).ReadString('\n')
	base := strings.TrimSpace(line)
	if err != nil || !strings.Contains(base, basePrefix) {
		t.Fatalf("the folder of the other test binary: %q, %v", base, err)
	}
	t.Cleanup(func() {
		if err := os.RemoveAll(base); err != nil {
			t.Error(err)
		}
	})
	if n := len(inFolder(t, base)); n < 3 {
		t.Errorf("%d processes work in %s, want a server's", n, base)
	}
	if err := binary.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	if err := binary.Wait(); err == nil {
		t.Error("the killed binary reports success")
	}
	tick := time.NewTicker(20 * time.Millisecond)
	defer tick.Stop()
	limit := time.After(30 * time.Second)
	for {
		found := inFolder(t, base)
		if len(found) == 0 {
			return
		}
		select {
		case <-tick.C:
		case <-limit:
			t.Fatalf("processes %v work on in %s half a minute after the kill", found, base)
		}
	}
}

// inFolder lists the processes at work under the folder.
func inFolder(t *testing.T, dir string) (pids []string) {
	t.Helper()
	paths, err := filepath.Glob("/proc/[0-9]*/cwd")
	if err != nil {
		t.Fatal(err)
	}
	for _, path := range paths {
		if at, err := os.Readlink(path); err == nil && strings.HasPrefix(at, dir+"/") {
			pids = append(pids, filepath.Base(filepath.Dir(path)))
		}
	}
	return pids
}

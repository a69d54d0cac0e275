package domaintest

import (
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
	"time"
)

func TestSweepRemovesOnlyWhatKilledRunsLeft(t *testing.T) {
	t.Parallel()
	exe, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	ended := exec.Command(exe, "-test.list", "^$")
	if err := ended.Run(); err != nil {
		t.Fatal(err)
	}
	dir, now := t.TempDir(), time.Now()
	old, young := now.Add(-3*time.Hour), now.Add(-time.Hour)
	folders := []struct {
		name string
		made time.Time
		goes bool
	}{
		{fmt.Sprintf("lampward-test-%d-1", ended.Process.Pid), old, true},
		{fmt.Sprintf("lampward-test-%d-2", ended.Process.Pid), young, false},
		{fmt.Sprintf("lampward-test-%d-3", os.Getpid()), old, false},
		{"lampward-test-notes", old, false},
		{"something-else", old, false},
	}
	for _, f := range folders {
		path := filepath.Join(dir, f.name)
		if err := os.MkdirAll(filepath.Join(path, "server"), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.Chtimes(path, f.made, f.made); err != nil {
			t.Fatal(err)
		}
	}
	if err := sweep(dir, now); err != nil {
		t.Fatal(err)
	}
	for _, f := range folders {
		if _, err := os.Stat(filepath.Join(dir, f.name)); os.IsNotExist(err) != f.goes {
			t.Errorf("%s: after the sweep %v, want gone to be %v", f.name, err, f.goes)
		}
	}
}

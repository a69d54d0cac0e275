package domaintest

import (
	"fmt"
	"os"
	"strconv"
	"strings"
	"syscall"
)

// memoryFolder returns a folder in memory, or nothing where memory is not plenty. A copied database is some 300 files,
// which a disk's file system can take ten times as long to make and remove.
func memoryFolder() string {
	const dir, enough = "/dev/shm", 8 << 30
	var disk syscall.Statfs_t
	if err := syscall.Statfs(dir, &disk); err != nil || disk.Bavail*uint64(disk.Bsize) < enough {
		return ""
	}
	content, err := os.ReadFile("/proc/meminfo")
	if err != nil {
		return ""
	}
	_, rest, _ := strings.Cut(string(content), "MemAvailable:")
	line, _, _ := strings.Cut(rest, "kB")
	kibibytes, err := strconv.ParseUint(strings.TrimSpace(line), 10, 64)
	if err != nil || kibibytes<<10 < enough {
		return ""
	}
	return dir
}

// left fails with the processes that this test binary started, or that work in dir, and that have not ended.
func left(dir string) error {
	entries, err := os.ReadDir("/proc")
	if err != nil {
		return err
	}
	var found []string
	for _, e := range entries {
		pid, err := strconv.Atoi(e.Name())
		if err != nil {
			continue
		}
		stat, err := os.ReadFile("/proc/" + e.Name() + "/stat")
		if err != nil {
			continue // ended meanwhile
		}
		// "pid (name) state parent ...": the name may hold anything, brackets too.
		_, rest, _ := strings.Cut(string(stat[strings.LastIndexByte(string(stat), ')')+1:]), " ")
		fields := strings.Fields(rest)
		if len(fields) < 2 || fields[0] == "Z" {
			continue
		}
		at, err := os.Readlink("/proc/" + e.Name() + "/cwd")
		inside := err == nil && dir != "" && strings.HasPrefix(at, dir+"/")
		if fields[1] == strconv.Itoa(os.Getpid()) || inside {
			command, _ := os.ReadFile("/proc/" + e.Name() + "/cmdline") // empty if it ended meanwhile
			found = append(found, fmt.Sprintf("%d %s", pid, strings.ReplaceAll(string(command), "\x00", " ")))
		}
	}
	if len(found) > 0 {
		return fmt.Errorf("processes are left after the tests:\n  %s", strings.Join(found, "\n  "))
	}
	return nil
}

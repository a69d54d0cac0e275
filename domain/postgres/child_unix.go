//go:build unix

package postgres

import (
	"errors"
	"os"
	"os/exec"
	"syscall"
)

// childEnvironment is fixed, so that no PG* variable or locale of the user reaches the server.
func childEnvironment() []string {
	return []string{"PATH=/usr/local/bin:/usr/bin:/bin", "LC_ALL=C", "TZ=UTC"}
}

// tie sets the account, the process group (an interrupt from the terminal is for this program, which then stops the
// server in order) and, where the system has it, the signal of the parent's death.
func tie(cmd *exec.Cmd, as account) {
	cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true}
	if as.drop {
		cmd.SysProcAttr.Credential = &syscall.Credential{Uid: as.uid, Gid: as.gid}
	}
	if cmd.Cancel != nil {
		cmd.Cancel = func() error { return syscall.Kill(-cmd.Process.Pid, syscall.SIGKILL) }
	}
	dieWithParent(cmd.SysProcAttr)
}

// adopt has nothing to do: the tie is made at the start.
func adopt(*os.Process) error { return nil }

func runningAsRoot() bool { return os.Geteuid() == 0 }

// stopPostmaster asks the server with that process id to stop, and returns at once.
func stopPostmaster(_ Programs, _ string, pid int, mode stopMode) error {
	signal := map[stopMode]syscall.Signal{
		stopFast: syscall.SIGINT, stopImmediate: syscall.SIGQUIT, stopKill: syscall.SIGKILL,
	}[mode]
	if err := syscall.Kill(pid, signal); err != nil && !errors.Is(err, syscall.ESRCH) {
		return err
	}
	return nil
}

// alive reports whether a process with that id exists, whoever's it is.
func alive(pid int) bool {
	err := syscall.Kill(pid, 0)
	return err == nil || errors.Is(err, syscall.EPERM)
}

// syncFolder makes a rename in the folder durable.
func syncFolder(dir string) error {
	f, err := os.Open(dir)
	if err != nil {
		return err
	}
	return errors.Join(f.Sync(), f.Close())
}

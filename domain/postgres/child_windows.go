package postgres

import (
	"fmt"
	"os"
	"os/exec"
	"syscall"
	"unsafe"

	"golang.org/x/sys/windows"
)

// initialLocales are tried in order for a new cluster.
var initialLocales = []string{"C"}

// childEnvironment is the user's own: programs need much of it to run at all.
func childEnvironment() []string { return os.Environ() }

// tie keeps an interrupt from the terminal away from the child.
func tie(cmd *exec.Cmd, _ account) {
	cmd.SysProcAttr = &syscall.SysProcAttr{CreationFlags: windows.CREATE_NEW_PROCESS_GROUP}
}

// adopt puts the process into a job that the system ends when this program's last handle goes, that is, with it.
func adopt(process *os.Process) error {
	job, err := windows.CreateJobObject(nil, nil)
	if err != nil {
		return fmt.Errorf("make a job object: %w", err)
	}
	info := windows.JOBOBJECT_EXTENDED_LIMIT_INFORMATION{
		BasicLimitInformation: windows.JOBOBJECT_BASIC_LIMIT_INFORMATION{
			LimitFlags: windows.JOB_OBJECT_LIMIT_KILL_ON_JOB_CLOSE,
		},
	}
	if _, err := windows.SetInformationJobObject(job, windows.JobObjectExtendedLimitInformation,
		uintptr(unsafe.Pointer(&info)), uint32(unsafe.Sizeof(info))); err != nil {
		return fmt.Errorf("set the job object's limits: %w", err)
	}
	handle, err := windows.OpenProcess(windows.PROCESS_SET_QUOTA|windows.PROCESS_TERMINATE, false, uint32(process.Pid))
	if err != nil {
		return fmt.Errorf("open the server's process: %w", err)
	}
	defer windows.CloseHandle(handle)
	return windows.AssignProcessToJobObject(job, handle)
}

// runningAsRoot is false: a server started by an administrator refuses to run, and says so in its log.
func runningAsRoot() bool { return false }

// stopPostmaster asks the server on the data folder to stop, and returns at once.
func stopPostmaster(p Programs, data string, pid int, mode stopMode) error {
	if mode == stopKill {
		process, err := os.FindProcess(pid)
		if err != nil {
			return err
		}
		return process.Kill()
	}
	name := map[stopMode]string{stopFast: "fast", stopImmediate: "immediate"}[mode]
	return exec.Command(p.Path("pg_ctl"), "stop", "--no-wait", "--silent", "-D", data, "-m", name).Run()
}

// isPostmaster reports whether a server runs on the data folder.
func isPostmaster(p Programs, data string, _ int) bool {
	return exec.Command(p.Path("pg_ctl"), "status", "--silent", "-D", data).Run() == nil
}

// alive is false: the server itself tells a reused process id from a server's here.
func alive(int) bool { return false }

// syncFolder has nothing to do: a rename is durable once it is logged by the file system.
func syncFolder(string) error { return nil }

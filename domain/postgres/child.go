package postgres

import (
	"errors"
	"os/exec"
	"runtime"
)

// child is a process that must not outlive this program.
type child struct {
	cmd  *exec.Cmd
	done chan struct{} // closed when the process has ended
	err  error         // why it ended, nil for status 0; valid after done
}

// stopMode says how hard a server is stopped.
type stopMode int

const (
	stopFast      stopMode = iota // connections are broken off, a checkpoint is written
	stopImmediate                 // no checkpoint: the next start recovers
	stopKill                      // the process is killed
)

// exit returns why an ended child ended, in words also for status 0.
func (c *child) exit() error {
	if c.err != nil {
		return c.err
	}
	return errors.New("exit status 0")
}

// spawn starts cmd under the account, in its own process group, with an environment of its own, to be ended by the
// system should this program die.
//
// Linux sends the signal of a parent's death when the thread that started the child ends, not the process. So a
// goroutine keeps the starting thread to itself until the child has ended, and takes the thread with it.
func spawn(cmd *exec.Cmd, as account, dir string) (*child, error) {
	cmd.Dir = dir
	cmd.Env = childEnvironment()
	tie(cmd, as)
	c := &child{cmd: cmd, done: make(chan struct{})}
	started := make(chan error, 1)
	go func() {
		runtime.LockOSThread()
		err := cmd.Start()
		if err == nil {
			if err = adopt(cmd.Process); err != nil {
				err = errors.Join(err, cmd.Process.Kill(), cmd.Wait())
			}
		}
		started <- err
		if err == nil {
			c.err = cmd.Wait()
		}
		close(c.done)
	}()
	if err := <-started; err != nil {
		return nil, err
	}
	return c, nil
}

//go:build unix

package postgres

import (
	"os"
	"os/exec"
	"syscall"
)

func ownerOf(info os.FileInfo) uint32 { return info.Sys().(*syscall.Stat_t).Uid }

// untie takes from a command what would end it with this program.
func untie(cmd *exec.Cmd) {
	attr := &syscall.SysProcAttr{Setpgid: true, Credential: cmd.SysProcAttr.Credential}
	cmd.SysProcAttr = attr
}

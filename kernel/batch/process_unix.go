//go:build unix

package batch

import (
	"os/exec"
	"syscall"
)

// detach gives the kernel a process group of its own: the terminal's interrupt is this program's to pass on.
func detach(cmd *exec.Cmd) { cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true} }

// kill ends the kernel and whatever it has started.
func kill(cmd *exec.Cmd) { syscall.Kill(-cmd.Process.Pid, syscall.SIGKILL) }

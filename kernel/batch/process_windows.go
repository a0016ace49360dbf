package batch

import (
	"os/exec"
	"syscall"
)

// detach gives the kernel a process group of its own: the console's interrupt is this program's to pass on.
func detach(cmd *exec.Cmd) {
	cmd.SysProcAttr = &syscall.SysProcAttr{CreationFlags: syscall.CREATE_NEW_PROCESS_GROUP}
}

// kill ends the kernel.
func kill(cmd *exec.Cmd) { cmd.Process.Kill() }

//go:build unix

package exec

import (
	"os/exec"
	"syscall"
)

// apart gives the program a process group of its own, so that what it starts ends with it, and asks it to end before it is
// made to: a recorder lets go of its device then.
func apart(cmd *exec.Cmd) {
	cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true}
	cmd.Cancel = func() error { return syscall.Kill(-cmd.Process.Pid, syscall.SIGTERM) }
}

// killGroup ends whatever of the group is left. The program itself has not been waited for, so its number is still its own.
func killGroup(cmd *exec.Cmd) { _ = syscall.Kill(-cmd.Process.Pid, syscall.SIGKILL) }

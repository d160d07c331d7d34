//go:build unix

package keeper

import (
	"os/exec"
	"os/signal"
	"syscall"
)

// ignoreSignals leaves the end of the orders as the only thing that ends the keeper.
// A pipe that nobody reads any more must not end it either.
func ignoreSignals() {
	signal.Ignore(syscall.SIGINT, syscall.SIGTERM, syscall.SIGHUP, syscall.SIGQUIT, syscall.SIGPIPE)
}

// apart puts the keeper into a process group of its own, which an interrupt from the
// keyboard does not reach.
func apart(cmd *exec.Cmd) {
	cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true}
}

package keeper

import (
	"os"
	"os/exec"
	"os/signal"
	"syscall"

	"golang.org/x/sys/windows"
)

// ignoreSignals leaves the end of the orders as the only thing that ends the keeper.
func ignoreSignals() {
	signal.Ignore(os.Interrupt, syscall.SIGTERM, syscall.SIGHUP)
}

// apart puts the keeper into a process group and a console of its own, so that neither
// an interrupt from the keyboard nor the closing of the window reaches it.
func apart(cmd *exec.Cmd) {
	cmd.SysProcAttr = &syscall.SysProcAttr{
		CreationFlags: windows.CREATE_NEW_PROCESS_GROUP | windows.CREATE_NO_WINDOW,
	}
}

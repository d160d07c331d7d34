// Command gatesill reads gate-voltage, drain-current and load-voltage samples of
// power and RF MOSFETs, keeps them by lot, and says at which gate voltage each
// device turns on, which belong together and which do not belong.
package main

import (
	"context"
	"errors"
	"os"
	"os/signal"
	"syscall"

	"gatesill/cmd/internal/job"
)

func main() { os.Exit(run(os.Args[1:])) }

// run runs one command line and gives its exit code. Being told to end, and the loss
// of the terminal, are an interrupt: supplies are switched off, what was read is kept.
func run(args []string) int {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM, syscall.SIGHUP)
	defer stop()
	root := newRoot()
	root.SetArgs(args)
	err := root.ExecuteContext(ctx)
	if err == nil {
		return job.ExitDone
	}
	if ctx.Err() != nil || errors.Is(err, context.Canceled) { // by a signal, or by Ctrl-C as a key
		return job.ExitInterrupted
	}
	job.WriteError(os.Stderr, err)
	var f *job.Failure
	if errors.As(err, &f) {
		return f.Code
	}
	return job.ExitFailed
}

package job

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"

	"gatesill/acquire/bench"
	"gatesill/acquire/rehearsal"
)

// RehearsalVerb is the word by which the program starts itself as the process of a
// rehearsal. It is no verb for people.
const RehearsalVerb = "rehearsal-process"

// RehearsalProcess is that process; it gives its exit code.
func RehearsalProcess(stdin io.Reader, stdout io.Writer) int { return rehearsal.Main(stdin, stdout) }

// rehearse starts a bench that does not exist, with a device in it and its gate
// being turned up, and runs f on it.
func rehearse(ctx context.Context, env *Env, f func(context.Context, *bench.Bench) error) (err error) {
	c, err := rehearsal.Standard(rehearsal.Handheld)
	if err != nil {
		return failed("", "%w", err)
	}
	c.Folder, err = os.MkdirTemp("", "gatesill-rehearsal-")
	if err != nil {
		return failed("", "%w", err)
	}
	defer os.RemoveAll(c.Folder)
	exe, err := os.Executable()
	if err != nil {
		return failed("", "%w", err)
	}
	r, err := rehearsal.Start(ctx, exe, []string{RehearsalVerb}, nil, c)
	if err != nil {
		return &Failure{Code: ExitInstrument, Err: err}
	}
	defer func() {
		if cerr := r.Close(); err == nil && ctx.Err() == nil {
			err = cerr
		}
	}()
	b, err := bench.Parse([]byte(r.Bench()))
	if err != nil {
		return failed("", "bench of the rehearsal: %w", err)
	}
	if err := errors.Join(r.Insert(c.Devices[0].Name), r.Knob(2.6, 0), r.Knob(3.4, 0.02)); err != nil {
		return failed("", "%w", fmt.Errorf("rehearsal: %w", err))
	}
	return f(ctx, b)
}

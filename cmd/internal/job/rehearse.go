package job

import (
	"context"
	"errors"
	"fmt"
	"math"
	"os"

	"gatesill/acquire/bench"
	"gatesill/acquire/rehearsal"
)

// RehearsalVerb is the hidden verb by which the program starts itself as a
// simulated bench.
const RehearsalVerb = "rehearsal-process"

// rehearsed is a rehearsal bench with the hand that does at it what the operator is
// asked to do.
type rehearsed struct {
	*rehearsal.Rehearsal
	bench    *bench.Bench
	folder   string
	inserted string
	aim      float64 // V, where the hand turns the knob; NaN: it stands still
	rate     float64 // V/s
}

// handRate is how fast the simulated hand turns the knob outside of a sweep, V/s.
const handRate = 0.5

// rehearse starts a simulated bench.
func rehearse(ctx context.Context, c rehearsal.Config) (*rehearsed, error) {
	exe, err := os.Executable()
	if err != nil {
		return nil, failed("", "rehearsal: %w", err)
	}
	folder, err := os.MkdirTemp("", "gatesill-rehearsal-")
	if err != nil {
		return nil, failed("", "rehearsal: %w", err)
	}
	c.Folder = folder
	// It ends by close, after the keeper: an interrupt must not take the supplies
	// away while they are being switched off.
	r, err := rehearsal.Start(context.WithoutCancel(ctx), exe, []string{RehearsalVerb}, nil, c)
	if err != nil {
		return nil, &Failure{Code: ExitInstrument, Err: errors.Join(err, os.RemoveAll(folder)), Hint: "a rehearsal needs pseudo-terminals, which Linux and macOS have"}
	}
	b, err := bench.Parse([]byte(r.Bench()))
	if err != nil {
		return nil, errors.Join(fmt.Errorf("rehearsal: bench file:%w", err), r.Close(), os.RemoveAll(folder))
	}
	return &rehearsed{Rehearsal: r, bench: b, folder: folder, aim: math.NaN()}, nil
}

// close ends the simulated bench.
func (r *rehearsed) close() error {
	if r == nil {
		return nil
	}
	return errors.Join(r.Close(), os.RemoveAll(r.folder))
}

// insert puts a device into the simulated fixture; "" takes out what is in it.
func (r *rehearsed) insert(device string) error {
	if r.inserted == device {
		return nil
	}
	r.inserted = device
	if device == "" {
		return r.Remove()
	}
	return r.Insert(device)
}

// turn sends the simulated hand to a gate voltage at a rate, V/s; NaN lets it stop
// where it is.
func (r *rehearsed) turn(v, rate float64) error {
	if v == r.aim && rate == r.rate || math.IsNaN(v) && math.IsNaN(r.aim) {
		return nil
	}
	r.aim, r.rate = v, rate
	if math.IsNaN(v) {
		t, err := r.Truth()
		if err != nil {
			return err
		}
		return r.Knob(t.Vg, 0)
	}
	return r.Knob(v, rate)
}

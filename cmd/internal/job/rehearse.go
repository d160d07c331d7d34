package job

import (
	"context"
	"errors"
	"fmt"
	"math"
	"os"
	"slices"

	"gatesill/acquire"
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
	names    []string // of the simulated devices
	inserted string
	aim      float64 // V, where the hand turns the knob; NaN: it stands still
	rate     float64 // V/s
}

// handRate is how fast the simulated hand turns the knob outside of a sweep, V/s.
const handRate = 1.0

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
	h := &rehearsed{Rehearsal: r, bench: b, folder: folder, aim: math.NaN()}
	for _, d := range c.Devices {
		h.names = append(h.names, d.Name)
	}
	return h, nil
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
	if n := len(r.names); n > 0 && !slices.Contains(r.names, device) { // any of them stands for it
		device = r.names[len(device)%n]
	}
	return r.Insert(device)
}

// turn sends the simulated hand to a gate voltage at a rate, V/s; NaN lets it stop
// where it is.
func (r *rehearsed) turn(v, rate float64) error {
	if math.IsNaN(v) {
		if math.IsNaN(r.aim) {
			return nil
		}
		t, err := r.Truth()
		if err != nil {
			return err
		}
		r.aim = math.NaN()
		return r.Knob(t.Vg, 0)
	}
	if v == r.aim && rate == r.rate {
		return nil
	}
	r.aim, r.rate = v, rate
	return r.Knob(v, rate)
}

// hand is what the hand of a rehearsal does for the runner of a sweep.
func (m *measuring) hand(at float64) {
	h := m.r.Hand()
	id := math.Abs(m.w.last[acquire.Current].number.Value.Float())
	if m.w.rq.Mode == acquire.AtSpot && id > showsFrom && m.nudge(h, id, at) { // false while not known
		return
	}
	m.w.handAt(h.To, h.Rate)
}

// showsFrom is the current from which the hand of a rehearsal takes more care, A.
const showsFrom = 1e-5

// nudge brings the current of a spot to its place as people do: a small turn, a
// look at what the meters make of it, another one. It reports whether that was its
// business.
func (m *measuring) nudge(h acquire.Hand, id, at float64) bool {
	want, known := m.w.plan().At.Get()
	if !known || m.done != nil {
		return false
	}
	if math.IsNaN(h.To) {
		v := m.r.View(at)
		if v.Paused != "" || v.Fix != "" || math.Abs(id/want-1) < 0.025 {
			return false
		}
	}
	const look, perVolt = 1.2, 15.0 // s between turns; the current grows e-fold in 1/24 to 1/5 V
	if at-m.nudged < look {
		return true
	}
	m.nudged = at
	t, err := m.w.sim.Truth()
	if err != nil {
		return false
	}
	step := math.Max(-0.1, math.Min(0.1, math.Log(want/id)/perVolt))
	m.w.handAt(t.Vg+m.w.part.Sign()*step, handRate)
	return true
}

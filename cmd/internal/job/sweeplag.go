package job

import (
	"context"
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"

	"gatesill/acquire"
	"gatesill/report"
	"gatesill/store/record"
)

// The ramps by which a lag is found.
const (
	lagRate    = 0.03 // V/s, of the simulated hand
	lagNear    = 0.12 // V/s, before current shows
	lagCurrent = 5e-3 // A, at which the way up ends, at most
	lagPower   = 0.05 // of the limit of P_D, at most
	lagPatient = 240  // s, where nobody is there to press a key
)

// findLag finds by how much the other meters lag behind that of the gate, from a ramp
// up and one down at low power, and counts on it in this session.
func (w *sweeper) findLag(ctx context.Context, device string) error {
	w.lagged = map[string]acquire.Timing{}
	most := lagCurrent
	if v := w.given.VDD.Or(0); w.limits.PD > 0 && v > 0 {
		most = math.Min(most, lagPower*w.limits.PD/v)
	}
	text := "turn the gate slowly and evenly up until the current is about " + report.FormatPlain(most, math.NaN(), "A") + ", then press space"
	up, err := w.ramp(ctx, device, text, w.part.Sign()*math.Max(w.limits.Vgs, 20), func(id float64) bool { return id >= most })
	if err != nil {
		return err
	}
	off := offVoltage(w.part)
	down, err := w.ramp(ctx, device, "turn slowly and evenly back to the off voltage, then press space", off, func(id float64) bool { return id < most/200 })
	if err != nil {
		return err
	}
	w.hand(off)
	for _, role := range []string{acquire.Current, acquire.Load} {
		if !slices.Contains(w.roles, role) {
			continue
		}
		if err := w.countLag(role, up, down); err != nil {
			w.say("the lag of the %s meter: %v", role, err)
		}
	}
	if _, ok := w.lagged[acquire.Gate]; ok {
		// What is not known of the gate's meter is now with the others.
		p := pairingOf(w.bench, w.rq.Mode)
		for role, t := range p.Timing {
			if _, found := w.lagged[role]; !found {
				t.LagU += p.Timing[acquire.Gate].LagU
				w.lagged[role] = t
			}
		}
	}
	if err := w.lead(ctx, &asking{w: w, title: "  device " + device, text: func(float64) string { return "gate to its off voltage, then press space" },
		missing: func(at float64) []string { return w.gateNear(off, at) }}); err != nil {
		return err
	}
	return nil
}

// countLag finds the lag of one meter and counts on it.
func (w *sweeper) countLag(role string, up, down []record.Reading) error {
	only := func(rs []record.Reading) []record.Reading {
		return slices.DeleteFunc(slices.Clone(rs), func(r record.Reading) bool { return r.Role != acquire.Gate && r.Role != role })
	}
	p := pairingOf(w.bench, w.rq.Mode)
	maps.DeleteFunc(p.Timing, func(r string, _ acquire.Timing) bool { return r != acquire.Gate && r != role })
	lag, u, err := acquire.FindLag(only(up), only(down), p)
	if err != nil {
		return err
	}
	gate, t := p.Timing[acquire.Gate], p.Timing[role]
	t.Lag, t.LagU = t.Lag+lag, 2*u // what is left between the two is this meter's
	gate.LagU = 0
	w.lagged[acquire.Gate], w.lagged[role] = gate, t
	w.say("the %s meter lags %.0f ms (± %.0f) behind the gate's; in the bench file: lag = \"%.0f ms\", lag_u = \"%.0f ms\" (and lag_u = 0 for the gate's)",
		role, 1e3*lag, 1e3*u, 1e3*t.Lag, math.Ceil(1e3*t.LagU))
	return w.sitting.event("lag", "%s %g %g", role, t.Lag, t.LagU)
}

// ramp hears one ramp to its end: a key, or in a rehearsal the current.
func (w *sweeper) ramp(ctx context.Context, device, text string, to float64, enough func(id float64) bool) ([]record.Reading, error) {
	var heard []record.Reading
	guard := acquire.NewGuard(w.limits, w.given, nil)
	begun, ended := w.elapsed(), false
	s := &asking{w: w, title: "  device " + device, text: func(float64) string { return text },
		hears: func(e acquire.Event) {
			heard = append(heard, e.Readings...)
			for _, r := range e.Readings {
				guard.Add(r)
			}
			look := guard.Look()
			if look.ID > showsFrom && w.sim != nil && !ended {
				w.handAt(to, lagRate)
			}
			if worst, ok := look.Worst(); ok && worst.Level() == acquire.Over {
				w.say("stop, turn the gate back: %s", worst)
				w.beep(acquire.SoundStop)
			}
			ended = ended || enough(look.ID)
		}}
	if w.keys == nil {
		s.until = func() bool { return ended || w.elapsed()-begun > lagPatient }
	}
	w.handAt(to, lagNear)
	err := w.lead(ctx, s)
	if w.sim != nil {
		w.handAt(math.NaN(), 0)
	}
	if err == nil && w.keys == nil && !ended {
		err = &Failure{Code: ExitInstrument, Err: fmt.Errorf("device %s: the ramp for the lag did not come to its end: %s", report.Clean(device), strings.TrimSuffix(text, ", then press space"))}
	}
	return heard, err
}

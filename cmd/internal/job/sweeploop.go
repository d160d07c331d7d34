package job

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"gatesill/acquire"
	"gatesill/acquire/keeper"
	"gatesill/report"
	"gatesill/report/screen"
	"gatesill/store/record"
)

// tickEvery is how often a stage is told that time passes, and the keeper that the
// measuring loop runs.
const tickEvery = 20 * time.Millisecond

// drawEvery is how far apart two pictures of the screen lie at least.
const drawEvery = 100 * time.Millisecond

// stage is one thing that is done at the bench: it hears all that happens until it
// is over.
type stage interface {
	event(e acquire.Event)
	tick(at float64)
	key(k rune)
	over() bool
	show(at float64) screen.Model
}

// Keys of the keyboard that are no letters.
const (
	keyInterrupt = 3 // Ctrl-C
	keyEnter     = '\r'
	keyEscape    = 27
)

// lead runs one stage to its end. It is the measuring loop: nothing in it waits.
func (w *sweeper) lead(ctx context.Context, s stage) error {
	ticker := time.NewTicker(tickEvery)
	defer ticker.Stop()
	var drawn time.Time
	var told <-chan driven
	var alone <-chan keeper.OffReport
	for !s.over() {
		if w.drive != nil {
			told, alone = w.drive.told, w.drive.k.Done()
		} else {
			told, alone = nil, nil
		}
		select {
		case e := <-w.events:
			if err := w.take(e, s); err != nil {
				return err
			}
		case <-ticker.C:
			w.breakDown()
			// What has come is heard before it is asked who is silent: on a busy
			// machine the loop may be late, and the meters are not.
			for pending := len(w.events); pending > 0; pending-- {
				if err := w.take(<-w.events, s); err != nil {
					return err
				}
			}
			if s.over() {
				break
			}
			s.tick(w.elapsed())
			if w.drive != nil {
				_ = w.drive.k.Beat() // a keeper that is gone is told of by its Done
			}
			if time.Since(drawn) >= drawEvery {
				drawn = time.Now()
				if err := w.draw(s.show(w.elapsed())); err != nil {
					return err
				}
			}
		case k, open := <-w.keys:
			if !open || k == keyInterrupt {
				return context.Canceled
			}
			s.key(k)
		case d := <-told:
			w.driven(d, s)
		case r, open := <-alone:
			if open {
				w.offAlone(r, s)
			}
			if w.drive != nil {
				w.drive.ended = true
				w.undrive()
			}
		case <-ctx.Done():
			return ctx.Err()
		}
	}
	if q, ok := s.(interface{ quits() bool }); ok && q.quits() {
		return errQuit
	}
	return w.draw(s.show(w.elapsed()))
}

// breakDown puts the faults on the simulated bench whose time has come.
func (w *sweeper) breakDown() {
	for _, f := range w.faults.due(time.Now()) {
		w.say("%s", tellFault(f))
		if err := w.sim.Fault(f.Fault); err != nil {
			w.say("%v", err)
		}
	}
}

// take passes an event on: to the store, to the interlock, to the stage.
func (w *sweeper) take(e acquire.Event, s stage) error {
	e = w.exchanged(e)
	w.resolve(e)
	if err := w.hear(e); err != nil {
		return err
	}
	if e.Lost || e.Opened {
		kind, text := "opened", "line "+e.Line+" of the "+e.Role+" meter"
		if e.Lost {
			kind = "lost"
			if e.Err != nil {
				text += ": " + e.Err.Error()
			}
		}
		if err := w.sitting.event(kind, "%s", text); err != nil {
			return err
		}
	}
	for _, r := range e.Readings {
		w.last[r.Role] = heardLast{r, w.last[r.Role].number}
		if r.Value.IsKnown() {
			w.last[r.Role] = heardLast{r, r}
		}
	}
	w.lock.Event(e)
	s.event(e)
	return nil
}

// heardLast is what a meter said last, and the last that was a number.
type heardLast struct{ any, number record.Reading }

// staleAfter is the age at which a reading outside of a sweep counts as old, s.
const staleAfter = 1.5

// shown is what the meters say now, outside of a sweep.
func (w *sweeper) shown() map[string]acquire.Shown {
	out := map[string]acquire.Shown{}
	now := w.elapsed()
	for role, l := range w.last {
		s := acquire.Shown{Value: l.number.Value.Float(), Unit: l.number.Unit, Digit: l.number.Digit.Or(0), State: l.any.State, Why: l.any.Refused, Age: now - l.number.At}
		s.Stale = s.Age > staleAfter
		out[role] = s
	}
	return out
}

// hand sends the simulated hand to a gate voltage; a real one is told in words.
func (w *sweeper) hand(v float64) { w.handAt(v, handRate) }

func (w *sweeper) handAt(v, rate float64) {
	if w.sim == nil || w.sim.Supplies()["gate"] != "" { // a driven gate has no knob
		return
	}
	if err := w.sim.turn(v, rate); err != nil {
		w.say("%v", err)
	}
}

// resolve fills in one count of the display from the bench file where a reading
// does not tell it itself.
func (w *sweeper) resolve(e acquire.Event) {
	for i := range e.Readings {
		r := &e.Readings[i]
		x, number := r.Value.Get()
		if r.Digit.IsKnown() || !number {
			continue
		}
		for _, m := range w.bench.Meters {
			if a, ok := m.Range(x); ok && m.Role == r.Role && a.Resolution > 0 {
				r.Digit = record.Known(a.Resolution)
			}
		}
	}
}

// exchanged is the event with the roles of exchanged lines put right.
func (w *sweeper) exchanged(e acquire.Event) acquire.Event {
	if len(w.swap) == 0 {
		return e
	}
	if r, ok := w.swap[e.Role]; ok {
		e.Role = r
	}
	e.Readings = slices.Clone(e.Readings)
	for i := range e.Readings {
		r := &e.Readings[i]
		role, ok := w.swap[r.Role]
		if !ok {
			continue
		}
		r.Role = role
		if strings.HasPrefix(r.Refused, "wrong unit") { // it is the right one in its new role
			r.Refused = ""
		}
	}
	return e
}

// driven hears what came of an order to the supplies.
func (w *sweeper) driven(d driven, s stage) {
	switch {
	case d.what == "off":
		w.saw(d.off)
		if d.err != nil {
			w.say("supplies: %v", d.err)
		}
		tellOff(s, d.off)
	case d.err != nil:
		s.event(acquire.Event{At: w.elapsed(), Line: d.what + " supply", Role: d.what + " supply", Lost: true, Err: plainKeeper(d.err)})
	}
}

// plainKeeper is an error of the keeper without its own name.
func plainKeeper(err error) error { return errors.New(strings.TrimPrefix(err.Error(), "keeper: ")) }

// saw notes what the way to the off state proved.
func (w *sweeper) saw(r keeper.OffReport) {
	w.lock.DrainOff(r.Reached && r.Drain == "off", w.elapsed())
	if !r.Reached {
		w.say("the off state is not proved: drain supply %s, gate read back as %s; switch the supplies off by hand", r.Drain, report.FormatPlain(r.Gate, math.NaN(), "V"))
		w.beep(acquire.SoundStop)
	}
	for _, text := range r.Errors {
		w.say("supplies: %s", text)
	}
	_ = w.sitting.event("off", "%s; drain supply %s; gate held %v; %s after the cause", r.Reason, r.Drain, r.GateHeld, r.Took.Round(time.Millisecond))
}

// offAlone hears that the keeper went to the off state by itself.
func (w *sweeper) offAlone(r keeper.OffReport, s stage) {
	w.say("the keeper switched off: %s", r.Reason)
	w.saw(r)
	s.event(acquire.Event{At: w.elapsed(), Line: "supplies", Role: "supplies", Lost: true, Err: fmt.Errorf("switched off: %s", r.Reason)})
	tellOff(s, r)
}

// tellOff tells a stage of the off state, where it waits for it.
func tellOff(s stage, r keeper.OffReport) {
	if m, ok := s.(interface{ switchedOff(keeper.OffReport) }); ok {
		m.switchedOff(r)
	}
}

// undrive ends the keeper, which goes to the off state first.
func (w *sweeper) undrive() {
	if w.drive == nil {
		return
	}
	d := w.drive
	w.drive = nil
	if err := d.close(); err != nil && !d.ended {
		w.say("%v", err)
	}
}

// draw shows a picture, on a terminal.
func (w *sweeper) draw(m screen.Model) error {
	if w.keys == nil {
		return nil
	}
	m.Title = "sweep  lot " + w.lot.Name + m.Title
	m.Lines = append(m.Lines, w.lines...)
	if w.beeps > 0 {
		if _, err := w.rq.Raw.Write([]byte(strings.Repeat("\a", w.beeps))); err != nil {
			return err
		}
		w.beeps = 0
	}
	return w.picture.Show(m)
}

// beep sounds the terminal's bell: once for a point taken, twice for attention,
// three times for stop.
func (w *sweeper) beep(s acquire.Sound) {
	switch s {
	case acquire.SoundAccept:
		w.beeps = max(w.beeps, 1)
	case acquire.SoundAttention:
		w.beeps = max(w.beeps, 2)
	case acquire.SoundStop:
		w.beeps = 3
	}
}

// values shows the readings of every meter.
func (w *sweeper) values(latest map[string]acquire.Shown) []screen.Value {
	var out []screen.Value
	for _, m := range w.bench.Meters {
		role := m.Role
		s, ok := latest[role]
		if !ok {
			continue
		}
		v := screen.Value{Role: role, Label: m.Name, Age: s.Age, Stale: s.Stale, Note: s.Why}
		if math.IsInf(s.Age, 0) {
			v.Age = math.NaN()
		}
		if !math.IsNaN(s.Value) {
			v.Text, v.Unit = screen.Fixed(s.Value, s.Digit, s.Unit)
		}
		switch {
		case s.State != "":
			v.Note = first(v.Note, string(s.State))
		case s.Stuck:
			v.Note = first(v.Note, "stands still")
		}
		out = append(out, v)
	}
	return out
}

package job

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"strings"
	"time"
	"unicode/utf8"

	"gatesill/acquire"
	"gatesill/fit"
	"gatesill/report"
	"gatesill/report/screen"
	"gatesill/store"
	"gatesill/store/record"
)

// offPatience is how long a driven sweep waits for the off state after its end, s.
const offPatience = 8.0

// work leads the whole sitting.
func (w *sweeper) work(ctx context.Context) error {
	for _, t := range acquire.SetUp(w.limits, w.given) {
		w.say("%s", t)
	}
	if err := w.caution(ctx, acquire.StepSetUp); err != nil {
		return err
	}
	meters := &waiting{w: w, since: w.elapsed(), heard: map[string]bool{}, why: map[string]string{}}
	if err := w.lead(ctx, meters); err != nil || meters.err != nil {
		return errors.Join(err, meters.err)
	}
	if err := w.check(ctx); err != nil {
		return err
	}
	if err := w.offerControl(ctx, "first"); err != nil {
		return err
	}
	steps := []acquire.Step{acquire.StepInsert, acquire.StepPower, acquire.StepRemove}
	switch {
	case w.rq.Mode == acquire.AtSpot:
		steps = append(steps, acquire.StepSpot)
	case w.rq.Mode == acquire.Driven:
		steps = append(steps, acquire.StepDrive)
	}
	if w.rq.Mode != acquire.Driven {
		steps = append(steps, acquire.StepHand)
	}
	if err := w.caution(ctx, steps...); err != nil {
		return err
	}
	for i := 0; ; i++ {
		device, more, err := w.nextDevice(ctx, i)
		if err != nil || !more {
			if err == nil {
				err = w.offerControl(ctx, "last")
			}
			if perr := w.place(ctx, ""); err == nil {
				err = perr
			}
			return err
		}
		if err := w.device(ctx, device); err != nil {
			return err
		}
	}
}

// caution shows the cautions of the steps, once a lot and bench.
func (w *sweeper) caution(ctx context.Context, steps ...acquire.Step) error {
	var texts []string
	for _, step := range steps {
		texts = append(texts, acquire.Cautions(step, w.part.Mode, w.part.Channel)...)
	}
	kind := "cautions-" + string(steps[0])
	seen := false
	err := w.db.View(ctx, func(tx *store.Tx) error {
		sessions, err := tx.Sessions(w.lot.ID)
		for _, s := range sessions {
			es, err := tx.Events(s.ID)
			if err != nil {
				return err
			}
			seen = seen || slices.ContainsFunc(es, func(e record.Event) bool { return e.Kind == kind && e.Text == fmt.Sprint(len(texts)) })
		}
		return err
	})
	if err != nil || seen {
		return storeFailure(err)
	}
	if w.keys == nil && w.sim != nil { // nobody is there, and nothing that could hurt
		return nil
	}
	if w.keys == nil {
		for _, t := range texts {
			w.env.talk("caution: %s", t)
		}
		return w.sitting.event(kind, "%d", len(texts))
	}
	for _, page := range pages(texts, w.rq.Size) {
		if err := w.lead(ctx, &cautioning{w: w, texts: page}); err != nil {
			return err
		}
	}
	return w.sitting.event(kind, "%d", len(texts))
}

// pages splits cautions so that each screen shows its own in full: what is below
// the edge would be taken note of without having been read.
func pages(texts []string, size func() (width, height int)) (out [][]string) {
	width, height := 80, 24
	if size != nil {
		if w, h := size(); w > 0 && h > 0 {
			width, height = w, h
		}
	}
	const head, lead = 4, 11 // rows above the cautions; columns in front of one
	room := 0
	for _, t := range texts {
		rows := 1 + utf8.RuneCountInString(t)/max(width-lead-12, 10) // words break early
		if len(out) == 0 || rows > room {
			out, room = append(out, nil), max(height-head, 1)
		}
		out[len(out)-1] = append(out[len(out)-1], t)
		room -= rows
	}
	return out
}

// cautioning shows cautions until the operator has taken note of them.
type cautioning struct {
	w     *sweeper
	texts []string
	ended bool
	quit  bool
}

func (s *cautioning) event(acquire.Event) {}
func (s *cautioning) tick(float64)        {}
func (s *cautioning) key(k rune) {
	s.quit = k == 'q'
	s.ended = s.ended || s.quit || k == ' ' || k == keyEnter
}
func (s *cautioning) over() bool  { return s.ended }
func (s *cautioning) quits() bool { return s.quit }
func (s *cautioning) show(float64) screen.Model {
	m := screen.Model{Title: "  before you begin", Instruction: "read these, then press space (q ends the session)"}
	for _, t := range s.texts {
		m.Notices = append(m.Notices, screen.Notice{Text: t})
	}
	return m
}

// nextDevice is the next device to measure: those named, then what is typed or
// scanned.
func (w *sweeper) nextDevice(ctx context.Context, i int) (device string, more bool, err error) {
	if i < len(w.rq.Devices) {
		return w.rq.Devices[i], true, nil
	}
	if w.keys == nil || len(w.rq.Devices) > 0 && w.sim != nil {
		return "", false, nil
	}
	t := &typing{w: w, title: "  next device", prompt: "serial of the next device (scan or type, Enter; nothing ends the session):",
		allowed: func(name string) error {
			if name == "" {
				return nil
			}
			return record.CheckName("device", name)
		}}
	if err := w.lead(ctx, t); err != nil {
		return "", false, err
	}
	name := strings.TrimSpace(string(t.text))
	return name, name != "" && !t.leave, nil
}

// offerControl says when a control part of the lot should be measured.
func (w *sweeper) offerControl(ctx context.Context, when string) error {
	var names []string
	err := w.db.View(ctx, func(tx *store.Tx) error {
		ds, err := tx.Devices(w.lot.ID)
		for _, d := range ds {
			if d.Role == record.Control && !d.Excluded {
				names = append(names, d.Name)
			}
		}
		return err
	})
	if err != nil || len(names) == 0 || slices.Contains(w.rq.Devices, names[0]) {
		return storeFailure(err)
	}
	if w.keys == nil {
		w.say("control part %s: measure it %s, so that sessions can be compared", strings.Join(names, ", "), when)
		return nil
	}
	take := false
	if err := w.lead(ctx, &asking{w: w, title: "  control part", text: func(float64) string {
		return fmt.Sprintf("measure control part %s %s? y measures it, space goes on without", names[0], when)
	}, other: map[rune]func(){'y': func() { take = true }}}); err != nil || !take {
		return err
	}
	return w.device(ctx, names[0])
}

// place waits until what is in the fixture may be touched, and until the device is
// in it; "" leaves the fixture empty.
func (w *sweeper) place(ctx context.Context, device string) error {
	off := offVoltage(w.part)
	w.hand(off)
	text := "take the device out; then press space"
	if device != "" {
		text = "insert " + device + "; then press space (k skips it, q ends the session)"
	}
	skip, quit := false, false
	s := &asking{w: w, title: "  device " + device, missing: w.lock.Missing, text: func(at float64) string {
		if len(w.lock.Missing(at)) > 0 {
			return "do not touch the device yet: gate to its off voltage, drain supply off"
		}
		return text
	}}
	if device != "" {
		s.other = map[rune]func(){'k': func() { skip = true }, 'q': func() { quit = true }}
	}
	begun := w.elapsed()
	if w.keys == nil { // nobody presses a key, and nobody should wait for ever
		s.until = func() bool {
			return len(w.lock.Missing(w.elapsed())) == 0 || w.elapsed()-begun > 3*speakWithin
		}
	}
	if err := w.lead(ctx, s); err != nil {
		return err
	}
	switch lack := w.lock.Missing(w.elapsed()); {
	case quit:
		return errQuit
	case skip:
		return errSkip
	case w.keys == nil && len(lack) > 0:
		who := "device " + report.Clean(device)
		if device == "" {
			who = "after the last device"
		}
		return &Failure{Code: ExitInstrument, Err: fmt.Errorf("%s: the fixture is not seen to be safe: %s", who, strings.Join(lack, "; ")),
			Hint: "gate to its off voltage and drain supply off by hand, before anything is touched"}
	}
	if w.sim != nil {
		return w.sim.insert(device)
	}
	return nil
}

// errSkip leaves a device out.
var errSkip = errors.New("device skipped")

// device measures one device, again if the operator wants it.
func (w *sweeper) device(ctx context.Context, device string) error {
	switch err := w.place(ctx, device); {
	case errors.Is(err, errSkip):
		return w.sitting.event("skip", "%s", device)
	case err != nil:
		return err
	}
	if w.rq.FindLag && w.lagged == nil {
		if err := w.findLag(ctx, device); err != nil {
			return err
		}
	}
	for {
		again, err := w.measure(ctx, device)
		if err != nil || !again {
			return err
		}
	}
}

// measure makes one sweep.
func (w *sweeper) measure(ctx context.Context, device string) (again bool, err error) {
	plan := w.plan()
	runner, err := acquire.NewRunner(plan)
	if err != nil {
		return false, &Failure{Code: ExitFailed, Err: err}
	}
	direction := record.Up
	if plan.Mode == acquire.AtSpot {
		direction = record.Spot
	}
	if err := w.begin(ctx, device, direction); err != nil {
		return false, err
	}
	if err := w.sitting.event("mode", "%s", plan.Mode); err != nil {
		return false, err
	}
	if plan.DrivesGate { // after the store, which may be waited for: from here on the loop must beat
		if err := w.startDrive(ctx); err != nil {
			_, ferr := w.finish(ctx, nil, false, direction, "the supplies could not be started")
			return false, errors.Join(err, ferr)
		}
		defer w.undrive()
	}
	w.faults.begin(time.Now())
	id := w.sweep.ID
	m := &measuring{w: w, r: runner, device: device, drives: plan.DrivesGate}
	if err := w.lead(ctx, m); err != nil {
		return false, err // the sweep stays open, to be taken up
	}
	points, view := runner.Points(), runner.View(w.elapsed())
	why := ""
	if !m.done.Complete {
		why = m.done.Why
	}
	sw, err := w.finish(ctx, points, view.Returned, direction, why)
	if err != nil {
		return false, err
	}
	d := report.SweptDevice{Device: device, Sweep: id, Points: len(points), Complete: m.done.Complete, Why: m.done.Why}
	for _, p := range points {
		if p.Settled {
			d.Settled++
		}
	}
	d.Result = w.result(device, &sw)
	w.doc.Devices = append(w.doc.Devices, d)
	w.tellResult(d)
	if m.trouble && w.trouble == nil {
		w.trouble = fmt.Errorf("device %s: %s", device, m.done.Why)
	}
	if w.keys == nil {
		return false, nil
	}
	return w.askAgain(ctx, m)
}

// askAgain asks what comes after a sweep: the next device, or this one again.
func (w *sweeper) askAgain(ctx context.Context, m *measuring) (again bool, err error) {
	device, d := m.device, *m.done
	if d.Skipped {
		return false, nil
	}
	quit := false
	keys := map[rune]func(){'r': func() { again = true }, 'q': func() { quit = true }}
	text := "space goes on to the next device, r measures this one again, q ends the session"
	if fix := m.r.View(w.elapsed()).Fix; fix != "" {
		text = "p: " + fix + ", and measures again; " + text
		keys['p'] = func() {
			m.key('p')
			again = true
		}
	}
	if err := w.lead(ctx, &asking{w: w, title: "  device " + device, text: func(float64) string { return d.Why + ": " + text }, other: keys}); err != nil {
		return false, err
	}
	if quit {
		return false, errQuit
	}
	if again {
		w.trouble, w.unfinished = nil, nil
	}
	if n := len(w.doc.Devices); again && n > 0 {
		last := w.doc.Devices[n-1]
		w.doc.Devices = w.doc.Devices[:n-1]
		if err := w.db.Update(ctx, func(tx *store.Tx) error { return tx.ExcludeSweep(last.Sweep, true, "measured again") }); err != nil {
			return false, storeFailure(err)
		}
	}
	return again, nil
}

// result reads the sweep's thresholds, as a first look: the lot is not yet
// considered.
func (w *sweeper) result(device string, sw *record.Sweep) fit.Result {
	if sw.Len() == 0 {
		r := fit.NewResult()
		r.State, r.Why = fit.Declined, "no point was taken"
		return r
	}
	s := w.sheetOf(device, sw)
	r := fit.One(curveOf(sw), setupOf(&s, sw, lastDigitsOf(&s)))
	r.Choose("auto")
	return r
}

// sheetOf is a sheet with that one sweep.
func (w *sweeper) sheetOf(device string, sw *record.Sweep) report.Sheet {
	s := report.Sheet{Lot: w.lot, Part: w.part, Devices: []report.Device{{
		Device: record.Device{Name: device}, Sweeps: []report.Sweep{{Sweep: *sw, Curve: curveOf(sw)}},
	}}}
	currents(&s, w.rq.At, record.Num{})
	return s
}

// tellResult says in a line what came of a device.
func (w *sweeper) tellResult(d report.SweptDevice) {
	var parts []string
	for _, q := range []struct {
		name string
		q    fit.Quantity
	}{{"V_GS(th)", d.Result.Vgsth}, {"V_GS idle", d.Result.VgsIdle}} {
		if q.q.Ok() {
			parts = append(parts, q.name+" "+report.FormatQuantity(q.q, "V"))
		}
	}
	if len(parts) == 0 && !d.Complete {
		w.say("%s: set aside after %s: %s", d.Device, count(d.Points, "point"), d.Why)
		return
	}
	if len(parts) == 0 {
		parts = append(parts, first(d.Result.Why, string(d.Result.State)))
	}
	w.say("%s: %s (%s, %s)", d.Device, strings.Join(parts, ", "), count(d.Points, "point"), d.Why)
	for _, warning := range d.Result.Warnings {
		if warning.Code == fit.CodeHeating || warning.Code == fit.CodeGateHistory || warning.Code == fit.CodeCurrentMismatch {
			w.say("%s: %s", d.Device, warning.Text)
		}
	}
}

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
	if err := w.lead(ctx, &cautioning{w: w, texts: texts}); err != nil {
		return err
	}
	return w.sitting.event(kind, "%d", len(texts))
}

// cautioning shows cautions until the operator has taken note of them.
type cautioning struct {
	w     *sweeper
	texts []string
	ended bool
}

func (s *cautioning) event(acquire.Event) {}
func (s *cautioning) tick(float64)        {}
func (s *cautioning) key(k rune)          { s.ended = s.ended || k == ' ' || k == keyEnter }
func (s *cautioning) over() bool          { return s.ended }
func (s *cautioning) show(float64) screen.Model {
	m := screen.Model{Title: "  before you begin", Instruction: "read these, then press space"}
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
		return &Failure{Code: ExitInstrument, Err: fmt.Errorf("device %s: the fixture is not seen to be safe: %s", report.Clean(device), strings.Join(lack, "; "))}
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
	if plan.DrivesGate {
		if err := w.startDrive(ctx); err != nil {
			return false, err
		}
		defer w.undrive()
	}
	direction := record.Up
	if plan.Mode == acquire.AtSpot {
		direction = record.Spot
	}
	if err := w.begin(ctx, device, direction); err != nil {
		return false, err
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
	returned := view.Returned
	if m.repeat {
		why = "measured again"
	}
	sw, err := w.finish(ctx, points, returned, direction, why)
	if err != nil {
		return false, err
	}
	d := report.SweptDevice{Device: device, Sweep: id, Points: len(points), Complete: m.done.Complete, Why: m.done.Why}
	for _, p := range points {
		if p.Settled {
			d.Settled++
		}
	}
	d.Result = w.result(ctx, device, &sw)
	w.doc.Devices = append(w.doc.Devices, d)
	w.tellResult(d)
	if m.trouble && w.trouble == nil {
		w.trouble = fmt.Errorf("device %s: %s", device, m.done.Why)
	}
	if w.keys == nil {
		return false, nil
	}
	return w.askAgain(ctx, device, *m.done)
}

// askAgain asks what comes after a sweep: the next device, or this one again.
func (w *sweeper) askAgain(ctx context.Context, device string, d acquire.Done) (again bool, err error) {
	if d.Skipped {
		return false, nil
	}
	quit := false
	if err := w.lead(ctx, &asking{w: w, title: "  device " + device, text: func(float64) string {
		return d.Why + ": space goes on to the next device, r measures this one again, q ends the session"
	}, other: map[rune]func(){'r': func() { again = true }, 'q': func() { quit = true }}}); err != nil {
		return false, err
	}
	if quit {
		return false, errQuit
	}
	if again && len(w.doc.Devices) > 0 {
		w.doc.Devices = w.doc.Devices[:len(w.doc.Devices)-1]
	}
	return again, nil
}

// measuring leads one runner.
type measuring struct {
	w       *sweeper
	r       *acquire.Runner
	device  string
	drives  bool
	done    *acquire.Done
	doneAt  float64
	offs    int  // off states still waited for
	safe    bool // the off state was told
	repeat  bool
	trouble bool
	reason  *typing // a reason that is being typed
}

func (m *measuring) event(e acquire.Event) { m.obey(m.r.Event(e)) }
func (m *measuring) tick(at float64) {
	m.obey(m.r.Tick(at))
	if m.w.sim != nil && !m.drives {
		h := m.r.Hand()
		m.w.handAt(h.To, h.Rate)
	}
}

func (m *measuring) over() bool {
	if m.done == nil {
		return false
	}
	return !m.drives || m.offs == 0 && m.safe || m.w.elapsed()-m.doneAt > offPatience
}

func (m *measuring) switchedOff(keeper.OffReport) {
	m.safe, m.offs = true, max(0, m.offs-1)
}

// obey carries the runner's orders out.
func (m *measuring) obey(orders []acquire.Order) {
	w := m.w
	for _, o := range orders {
		switch o := o.(type) {
		case acquire.SetGate:
			if w.drive != nil {
				w.drive.gate(o.V)
			}
		case acquire.SwitchDrain:
			if w.drive != nil {
				w.drive.drain(o.On)
			}
			w.lock.DrainOff(false, w.elapsed())
		case acquire.Off:
			if w.drive != nil {
				m.offs++
				w.drive.off(o.Reason, o.CurrentGone)
			} else {
				m.safe = true // the keeper has switched off by itself
			}
		case acquire.Say:
			if w.keys != nil || !strings.HasPrefix(o.Text, "turn to ") {
				w.say("%s: %s", m.device, o.Text)
			}
		case acquire.Beep:
			w.beep(o.Sound)
		case acquire.Taken:
			w.env.detail("  %s: %s", m.device, pointText(o.Point))
		case acquire.Undone:
			w.say("%s: %s taken back", m.device, count(o.N, "point"))
		case acquire.Rescaled:
			w.scale[o.Role] = o.Factor
			w.lock.SetScale(o.Role, o.Factor)
			_ = w.sitting.event(eventScale, "%s", scaleText(o.Role, o.Factor))
		case acquire.Noted:
			m.trouble = m.trouble || slices.Contains([]string{"lost", "silent", "frames", "gate", "drain", "stuck"}, o.Kind)
			_ = w.sitting.event(o.Kind, "%s", o.Text)
		case acquire.Done:
			m.done, m.doneAt = &o, w.elapsed()
			if o.Complete {
				m.trouble = false
			}
		}
	}
}

func pointText(p acquire.Point) string {
	kind := "interpolated"
	if p.Settled {
		kind = "settled"
	}
	text := "point at " + report.FormatPlain(p.Vg, math.NaN(), "V")
	if !math.IsNaN(p.Id) {
		text += ", " + report.FormatPlain(p.Id, math.NaN(), "A")
	}
	if !math.IsNaN(p.Vl) {
		text += ", V_L " + report.FormatPlain(p.Vl, math.NaN(), "V")
	}
	return text + ", " + kind
}

// key does what a key asks for.
func (m *measuring) key(k rune) {
	at := m.w.elapsed()
	if m.reason != nil {
		m.reason.key(k)
		if m.reason.over() {
			if text := strings.TrimSpace(string(m.reason.text)); !m.reason.leave && text != "" {
				m.obey(m.r.Key(acquire.Key{Name: acquire.KeySkip, Reason: text}, at))
			}
			m.reason = nil
		}
		return
	}
	names := map[rune]acquire.KeyName{
		' ': acquire.KeyAccept, keyEnter: acquire.KeyAccept, 'f': acquire.KeyFinish, 's': acquire.KeyStop, 'q': acquire.KeyStop,
		'r': acquire.KeyRepeat, 'u': acquire.KeyUndo, 'p': acquire.KeyFix, keyEscape: acquire.KeyStop,
	}
	if k == 'k' {
		m.reason = &typing{w: m.w, prompt: "why is " + m.device + " skipped (Enter; Escape goes back):", allowed: func(string) error { return nil }}
		return
	}
	if name, ok := names[k]; ok {
		m.obey(m.r.Key(acquire.Key{Name: name}, at))
	}
}

// result reads the sweep's thresholds, as a first look: the lot is not yet
// considered.
func (w *sweeper) result(ctx context.Context, device string, sw *record.Sweep) fit.Result {
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
	currents(&s, w.rq.At)
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

func (m *measuring) show(at float64) screen.Model {
	v := m.r.View(at)
	s := screen.Model{
		Title: "  device " + m.device, Status: count(len(v.Points), "point"), Instruction: v.Instruction, Values: m.w.values(v.Latest),
		Power: screen.Power{Watts: v.PD, Limit: m.w.limits.PD},
	}
	if !math.IsNaN(v.Waiting) {
		s.Waiting, s.Wait = v.Waiting, m.w.rq.Settle.Or(0)
	}
	if m.reason != nil {
		s.Instruction = m.reason.show(at).Instruction
	}
	for _, t := range v.Warnings {
		s.Notices = append(s.Notices, screen.Notice{Stop: v.Level == acquire.Over, Text: t})
	}
	if v.Fix != "" {
		s.Notices = append(s.Notices, screen.Notice{Text: "p: " + v.Fix})
	}
	if v.Paused != "" {
		s.Notices = append(s.Notices, screen.Notice{Stop: true, Text: v.Paused})
	}
	for _, p := range v.Points {
		i := p.Id
		if math.IsNaN(i) {
			i = p.Vl / m.w.given.RL.Float()
		}
		if !math.IsNaN(i) {
			s.Plot.Points = append(s.Plot.Points, screen.XY{X: p.Vg, Y: i, Open: !p.Settled})
		}
	}
	return s
}

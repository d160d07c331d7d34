package keeper

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"time"
)

// Limits of the way off. The gate waits for the drain supply's answer only so long:
// the gate's off voltage can do no harm, a gate left where it is can.
const (
	drainFirst  = 150 * time.Millisecond
	commandTime = 400 * time.Millisecond // of a command, growing with each try; then its connection is given up
	proofTime   = 6 * time.Second        // of reading back
)

// goal is one outlet on its way off.
type goal struct {
	o       *outlet
	written bool // the command of this try went out
	reached bool
	v       float64 // voltage read back, NaN: not read
	last    error   // what kept the last try from its goal
}

// trip is one way to the off state. It is not broken off by anything.
type trip struct {
	k      *keeper
	cause  cause
	errs   []string
	taken  time.Time // when the last command was taken
	drain  *goal     // nil: cannot be switched
	gate   *goal
	opened bool
}

// goOff brings the device to its off state: drain supply off, gate at the off voltage
// at low impedance, both read back, and the gate's output opened only when no drain
// current flows any more or a resistor holds the gate.
func (k *keeper) goOff(c cause) OffReport {
	k.log.note("to the off state: %s", c.reason)
	t := &trip{k: k, cause: c, taken: c.at, gate: &goal{o: k.gate, v: math.NaN()}}
	if k.drain != nil {
		t.drain = &goal{o: k.drain, v: math.NaN()}
	}
	// Each try goes over a new connection if need be.
	for try, pause := range k.lim.pauses {
		time.Sleep(pause)
		t.command(try)
		t.prove(try)
		if t.gate.reached && (t.drain == nil || t.drain.reached) {
			break
		}
	}
	if t.mayOpen() {
		t.open()
	}
	r := OffReport{
		Reason: c.reason, Took: t.taken.Sub(c.at), Drain: drainFixed, Gate: t.gate.v,
		GateHeld: t.gate.reached && !t.opened, Errors: t.errs,
		Reached: (t.gate.reached || t.opened) && (t.drain == nil || t.drain.reached),
	}
	if t.drain != nil {
		r.Drain = t.drainWords()
		k.drainOn = !t.drain.reached
	}
	k.read, k.set = t.gate.v, k.cfg.OffVoltage
	k.log.note("off state: %+v", r)
	return r
}

func (t *trip) drainWords() string {
	d := t.drain
	switch {
	case d.reached && d.last != nil: // reached in another way
		return d.last.Error()
	case d.reached:
		return drainOff
	case d.last != nil:
		return "not proved to be off: " + d.last.Error()
	}
	return "not proved to be off"
}

func (t *trip) fault(o *outlet, err error) {
	if s := err.Error(); !slices.Contains(t.errs, s) {
		t.errs = append(t.errs, s)
		t.k.log.note("%s: %v", o, err)
	}
}

// command sends the orders themselves: the drain supply's first, the gate's as soon as
// that was taken or has had its time.
func (t *trip) command(try int) {
	var drain, gate <-chan result
	var drainDone bool
	start := time.Now()
	if d := t.drain; d != nil && !d.reached && d.o.known {
		drain = d.o.line.begin(nil, func(k *talk) (float64, error) { return d.o.commandOff(k, try) })
		select {
		case r := <-drain:
			t.noted(d, r)
			drainDone = true
		case <-time.After(drainFirst):
		}
	}
	if g := t.gate; !g.reached && g.o.known {
		gate = g.o.line.begin(nil, func(k *talk) (float64, error) { return g.o.commandGate(k, t.k.cfg.OffVoltage) })
	}
	limit := commandTime * time.Duration(1+2*try) // a new connection takes its time
	left := func() time.Duration { return max(limit-time.Since(start), time.Millisecond) }
	if drain != nil && !drainDone && (gate == nil || t.drain.o.line != t.gate.o.line) {
		// Two lines: neither waits for the other longer than its own limit.
		defer func() { t.await(t.drain, drain, left()) }()
	} else if drain != nil && !drainDone {
		t.await(t.drain, drain, left())
	}
	if gate != nil {
		t.await(t.gate, gate, limit)
	}
}

func (t *trip) await(g *goal, done <-chan result, limit time.Duration) {
	timer := time.NewTimer(limit)
	defer timer.Stop()
	select {
	case r := <-done:
		t.noted(g, r)
	case <-timer.C:
		g.o.line.giveUp()
		t.noted(g, result{math.NaN(), fmt.Errorf("%w: %s: hung for %v; connection given up", ErrLine, g.o, limit.Round(time.Millisecond))})
	}
}

func (t *trip) noted(g *goal, r result) {
	g.written = !errors.Is(r.err, ErrLine) || errors.Is(r.err, errNoReply)
	if g.last = r.err; r.err != nil {
		t.fault(g.o, r.err)
		return
	}
	t.taken = time.Now()
}

// press says a command on the way off, after dropping what waits to be sent. Where a
// conversation was broken off the next answer may be an old one; then none is waited
// for, and reading back has to tell.
func (o *outlet) press(t *talk, name string, v ...float64) error {
	if !o.line.hasLeftover() {
		return o.say(t, name, drainFirst, v...)
	}
	if err := t.conn.DiscardOutput(); err != nil {
		return fmt.Errorf("%w: %w", ErrLine, err)
	}
	text := o.cmd[name]
	if len(v) > 0 {
		text = fill(text, v[0])
	}
	text, err := o.chosen(t, text)
	if err != nil {
		return err
	}
	return t.send(text)
}

// commandOff switches the drain supply off. From the second try on its voltage is
// taken away as well, for a supply that refuses to switch.
func (o *outlet) commandOff(t *talk, try int) (float64, error) {
	err := o.press(t, "off")
	if try > 0 {
		err = errors.Join(err, o.press(t, "set", 0))
	}
	return 0, err
}

func (o *outlet) commandGate(t *talk, v float64) (float64, error) {
	setting, err := o.setting(v)
	if err != nil {
		return 0, err
	}
	return 0, o.press(t, "set", setting)
}

// prove reads both supplies back. Where the command did not even go out there is
// nothing to prove, and the next try comes the sooner.
func (t *trip) prove(try int) {
	var drain, gate <-chan result
	if d := t.drain; d != nil && !d.reached {
		if !d.o.known {
			d.last = fmt.Errorf("%s was never spoken to", d.o)
		} else if d.written {
			drain = d.o.line.begin(nil, func(k *talk) (float64, error) { return d.o.proveDrain(k, try) })
		}
	}
	if g := t.gate; !g.reached && g.o.known && g.written {
		gate = g.o.line.begin(nil, func(k *talk) (float64, error) { return g.o.proveGate(k, t.k.cfg.OffVoltage) })
	}
	limit := time.After(proofTime)
	if drain != nil {
		t.proved(t.drain, drain, limit)
	}
	if gate != nil {
		t.proved(t.gate, gate, limit)
	}
}

func (t *trip) proved(g *goal, done <-chan result, limit <-chan time.Time) {
	var r result
	select {
	case r = <-done:
	case <-limit:
		g.o.line.giveUp()
		r = result{math.NaN(), fmt.Errorf("%w: %s: reading back hung; connection given up", ErrLine, g.o)}
	}
	if !math.IsNaN(r.v) {
		g.v = r.v
	}
	g.last = r.err
	var odd *otherwise
	g.reached = r.err == nil || errors.As(r.err, &odd)
	if r.err != nil {
		t.fault(g.o, r.err)
	}
}

// otherwise is a drain supply that gives no voltage, though it did not switch off.
type otherwise struct{ text string }

func (e *otherwise) Error() string { return e.text }

// proveDrain asks whether the output is off, and where that cannot be asked or is
// denied a second time, whether its voltage has gone.
func (o *outlet) proveDrain(t *talk, try int) (float64, error) {
	if err := t.clearLeftover(o.cmd["identify"], o.lim.reply); err != nil {
		return math.NaN(), err
	}
	refused := o.faults(t, o.lim.reply)
	if refused != nil && !errors.Is(refused, ErrRefused) {
		return math.NaN(), refused
	}
	off, can, err := o.isOff(t, o.lim.reply)
	if err != nil {
		return math.NaN(), err
	}
	if can && off {
		v, err := o.read(t, o.lim.reply) // its capacitors may still hold some
		if err != nil {
			v = math.NaN()
		}
		return v, nil
	}
	if can && try == 0 { // the command may have been lost: no waiting
		return math.NaN(), errors.Join(fmt.Errorf("%w: %s: its output is still on after %q", ErrReadBack, o, o.cmd["off"]), refused)
	}
	var v float64
	for end := time.Now().Add(o.lim.settle / 2); ; time.Sleep(20 * time.Millisecond) {
		v, err = o.read(t, o.lim.reply)
		if err != nil && !errors.Is(err, ErrReadBack) {
			return v, err
		}
		if math.Abs(v) <= goneVolts && !can {
			return v, nil
		}
		if math.Abs(v) <= goneVolts {
			return v, &otherwise{fmt.Sprintf("%s: refused to switch off and gives %.3g V", o, v)}
		}
		if !time.Now().Before(end) {
			break
		}
	}
	if err == nil {
		err = fmt.Errorf("%w: %s: still %.4g V", ErrReadBack, o, v)
	}
	return v, errors.Join(err, refused)
}

// proveGate reads until the gate is at its off voltage.
func (o *outlet) proveGate(t *talk, v float64) (float64, error) {
	if err := t.clearLeftover(o.cmd["identify"], o.lim.reply); err != nil {
		return math.NaN(), err
	}
	refused := o.faults(t, o.lim.reply)
	if refused != nil && !errors.Is(refused, ErrRefused) {
		return math.NaN(), refused
	}
	if o.cmd["set_query"] != "" { // says at once what the voltage may say late
		setting, _ := o.setting(v)
		if err := o.compare(t, "set_query", "V", setting, 0.02, 0.01); err != nil {
			got, _ := o.read(t, o.lim.reply)
			return got, errors.Join(err, refused)
		}
	}
	got, err := o.settle(t, v, o.lim.settle/2)
	if err == nil {
		return got, nil
	}
	return got, errors.Join(err, refused)
}

// mayOpen tells whether the gate's output may be opened. It then goes to 0 V, where a
// depletion part conducts: a drain supply that can be switched has to be off. Only the
// gate of another part that could not be brought to its off voltage is opened anyway.
func (t *trip) mayOpen() bool {
	if !t.cause.gone && !t.k.cfg.Bleed || !t.gate.o.known {
		return false
	}
	return t.drain == nil || t.drain.reached || !t.k.cfg.Depletion && !t.gate.reached
}

func (t *trip) open() {
	o := t.gate.o
	v, err := o.line.do(proofTime, nil, func(k *talk) (float64, error) {
		if err := o.say(k, "off", o.lim.reply); err != nil {
			return 0, err
		}
		if err := o.faults(k, o.lim.reply); err != nil {
			return 0, err
		}
		off, can, err := o.isOff(k, o.lim.reply)
		if err == nil && can && !off {
			err = fmt.Errorf("%w: %s: its output is still on after %q", ErrReadBack, o, o.cmd["off"])
		}
		if err != nil {
			return 0, err
		}
		v, err := o.read(k, o.lim.reply)
		if err != nil {
			v = math.NaN() // it is open nevertheless
		}
		return v, nil
	})
	if err != nil {
		t.fault(o, err)
		return
	}
	t.opened, t.taken = true, time.Now()
	if !t.gate.reached { // else what it had when it was still driven says more
		t.gate.v = v
	}
}

// offAgain is an order to go off in the off state: what was not reached is tried once
// more, and a gate that was held is opened when it may be now.
func (k *keeper) offAgain(o order) {
	if k.off.Reached && (!k.off.GateHeld || !o.Gone) {
		return
	}
	r := k.goOff(cause{reason: k.off.Reason, at: time.Now(), order: o.ID, gone: o.Gone})
	r.Errors = append(slices.Clone(k.off.Errors), r.Errors...)
	k.off = &r
}

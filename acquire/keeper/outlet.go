package keeper

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"
)

// How long an instrument may take, and how far what it reads back may be off.
const (
	errorReads = 20   // some instruments report a fault again and again
	readFloor  = 0.05 // V: resolution and offset of a supply's own voltmeter
	readShare  = 0.02 // of the voltage
	goneVolts  = 0.5  // V: a drain supply below this is taken for off
)

// limits are the times that an instrument is given.
type limits struct {
	reply  time.Duration   // a measuring supply needs some tenths of a second
	settle time.Duration   // an output capacitor has to charge or to be drained
	poll   time.Duration   // an idle supply is asked so often: it may have gone
	pauses []time.Duration // before each try to reach the off state
}

var usual = limits{
	reply: 1500 * time.Millisecond, settle: time.Second, poll: 500 * time.Millisecond,
	pauses: []time.Duration{0, 20 * time.Millisecond, 500 * time.Millisecond, 2 * time.Second},
}

func near(got, want float64) bool {
	return math.Abs(got-want) <= readFloor+readShare*math.Abs(want)
}

// outlet is one output of a supply: what can be said to it.
type outlet struct {
	Supply
	cmd   commands
	line  *line
	lim   limits
	known bool // it is what it should be; nothing else is ever sent anything but the question who it is
}

func (o *outlet) String() string { return o.Drives + " supply " + o.Name }

// say sends a command to this output; with a value where its template takes one. A
// command that is not available is no error. Completion is asked for where it can be.
func (o *outlet) say(t *talk, name string, limit time.Duration, v ...float64) error {
	text := o.cmd[name]
	if text == "" {
		return nil
	}
	if len(v) > 0 {
		text = fill(text, v[0])
	}
	text, err := o.chosen(t, text)
	if err != nil {
		return err
	}
	done := o.cmd["complete"]
	if done == "" {
		return t.send(text)
	}
	if o.cmd.own() {
		if err := t.send(text); err != nil {
			return err
		}
		text = done
	} else {
		text += ";" + done
	}
	reply, err := t.ask(text, limit)
	if err != nil {
		return fmt.Errorf("%s: %w", o, err)
	}
	if done == standard["complete"] && strings.TrimLeft(reply, "+") != "1" {
		t.line.setLeftover(true)
		return fmt.Errorf("%w: %s: %q was answered with %q, not with 1", ErrReadBack, o, text, reply)
	}
	return nil
}

func (o *outlet) query(t *talk, name string, limit time.Duration) (string, error) {
	text, err := o.chosen(t, o.cmd[name])
	if err != nil {
		return "", err
	}
	reply, err := t.ask(text, limit)
	if err != nil {
		return "", fmt.Errorf("%s: %w", o, err)
	}
	return reply, nil
}

func (o *outlet) number(t *talk, name string, limit time.Duration) (float64, error) {
	reply, err := o.query(t, name, limit)
	if err != nil {
		return math.NaN(), err
	}
	v, err := parseNumber(reply)
	if err != nil {
		return v, fmt.Errorf("%s: %q: %w", o, o.cmd[name], err)
	}
	return v, nil
}

// chosen puts the choice of the output before a command, in the same message where
// the language allows it, so that no command can reach another output because the
// choice was lost on the way.
func (o *outlet) chosen(t *talk, text string) (string, error) {
	choose := o.cmd["select"]
	if o.Output == 0 || choose == "" || strings.HasPrefix(text, "*") || text == o.cmd["errors"] {
		return text, nil
	}
	choose = fill(choose, float64(o.Output))
	if o.cmd.own() {
		return text, t.send(choose)
	}
	return choose + ";:" + text, nil
}

// faults empties the error queue.
func (o *outlet) faults(t *talk, limit time.Duration) error {
	if o.cmd["errors"] == "" {
		return nil
	}
	var found []string
	for range errorReads {
		reply, err := o.query(t, "errors", limit)
		if err != nil {
			return err
		}
		code, _, _ := strings.Cut(reply, ",")
		n, err := strconv.Atoi(strings.TrimSpace(code))
		if err != nil {
			return fmt.Errorf("%w: %s: %q is no entry of an error queue", ErrReadBack, o, reply)
		}
		if n == 0 {
			break
		}
		found = append(found, reply)
	}
	if len(found) > 0 {
		return fmt.Errorf("%w: %s: %s", ErrRefused, o, strings.Join(found, "; "))
	}
	return nil
}

// order says a command and proves that it was taken. Some instruments drop what stands
// behind a command that they refuse, and with it the question whether it is done: the
// error queue then says more than the silence.
func (o *outlet) order(t *talk, name string, v ...float64) error {
	err := o.say(t, name, o.lim.reply, v...)
	if err == nil {
		return o.faults(t, o.lim.reply)
	}
	if errors.Is(err, errNoReply) && o.cmd["errors"] != "" && t.clearLeftover(o.cmd["identify"], o.lim.reply) == nil {
		if refused := o.faults(t, o.lim.reply); errors.Is(refused, ErrRefused) {
			return refused
		}
	}
	return err
}

// read is the voltage at the output, with the device's sign.
func (o *outlet) read(t *talk, limit time.Duration) (float64, error) {
	v, err := o.number(t, "read", limit)
	return o.voltage(v), err
}

// settle reads until the output is where it should be. With patience at its end it
// gives what it read last.
func (o *outlet) settle(t *talk, want float64, patience time.Duration) (float64, error) {
	for end := time.Now().Add(patience); ; time.Sleep(10 * time.Millisecond) {
		v, err := o.read(t, o.lim.reply)
		if err != nil && !errors.Is(err, ErrReadBack) {
			return v, err
		}
		if near(v, want) {
			return v, nil
		}
		if t.stopped() {
			return v, errStopped
		}
		if !time.Now().Before(end) {
			if err == nil {
				err = fmt.Errorf("%w: %s: %.4g V, not %.4g V", ErrReadBack, o, v, want)
			}
			return v, err
		}
	}
}

// isOff asks whether the output is off; known tells whether it can be asked.
func (o *outlet) isOff(t *talk, limit time.Duration) (off, known bool, err error) {
	if o.cmd["on_query"] == "" {
		return false, false, nil
	}
	reply, err := o.query(t, "on_query", limit)
	return err == nil && o.cmd.isOff(reply), true, err
}

// identify makes sure that something answers that is a supply to be spoken to.
func (o *outlet) identify(t *talk) (float64, error) {
	if o.cmd["identify"] != "" {
		// What a user before us left in the line's buffers ends here.
		o.line.setLeftover(true)
		reply, err := o.query(t, "identify", o.lim.reply)
		if err != nil {
			reply, err = o.query(t, "identify", o.lim.reply)
		}
		if err != nil {
			return 0, err
		}
		o.line.mu.Lock()
		o.line.identity = reply
		o.line.mu.Unlock()
		o.line.setLeftover(false)
	}
	o.known = true
	return 0, nil
}

// shut clears old faults and switches the output off, whatever state the last user
// left it in.
func (o *outlet) shut(t *talk) (float64, error) {
	if err := o.say(t, "clear", o.lim.reply); err != nil {
		return 0, err
	}
	if err := o.order(t, "off"); err != nil {
		return 0, err
	}
	off, can, err := o.isOff(t, o.lim.reply)
	if err != nil {
		return 0, err
	}
	if can && !off {
		return 0, fmt.Errorf("%w: %s: its output is still on after %q", ErrReadBack, o, o.cmd["off"])
	}
	return 0, nil
}

// prepare gives an output that is off its set-points and compares what it has then.
func (o *outlet) prepare(t *talk, v float64) (float64, error) {
	setting, err := o.setting(v)
	if err != nil {
		return 0, fmt.Errorf("%w: %s: %w", ErrConfig, o, err)
	}
	if err := o.order(t, "set", setting); err != nil {
		return 0, err
	}
	if err := o.compare(t, "set_query", "V", setting, 0.02, 0.01); err != nil { // resolution of plain supplies: 10 mV
		return 0, err
	}
	if o.Limit > 0 {
		if err := o.order(t, "limit", o.Limit); err != nil {
			return 0, err
		}
		if err := o.compare(t, "limit_query", "A", o.Limit, 0.001, 0.05); err != nil { // resolution of plain supplies: 1 mA
			return 0, err
		}
	}
	if o.cmd["watchdog"] != "" {
		return 0, o.order(t, "watchdog")
	}
	return 0, nil
}

func (o *outlet) compare(t *talk, query, unit string, want, floor, share float64) error {
	if o.cmd[query] == "" {
		return nil
	}
	got, err := o.number(t, query, o.lim.reply)
	if err != nil {
		return err
	}
	if !(math.Abs(got-want) <= floor+share*math.Abs(want)) {
		return fmt.Errorf("%w: %s: set to %g %s, it says %g %s", ErrReadBack, o, want, unit, got, unit)
	}
	return nil
}

// raise switches the prepared output on and reads what comes out.
func (o *outlet) raise(t *talk, v float64) (float64, error) {
	if err := o.order(t, "on"); err != nil {
		return math.NaN(), err
	}
	off, can, err := o.isOff(t, o.lim.reply)
	if err != nil {
		return math.NaN(), err
	}
	if can && off {
		return math.NaN(), fmt.Errorf("%w: %s: its output is still off after %q", ErrReadBack, o, o.cmd["on"])
	}
	return o.settle(t, v, o.lim.settle)
}

// move sets an output that is on.
func (o *outlet) move(t *talk, v float64) (float64, error) {
	setting, err := o.setting(v)
	if err != nil {
		return math.NaN(), fmt.Errorf("%w: %s: %w", ErrTooHigh, o, err)
	}
	if err := o.order(t, "set", setting); err != nil {
		return math.NaN(), err
	}
	return o.settle(t, v, o.lim.settle)
}

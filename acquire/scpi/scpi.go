// Package scpi holds a conversation with an SCPI instrument over an open line: one
// query at a time, completion asked for, the error queue read. It covers the
// subset of IEEE 488.2 and SCPI-1999 that reading a meter and driving a supply
// need, and the letter dialects of supplies by templates of their commands.
//
// It opens no line and decides nothing: what a refused command means for the
// device on the bench is for its caller.
package scpi

import (
	"errors"
	"fmt"
	"strings"
	"time"

	"gatesill/acquire/port"
)

// The errors of a conversation; errors of the line come as they are.
var (
	ErrSilent  = errors.New("instrument does not answer")
	ErrReply   = errors.New("reply cannot be understood")
	ErrCommand = errors.New("not one command") // nothing was sent
	ErrEndless = errors.New("error queue does not empty")
)

// Options of a conversation. The zero value is SCPI.
type Options struct {
	// Plain is for letter dialects: no *OPC?, no error queue, no *CLS. A reply may
	// then end by silence, and nothing proves that a command was taken.
	Plain bool
	// Timeout is how long one reply may take when the caller does not say it; 0: by
	// [Patience] for a reading of no length.
	Timeout time.Duration
	// Gap is the least time from one message to the next.
	Gap time.Duration
	// Trace is told of every message and every line of a reply; nil: no one.
	Trace func(sent bool, text string, at time.Time)
}

// Patience is how long a reply of so many bytes may take when the instrument
// integrates for so long: twice the integration and 50 ms for understanding the
// query, and the bytes' time on the wire; never under 1 s.
func Patience(integration time.Duration, bytes int, byteTime time.Duration) time.Duration {
	return max(time.Second, 2*(integration+50*time.Millisecond)+time.Duration(bytes)*byteTime)
}

const (
	usualReply = 80                    // bytes that are allowed for where the caller does not say how long a reply may take
	errorCap   = 40                    // replies of an error queue; known queues are 10 to 30 deep
	plainQuiet = 5                     // byte times of silence that end a reply in a plain dialect, and
	leastQuiet = 60 * time.Millisecond // no less, because USB adapters deliver in lumps
)

// Talk is a conversation, for the goroutine that owns the line.
type Talk struct {
	c        port.Conn
	o        Options
	in       splitter
	last     string // message sent before this one
	lastSent time.Time
	echoes   bool // the instrument was heard to repeat what it is sent
	crOnly   bool // its lines end with CR and no LF
	unsure   bool // a reply is outstanding that may come yet
	settled  bool // the error queue was emptied of what was there before
	standing map[int]bool
	identity string
}

// New begins a conversation. Nothing is sent.
func New(c port.Conn, o Options) *Talk { return &Talk{c: c, o: o} }

// Query sends one query and gives its reply, without its end. 0 as time-out is that
// of the options. When no reply comes, or one that was garbled on the way, input is
// discarded for twice the time-out, the instrument is brought back into step by *CLS
// and *IDN?, and the query is sent once more: so a query must be one that may be
// sent twice.
func (t *Talk) Query(cmd string, timeout time.Duration) (string, error) {
	if err := oneCommand(cmd); err != nil {
		return "", err
	}
	timeout = t.timeout(cmd, timeout)
	if t.unsure {
		if err := t.resync(timeout, true); err != nil {
			return "", err
		}
	}
	reply, err := t.ask(cmd, timeout)
	if !retriable(err) {
		return reply, err
	}
	if err := t.resync(timeout, true); err != nil {
		return "", err
	}
	return t.ask(cmd, timeout)
}

// Send sends a command and waits for nothing: for the one that may not be kept
// waiting. Whether it was taken shows by [Talk.Errors], or by reading back what it
// set.
func (t *Talk) Send(cmd string) error {
	if err := oneCommand(cmd); err != nil {
		return err
	}
	return t.send(cmd)
}

func oneCommand(cmd string) error {
	if strings.TrimSpace(cmd) == "" || strings.ContainsAny(cmd, "\r\n") {
		return fmt.Errorf("%w: %q", ErrCommand, cmd)
	}
	return nil
}

func retriable(err error) bool { return errors.Is(err, ErrSilent) || errors.Is(err, ErrReply) }

func (t *Talk) timeout(cmd string, asked time.Duration) time.Duration {
	if asked <= 0 {
		asked = t.o.Timeout
	}
	if asked <= 0 {
		asked = Patience(0, len(cmd)+usualReply, t.c.ByteTime())
	}
	return asked
}

// ask sends a query and takes its reply, without a second try.
func (t *Talk) ask(cmd string, timeout time.Duration) (string, error) {
	if err := port.Expect(t.c, timeout); err != nil {
		return "", err
	}
	// What came in before the query is no reply to it.
	t.in.clear()
	if err := t.c.Discard(); err != nil {
		return "", err
	}
	before := t.last
	if err := t.send(cmd); err != nil {
		return "", err
	}
	t.unsure = true
	deadline := time.Now().Add(timeout)
	for repeated := false; ; {
		reply, err := t.line(deadline)
		switch {
		case err != nil && errors.Is(err, ErrSilent):
			return "", fmt.Errorf("%s: %w: nothing within %v after %q", t.c.Address(), ErrSilent, timeout, cmd)
		case err != nil:
			return "", err
		case !repeated && reply == strings.TrimSpace(cmd):
			repeated, t.echoes = true, true
			continue
		case !repeated && before != "" && reply == strings.TrimSpace(before):
			continue // the late echo of a message that has no reply
		}
		t.unsure = false
		if i := strings.IndexFunc(reply, notPrintable); i >= 0 {
			t.unsure = true
			return "", fmt.Errorf("%s: %w: %q after %q", t.c.Address(), ErrReply, reply, cmd)
		}
		return reply, nil
	}
}

func notPrintable(r rune) bool { return r != '\t' && (r < ' ' || r > '~') }

// send writes one message. What stands behind it in the line's output is not waited
// for.
func (t *Talk) send(cmd string) error {
	if wait := t.o.Gap - time.Since(t.lastSent); t.o.Gap > 0 && wait > 0 {
		time.Sleep(wait)
	}
	_, err := t.c.Write([]byte(cmd + "\n"))
	t.lastSent, t.last = time.Now(), cmd
	t.trace(true, cmd)
	return err
}

func (t *Talk) trace(sent bool, text string) {
	if t.o.Trace != nil {
		t.o.Trace(sent, text, time.Now())
	}
}

// line gives the next line that is not empty; [ErrSilent] when none comes in time.
// With a line that ended with CR it waits for the LF behind it, since the next
// message must not be sent into a reply, until it knows that none is sent.
func (t *Talk) line(deadline time.Time) (string, error) {
	buf := make([]byte, 4096)
	last := time.Now() // when something came in
	for {
		if text, ok, err := t.in.next(); err != nil {
			return "", fmt.Errorf("%s: %w", t.c.Address(), err)
		} else if ok && (!t.in.endsOpen() || t.crOnly) {
			t.trace(false, text)
			return text, nil
		} else if ok {
			t.trace(false, text)
			return text, t.lineFeed(buf)
		}
		n, err := t.c.Read(buf)
		if err != nil {
			return "", err
		}
		t.in.add(buf[:n])
		now := time.Now()
		switch {
		case n > 0:
			last = now
		case t.o.Plain && t.in.begun() && now.Sub(last) >= max(leastQuiet, plainQuiet*t.c.ByteTime()):
			t.in.add([]byte{'\n'})
		case !now.Before(deadline):
			return "", ErrSilent
		}
		if n > 0 && now.After(deadline.Add(time.Second)) { // a stream without line ends
			return "", ErrSilent
		}
	}
}

// lineFeed takes what comes behind a CR.
func (t *Talk) lineFeed(buf []byte) error {
	for end := time.Now().Add(3 * t.c.ByteTime()); ; {
		n, err := t.c.Read(buf)
		if err != nil {
			return err
		}
		if t.in.add(buf[:n]); n > 0 {
			return nil
		}
		if !time.Now().Before(end) {
			t.crOnly = true
			return nil
		}
	}
}

// resync brings the instrument back into step after a reply that did not come or was
// garbled: what still comes is dropped, then it must say who it is. With clear, its
// error queue is emptied, since the mishap itself may stand in it.
func (t *Talk) resync(timeout time.Duration, clear bool) error {
	if err := t.drop(2 * timeout); err != nil {
		return err
	}
	if t.o.Plain {
		t.unsure = false
		return nil
	}
	if err := port.Expect(t.c, timeout); err != nil {
		return err
	}
	if clear {
		if err := t.send("*CLS"); err != nil {
			return err
		}
	}
	if err := t.send("*IDN?"); err != nil {
		return err
	}
	deadline := time.Now().Add(timeout)
	for worded := false; ; {
		reply, err := t.line(deadline)
		if errors.Is(err, ErrSilent) && worded {
			break // an instrument that does not separate who it is by commas
		} else if errors.Is(err, ErrSilent) {
			return fmt.Errorf("%s: %w, not even to *IDN?", t.c.Address(), ErrSilent)
		} else if err != nil && !errors.Is(err, ErrReply) {
			return err
		}
		// Replies to earlier queries, and echoes, come first.
		if err != nil || reply == "*CLS" || reply == "*IDN?" {
			continue
		}
		if reply == t.identity || t.identity == "" && strings.Count(reply, ",") >= 2 {
			break
		}
		if _, _, err := Number(reply); err != nil {
			worded = true
		}
	}
	t.unsure = false
	return nil
}

// drop takes what comes in for so long and forgets it.
func (t *Talk) drop(d time.Duration) error {
	t.in.clear()
	buf := make([]byte, 4096)
	for end := time.Now().Add(d); time.Now().Before(end); {
		n, err := t.c.Read(buf)
		if err != nil {
			return err
		}
		if n > 0 {
			t.trace(false, fmt.Sprintf("(dropped) %q", buf[:n]))
		}
	}
	return nil
}

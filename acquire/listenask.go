package acquire

import (
	"bytes"
	"fmt"
	"regexp"
	"strconv"
	"strings"
	"time"

	"gatesill/acquire/port"
)

const (
	askFloor    = time.Second      // shortest time-out of a question
	askLongest  = 10 * time.Second // of the pause after questions that were not answered
	setUpReply  = 5 * time.Second  // a reset takes some seconds
	errorReads  = 40               // some instruments report a fault of theirs again and again
	replyLength = 32               // bytes of a reply that varies
)

// listenPoll is where the asking stands. There is never a second question before
// the reply or the time-out of the first.
type listenPoll struct {
	asked  bool
	at     time.Time     // of the last question
	due    time.Time     // of the next
	drain  time.Time     // until then what comes in is a late reply, or its rest
	expect time.Duration // how long a reply takes
	misses int           // questions running that were not answered
}

var nplc = regexp.MustCompile(`(?i)NPLC(?:YCLES)?\s+([0-9.eE+-]+)`)

// listenExpected is how long a reading may take by the set-up: integration over that
// many cycles of 50 Hz, twice for a zero taken each time. 0 not known.
func listenExpected(setup []string) time.Duration {
	longest := time.Duration(0)
	for _, line := range setup {
		if m := nplc.FindStringSubmatch(line); m != nil {
			if x, err := strconv.ParseFloat(m[1], 64); err == nil && x > 0 && x <= 1000 {
				longest = max(longest, 50*time.Millisecond+time.Duration(2*x/50*float64(time.Second)))
			}
		}
	}
	return longest
}

// timeout is twice what a reply took so far, at least a second, and the bytes' time.
func (l *listener) timeout() time.Duration {
	n := len(l.question) + max(l.format.Length, replyLength)
	return max(askFloor, 2*l.poll.expect) + time.Duration(n)*l.byteTime
}

func (l *listener) draining(at time.Time) bool {
	return !l.poll.drain.IsZero() && at.Before(l.poll.drain)
}

// late learns from a reply that came after its time-out.
func (l *listener) late(at time.Time) {
	l.poll.expect = max(l.poll.expect, at.Sub(l.poll.at))
}

// replied takes a frame for the reply.
func (l *listener) replied() {
	if !l.poll.asked {
		return
	}
	l.poll.asked, l.poll.misses = false, 0
	took := l.last.Sub(l.poll.at)
	l.poll.expect = max(took, l.poll.expect-l.poll.expect/16)
}

// tick asks when it is time to.
func (l *listener) tick(c port.Conn, at time.Time) error {
	p := &l.poll
	if len(l.question) == 0 || l.recorded || l.draining(at) {
		return nil
	}
	if !p.drain.IsZero() { // the pause after a time-out is over
		p.drain = time.Time{}
		if err := c.Discard(); err != nil {
			return err
		}
		l.forget()
		if l.format.Name == "scpi" {
			if err := send(c, "*CLS\n"); err != nil {
				return err
			}
		}
	}
	if p.asked {
		if wait := l.timeout(); at.Sub(p.at) >= wait {
			p.asked = false
			p.misses++
			p.drain = at.Add(min(time.Duration(p.misses)*wait, max(wait, askLongest)))
			l.fail(at, fmt.Errorf("%s: %w to %q within %v", l.Address, ErrNoReply, strings.TrimSpace(string(l.question)), wait.Round(time.Millisecond)))
		}
		return nil
	}
	if at.Before(p.due) {
		return nil
	}
	if err := send(c, string(l.question)); err != nil {
		return err
	}
	p.asked, p.at = true, at
	every := time.Duration(l.Every * float64(time.Second))
	if p.due.Add(every).Before(at) { // the first, or late by a whole period: from now on
		p.due = at
	}
	p.due = p.due.Add(every)
	return port.Expect(c, l.timeout())
}

func send(c port.Conn, text string) error {
	n, err := c.Write([]byte(text))
	if err == nil && n < len(text) {
		err = fmt.Errorf("%s: %d of %d bytes sent", c.Address(), n, len(text))
	}
	return err
}

// setUp sends the set-up lines. With scpi each is a conversation: the queue of
// errors is read after it, and a line that was refused is named.
func (l *listener) setUp(c port.Conn) error {
	if l.format.Name != "scpi" {
		for _, line := range l.Setup {
			if l.format.Lines && !strings.HasSuffix(line, "\n") {
				line += "\n"
			}
			if err := send(c, line); err != nil {
				return err
			}
		}
		return nil
	}
	t := &talk{c: c, now: l.now}
	known := map[int]bool{} // errors that stay however often the queue is emptied
	cleared := false
	for i, line := range l.Setup {
		line = strings.TrimSpace(line)
		remote := isRemote(line)
		if !cleared && !remote { // some take nothing at all before SYST:REM
			cleared = true
			if err := send(c, "*CLS\n"); err != nil {
				return err
			}
			old, err := t.errors()
			if err != nil {
				return fmt.Errorf("%s: before the set-up: %w", l.Address, err)
			}
			for _, e := range old {
				known[e.code] = true
			}
		}
		if err := send(c, line+"\n"); err != nil {
			return err
		}
		if strings.Contains(line, "?") {
			if _, err := t.reply(line); err != nil {
				return fmt.Errorf("%s: set-up line %d, %q: %w", l.Address, i+1, line, err)
			}
		}
		errs, err := t.errors()
		if err != nil {
			return fmt.Errorf("%s: set-up line %d, %q: %w", l.Address, i+1, line, err)
		}
		for _, e := range errs {
			// Before the queue was emptied it may hold anything; and where there is no
			// local state SYST:REM is not known.
			if remote && (!cleared || e.code == -113) || known[e.code] {
				continue
			}
			return fmt.Errorf("%s: set-up line %d, %q: %w: %s", l.Address, i+1, line, ErrSetUp, e.text)
		}
	}
	return nil
}

func isRemote(line string) bool {
	f := strings.ToUpper(strings.TrimPrefix(strings.TrimSpace(line), ":"))
	return f == "SYST:REM" || f == "SYSTEM:REMOTE" || f == "SYST:RWL" || f == "SYSTEM:RWLOCK"
}

// talk is a conversation of lines, one question at a time.
type talk struct {
	c    port.Conn
	now  func() time.Time
	rest []byte
}

// reply waits for one line. Empty lines and the echo of the question are dropped.
func (t *talk) reply(question string) (string, error) {
	if err := port.Expect(t.c, setUpReply); err != nil {
		return "", err
	}
	until := t.now().Add(setUpReply)
	buf := make([]byte, 512)
	for {
		for {
			i := bytes.IndexAny(t.rest, "\r\n")
			if i < 0 {
				break
			}
			line := strings.TrimSpace(string(t.rest[:i]))
			t.rest = t.rest[i+1:]
			if line != "" && line != question {
				return line, nil
			}
		}
		if !t.now().Before(until) || len(t.rest) > 4096 {
			return "", fmt.Errorf("%w to %q within %v", ErrNoReply, question, setUpReply)
		}
		n, err := t.c.Read(buf)
		if err != nil {
			return "", err
		}
		t.rest = append(t.rest, buf[:n]...)
	}
}

type instrumentError struct {
	code int
	text string
}

// errors empties the queue of errors.
func (t *talk) errors() ([]instrumentError, error) {
	const question = "SYST:ERR?"
	var list []instrumentError
	for range errorReads {
		if err := send(t.c, question+"\n"); err != nil {
			return nil, err
		}
		text, err := t.reply(question)
		if err != nil {
			return nil, err
		}
		number, _, _ := strings.Cut(text, ",")
		code, err := strconv.Atoi(strings.TrimPrefix(strings.TrimSpace(number), "+"))
		switch {
		case err != nil:
			return nil, fmt.Errorf("%w: %s was answered by %.60q", ErrSetUp, question, text)
		case code == 0:
			return list, nil
		}
		list = append(list, instrumentError{code, fmt.Sprintf("%.100q", text)})
	}
	return list, nil
}

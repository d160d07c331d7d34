package acquire

import (
	"errors"
	"fmt"
	"regexp"
	"strconv"
	"strings"
	"time"

	"gatesill/acquire/port"
	"gatesill/acquire/scpi"
)

const (
	askFloor    = time.Second      // shortest time-out of a question
	askLongest  = 10 * time.Second // of the pause after questions that were not answered
	setUpReply  = 5 * time.Second  // a reset takes some seconds
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
	p.asked, p.at, l.floor = true, at, at
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

// setUp sends the set-up lines. With scpi each is a conversation: it must be done
// and not be refused before the next is sent.
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
	t := scpi.New(c, scpi.Options{Timeout: l.patience})
	for i, line := range l.Setup {
		line = strings.TrimSpace(line)
		var err error
		switch {
		case isRemote(line): // not known where there is no local state
			err = t.Remote()
		case strings.Contains(line, "?"):
			_, err = t.Query(line, 0)
		default:
			err = t.Do(line)
		}
		var refused *scpi.Refused
		if errors.As(err, &refused) {
			return fmt.Errorf("%s: set-up line %d, %q: %w: %d %s", l.Address, i+1, line, ErrSetUp, refused.Code, refused.Text)
		} else if err != nil {
			return fmt.Errorf("%s: set-up line %d, %q: %w", l.Address, i+1, line, err)
		}
	}
	return nil
}

func isRemote(line string) bool {
	f := strings.ToUpper(strings.TrimPrefix(strings.TrimSpace(line), ":"))
	return f == "SYST:REM" || f == "SYSTEM:REMOTE"
}

package rehearsal

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"time"
)

// LineStatus is how a line stands.
type LineStatus struct {
	Path      string `json:"path"`      // of the pseudo-terminal now; "" unplugged
	Open      bool   `json:"open"`      // somebody has it open
	Frames    int    `json:"frames"`    // frames and replies of meters that were sent whole
	Bytes     int    `json:"bytes"`     // sent, of everything
	Unheard   int    `json:"unheard"`   // frames that nobody had the line open for
	Overrun   int    `json:"overrun"`   // bytes lost because they were not read in time
	Unsaid    int    `json:"unsaid"`    // readings that the format has no form for
	Unplugged bool   `json:"unplugged"` // the adapter is away
}

// endpoint is the place where an adapter is plugged in: a stable name, and behind it
// a pseudo-terminal while it is there.
type endpoint struct {
	link   string    // stable name
	tty    *terminal // nil: unplugged
	spare  *terminal // for the next time, while unplugged
	queue  []Sent    // paced, under way
	done   int       // bytes of queue[0] that were sent
	lost   bool      // some bytes of queue[0] were not
	status LineStatus
}

// plug brings the adapter (back), on a pseudo-terminal of its own.
func (e *endpoint) plug() error {
	t := e.spare
	if e.spare = nil; t == nil {
		var err error
		if t, err = openTerminal(); err != nil {
			return err
		}
	}
	fresh := e.link + ".new"
	os.Remove(fresh)
	err := os.Symlink(t.path, fresh)
	if err == nil {
		err = os.Rename(fresh, e.link)
	}
	if err != nil {
		t.close()
		return fmt.Errorf("line %s: %w", filepath.Base(e.link), err)
	}
	e.tty = t
	e.status.Path, e.status.Unplugged = t.path, false
	return nil
}

// pull takes the adapter away. The next terminal is made before this one goes, so
// that the adapter comes back under another path, as they do.
func (e *endpoint) pull() {
	if e.tty == nil {
		return
	}
	e.spare, _ = openTerminal() // plug tries again
	os.Remove(e.link)
	e.tty.close()
	e.tty, e.queue, e.done = nil, nil, 0
	e.status.Path, e.status.Open, e.status.Unplugged = "", false, true
}

// remove takes everything away for good.
func (e *endpoint) remove() {
	if e.tty != nil {
		e.tty.close()
		e.tty = nil
	}
	if e.spare != nil {
		e.spare.close()
	}
	os.Remove(e.link)
}

// take accepts what an instrument sends.
func (e *endpoint) take(s Sent) {
	if e.tty != nil {
		e.queue = append(e.queue, s)
	}
}

// wire sends what has crossed the wire by now and gives when the next byte has, s,
// and whether there is one.
func (e *endpoint) wire(now float64) (next float64, more bool) {
	for len(e.queue) > 0 {
		s := e.queue[0]
		n := len(s.Bytes)
		if bt := s.ByteTime.Seconds(); bt > 0 {
			n = min(n, int((now-s.At)/bt+1e-6))
		}
		if n > e.done {
			e.send(s.Bytes[e.done:n])
			e.done = n
		}
		if e.done < len(s.Bytes) {
			return s.At + float64(e.done+1)*s.ByteTime.Seconds(), true
		}
		switch {
		case s.Frame && !e.status.Open:
			e.status.Unheard++
		case s.Frame && !e.lost:
			e.status.Frames++
		}
		e.queue, e.done, e.lost = e.queue[1:], 0, false
		if len(e.queue) > 0 { // a wire carries one thing after the other
			after := s.At + float64(len(s.Bytes))*s.ByteTime.Seconds()
			e.queue[0].At = max(e.queue[0].At, after)
		}
	}
	return 0, false
}

func (e *endpoint) send(b []byte) {
	if e.tty == nil {
		return
	}
	n, open := e.tty.send(b)
	if e.status.Open && !open {
		e.tty.forget()
	}
	e.status.Open = open
	e.status.Bytes += n
	if n < len(b) {
		e.lost = true
		if open {
			e.status.Overrun += len(b) - n
		}
	}
}

// listen hands over what comes in on the present terminal until that is closed.
func (e *endpoint) listen(t *terminal, hear func([]byte)) {
	const closed = 10 * time.Millisecond // between looks at a line that nobody has open
	b := make([]byte, 4096)
	for {
		n, err := t.f.Read(b)
		if n > 0 {
			hear(b[:n])
		}
		switch {
		case errors.Is(err, os.ErrClosed):
			return
		case err != nil || n == 0:
			time.Sleep(closed)
		}
	}
}

package port

import (
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"sync"
	"time"
)

// tmcReply is the greatest reply that is taken: one Read of the device is one
// reply, and what does not fit may be lost.
const tmcReply = 64 << 10

// leastTMCWait is the shortest time-out that the kernel's driver takes.
const leastTMCWait = 100 * time.Millisecond

// tmcFile is a USBTMC device of the kernel, or what stands in for one.
type tmcFile interface {
	io.ReadWriteCloser
	setTimeout(d time.Duration) error
}

// tmc is a USBTMC line: one Write is one message, one Read of the device one reply.
// A device is read only while a reply is owed, because asking it for one that it
// does not owe costs the whole time-out and is an error to the instrument.
type tmc struct {
	line
	mu   sync.Mutex // held while the device is used, so that Close does not pull it away
	f    tmcFile
	wait time.Duration // time-out of the device
	owed bool
	rest []byte // of a reply that did not fit into one Read
	gone chan struct{}
}

// newTMC makes a line of an open device.
func newTMC(address string, f tmcFile, readTimeout time.Duration) (*tmc, error) {
	t := &tmc{line: line{address: address, readTimeout: readTimeout}, f: f, gone: make(chan struct{})}
	if err := t.Expect(time.Second); err != nil {
		return nil, err
	}
	return t, nil
}

// Expect is how long a reply may take; see [Expect].
func (t *tmc) Expect(d time.Duration) error {
	d = max(d, leastTMCWait).Round(time.Millisecond)
	if d > math.MaxInt32*time.Millisecond {
		return fmt.Errorf("%s: %w: a time-out of %v", t.address, ErrSettings, d)
	}
	if err := t.state(); err != nil || d == t.wait {
		return err
	}
	t.mu.Lock()
	defer t.mu.Unlock()
	if err := t.f.setTimeout(d); err != nil {
		return t.failed(err)
	}
	t.wait = d
	return nil
}

// Read gives the reply that is owed. While none is, it waits as other lines do.
// A reply that does not come within the expected time is not owed any more.
func (t *tmc) Read(p []byte) (int, error) {
	if err := t.state(); err != nil || len(p) == 0 {
		return 0, err
	}
	if len(t.rest) == 0 {
		if !t.owed {
			timer := time.NewTimer(t.readTimeout)
			defer timer.Stop()
			select {
			case <-t.gone:
				return 0, t.failed(os.ErrClosed)
			case <-timer.C:
				return 0, nil
			}
		}
		reply := make([]byte, tmcReply)
		t.mu.Lock()
		n, err := t.f.Read(reply)
		t.mu.Unlock()
		t.owed = false
		switch {
		case t.closed.Load():
			return 0, t.state()
		case isTMCTimeout(err):
			return 0, nil
		case err != nil && n == 0 && !errors.Is(err, io.EOF):
			return 0, t.failed(err)
		}
		t.rest = reply[:n]
		if n > 0 && n < tmcReply && reply[n-1] != '\n' {
			t.rest = append(t.rest, '\n') // the message's end was told beside its bytes
		}
	}
	n := copy(p, t.rest)
	t.rest = t.rest[n:]
	return n, nil
}

// Write sends one message. A message with a question mark outside of quotes is
// answered.
func (t *tmc) Write(p []byte) (int, error) {
	if err := t.state(); err != nil {
		return 0, err
	}
	t.mu.Lock()
	defer t.mu.Unlock()
	if err := t.state(); err != nil {
		return 0, err
	}
	n, err := t.f.Write(p)
	if isTMCTimeout(err) {
		return n, t.stuck(n, len(p), t.wait)
	}
	if err != nil {
		return n, t.failed(err)
	}
	t.owed = asks(p)
	return n, nil
}

// asks tells whether a message is answered.
func asks(p []byte) bool {
	var quote byte
	for _, c := range p {
		switch {
		case quote != 0:
			if c == quote {
				quote = 0
			}
		case c == '"' || c == '\'':
			quote = c
		case c == '?':
			return true
		}
	}
	return false
}

// Discard takes a reply that is owed, and drops it.
func (t *tmc) Discard() error {
	t.rest = nil
	if !t.owed {
		return t.state()
	}
	buf := make([]byte, tmcReply)
	_, err := t.Read(buf)
	t.rest = nil
	return err
}

// DiscardOutput does nothing: a message is sent when Write returns.
func (t *tmc) DiscardOutput() error { return t.state() }

// Close waits for a call of the device that is under way, which its time-out ends.
func (t *tmc) Close() error {
	if !t.shut() {
		return nil
	}
	close(t.gone)
	t.mu.Lock()
	defer t.mu.Unlock()
	if err := t.f.Close(); err != nil {
		return fmt.Errorf("%s: %w", t.address, err)
	}
	return nil
}

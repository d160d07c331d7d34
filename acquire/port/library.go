package port

import (
	"errors"
	"fmt"
	"os"
	"sync"
	"sync/atomic"
	"syscall"
	"time"

	"go.bug.st/serial"
)

// libraryLine reads and writes through the serial library, where there is nothing
// better: on Windows and macOS. The library does not check for use after Close, its
// Close and Read disturb each other, its Write has no end, and its Read panics on
// descriptor numbers of select(2)'s limit and above. So no call of it overlaps Close,
// except a Write that is stuck: that one has long handed its descriptor to the
// kernel.
type libraryLine struct {
	line
	p       serial.Port
	modem   bool
	reading sync.Mutex    // held during the library's Read, which ends by its time-out
	writing chan struct{} // holds one token while nothing is being written
	gone    chan struct{} // closed by Close
}

const (
	readEnds  = time.Second            // for a driver that does not keep to its time-out
	writeEnds = 200 * time.Millisecond // after its bytes were dropped
)

// newLibraryLine makes a line of an open port. The read time-out is set here, once:
// the library does not guard it against a Read.
func newLibraryLine(address string, p serial.Port, s Settings, readTimeout time.Duration) (*libraryLine, error) {
	// Whole milliseconds is what Windows has; 0 would not wait at all.
	if err := p.SetReadTimeout(max(readTimeout, time.Millisecond)); err != nil {
		return nil, err
	}
	l := &libraryLine{
		line: line{address: address, readTimeout: readTimeout, byteTime: s.ByteTime()},
		p:    p, modem: setModemLines(p, s), writing: make(chan struct{}, 1), gone: make(chan struct{}),
	}
	l.writing <- struct{}{}
	return l, nil
}

func (l *libraryLine) hasModemLines() bool { return l.modem }

func (l *libraryLine) Read(p []byte) (n int, err error) {
	l.reading.Lock()
	defer l.reading.Unlock()
	if err := l.state(); err != nil || len(p) == 0 { // the library takes an empty p for a lost line
		return 0, err
	}
	n, err = l.guardedRead(p)
	if err == nil || n > 0 {
		return n, l.closedMeanwhile(n)
	}
	return 0, l.failed(err)
}

// closedMeanwhile makes a Read that came back empty because of Close say so.
func (l *libraryLine) closedMeanwhile(n int) error {
	if n == 0 && l.closed.Load() {
		return l.failed(os.ErrClosed)
	}
	return nil
}

func (l *libraryLine) guardedRead(p []byte) (n int, err error) {
	defer func() {
		if r := recover(); r != nil {
			n, err = 0, fmt.Errorf("the serial library cannot wait for it: are there a thousand files open? (%v)", r)
		}
	}()
	return l.p.Read(p)
}

func (l *libraryLine) Write(p []byte) (int, error) {
	if err := l.state(); err != nil {
		return 0, err
	}
	limit := writeLimit(len(p), l.byteTime)
	timer := time.NewTimer(limit)
	defer timer.Stop()
	select {
	case <-l.writing:
	case <-l.gone:
		return 0, l.failed(os.ErrClosed)
	case <-timer.C: // one that got stuck earlier still is
		return 0, l.stuck(0, len(p), limit)
	}
	type outcome struct {
		n   int
		err error
	}
	done := make(chan outcome, 1)
	var given atomic.Bool            // the caller has its answer: no more of p is sent
	own := append([]byte(nil), p...) // the caller has p back before a stuck write ends
	go func() {
		defer func() { l.writing <- struct{}{} }()
		// A signal, of which the Go runtime has its own, cuts a blocking write short.
		var o outcome
		for o.n < len(own) && o.err == nil {
			if given.Load() || l.closed.Load() {
				return
			}
			var n int
			n, o.err = l.p.Write(own[o.n:])
			if o.n += n; errors.Is(o.err, syscall.EINTR) {
				o.err = nil
			}
		}
		done <- o
	}()
	defer given.Store(true)
	select {
	case o := <-done:
		if o.err != nil {
			return o.n, l.failed(o.err)
		}
		return o.n, nil
	case <-l.gone:
		return 0, l.failed(os.ErrClosed)
	case <-timer.C:
		return 0, l.stuck(0, len(p), limit)
	}
}

func (l *libraryLine) Discard() error       { return l.reset(l.p.ResetInputBuffer) }
func (l *libraryLine) DiscardOutput() error { return l.reset(l.p.ResetOutputBuffer) }

func (l *libraryLine) reset(f func() error) error {
	l.reading.Lock() // Close takes it too
	defer l.reading.Unlock()
	if err := l.state(); err != nil {
		return err
	}
	if err := f(); err != nil {
		return l.failed(err)
	}
	return nil
}

// Close waits until the Read under way has timed out. A Write under way is given a
// moment, then its bytes are dropped, which ends it on real lines.
func (l *libraryLine) Close() error {
	if !l.shut() {
		return nil
	}
	close(l.gone)
	read := make(chan struct{})
	go func() { // stays behind if a driver never comes back from Read
		l.reading.Lock()
		close(read)
		l.reading.Unlock()
	}()
	waitFor(read, readEnds)
	if !waitFor(l.writing, writeEnds) {
		l.p.ResetOutputBuffer()
		waitFor(l.writing, writeEnds)
	}
	if err := l.p.Close(); err != nil {
		return fmt.Errorf("%s: %w", l.address, err)
	}
	return nil
}

// waitFor tells whether c delivered within d.
func waitFor(c <-chan struct{}, d time.Duration) bool {
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-c:
		return true
	case <-t.C:
		return false
	}
}

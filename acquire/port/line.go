package port

import (
	"errors"
	"fmt"
	"os"
	"sync/atomic"
	"time"
)

// line is what all lines have: a name, and a state that only gets worse.
type line struct {
	address     string
	readTimeout time.Duration
	byteTime    time.Duration
	closed      atomic.Bool
	wasStuck    atomic.Bool
	lost        atomic.Pointer[error]
}

func (l *line) Address() string         { return l.address }
func (l *line) ByteTime() time.Duration { return l.byteTime }

// shut marks the line closed and tells whether it was open.
func (l *line) shut() bool { return l.closed.CompareAndSwap(false, true) }

// state is nil while the line is good.
func (l *line) state() error {
	if l.closed.Load() {
		return fmt.Errorf("%s: %w", l.address, ErrClosed)
	}
	if e := l.lost.Load(); e != nil {
		return *e
	}
	return nil
}

// failed says what a failed call means: the line was closed under it, or is lost,
// for good.
func (l *line) failed(err error) error {
	if errors.Is(err, os.ErrClosed) || l.closed.Load() {
		return fmt.Errorf("%s: %w", l.address, ErrClosed)
	}
	lost := fmt.Errorf("%s: %w (%w)", l.address, ErrLost, err)
	l.lost.CompareAndSwap(nil, &lost)
	return *l.lost.Load()
}

func (l *line) stuck(n, of int, after time.Duration) error {
	l.wasStuck.Store(true)
	return fmt.Errorf("%s: %w: %d of %d taken in %v", l.address, ErrStuck, n, of, after)
}

package port

import (
	"context"
	"errors"
	"time"
)

const (
	defaultFirstRetry = 200 * time.Millisecond
	defaultLastRetry  = 3 * time.Second
	leadSettle        = 500 * time.Millisecond // a lead fed by the modem lines has to charge up; common practice, no source
	grace             = 2 * time.Second        // for a conversation under way when the context ends
)

// Keep owns a line: it opens it, lets it settle, hands what comes in to h, and opens
// it again under the same name after it was lost. It returns when ctx ends, with the
// error of ctx; when a recorded log is played to its end or cannot be read; and when
// the settings cannot be had. Everything else it tries again.
//
// A call of h that is under way when ctx ends may finish its conversation, for two
// seconds; then the line is closed under it.
func Keep(ctx context.Context, address string, s Settings, h Handler, o Options) error {
	return keeper{open: open, sleep: sleep, grace: grace}.keep(ctx, address, s, h, o)
}

// keeper is what tests of [Keep] replace.
type keeper struct {
	open  opener
	sleep func(ctx context.Context, d time.Duration) bool // false when ctx ended
	grace time.Duration
}

func (k keeper) keep(ctx context.Context, address string, s Settings, h Handler, o Options) error {
	if o.ReadTimeout <= 0 {
		o.ReadTimeout = defaultReadTimeout
	}
	if o.FirstRetry <= 0 {
		o.FirstRetry = defaultFirstRetry
	}
	if o.LastRetry <= 0 {
		o.LastRetry = defaultLastRetry
	}
	delay := o.FirstRetry
	for ctx.Err() == nil {
		c, err := k.open(ctx, address, s, o.ReadTimeout)
		if err == nil {
			var talked bool
			talked, err = k.serve(ctx, c, h, o)
			c.Close() // what it says is of no use: the line is given up anyway
			if talked {
				delay = o.FirstRetry
			}
		}
		if ctx.Err() != nil {
			break
		}
		h.Lost(err, time.Now())
		if kind, _ := kindOf(address); kind == kindLog || errors.Is(err, ErrEnd) || errors.Is(err, ErrSettings) {
			return err
		}
		if !k.sleep(ctx, delay) {
			break
		}
		delay = min(2*delay, o.LastRetry)
	}
	return ctx.Err()
}

// serve runs an open line until it fails or ctx ends. It tells whether the handler
// was content with the opening.
func (k keeper) serve(ctx context.Context, c Conn, h Handler, o Options) (talked bool, err error) {
	done := make(chan struct{})
	defer close(done)
	stop := context.AfterFunc(ctx, func() {
		select {
		case <-done:
		case <-time.After(k.grace):
			c.Close()
		}
	})
	defer stop()

	if kind, _ := kindOf(c.Address()); kind != kindLog { // whose first bytes are due at once
		if !k.sleep(ctx, settleTime(c, o)) {
			return false, ctx.Err()
		}
		if err := c.Discard(); err != nil {
			return false, err
		}
	}
	if err := h.Opened(c, time.Now()); err != nil {
		return false, err
	}
	buf := make([]byte, 4096)
	for ctx.Err() == nil {
		n, err := c.Read(buf)
		at := time.Now()
		switch {
		case n > 0: // an error beside bytes comes again at the next Read
			err = h.Bytes(c, buf[:n], at)
		case err == nil:
			err = h.Idle(c, at)
		}
		if err != nil {
			return true, err
		}
	}
	return true, ctx.Err()
}

// settleTime is the quiet time of a line: that of a fed lead where there are modem
// lines that could feed one.
func settleTime(c Conn, o Options) time.Duration {
	if o.Settle != 0 {
		return o.Settle
	}
	if m, ok := c.(interface{ hasModemLines() bool }); ok && m.hasModemLines() {
		return leadSettle
	}
	return 0
}

// sleep waits, and tells whether ctx lasted that long.
func sleep(ctx context.Context, d time.Duration) bool {
	if d <= 0 {
		return ctx.Err() == nil
	}
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-ctx.Done():
		return false
	case <-t.C:
		return true
	}
}

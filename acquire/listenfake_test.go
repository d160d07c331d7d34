package acquire

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"

	"gatesill/acquire/meter"
	"gatesill/acquire/port"
)

// fakeLine is a line in memory with a clock of its own: Read gives what answers
// left, or lets 20 ms pass.
type fakeLine struct {
	byteTime  time.Duration
	clock     time.Time
	sent      []string
	input     []byte
	answer    func(sent string) string
	discarded int
	writeErr  error
}

func (f *fakeLine) Read(p []byte) (int, error) {
	if len(f.input) == 0 {
		f.clock = f.clock.Add(20 * time.Millisecond)
		return 0, nil
	}
	n := copy(p, f.input)
	f.input = f.input[n:]
	return n, nil
}

func (f *fakeLine) Write(p []byte) (int, error) {
	if f.writeErr != nil {
		return 0, f.writeErr
	}
	f.sent = append(f.sent, string(p))
	if f.answer != nil {
		f.input = append(f.input, f.answer(string(p))...)
	}
	return len(p), nil
}

func (f *fakeLine) Discard() error          { f.discarded++; f.input = nil; return nil }
func (f *fakeLine) DiscardOutput() error    { return nil }
func (f *fakeLine) Close() error            { return nil }
func (f *fakeLine) ByteTime() time.Duration { return f.byteTime }
func (f *fakeLine) Address() string         { return "line1" }

var listenZero = time.Unix(1_000_000, 0)

// rig is a listener on a fake line.
type rig struct {
	t      *testing.T
	l      *listener
	c      *fakeLine
	events []Event
}

func newRig(t *testing.T, s Source) *rig {
	t.Helper()
	if s.Address == "" {
		s.Address = "line1"
	}
	r := &rig{t: t, c: &fakeLine{clock: listenZero}}
	l, settings, err := newListener(s, listenZero, func(e Event) { r.events = append(r.events, e) })
	if err != nil {
		t.Fatal(err)
	}
	l.now = func() time.Time { return r.c.clock }
	r.c.byteTime = settings.ByteTime()
	r.l = l
	return r
}

// onSocket is a rig whose line is open and takes no time on the wire.
func onSocket(t *testing.T, s Source) *rig {
	t.Helper()
	r := newRig(t, s)
	r.c.byteTime = 0
	r.open(0)
	r.said()
	return r
}

func (r *rig) at(ms float64) time.Time {
	at := listenZero.Add(time.Duration(ms * float64(time.Millisecond)))
	if at.After(r.c.clock) {
		r.c.clock = at
	}
	return at
}

func (r *rig) ok(err error) {
	r.t.Helper()
	if err != nil {
		r.t.Fatal(err)
	}
}

func (r *rig) open(ms float64)            { r.t.Helper(); r.ok(r.l.Opened(r.c, r.at(ms))) }
func (r *rig) idle(ms float64)            { r.t.Helper(); r.ok(r.l.Idle(r.c, r.at(ms))) }
func (r *rig) bytes(ms float64, b []byte) { r.t.Helper(); r.ok(r.l.Bytes(r.c, b, r.at(ms))) }
func (r *rig) text(ms float64, s string)  { r.t.Helper(); r.bytes(ms, []byte(s)) }

// said writes the events since the last call briefly, and forgets them.
func (r *rig) said() string {
	var parts []string
	for _, e := range r.events {
		p := fmt.Sprintf("%.1fms", e.At*1000)
		switch {
		case e.Opened:
			p += " opened"
		case e.Lost:
			p += " lost"
		case e.Err != nil:
			p += " !" + e.Err.Error()
		}
		for _, x := range e.Readings {
			p += fmt.Sprintf(" %s=%s%s%s", x.Role, x.Value, x.State, x.Unit)
			if d, ok := x.Digit.Get(); ok {
				p += fmt.Sprintf("/%g", d)
			}
			if x.Refused != "" {
				p += "(" + x.Refused + ")"
			}
			if err := x.Validate(); err != nil {
				r.t.Error(err)
			}
			if x.At != e.At {
				r.t.Errorf("reading at %v in event at %v", x.At, e.At)
			}
		}
		parts = append(parts, p)
	}
	r.events = nil
	return strings.Join(parts, "; ")
}

func (r *rig) expect(what, want string) {
	r.t.Helper()
	if got := r.said(); got != want {
		r.t.Errorf("%s:\n got %s\nwant %s", what, got, want)
	}
}

// expectPart wants each part, in order.
func (r *rig) expectPart(what string, parts ...string) {
	r.t.Helper()
	got := r.said()
	rest := got
	for _, p := range parts {
		_, after, ok := strings.Cut(rest, p)
		if !ok {
			r.t.Errorf("%s:\n got %s\nwant %q in it", what, got, p)
			return
		}
		rest = after
	}
}

func (r *rig) frame(format string, s ...meter.Shown) []byte {
	r.t.Helper()
	b, err := meter.Encode(format, s...)
	r.ok(err)
	return b
}

func volts(x float64) meter.Shown { return meter.Shown{Value: x, Unit: "V", Digit: 1e-3} }

var gate = []SourceColumn{{Role: Gate, Meter: "m1", Unit: "V"}}

var errWire = errors.New("wire cut")

var _ port.Handler = (*listener)(nil)
var _ port.Conn = (*fakeLine)(nil)

package port

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"os"
	"strings"
	"sync"
	"testing"
	"time"
)

// Most of these tests wait for lines, which does not need a processor each.
func TestMain(m *testing.M) {
	flag.Parse()
	flag.Set("test.parallel", "16")
	os.Exit(m.Run())
}

// notes is a handler that writes down what it is told.
type notes struct {
	mu     sync.Mutex
	lines  []string
	opened func(Conn) error
	bytes  func(Conn, []byte) error
	idle   func(Conn) error
	lost   func(error)
}

func (h *notes) note(format string, args ...any) {
	h.mu.Lock()
	defer h.mu.Unlock()
	h.lines = append(h.lines, fmt.Sprintf(format, args...))
}

func (h *notes) said() string {
	h.mu.Lock()
	defer h.mu.Unlock()
	return strings.Join(h.lines, "|")
}

func (h *notes) Opened(c Conn, at time.Time) error {
	h.note("opened")
	if h.opened != nil {
		return h.opened(c)
	}
	return nil
}

func (h *notes) Bytes(c Conn, b []byte, at time.Time) error {
	h.note("%s", b)
	if h.bytes != nil {
		return h.bytes(c, b)
	}
	return nil
}

func (h *notes) Idle(c Conn, at time.Time) error {
	if h.idle != nil {
		return h.idle(c)
	}
	return nil
}

func (h *notes) Lost(err error, at time.Time) {
	h.note("lost")
	if h.lost != nil {
		h.lost(err)
	}
}

// fake is a line of a test. Read gives the next of what it has to say, then waits.
type fake struct {
	line
	says      []string
	end       error // after the last of says; nil: silence
	discarded int
}

func (f *fake) Read(p []byte) (int, error) {
	if err := f.state(); err != nil {
		return 0, err
	}
	if len(f.says) == 0 {
		time.Sleep(time.Millisecond)
		return 0, f.end
	}
	n := copy(p, f.says[0])
	f.says = f.says[1:]
	return n, nil
}
func (f *fake) Write(p []byte) (int, error) { return len(p), f.state() }
func (f *fake) Discard() error              { f.discarded++; return f.state() }
func (f *fake) DiscardOutput() error        { return f.state() }
func (f *fake) Close() error                { f.shut(); return nil }

func TestKeepBacksOff(t *testing.T) {
	t.Parallel()
	broken := errors.New("broken")
	tries := 0
	var all []*fake
	open := func(_ context.Context, address string, _ Settings, _ time.Duration) (Conn, error) {
		if tries++; tries <= 4 || tries == 6 {
			return nil, fmt.Errorf("%w: try %d", ErrAbsent, tries)
		}
		f := &fake{line: line{address: address}, says: []string{"a", "b"}, end: broken}
		if tries == 7 {
			f.end = ErrEnd
		}
		all = append(all, f)
		return f, nil
	}
	h := &notes{}
	var delays []time.Duration
	wait := func(_ context.Context, d time.Duration) bool {
		if d != 7*time.Second { // which is for settling
			delays = append(delays, d)
		}
		return true
	}
	err := keeper{open, wait, grace}.keep(context.Background(), "x", Settings{}, h, Options{Settle: 7 * time.Second})
	if !errors.Is(err, ErrEnd) {
		t.Fatal(err)
	}
	if got := h.said(); got != "lost|lost|lost|lost|opened|a|b|lost|lost|opened|a|b|lost" {
		t.Errorf("got %s", got)
	}
	// Delays before tries 2 to 7; after try 5, which opened, they begin anew.
	if got := fmt.Sprint(delays); got != "[200ms 400ms 800ms 1.6s 200ms 400ms]" {
		t.Errorf("waited %s", got)
	}
	for _, f := range all {
		if !f.closed.Load() {
			t.Error("a lost line was left open")
		}
		if f.discarded == 0 {
			t.Error("what came before the opening was not dropped")
		}
	}
}

func TestKeepsDelayStopsGrowing(t *testing.T) {
	open := func(context.Context, string, Settings, time.Duration) (Conn, error) { return nil, ErrAbsent }
	var delays []time.Duration
	wait := func(_ context.Context, d time.Duration) bool {
		delays = append(delays, d)
		return len(delays) < 7
	}
	keeper{open, wait, grace}.keep(context.Background(), "x", Settings{}, &notes{}, Options{})
	if got := fmt.Sprint(delays); got != "[200ms 400ms 800ms 1.6s 3s 3s 3s]" {
		t.Errorf("waited %s", got)
	}
}

func TestKeepTriesAgainAfterTheHandlersErrors(t *testing.T) {
	t.Parallel()
	var opens int
	open := func(_ context.Context, address string, _ Settings, _ time.Duration) (Conn, error) {
		opens++
		return &fake{line: line{address: address}, says: []string{"a"}}, nil
	}
	fail := errors.New("no")
	n := 0
	turn := func(at int, err error) error {
		if n == at {
			n++
			return err
		}
		return nil
	}
	h := &notes{}
	h.opened = func(Conn) error { return turn(0, fail) }
	h.bytes = func(Conn, []byte) error { return turn(1, fail) }
	h.idle = func(Conn) error {
		if n == 3 {
			return fmt.Errorf("that is %w", ErrEnd)
		}
		return turn(2, fail)
	}
	err := keeper{open, sleep, grace}.keep(context.Background(), "x", Settings{}, h, Options{FirstRetry: time.Millisecond})
	if !errors.Is(err, ErrEnd) {
		t.Fatal(err)
	}
	if got := h.said(); got != "opened|lost|opened|a|lost|opened|a|lost|opened|a|lost" {
		t.Errorf("got %s", got)
	}
}

func TestKeepEndsWithItsContext(t *testing.T) {
	t.Parallel()
	for _, x := range []string{"reading", "waiting", "settling"} {
		t.Run(x, func(t *testing.T) {
			ctx, cancel := context.WithCancel(context.Background())
			o := Options{FirstRetry: time.Hour, Settle: -1}
			if x == "settling" {
				o.Settle = time.Hour
			}
			open := func(_ context.Context, address string, _ Settings, _ time.Duration) (Conn, error) {
				time.AfterFunc(10*time.Millisecond, cancel)
				if x == "waiting" {
					return nil, ErrAbsent
				}
				return &fake{line: line{address: address}}, nil
			}
			h := &notes{}
			if err := (keeper{open, sleep, grace}).keep(ctx, "x", Settings{}, h, o); !errors.Is(err, context.Canceled) {
				t.Errorf("got %v", err)
			}
			if got, want := h.said(), map[string]string{"reading": "opened", "waiting": "lost", "settling": ""}[x]; got != want {
				t.Errorf("got %s, want %s", got, want)
			}
		})
	}
}

// A conversation that brings an instrument to rest is not cut short when the program
// is told to stop, but one that hangs is.
func TestKeepLetsAConversationFinish(t *testing.T) {
	t.Parallel()
	ctx, cancel := context.WithCancel(context.Background())
	open := func(_ context.Context, address string, _ Settings, _ time.Duration) (Conn, error) {
		return &fake{line: line{address: address}}, nil
	}
	var finished, hung error
	start := time.Now()
	h := &notes{opened: func(c Conn) error {
		cancel()
		time.Sleep(50 * time.Millisecond)
		_, finished = c.Write([]byte("OUTP OFF\n"))
		for hung == nil && time.Since(start) < 10*time.Second {
			_, hung = c.Read(make([]byte, 1))
		}
		return hung
	}}
	if err := (keeper{open, sleep, 500 * time.Millisecond}).keep(ctx, "x", Settings{}, h, Options{}); !errors.Is(err, context.Canceled) {
		t.Errorf("got %v", err)
	}
	if finished != nil || !errors.Is(hung, ErrClosed) {
		t.Errorf("finished: %v; hung: %v", finished, hung)
	}
}

func TestKeepDoesNotRetryWhatCannotGetBetter(t *testing.T) {
	t.Parallel()
	for _, a := range []string{"log:" + logFile(t, "0 3x"), "log:/nowhere/at/all", "tcp:", ""} {
		h := &notes{}
		err := Keep(context.Background(), a, Settings{}, h, Options{FirstRetry: time.Hour})
		if err == nil || h.said() != "lost" {
			t.Errorf("%s: %v, %s", a, err, h.said())
		}
	}
}

func TestKeepPlaysALog(t *testing.T) {
	t.Parallel()
	h := &notes{}
	err := Keep(context.Background(), "log:"+logFile(t, "0 31\n0.05 32\n"), Settings{}, h, Options{})
	if !errors.Is(err, ErrEnd) || h.said() != "opened|1|2|lost" {
		t.Errorf("%v: %s", err, h.said())
	}
}

// readAll reads until want bytes came.
func readAll(t *testing.T, c Conn, want int) string {
	t.Helper()
	var got []byte
	buf := make([]byte, 256)
	for end := time.Now().Add(5 * time.Second); len(got) < want; {
		n, err := c.Read(buf)
		if err != nil {
			t.Fatalf("after %q: %v", got, err)
		}
		if got = append(got, buf[:n]...); time.Now().After(end) {
			t.Fatalf("only %q came", got)
		}
	}
	return string(got)
}

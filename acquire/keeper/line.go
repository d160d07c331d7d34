package keeper

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"gatesill/acquire/port"
)

// opener opens a line; tests have their own.
type opener func(address, settings string) (port.Conn, error)

var errStopped = errors.New("conversation broken off")

// line is the way to one instrument. Its connection belongs to a worker, so that a
// call that hangs can be left behind: the next job then goes over a new connection.
// The line itself belongs to one goroutine.
type line struct {
	address, settings string
	open              opener
	log               *journal

	w *worker
	// What came to be known while talking; kept over a new connection.
	mu       sync.Mutex
	identity string
	leftover bool // a reply or a piece of a command may still be under way
}

// job is one piece of conversation. stop breaks it off; nil: nothing does.
type job struct {
	run  func(*talk) (float64, error)
	stop <-chan struct{}
	done chan result
}

type result struct {
	v   float64
	err error
}

type worker struct {
	line *line
	jobs chan job
	dead atomic.Bool // its connection failed or was given up

	mu   sync.Mutex
	conn port.Conn
}

// begin hands a job to the line and does not wait for its end.
func (l *line) begin(stop <-chan struct{}, run func(*talk) (float64, error)) <-chan result {
	if l.w == nil || l.w.dead.Load() {
		l.giveUp()
		l.w = &worker{line: l, jobs: make(chan job, 16)}
		go l.w.work()
	}
	j := job{run: run, stop: stop, done: make(chan result, 1)}
	select {
	case l.w.jobs <- j:
	default:
		j.done <- result{math.NaN(), fmt.Errorf("%w: %s: earlier commands are still under way", ErrLine, l.address)}
	}
	return j.done
}

// do runs a job to its end, or gives the connection up when the limit has passed.
func (l *line) do(limit time.Duration, stop <-chan struct{}, run func(*talk) (float64, error)) (float64, error) {
	done := l.begin(stop, run)
	t := time.NewTimer(limit)
	defer t.Stop()
	select {
	case r := <-done:
		return r.v, r.err
	case <-t.C:
	case <-stop:
		// One read may still run out. A write that hangs is left behind.
		limit = stopTime
		t.Reset(limit)
		select {
		case r := <-done:
			return r.v, r.err
		case <-t.C:
		}
	}
	l.giveUp()
	return math.NaN(), fmt.Errorf("%w: %s: hung for %v; connection given up", ErrLine, l.address, limit)
}

const stopTime = 100 * time.Millisecond // five times a line's read time-out

// giveUp leaves the connection behind. Only what is safe beside a hanging call is
// done to it, and not here, as that can hang too.
func (l *line) giveUp() {
	w := l.w
	if w == nil {
		return
	}
	l.w = nil
	w.dead.Store(true)
	close(w.jobs)
	l.setLeftover(true)
	go func() {
		w.mu.Lock()
		conn := w.conn
		w.mu.Unlock()
		if conn != nil {
			conn.DiscardOutput() // or closing would wait for the far end to take the bytes
			conn.Close()
		}
	}()
}

func (l *line) setLeftover(v bool) {
	l.mu.Lock()
	l.leftover = v
	l.mu.Unlock()
}

func (l *line) hasLeftover() bool {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.leftover
}

func (w *worker) work() {
	l := w.line
	conn, err := l.open(l.address, l.settings)
	if err != nil {
		err = fmt.Errorf("%w: %w", ErrLine, err)
		l.log.note("%s: %v", l.address, err)
		w.dead.Store(true)
	} else {
		w.mu.Lock()
		w.conn = conn
		w.mu.Unlock()
		defer conn.Close()
	}
	t := &talk{line: l, conn: conn}
	for j := range w.jobs {
		if err == nil && w.dead.Load() {
			err = fmt.Errorf("%w: %s: connection given up", ErrLine, l.address)
		}
		if err != nil {
			j.done <- result{math.NaN(), err}
			continue
		}
		v, e := t.run(j)
		if errors.Is(e, port.ErrLost) || errors.Is(e, port.ErrClosed) || errors.Is(e, port.ErrStuck) {
			w.dead.Store(true)
			err = e
		}
		j.done <- result{v, e}
	}
}

// talk is a conversation over an open connection: one short command at a time. It is
// not that of package scpi, since every wait in it can be broken off, and since nothing
// may be sent to a supply of another language but its own templates.
type talk struct {
	line *line
	conn port.Conn
	stop <-chan struct{}
	in   []byte
	last string // what was sent last
}

func (t *talk) run(j job) (v float64, err error) {
	defer func() {
		if p := recover(); p != nil { // the way off goes on, whatever is wrong here
			v, err = math.NaN(), fmt.Errorf("%w: %s: fault of the keeper: %v", ErrLine, t.line.address, p)
		}
	}()
	t.stop = j.stop
	return j.run(t)
}

func (t *talk) stopped() bool {
	select {
	case <-t.stop: // never, when nil
		return true
	default:
		return false
	}
}

// send writes one command. Each is short, and its outcome is known before the next.
func (t *talk) send(text string) error {
	if t.stopped() {
		return errStopped
	}
	bytes := text + "\n"
	if t.line.hasLeftover() {
		bytes = "\n" + bytes // ends a command of which only a piece went out
	}
	t.last = text
	t.line.log.note("%s > %s", t.line.address, text)
	if _, err := t.conn.Write([]byte(bytes)); err != nil {
		t.line.setLeftover(true)
		t.line.log.note("%s: %v", t.line.address, err)
		return fmt.Errorf("%w: %w", ErrLine, err)
	}
	return nil
}

// ask sends a query and waits for its answer, the time of the bytes added.
func (t *talk) ask(text string, limit time.Duration) (string, error) {
	before := t.last
	t.in = t.in[:0]
	if err := t.conn.Discard(); err != nil {
		return "", fmt.Errorf("%w: %w", ErrLine, err)
	}
	if err := t.send(text); err != nil {
		return "", err
	}
	port.Expect(t.conn, limit)
	limit += time.Duration(len(text)+64) * t.conn.ByteTime()
	end := time.Now().Add(limit)
	reply, err := t.next(end)
	for _, heard := range []string{before, text} { // some repeat what they hear
		if err == nil && len(heard) > 1 && reply == heard {
			reply, err = t.next(end)
		}
	}
	if errors.Is(err, errNoReply) {
		err = fmt.Errorf("%w: %s: %w to %q in %v", ErrLine, t.line.address, errNoReply, text, limit.Round(time.Millisecond))
	}
	if err != nil {
		t.line.setLeftover(true)
		t.line.log.note("%s: %v", t.line.address, err)
	}
	return reply, err
}

var errNoReply = errors.New("no answer")

// next gives the next line that came in and is not empty.
func (t *talk) next(end time.Time) (string, error) {
	buf := make([]byte, 256)
	for {
		if i := strings.IndexAny(string(t.in), "\r\n"); i >= 0 {
			s := strings.TrimSpace(string(t.in[:i]))
			t.in = t.in[i+1:]
			if s == "" {
				continue
			}
			t.line.log.note("%s < %s", t.line.address, s)
			return s, nil
		}
		if len(t.in) > 4096 {
			return "", fmt.Errorf("%w: %s: an answer without end", ErrLine, t.line.address)
		}
		if t.stopped() {
			return "", errStopped
		}
		if !time.Now().Before(end) {
			return "", errNoReply
		}
		n, err := t.conn.Read(buf)
		if err != nil {
			return "", fmt.Errorf("%w: %w", ErrLine, err)
		}
		t.in = append(t.in, buf[:n]...)
	}
}

// clearLeftover makes question and answer meet again after a conversation was broken
// off: the identity is asked for until it is what comes back.
func (t *talk) clearLeftover(identify string, limit time.Duration) error {
	t.line.mu.Lock()
	identity, leftover := t.line.identity, t.line.leftover
	t.line.mu.Unlock()
	if !leftover {
		return nil
	}
	if identify == "" || identity == "" { // nothing to recognise: silence must do
		time.Sleep(50*time.Millisecond + 64*t.conn.ByteTime())
		t.in = t.in[:0]
		if err := t.conn.Discard(); err != nil {
			return fmt.Errorf("%w: %w", ErrLine, err)
		}
		t.line.setLeftover(false)
		return nil
	}
	if err := t.send(identify); err != nil {
		return err
	}
	for end := time.Now().Add(limit + time.Duration(len(identity)+64)*t.conn.ByteTime()); ; {
		s, err := t.next(end)
		if errors.Is(err, errNoReply) {
			return fmt.Errorf("%w: %s: %w to %q", ErrLine, t.line.address, errNoReply, identify)
		}
		if err != nil {
			return err
		}
		if s == identity {
			t.line.setLeftover(false)
			return nil
		}
	}
}

package acquire

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"strings"
	"sync"
	"time"

	"gatesill/acquire/meter"
	"gatesill/acquire/port"
)

// The errors of listening, beside those of packages meter and port.
var (
	ErrSource  = errors.New("source of readings")    // what the bench file says of it cannot be used
	ErrNoReply = errors.New("no reply")              // to a question, in time
	ErrSetUp   = errors.New("refused by instrument") // a set-up line
	ErrBattery = errors.New("low battery")           // told once each time it begins
	ErrNoFrame = errors.New("nothing that can be read")
)

// Source is one line and the meters that speak on it.
type Source struct {
	Address  string // as package port reads it
	Settings string // of a serial line, "2400 8N1"; "" as usual for the format
	Columns  []SourceColumn
	Speaks   string // a format of package meter
	Options  meter.Options
	Setup    []string // sent once after opening; with scpi each is checked
	Ask      string   // sent for each reading; "" as usual for the format
	Every    float64  // s, between two questions; 0: as soon as the reply is there
}

// SourceColumn is one value of a line's frames and what it stands for.
type SourceColumn struct {
	Column int    // of a line or reply with several values, from 1; 0 is 1
	Role   string // Gate, Current, ...
	Meter  string // its name
	Unit   string // SI unit of the role, in which readings without a unit are taken to be
}

// Listen keeps all lines open and gives what comes in on them to emit, which is
// called by one goroutine at a time. It returns when ctx ends, with its error; with
// nil when every line was a recorded log and is at its end; and with an error when a
// source cannot be used, before any line is opened where that can be told. Lines
// that fail are tried again for ever.
//
// Times count from start. That of a reading is when the first byte of its frame
// began on the wire, at the latest: when the Read that brought it returned, less the
// bytes' own time from there to the end of what was read.
//
// Every wanted column of a frame gives one [record.Reading]. It is refused as
// [meter.Reading.Refusal], [meter.Steady] and [meter.Repeats] say. A line that has
// fewer columns than are wanted is a bad frame. Bad frames are not counted nor held
// back: each is an event.
func Listen(ctx context.Context, sources []Source, start time.Time, emit func(Event)) error {
	type kept struct {
		l        *listener
		settings port.Settings
	}
	var mu sync.Mutex
	serial := func(e Event) {
		mu.Lock()
		defer mu.Unlock()
		emit(e)
	}
	lines := make([]kept, len(sources))
	for i, s := range sources {
		l, settings, err := newListener(s, start, serial)
		if err != nil {
			return err
		}
		for _, other := range sources[:i] {
			if other.Address == s.Address {
				return fmt.Errorf("%s: %w: two sources on one line", s.Address, ErrSource)
			}
		}
		lines[i] = kept{l, settings}
	}
	inner, cancel := context.WithCancel(ctx)
	defer cancel()
	failed := make([]error, len(lines))
	var wg sync.WaitGroup
	for i, k := range lines {
		wg.Go(func() {
			err := port.Keep(inner, k.l.Address, k.settings, k.l, port.Options{})
			if err != nil && inner.Err() == nil && !errors.Is(err, port.ErrEnd) {
				failed[i] = err
				cancel() // the others would wait for ever for a line that cannot come
			}
		})
	}
	wg.Wait()
	if err := ctx.Err(); err != nil {
		return err
	}
	return errors.Join(failed...)
}

// Handler gives what [Listen] hears one line with, for a caller that brings bytes and
// their times itself, as [port.Keep] would: a bench in simulated time. Only setting an
// instrument up waits in real time.
func Handler(s Source, start time.Time, emit func(Event)) (port.Handler, error) {
	l, _, err := newListener(s, start, emit)
	if err != nil {
		return nil, err
	}
	return l, nil
}

// listener hears one line; it is the handler that package port calls.
type listener struct {
	Source
	format   meter.Format
	question []byte // "" the meter speaks by itself
	recorded bool   // a log: it answers no questions
	start    time.Time
	emit     func(Event)
	now      func() time.Time // after conversations; calls bring their own time
	patience time.Duration    // with a reply while setting up

	decoder meter.Decoder
	steady  map[int]*meter.Steady // by column
	repeats *meter.Repeats        // nil: each frame is a conversion of its own
	battery map[int]bool

	byteTime time.Duration
	buf      []byte
	chunks   []listenChunk // what buf came in by
	last     time.Time     // when bytes came last
	floor    time.Time     // before which no further frame began
	cut      bool          // up to the first end of a line, its beginning may be missing
	garbage  int           // bytes since the last frame that belonged to none
	poll     listenPoll
}

// listenChunk is the part of one Read that is still in the buffer.
type listenChunk struct {
	n  int
	at time.Time
}

func newListener(s Source, start time.Time, emit func(Event)) (*listener, port.Settings, error) {
	bad := func(format string, args ...any) (*listener, port.Settings, error) {
		return nil, port.Settings{}, fmt.Errorf("%s: %w: "+format, append([]any{s.Address, ErrSource}, args...)...)
	}
	f, ok := meter.Find(s.Speaks)
	if !ok {
		return bad("format %q is none of %s", s.Speaks, meter.Names())
	}
	if !(s.Every >= 0 && s.Every < 1e6) {
		return bad("%g s between questions", s.Every)
	}
	text := s.Settings
	if text == "" {
		text = f.Settings
	}
	settings, err := port.ParseSettings(text)
	if err != nil {
		return nil, settings, fmt.Errorf("%s: %w", s.Address, err)
	}
	l := &listener{Source: s, format: f, start: start, emit: emit, now: time.Now, patience: setUpReply,
		recorded: strings.HasPrefix(s.Address, "log:"),
		steady:   map[int]*meter.Steady{}, battery: map[int]bool{}}
	if len(s.Columns) == 0 {
		return bad("no meter on the line")
	}
	l.Columns = append([]SourceColumn(nil), s.Columns...)
	for i := range l.Columns {
		c := &l.Columns[i]
		if c.Column == 0 {
			c.Column = 1
		}
		switch {
		case c.Column < 1 || !f.Lines && f.Name != "stx" && c.Column > 1:
			return bad("%s has no column %d", f.Name, c.Column)
		case l.steady[c.Column] != nil:
			return bad("two meters on column %d", c.Column)
		}
		l.steady[c.Column] = meter.NewSteady(f)
	}
	ask := s.Ask
	if ask == "" {
		ask = f.Ask
	}
	if ask != "" {
		l.question = []byte(ask)
		if f.Lines && !bytes.HasSuffix(l.question, []byte("\n")) {
			l.question = append(l.question, '\n')
		}
	}
	l.Options.Question = strings.TrimSpace(ask)
	if l.decoder, err = f.New(l.Options); err != nil {
		return nil, settings, fmt.Errorf("%s: %w", s.Address, err)
	}
	// A line of text is written for a reading, a reply is the answer to a question;
	// only FETCh? brings the last reading, even if that was told before.
	if fetch := len(ask) >= 4 && strings.EqualFold(ask[:4], "FETC"); fetch || len(l.question) == 0 && !f.Lines {
		l.repeats = meter.NewRepeats(f)
	}
	l.poll.expect = listenExpected(s.Setup)
	return l, settings, nil
}

func (l *listener) event(at time.Time) Event {
	return Event{At: at.Sub(l.start).Seconds(), Line: l.Address, Meter: l.Columns[0].Meter, Role: l.Columns[0].Role}
}

func (l *listener) fail(at time.Time, err error) {
	e := l.event(at)
	e.Err = err
	l.emit(e)
}

package acquire

import (
	"bytes"
	"fmt"
	"time"

	"gatesill/acquire/meter"
	"gatesill/acquire/port"
	"gatesill/store/record"
)

const (
	listenQuiet   = 250 * time.Millisecond // silence after which a frame is not continued, beside its own time: adapters and networks pause
	listenLine    = time.Second            // the same of a line, which may be printed piece by piece
	listenGarbage = 256                    // bytes without a frame that are told
)

// Opened sets the instrument up and asks for the first time.
func (l *listener) Opened(c port.Conn, at time.Time) error {
	l.reset()
	l.byteTime = c.ByteTime()
	if len(l.Setup) > 0 && !l.recorded {
		if err := l.setUp(c); err != nil {
			return err
		}
		at = l.now()
	}
	l.cut, l.floor = l.format.Lines && len(l.question) == 0, at
	e := l.event(at)
	e.Opened = true
	l.emit(e)
	return l.tick(c, at)
}

// Lost tells that the line failed. What was begun on it is forgotten.
func (l *listener) Lost(err error, at time.Time) {
	l.reset()
	e := l.event(at)
	e.Lost, e.Err = true, err
	l.emit(e)
}

func (l *listener) reset() {
	l.forget()
	l.poll.asked, l.poll.drain, l.poll.due, l.poll.misses = false, time.Time{}, time.Time{}, 0
	l.garbage = 0
	if l.repeats != nil {
		l.repeats.Lost()
	}
}

// forget drops what came in and belongs to no frame yet.
func (l *listener) forget() {
	l.buf, l.chunks = l.buf[:0], l.chunks[:0]
	// It was made once with these options, so it can be made again; a decoder may
	// know of a line whose end is missing.
	l.decoder, _ = l.format.New(l.Options)
}

// Bytes takes what one Read brought.
func (l *listener) Bytes(c port.Conn, b []byte, at time.Time) error {
	if l.draining(at) {
		l.late(at)
		return l.tick(c, at)
	}
	l.silence(at)
	l.last = at
	if l.cut {
		i := bytes.IndexAny(b, "\r\n")
		if i < 0 {
			return l.tick(c, at)
		}
		b, l.cut = b[i:], false
	}
	l.buf = append(l.buf, b...)
	l.chunks = append(l.chunks, listenChunk{len(b), at})
	l.scan(false)
	return l.tick(c, at)
}

// Idle gives up what is not continued, and asks.
func (l *listener) Idle(c port.Conn, at time.Time) error {
	l.silence(at)
	return l.tick(c, at)
}

// silence gives up the beginning of a frame when it was not continued for so long
// that what comes next is another one: two halves may fit together and be wrong.
func (l *listener) silence(at time.Time) {
	if len(l.buf) == 0 {
		return
	}
	quiet := listenQuiet + 2*time.Duration(l.format.Length)*l.byteTime
	if l.format.Lines {
		quiet = listenLine
	}
	if at.Sub(l.last) >= quiet {
		l.scan(true)
	}
}

func (l *listener) scan(quiet bool) {
	for {
		skip, n, readings, err := l.decoder.Scan(l.buf, quiet)
		if skip > 0 {
			l.skip(skip)
		}
		if n == 0 {
			break
		}
		l.garbage = 0
		at := l.began()
		frame := bytes.Clone(l.buf[:n])
		l.drop(n)
		l.frame(frame, at, readings, err)
	}
	if len(l.buf) == 0 {
		l.buf, l.chunks = l.buf[:0], l.chunks[:0]
	}
}

// began is when the first byte in the buffer began on the wire, at the latest: not
// before the line was open, the question was asked, or the frame before began. Reads
// that were held up give times that would go back.
func (l *listener) began() time.Time {
	at := l.chunks[0].at.Add(-time.Duration(l.chunks[0].n) * l.byteTime)
	if at.Before(l.floor) {
		at = l.floor
	}
	l.floor = at
	return at
}

// skip drops garbage, and tells of it when it is so much that the line's settings or
// the format must be wrong.
func (l *listener) skip(n int) {
	before := l.garbage / listenGarbage
	l.garbage += n
	if l.garbage/listenGarbage > before {
		l.fail(l.chunks[0].at, fmt.Errorf("%s: %w in %d bytes as %s, the last % X: are format and line settings those of the meter?",
			l.Address, ErrNoFrame, l.garbage, l.format.Name, l.buf[max(0, n-16):n]))
	}
	l.drop(n)
}

func (l *listener) drop(n int) {
	l.buf = append(l.buf[:0], l.buf[n:]...)
	i := 0
	for ; i < len(l.chunks) && n >= l.chunks[i].n; i++ {
		n -= l.chunks[i].n
	}
	l.chunks = append(l.chunks[:0], l.chunks[i:]...)
	if n > 0 {
		l.chunks[0].n -= n
	}
}

// frame tells of one frame.
func (l *listener) frame(frame []byte, at time.Time, readings []meter.Reading, err error) {
	l.replied()
	if err == nil {
		err = l.complete(frame, readings)
	}
	if err != nil {
		l.fail(at, fmt.Errorf("%s: %w", l.Address, err))
		return
	}
	repeat := l.repeats != nil && l.repeats.Judge(frame, at)
	e := l.event(at)
	for _, c := range l.Columns {
		for _, r := range readings {
			if r.Column != c.Column {
				continue
			}
			e.Readings = append(e.Readings, l.reading(c, r, e.At, frame, repeat))
			if r.LowBatt && !l.battery[c.Column] {
				l.fail(at, fmt.Errorf("%s: %s: %w", l.Address, c.Meter, ErrBattery))
			}
			l.battery[c.Column] = r.LowBatt
		}
	}
	if len(e.Readings) > 0 {
		e.Meter, e.Role = e.Readings[0].Meter, e.Readings[0].Role
		l.emit(e)
	}
}

// complete refuses a line that ends before a wanted column.
func (l *listener) complete(frame []byte, readings []meter.Reading) error {
	if !l.format.Lines {
		return nil // a display of several
	}
	for _, c := range l.Columns {
		if c.Column > len(readings) {
			return fmt.Errorf("%w: %.60q has %d columns, %s is to be in column %d", meter.ErrFrame, frame, len(readings), c.Meter, c.Column)
		}
	}
	return nil
}

func (l *listener) reading(c SourceColumn, r meter.Reading, at float64, frame []byte, repeat bool) record.Reading {
	refused := r.Refusal(c.Unit)
	if repeat {
		if refused == "" {
			refused = "repeat"
		}
	} else if why := l.steady[c.Column].Judge(r); refused == "" {
		refused = why
	}
	out := record.Reading{Role: c.Role, Meter: c.Meter, At: at, Unit: r.Unit, State: r.State, Raw: frame, Refused: refused}
	if out.Unit == "" {
		out.Unit = c.Unit
	}
	if r.State == "" {
		out.Value = record.Known(r.Value)
	}
	if r.Digit > 0 {
		out.Digit = record.Known(r.Digit)
	}
	return out
}

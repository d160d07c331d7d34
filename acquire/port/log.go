package port

import (
	"bufio"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"math"
	"net/url"
	"os"
	"strconv"
	"strings"
	"time"
)

// maxLogSize bounds a recorded log: a week of three meters at 4 frames of 14 bytes a
// second is far less.
const maxLogSize = 512 << 20

// chunk is what came in at once.
type chunk struct {
	at    time.Duration // from the zero of the log
	bytes []byte
}

// logLine plays a recorded log. What is written to it is taken and forgotten, so that
// a polled meter's log can be played to a program that polls.
type logLine struct {
	line
	chunks []chunk
	next   int // first chunk not wholly read
	used   int // bytes of it that were read
	speed  float64
	start  time.Time

	gone chan struct{} // closed by Close
}

func openLog(address, target string, readTimeout time.Duration) (Conn, error) {
	path, query, _ := strings.Cut(target, "?")
	speed, err := logSpeed(query)
	if err != nil {
		return nil, fmt.Errorf("%s: %w: %w", address, ErrSettings, err)
	}
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("%s: %w: %w", address, ErrAbsent, err)
	}
	defer f.Close()
	if st, err := f.Stat(); err != nil {
		return nil, fmt.Errorf("%s: %w: %w", address, ErrAbsent, err)
	} else if !st.Mode().IsRegular() || st.Size() > maxLogSize {
		return nil, fmt.Errorf("%s: %w: it is no file, or has more than %d bytes", address, ErrAbsent, maxLogSize)
	}
	chunks, err := readLog(path, f)
	if err != nil {
		return nil, err
	}
	return &logLine{
		line:   line{address: address, readTimeout: readTimeout},
		chunks: chunks, speed: speed, start: time.Now(), gone: make(chan struct{}),
	}, nil
}

func logSpeed(query string) (float64, error) {
	values, err := url.ParseQuery(query)
	if err != nil {
		return 0, err
	}
	speed := 1.0
	for key, v := range values {
		if key != "speed" || len(v) != 1 {
			return 0, fmt.Errorf("after the ? of a log only one speed= may stand, not %q", query)
		}
		if speed, err = strconv.ParseFloat(v[0], 64); err != nil || !(speed > 0) || math.IsInf(speed, 0) {
			return 0, fmt.Errorf("speed=%s is no number above 0", v[0])
		}
	}
	return speed, nil
}

// readLog reads lines of SECONDS HEX-BYTES; the bytes may be spaced, # begins a
// comment. The seconds may not go back. Errors name the line.
func readLog(name string, r io.Reader) ([]chunk, error) {
	var chunks []chunk
	sc := bufio.NewScanner(r)
	sc.Buffer(nil, 1<<20)
	n := 0
	bad := func(format string, args ...any) error {
		return fmt.Errorf("%s:%d: %w: %s", name, n, ErrSettings, fmt.Sprintf(format, args...))
	}
	for sc.Scan() {
		n++
		text, _, _ := strings.Cut(sc.Text(), "#")
		fields := strings.Fields(text)
		if len(fields) == 0 {
			continue
		}
		s, err := strconv.ParseFloat(fields[0], 64)
		if err != nil || !(s >= 0) || s > 1e9 {
			return nil, bad("%q are no seconds from 0 on", fields[0])
		}
		at := time.Duration(math.Round(s * float64(time.Second)))
		if len(chunks) > 0 && at < chunks[len(chunks)-1].at {
			return nil, bad("%s s is earlier than the line before", fields[0])
		}
		b, err := hex.DecodeString(strings.Join(fields[1:], ""))
		if err != nil {
			return nil, bad("%v", err)
		}
		if len(b) == 0 {
			return nil, bad("no bytes after the time")
		}
		chunks = append(chunks, chunk{at, b})
	}
	n++
	if err := sc.Err(); err != nil {
		return nil, bad("%v", err)
	}
	return chunks, nil
}

// due is when the next chunk comes in; false at the end of the log.
func (l *logLine) due() (time.Time, bool) {
	if l.next == len(l.chunks) {
		return time.Time{}, false
	}
	return l.start.Add(time.Duration(float64(l.chunks[l.next].at) / l.speed)), true
}

func (l *logLine) Read(p []byte) (int, error) {
	if err := l.state(); err != nil || len(p) == 0 {
		return 0, err
	}
	due, ok := l.due()
	if !ok {
		return 0, fmt.Errorf("%s: %w", l.address, ErrEnd)
	}
	wait := time.Until(due)
	t := time.NewTimer(min(wait, l.readTimeout))
	defer t.Stop()
	select {
	case <-l.gone:
		return 0, l.failed(os.ErrClosed)
	case <-t.C:
	}
	if wait > l.readTimeout {
		return 0, nil
	}
	n := copy(p, l.chunks[l.next].bytes[l.used:])
	if l.used += n; l.used == len(l.chunks[l.next].bytes) {
		l.next, l.used = l.next+1, 0
	}
	return n, nil
}

func (l *logLine) Write(p []byte) (int, error) {
	if err := l.state(); err != nil {
		return 0, err
	}
	return len(p), nil
}

// Discard passes over what is due by now.
func (l *logLine) Discard() error {
	for now := time.Now(); ; l.next, l.used = l.next+1, 0 {
		if due, ok := l.due(); !ok || due.After(now) {
			return l.state()
		}
	}
}

func (l *logLine) DiscardOutput() error { return l.state() }

func (l *logLine) Close() error {
	if l.shut() {
		close(l.gone)
	}
	return nil
}

// Recorder writes what comes in on a line as a log that "log:PATH" plays.
type Recorder struct {
	w    io.Writer
	zero time.Time
	last time.Duration
}

// NewRecorder writes to w, with times that count from zero. Recorders of several
// lines that are to be played together get one zero.
func NewRecorder(w io.Writer, zero time.Time) *Recorder { return &Recorder{w: w, zero: zero} }

// Bytes writes what came in at a time. A time before the last one, or before the
// zero, is written as that, since a log cannot go back.
func (r *Recorder) Bytes(b []byte, at time.Time) error {
	if len(b) == 0 {
		return nil
	}
	r.last = max(r.last, at.Sub(r.zero))
	_, err := fmt.Fprintf(r.w, "%.6f % X\n", r.last.Seconds(), b)
	return err
}

// Note writes a comment, each line of it one.
func (r *Recorder) Note(text string) error {
	var errs []error
	for _, l := range strings.Split(strings.TrimRight(text, "\n"), "\n") {
		_, err := fmt.Fprintf(r.w, "# %s\n", strings.ReplaceAll(l, "\r", ""))
		errs = append(errs, err)
	}
	return errors.Join(errs...)
}

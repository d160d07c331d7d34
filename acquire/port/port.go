// Package port opens the lines that instruments hang on: serial lines, TCP
// sockets, USBTMC devices of the kernel, and recorded logs. One goroutine owns a
// line and does all reading and writing on it.
//
// It knows nothing of what is said on a line, and it never opens a device only to
// find out what it is.
package port

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"time"
)

// The errors of lines. Every error of this package names the line.
var (
	ErrClosed   = errors.New("line is closed")
	ErrBusy     = errors.New("line is in use by another program")
	ErrDenied   = errors.New("no right to open the line") // the text says which group and which command
	ErrAbsent   = errors.New("no such line")
	ErrLost     = errors.New("line was lost")       // unplugged, or the far end went
	ErrStuck    = errors.New("line takes no bytes") // the write time-out passed
	ErrEnd      = errors.New("recorded log is at its end")
	ErrSettings = errors.New("line settings")
)

// Conn is one open line, used by the goroutine that opened it; only Close may come
// from another one.
type Conn interface {
	// Read waits for bytes at most for the read time-out and then gives 0, nil.
	// A line that was lost stays lost: every later Read and Write says so.
	Read(p []byte) (int, error)
	// Write sends p, or fails with [ErrStuck] when the line does not take it in
	// time: a second and what its bytes need on the wire. After Close it fails
	// with [ErrClosed] and sends nothing.
	Write(p []byte) (int, error)
	// Discard drops what came in and was not read.
	Discard() error
	// DiscardOutput drops what was written and not sent.
	DiscardOutput() error
	Close() error
	// ByteTime is how long one byte takes on the wire, 0 where there is none.
	ByteTime() time.Duration
	// Address is the line's name as it was given.
	Address() string
}

// Handler is told what happens on a line; all calls come from the goroutine that
// owns it, with times of the monotonic clock.
type Handler interface {
	// Opened may hold a conversation. An error closes the line; it is tried again.
	Opened(c Conn, at time.Time) error
	// Bytes gives what one Read brought, and when that Read returned. b is valid
	// during the call only. An error closes the line; it is tried again.
	Bytes(c Conn, b []byte, at time.Time) error
	// Idle is called when the read time-out passed with nothing. An error closes
	// the line; it is tried again.
	Idle(c Conn, at time.Time) error
	// Lost is called when the line failed or could not be opened. Keep tries again
	// after a growing delay, except after [ErrEnd] and [ErrSettings].
	Lost(err error, at time.Time)
}

// Options of [Keep]; the zero value is right for live work.
type Options struct {
	ReadTimeout time.Duration // 0: 20 ms
	FirstRetry  time.Duration // 0: 0.2 s; doubles up to
	LastRetry   time.Duration // 0: 3 s
	Settle      time.Duration // quiet time after opening before bytes count; 0: by the kind of line; negative: none
}

const (
	defaultReadTimeout = 20 * time.Millisecond
	writeTimeout       = time.Second // beside the bytes' own time on the wire
	dialTimeout        = 3 * time.Second
)

// Open opens a line. An address is
//
//   - the path of a serial line: /dev/serial/by-id/..., /dev/ttyUSB0, /dev/cu.usbserial-1, COM3
//   - tcp:HOST or tcp:HOST:PORT; the port is 5025 when not said
//   - usbtmc:/dev/usbtmc0, or /dev/usbtmc0 alone (Linux)
//   - log:PATH or log:PATH?speed=10, a recorded log played at its own pace
//
// The settings matter to serial lines only. The read time-out is 20 ms.
func Open(address string, s Settings) (Conn, error) {
	return open(context.Background(), address, s, defaultReadTimeout)
}

// opener opens a line; tests of [Keep] have their own.
type opener func(ctx context.Context, address string, s Settings, readTimeout time.Duration) (Conn, error)

func open(ctx context.Context, address string, s Settings, readTimeout time.Duration) (Conn, error) {
	s, err := s.filled()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", address, err)
	}
	switch k, rest := kindOf(address); k {
	case kindTCP:
		return openTCP(ctx, address, rest, readTimeout)
	case kindTMC:
		return openTMC(address, rest, readTimeout)
	case kindLog:
		return openLog(address, rest, readTimeout)
	default:
		if rest == "" {
			return nil, fmt.Errorf("%w: the address is empty", ErrSettings)
		}
		return openSerial(address, s, readTimeout)
	}
}

// The kinds of lines, as [Found] names them.
const (
	kindSerial = "serial"
	kindTCP    = "tcp"
	kindTMC    = "usbtmc"
	kindLog    = "log"
)

// kindOf gives the kind of an address, and the address without its prefix.
func kindOf(address string) (kind, rest string) {
	for _, k := range []string{kindTCP, kindTMC, kindLog} {
		if rest, ok := strings.CutPrefix(address, k+":"); ok {
			return k, rest
		}
	}
	if strings.HasPrefix(address, "/dev/usbtmc") {
		return kindTMC, address
	}
	return kindSerial, address
}

// writeLimit is how long a write of n bytes may take.
func writeLimit(n int, byteTime time.Duration) time.Duration {
	return writeTimeout + time.Duration(n)*byteTime
}

// Expect tells a line how long the next reply may take. Only lines on which one Read
// waits for a whole reply (USBTMC) care; on the others it does nothing.
func Expect(c Conn, d time.Duration) error {
	if e, ok := c.(interface{ Expect(time.Duration) error }); ok {
		return e.Expect(d)
	}
	return nil
}

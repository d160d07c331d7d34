// Package port opens the lines that instruments hang on: serial lines, TCP
// sockets, USBTMC devices of the kernel, and recorded logs. One goroutine owns a
// line and does all reading and writing on it.
//
// It knows nothing of what is said on a line, and it never opens a device only to
// find out what it is.
package port

import (
	"errors"
	"time"
)

// The errors of lines. Every error of this package names the line.
var (
	ErrClosed   = errors.New("line is closed")
	ErrBusy     = errors.New("line is in use by another program")
	ErrDenied   = errors.New("no right to open the line") // the text says which group and which command
	ErrAbsent   = errors.New("no such line")
	ErrEnd      = errors.New("recorded log is at its end")
	ErrSettings = errors.New("line settings")
)

// Conn is one open line, used by the goroutine that opened it; only Close may come
// from another one.
type Conn interface {
	// Read waits for bytes at most for the read time-out and then gives 0, nil.
	Read(p []byte) (int, error)
	// Write sends p. After Close it fails with [ErrClosed] and sends nothing.
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
	// during the call only.
	Bytes(c Conn, b []byte, at time.Time) error
	// Idle is called when the read time-out passed with nothing.
	Idle(c Conn, at time.Time) error
	// Lost is called when the line failed or could not be opened. Keep tries again
	// after a growing delay, except after [ErrEnd].
	Lost(err error, at time.Time)
}

// Options of [Keep]; the zero value is right for live work.
type Options struct {
	ReadTimeout time.Duration // 0: 20 ms
	FirstRetry  time.Duration // 0: 0.2 s; doubles up to
	LastRetry   time.Duration // 0: 3 s
	Settle      time.Duration // quiet time after opening before bytes count; 0: by the kind of line
}

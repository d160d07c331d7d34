package port

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"time"

	"go.bug.st/serial"
	"golang.org/x/sys/unix"
)

// tty is a serial line on Linux. The library sets it up; reading and writing go
// through a descriptor of our own that never blocks, so that both have deadlines,
// Close releases both, no descriptor number is used after it was closed, and none is
// too great for select(2).
type tty struct {
	line
	f     *os.File
	modem bool
}

func openSerial(address string, s Settings, readTimeout time.Duration) (Conn, error) {
	m, err := mode(s)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", address, err)
	}
	device, err := filepath.EvalSymlinks(address)
	if err != nil {
		return nil, openError(address, address, err)
	}
	f, err := openDevice(address, device)
	if err != nil {
		return nil, err
	}
	t := &tty{line: line{address: address, readTimeout: readTimeout, byteTime: s.ByteTime()}, f: f}
	if err := t.setUp(device, m, s); err != nil {
		closeDevice(f)
		return nil, err
	}
	return t, nil
}

// openDevice opens a character device for ourselves alone. The lock is on the device
// itself, so that it holds between users, for root too, and dies with the process.
func openDevice(address, device string) (*os.File, error) {
	if st, err := os.Stat(device); err != nil {
		return nil, openError(address, device, err)
	} else if st.Mode()&os.ModeCharDevice == 0 {
		return nil, fmt.Errorf("%s: %w: it is not a device", address, ErrAbsent)
	}
	f, err := os.OpenFile(device, os.O_RDWR|unix.O_NOCTTY|unix.O_NONBLOCK, 0)
	switch {
	case errors.Is(err, unix.EBUSY):
		return nil, busy(address, device)
	case err != nil:
		return nil, openError(address, device, err)
	}
	var locked error
	if err := control(f, func(fd int) { locked = unix.Flock(fd, unix.LOCK_EX|unix.LOCK_NB) }); err != nil {
		f.Close()
		return nil, openError(address, device, err)
	}
	if errors.Is(locked, unix.EWOULDBLOCK) {
		f.Close()
		return nil, busy(address, device)
	}
	return f, nil // a device that knows no locks is used without
}

// closeDevice gives the lock back before closing: a process that is just being started
// may hold a copy of the descriptor, and the lock with it, for a moment longer.
func closeDevice(f *os.File) error {
	control(f, func(fd int) { unix.Flock(fd, unix.LOCK_UN) })
	return f.Close()
}

func busy(address, device string) error {
	if who := holders(device); who != "" {
		return fmt.Errorf("%s: %w: %s has it open", address, ErrBusy, who)
	}
	return fmt.Errorf("%s: %w", address, ErrBusy)
}

// setUp has the library set the line's form, and takes the line for this program.
func (t *tty) setUp(device string, m *serial.Mode, s Settings) error {
	var notTTY, deadline error
	var exclusive int
	err := control(t.f, func(fd int) {
		_, notTTY = unix.IoctlGetTermios(fd, unix.TCGETS)
		exclusive, _ = unix.IoctlGetInt(fd, unix.TIOCGEXCL)
	})
	if err = errors.Join(err, notTTY); err != nil {
		return fmt.Errorf("%s: %w: it is not a serial line (%w)", t.address, ErrAbsent, err)
	}
	if exclusive != 0 { // which stops everyone but root
		return busy(t.address, device)
	}
	p, err := serial.Open(device, m)
	if err != nil {
		return openError(t.address, device, err)
	}
	t.modem = setModemLines(p, s)
	if err := p.Close(); err != nil {
		return openError(t.address, device, err)
	}
	if t.modem {
		// On lines without modem lines, which are pseudo-terminals, the mark would
		// outlive a killed program and lock the next one out.
		t.exclusive(true)
	}
	if deadline = t.f.SetReadDeadline(time.Time{}); deadline != nil {
		return fmt.Errorf("%s: %w: the system cannot wait for it (%w)", t.address, ErrAbsent, deadline)
	}
	return nil
}

func (t *tty) exclusive(on bool) {
	request := uint(unix.TIOCNXCL)
	if on {
		request = unix.TIOCEXCL
	}
	control(t.f, func(fd int) { unix.IoctlSetInt(fd, request, 0) })
}

func (t *tty) hasModemLines() bool { return t.modem }

func (t *tty) Read(p []byte) (int, error) {
	if err := t.state(); err != nil || len(p) == 0 {
		return 0, err
	}
	if err := t.f.SetReadDeadline(time.Now().Add(t.readTimeout)); err != nil {
		return 0, t.failed(err)
	}
	n, err := t.f.Read(p)
	if n > 0 || errors.Is(err, os.ErrDeadlineExceeded) {
		return n, nil
	}
	return 0, t.failed(err)
}

func (t *tty) Write(p []byte) (int, error) {
	if err := t.state(); err != nil {
		return 0, err
	}
	limit := writeLimit(len(p), t.byteTime)
	if err := t.f.SetWriteDeadline(time.Now().Add(limit)); err != nil {
		return 0, t.failed(err)
	}
	n, err := t.f.Write(p)
	if errors.Is(err, os.ErrDeadlineExceeded) {
		return n, t.stuck(n, len(p), limit)
	}
	if err != nil {
		return n, t.failed(err)
	}
	return n, nil
}

func (t *tty) Discard() error       { return t.flush(unix.TCIFLUSH) }
func (t *tty) DiscardOutput() error { return t.flush(unix.TCOFLUSH) }

func (t *tty) flush(queue int) error {
	if err := t.state(); err != nil {
		return err
	}
	var flushed error
	if err := control(t.f, func(fd int) { flushed = unix.IoctlSetInt(fd, unix.TCFLSH, queue) }); err != nil {
		return t.failed(err)
	}
	if flushed != nil {
		return t.failed(flushed)
	}
	return nil
}

func (t *tty) Close() error {
	if !t.shut() {
		return nil
	}
	if t.modem {
		t.exclusive(false)
	}
	if t.wasStuck.Load() { // or the kernel would wait up to 30 s for the bytes to go out
		control(t.f, func(fd int) { unix.IoctlSetInt(fd, unix.TCFLSH, unix.TCOFLUSH) })
	}
	if err := closeDevice(t.f); err != nil {
		return fmt.Errorf("%s: %w", t.address, err)
	}
	return nil
}

// control runs f on the descriptor, which stays open meanwhile.
func control(file *os.File, f func(fd int)) error {
	raw, err := file.SyscallConn()
	if err != nil {
		return err
	}
	return raw.Control(func(fd uintptr) { f(int(fd)) })
}

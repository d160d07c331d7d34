package port

import (
	"fmt"
	"os"
	"testing"
	"time"

	"go.bug.st/serial"
	"golang.org/x/sys/unix"
)

// pty makes a pseudo-terminal: the far end, and the name of the line.
func pty(t testing.TB) (far *os.File, device string) {
	t.Helper()
	far, err := os.OpenFile("/dev/ptmx", os.O_RDWR|unix.O_NOCTTY|unix.O_NONBLOCK, 0)
	if err != nil {
		t.Skipf("no pseudo-terminals here: %v", err)
	}
	t.Cleanup(func() { far.Close() })
	var n int
	var unlock, number error
	if err := control(far, func(fd int) {
		unlock = unix.IoctlSetPointerInt(fd, unix.TIOCSPTLCK, 0)
		n, number = unix.IoctlGetInt(fd, unix.TIOCGPTN)
	}); err != nil || unlock != nil || number != nil {
		t.Fatal(err, unlock, number)
	}
	return far, fmt.Sprintf("/dev/pts/%d", n)
}

// quick keeps the time short that a full line is given.
var quick = Settings{Baud: 4_000_000}

// ways are the two ways to a serial line: the one that Linux has, and the one that
// the other systems have, which Linux can go too.
var ways = []struct {
	name string
	open func(device string, readTimeout time.Duration) (Conn, error)
}{
	{"own", func(device string, readTimeout time.Duration) (Conn, error) {
		s, _ := quick.filled()
		return openSerial(device, s, readTimeout)
	}},
	{"library", func(device string, readTimeout time.Duration) (Conn, error) {
		s, _ := quick.filled()
		m, err := mode(s)
		if err != nil {
			return nil, err
		}
		p, err := serial.Open(device, m)
		if err != nil {
			return nil, openError(device, device, err)
		}
		return newLibraryLine(device, p, s, readTimeout)
	}},
}

// bothWays runs a test on a fresh line of either way.
func bothWays(t *testing.T, readTimeout time.Duration, f func(t *testing.T, far *os.File, c Conn)) {
	t.Helper()
	for _, w := range ways {
		t.Run(w.name, func(t *testing.T) {
			t.Parallel()
			far, device := pty(t)
			c, err := w.open(device, readTimeout)
			if err != nil {
				t.Fatal(err)
			}
			t.Cleanup(func() { c.Close() })
			f(t, far, c)
		})
	}
}

//go:build linux || darwin

package rehearsal

import (
	"fmt"
	"os"
	"syscall"

	"golang.org/x/sys/unix"
)

// terminals says why there can be none.
func terminals() error { return nil }

// openTerminal makes a new pseudo-terminal.
func openTerminal() (*terminal, error) {
	fd, err := unix.Open("/dev/ptmx", unix.O_RDWR|unix.O_NOCTTY|unix.O_CLOEXEC|unix.O_NONBLOCK, 0)
	if err != nil {
		return nil, fmt.Errorf("%w: /dev/ptmx: %w", ErrNoTerminals, err)
	}
	path, err := unlock(fd)
	if err == nil {
		err = raw(fd)
	}
	if err == nil {
		// Once opened and closed, the system tells whether anybody listens.
		var s int
		if s, err = unix.Open(path, unix.O_RDWR|unix.O_NOCTTY|unix.O_CLOEXEC|unix.O_NONBLOCK, 0); err == nil {
			unix.Close(s)
		}
	}
	if err != nil {
		unix.Close(fd)
		return nil, fmt.Errorf("pseudo-terminal: %w", err)
	}
	return &terminal{f: os.NewFile(uintptr(fd), path), path: path}, nil
}

// raw lets all bytes through unchanged and unechoed.
func raw(fd int) error {
	t, err := unix.IoctlGetTermios(fd, getTermios)
	if err != nil {
		return err
	}
	t.Iflag, t.Oflag, t.Lflag = 0, 0, 0
	t.Cflag = t.Cflag&^(unix.CSIZE|unix.PARENB) | unix.CS8 | unix.CREAD | unix.CLOCAL
	t.Cc[unix.VMIN], t.Cc[unix.VTIME] = 1, 0
	return unix.IoctlSetTermios(fd, setTermios, t)
}

// send writes what fits without waiting, as a serial line that nobody reads loses
// bytes. It tells whether anybody has the line open at all.
func (t *terminal) send(b []byte) (n int, open bool) {
	c, err := t.f.SyscallConn()
	if err != nil {
		return 0, false
	}
	c.Control(func(fd uintptr) {
		if open = listened(fd); !open {
			return
		}
		if n, err = unix.Write(int(fd), b); err != nil {
			n = 0
		}
	})
	return n, open
}

// forget drops what was sent and not read, when nobody has the line open any more: a
// pseudo-terminal would keep it for whoever comes next, which no serial line does.
func (t *terminal) forget() {
	fd, err := unix.Open(t.path, unix.O_RDWR|unix.O_NOCTTY|unix.O_CLOEXEC|unix.O_NONBLOCK, 0)
	if err != nil {
		return
	}
	defer unix.Close(fd)
	b := make([]byte, 4096)
	for range 100 { // a bound, in case somebody has come meanwhile
		if n, err := unix.Read(fd, b); err != nil || n == 0 {
			return
		}
	}
}

// open tells whether anybody has the line open.
func (t *terminal) open() (open bool) {
	if c, err := t.f.SyscallConn(); err == nil {
		c.Control(func(fd uintptr) { open = listened(fd) })
	}
	return open
}

// listened asks the system; one that cannot tell counts as a yes.
func listened(fd uintptr) bool {
	p := []unix.PollFd{{Fd: int32(fd), Events: unix.POLLOUT}}
	_, err := unix.Poll(p, 0)
	return err != nil || p[0].Revents&unix.POLLHUP == 0
}

// apart starts a process in a group of its own, so that an interrupt from the
// keyboard is for the program under rehearsal only.
func apart() *syscall.SysProcAttr { return &syscall.SysProcAttr{Setpgid: true} }

// cpuSeconds is the time this process has had of the processor.
func cpuSeconds() float64 {
	var u unix.Rusage
	if unix.Getrusage(unix.RUSAGE_SELF, &u) != nil {
		return 0
	}
	return float64(u.Utime.Sec+u.Stime.Sec) + float64(u.Utime.Usec+u.Stime.Usec)*1e-6
}

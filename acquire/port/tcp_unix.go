//go:build unix

package port

import (
	"errors"
	"io"
	"net"
	"syscall"
	"time"
)

// arrived reads what has arrived without waiting; 0, nil when that is nothing.
func arrived(c *net.TCPConn, p []byte) (n int, err error) {
	if err := c.SetReadDeadline(time.Time{}); err != nil {
		return 0, err
	}
	raw, err := c.SyscallConn()
	if err != nil {
		return 0, err
	}
	var got error
	err = raw.Read(func(fd uintptr) bool {
		n, got = syscall.Read(int(fd), p)
		return true // done, whatever it was
	})
	switch {
	case err != nil:
		return 0, err
	case errors.Is(got, syscall.EAGAIN) || errors.Is(got, syscall.EINTR):
		return 0, nil
	case got != nil:
		return 0, got
	case n == 0:
		return 0, io.EOF
	}
	return n, nil
}

//go:build !unix

package port

import (
	"errors"
	"net"
	"os"
	"time"
)

// arrived reads what has arrived; 0, nil when that is nothing. A deadline that is over
// would keep even bytes that wait from being read, so it waits a little.
func arrived(c *net.TCPConn, p []byte) (int, error) {
	if err := c.SetReadDeadline(time.Now().Add(5 * time.Millisecond)); err != nil {
		return 0, err
	}
	n, err := c.Read(p)
	if errors.Is(err, os.ErrDeadlineExceeded) {
		err = nil
	}
	return n, err
}

//go:build !linux

package port

import (
	"fmt"
	"time"

	"go.bug.st/serial"
)

func openSerial(address string, s Settings, readTimeout time.Duration) (Conn, error) {
	m, err := mode(s)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", address, err)
	}
	p, err := serial.Open(address, m)
	if err != nil {
		return nil, openError(address, address, err)
	}
	c, err := newLibraryLine(address, p, s, readTimeout)
	if err != nil {
		p.Close()
		return nil, openError(address, address, err)
	}
	return c, nil
}

// holders is not known here.
func holders(string) string { return "" }

//go:build !linux

package port

import (
	"fmt"
	"time"
)

func isTMCTimeout(error) bool { return false }

func openTMC(address, _ string, _ time.Duration) (Conn, error) {
	return nil, fmt.Errorf("%s: %w: USBTMC devices can be opened on Linux only", address, ErrAbsent)
}

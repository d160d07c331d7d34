//go:build linux || darwin || freebsd || openbsd || netbsd || dragonfly

package job

import (
	"errors"
	"os"
	"syscall"
)

func openAlone(path string) (*os.File, error) {
	f, err := os.OpenFile(path, os.O_RDWR|os.O_CREATE, 0o600)
	if err != nil {
		return nil, err
	}
	if err := syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB); err != nil {
		f.Close()
		if errors.Is(err, syscall.EWOULDBLOCK) {
			return nil, errHeld
		}
		return nil, err
	}
	return f, nil
}

// removeOpen removes the file first, while nobody else can have its lock.
func removeOpen(f *os.File, path string) {
	os.Remove(path)
	f.Close()
}

//go:build !linux && !darwin && !freebsd && !openbsd && !netbsd && !dragonfly && !windows

package job

import (
	"errors"
	"os"
)

func openAlone(string) (*os.File, error) { return nil, errors.ErrUnsupported }

func removeOpen(f *os.File, path string) {
	f.Close()
	os.Remove(path)
}

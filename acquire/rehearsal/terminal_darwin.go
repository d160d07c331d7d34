package rehearsal

import (
	"bytes"
	"unsafe"

	"golang.org/x/sys/unix"
)

const getTermios, setTermios = unix.TIOCGETA, unix.TIOCSETA

func unlock(fd int) (path string, err error) {
	var name [128]byte // what the request returns is that long
	for _, r := range []struct {
		request uint
		arg     unsafe.Pointer
	}{{unix.TIOCPTYGRANT, nil}, {unix.TIOCPTYUNLK, nil}, {unix.TIOCPTYGNAME, unsafe.Pointer(&name[0])}} {
		if _, _, e := unix.Syscall(unix.SYS_IOCTL, uintptr(fd), uintptr(r.request), uintptr(r.arg)); e != 0 {
			return "", e
		}
	}
	return string(name[:bytes.IndexByte(append(name[:], 0), 0)]), nil
}

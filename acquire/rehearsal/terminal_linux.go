package rehearsal

import (
	"fmt"

	"golang.org/x/sys/unix"
)

const getTermios, setTermios = unix.TCGETS, unix.TCSETS

func unlock(fd int) (path string, err error) {
	if err := unix.IoctlSetPointerInt(fd, unix.TIOCSPTLCK, 0); err != nil {
		return "", err
	}
	n, err := unix.IoctlGetInt(fd, unix.TIOCGPTN)
	if err != nil {
		return "", err
	}
	return fmt.Sprintf("/dev/pts/%d", n), nil
}

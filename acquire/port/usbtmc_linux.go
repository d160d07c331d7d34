package port

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"time"

	"golang.org/x/sys/unix"
)

// From the kernel's linux/usb/tmc.h: USBTMC_IOC_NR is 91, and
//
//	#define USBTMC_IOCTL_SET_TIMEOUT _IOW(USBTMC_IOC_NR, 10, __u32)
//
// with a time in milliseconds, at least 100. The number below is for the machines on which a write
// to the driver is direction 1 (amd64, 386, arm, arm64, riscv64, loong64, s390x).
const usbtmcSetTimeout = 1<<30 | 4<<16 | 91<<8 | 10

type tmcDevice struct{ *os.File }

func (d tmcDevice) setTimeout(after time.Duration) error {
	var set error
	err := control(d.File, func(fd int) {
		set = unix.IoctlSetPointerInt(fd, usbtmcSetTimeout, int(after.Milliseconds()))
	})
	return errors.Join(err, set)
}

func (d tmcDevice) Close() error { return closeDevice(d.File) }

func isTMCTimeout(err error) bool { return errors.Is(err, unix.ETIMEDOUT) }

func openTMC(address, path string, readTimeout time.Duration) (Conn, error) {
	device, err := filepath.EvalSymlinks(path)
	if err != nil {
		return nil, openError(address, path, err)
	}
	f, err := openDevice(address, device)
	if err != nil {
		return nil, err
	}
	t, err := newTMC(address, tmcDevice{f}, readTimeout)
	if err != nil {
		closeDevice(f)
		return nil, fmt.Errorf("%w (or it is no USBTMC device)", err)
	}
	return t, nil
}

package job

import (
	"errors"
	"os"
	"syscall"
)

const sharingViolation = syscall.Errno(32) // ERROR_SHARING_VIOLATION

func openAlone(path string) (*os.File, error) {
	name, err := syscall.UTF16PtrFromString(path)
	if err != nil {
		return nil, err
	}
	const alone = 0 // nobody else may open it
	h, err := syscall.CreateFile(name, syscall.GENERIC_READ|syscall.GENERIC_WRITE, alone, nil, syscall.OPEN_ALWAYS, syscall.FILE_ATTRIBUTE_NORMAL, 0)
	if errors.Is(err, sharingViolation) {
		return nil, errHeld
	}
	if err != nil {
		return nil, err
	}
	return os.NewFile(uintptr(h), path), nil
}

func removeOpen(f *os.File, path string) {
	f.Close()
	os.Remove(path)
}

package store

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"os"
	"sync"
)

// header is what the first 100 bytes of a file say (SQLite, Database File
// Format, 1.3).
type header struct {
	empty       bool
	magic       bool
	application uint32
	version     uint32
}

// check refuses a file that is not ours, is newer or has a damaged header.
func (h header) check(newest int) error {
	switch {
	case h.empty:
		return fmt.Errorf("%w: the file is empty", ErrNotOurs)
	case !h.magic && h.application == applicationID:
		return fmt.Errorf("%w: the beginning of the file is overwritten", ErrCorrupt)
	case !h.magic:
		return fmt.Errorf("%w: it is no SQLite file", ErrNotOurs)
	case h.application != applicationID:
		return fmt.Errorf("%w: it is an SQLite file of another program", ErrNotOurs)
	case h.version > uint32(newest):
		return fmt.Errorf("%w: it has form %d, this program knows %d", ErrNewer, h.version, newest)
	}
	return nil
}

// opened holds the files that this process has open as stores: on some systems
// closing any descriptor of a file drops the locks that the process holds on
// it, so the header of such a file must not be read again.
var opened struct {
	sync.Mutex
	by map[*DB]os.FileInfo
}

// look reads the header, and enters the file in opened.
func (db *DB) look() (header, error) {
	opened.Lock()
	defer opened.Unlock()
	info, err := os.Stat(db.path)
	if err != nil {
		return header{}, err
	}
	if info.IsDir() {
		return header{}, fmt.Errorf("%w: it is a folder", ErrNotOurs)
	}
	if !info.Mode().IsRegular() {
		return header{}, fmt.Errorf("%w: it is no ordinary file", ErrNotOurs)
	}
	known := false
	for _, other := range opened.by {
		known = known || os.SameFile(other, info)
	}
	h := header{magic: true, application: applicationID}
	if !known {
		if h, err = readHeader(db.path); err != nil {
			return header{}, err
		}
	}
	db.enter(info)
	return h, nil
}

// enter notes that this process has the file open; opened must be locked.
func (db *DB) enter(info os.FileInfo) {
	if opened.by == nil {
		opened.by = map[*DB]os.FileInfo{}
	}
	opened.by[db] = info
}

func readHeader(path string) (header, error) {
	f, err := os.Open(path)
	if err != nil {
		return header{}, err
	}
	defer f.Close()
	b := make([]byte, 100)
	n, err := io.ReadFull(f, b)
	if err != nil && !errors.Is(err, io.EOF) && !errors.Is(err, io.ErrUnexpectedEOF) {
		return header{}, err
	}
	return header{
		empty:       n == 0,
		magic:       n == len(b) && string(b[:16]) == "SQLite format 3\x00",
		version:     binary.BigEndian.Uint32(b[60:]),
		application: binary.BigEndian.Uint32(b[68:]),
	}, nil
}

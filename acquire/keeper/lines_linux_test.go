package keeper

import (
	"bytes"
	"errors"
	"os"
	"strconv"
	"sync"
	"testing"
	"time"

	"golang.org/x/sys/unix"
)

// openPair opens a pseudo-terminal: our end and the name of the other one.
func openPair(t *testing.T) (*os.File, string) {
	t.Helper()
	f, err := os.OpenFile("/dev/ptmx", os.O_RDWR|unix.O_NOCTTY|unix.O_NONBLOCK, 0)
	if err != nil {
		t.Skipf("no pseudo-terminals here: %v", err)
	}
	raw, err := f.SyscallConn()
	if err != nil {
		t.Fatal(err)
	}
	var n int
	raw.Control(func(fd uintptr) {
		if err = unix.IoctlSetPointerInt(int(fd), unix.TIOCSPTLCK, 0); err == nil {
			n, err = unix.IoctlGetInt(int(fd), unix.TIOCGPTN)
		}
	})
	if err != nil {
		t.Fatal(err)
	}
	return f, "/dev/pts/" + strconv.Itoa(n)
}

// instrument is a supply on a line of its own.
type instrument struct {
	*supply
	name string // of the line
	our  *os.File
	once sync.Once
}

func onLine(t *testing.T, s *supply) *instrument {
	t.Helper()
	our, name := openPair(t)
	i := &instrument{supply: s, name: name, our: our}
	t.Cleanup(i.unplug)
	go func() {
		var got []byte
		buf := make([]byte, 1024)
		for {
			n, err := our.Read(buf)
			switch {
			case errors.Is(err, unix.EIO): // nobody has the other end open
				time.Sleep(time.Millisecond)
				continue
			case err != nil:
				return
			}
			got = append(got, buf[:n]...)
			for {
				k := bytes.IndexByte(got, '\n')
				if k < 0 {
					break
				}
				if a := s.line(string(got[:k])); a != "" {
					s.mu.Lock()
					slow := s.slow
					s.mu.Unlock()
					time.Sleep(slow)
					our.WriteString(a + "\n")
				}
				got = got[k+1:]
			}
		}
	}()
	return i
}

// unplug takes the line away, as a pulled adapter does.
func (i *instrument) unplug() { i.once.Do(func() { i.our.Close() }) }

// hold stops or frees everything written to the line on the keeper's side.
func (i *instrument) hold(t *testing.T, on bool) {
	t.Helper()
	action := unix.TCOON
	if on {
		action = unix.TCOOFF
	}
	other, err := unix.Open(i.name, unix.O_RDWR|unix.O_NOCTTY|unix.O_NONBLOCK, 0)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { unix.Close(other) }) // open until the end, or the line would forget
	if err := unix.IoctlSetInt(other, unix.TCXONC, action); err != nil {
		t.Fatal(err)
	}
}

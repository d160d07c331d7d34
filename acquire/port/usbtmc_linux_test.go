package port

import (
	"errors"
	"io"
	"strings"
	"sync"
	"testing"
	"time"

	"golang.org/x/sys/unix"
)

// fakeTMC stands in for a USBTMC device of the kernel, none of which was at hand:
// these tests hold the line to what the driver is known to do, not to a driver.
type fakeTMC struct {
	mu       sync.Mutex
	messages []string
	replies  []string // "" is a time-out
	waits    []time.Duration
	reads    int
	closed   bool
	err      error
}

func (f *fakeTMC) Read(p []byte) (int, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	f.reads++
	if f.err != nil {
		return 0, f.err
	}
	if len(f.replies) == 0 || f.replies[0] == "" {
		f.replies = f.replies[min(1, len(f.replies)):]
		time.Sleep(5 * time.Millisecond)
		return 0, unix.ETIMEDOUT
	}
	n := copy(p, f.replies[0])
	f.replies = f.replies[1:] // what did not fit is gone
	return n, nil
}

func (f *fakeTMC) Write(p []byte) (int, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	if f.closed {
		panic("used after Close")
	}
	f.messages = append(f.messages, string(p))
	return len(p), f.err
}

func (f *fakeTMC) Close() error { f.mu.Lock(); defer f.mu.Unlock(); f.closed = true; return nil }

func (f *fakeTMC) setTimeout(d time.Duration) error {
	f.mu.Lock()
	defer f.mu.Unlock()
	if d < 100*time.Millisecond {
		return unix.EINVAL
	}
	f.waits = append(f.waits, d)
	return nil
}

func newFakeTMC(t *testing.T, f *fakeTMC) *tmc {
	t.Helper()
	c, err := newTMC("usbtmc:/dev/usbtmc0", f, time.Millisecond)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { c.Close() })
	return c
}

func TestTMCReadsOnlyWhatIsOwed(t *testing.T) {
	f := &fakeTMC{replies: []string{"+1.5", "+2.5\n"}} // the first without an LF
	c := newFakeTMC(t, f)
	buf := make([]byte, 3)
	read := func() string {
		n, err := c.Read(buf)
		if err != nil {
			t.Fatal(err)
		}
		return string(buf[:n])
	}
	for _, silent := range []string{"OUTP OFF\n", `DISP:TEXT "ready?"` + "\n"} {
		c.Write([]byte(silent))
		if got := read(); got != "" || f.reads != 0 {
			t.Fatalf("%q, %d reads of a device that owes nothing", got, f.reads)
		}
	}
	c.Write([]byte("READ?\n"))
	if got := read() + "," + read() + "," + read(); got != "+1.,5\n," || f.reads != 1 {
		t.Errorf("got %q in %d reads", got, f.reads)
	}
	c.Write([]byte("READ?\n"))
	if err := c.Discard(); err != nil || f.reads != 2 || read() != "" {
		t.Errorf("%v, %d reads", err, f.reads)
	}
	if n, err := c.Read(nil); n != 0 || err != nil {
		t.Errorf("empty read: %d, %v", n, err)
	}
}

func TestTMCTimeouts(t *testing.T) {
	f := &fakeTMC{replies: []string{""}}
	c := newFakeTMC(t, f)
	for _, d := range []time.Duration{time.Millisecond, 2 * time.Second, 2 * time.Second, 100 * time.Millisecond} {
		if err := Expect(c, d); err != nil {
			t.Fatal(err)
		}
	}
	if got := f.waits; len(got) != 4 || got[0] != time.Second || got[1] != 100*time.Millisecond || got[2] != 2*time.Second || got[3] != 100*time.Millisecond {
		t.Errorf("got %v", got)
	}
	c.Write([]byte("READ?\n"))
	for range 3 {
		if n, err := c.Read(make([]byte, 8)); n != 0 || err != nil {
			t.Fatalf("got %d, %v", n, err)
		}
	}
	if f.reads != 1 {
		t.Errorf("%d reads: a reply that timed out is not owed any more", f.reads)
	}
}

func TestTMCUnpluggedAndClosed(t *testing.T) {
	f := &fakeTMC{err: unix.ENODEV}
	c := newFakeTMC(t, f)
	if _, err := c.Write([]byte("READ?\n")); !errors.Is(err, ErrLost) {
		t.Errorf("got %v", err)
	}
	f.err = nil
	if _, err := c.Read(make([]byte, 8)); !errors.Is(err, ErrLost) {
		t.Errorf("got %v", err)
	}
	c.Close()
	if !f.closed {
		t.Error("not closed")
	}
	if _, err := c.Write([]byte("OUTP OFF\n")); !errors.Is(err, ErrClosed) {
		t.Errorf("got %v", err)
	}
	if _, err := c.Read(make([]byte, 8)); !errors.Is(err, ErrClosed) {
		t.Errorf("got %v", err)
	}
}

func TestTMCCloseWhileReading(t *testing.T) {
	for i := range 100 {
		f := &fakeTMC{replies: []string{"", "", "x"}}
		c, err := newTMC("usbtmc:x", f, 10*time.Second)
		if err != nil {
			t.Fatal(err)
		}
		if i%2 == 0 {
			c.Write([]byte("READ?\n"))
		}
		ended := make(chan error)
		go func() {
			for {
				if _, err := c.Read(make([]byte, 8)); err != nil {
					ended <- err
					return
				}
			}
		}()
		time.Sleep(time.Duration(i%5) * 100 * time.Microsecond)
		c.Close()
		if err := <-ended; !errors.Is(err, ErrClosed) {
			t.Fatalf("got %v", err)
		}
	}
}

// The number that the kernel's header gives, for a machine of the common kind.
func TestTMCIoctlNumber(t *testing.T) {
	// linux/usb/tmc.h: _IOW(91, 10, __u32); asm-generic/ioctl.h: direction in bits 30
	// and 31 (write is 1), size in 16 to 29, type in 8 to 15, number in 0 to 7.
	if usbtmcSetTimeout != 0x40045b0a {
		t.Errorf("%#x", usbtmcSetTimeout)
	}
}

// A device that is none of these is not taken for one: it does not know the time-out.
func TestTMCRefusesOtherDevices(t *testing.T) {
	_, device := pty(t)
	_, err := Open("usbtmc:"+device, Settings{})
	if err == nil || !strings.Contains(err.Error(), "no USBTMC device") {
		t.Errorf("got %v", err)
	}
}

var _ io.ReadWriteCloser = tmcDevice{}

package port

import (
	"errors"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"go.bug.st/serial"
)

// touchy stands in for a port of the serial library and notices what the library does
// not bear.
type touchy struct {
	serial.Port
	t                   *testing.T
	timeouts            atomic.Int32
	readOnce            atomic.Bool
	reading, closed     atomic.Bool
	dtr, rts            atomic.Int32 // -1 low, 1 high
	readTakes, timedOut time.Duration
	takes               int // bytes of a Write; 0: all
	cuts                int
	got                 []byte
}

func (p *touchy) SetReadTimeout(d time.Duration) error {
	if p.readOnce.Load() {
		p.t.Error("the read time-out is set after a Read")
	}
	p.timeouts.Add(1)
	p.timedOut = d
	return nil
}

func (p *touchy) Read([]byte) (int, error) {
	p.readOnce.Store(true)
	p.reading.Store(true)
	defer p.reading.Store(false)
	if p.closed.Load() {
		p.t.Error("Read after Close")
	}
	time.Sleep(p.readTakes)
	return 0, nil
}

func (p *touchy) Write(b []byte) (int, error) {
	if p.closed.Load() {
		p.t.Error("Write after Close")
	}
	if p.takes > 0 && len(b) > p.takes {
		b = b[:p.takes]
		if p.cuts++; p.cuts%2 == 1 {
			return 0, syscall.EINTR
		}
	}
	p.got = append(p.got, b...)
	return len(b), nil
}

func (p *touchy) Close() error {
	if p.reading.Load() {
		p.t.Error("Close during Read")
	}
	if p.closed.Swap(true) {
		p.t.Error("Close twice")
	}
	return nil
}

func (p *touchy) GetModemStatusBits() (*serial.ModemStatusBits, error) {
	return &serial.ModemStatusBits{}, nil
}
func (p *touchy) SetDTR(high bool) error  { p.dtr.Store(level(high)); return nil }
func (p *touchy) SetRTS(high bool) error  { p.rts.Store(level(high)); return nil }
func (p *touchy) ResetInputBuffer() error { return nil }

func level(high bool) int32 {
	if high {
		return 1
	}
	return -1
}

func TestLibraryIsSparedWhatItDoesNotBear(t *testing.T) {
	t.Parallel()
	for i := range 50 {
		p := &touchy{t: t, readTakes: 3 * time.Millisecond}
		c, err := newLibraryLine("COM3", p, Settings{}, 3*time.Millisecond)
		if err != nil {
			t.Fatal(err)
		}
		ended := make(chan error)
		go func() {
			for {
				if _, err := c.Read(make([]byte, 4)); err != nil {
					ended <- err
					return
				}
			}
		}()
		time.Sleep(time.Duration(i) * 100 * time.Microsecond)
		c.Write([]byte("READ?\n"))
		c.Close()
		c.Close()
		if _, err := c.Write([]byte("OUTP OFF\n")); !errors.Is(err, ErrClosed) {
			t.Errorf("got %v", err)
		}
		if err := <-ended; !errors.Is(err, ErrClosed) {
			t.Errorf("got %v", err)
		}
		if p.timeouts.Load() != 1 || p.timedOut != 3*time.Millisecond || !p.closed.Load() {
			t.Errorf("time-out set %d times, to %v", p.timeouts.Load(), p.timedOut)
		}
	}
}

// A signal cuts a blocking write short.
func TestLibraryWritesAll(t *testing.T) {
	p := &touchy{t: t, takes: 2}
	c, err := newLibraryLine("COM3", p, Settings{}, time.Millisecond)
	if err != nil {
		t.Fatal(err)
	}
	defer c.Close()
	for range 2 {
		if n, err := c.Write([]byte("OUTP OFF\n")); n != 9 || err != nil {
			t.Errorf("%d, %v", n, err)
		}
	}
	if string(p.got) != "OUTP OFF\nOUTP OFF\n" {
		t.Errorf("sent %q", p.got)
	}
}

func TestModemLinesAreSetAfterOpening(t *testing.T) {
	for text, want := range map[string][2]int32{"": {1, -1}, "dtr=0": {-1, -1}, "rts=1": {1, 1}, "dtr=0 rts=1": {-1, 1}} {
		s, err := ParseSettings(text)
		if err != nil {
			t.Fatal(err)
		}
		p := &touchy{t: t}
		c, err := newLibraryLine("COM3", p, s, time.Millisecond)
		if err != nil {
			t.Fatal(err)
		}
		if got := [2]int32{p.dtr.Load(), p.rts.Load()}; got != want {
			t.Errorf("%q: DTR, RTS %v", text, got)
		}
		if settleTime(c, Options{}) != leadSettle {
			t.Errorf("%q: a lead is not given time to charge up", text)
		}
	}
	m, err := mode(Settings{Baud: 2400, DataBits: 7, Parity: 'O', StopBits: 2})
	if err != nil || m.InitialStatusBits != nil || m.BaudRate != 2400 || m.DataBits != 7 || m.Parity != serial.OddParity || m.StopBits != serial.TwoStopBits {
		t.Errorf("%+v, %v", m, err)
	}
}

package scpi

import (
	"fmt"
	"os"
	"testing"

	"golang.org/x/sys/unix"

	"gatesill/acquire/port"
)

func init() { hookup["pseudo-terminal"] = overPTY }

func overPTY(t testing.TB, i *instrument) port.Conn {
	t.Helper()
	far, err := os.OpenFile("/dev/ptmx", os.O_RDWR|unix.O_NOCTTY|unix.O_NONBLOCK, 0)
	if err != nil {
		t.Skipf("no pseudo-terminals here: %v", err)
	}
	raw, err := far.SyscallConn()
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
	// The line is opened first: until then the pseudo-terminal echoes.
	c, err := port.Open(fmt.Sprintf("/dev/pts/%d", n), port.Settings{Baud: 115200})
	if err != nil {
		t.Fatal(err)
	}
	done := make(chan struct{})
	go func() { defer close(done); i.serve(far) }()
	t.Cleanup(func() { c.Close(); far.Close(); <-done })
	return c
}

// BenchmarkQuery measures a query and its reply over a pseudo-terminal, which has no
// bytes' time of its own.
func BenchmarkQuery(b *testing.B) {
	talk := New(overPTY(b, plainInstrument()), Options{})
	for b.Loop() {
		if _, err := talk.Query("READ?", 0); err != nil {
			b.Fatal(err)
		}
	}
}

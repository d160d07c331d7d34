package port

import (
	"bufio"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"time"

	"go.bug.st/serial"
	"golang.org/x/sys/unix"
)

// A read time-out is no error however often it passes; readers of the standard
// library give up after 100 of them.
func TestReadTimeoutIsNoError(t *testing.T) {
	t.Parallel()
	bothWays(t, 2*time.Millisecond, func(t *testing.T, far *os.File, c Conn) {
		buf := make([]byte, 16)
		start := time.Now()
		for range 150 {
			if n, err := c.Read(buf); n != 0 || err != nil {
				t.Fatalf("got %d, %v", n, err)
			}
		}
		if took := time.Since(start); took < 150*time.Millisecond {
			t.Errorf("150 reads of 2 ms took %v: they do not wait", took)
		}
		far.WriteString("3.012\n")
		if got := readAll(t, c, 6); got != "3.012\n" {
			t.Errorf("got %q", got)
		}
	})
}

func TestEmptyReadIsNoLoss(t *testing.T) {
	t.Parallel()
	bothWays(t, 20*time.Millisecond, func(t *testing.T, far *os.File, c Conn) {
		far.WriteString("ab")
		time.Sleep(20 * time.Millisecond) // so that it waits there
		for range 3 {
			if n, err := c.Read(nil); n != 0 || err != nil {
				t.Fatalf("got %d, %v", n, err)
			}
		}
		if got := readAll(t, c, 2); got != "ab" {
			t.Errorf("got %q", got)
		}
	})
}

func TestUnpluggedStaysLost(t *testing.T) {
	t.Parallel()
	bothWays(t, 20*time.Millisecond, func(t *testing.T, far *os.File, c Conn) {
		far.Close()
		staysLost(t, c)
	})
}

// What the kernel does when an adapter is pulled: it hangs the line up.
func TestHungUpStaysLost(t *testing.T) {
	t.Parallel()
	if os.Geteuid() != 0 {
		t.Skip("only root may hang a line up")
	}
	bothWays(t, 20*time.Millisecond, func(t *testing.T, far *os.File, c Conn) {
		f, err := os.OpenFile(c.Address(), os.O_RDWR|unix.O_NOCTTY|unix.O_NONBLOCK, 0)
		if err != nil {
			t.Fatal(err)
		}
		defer f.Close()
		var hung error
		control(f, func(fd int) { hung = unix.IoctlSetInt(fd, unix.TIOCVHANGUP, 0) })
		if hung != nil {
			t.Fatal(hung)
		}
		staysLost(t, c)
	})
}

func staysLost(t *testing.T, c Conn) {
	t.Helper()
	buf := make([]byte, 16)
	var err error
	for end := time.Now().Add(5 * time.Second); err == nil && time.Now().Before(end); {
		_, err = c.Read(buf)
	}
	for range 3 {
		if !errors.Is(err, ErrLost) || !strings.Contains(err.Error(), c.Address()) {
			t.Fatalf("got %v, not the loss of %s", err, c.Address())
		}
		_, err = c.Read(buf)
	}
	if _, err := c.Write([]byte("x")); !errors.Is(err, ErrLost) {
		t.Errorf("Write: %v", err)
	}
	if err := c.Discard(); !errors.Is(err, ErrLost) {
		t.Errorf("Discard: %v", err)
	}
	c.Close()
	if _, err := c.Read(buf); !errors.Is(err, ErrClosed) {
		t.Errorf("after Close: %v", err)
	}
}

// The descriptor number that Close freed is given to the next file; what is written
// to the closed line must not land in it.
func TestWriteAfterCloseHitsNoOtherFile(t *testing.T) {
	bothWays(t, time.Millisecond, func(t *testing.T, far *os.File, c Conn) {
		if err := c.Close(); err != nil {
			t.Fatal(err)
		}
		var files []*os.File
		for i := range 20 {
			f, err := os.Create(filepath.Join(t.TempDir(), fmt.Sprint(i)))
			if err != nil {
				t.Fatal(err)
			}
			defer f.Close()
			files = append(files, f)
		}
		for range 3 {
			if n, err := c.Write([]byte("OUTP OFF\n")); n != 0 || !errors.Is(err, ErrClosed) {
				t.Errorf("got %d, %v", n, err)
			}
		}
		for _, e := range []error{c.Discard(), c.DiscardOutput()} {
			if !errors.Is(e, ErrClosed) {
				t.Errorf("got %v", e)
			}
		}
		if err := c.Close(); err != nil {
			t.Errorf("second Close: %v", err)
		}
		for _, f := range files {
			if st, err := f.Stat(); err != nil || st.Size() != 0 {
				t.Errorf("%s has %d bytes", f.Name(), st.Size())
			}
		}
	})
}

func TestCloseWhileReading(t *testing.T) {
	t.Parallel()
	for _, w := range ways {
		t.Run(w.name, func(t *testing.T) {
			t.Parallel()
			rounds, readTimeout := 1000, 10*time.Second
			if w.name == "library" { // whose Close waits for the time-out
				rounds, readTimeout = 150, 4*time.Millisecond
			}
			far, device := pty(t)
			_ = far
			for i := range rounds {
				c, err := w.open(device, readTimeout)
				if err != nil {
					t.Fatalf("round %d: %v", i, err)
				}
				ended := make(chan error)
				go func() {
					buf := make([]byte, 16)
					for {
						if _, err := c.Read(buf); err != nil {
							ended <- err
							return
						}
					}
				}()
				time.Sleep(time.Duration(i%7) * 50 * time.Microsecond)
				if err := c.Close(); err != nil {
					t.Fatalf("round %d: %v", i, err)
				}
				select {
				case err := <-ended:
					if !errors.Is(err, ErrClosed) {
						t.Fatalf("round %d: Read says %v", i, err)
					}
				case <-time.After(5 * time.Second):
					t.Fatalf("round %d: Read goes on after Close", i)
				}
			}
		})
	}
}

// Nothing reads at the far end: the line fills up.
func TestWriteToFullLineEnds(t *testing.T) {
	t.Parallel()
	bothWays(t, 20*time.Millisecond, func(t *testing.T, far *os.File, c Conn) {
		start := time.Now()
		n, err := c.Write(make([]byte, 1<<16))
		if !errors.Is(err, ErrStuck) || n == 1<<16 {
			t.Errorf("got %d, %v", n, err)
		}
		if took := time.Since(start); took < time.Second || took > 10*time.Second { // 1.2 s is asked for
			t.Errorf("took %v", took)
		}
		if _, err := c.Read(make([]byte, 8)); err != nil {
			t.Errorf("Read after it: %v", err)
		}
	})
}

func TestFullLineDoesNotBlockClose(t *testing.T) {
	t.Parallel()
	bothWays(t, 20*time.Millisecond, func(t *testing.T, far *os.File, c Conn) {
		ended := make(chan error, 1)
		go func() {
			_, err := c.Write(make([]byte, 1<<20)) // may take 3.6 s
			ended <- err
		}()
		time.Sleep(100 * time.Millisecond)
		start := time.Now()
		if err := c.Close(); err != nil {
			t.Fatal(err)
		}
		if took := time.Since(start); took > 2*time.Second {
			t.Errorf("Close took %v", took)
		}
		select {
		case err := <-ended:
			if !errors.Is(err, ErrClosed) {
				t.Errorf("Write says %v", err)
			}
		case <-time.After(5 * time.Second):
			t.Error("Write goes on after Close")
		}
	})
}

// A pseudo-terminal has no modem lines; that must not keep it from being opened,
// however they are to be set.
func TestLineWithoutModemLinesOpens(t *testing.T) {
	t.Parallel()
	for _, text := range []string{"", "dtr=0 rts=1", "2400 7O1", "19230 7O1", "1200 7N2 dtr=1"} {
		_, device := pty(t)
		s, err := ParseSettings(text)
		if err != nil {
			t.Fatal(err)
		}
		c, err := Open(device, s)
		if err != nil {
			t.Errorf("%q: %v", text, err)
			continue
		}
		if settleTime(c, Options{}) != 0 {
			t.Errorf("%q: waits for a lead that cannot be fed", text)
		}
		c.Close()
	}
}

func TestOneAndAHalfStopBitsAreRefused(t *testing.T) {
	_, device := pty(t)
	s, err := ParseSettings("9600 8N1.5")
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Open(device, s); !errors.Is(err, ErrSettings) {
		t.Errorf("got %v", err)
	}
}

func TestAbsent(t *testing.T) {
	nothing := filepath.Join(t.TempDir(), "nothing")
	file := filepath.Join(t.TempDir(), "file")
	if err := os.WriteFile(file, []byte("x"), 0o600); err != nil {
		t.Fatal(err)
	}
	for _, a := range []string{nothing, "COM3", file, "/dev/null", t.TempDir(), "log:" + nothing, "usbtmc:" + nothing, "/dev/usbtmc4711"} {
		c, err := Open(a, Settings{})
		if !errors.Is(err, ErrAbsent) || !strings.Contains(err.Error(), a) {
			t.Errorf("%s: %v", a, err)
		}
		if c != nil {
			t.Errorf("%s: a line and an error", a)
		}
	}
	if b, _ := os.ReadFile(file); string(b) != "x" {
		t.Error("the file was written to")
	}
}

// The library's Read panics when the descriptor number does not fit into the set of
// select(2).
func TestManyOpenFiles(t *testing.T) {
	var limit unix.Rlimit
	if err := unix.Getrlimit(unix.RLIMIT_NOFILE, &limit); err != nil || limit.Cur < 1200 {
		t.Skipf("only %d files may be opened", limit.Cur)
	}
	for _, w := range ways {
		t.Run(w.name, func(t *testing.T) {
			far, device := pty(t)
			for range 1050 {
				f, err := os.Open("/dev/null")
				if err != nil {
					t.Fatal(err)
				}
				defer f.Close()
			}
			c, err := w.open(device, 20*time.Millisecond)
			if err != nil {
				t.Fatal(err)
			}
			defer c.Close()
			if w.name == "library" {
				if _, err := c.Read(make([]byte, 8)); err == nil || !strings.Contains(err.Error(), "files open") {
					t.Errorf("got %v", err)
				}
				return
			}
			far.WriteString("ok")
			if got := readAll(t, c, 2); got != "ok" {
				t.Errorf("got %q", got)
			}
		})
	}
}

func TestSecondOpenIsBusy(t *testing.T) {
	t.Parallel()
	_, device := pty(t)
	link := filepath.Join(t.TempDir(), "meter")
	if err := os.Symlink(device, link); err != nil {
		t.Fatal(err)
	}
	c, err := Open(device, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{device, link} {
		_, err = Open(name, Settings{})
		if !errors.Is(err, ErrBusy) || !strings.Contains(err.Error(), fmt.Sprintf("this program (process %d)", os.Getpid())) {
			t.Errorf("%s: %v", name, err)
		}
	}
	c.Close()
	if c, err = Open(link, Settings{}); err != nil {
		t.Fatalf("after Close: %v", err)
	}
	c.Close()
}

// A copy of the descriptor, as a process that is just being started holds it, keeps
// the line from nobody.
func TestCloseGivesTheLockBack(t *testing.T) {
	t.Parallel()
	_, device := pty(t)
	c, err := Open(device, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	var copied int
	control(c.(*tty).f, func(fd int) { copied, err = unix.Dup(fd) })
	if err != nil {
		t.Fatal(err)
	}
	defer unix.Close(copied)
	c.Close()
	if c, err = Open(device, Settings{}); err != nil {
		t.Fatal(err)
	}
	c.Close()
}

// TestChild is no test of its own: it opens the line that the environment names, says
// so, and keeps it until it is killed.
func TestChild(t *testing.T) {
	device := os.Getenv("PORT_TEST_LINE")
	if device == "" {
		t.Skip("serves other tests")
	}
	_, err := Open(device, Settings{})
	fmt.Printf("child: %v\n", err)
	time.Sleep(time.Minute)
}

// child starts another process that opens device, and gives what it says about it.
func child(t *testing.T, device string) (*exec.Cmd, string) {
	t.Helper()
	cmd := exec.Command(os.Args[0], "-test.run=^TestChild$")
	cmd.Env = append(os.Environ(), "PORT_TEST_LINE="+device)
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { cmd.Process.Kill(); cmd.Wait() })
	for sc := bufio.NewScanner(out); sc.Scan(); {
		if text, ok := strings.CutPrefix(sc.Text(), "child: "); ok {
			return cmd, text
		}
	}
	t.Fatal("the child said nothing")
	return nil, ""
}

func TestOtherProcessIsBusy(t *testing.T) {
	t.Parallel()
	_, device := pty(t)
	cmd, said := child(t, device)
	if said != "<nil>" {
		t.Fatal(said)
	}
	_, err := Open(device, Settings{})
	if !errors.Is(err, ErrBusy) || !strings.Contains(err.Error(), fmt.Sprintf("process %d (", cmd.Process.Pid)) {
		t.Errorf("got %v, child is %d", err, cmd.Process.Pid)
	}
	// A killed program leaves nothing behind.
	cmd.Process.Kill()
	cmd.Wait()
	c, err := Open(device, Settings{})
	if err != nil {
		t.Fatalf("after the kill: %v", err)
	}
	defer c.Close()
	if _, said := child(t, device); !strings.Contains(said, ErrBusy.Error()) || !strings.Contains(said, fmt.Sprintf("process %d (", os.Getpid())) {
		t.Errorf("the child says %s", said)
	}
}

// Other programs mark a line as theirs by TIOCEXCL, which the kernel does not hold
// against root.
func TestLineMarkedByOthersIsBusy(t *testing.T) {
	t.Parallel()
	_, device := pty(t)
	p, err := serial.Open(device, &serial.Mode{})
	if err != nil {
		t.Fatal(err)
	}
	defer p.Close()
	if _, err := Open(device, Settings{}); !errors.Is(err, ErrBusy) {
		t.Errorf("got %v", err)
	}
}

func TestDenied(t *testing.T) {
	if os.Geteuid() != 0 {
		t.Skip("needs root to take a right away from itself")
	}
	_, device := pty(t)
	if err := os.Chmod(device, 0o600); err != nil {
		t.Fatal(err)
	}
	said := make(chan error)
	go func() {
		runtime.LockOSThread() // and never unlocked: the thread ends with the goroutine
		unix.Setfsgid(65534)
		unix.Setfsuid(65534)
		_, err := Open(device, Settings{})
		said <- err
	}()
	err := <-said
	if !errors.Is(err, ErrDenied) || !strings.Contains(err.Error(), device) || !strings.Contains(err.Error(), ownershipOf(device).group) {
		t.Errorf("got %v", err)
	}
}

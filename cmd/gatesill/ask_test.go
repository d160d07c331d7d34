//go:build linux

package main

import (
	"bytes"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"golang.org/x/sys/unix"
)

// openTerminal opens a pseudo-terminal: what is typed goes into keys, the
// program sits at tty.
func openTerminal(t *testing.T) (keys, tty *os.File) {
	t.Helper()
	keys, err := os.OpenFile("/dev/ptmx", os.O_RDWR|syscall.O_NOCTTY, 0)
	if err != nil {
		t.Skipf("no pseudo-terminals here: %v", err)
	}
	t.Cleanup(func() { keys.Close() })
	if err := unix.IoctlSetPointerInt(int(keys.Fd()), unix.TIOCSPTLCK, 0); err != nil {
		t.Fatal(err)
	}
	n, err := unix.IoctlGetInt(int(keys.Fd()), unix.TIOCGPTN)
	if err != nil {
		t.Fatal(err)
	}
	tty, err = os.OpenFile(fmt.Sprintf("/dev/pts/%d", n), os.O_RDWR|syscall.O_NOCTTY, 0)
	if err != nil {
		t.Fatal(err)
	}
	return keys, tty
}

// TestAsksOnATerminal: what a file leaves open is asked where stdin is a
// terminal, asked again after a wrong answer, and taken from there.
func TestAsksOnATerminal(t *testing.T) {
	dir, bin := buildProgram(t)
	keys, tty := openTerminal(t)
	cmd := exec.Command(bin, "--store", filepath.Join(dir, "s.db"), "import", "audio", "../../testdata/scenarios/s3_audio_100.csv")
	var out bytes.Buffer
	cmd.Stdin, cmd.Stdout, cmd.Stderr = tty, &out, tty
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	tty.Close()
	var talk bytes.Buffer
	talked := make(chan struct{})
	go func() {
		io.Copy(&talk, keys) // ends with an error when the program is gone
		close(talked)
	}()
	if _, err := keys.WriteString("furlong\nV\n"); err != nil {
		t.Fatal(err)
	}
	done := make(chan error, 1)
	go func() { done <- cmd.Wait() }()
	select {
	case err := <-done:
		if err != nil {
			t.Fatalf("%v\n%s", err, talk.String())
		}
	case <-time.After(20 * time.Second):
		cmd.Process.Kill()
		t.Fatal("still waiting for an answer")
	}
	keys.Close()
	<-talked
	if !strings.Contains(out.String(), "100 points") || !strings.Contains(out.String(), "vg in V") {
		t.Errorf("taken otherwise:\n%s", out.String())
	}
	if n := strings.Count(talk.String(), "? "); n != 2 {
		t.Errorf("asked %d times, want 2:\n%s", n, talk.String())
	}
}

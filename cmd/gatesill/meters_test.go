//go:build linux

package main

import (
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// onTerminal runs the program with all its streams on one terminal. Each time what
// was written since the last answer makes answer say something, that is typed.
func onTerminal(t *testing.T, bin string, answer func(written string) string, args ...string) (string, error) {
	t.Helper()
	keys, tty := openTerminal(t)
	cmd := exec.Command(bin, args...)
	cmd.Env = append(os.Environ(), "TERM=xterm", "NO_COLOR=1")
	cmd.Stdin, cmd.Stdout, cmd.Stderr = tty, tty, tty
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	tty.Close()
	talked := make(chan string, 1)
	go func() {
		var all, fresh strings.Builder
		b := make([]byte, 4096)
		for {
			n, err := keys.Read(b) // fails when the program is gone
			all.Write(b[:n])
			fresh.Write(b[:n])
			if a := answer(fresh.String()); a != "" {
				fresh.Reset()
				keys.WriteString(a)
			}
			if err != nil {
				talked <- all.String()
				return
			}
		}
	}()
	done := make(chan error, 1)
	go func() { done <- cmd.Wait() }()
	select {
	case err := <-done:
		return <-talked, err
	case <-time.After(120 * time.Second):
		cmd.Process.Kill()
		<-done
		return <-talked, os.ErrDeadlineExceeded
	}
}

// TestMetersLive: on a terminal the readings are drawn until a key, then the
// terminal is as before and the table is written.
func TestMetersLive(t *testing.T) {
	_, bin := buildProgram(t)
	for _, key := range []string{"q", "\x03"} { // Ctrl-C is a key like others
		pressed := false
		text, err := onTerminal(t, bin, func(written string) string {
			// A picture of three meters that have all spoken.
			if !pressed && strings.Count(written[strings.LastIndex(written, "\x1b[H")+1:], " s ago") >= 3 {
				pressed = true
				return key
			}
			return ""
		}, "meters", "--rehearsal")
		if err != nil {
			t.Fatalf("%v\n%q", err, text)
		}
		live, after, left := strings.Cut(text, "\x1b[?1049l")
		if !left || !strings.HasPrefix(live, "\x1b[?1049h") || !strings.Contains(live, "\x1b[?25l") || !strings.Contains(live, "\x1b[?25h") {
			t.Errorf("terminal not taken or not given back:\n%q", text)
		}
		if strings.Count(live, "\x1b[2J") != 1 {
			t.Errorf("the page was erased %d times", strings.Count(live, "\x1b[2J"))
		}
		if !strings.Contains(live, "█") || !strings.Contains(live, "all is invented") {
			t.Errorf("no large digits, or not said to be invented:\n%s", live)
		}
		if !strings.Contains(after, "gate") || !strings.Contains(after, "\r\n") || strings.Contains(after, "\x1b") {
			t.Errorf("after it:\n%q", after)
		}
	}
}

// TestMetersWrite: the questions lead to a bench file; a wrong answer is asked
// again at once, an existing file stays unless it may go.
func TestMetersWrite(t *testing.T) {
	dir, bin := buildProgram(t)
	path := filepath.Join(dir, "attic.toml")
	answers := []struct{ question, first, then string }{
		{"is there already", "no", "no"},
		{"this bench called", "attic", ""},
		{"How does the meter on tcp:192.0.2.7", "morse", "scpi"},
		{"How does the meter on", "skip", "skip"}, // what is plugged in here
		{"On which line is a meter", "192.0.2.7", "tcp:192.0.2.7"},
		{"Another line", "tcp:192.0.2.7", "none"},
		{"How many values", "", ""},
		{"What does it read", "current", "current"},
		{"In which unit", "V", "mA"},
		{"Name of the current meter", "bench meter", ""},
		{"isolated", "unsure", ""},
		{"Which circuit", "load", ""},
		{"Resistor between", "10 V", "10 ohm"},
		{"Supply voltage", "12", ""},
		{"current meter sit", "", ""},
		{"Greatest drain current", "1 A", ""},
	}
	asked := map[string]int{}
	answer := func(written string) string {
		if !strings.HasSuffix(written, "? ") {
			return ""
		}
		at, found := -1, 0
		for i, a := range answers {
			if k := strings.LastIndex(written, a.question); k > at {
				at, found = k, i
			}
		}
		if at < 0 || strings.Contains(written[at:], "Greatest gate") || strings.Contains(written[at:], "Greatest power") {
			return "\n"
		}
		a := answers[found]
		n := asked[a.question]
		asked[a.question]++
		switch {
		case a.question == "Another line" && n == 0 && asked["On which line is a meter"] == 0:
			return "tcp:192.0.2.7\n" // something was plugged in
		case n == 0:
			return a.first + "\n"
		}
		return a.then + "\n"
	}
	text, err := onTerminal(t, bin, answer, "meters", "--write", path)
	if err != nil {
		t.Fatalf("%v\n%s", err, text)
	}
	have, err := os.ReadFile(path)
	if err != nil {
		t.Fatalf("%v\n%s", err, text)
	}
	for _, want := range []string{`name = "attic"`, `kind = "load"`, `rl = "10 ohm"`, `role = "current"`, `line = "tcp:192.0.2.7"`, `speaks = "scpi"`, `unit = "mA"`, `id = "1 A"`} {
		if !strings.Contains(string(have), want+"\n") {
			t.Errorf("no %s in\n%s", want, have)
		}
	}
	if !strings.Contains(text, "10 V") || asked["Resistor between"] != 2 {
		t.Errorf("a wrong answer was asked again %d times\n%s", asked["Resistor between"]-1, text)
	}
	if !strings.Contains(text, "not said to be isolated") {
		t.Errorf("no caution about the drain lead:\n%s", text)
	}
	text, err = onTerminal(t, bin, answer, "meters", "--write", path)
	if err == nil || !strings.Contains(text, "was left as it is") {
		t.Errorf("%v\n%s", err, text)
	}
	if again, _ := os.ReadFile(path); string(again) != string(have) {
		t.Error("the file was written over")
	}
}

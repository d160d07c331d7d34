//go:build linux || darwin

package rehearsal

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"gatesill/acquire/meter"
	"gatesill/acquire/port"
)

const asProcess = "GATESILL_TEST_REHEARSAL"

func TestMain(m *testing.M) {
	if os.Getenv(asProcess) != "" {
		os.Exit(Main(os.Stdin, os.Stdout))
	}
	os.Exit(m.Run())
}

// patience is how long a test waits for what comes at once on an idle machine.
const patience = 10 * time.Second

func start(t testing.TB, c Config) *Rehearsal {
	t.Helper()
	if c.Folder == "" {
		c.Folder = t.TempDir()
	}
	r, err := Start(context.Background(), os.Args[0], nil, []string{asProcess + "=1"}, c)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := r.Close(); err != nil {
			t.Error(err)
		}
	})
	return r
}

// line is an opened line whose bytes are collected.
type line struct {
	t   testing.TB
	f   *os.File
	buf []byte
}

func open(t testing.TB, path string) *line {
	t.Helper()
	f, err := os.OpenFile(path, os.O_RDWR|syscall.O_NOCTTY|syscall.O_NONBLOCK, 0)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { f.Close() })
	return &line{t: t, f: f}
}

func (l *line) say(text string) {
	l.t.Helper()
	if _, err := l.f.WriteString(text); err != nil {
		l.t.Fatal(err)
	}
}

// more reads once; the error is that of the line.
func (l *line) more(wait time.Duration) error {
	b := make([]byte, 4096)
	l.f.SetReadDeadline(time.Now().Add(wait))
	n, err := l.f.Read(b)
	l.buf = append(l.buf, b[:n]...)
	if errors.Is(err, os.ErrDeadlineExceeded) {
		return nil
	}
	return err
}

// until reads until ok of all that came since the last success; it gives that.
func (l *line) until(what string, ok func(b []byte) bool) string {
	l.t.Helper()
	for end := time.Now().Add(patience); time.Now().Before(end); {
		if ok(l.buf) {
			s := string(l.buf)
			l.buf = nil
			return s
		}
		if err := l.more(50 * time.Millisecond); err != nil {
			l.t.Fatalf("waiting for %s: %v", what, err)
		}
	}
	l.t.Fatalf("no %s; last came %q", what, l.buf)
	return ""
}

func (l *line) ask(text string) string {
	l.t.Helper()
	l.buf = nil
	l.say(text)
	return strings.TrimSpace(l.until("answer to "+text, func(b []byte) bool { return bytes.HasSuffix(b, []byte("\n")) }))
}

// readings decodes all that came since the last time.
func (l *line) readings(format string, wait time.Duration) (out []meter.Reading, bad int) {
	l.t.Helper()
	f, _ := meter.Find(format)
	d, err := f.New(meter.Options{})
	if err != nil {
		l.t.Fatal(err)
	}
	l.buf = nil
	for end := time.Now().Add(wait); time.Now().Before(end); {
		if err := l.more(20 * time.Millisecond); err != nil {
			l.t.Fatal(err)
		}
	}
	b := l.buf
	for {
		skip, n, rs, err := d.Scan(b, false)
		b = b[skip:]
		if n == 0 {
			return out, bad
		}
		b = b[n:]
		if err != nil || skip > 1 { // 1: the LF after a CR
			bad++
		}
		out = append(out, rs...)
	}
}

// eventually waits for something that happens at once on an idle machine.
func eventually(t testing.TB, what string, ok func() bool) {
	t.Helper()
	for end := time.Now().Add(patience); !ok(); time.Sleep(10 * time.Millisecond) {
		if time.Now().After(end) {
			t.Fatalf("never: %s", what)
		}
	}
}

func quick(t testing.TB) Config {
	c, err := Standard(Quick)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// One sweep by hand of a program that is not there: supplies are set, meters read,
// and what they say is the truth.
func TestProcess(t *testing.T) {
	t.Parallel()
	r := start(t, quick(t))
	if !strings.Contains(r.Bench(), r.Lines()["gate"]) || !strings.Contains(r.Bench(), r.Supplies()["drain"]) {
		t.Errorf("bench file without its lines:\n%s", r.Bench())
	}
	gate, current := open(t, r.Lines()["gate"]), open(t, r.Lines()["current"])
	supply, drain := open(t, r.Supplies()["gate"]), open(t, r.Supplies()["drain"])
	if err := r.Insert("R1"); err != nil {
		t.Fatal(err)
	}
	if got := drain.ask("VOLT 13.8;CURR 1;OUTP ON;*OPC?\n"); got != "1" {
		t.Errorf("drain supply: %q", got)
	}
	if got := supply.ask("VOLT 3.2;OUTP ON;*OPC?\n"); got != "1" {
		t.Errorf("gate supply: %q", got)
	}
	eventually(t, "gate at 3.2 V", func() bool {
		s, err := r.Truth()
		return err == nil && s.Vg > 3.1999 && s.Id > 1e-3
	})
	rs, bad := gate.readings("text", 500*time.Millisecond)
	if len(rs) < 5 || bad > 0 {
		t.Fatalf("gate meter: %d readings, %d bad", len(rs), bad)
	}
	near(t, "gate meter", rs[len(rs)-1].Value, 3.2, 0.001)
	if got := current.ask("CONF:CURR:DC 1;*OPC?\n"); got != "1" {
		t.Errorf("current meter: %q", got)
	}
	var i float64
	if _, err := fmt.Sscanf(current.ask("READ?\n"), "%g", &i); err != nil {
		t.Fatal(err)
	}
	s, err := r.Truth()
	if err != nil || s.Device != "R1" {
		t.Fatalf("%+v: %v", s, err)
	}
	near(t, "current meter", i, s.Id, 0.02*s.Id) // it warms up between the two
	log, err := r.Log("gate")
	if err != nil || len(log) != 3 || log[1].Text != "OUTP ON" || !log[1].On || log[0].Set != 3.2 {
		t.Errorf("log: %+v, %v", log, err)
	}
	if age := time.Since(time.Unix(0, log[2].UnixNano)); age < 0 || age > patience {
		t.Errorf("logged %v ago", age)
	}
	for what, err := range map[string]error{"insert": r.Insert("none"), "fault": r.Fault(Fault{Kind: "rust", Role: "gate"}), "knob": r.Knob(1, 1)} {
		if !errors.Is(err, ErrConfig) {
			t.Errorf("%s: %v", what, err)
		}
	}
	st, err := r.Status()
	if err != nil || !st.Lines["line-gate"].Open || st.Lines["line-load"].Open || st.Lines["line-gate"].Frames < len(rs) || st.Lines["line-load"].Unheard == 0 {
		t.Errorf("status: %+v, %v", st, err)
	}
	folder := filepath.Dir(r.Lines()["gate"])
	if err := r.Close(); err != nil {
		t.Error(err)
	}
	if list, _ := filepath.Glob(filepath.Join(folder, "line-*")); len(list) != 0 {
		t.Errorf("left behind: %v", list)
	}
	if err := r.Remove(); err == nil {
		t.Error("an order to a process that has ended")
	}
}

// What opens real lines opens these.
func TestOpenedAsSerialLine(t *testing.T) {
	t.Parallel()
	r := start(t, quick(t))
	for _, path := range []string{r.Lines()["current"], r.Supplies()["gate"]} {
		settings, err := port.ParseSettings("115200 8N1")
		if err != nil {
			t.Fatal(err)
		}
		c, err := port.Open(path, settings)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := c.Write([]byte("*IDN?\n")); err != nil {
			t.Fatal(err)
		}
		var got []byte
		eventually(t, "answer", func() bool {
			b := make([]byte, 100)
			n, err := c.Read(b)
			if err != nil {
				t.Fatal(err)
			}
			got = append(got, b[:n]...)
			return bytes.HasSuffix(got, []byte(",0,1\n")) || bytes.HasSuffix(got, []byte(",0,1\r\n"))
		})
		if !bytes.HasPrefix(got, []byte("REHEARSAL,simulated ")) {
			t.Errorf("%q", got)
		}
		if err := c.Close(); err != nil {
			t.Error(err)
		}
	}
}

// An adapter that is pulled hangs up whoever reads it, and comes back at the same
// name on another terminal.
func TestUnplugged(t *testing.T) {
	t.Parallel()
	r := start(t, quick(t))
	path := r.Lines()["gate"]
	before, err := os.Readlink(path)
	if err != nil {
		t.Fatal(err)
	}
	l := open(t, path)
	l.until("reading", func(b []byte) bool { return bytes.Contains(b, []byte("V\r\n")) })
	if err := r.Fault(Fault{Kind: Unplug, Role: "gate", For: 0.5}); err != nil {
		t.Fatal(err)
	}
	var lost error
	eventually(t, "end of the line", func() bool { lost = l.more(10 * time.Millisecond); return lost != nil })
	if errors.Is(lost, os.ErrClosed) {
		t.Errorf("%v", lost)
	}
	if st, err := r.Status(); err != nil || st.At < 0.5 && !st.Lines["line-gate"].Unplugged {
		t.Errorf("status: %+v, %v", st, err)
	}
	eventually(t, "line back", func() bool { _, err := os.Stat(path); return err == nil })
	after, _ := os.Readlink(path)
	if after == before {
		t.Errorf("came back as %s, as it was", after)
	}
	open(t, path).until("reading", func(b []byte) bool { return bytes.Contains(b, []byte("V\r\n")) })

	if err := r.Fault(Fault{Kind: Unplug, Role: "supply-gate"}); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Lstat(r.Supplies()["gate"]); err == nil {
		t.Error("pulled for good, and its name is still there")
	}
	if err := r.Fault(Fault{Kind: Clear, Role: "supply-gate"}); err != nil {
		t.Fatal(err)
	}
	eventually(t, "supply back", func() bool { _, err := os.Stat(r.Supplies()["gate"]); return err == nil })
	if got := open(t, r.Supplies()["gate"]).ask("OUTP?\n"); got != "0" {
		t.Errorf("supply: %q", got)
	}
}

// Every other fault as it looks on the line.
func TestFaultsOnTheLine(t *testing.T) {
	t.Parallel()
	c := quick(t)
	c.Meters[0].Cycle, c.Meters[0].Integration = 0.01, 0.01
	r := start(t, c)
	gate, load := open(t, r.Lines()["gate"]), open(t, r.Lines()["load"])
	supply := open(t, r.Supplies()["gate"])
	supply.ask("VOLT 3;OUTP ON;*OPC?\n")
	const look = 60 * time.Millisecond
	fault := func(f Fault) {
		t.Helper()
		if f.Role == "" {
			f.Role = "gate"
		}
		if err := r.Fault(f); err != nil {
			t.Fatal(err)
		}
	}
	last := func() meter.Reading {
		t.Helper()
		rs, _ := gate.readings("text", look)
		if len(rs) == 0 {
			return meter.Reading{Unit: "nothing"}
		}
		return rs[len(rs)-1]
	}
	for _, c := range []struct {
		f  Fault
		ok func(r meter.Reading) bool
	}{
		{Fault{Kind: Silence}, func(r meter.Reading) bool { return r.Unit == "nothing" }},
		{Fault{Kind: Overload}, func(r meter.Reading) bool { return r.State == "overload" }},
		{Fault{Kind: LostPrefix}, func(r meter.Reading) bool { return r.Value > 2900 && r.Value < 3100 }},
		{Fault{Kind: LostPrefix, Value: 0.001}, func(r meter.Reading) bool { return r.Value > 2.9e-3 && r.Value < 3.1e-3 }},
		{Fault{Kind: Hold}, func(r meter.Reading) bool { return r.Hold }},
		{Fault{Kind: Swapped, With: "load"}, func(r meter.Reading) bool { return r.Value < 0.01 }},
	} {
		fault(c.f)
		last() // what was under way
		eventually(t, c.f.Kind, func() bool { return c.ok(last()) })
		fault(Fault{Kind: Clear})
		eventually(t, c.f.Kind+" cleared", func() bool { r := last(); return r.Value > 2.9 && r.Value < 3.1 && !r.Hold })
	}
	fault(Fault{Kind: Stuck})
	gate.readings("text", look)
	supply.ask("VOLT 4;*OPC?\n")
	if r := last(); r.Value > 3.1 {
		t.Errorf("stuck: %+v", r)
	}
	fault(Fault{Kind: Clear})
	eventually(t, "4 V", func() bool { return last().Value > 3.9 })
	fault(Fault{Kind: Garbage, Value: 1})
	eventually(t, "garbage", func() bool { _, bad := gate.readings("text", look); return bad > 2 })
	fault(Fault{Kind: Clear})
	fault(Fault{Kind: Slow, Value: 0.1})
	eventually(t, "slow", func() bool { rs, _ := gate.readings("text", 6*look); return len(rs) > 0 && len(rs) <= 6 })
	fault(Fault{Kind: Clear})
	fault(Fault{Kind: Refused, Role: "supply-gate", Match: "OUTP OFF"})
	if got := supply.ask("OUTP OFF;OUTP?;SYST:ERR?\n"); got != "1;"+notNow {
		t.Errorf("refused: %q", got)
	}
	if rs, _ := load.readings("text", look); len(rs) == 0 {
		t.Error("the load meter has nothing to do with all that, and is silent")
	}
}

// Bytes of a handheld come at its baud rate: 14 bytes of 10 bits at 2400 take 58 ms,
// the first as long before the last as 13 of them take.
func TestPacedBytes(t *testing.T) {
	t.Parallel()
	c, err := Standard(Handheld)
	if err != nil {
		t.Fatal(err)
	}
	r := start(t, c)
	l := open(t, r.Lines()["gate"])
	var first, end time.Time
	got := 0
	eventually(t, "a frame", func() bool {
		l.buf = nil
		if err := l.more(20 * time.Millisecond); err != nil {
			t.Fatal(err)
		}
		for _, x := range l.buf {
			switch {
			case x>>4 == 1:
				first, got = time.Now(), 1
			case got > 0 && int(x>>4) == got+1:
				got++
				end = time.Now()
			}
		}
		return got == 14
	})
	if span := end.Sub(first).Seconds(); span < 0.03 {
		t.Errorf("the bytes of a frame came within %.1f ms, want about %.1f", 1000*span, 13.0*10/2400*1000)
	}
}

// The end of the parent is the end of the process, whatever was under way.
func TestEndsWithStdin(t *testing.T) {
	t.Parallel()
	c := quick(t)
	c.Folder = t.TempDir()
	r := start(t, c)
	l := open(t, r.Lines()["gate"])
	r.in.Close()
	done := make(chan error, 1)
	go func() { done <- r.cmd.Wait() }()
	select {
	case err := <-done:
		if err != nil {
			t.Error(err)
		}
	case <-time.After(patience):
		t.Fatal("still there")
	}
	eventually(t, "end of the line", func() bool { return l.more(10*time.Millisecond) != nil })
	r.once.Do(func() {}) // waited for already
}

func TestEndsWithContext(t *testing.T) {
	t.Parallel()
	ctx, cancel := context.WithCancel(context.Background())
	c := quick(t)
	c.Folder = t.TempDir()
	r, err := Start(ctx, os.Args[0], nil, []string{asProcess + "=1"}, c)
	if err != nil {
		t.Fatal(err)
	}
	cancel()
	begin := time.Now()
	r.Close()
	if time.Since(begin) > patience {
		t.Errorf("took %v", time.Since(begin))
	}
	if _, err := os.Lstat(r.Lines()["gate"]); err == nil {
		t.Error("its lines are still there")
	}
}

func TestStartRefuses(t *testing.T) {
	if _, err := Start(context.Background(), os.Args[0], nil, []string{asProcess + "=1"}, Config{Circuit: "ring"}); !errors.Is(err, ErrConfig) {
		t.Errorf("a bad circuit: %v", err)
	}
	c := quick(t)
	c.Folder = "/dev/null/x"
	if _, err := Start(context.Background(), os.Args[0], nil, []string{asProcess + "=1"}, c); err == nil {
		t.Error("a folder that cannot be")
	}
	if _, err := Start(context.Background(), "/does/not/exist", nil, nil, quick(t)); err == nil {
		t.Error("a program that does not exist")
	}
	for _, in := range []string{"", "{}\n", "rubbish\n", `{"circuit":"fixed","nonsense"`} {
		var out bytes.Buffer
		if code := Main(strings.NewReader(in), &out); code != 1 || !strings.Contains(out.String(), `"error":"rehearsal`) {
			t.Errorf("%q: code %d, said %s", in, code, out.String())
		}
	}
	var out bytes.Buffer
	in := `{"circuit":"fixed","vdd_v":5}` + "\n" + `{"order":"dance"}` + "\n" + `{"order":"bye"}` + "\n"
	if code := Main(strings.NewReader(in), &out); code != 0 || !strings.Contains(out.String(), `no order \"dance\"`) {
		t.Errorf("code %d, said %s", code, out.String())
	}
}

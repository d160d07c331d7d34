package acquire

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"

	"gatesill/acquire/meter"
	"gatesill/acquire/scpi"
)

func (r *rig) sent(what, want string) {
	r.t.Helper()
	if got := strings.ReplaceAll(strings.Join(r.c.sent, " "), "\n", "/"); got != want {
		r.t.Errorf("%s: sent %q, want %q", what, got, want)
	}
	r.c.sent = nil
}

// One question at a time: the next when the reply is there and its time has come.
func TestListenAsks(t *testing.T) {
	r := onSocket(t, Source{Columns: gate, Speaks: "polled-ascii"})
	r.sent("at once", "D")
	f := r.frame("polled-ascii", volts(3.012))
	r.idle(100)
	r.bytes(200, f[:5])
	r.sent("not before the reply", "")
	r.bytes(210, f[5:])
	r.sent("after the reply", "D")
	r.expect("reading", "200.0ms gate=3.012V/0.001")
	r.bytes(400, f) // equal, and a conversion of its own: it was asked for
	r.expect("no repeat", "400.0ms gate=3.012V/0.001")
}

func TestListenEvery(t *testing.T) {
	r := onSocket(t, Source{Columns: gate, Speaks: "scpi", Every: 0.5, Options: meter.Options{Unit: "V"}})
	r.sent("at once", "READ?/")
	r.text(40, "READ?\r\n+3.01200000E+00\r")
	r.text(41, "\n")
	r.idle(480)
	r.sent("not yet", "")
	r.expect("echo and terminators", "40.0ms gate=3.012V")
	r.idle(510)
	r.sent("due", "READ?/")
	r.text(550, "+9.90000000E+37\n")
	r.idle(1000)
	r.sent("without drift", "READ?/")
	r.expect("overload", "550.0ms gate=overloadV")
	r.text(1040, "+3.1E+00,+2.0E-01\n")
	r.expect("a second column is not wanted", "1040.0ms gate=3.1V")
	r.idle(1500)
	r.text(1540, "ERROR\n")
	r.expectPart("not a number", "!line1: bad frame", "ERROR")
}

// No reply: told after a second, then what comes late is dropped, then asked again
// after clearing the instrument.
func TestListenTimeOut(t *testing.T) {
	r := onSocket(t, Source{Columns: gate, Speaks: "scpi"})
	r.sent("first", "READ?/")
	r.idle(990)
	r.expect("not yet", "")
	r.idle(1000)
	if len(r.events) != 1 || !errors.Is(r.events[0].Err, ErrNoReply) {
		t.Errorf("after the time-out: %s", r.said())
	}
	r.said()
	r.text(1500, "+1.0E+0\n")
	r.idle(1980)
	r.sent("not while a late reply may come", "")
	r.expect("late", "")
	r.idle(2000)
	r.sent("again", "*CLS/ READ?/")
	// It is known now that a reply takes 1.5 s.
	r.idle(4900)
	r.expect("patience", "")
	r.text(4950, "+2.0E+0\n")
	r.expect("reading", "4950.0ms gate=2V")
}

// Meters that do not answer are asked less and less often, and at least every 11 s.
func TestListenSilentMeter(t *testing.T) {
	r := newRig(t, Source{Columns: gate, Speaks: "polled-ascii"})
	r.open(0)
	for ms := 0.0; ms < 120_000; ms += 20 {
		r.idle(ms)
	}
	if n := len(r.c.sent); n < 11 || n > 25 {
		t.Errorf("%d questions in 120 s", n)
	}
}

func TestListenExpected(t *testing.T) {
	r := newRig(t, Source{Columns: gate, Speaks: "scpi", Setup: []string{"CONF:VOLT:DC 10", "VOLT:DC:NPLC 100"}})
	// 100 cycles of 50 Hz twice and 50 ms: 4.05 s; twice that is waited for
	if s := r.l.timeout().Seconds(); s < 8.1 || s > 8.2+1 {
		t.Errorf("time-out %g s", s)
	}
}

// instrument answers as an SCPI meter with a queue of errors.
type instrument struct {
	queue   []string
	refuses map[string]string // line -> error
	forever string            // reported again and again
}

func (i *instrument) answer(sent string) string {
	line, opc := strings.CutSuffix(strings.TrimSpace(sent), ";*OPC?")
	switch {
	case line == "*CLS":
		i.queue = nil
	case line == "SYST:ERR?":
		if len(i.queue) > 0 {
			e := i.queue[0]
			i.queue = i.queue[1:]
			return e + "\r\n"
		}
		if i.forever != "" {
			return i.forever + "\r\n"
		}
		return "+0,\"No error\"\r\n"
	case line == "*IDN?":
		return "maker,model,0,1.0\r\n"
	}
	if e, ok := i.refuses[line]; ok {
		i.queue = append(i.queue, e)
	}
	if opc {
		return "1\r\n"
	}
	return ""
}

func TestListenSetUp(t *testing.T) {
	undefined := `-113,"Undefined header"`
	for name, c := range map[string]struct {
		setup  []string
		meter  instrument
		want   string // "" accepted; else parts of the error joined with |
		reason error
	}{
		"accepted":                 {[]string{"CONF:VOLT:DC 10", "VOLT:DC:NPLC 1"}, instrument{}, "", nil},
		"old errors do not matter": {[]string{"CONF:VOLT:DC 10"}, instrument{queue: []string{undefined, undefined}}, "", nil},
		"remote":                   {[]string{"SYST:REM", "CONF:VOLT:DC 10"}, instrument{queue: []string{`-222,"x"`}}, "", nil},
		"remote is not known":      {[]string{"SYST:REM", "CONF:VOLT:DC 10"}, instrument{refuses: map[string]string{"SYST:REM": undefined}}, "", nil},
		"remote later":             {[]string{"CONF:VOLT:DC 10", "SYST:REM"}, instrument{refuses: map[string]string{"SYST:REM": undefined}}, "", nil},
		"query":                    {[]string{"*IDN?"}, instrument{}, "", nil},
		"a fault of its own":       {[]string{"CONF:VOLT:DC 10"}, instrument{forever: `-330,"Self-test failed"`}, "", nil},
		"refused": {[]string{"CONF:VOLT:DC 10", "VOLT:DC:NPLK 1"}, instrument{refuses: map[string]string{"VOLT:DC:NPLK 1": undefined}},
			"line1|set-up line 2|VOLT:DC:NPLK 1|-113", ErrSetUp},
		"no answer":      {[]string{"MEAS:TEMP?"}, instrument{}, "line1|MEAS:TEMP?", scpi.ErrSilent},
		"no error queue": {[]string{"CONF:VOLT:DC 10"}, instrument{forever: "what?"}, "line1|CONF:VOLT:DC 10|what?", scpi.ErrReply},
		"no command":     {[]string{""}, instrument{}, "line1|set-up line 1", scpi.ErrCommand},
	} {
		t.Run(name, func(t *testing.T) {
			r := newRig(t, Source{Columns: gate, Speaks: "scpi", Setup: c.setup})
			r.l.patience = 10 * time.Millisecond
			r.c.answer = c.meter.answer
			err := r.l.Opened(r.c, r.at(0))
			if c.want == "" {
				if err != nil {
					t.Fatal(err)
				}
				if len(r.events) != 1 || !r.events[0].Opened || r.c.sent[len(r.c.sent)-1] != "READ?\n" {
					t.Errorf("%s, sent %q", r.said(), r.c.sent)
				}
				return
			}
			if !errors.Is(err, c.reason) {
				t.Fatalf("%v, want %v", err, c.reason)
			}
			for _, p := range strings.Split(c.want, "|") {
				if !strings.Contains(err.Error(), p) {
					t.Errorf("%v does not say %q", err, p)
				}
			}
			if len(r.events) != 0 {
				t.Errorf("told: %s", r.said())
			}
		})
	}
}

func TestListenSetUpOfOthers(t *testing.T) {
	r := newRig(t, Source{Columns: gate, Speaks: "text", Setup: []string{"rate 10", "go\n"}})
	r.open(0)
	r.sent("lines", "rate 10/ go/")
	r = newRig(t, Source{Columns: gate, Speaks: "stx", Setup: []string{"x"}, Ask: "R"})
	r.open(0)
	r.sent("as they are", "x R")
}

// A question cannot be sent: the line is given up.
func TestListenWriteFails(t *testing.T) {
	r := newRig(t, Source{Columns: gate, Speaks: "polled-ascii"})
	r.c.writeErr = fmt.Errorf("line1: %w", errWire)
	if err := r.l.Opened(r.c, r.at(0)); !errors.Is(err, errWire) {
		t.Error(err)
	}
}

// FETCh? may bring one conversion twice.
func TestListenFetch(t *testing.T) {
	r := onSocket(t, Source{Columns: gate, Speaks: "scpi", Ask: "FETCh?"})
	for i, at := range []float64{100, 500, 900, 1000, 1300} {
		x := 1.0
		if i == 0 {
			x = 2
		}
		r.text(at, fmt.Sprintf("%.3f\n", x))
	}
	r.expect("repeat", "100.0ms gate=2V/0.001; 500.0ms gate=1V/0.001; 900.0ms gate=1V/0.001; 1000.0ms gate=1V/0.001(repeat); 1300.0ms gate=1V/0.001")
}

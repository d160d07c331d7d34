package scpi

import (
	"errors"
	"fmt"
	"slices"
	"strings"
	"testing"
	"time"

	"gatesill/acquire/port"
)

func plainInstrument() *instrument { return &instrument{volt: "+1.50000000E+00"} }

func want(t *testing.T, i *instrument, messages ...string) {
	t.Helper()
	if got := i.messages(); !slices.Equal(got, messages) {
		t.Errorf("the instrument was sent %q, want %q", got, messages)
	}
}

func TestQueryTakesEveryLineEnd(t *testing.T) {
	t.Parallel()
	for _, eol := range []string{"\n", "\r", "\r\n", "\n\r", "\r\n\r\n"} {
		t.Run(fmt.Sprintf("%q", eol), func(t *testing.T) {
			every(t, func() *instrument { i := plainInstrument(); i.eol = eol; return i }, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
				for range 3 {
					if got, err := talk.Query("READ?", 0); err != nil || got != "+1.50000000E+00" {
						t.Fatalf("got %q, %v", got, err)
					}
				}
				want(t, i, "READ?", "READ?", "READ?")
			})
		})
	}
}

func TestEchoIsDropped(t *testing.T) {
	every(t, func() *instrument { i := plainInstrument(); i.echo, i.eol = true, "\r\n"; return i }, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		for n := range 3 {
			if got, err := talk.Query("READ?", 0); err != nil || got != "+1.50000000E+00" {
				t.Fatalf("got %q, %v", got, err)
			}
			if err := talk.Do(fmt.Sprintf("VOLT %d", n)); err != nil {
				t.Fatal(err)
			}
			talk.Send("VOLT +1.50000000E+00")
		}
		if !talk.echoes {
			t.Error("the echo is not remembered")
		}
	})
}

// The reply to the first query comes when it is not expected any more. It must not
// be taken for the reply to anything else.
func TestLateReplyIsNotTakenForAnother(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.before = func(n int, message string) (string, bool) {
			if n == 1 {
				time.Sleep(350 * time.Millisecond)
				return "+9.99000000E+02\n", true
			}
			return "", false
		}
		return i
	}, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		if got, err := talk.Query("READ?", 200*time.Millisecond); err != nil || got != "+1.50000000E+00" {
			t.Errorf("got %q, %v", got, err)
		}
		want(t, i, "READ?", "*CLS", "*IDN?", "READ?")
	})
}

// It comes even later: while the instrument is asked who it is.
func TestVeryLateReplyIsNotTakenForAnother(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.before = func(n int, message string) (string, bool) {
			if n == 1 {
				time.Sleep(650 * time.Millisecond)
				return "+9.99000000E+02\n", true
			}
			return "", false
		}
		return i
	}, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		if got, err := talk.Query("READ?", 200*time.Millisecond); err != nil || got != "+1.50000000E+00" {
			t.Errorf("got %q, %v", got, err)
		}
	})
}

// What comes in unasked is no reply.
func TestUnaskedLineIsNotTakenForAReply(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.before = func(_ int, message string) (string, bool) { return "+7\n+8\n", message == "INIT" }
		return i
	}, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		talk.Send("INIT")
		time.Sleep(200 * time.Millisecond)
		if got, err := talk.Query("READ?", 0); err != nil || got != "+1.50000000E+00" {
			t.Errorf("got %q, %v", got, err)
		}
	})
}

// inPieces is a line on which a reply comes in pieces, one a Read; "" is a time-out.
type inPieces struct {
	port.Conn
	pieces []string
	t      *testing.T
	sent   int
}

func (c *inPieces) Read(p []byte) (int, error) {
	if len(c.pieces) == 0 {
		return 0, nil
	}
	n := copy(p, c.pieces[0])
	c.pieces = c.pieces[1:]
	return n, nil
}

func (c *inPieces) Write(p []byte) (int, error) {
	if c.sent++; c.sent > 1 && len(c.pieces) > 0 && c.pieces[0] == "\n" {
		c.t.Error("a message was sent into a reply")
	}
	return len(p), nil
}
func (c *inPieces) Discard() error          { return nil }
func (c *inPieces) ByteTime() time.Duration { return 0 }
func (c *inPieces) Address() string         { return "line" }

// An LF behind a CR is waited for before the next message, until it is known that
// none is sent.
func TestNothingIsSentIntoAReply(t *testing.T) {
	c := &inPieces{t: t, pieces: []string{"+1\r", "\n", "+2\r", "\n", "+3\r\n", "+4\r", "", "+5\r", "+6\r"}}
	talk := New(c, Options{})
	for n := 1; n <= 6; n++ {
		if got, err := talk.Query("READ?", 0); err != nil || got != fmt.Sprintf("+%d", n) {
			t.Fatalf("got %q, %v, want %d", got, err, n)
		}
	}
	if len(c.pieces) != 0 {
		t.Errorf("left: %q", c.pieces)
	}
}

func TestGarbledReplyIsAskedForAgain(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.before = func(n int, message string) (string, bool) { return "+1.5\x00\xff0E+00\n", n == 1 }
		return i
	}, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		if got, err := talk.Query("READ?", 50*time.Millisecond); err != nil || got != "+1.50000000E+00" {
			t.Errorf("got %q, %v", got, err)
		}
		want(t, i, "READ?", "*CLS", "*IDN?", "READ?")
	})
}

func TestSilenceIsAnError(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.before = func(int, string) (string, bool) { return "", true }
		return i
	}, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		if got, err := talk.Query("READ?", 50*time.Millisecond); !errors.Is(err, ErrSilent) || got != "" || !strings.Contains(err.Error(), talk.c.Address()) {
			t.Errorf("got %q, %v", got, err)
		}
		want(t, i, "READ?", "*CLS", "*IDN?")
	})
}

// It answers who it is, but not the query: that is sent twice and no more.
func TestQueryIsTriedTwice(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.before = func(_ int, message string) (string, bool) { return "", message == "READ?" }
		return i
	}, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		if _, err := talk.Query("READ?", 50*time.Millisecond); !errors.Is(err, ErrSilent) {
			t.Errorf("got %v", err)
		}
		want(t, i, "READ?", "*CLS", "*IDN?", "READ?")
	})
}

// A reply without end is no reply, however much comes of it.
func TestStreamWithoutLineEnds(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.before = func(n int, message string) (string, bool) { return strings.Repeat("7", 80<<10), n == 1 }
		return i
	}, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		if got, err := talk.Query("READ?", 200*time.Millisecond); err != nil || got != "+1.50000000E+00" {
			t.Errorf("got %.20q, %v", got, err)
		}
	})
}

func TestOneCommandAMessage(t *testing.T) {
	every(t, plainInstrument, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		for _, cmd := range []string{"", " ", "READ?\nREAD?", "VOLT 1\r"} {
			_, err := talk.Query(cmd, 0)
			for _, e := range []error{err, talk.Do(cmd), talk.Send(cmd)} {
				if !errors.Is(e, ErrCommand) {
					t.Errorf("%q: %v", cmd, e)
				}
			}
		}
		if err := talk.Do("VOLT?"); !errors.Is(err, ErrCommand) {
			t.Errorf("got %v", err)
		}
		want(t, i)
	})
}

func TestLineErrorsComeAsTheyAre(t *testing.T) {
	every(t, plainInstrument, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		talk.c.Close()
		if _, err := talk.Query("READ?", 0); !errors.Is(err, port.ErrClosed) {
			t.Errorf("got %v", err)
		}
		if err := talk.Do("VOLT 1"); !errors.Is(err, port.ErrClosed) {
			t.Errorf("got %v", err)
		}
	})
}

func TestTraceTellsBothSides(t *testing.T) {
	var said []string
	i := plainInstrument()
	talk := New(overSocket(t, i), Options{Trace: func(sent bool, text string, at time.Time) {
		if at.IsZero() {
			t.Error("no time")
		}
		said = append(said, fmt.Sprintf("%v %s", sent, text))
	}})
	talk.Query("VOLT?", 0)
	if got := strings.Join(said, "|"); got != "true VOLT?|false +1.50000000E+00" {
		t.Errorf("got %s", got)
	}
}

func TestGapBetweenMessages(t *testing.T) {
	i := plainInstrument()
	talk := New(overSocket(t, i), Options{Plain: true, Gap: 60 * time.Millisecond})
	start := time.Now()
	for range 3 {
		if err := talk.Do("VOLT 1"); err != nil {
			t.Fatal(err)
		}
	}
	if took := time.Since(start); took < 120*time.Millisecond {
		t.Errorf("three messages in %v", took)
	}
}

// A dialect of letters: no line end behind replies, no completion, no queue.
func TestPlain(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.before = func(n int, message string) (string, bool) {
			switch message {
			case "I1?":
				return "0.125A", true
			case "V1?":
				if n == 3 {
					return "", true // it did not hear
				}
				return "12.00V", true
			}
			return "", true
		}
		return i
	}, Options{Plain: true}, func(t *testing.T, i *instrument, talk *Talk) {
		if err := talk.Do("V1 12.00"); err != nil {
			t.Fatal(err)
		}
		if got, err := talk.Query("I1?", 400*time.Millisecond); err != nil || got != "0.125A" {
			t.Errorf("got %q, %v", got, err)
		}
		if got, err := talk.Query("V1?", 400*time.Millisecond); err != nil || got != "12.00V" {
			t.Errorf("got %q, %v", got, err)
		}
		if e, err := talk.Errors(); e != nil || err != nil {
			t.Errorf("got %v, %v", e, err)
		}
		want(t, i, "V1 12.00", "I1?", "V1?", "V1?")
	})
}

func TestPatience(t *testing.T) {
	// By hand: 2 x (10/50 Hz + 0.05 s) + 16 x 10/9600 is under a second; 2 x (100/50 Hz
	// + 0.05 s) + 16 x 10/2400 = 4.1 s + 66.7 ms is not.
	if got := Patience(200*time.Millisecond, 16, port.Settings{Baud: 9600, DataBits: 8, StopBits: 1}.ByteTime()); got != time.Second {
		t.Errorf("got %v", got)
	}
	if got := Patience(2*time.Second, 16, port.Settings{Baud: 2400, DataBits: 8, StopBits: 1}.ByteTime()).Round(100 * time.Microsecond); got != 4166700*time.Microsecond {
		t.Errorf("got %v", got)
	}
}

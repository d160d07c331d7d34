package scpi

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"
)

func refusal(t *testing.T, err error, code int) *Refused {
	t.Helper()
	var r *Refused
	if !errors.As(err, &r) || r.Code != code {
		t.Fatalf("got %v, want a refusal with %d", err, code)
	}
	return r
}

func TestDoWaitsAndReadsTheQueue(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.queue = []string{`-100,"Left by the last user"`}
		return i
	}, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		if err := talk.Do("VOLT 3"); err != nil {
			t.Fatalf("an old error was held against the command: %v", err)
		}
		want(t, i, "SYST:ERR?", "SYST:ERR?", "*CLS", "SYST:ERR?", "VOLT 3;*OPC?", "SYST:ERR?")
		r := refusal(t, talk.Do("VOLT 99"), -222)
		if r.Command != "VOLT 99" || r.Text != `Data out of range; "VOLT" is too great` || len(r.All) != 1 || r.Line != talk.c.Address() {
			t.Errorf("got %+v", r)
		}
		if err := talk.Do("VOLT 4"); err != nil {
			t.Errorf("the command after a refused one: %v", err)
		}
	})
}

// An instrument drops what stands behind a command that it does not know: the reply
// to *OPC? never comes, and that is a refusal, not silence.
func TestRefusalWithoutCompletion(t *testing.T) {
	every(t, func() *instrument { i := plainInstrument(); i.dropRest = true; return i },
		Options{Timeout: 200 * time.Millisecond}, func(t *testing.T, i *instrument, talk *Talk) {
			refusal(t, talk.Do("FUNC:VOLT 3"), -113)
			if err := talk.Do("VOLT 3"); err != nil {
				t.Error(err)
			}
		})
}

// The 1 of *OPC? comes after its time; it is no reply to SYST:ERR?.
func TestLateCompletion(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.before = func(_ int, message string) (string, bool) {
			if strings.HasPrefix(message, "VOLT") {
				time.Sleep(300 * time.Millisecond)
			}
			return "", false
		}
		return i
	}, Options{Timeout: 200 * time.Millisecond}, func(t *testing.T, i *instrument, talk *Talk) {
		if err := talk.Do("VOLT 3"); err != nil {
			t.Errorf("it was done: %v", err)
		}
		refusal(t, talk.Do("VOLT 99"), -222)
	})
}

// Nobody can tell whether it was done, and it is not sent again.
func TestSilentDo(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.before = func(_ int, message string) (string, bool) { return "", strings.HasPrefix(message, "STEP") }
		return i
	}, Options{Timeout: 300 * time.Millisecond}, func(t *testing.T, i *instrument, talk *Talk) {
		if err := talk.Do("STEP UP"); !errors.Is(err, ErrSilent) {
			t.Fatalf("got %v", err)
		}
		n := 0
		for _, m := range i.messages() {
			if strings.HasPrefix(m, "STEP") {
				n++
			}
		}
		if n != 1 {
			t.Errorf("sent %d times", n)
		}
		if err := talk.Do("VOLT 3"); err != nil {
			t.Errorf("after it: %v", err)
		}
	})
}

// The completion is in, but the queue does not answer: then nothing says that the
// command was taken.
func TestDoneButQueueSilent(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		done := false
		i.before = func(_ int, message string) (string, bool) {
			done = done || strings.HasPrefix(message, "VOLT")
			return "", done && message == "SYST:ERR?"
		}
		return i
	}, Options{Timeout: 300 * time.Millisecond}, func(t *testing.T, i *instrument, talk *Talk) {
		if err := talk.Do("VOLT 99"); !errors.Is(err, ErrSilent) {
			t.Errorf("got %v", err)
		}
	})
}

// A fault of the instrument is in its queue again whenever that was emptied. It is
// held against no command, and hides no refusal.
func TestStandingFault(t *testing.T) {
	for _, endless := range []bool{false, true} {
		t.Run(fmt.Sprint("endless ", endless), func(t *testing.T) {
			every(t, func() *instrument {
				i := plainInstrument()
				i.standing = `-340,"Calibration failed"`
				if endless {
					i.before = func(_ int, message string) (string, bool) { // never "No error"
						i.mu.Lock()
						defer i.mu.Unlock()
						return i.standing + "\n", message == "SYST:ERR?" && len(i.queue) == 0
					}
				}
				return i
			}, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
				if err := talk.Do("VOLT 3"); err != nil {
					t.Errorf("got %v", err)
				}
				before := len(i.messages())
				refusal(t, talk.Do("VOLT 99"), -222)
				if n := len(i.messages()) - before; n > 6 {
					t.Errorf("%d messages for one command", n)
				}
			})
		})
	}
}

func TestQueueThatNeverEmpties(t *testing.T) {
	every(t, func() *instrument { i := plainInstrument(); i.endless = `-222,"Data out of range"`; return i },
		Options{}, func(t *testing.T, i *instrument, talk *Talk) {
			entries, err := talk.Errors()
			if !errors.Is(err, ErrEndless) || len(entries) != errorCap || entries[0].Code != -222 {
				t.Errorf("%d entries, %v", len(entries), err)
			}
			// Such an error is of a command, whoever sent it: nothing can be proved.
			refusal(t, talk.Do("VOLT 3"), -222)
		})
}

func TestQueueOverflow(t *testing.T) {
	every(t, func() *instrument { i := plainInstrument(); i.depth = 10; return i }, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		r := refusal(t, talk.Do("BURST"), 1)
		if len(r.All) != 10 || r.All[9].Code != queueOverflow {
			t.Errorf("got %v", r.All)
		}
		if err := talk.Do("VOLT 3"); err != nil {
			t.Errorf("after it: %v", err)
		}
	})
}

func TestErrorsGivesTheQueueAfterSilence(t *testing.T) {
	every(t, func() *instrument {
		i := plainInstrument()
		i.before = func(_ int, message string) (string, bool) { return "", message == "READ?" }
		return i
	}, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		if _, err := talk.ask("READ?", 50*time.Millisecond); !errors.Is(err, ErrSilent) {
			t.Fatal(err)
		}
		i.mu.Lock()
		i.fail(`-420,"Query unterminated"`)
		i.mu.Unlock()
		talk.o.Timeout = 300 * time.Millisecond
		entries, err := talk.Errors()
		if err != nil || len(entries) != 1 || entries[0].Code != -420 {
			t.Errorf("%v, %v", entries, err)
		}
	})
}

func TestIdentifyAndRemote(t *testing.T) {
	every(t, plainInstrument, Options{}, func(t *testing.T, i *instrument, talk *Talk) {
		id, err := talk.Identify()
		if err != nil || id != (Identity{Maker: "Nobody", Model: "Model 1", Firmware: "1.02", Text: "Nobody,Model 1,0,1.02"}) {
			t.Errorf("%+v, %v", id, err)
		}
		if err := talk.Remote(); err != nil { // which this one does not know
			t.Error(err)
		}
		if e, err := talk.Errors(); len(e) != 0 || err != nil {
			t.Errorf("left in the queue: %v, %v", e, err)
		}
	})
}

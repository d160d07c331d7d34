package keeper

import (
	"bufio"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"sync"
	"testing"
	"time"

	"gatesill/acquire/port"
)

// rig runs the keeper's loop in this process, with supplies in memory.
type rig struct {
	t       *testing.T
	notes   *notes
	in      *io.PipeWriter
	answers chan answer
	code    chan int
	id      int

	mu    sync.Mutex
	wires map[string][]*wire // by address, one for each time that the line was opened
	fail  map[string]error   // opening gives it
}

// hurried is for supplies that answer at once.
var hurried = limits{
	reply: 800 * time.Millisecond, settle: 150 * time.Millisecond, poll: 100 * time.Millisecond,
	pauses: []time.Duration{0, 10 * time.Millisecond, 20 * time.Millisecond, 50 * time.Millisecond},
}

// generous is longer than anything here takes on a loaded machine.
const generous = 20 * time.Second

func gateOnly() Config {
	return Config{Gate: Supply{Drives: "gate", Name: "G", Address: "gate", Limit: 0.02}, MaxVgs: 10, BeatLimit: time.Hour}
}

func gateAndDrain() Config {
	c := gateOnly()
	c.Drain = &Supply{Drives: "drain", Name: "D", Address: "drain", Limit: 1, Voltage: 12}
	return c
}

// newRig sends the configuration and does not wait for the start.
func newRig(t *testing.T, c Config, supplies ...*supply) *rig {
	t.Helper()
	r := &rig{t: t, answers: make(chan answer, 100), code: make(chan int, 1), wires: map[string][]*wire{}, fail: map[string]error{}}
	byName := map[string]*supply{}
	for _, s := range supplies {
		byName[s.name] = s
		r.notes = s.notes
	}
	open := func(address, settings string) (port.Conn, error) {
		r.mu.Lock()
		defer r.mu.Unlock()
		if err := r.fail[address]; err != nil {
			return nil, err
		}
		s := byName[address]
		if s == nil {
			return nil, fmt.Errorf("%s: %w", address, port.ErrAbsent)
		}
		w := newWire(s)
		r.wires[address] = append(r.wires[address], w)
		return w, nil
	}
	inR, inW := io.Pipe()
	outR, outW := io.Pipe()
	r.in = inW
	go func() {
		code := serve(inR, outW, open, hurried)
		outW.Close()
		inR.Close()
		r.code <- code
	}()
	go func() {
		for in := bufio.NewScanner(outR); in.Scan(); {
			var a answer
			if err := json.Unmarshal(in.Bytes(), &a); err != nil {
				t.Errorf("answer %q: %v", in.Text(), err)
			}
			r.answers <- a
		}
		close(r.answers)
	}()
	r.write(c)
	t.Cleanup(func() { r.in.Close() })
	return r
}

// started waits for the start too.
func started(t *testing.T, c Config, supplies ...*supply) *rig {
	t.Helper()
	r := newRig(t, c, supplies...)
	if a := r.next(); a.Error != "" {
		t.Fatalf("start: %s\n%s", a.Error, r.notes)
	}
	return r
}

func (r *rig) write(v any) {
	r.t.Helper()
	b, err := json.Marshal(v)
	if err != nil {
		r.t.Fatal(err)
	}
	if _, err := r.in.Write(append(b, '\n')); err != nil {
		r.t.Fatal(err)
	}
}

func (r *rig) next() answer {
	r.t.Helper()
	select {
	case a, ok := <-r.answers:
		if !ok {
			r.t.Fatal("the keeper ended")
		}
		return a
	case <-time.After(generous):
		r.t.Fatalf("no answer\n%s", r.notes)
	}
	return answer{}
}

func (r *rig) ask(o order) answer {
	r.t.Helper()
	r.id++
	o.ID = r.id
	r.write(o)
	a := r.next()
	if a.ID != o.ID {
		r.t.Fatalf("order %+v, answer to %d: %+v", o, a.ID, a)
	}
	return a
}

func (r *rig) done(o order) answer {
	r.t.Helper()
	a := r.ask(o)
	if a.Error != "" {
		r.t.Fatalf("%+v: %s\n%s", o, a.Error, r.notes)
	}
	return a
}

func (r *rig) wire(address string) *wire {
	r.mu.Lock()
	defer r.mu.Unlock()
	ws := r.wires[address]
	return ws[len(ws)-1]
}

func (r *rig) ended() int {
	r.t.Helper()
	select {
	case c := <-r.code:
		return c
	case <-time.After(generous):
		r.t.Fatal("the keeper does not end")
	}
	return -1
}

func (s *supply) state() output {
	s.mu.Lock()
	defer s.mu.Unlock()
	return *s.outputs[1]
}

// wantOff fails unless the report tells of an off state that was reached.
func wantOff(t *testing.T, r *OffReport, drain string, gate float64, held bool) {
	t.Helper()
	if r == nil {
		t.Fatal("no report")
	}
	if !r.Reached || r.Drain != drain || r.GateHeld != held || !(math.Abs(r.Gate-gate) < 0.05) {
		t.Fatalf("report %+v; want drain %q, gate %g V, held %v", *r, drain, gate, held)
	}
}

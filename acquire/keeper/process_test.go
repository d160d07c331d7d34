package keeper

import (
	"fmt"
	"strings"
	"testing"
	"time"
)

// pair gives a gate and a drain supply that share one list of notes.
func pair() (gate, drain *supply) {
	n := &notes{}
	return newSupply("gate", n, 1), newSupply("drain", n, 1)
}

func TestStaleSetPointsNeverReachTheOutput(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	gate.with(func(o *output) { o.volts, o.amps = 25, 5 })
	drain.with(func(o *output) { o.volts, o.amps = 28, 5 })
	c := gateAndDrain()
	r := started(t, c, gate, drain)
	g, d := gate.state(), drain.state()
	if !g.on || g.highest > 0 || g.amps != 0.02 {
		t.Errorf("gate output %+v", g)
	}
	if d.on || d.highest > 0 || d.volts != 12 || d.amps != 1 {
		t.Errorf("drain output %+v", d)
	}
	r.done(order{Do: doDrain, On: true})
	if d := drain.state(); d.highest != 12 {
		t.Errorf("drain gave up to %g V", d.highest)
	}
}

func TestOutputsLeftOnAreSwitchedOffDrainFirst(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	gate.with(func(o *output) { o.volts, o.on = 5, true })
	drain.with(func(o *output) { o.volts, o.on = 28, true })
	started(t, gateAndDrain(), gate, drain)
	d, v, g := gate.notes.first("drain", "OUTP OFF", 0), gate.notes.first("gate", "VOLT 0", 0), gate.notes.first("gate", "OUTP OFF", 0)
	if d < 0 || v < d || g < v {
		t.Errorf("drain off %d, gate set %d, gate off %d\n%s", d, v, g, gate.notes)
	}
}

func TestSetReadsBack(t *testing.T) {
	t.Parallel()
	gate, _ := pair()
	r := started(t, gateOnly(), gate)
	a := r.done(order{Do: doGate, V: 3.25})
	if a.V == nil || *a.V != 3.25 || gate.state().volts != 3.25 {
		t.Fatalf("answer %+v, output %+v", a, gate.state())
	}
	for _, v := range []float64{10.01, -10.01} {
		if a := r.ask(order{Do: doGate, V: v}); a.err() == nil || a.Kind != "high" || gate.state().volts != 3.25 {
			t.Errorf("%g V: %+v, output %+v", v, a, gate.state())
		}
	}
	a = r.done(order{Do: doBye})
	wantOff(t, a.Off, drainFixed, 0, true)
	if code := r.ended(); code != 0 {
		t.Errorf("exit code %d", code)
	}
	if g := gate.state(); !g.on || g.volts != 0 {
		t.Errorf("gate output after bye %+v", g)
	}
}

func TestNoSetReachesTheSupplyAboveTheLimit(t *testing.T) {
	t.Parallel()
	gate, _ := pair()
	c := gateOnly()
	c.Gate.Negative = true
	r := started(t, c, gate)
	if a := r.ask(order{Do: doGate, V: 1}); a.Kind != "high" {
		t.Errorf("a positive voltage with swapped leads: %+v", a)
	}
	if a := r.done(order{Do: doGate, V: -2.5}); *a.V != -2.5 || gate.state().volts != 2.5 {
		t.Errorf("swapped leads: %+v, output %+v", a, gate.state())
	}
}

func TestRoundingDoesNotPassTheLimit(t *testing.T) {
	t.Parallel()
	gate, _ := pair()
	c := gateOnly()
	c.MaxVgs = 3.06
	c.Gate.Commands = map[string]string{"set": "VOLT %.1f", "on": "OUTP ON", "off": "OUTP OFF", "read": "MEAS:VOLT?", "limit": "CURR {v}"}
	r := started(t, c, gate)
	if a := r.ask(order{Do: doGate, V: 3.06}); a.Kind != "high" || gate.state().highest != 0 {
		t.Errorf("%+v, gate %+v", a, gate.state())
	}
	r.done(order{Do: doGate, V: 3.04})
	if g := gate.state(); g.volts != 3 {
		t.Errorf("gate %+v", g)
	}
}

// A supply of another language is sent its own templates and nothing else.
func TestOwnLanguage(t *testing.T) {
	t.Parallel()
	gate, _ := pair()
	c := gateOnly()
	c.Bleed = true
	c.Gate.Limit = 0
	c.Gate.Commands = map[string]string{"set": "VOLT +{v}", "on": "OUTP ON", "off": "OUTP OFF", "read": "MEAS:VOLT?"}
	r := started(t, c, gate)
	r.done(order{Do: doGate, V: 2})
	a := r.done(order{Do: doBye})
	wantOff(t, a.Off, drainFixed, 0, false)
	for _, s := range gate.notes.all() {
		head, _, _ := strings.Cut(s.text, " ")
		if head != "VOLT" && head != "OUTP" && head != "MEAS:VOLT?" {
			t.Errorf("it was sent %q", s.text)
		}
	}
}

func TestWatchdogOfTheSupply(t *testing.T) {
	t.Parallel()
	gate, _ := pair()
	c := gateOnly()
	c.Gate.Commands = map[string]string{"watchdog": "OUTP:WDOG 2"}
	r := newRig(t, c, gate)
	if a := r.next(); a.Kind != "config" || !strings.Contains(a.Error, "undefined header") {
		t.Errorf("a supply without one: %+v", a) // the model has none
	}
	if w, on := gate.notes.first("gate", "OUTP:WDOG 2", 0), gate.notes.first("gate", "OUTP ON", 0); w < 0 || on >= 0 {
		t.Errorf("%s", gate.notes)
	}
}

func TestRefusedSetLeavesTheDecisionToTheProgram(t *testing.T) {
	t.Parallel()
	for _, drops := range []bool{false, true} {
		gate, _ := pair()
		gate.greatest, gate.drops = 5, drops
		r := started(t, gateOnly(), gate)
		r.done(order{Do: doGate, V: 2})
		a := r.ask(order{Do: doGate, V: 6})
		if a.Kind != "refused" || !strings.Contains(a.Error, "out of range") {
			t.Fatalf("drops %v: %+v", drops, a)
		}
		time.Sleep(2 * hurried.poll) // a poll finds it where it was
		if a := r.done(order{Do: doStatus}); a.Off != nil || *a.V != 2 {
			t.Errorf("drops %v: %+v", drops, a)
		}
	}
}

func TestDrainOnlyWithTheGateOff(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	r := started(t, gateAndDrain(), gate, drain)
	r.done(order{Do: doGate, V: 2})
	if a := r.ask(order{Do: doDrain, On: true}); a.Kind != "refused" || drain.state().on {
		t.Errorf("%+v, drain %+v", a, drain.state())
	}
	r.done(order{Do: doGate, V: 0})
	r.done(order{Do: doDrain, On: true})
	if a := r.done(order{Do: doStatus}); !a.Drain || !drain.state().on {
		t.Errorf("%+v", a)
	}
	r.done(order{Do: doDrain, On: false})
	if a := r.done(order{Do: doStatus}); a.Drain || drain.state().on {
		t.Errorf("%+v", a)
	}
}

func TestEndOfOrders(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	r := started(t, gateAndDrain(), gate, drain)
	r.done(order{Do: doDrain, On: true})
	r.done(order{Do: doGate, V: 3})
	r.in.Close()
	if code := r.ended(); code != 0 {
		t.Errorf("exit code %d", code)
	}
	if g, d := gate.state(), drain.state(); !g.on || g.volts != 0 || d.on {
		t.Errorf("gate %+v, drain %+v", g, d)
	}
}

func TestEndOfOrdersWhileStarting(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	gate.slow = 50 * time.Millisecond
	gate.with(func(o *output) { o.volts, o.on = 5, true })
	r := newRig(t, gateAndDrain(), gate, drain)
	for gate.notes.first("gate", "CURR 0.02", 0) < 0 {
		time.Sleep(time.Millisecond)
	}
	from := len(gate.notes.all())
	r.in.Close()
	if code := r.ended(); code == 0 {
		t.Error("exit code 0 of a start that was broken off")
	}
	if gate.notes.first("gate", "OUTP ON", 0) >= 0 || gate.notes.first("drain", "OUTP OFF", from) < 0 || gate.notes.first("gate", "VOLT 0", from) < 0 {
		t.Errorf("the way off was not gone\n%s", gate.notes)
	}
}

func TestMalformedOrders(t *testing.T) {
	t.Parallel()
	for _, line := range []string{"nonsense", `{"do":"gat`, `{"do":"gate","v":"x"}`, `{"do":"fly"}`, `{"do":"gate","volts":3}`,
		`{"do":"beat"}{"do":"beat"}`, `null`, strings.Repeat("x", 2*longestLine)} {
		gate, _ := pair()
		r := started(t, gateOnly(), gate)
		r.done(order{Do: doGate, V: 3})
		go fmt.Fprintln(r.in, line)
		a := r.next()
		wantOff(t, a.Off, drainFixed, 0, true)
		if a.ID != unasked || a.Off.Reason == "" {
			t.Errorf("%.40q: %+v", line, a)
		}
	}
}

func TestMissedHeartbeat(t *testing.T) {
	t.Parallel()
	gate, _ := pair()
	c := gateOnly()
	c.BeatLimit = 300 * time.Millisecond
	r := started(t, c, gate)
	r.done(order{Do: doGate, V: 3})
	for range 10 { // longer than the limit, all together
		time.Sleep(40 * time.Millisecond)
		r.write(order{Do: doBeat})
	}
	if a := r.done(order{Do: doStatus}); a.Off != nil {
		t.Fatalf("off while the heart beats: %+v", a.Off)
	}
	stopped := time.Now()
	a := r.next()
	wantOff(t, a.Off, drainFixed, 0, true)
	if !strings.Contains(a.Off.Reason, "heartbeat") || time.Since(stopped) < 200*time.Millisecond {
		t.Errorf("%+v after %v", a.Off, time.Since(stopped))
	}
}

func TestStatusIsNoHeartbeat(t *testing.T) {
	t.Parallel()
	gate, _ := pair()
	c := gateOnly()
	c.BeatLimit = 200 * time.Millisecond
	r := started(t, c, gate)
	for range 200 {
		r.write(order{Do: doStatus, ID: 7})
		if a := r.next(); a.Off != nil {
			wantOff(t, a.Off, drainFixed, 0, true)
			return
		}
		time.Sleep(20 * time.Millisecond)
	}
	t.Fatal("asking for the status kept the keeper content")
}

func TestASlowOrderIsNoMissedHeartbeat(t *testing.T) {
	t.Parallel()
	gate, _ := pair()
	c := gateOnly()
	c.BeatLimit = 200 * time.Millisecond
	r := started(t, c, gate)
	gate.mu.Lock()
	gate.slow = 150 * time.Millisecond // an order has three answers
	gate.mu.Unlock()
	r.done(order{Do: doGate, V: 3})
	a := r.next()
	if a.Off == nil || !strings.Contains(a.Off.Reason, "heartbeat") {
		t.Errorf("%+v", a)
	}
}

func TestPollSeesAGateThatMovesAway(t *testing.T) {
	t.Parallel()
	gate, _ := pair()
	r := started(t, gateOnly(), gate)
	gate.with(func(o *output) { o.volts = 4 }) // somebody turns the knob
	a := r.next()
	wantOff(t, a.Off, drainFixed, 0, true)
}

func TestTwoOutputsOfOneSupply(t *testing.T) {
	t.Parallel()
	n := &notes{}
	both := newSupply("box", n, 2)
	c := gateAndDrain()
	c.Gate.Address, c.Gate.Output = "box", 1
	c.Drain.Address, c.Drain.Output = "box", 2
	r := started(t, c, both)
	r.done(order{Do: doDrain, On: true})
	r.done(order{Do: doGate, V: 3})
	if g, d := *both.outputs[1], *both.outputs[2]; g.volts != 3 || !d.on || d.volts != 12 || d.amps != 1 || g.amps != 0.02 {
		t.Fatalf("gate %+v, drain %+v", g, d)
	}
	a := r.done(order{Do: doOff, Reason: "test"})
	wantOff(t, a.Off, drainOff, 0, true)
	if len(r.wires["box"]) != 1 {
		t.Errorf("%d connections to one instrument", len(r.wires["box"]))
	}
}

func TestStartRefuses(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	gate.unknown = true
	r := newRig(t, gateAndDrain(), gate, drain)
	if a := r.next(); a.Kind != "config" {
		t.Errorf("%+v", a)
	}
	if code := r.ended(); code != 2 {
		t.Errorf("exit code %d", code)
	}
	for _, s := range gate.notes.all() {
		if s.text != "*IDN?" {
			t.Errorf("an instrument that does not say what it is was told %q", s.text)
		}
	}

	gate, drain = pair()
	gate.with(func(o *output) { o.add = 2 })
	r = newRig(t, gateAndDrain(), gate, drain)
	a := r.next()
	if a.Kind != "config" || a.Off == nil || !strings.Contains(a.Error, "2 V, not 0 V") {
		t.Errorf("%+v", a)
	}
	if code := r.ended(); code != 1 {
		t.Errorf("exit code %d for an off voltage that was not reached", code)
	}
}

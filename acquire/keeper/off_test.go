package keeper

import (
	"strings"
	"testing"
	"time"

	"gatesill/acquire/port"
)

func TestDepletionDrainGoesFirst(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	c := gateAndDrain()
	c.Depletion, c.OffVoltage, c.Bleed = true, -6, true
	r := started(t, c, gate, drain)
	r.done(order{Do: doDrain, On: true})
	r.done(order{Do: doGate, V: -2})
	from := len(gate.notes.all())
	a := r.done(order{Do: doOff, Reason: "test"})
	wantOff(t, a.Off, drainOff, -6, false)
	d, v, o := gate.notes.first("drain", "OUTP OFF", from), gate.notes.first("gate", "VOLT -6", from), gate.notes.first("gate", "OUTP OFF", from)
	if d < 0 || v < d || o < v {
		t.Errorf("drain off %d, gate set %d, gate opened %d\n%s", d, v, o, gate.notes)
	}
}

func TestGateStaysHeldWhileADrainSupplyDoesNotGoOff(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	r := started(t, gateAndDrain(), gate, drain)
	r.done(order{Do: doDrain, On: true})
	drain.with(func(o *output) { o.refuseOff, o.refuseSet = true, true })
	a := r.done(order{Do: doOff, Gone: true})
	if a.Off.Reached || !a.Off.GateHeld || !gate.state().on {
		t.Errorf("%+v, gate %+v", *a.Off, gate.state())
	}
	drain.with(func(o *output) { o.refuseOff = false })
	a = r.done(order{Do: doOff, Gone: true})
	wantOff(t, a.Off, drainOff, 0, false)
}

// A gate that cannot be led to its off voltage is opened where a resistor holds it.
func TestGateThatDoesNotMoveIsOpened(t *testing.T) {
	t.Parallel()
	for _, bleed := range []bool{true, false} {
		gate, _ := pair()
		c := gateOnly()
		c.Bleed = bleed
		r := started(t, c, gate)
		r.done(order{Do: doGate, V: 3})
		gate.with(func(o *output) { o.refuseSet = true })
		a := r.done(order{Do: doOff})
		if a.Off.Reached != bleed || a.Off.GateHeld || gate.state().on == bleed || (a.Off.Gate == 0) != bleed || len(a.Off.Errors) == 0 {
			t.Errorf("bleed %v: %+v, gate %+v", bleed, a.Off, gate.state())
		}
	}
}

func TestDepletionGateStaysHeldWhileTheDrainIsOn(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	c := gateAndDrain()
	c.Depletion, c.OffVoltage, c.Bleed = true, -6, true
	r := started(t, c, gate, drain)
	r.done(order{Do: doDrain, On: true})
	drain.with(func(o *output) { o.refuseOff, o.refuseSet = true, true })
	a := r.done(order{Do: doOff, Gone: true})
	if a.Off.Reached || !a.Off.GateHeld || a.Off.Drain == drainOff || !gate.state().on {
		t.Errorf("%+v, gate %+v", *a.Off, gate.state())
	}
}

func TestGateHeldOrOpened(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ bleed, gone, held bool }{{false, false, true}, {true, false, false}, {false, true, false}} {
		gate, _ := pair()
		cfg := gateOnly()
		cfg.Bleed = c.bleed
		r := started(t, cfg, gate)
		r.done(order{Do: doGate, V: 3})
		a := r.done(order{Do: doOff, Reason: "test", Gone: c.gone})
		wantOff(t, a.Off, drainFixed, 0, c.held)
		if g := gate.state(); g.on != c.held || g.volts != 0 {
			t.Errorf("%+v: gate %+v", c, g)
		}
	}
}

func TestHeldGateIsOpenedLater(t *testing.T) {
	t.Parallel()
	gate, _ := pair()
	r := started(t, gateOnly(), gate)
	r.done(order{Do: doGate, V: 3})
	a := r.done(order{Do: doOff, Reason: "limit"})
	wantOff(t, a.Off, drainFixed, 0, true)
	a = r.done(order{Do: doOff, Gone: true})
	wantOff(t, a.Off, drainFixed, 0, false)
	if a.Off.Reason != "limit" || gate.state().on {
		t.Errorf("%+v, gate %+v", a.Off, gate.state())
	}
	if a := r.ask(order{Do: doGate, V: 1}); a.Kind != "off" || gate.state().volts != 0 {
		t.Errorf("set in the off state: %+v", a)
	}
}

func TestOffOrderBreaksInOnASlowSupply(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	r := started(t, gateAndDrain(), gate, drain)
	r.done(order{Do: doDrain, On: true})
	gate.mu.Lock()
	gate.slow = 500 * time.Millisecond
	gate.mu.Unlock()
	r.write(order{Do: doGate, V: 3, ID: 1000})
	for gate.notes.first("gate", "VOLT 3", 0) < 0 {
		time.Sleep(time.Millisecond)
	}
	from := len(gate.notes.all())
	asked := time.Now()
	r.write(order{Do: doOff, Reason: "limit", ID: 1001})
	if a := r.next(); a.ID != 1000 || a.Kind != "off" {
		t.Errorf("broken-off order: %+v", a)
	}
	a := r.next()
	wantOff(t, a.Off, drainOff, 0, true)
	i := gate.notes.first("gate", "VOLT 0", from)
	if i < 0 {
		t.Fatalf("no order to go off\n%s", gate.notes)
	}
	if took := gate.notes.all()[i].at.Sub(asked); took > 400*time.Millisecond {
		t.Errorf("the order waited %v for an answer that it does not need", took)
	}
}

func TestReadBackWrong(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	r := started(t, gateAndDrain(), gate, drain)
	r.done(order{Do: doDrain, On: true})
	gate.with(func(o *output) { o.add = 1 }) // a short to the drain, say
	a := r.ask(order{Do: doGate, V: 3})
	if a.Kind != "readback" || a.V == nil || *a.V != 4 {
		t.Errorf("%+v", a)
	}
	a = r.next()
	if a.Off == nil || a.Off.Reached || a.Off.GateHeld || a.Off.Drain != drainOff || a.Off.Gate != 1 || len(a.Off.Errors) == 0 {
		t.Fatalf("%+v", a.Off)
	}
	n := 0
	for _, s := range gate.notes.all() {
		if s.who == "gate" && s.text == "VOLT 0" {
			n++
		}
	}
	if n < 1+len(hurried.pauses) {
		t.Errorf("the off voltage was set %d times\n%s", n, gate.notes)
	}
}

func TestSupplyRefusesToSwitchOff(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	r := started(t, gateAndDrain(), gate, drain)
	r.done(order{Do: doDrain, On: true})
	drain.with(func(o *output) { o.refuseOff = true })
	a := r.done(order{Do: doOff, Reason: "test"})
	if !a.Off.Reached || !strings.Contains(a.Off.Drain, "refused to switch off") || drain.state().volts != 0 {
		t.Errorf("%+v, drain %+v", a.Off, drain.state())
	}
	if !strings.Contains(strings.Join(a.Off.Errors, " "), "command protected") {
		t.Errorf("what the supply said is not told: %q", a.Off.Errors)
	}
}

func TestDrainLineLostGateStillGoesOff(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	r := started(t, gateAndDrain(), gate, drain)
	r.done(order{Do: doDrain, On: true})
	r.done(order{Do: doGate, V: 3})
	r.mu.Lock()
	r.fail["drain"] = port.ErrAbsent
	r.mu.Unlock()
	r.wire("drain").set(func(w *wire) { w.broken = port.ErrLost })
	a := r.next() // the poll finds it
	if a.Off.Reached || a.Off.Drain == drainOff || !a.Off.GateHeld || a.Off.Gate != 0 || gate.state().volts != 0 {
		t.Errorf("%+v, gate %+v", a.Off, gate.state())
	}
}

func TestGateLineComesBack(t *testing.T) {
	t.Parallel()
	gate, _ := pair()
	r := started(t, gateOnly(), gate)
	r.done(order{Do: doGate, V: 3})
	r.wire("gate").set(func(w *wire) { w.broken = port.ErrLost })
	r.write(order{Do: doGate, V: 4, ID: 1000})
	a := r.next()
	if a.ID == 1000 { // or the poll was quicker
		if a.Kind != "line" {
			t.Errorf("%+v", a)
		}
		a = r.next()
	}
	wantOff(t, a.Off, drainFixed, 0, true)
	if len(r.wires["gate"]) != 2 || gate.state().volts != 0 {
		t.Errorf("%d connections, gate %+v", len(r.wires["gate"]), gate.state())
	}
}

func TestBlockedWriteStopsNothingElse(t *testing.T) {
	t.Parallel()
	gate, drain := pair()
	r := started(t, gateAndDrain(), gate, drain)
	r.done(order{Do: doDrain, On: true})
	blocked := make(chan struct{})
	defer close(blocked)
	r.wire("gate").set(func(w *wire) { w.blocked = blocked })
	r.write(order{Do: doGate, V: 3, ID: 1000})
	time.Sleep(20 * time.Millisecond) // the write hangs now
	asked := time.Now()
	r.write(order{Do: doOff, Reason: "limit", ID: 1001})
	if a := r.next(); a.ID != 1000 || a.Kind != "line" {
		t.Errorf("%+v", a)
	}
	a := r.next()
	wantOff(t, a.Off, drainOff, 0, true)
	if took := time.Since(asked); took > 5*time.Second {
		t.Errorf("took %v", took)
	}
	if len(r.wires["gate"]) < 2 || gate.notes.first("gate", "VOLT 3", 0) >= 0 {
		t.Errorf("%d connections\n%s", len(r.wires["gate"]), gate.notes)
	}
}

package keeper

import (
	"context"
	"errors"
	"math"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"
)

// onLines starts a keeper process with a gate and a drain supply on real lines.
func onLines(t *testing.T, c Config) (*Keeper, *instrument, *instrument) {
	t.Helper()
	g, d := pair()
	gate, drain := onLine(t, g), onLine(t, d)
	c.Gate.Address = gate.name
	if c.Drain != nil {
		c.Drain.Address = drain.name
	}
	k, err := startKeeper(t.Context(), c)
	if err != nil {
		t.Fatalf("%v\n%s", err, g.notes)
	}
	t.Cleanup(func() { k.in.Close() })
	return k, gate, drain
}

func report(t *testing.T, k *Keeper) OffReport {
	t.Helper()
	select {
	case r, ok := <-k.Done():
		if !ok {
			t.Fatal("ended without a report")
		}
		return r
	case <-time.After(generous):
		t.Fatal("no report")
	}
	return OffReport{}
}

func TestStartDriveAndClose(t *testing.T) {
	t.Parallel()
	k, gate, drain := onLines(t, gateAndDrain())
	if err := k.Drain(true); err != nil {
		t.Fatal(err)
	}
	if v, err := k.Set(3.3); err != nil || v != 3.3 || gate.state().volts != 3.3 {
		t.Fatalf("%g V, %v", v, err)
	}
	if v, err := k.Set(11); !errors.Is(err, ErrTooHigh) || gate.state().volts != 3.3 {
		t.Errorf("%g V, %v", v, err)
	}
	if _, err := k.Set(math.NaN()); !errors.Is(err, ErrTooHigh) {
		t.Error(err)
	}
	if s, err := k.Status(); err != nil || s.Gate != 3.3 || !s.DrainOn || s.Off != nil {
		t.Errorf("%+v, %v", s, err)
	}
	r, err := k.Off("limit", false)
	if err != nil || r.Reason != "limit" {
		t.Error(err)
	}
	wantOff(t, &r, drainOff, 0, true)
	if r, err = k.Off("", true); err != nil {
		t.Error(err)
	}
	wantOff(t, &r, drainOff, 0, false)
	if _, err := k.Set(1); !errors.Is(err, ErrOff) {
		t.Error(err)
	}
	if err := k.Close(); err != nil {
		t.Error(err)
	}
	if g, d := gate.state(), drain.state(); g.on || d.on {
		t.Errorf("gate %+v, drain %+v", g, d)
	}
	if r, ok := <-k.Done(); ok {
		t.Errorf("what was asked for is told as if it had come by itself: %+v", r)
	}
	if _, err := k.Set(1); !errors.Is(err, ErrOff) {
		t.Error(err)
	}
}

func TestKeeperIgnoresSignals(t *testing.T) {
	t.Parallel()
	k, gate, _ := onLines(t, gateOnly())
	pid := k.cmd.Process.Pid
	if group, err := syscall.Getpgid(pid); err != nil || group != pid || group == syscall.Getpgrp() {
		t.Errorf("process group %d (%v)", group, err)
	}
	for _, s := range []syscall.Signal{syscall.SIGINT, syscall.SIGTERM, syscall.SIGHUP, syscall.SIGQUIT, syscall.SIGPIPE} {
		if err := syscall.Kill(-pid, s); err != nil {
			t.Error(err)
		}
	}
	time.Sleep(100 * time.Millisecond)
	if v, err := k.Set(2); err != nil || gate.state().volts != 2 {
		t.Errorf("%g V, %v", v, err)
	}
	if err := k.Close(); err != nil {
		t.Error(err)
	}
}

func TestEndOfContext(t *testing.T) {
	t.Parallel()
	g, _ := pair()
	gate := onLine(t, g)
	c := gateOnly()
	c.Gate.Address = gate.name
	ctx, cancel := context.WithCancelCause(t.Context())
	k, err := startKeeper(ctx, c)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := k.Set(3); err != nil {
		t.Fatal(err)
	}
	cancel(errors.New("the user has had enough"))
	r := report(t, k)
	wantOff(t, &r, drainFixed, 0, true)
	if !strings.Contains(r.Reason, "had enough") {
		t.Errorf("reason %q", r.Reason)
	}
	if err := k.Close(); err != nil {
		t.Error(err)
	}
}

func TestBeatKeepsItOnAndItsEndEndsIt(t *testing.T) {
	t.Parallel()
	c := gateOnly()
	c.BeatLimit = 400 * time.Millisecond
	k, gate, _ := onLines(t, c)
	if _, err := k.Set(3); err != nil {
		t.Fatal(err)
	}
	for range 20 {
		time.Sleep(40 * time.Millisecond)
		if err := k.Beat(); err != nil {
			t.Fatal(err)
		}
	}
	if gate.state().volts != 3 {
		t.Error("off while the heart beats")
	}
	r := report(t, k)
	wantOff(t, &r, drainFixed, 0, true)
	if !strings.Contains(r.Reason, "heartbeat") || gate.state().volts != 0 {
		t.Errorf("%+v", r)
	}
	if err := k.Close(); err != nil {
		t.Error(err)
	}
}

func TestKilledKeeperIsTold(t *testing.T) {
	t.Parallel()
	k, _, _ := onLines(t, gateOnly())
	k.cmd.Process.Kill()
	r := report(t, k)
	if r.Reached || r.Drain != "not known" || !math.IsNaN(r.Gate) || len(r.Errors) == 0 {
		t.Errorf("%+v", r)
	}
	if _, err := k.Set(1); !errors.Is(err, ErrGone) {
		t.Error(err)
	}
	if err := k.Close(); err == nil {
		t.Error("closed without a word")
	}
}

func TestStartFails(t *testing.T) {
	t.Parallel()
	c := gateOnly()
	c.Gate.Address = filepath.Join(t.TempDir(), "none")
	if _, err := startKeeper(t.Context(), c); !errors.Is(err, ErrConfig) || !strings.Contains(err.Error(), "none") {
		t.Error(err)
	}
	c.MaxVgs = -1
	if _, err := startKeeper(t.Context(), c); !errors.Is(err, ErrConfig) {
		t.Error(err)
	}
	if _, err := Start(t.Context(), filepath.Join(t.TempDir(), "none"), nil, nil, gateOnly()); !errors.Is(err, ErrConfig) {
		t.Error(err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := startKeeper(ctx, gateOnly()); !errors.Is(err, context.Canceled) {
		t.Error(err)
	}
}

func TestGateSupplyUnplugged(t *testing.T) {
	t.Parallel()
	k, gate, drain := onLines(t, gateAndDrain())
	if err := k.Drain(true); err != nil {
		t.Fatal(err)
	}
	if _, err := k.Set(3); err != nil {
		t.Fatal(err)
	}
	go func() {
		for k.Beat() == nil {
			time.Sleep(50 * time.Millisecond)
		}
	}()
	gate.unplug()
	r := report(t, k)
	if r.Reached || r.GateHeld || !math.IsNaN(r.Gate) || r.Drain != drainOff || drain.state().on || len(r.Errors) == 0 {
		t.Errorf("%+v, drain %+v", r, drain.state())
	}
}

func TestGateSupplyPluggedInAgain(t *testing.T) {
	t.Parallel()
	g, _ := pair()
	first := onLine(t, g)
	name := filepath.Join(t.TempDir(), "supply")
	if err := os.Symlink(first.name, name); err != nil {
		t.Fatal(err)
	}
	c := gateOnly()
	c.Gate.Address = name
	k, err := startKeeper(t.Context(), c)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := k.Set(3); err != nil {
		t.Fatal(err)
	}
	first.unplug()
	second := onLine(t, g) // the same supply under the same name
	if err := errors.Join(os.Remove(name), os.Symlink(second.name, name)); err != nil {
		t.Fatal(err)
	}
	r, err := k.Off("test", false)
	if err != nil {
		t.Fatal(err)
	}
	wantOff(t, &r, drainFixed, 0, true)
	if g.state().volts != 0 {
		t.Errorf("gate %+v", g.state())
	}
	if err := k.Close(); err != nil {
		t.Error(err)
	}
}

func TestBlockedLineOfTheGate(t *testing.T) {
	t.Parallel()
	k, gate, drain := onLines(t, gateAndDrain())
	if err := k.Drain(true); err != nil {
		t.Fatal(err)
	}
	if _, err := k.Set(3); err != nil {
		t.Fatal(err)
	}
	gate.hold(t, true)
	from := len(gate.notes.all())
	asked := time.Now()
	go func() {
		time.Sleep(700 * time.Millisecond)
		gate.hold(t, false)
	}()
	r, err := k.Off("limit", false)
	if err != nil {
		t.Fatal(err)
	}
	wantOff(t, &r, drainOff, 0, true)
	i := gate.notes.first("drain", "OUTP OFF", from)
	if i < 0 {
		t.Fatalf("%s", gate.notes)
	}
	if took := gate.notes.all()[i].at.Sub(asked); took > 500*time.Millisecond {
		t.Errorf("the drain supply was switched off %v late because the gate's line hung", took)
	}
	if drain.state().on || gate.state().volts != 0 {
		t.Errorf("gate %+v, drain %+v", gate.state(), drain.state())
	}
	if err := k.Close(); err != nil {
		t.Error(err)
	}
}

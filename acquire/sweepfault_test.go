package acquire

import (
	"errors"
	"math"
	"strings"
	"testing"

	"gatesill/store/record"
)

// begun lets a driven sweep get well under way: 50 mA flow.
func begun(t *testing.T, p Plan) *sim {
	t.Helper()
	p.From = record.Known(p.Sign() * 2.8)
	s := newSim(t, p, testDevice()).start()
	for s.now < 200 && s.done == nil {
		s.step()
		if id, _ := s.solve(); id > 0.05 {
			return s
		}
	}
	t.Fatalf("no 50 mA after %.0f s: %+v", s.now, s.done)
	return nil
}

// What goes wrong in a driven sweep brings the device to its off state, in time and
// with the reason.
func TestFaultsOfADrivenSweep(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		name   string
		fault  func(s *sim)
		within float64 // s
		want   string
	}{
		{"gate meter silent", func(s *sim) { s.meter(Gate).dead = true }, 1.3, "gate meter is silent"},
		{"current meter silent", func(s *sim) { s.meter(Current).dead = true }, 1.3, "current meter is silent"},
		{"drain meter silent", func(s *sim) { s.meter(Drain).dead = true }, 1.6, "drain meter is silent"},
		{"current meter held", func(s *sim) { s.meter(Current).held = true }, 1.3, "held"},
		{"bad frames", func(s *sim) { s.meter(Current).garbage = true }, 1.2, "cannot be read"},
		{"current meter frozen", func(s *sim) { s.meter(Current).frozen = true }, 12, "same digits"},
		{"gate does not follow", func(s *sim) { s.open = true; s.u = 1 }, 12, "does not follow"},
		{"line lost", func(s *sim) {
			s.do(s.r.Event(Event{At: s.now, Line: "usb1", Role: Current, Lost: true, Err: errors.New("unplugged")}))
		}, 0, "unplugged"},
		{"supply line lost", func(s *sim) { s.do(s.r.Event(Event{At: s.now, Line: "usb9", Lost: true})) }, 0, "usb9"},
		{"current overload", func(s *sim) { s.meter(Current).top = 0.01 }, 0.5, "beyond what the meter can show"},
		{"gate overload", func(s *sim) { s.meter(Gate).top = 0.01 }, 0.5, "beyond what the meter can show"},
		{"drain overload", func(s *sim) { s.meter(Drain).top = 0.01 }, 0.6, "beyond what the meter can show"},
		{"current too great", func(s *sim) { s.dev.vt -= 0.7 }, 0.6, "limit reached"},
		{"shorted", func(s *sim) { s.dev.shorted = true }, 0.6, "limit reached"},
		{"stop key", func(s *sim) { s.key(KeyStop) }, 0, "stopped by the operator"},
	} {
		t.Run(c.name, func(t *testing.T) {
			s := begun(t, testPlan(Driven))
			at := s.now
			c.fault(s)
			s.run(c.within + 10)
			if s.done == nil {
				t.Fatalf("not over %.1f s after the fault", s.now-at)
			}
			if took := s.offAt - at; took > c.within+0.02 {
				t.Errorf("off %.2f s after the fault, want %.2f s at most", took, c.within)
			} else {
				t.Logf("off after %.2f s: %s", took, s.done.Why)
			}
			if s.done.Complete || !strings.Contains(s.done.Why, c.want) {
				t.Errorf("%+v, want a reason with %q", s.done, c.want)
			}
			if len(s.off) == 0 || !s.heard("stop: ") || !sounded(s, SoundStop) {
				t.Errorf("off %v, said %q", s.off, s.said)
			}
			if id, _ := s.solve(); id > 1e-4 && !s.dev.shorted {
				t.Errorf("%.3g A flow after the end", id)
			}
			last := s.off[len(s.off)-1]
			blind := s.meter(Current).dead || s.meter(Current).held || s.meter(Current).garbage || s.meter(Current).frozen || s.meter(Drain).dead
			if last.CurrentGone == blind {
				t.Errorf("current gone %v, the meters could see it: %v", last.CurrentGone, !blind)
			}
		})
	}
}

func sounded(s *sim, want Sound) bool {
	for _, o := range s.orders {
		if b, ok := o.(Beep); ok && b.Sound == want {
			return true
		}
	}
	return false
}

// Faults at the beginning: nothing is driven on, nothing is switched on.
func TestFaultsAtTheBeginning(t *testing.T) {
	for _, c := range []struct {
		name  string
		fault func(s *sim)
		want  string
	}{
		{"gate supply does not go off", func(s *sim) { s.open = true; s.u = 3 }, "off voltage"},
		{"a meter never speaks", func(s *sim) { s.meter(Drain).dead = true }, "silent"},
		{"no drain voltage", func(s *sim) { s.vdd = 0 }, "drain voltage does not come"},
	} {
		s := newSim(t, testPlan(Driven), testDevice())
		c.fault(s)
		s.start().run(40)
		if s.done == nil || s.done.Complete || !strings.Contains(s.done.Why, c.want) {
			t.Errorf("%s: %+v after %.1f s, want %q", c.name, s.done, s.now, c.want)
		}
		for _, o := range s.orders {
			if g, ok := o.(SetGate); ok && g.V != 0 {
				t.Errorf("%s: gate set to %g V", c.name, g.V)
			}
		}
	}
}

// By hand a silent meter pauses; back again, the sweep goes on at the same part.
func TestSilentMeterByHand(t *testing.T) {
	s := begun(t, testPlan(ByHand))
	n := len(s.taken)
	m := s.meter(Current)
	m.dead = true
	at, from := s.now, s.u
	var paused, stale float64
	s.each = func(s *sim) {
		v := s.r.View(s.now)
		if v.Paused != "" && paused == 0 {
			paused = s.now - at
		}
		if v.Latest[Current].Stale && stale == 0 {
			stale = s.now - at
		}
	}
	s.run(4)
	// The meter speaks every 0.25 s: stale after max(2 T, 0.5 s), silent after max(3.5 T, 1 s).
	if stale < 0.2 || stale > 0.65 || paused < 0.7 || paused > 1.2 {
		t.Errorf("stale after %.2f s, paused after %.2f s", stale, paused)
	}
	if !s.heard("stop: turn the gate back") || !sounded(s, SoundStop) || s.done != nil {
		t.Fatalf("said %q, done %+v", s.said, s.done)
	}
	if s.u > from-0.3 {
		t.Errorf("the hand that does what is said has the gate at %.2f V, before %.2f V", s.u, from)
	}
	m.dead = false
	s.each = nil
	s.run(300)
	s.complete(0.0015)
	if len(s.taken) < n+5 {
		t.Errorf("%d points before, %d after: the sweep was to go on", n, len(s.taken))
	}
}

// Scenario 7: at 0.45 s a frame a meter that was switched off is stale after two
// frames, 0.9 s, and silent after three and a half: a change to a lower range costs
// two conversions.
func TestStaleAfterTwoFrames(t *testing.T) {
	e := newEars(nil, nil)
	for i := range 10 {
		e.hear(reads(Current, 0.45*float64(i), 0.2))
	}
	last := 0.45 * 9
	for _, c := range []struct {
		age           float64
		stale, silent bool
	}{{0.4, false, false}, {0.89, false, false}, {0.91, true, false}, {1.57, true, false}, {1.58, true, true}} {
		if stale, silent := math.IsNaN(e.number(Current, last+c.age)), e.isSilent(Current, last+c.age); stale != c.stale || silent != c.silent {
			t.Errorf("%.2f s old: stale %v, silent %v", c.age, stale, silent)
		}
	}
	// What is held is no number, at once.
	held := reads(Current, last+0.45, 0.2)
	held.Refused = "held"
	e.hear(held)
	if x := e.number(Current, last+0.46); !math.IsNaN(x) {
		t.Errorf("held reading counts as %g A", x)
	}
}

// A line that was lost by hand pauses until it is open and heard again.
func TestLostLineByHand(t *testing.T) {
	s := begun(t, testPlan(ByHand))
	s.meter(Current).dead = true
	s.do(s.r.Event(Event{At: s.now, Line: Current, Role: Current, Lost: true, Err: errors.New("unplugged")}))
	if v := s.r.View(s.now); !strings.Contains(v.Paused, "unplugged") || !s.heard("stop: turn the gate back") {
		t.Errorf("paused %q, said %q", v.Paused, s.said)
	}
	s.run(3)
	s.meter(Current).dead = false
	s.do(s.r.Event(Event{At: s.now, Line: Current, Role: Current, Opened: true}))
	s.run(300)
	s.complete(0.0015)
}

// By hand a limit can only be called, and ends the sweep.
func TestLimitByHand(t *testing.T) {
	for _, m := range []Mode{ByHand, Free} {
		p := testPlan(m)
		p.Limits.PD = 2
		p.To = record.Known(5)
		if m == ByHand {
			p.Step = record.Known(0.05)
		}
		s := newSim(t, p, testDevice()).start()
		heedless := false
		s.each = func(s *sim) {
			if id, vds := s.solve(); id*vds > 0.5 {
				heedless = true
			}
			if heedless && s.done == nil { // the hand goes on whatever is said
				s.u += 0.0005
				s.stopTurn = math.Inf(1)
			}
		}
		s.run(400)
		if s.done == nil || s.done.Complete || !strings.Contains(s.done.Why, "P_D") || !strings.Contains(s.done.Why, "turn the gate back") {
			s.log()
			t.Fatalf("%s: %+v", m, s.done)
		}
		if !s.heard("%") || !sounded(s, SoundAttention) || !sounded(s, SoundStop) {
			t.Errorf("%s: said %q", m, s.said)
		}
		if v := s.r.View(s.now); !strings.Contains(v.Instruction, "turn the gate back") || !v.Over {
			t.Errorf("%s: the view says %q", m, v.Instruction)
		}
		for _, o := range s.orders {
			switch o.(type) {
			case SetGate, Off, SwitchDrain:
				t.Errorf("%s: ordered %T", m, o)
			}
		}
	}
}

// An ammeter that changes its range by itself shows one overload each time; where
// that is known it does not end a driven sweep.
func TestOverloadOfARangeChange(t *testing.T) {
	p := testPlan(Driven)
	p.Overloads = map[string]int{Current: 2}
	s := begun(t, p)
	once := 0
	s.each = func(s *sim) {
		m := s.meter(Current)
		m.top = math.Inf(1)
		if once < 12 && s.now+simStep >= m.next { // one conversion
			m.top = 0
			once = 100
		}
	}
	s.run(200)
	s.complete(0.0015)
}

func TestKeys(t *testing.T) {
	t.Run("undo", func(t *testing.T) {
		for _, m := range []Mode{Driven, ByHand} {
			s := begun(t, testPlan(m))
			n := len(s.taken)
			gone := s.taken[n-1].Point.Vg
			s.key(KeyUndo)
			if len(s.taken) != n-1 || len(s.r.Points()) != n-1 {
				t.Fatalf("%s: %d points of %d", m, len(s.taken), n)
			}
			s.run(300)
			s.complete(0.0015)
			if again := s.taken[n-1].Point.Vg; math.Abs(again-gone) > 0.02 {
				t.Errorf("%s: taken again at %.3f V, was %.3f V", m, again, gone)
			}
		}
	})
	t.Run("undo during the return", func(t *testing.T) {
		s := begun(t, testPlan(Driven))
		for s.r.phase != phReturn && s.now < 300 {
			s.step()
		}
		n := len(s.taken)
		s.key(KeyUndo)
		s.run(300)
		s.complete(0.0015)
		if len(s.taken) < n+1 {
			t.Errorf("%d points, had %d before", len(s.taken), n)
		}
	})
	t.Run("undo of nothing", func(t *testing.T) {
		s := newSim(t, testPlan(ByHand), testDevice()).start()
		s.step()
		s.key(KeyUndo)
		if !s.heard("no point") {
			t.Errorf("said %q", s.said)
		}
	})
	t.Run("repeat", func(t *testing.T) {
		for _, m := range []Mode{Driven, ByHand} {
			s := begun(t, testPlan(m))
			s.key(KeyRepeat)
			if len(s.taken) != 0 {
				t.Fatalf("%s: %d points kept", m, len(s.taken))
			}
			s.run(400)
			s.complete(0.0015)
		}
	})
	t.Run("skip", func(t *testing.T) {
		for _, m := range []Mode{Driven, ByHand} {
			s := begun(t, testPlan(m))
			s.key(KeySkip)
			if s.done != nil || !s.heard("why") {
				t.Fatalf("%s: skipped without a reason", m)
			}
			s.do(s.r.Key(Key{Name: KeySkip, Reason: "pin broke off"}, s.now))
			s.run(5)
			if s.done == nil || !s.done.Skipped || s.done.Complete || s.done.Why != "pin broke off" || (m == Driven) != (len(s.off) > 0) {
				t.Errorf("%s: %+v, off %v", m, s.done, s.off)
			}
		}
	})
	t.Run("finish", func(t *testing.T) {
		for _, m := range []Mode{Driven, ByHand, Free} {
			s := begun(t, testPlan(m))
			s.key(KeyFinish)
			s.run(100)
			if s.done == nil || !s.done.Complete || !s.taken[len(s.taken)-1].Return {
				t.Errorf("%s: %+v", m, s.done)
			}
		}
	})
	t.Run("accept where the gate stands", func(t *testing.T) {
		s := begun(t, testPlan(ByHand))
		n := len(s.taken)
		s.stopTurn = math.Inf(1)
		s.u = s.r.goal - s.r.window - 0.006 // not where it was told to go
		s.run(4)
		if len(s.taken) != n {
			t.Fatalf("taken though it was not near enough")
		}
		s.key(KeyAccept)
		s.run(4)
		if len(s.taken) != n+1 || math.Abs(s.taken[n].Point.Vg-s.u) > 0.001 {
			t.Errorf("%d points of %d, gate at %.3f V", len(s.taken), n+1, s.u)
		}
	})
	t.Run("stop after the end", func(t *testing.T) {
		s := begun(t, testPlan(Driven))
		s.key(KeyStop)
		n := len(s.off)
		s.key(KeyStop)
		if len(s.off) != n+1 {
			t.Errorf("a second stop ordered %d times off", len(s.off)-n)
		}
	})
}

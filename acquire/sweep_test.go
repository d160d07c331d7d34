package acquire

import (
	"errors"
	"math"
	"strings"
	"testing"

	"gatesill/store/record"
)

// kinds are the four kinds of parts: n- and p-channel, enhancement and depletion.
var kinds = []struct {
	name    string
	channel record.Channel
	mode    record.Mode
	off     float64 // V, signed
	vt      float64 // V, in the direction that turns on
}{
	{"n enhancement", record.NChannel, record.Enhancement, 0, 3},
	{"p enhancement", record.PChannel, record.Enhancement, 0, 3},
	{"n depletion", record.NChannel, record.Depletion, -4, -2},
	{"p depletion", record.PChannel, record.Depletion, 4, -2},
}

// complete checks a sweep that went to its end: the points lie on the device's
// curve, in order, dense enough, and the last one is the return reading.
func (s *sim) complete(within float64) {
	s.t.Helper()
	if s.done == nil || !s.done.Complete {
		s.log()
		s.t.Fatalf("after %.0f s: %+v", s.now, s.done)
	}
	n := len(s.taken)
	if n < 8 || !s.taken[n-1].Return {
		s.log()
		s.t.Fatalf("%d points, the last one a return reading: %v", n, n > 0 && s.taken[n-1].Return)
	}
	last := math.Inf(-1)
	worst := 0.0
	for i, k := range s.taken {
		u, id := s.sign*k.Point.Vg, s.sign*k.Point.Id
		if k.Return != (i == n-1) {
			s.t.Errorf("point %d: return %v", i, k.Return)
		}
		if !k.Return {
			if u <= last-0.003 {
				s.t.Errorf("point %d at %.3f V is not above %.3f V", i, u, last)
			}
			last = math.Max(last, u)
		} else if u >= last {
			s.t.Errorf("return reading at %.3f V, not below %.3f V", u, last)
		}
		if id > 1e-4 {
			worst = math.Max(worst, math.Abs(u-s.voltageFor(id))-k.Point.Bound)
		}
	}
	if worst > within {
		s.t.Errorf("a point is %.2f mV off the device's curve beyond its bound, want at most %.2f mV", 1e3*worst, 1e3*within)
	}
	for i := 1; i < n-1; i++ {
		a, b := s.sign*s.taken[i-1].Point.Id, s.sign*s.taken[i].Point.Id
		if a > 2e-3 && !s.plan.Step.IsKnown() && (b > 3.3*a || b-a > 1.3*0.25*beyond/12*1.4) {
			s.t.Errorf("from %.4g A to %.4g A in one step", a, b)
		}
	}
	if s.maxPD > s.plan.Limits.PD || s.maxID > s.plan.Limits.ID {
		s.t.Errorf("the device saw %.2f W and %.3f A", s.maxPD, s.maxID)
	}
	s.t.Logf("%.0f s, %d points, %.2f mV beyond the bound at most, %.2f W at most; %s", s.now, n, 1e3*worst, s.maxPD, s.done.Why)
}

func TestSweepsOfEveryKind(t *testing.T) {
	t.Parallel()
	for _, m := range []Mode{Driven, ByHand} {
		for _, k := range kinds {
			t.Run(string(m)+" "+k.name, func(t *testing.T) {
				p := testPlan(m)
				p.Channel, p.PartMode, p.OffVoltage = k.channel, k.mode, record.Known(k.off)
				p.From = record.Known(p.Sign() * (k.vt - 0.4))
				d := testDevice()
				d.vt = k.vt
				s := newSim(t, p, d).start().run(300)
				// The gate meter's digit is 1 mV; its mean is good to half of it and the noise.
				s.complete(0.0015)
				if m == Driven {
					if len(s.off) == 0 || !s.off[len(s.off)-1].CurrentGone || s.drainOn {
						t.Errorf("off %+v, drain on %v", s.off, s.drainOn)
					}
					if math.Abs(s.u-s.sign*k.off) > 0.01 {
						t.Errorf("gate left at %.3f V in the direction that turns on, off is %.3f V", s.u, s.sign*k.off)
					}
				}
			})
		}
	}
}

func TestSweepFromTheOffVoltage(t *testing.T) {
	for _, m := range []Mode{Driven, ByHand} {
		s := newSim(t, testPlan(m), testDevice()).start().run(400)
		s.complete(0.0015)
		if first := s.taken[0].Point; math.Abs(first.Vg) > nearOff {
			t.Errorf("%s: first point at %g V, want the off state, which shows leakage", m, first.Vg)
		}
	}
}

// Fast and slow meters, quiet and noisy ones; parts that are steep, and parts that
// are flat.
func TestSweepsOnOtherBenches(t *testing.T) {
	for _, m := range []Mode{Driven, ByHand} {
		for _, x := range []struct{ pace, noise, beta, idle float64 }{
			{0.1, 0.3, 1.9, 0.25}, {2, 0.3, 1.9, 0.25}, {1, 2, 1.9, 0.25}, {1, 0.3, 30, 0.3}, {1, 0.3, 0.1, 0.05},
		} {
			p := testPlan(m)
			p.From, p.Idle = record.Known(2.6), record.Known(x.idle)
			d := testDevice()
			d.beta = x.beta
			s := newSim(t, p, d)
			for _, k := range s.meters {
				k.cycle *= x.pace
				k.noise = x.noise
			}
			s.start().run(600)
			t.Logf("%s, %+v", m, x)
			s.complete(0.0015 + 0.0005*x.noise)
		}
	}
}

// A grid that is given is kept, however little current there is.
func TestGivenSteps(t *testing.T) {
	for _, m := range []Mode{Driven, ByHand} {
		p := testPlan(m)
		p.From, p.To, p.Step = record.Known(2.5), record.Known(3.5), record.Known(0.1)
		s := newSim(t, p, testDevice()).start().run(200)
		s.complete(0.0015)
		if len(s.taken) != 12 {
			t.Errorf("%s: %d points, want 11 and the return reading", m, len(s.taken))
		}
		for i, k := range s.taken[:len(s.taken)-1] {
			if want := 2.5 + 0.1*float64(i); math.Abs(k.Point.Vg-want) > 0.012 {
				t.Errorf("%s: point %d at %.3f V, want %.3f V", m, i, k.Point.Vg, want)
			}
		}
	}
}

// Where the given step would go over a limit it is made shorter, and the sweep ends
// with the reason.
func TestStepsAreShortened(t *testing.T) {
	p := testPlan(Driven)
	p.Limits.PD = 2
	p.From, p.To, p.Step = record.Known(2.8), record.Known(4), record.Known(0.3)
	s := newSim(t, p, testDevice()).start().run(200)
	if s.done == nil || s.done.Complete || !strings.Contains(s.done.Why, "P_D") {
		s.log()
		t.Fatalf("done %+v", s.done)
	}
	if s.maxPD > 2 || s.maxPD < 1.5 {
		t.Errorf("greatest power %.2f W: want it near 0.9 of 2 W, never above", s.maxPD)
	}
	if n := len(s.taken); n < 5 || !s.taken[n-1].Return {
		t.Errorf("%d points, return reading %v", n, n > 0 && s.taken[n-1].Return)
	}
	t.Logf("%d points up to %.2f W; %s", len(s.taken), s.maxPD, s.done.Why)
}

// Without an idle current the sweep goes as near to the limits as is sound.
func TestEndsAtTheLimits(t *testing.T) {
	for _, m := range []Mode{Driven, ByHand} {
		p := testPlan(m)
		p.Idle = record.Num{}
		p.Limits.PD = 3
		p.From = record.Known(2.8)
		s := newSim(t, p, testDevice()).start().run(300)
		s.complete(0.0015)
		if s.maxPD < 0.75*3 {
			t.Errorf("%s: ended at %.2f W of 3 W: %s", m, s.maxPD, s.done.Why)
		}
	}
}

func TestFixedWait(t *testing.T) {
	for _, m := range []Mode{Driven, ByHand} {
		p := testPlan(m)
		p.From, p.To, p.Step, p.Settle = record.Known(3), record.Known(3.2), record.Known(0.1), record.Known(5)
		s := newSim(t, p, testDevice()).start()
		longest := 0.0
		s.each = func(s *sim) {
			if w := s.r.View(s.now).Waiting; w > longest {
				longest = w
			}
		}
		s.run(200)
		if s.done == nil || !s.done.Complete || len(s.taken) != 4 {
			s.log()
			t.Fatalf("%s: %+v, %d points", m, s.done, len(s.taken))
		}
		for i := 1; i < 4; i++ {
			if d := s.taken[i].Point.At - s.taken[i-1].Point.At; d < 5 {
				t.Errorf("%s: points %.1f s apart, want at least the wait of 5 s", m, d)
			}
		}
		if longest < 4 || longest > 5.01 {
			t.Errorf("%s: the view showed a wait of %.1f s at most", m, longest)
		}
	}
}

func TestFreeSweep(t *testing.T) {
	t.Parallel()
	for _, k := range kinds {
		p := testPlan(Free)
		p.Channel, p.PartMode, p.OffVoltage = k.channel, k.mode, record.Known(k.off)
		d := testDevice()
		d.vt = k.vt
		s := newSim(t, p, d).start().run(400)
		if s.done == nil || !s.done.Complete {
			s.log()
			t.Fatalf("%s: %+v", k.name, s.done)
		}
		moving, bad := 0, 0.0
		for _, x := range s.taken {
			u, id := s.sign*x.Point.Vg, s.sign*x.Point.Id
			if !x.Point.Settled {
				moving++
			}
			if id > 1e-3 {
				// The knob turns at 30 mV/s; the bound of the point must hold, and a digit of each meter.
				bad = math.Max(bad, math.Abs(u-s.voltageFor(id))-x.Point.Bound)
			}
		}
		if moving < 20 || bad > 0.0015 || !s.taken[len(s.taken)-1].Return {
			t.Errorf("%s: %d points on the move, %.2f mV beyond their bound, last is the return reading: %v", k.name, moving, 1e3*bad, s.taken[len(s.taken)-1].Return)
		}
		t.Logf("%s: %.0f s, %d points", k.name, s.now, len(s.taken))
	}
}

func TestRefusals(t *testing.T) {
	for _, c := range []struct {
		name  string
		mode  Mode
		spoil func(*Plan)
		want  string
	}{
		{"no limit of V_GS", Driven, func(p *Plan) { p.Limits.Vgs = 0 }, "V_GS"},
		{"no limit of I_D", Driven, func(p *Plan) { p.Limits.ID = 0 }, "I_D"},
		{"no limit of P_D", Driven, func(p *Plan) { p.Limits.PD = 0 }, "P_D"},
		{"no limits at all", Driven, func(p *Plan) { p.Limits = Limits{} }, "V_GS, I_D and P_D"},
		{"no supply", Driven, func(p *Plan) { p.DrivesGate = false }, "no supply sets the gate"},
		{"depletion without switchable drain", Driven, func(p *Plan) {
			p.PartMode, p.OffVoltage, p.DrivesDrain = record.Depletion, record.Known(-4), false
		}, "switched off"},
		{"depletion without off voltage", ByHand, func(p *Plan) { p.PartMode = record.Depletion }, "off voltage"},
		{"no gate meter", ByHand, func(p *Plan) { p.Roles = []string{Current, Drain} }, "gate voltage"},
		{"no current", ByHand, func(p *Plan) { p.Roles = []string{Gate}; p.Circuit.RL = record.Num{} }, "drain current"},
		{"no V_DS", Driven, func(p *Plan) { p.Roles = []string{Gate, Current}; p.Circuit.VDD = record.Num{} }, "V_DS"},
		{"begin beyond V_GS", ByHand, func(p *Plan) { p.From = record.Known(11) }, "beyond"},
		{"end beyond V_GS", Driven, func(p *Plan) { p.To = record.Known(11) }, "beyond"},
		{"off voltage beyond V_GS", Driven, func(p *Plan) { p.OffVoltage = record.Known(-11) }, "beyond"},
		{"downwards", ByHand, func(p *Plan) { p.From, p.To = record.Known(4), record.Known(3) }, "turns this n-channel part off"},
		{"upwards with p", ByHand, func(p *Plan) { p.Channel = record.PChannel; p.To = record.Known(3) }, "turns this p-channel part off"},
		{"no step", ByHand, func(p *Plan) { p.Step = record.Known(0) }, "step"},
		{"limit is not a number", ByHand, func(p *Plan) { p.Limits.PD = math.NaN() }, "P_D"},
		{"spot without current", AtSpot, func(p *Plan) {}, "which current"},
		{"spot above the limit", AtSpot, func(p *Plan) { p.At = record.Known(0.95) }, "limit"},
		{"driven spot without limits", AtSpot, func(p *Plan) { p.At, p.DrivesGate, p.Limits = record.Known(0.1), true, Limits{} }, "limits"},
		{"no such mode", Mode("sideways"), func(p *Plan) {}, "sideways"},
		{"no pairing", ByHand, func(p *Plan) { p.Pairs = nil }, "together"},
	} {
		p := testPlan(c.mode)
		if _, err := NewRunner(p); err != nil && c.mode != AtSpot && c.mode != "sideways" {
			t.Fatalf("%s: refused before it was spoilt: %v", c.name, err)
		}
		c.spoil(&p)
		_, err := NewRunner(p)
		if !errors.Is(err, ErrRefused) || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want a refusal that says %q", c.name, err, c.want)
		}
	}
}

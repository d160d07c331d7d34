package acquire

import (
	"errors"
	"flag"
	"math"
	"os"
	"testing"

	"gatesill/store/record"
	"pgregory.net/rapid"
)

// fewer makes the property tests of a test try a quarter of what they try otherwise, but
// for long runs.
func fewer(t *testing.T) {
	if os.Getenv("GATESILL_LONG") != "" {
		return
	}
	checks := flag.Lookup("rapid.checks")
	before := checks.Value.String()
	if err := flag.Set("rapid.checks", "25"); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { flag.Set("rapid.checks", before) })
}

// Whatever happens: no gate voltage beyond its limit, no step that was predicted to
// go too far, nothing after the end, off as the last order (all checked in sim.do);
// and a healthy device never sees more than its limits while the meters are well.
func TestWhateverHappens(t *testing.T) {
	fewer(t) // 0.03 s a check
	rapid.Check(t, func(rt *rapid.T) {
		k := kinds[rapid.IntRange(0, 3).Draw(rt, "kind")]
		m := rapid.SampledFrom([]Mode{Driven, Driven, ByHand, Free, AtSpot}).Draw(rt, "mode")
		p := testPlan(m)
		p.Channel, p.PartMode, p.OffVoltage = k.channel, k.mode, record.Known(k.off)
		p.Limits.PD = rapid.Float64Range(0.5, 8).Draw(rt, "limit of P_D")
		p.Limits.ID = rapid.Float64Range(0.1, 1).Draw(rt, "limit of I_D")
		p.Limits.Vgs = rapid.Float64Range(4.2, 10).Draw(rt, "limit of V_GS")
		p.Circuit.RL = record.Known(rapid.Float64Range(1, 20).Draw(rt, "R_L"))
		p.Idle = record.Known(rapid.Float64Range(0.01, 0.5).Draw(rt, "idle"))
		if m == AtSpot {
			p.At = record.Known(rapid.Float64Range(0.01, 0.09).Draw(rt, "at"))
			p.DrivesGate, p.DrivesDrain = true, true
		}
		if rapid.Bool().Draw(rt, "given steps") && m != AtSpot {
			p.From = record.Known(p.Sign() * (k.vt - rapid.Float64Range(0.1, 1).Draw(rt, "below")))
			p.Step = record.Known(rapid.Float64Range(0.01, 0.5).Draw(rt, "step"))
		}
		d := testDevice()
		d.vt = k.vt
		d.beta = rapid.Float64Range(0.2, 20).Draw(rt, "beta")
		d.n = rapid.Float64Range(1, 2).Draw(rt, "n")
		s := newSim(t, p, d)
		s.fail = func(format string, a ...any) { rt.Fatalf(format, a...) }
		noise := rapid.SampledFrom([]float64{0.3, 1, 4}).Draw(rt, "noise")
		pace := rapid.SampledFrom([]float64{1, 0.1, 2}).Draw(rt, "pace")
		for _, x := range s.meters {
			x.noise, x.cycle = noise, x.cycle*pace
		}
		s.start()
		healthy := true
		for range rapid.IntRange(0, 4).Draw(rt, "happenings") {
			for until := s.now + rapid.SampledFrom([]float64{0.05, 0.3, 2, 10, 25, 40}).Draw(rt, "wait"); s.now < until; {
				s.step()
			}
			meter := s.meters[rapid.IntRange(0, len(s.meters)-1).Draw(rt, "meter")]
			switch rapid.IntRange(0, 11).Draw(rt, "what") {
			case 0:
				meter.dead, healthy = true, false
			case 1:
				meter.held, healthy = true, false
			case 2:
				meter.frozen, healthy = true, false
			case 3:
				meter.garbage, healthy = true, false
			case 4:
				meter.top, healthy = 1e-3, false
			case 5:
				s.do(s.r.Event(Event{At: s.now, Line: meter.role, Role: meter.role, Lost: true, Err: errors.New("unplugged")}))
			case 6:
				s.key(KeyStop)
			case 7:
				s.key(rapid.SampledFrom([]KeyName{KeyAccept, KeyFinish, KeyUndo, KeyFix, KeyRepeat, KeySkip}).Draw(rt, "key"))
			case 8:
				s.do(s.r.Key(Key{Name: KeySkip, Reason: "x"}, s.now))
			case 9:
				d.vt -= 0.3
				healthy = false
			case 10:
				s.open, healthy = true, false
			case 11:
				meter.dead, meter.held, meter.garbage = false, false, false
			}
		}
		for until := s.now + 20; s.now < until; {
			s.step()
		}
		if healthy && s.plan.driven() && (s.maxPD > p.Limits.PD || s.maxID > p.Limits.ID) {
			rt.Fatalf("the device saw %.3f W of %.3f W, %.4f A of %.4f A", s.maxPD, p.Limits.PD, s.maxID, p.Limits.ID)
		}
		if s.done != nil && s.plan.drives() {
			if s.drainOn || math.Abs(s.set-s.sign*k.off) > 1e-9 {
				rt.Fatalf("after the end the drain supply is on: %v, gate set to %g", s.drainOn, s.set)
			}
		}
	})
}

package acquire

import (
	"math"
	"strings"
	"testing"

	"gatesill/store/record"
)

// From the readings that were kept, a sweep stands where it stood.
func TestReplayGivesTheSamePoints(t *testing.T) {
	t.Parallel()
	for _, m := range []Mode{Driven, ByHand, Free} {
		p := testPlan(m)
		p.From = record.Known(2.7)
		s := newSim(t, p, testDevice()).start().run(300)
		s.whole()
		for _, part := range []float64{0.3, 0.6, 1} {
			n := int(part * float64(len(s.readings)))
			r, err := NewRunner(p)
			if err != nil {
				t.Fatal(err)
			}
			r.Replay(s.readings[:n])
			until := s.readings[n-1].At
			want := 0
			for i, o := range s.orders {
				if _, ok := o.(Taken); ok && s.times[i] < until+simStep {
					want++
				}
			}
			got := r.Points()
			if len(got) != want {
				t.Errorf("%s, %.0f %%: %d points, live %d", m, 100*part, len(got), want)
				continue
			}
			for i := range got {
				// By hand the plateaus are the same; a driven gate was sent on at ticks that are not kept.
				if math.Abs(got[i].Vg-s.taken[i].Point.Vg) > 0.001 || math.Abs(got[i].At-s.taken[i].Point.At) > 0.5 {
					t.Errorf("%s, %.0f %%: point %d at %.4f V, live %.4f V", m, 100*part, i, got[i].Vg, s.taken[i].Point.Vg)
				}
			}
			if part == 1 && !r.View(until).Over {
				t.Errorf("%s: all was replayed, and it is not over: %q", m, r.View(until).Instruction)
			}
		}
	}
}

func (s *sim) whole() {
	s.t.Helper()
	if s.done == nil || !s.done.Complete {
		s.t.Fatalf("%+v", s.done)
	}
}

// After a crash a sweep goes on: by hand where it was, driven from the off state back
// up to where it was, with no point lost and none taken twice.
func TestSweepGoesOnAfterACrash(t *testing.T) {
	t.Parallel()
	for _, m := range []Mode{Driven, ByHand} {
		for _, k := range kinds {
			p := testPlan(m)
			p.Channel, p.PartMode, p.OffVoltage = k.channel, k.mode, record.Known(k.off)
			p.From = record.Known(p.Sign() * (k.vt - 0.3))
			d := testDevice()
			d.vt = k.vt
			s := newSim(t, p, d).start()
			for len(s.taken) < 12 && s.now < 200 {
				s.step()
			}
			kept := len(s.taken)
			r, err := NewRunner(p)
			if err != nil {
				t.Fatal(err)
			}
			r.Replay(s.readings)
			if len(r.Points()) != kept {
				t.Fatalf("%s %s: %d points replayed, %d taken", m, k.name, len(r.Points()), kept)
			}
			s.r = r
			if m == Driven { // the keeper has brought everything to the off state
				s.set, s.drainOn = s.sign*k.off, false
			}
			for i := 0; i < 250; i++ { // nobody listens for 5 s
				s.now += simStep
				s.u += (s.set - s.u) * simStep / 0.04
				for _, x := range s.meters {
					x.next, x.pending = math.Max(x.next, s.now), nil
				}
			}
			s.run(300)
			s.complete(0.0015)
			if n := len(s.taken); n < kept+5 {
				t.Errorf("%s %s: %d points, %d before the crash", m, k.name, n, kept)
			}
		}
	}
}

func TestCautions(t *testing.T) {
	all := func(step Step, m record.Mode, c record.Channel) string {
		return strings.Join(Cautions(step, m, c), "\n")
	}
	for _, x := range []struct {
		step    Step
		mode    record.Mode
		channel record.Channel
		want    []string
		not     []string
	}{
		{StepSetUp, record.Enhancement, record.NChannel, []string{"protects nothing", "current limit", "gate to source", "tied to the computer's ground", "60 V", "charged capacitors", "RF", "licensed", "electrical code"}, nil},
		{StepInsert, record.Enhancement, record.NChannel, []string{"wrist strap", "beryllium oxide", "gate at 0 V"}, []string{"p-channel"}},
		{StepInsert, record.Depletion, record.PChannel, []string{"at 0 V this part conducts", "p-channel"}, []string{"gate at 0 V before"}},
		{StepPower, record.Enhancement, record.NChannel, []string{"Gate at 0 V"}, []string{"off voltage", "more negative"}},
		{StepPower, record.Enhancement, record.PChannel, []string{"Gate at 0 V", "more negative"}, nil},
		{StepPower, record.Depletion, record.NChannel, []string{"Gate at its off voltage", "off voltage is negative"}, []string{"Gate at 0 V", "is positive"}},
		{StepPower, record.Depletion, record.PChannel, []string{"Gate at its off voltage", "off voltage is positive"}, []string{"Gate at 0 V", "is negative"}},
		{StepHand, record.Enhancement, record.NChannel, []string{"0.3 s to 0.8 s late"}, nil},
		{StepDrive, record.Depletion, record.NChannel, []string{"not covered", "gate supply gone"}, nil},
		{StepDrive, record.Enhancement, record.NChannel, []string{"not covered"}, []string{"gate supply gone"}},
		{StepRemove, record.Enhancement, record.NChannel, []string{"Gate to 0 V", "hot", "10 A jack"}, nil},
		{StepRemove, record.Depletion, record.NChannel, []string{"Drain supply off first"}, []string{"Gate to 0 V"}},
		{StepRemove, "", "", []string{"Gate to 0 V"}, nil},
	} {
		text := all(x.step, x.mode, x.channel)
		for _, w := range x.want {
			if !strings.Contains(text, w) {
				t.Errorf("%s, %s, %s: does not say %q", x.step, x.mode, x.channel, w)
			}
		}
		for _, w := range x.not {
			if strings.Contains(text, w) {
				t.Errorf("%s, %s, %s: says %q", x.step, x.mode, x.channel, w)
			}
		}
	}
	for _, c := range cautions { // every line is shown at some step of some sweep
		found := false
		for _, m := range []Mode{ByHand, Driven, AtSpot} {
			for _, s := range Steps(m, m == Driven) {
				found = found || s == c.step
			}
		}
		if !found {
			t.Errorf("never shown: %q", c.text)
		}
	}
}

package fit

import (
	"strings"
	"testing"
)

// flatSweep is one current at every gate voltage, with a little noise.
func flatSweep(i, from, to, step float64) Curve {
	r := randomSource(41)
	var c Curve
	for v := from; v < to; v += step {
		c.Vg = append(c.Vg, v)
		c.Id = append(c.Id, i+1e-4*r.NormFloat64())
	}
	return c
}

// Self-made: 12 V through 10 Ω into a body diode's 0.7 V give 1.13 A the other
// way whatever the gate does, wherever the sweep begins. The same with exchanged
// leads of the meter would rise with the gate from near nothing.
func TestFlatTurnedCurrentIsABodyDiode(t *testing.T) {
	b := simBench{circuit: Load, rl: 10, vdd: 12}
	for _, from := range []float64{0, 1.5, 2.6} {
		for _, p := range []bool{false, true} {
			s := b.setup()
			s.PChannel, s.TestCurrent, s.IdleCurrent = p, 10e-3, 250e-3
			c := flatSweep(-1.13, from, 4.6, 0.05)
			if p {
				for k := range c.Vg {
					c.Vg[k], c.Id[k] = -c.Vg[k], -c.Id[k]
				}
			}
			q := One(c, s)
			if q.State != WrongWayRound || q.Has(CodeSignTurned) || !q.Has(CodeWrongWayRound) {
				t.Errorf("from %g V, p %v: %s (%s), codes %s", from, p, q.State, q.Why, codesOf(q))
			}
		}
	}
	// 1.195 A from 2.6 V on: hardly anything is left for a body diode.
	s := b.setup()
	s.TestCurrent = 10e-3
	if q := One(flatSweep(-1.195, 2.6, 4.6, 0.05), s); q.State != Declined || q.Has(CodeSignTurned) || !strings.Contains(q.Why, "off voltage") {
		t.Errorf("%s (%s), codes %s", q.State, q.Why, codesOf(q))
	}
	// A sound part with exchanged leads, from below threshold and from above it.
	d := simDevice{law: smoothLaw, vt: 3.3, beta: 4.8, n: 1.4}
	for _, from := range []float64{2.6, 3.6} {
		c := fromOff(randomSource(42), d, b, offMeter{noise: 20e-6}, from, 0.02, 1)
		for k := range c.Id {
			c.Id[k] = -c.Id[k]
		}
		q := One(c, s)
		if turned := from == 2.6; q.Has(CodeSignTurned) != turned || (q.State == Measured) != turned {
			t.Errorf("from %g V: %s (%s), codes %s", from, q.State, q.Why, codesOf(q))
		}
	}
}

// Self-made: V_DD/R_L at every gate voltage of a sweep that begins above the off
// region is a short or a part that is on: no number, and both are said.
func TestFlatCurrentFromAboveIsUndecided(t *testing.T) {
	b := simBench{circuit: Load, rl: 10, vdd: 12}
	s := b.setup()
	s.TestCurrent, s.IdleCurrent = 10e-3, 250e-3
	for _, i := range []float64{1.19, 1.13} {
		q := One(flatSweep(i, 2.6, 4.6, 0.05), s)
		if q.State != Declined || !q.Has(CodeBelowSweep) {
			t.Errorf("%g A: %s, codes %s", i, q.State, codesOf(q))
		}
		for _, want := range []string{"shorted", "fully on", "start the sweep at the off voltage"} {
			if !strings.Contains(q.Why, want) {
				t.Errorf("%g A: %q is not said: %s", i, want, q.Why)
			}
		}
		if said := strings.Contains(q.Why, "wrong way round"); said != (i == 1.13) {
			t.Errorf("%g A: %s", i, q.Why)
		}
		if n := strings.Count(warningText(q, CodeBelowSweep), "shorted"); n != 1 {
			t.Errorf("%g A: said %d times", i, n)
		}
	}
}

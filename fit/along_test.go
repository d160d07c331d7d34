package fit

import (
	"math"
	"testing"
)

// The depth below the threshold is nothing far above it, the distance far below, and
// rises smoothly between.
func TestDepth(t *testing.T) {
	near(t, "depth at 1 V", depth(1), 0, 1e-6)
	near(t, "depth at -1 V", depth(-1), 1, 1e-6)
	near(t, "depth at the threshold", depth(0), 2*usualN*thermalVoltage*math.Ln2, 1e-12)
	for x := -0.5; x < 0.5; x += 0.01 {
		if !(depth(x) > depth(x+0.01)) {
			t.Errorf("depth at %.2f V: %.6f, a step above %.6f", x, depth(x), depth(x+0.01))
		}
	}
}

// Where the model is right it is not wrong; it is wrong by as much either way, the
// more so the further away, and in the knee more than above it.
func TestWrong(t *testing.T) {
	near(t, "at the place itself", wrong(0.2, 0.2), 0, 0)
	near(t, "either way", wrong(0.3, -0.1)-wrong(-0.1, 0.3), 0, 1e-15)
	near(t, "above the knee", wrong(2, 1), farShare, 1e-6)
	near(t, "far below", wrong(-2, 1), 3*farShare+kneeShare*deepest, 1e-6)
	if a, b := wrong(0, -0.1), wrong(0.5, 0.4); !(a > 2*b) {
		t.Errorf("over 0.1 V: %.5f V in the knee, %.5f above it", a, b)
	}
}

// The noise of the gate and that of the current are told apart (self-made curves of
// many points).
func TestComponents(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4, theta: 0.1}
	b := simBench{circuit: Fixed, vds: 0.1}
	for _, c := range []struct{ gate, share float64 }{{0.3e-3, 3e-3}, {2e-3, 0.2e-3}, {1e-3, 2e-3}} {
		r := randomSource(43)
		sweep := d.sweep(r, b, exact(), 2.5, 7, 0.015, 0)
		for k := range sweep.Vg {
			sweep.Vg[k] += c.gate * r.NormFloat64()
			sweep.Id[k] *= 1 + c.share*r.NormFloat64()
		}
		w := newWork(sweep, b.setup())
		w.settleCurrents()
		wh := w.whole()
		if wh == nil {
			t.Fatal("no model")
		}
		gate, share := w.components(wh)
		// At either end of the curve, where the one and the other decide.
		for _, lever := range []float64{0.3, 4} {
			want := math.Hypot(c.gate, c.share*lever)
			near(t, "scatter in volts", math.Hypot(gate, share*lever), want, 0.25*want)
		}
	}
}

// A shape of the knee that is plainly not the part's own adds no reading; the own one
// does (self-made curves, fine meters).
func TestPlainlyWrongKneeIsLeft(t *testing.T) {
	for _, c := range []struct {
		law   law
		wants int // index of kneeShapes
		not   int
	}{{smoothLaw, 0, 2}, {kinkedLaw, 2, 0}} {
		d := simDevice{law: c.law, vt: 3, beta: 2, n: 1.5, theta: 0.1}
		b := simBench{circuit: Diode}
		s := b.setup()
		w := newWork(d.sweep(randomSource(44), b, fineMeters(), 2.4, 4.5, 0.04, 0.005), s)
		w.settleCurrents()
		w.raiseToFoot()
		w.clean()
		if x := w.gateAt(1e-3); math.IsNaN(x.v) {
			t.Fatal("no reading")
		}
		a := &w.along
		cost := func(k int) float64 {
			a.readings = readings{best: math.Inf(1)}
			if !a.begin() {
				t.Fatal("no beginning")
			}
			a.take(&kneeShapes[k])
			return a.readings.best
		}
		own, other := cost(c.wants), cost(c.not)
		if !(other > own+plainlyWorse) {
			t.Errorf("law %d: the own knee costs %.1f, the other %.1f", c.law, own, other)
		}
		// After the own one, the other is not even read.
		a.readings = readings{best: math.Inf(1)}
		for _, k := range []int{c.wants, c.not} {
			if !a.begin() {
				t.Fatal("no beginning")
			}
			a.take(&kneeShapes[k])
		}
		if a.readings.n != 1 {
			t.Errorf("law %d: %d readings", c.law, a.readings.n)
		}
	}
}

// Readings that cost the same count the same, one that costs plainly more not at all;
// their difference is part of the uncertainty.
func TestReadingsMean(t *testing.T) {
	s := &readings{best: math.Inf(1)}
	s.add(1, 1e-3, 1.9, 0.03, 5)
	s.add(1.004, 1e-3, 2.1, 0.03, 5)
	s.add(3, 1e-3, 7, 0.03, 500)
	s.add(9, math.Inf(1), 2, 1, 0) // no reading
	v, u, gm, ugm := s.mean()
	near(t, "mean", v, 1.002, 1e-9)
	near(t, "u", u, math.Hypot(1e-3, 2e-3), 1e-9)
	near(t, "slope", gm, 2, 1e-9)
	near(t, "u of the slope", ugm, math.Hypot(0.03, 0.1), 1e-9)
}

// Behind a load resistor whose supply nobody stated, points that take most of it are
// no points of the model: the crossing may lie among them, and the plain rules read it
// (self-made; every pair of currents, steps and thresholds).
func TestReadAlongWithoutSupply(t *testing.T) {
	b := simBench{circuit: Load, rl: 10, vdd: 12}
	for _, step := range []float64{0.03, 0.06, 0.1} {
		for k := range 3 {
			d := simDevice{law: smoothLaw, vt: 3 + 0.017*float64(k), beta: 2, n: 1.4, theta: 0.05}
			c := d.sweep(randomSource(1), b, exact(), 0, 5, step, 0)
			s := b.setup()
			s.Vdd = nan()
			for test := 1e-3; test < 1.15; test *= 1.07 {
				for idle := test; idle < 1.15; idle *= 1.07 {
					s.TestCurrent, s.IdleCurrent = test, idle
					if r := One(c, s); r.VgsIdle.Ok() {
						if e := r.VgsIdle.Value - d.gateFor(b, idle); math.Abs(e) > 3*r.VgsIdle.U+2e-3 && math.Abs(e) > step/2 {
							t.Errorf("step %g, %g A: off by %.2f mV, u %.2f mV", step, idle, 1e3*e, 1e3*r.VgsIdle.U)
						}
					}
				}
			}
		}
	}
}

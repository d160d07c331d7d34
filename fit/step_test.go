package fit

import (
	"fmt"
	"math"
	"testing"
)

// displayOnly is what a printed column shows of its meter: the step of its
// digits and no statement.
func displayOnly(step float64) []Accuracy {
	return []Accuracy{{Top: math.Inf(1), Resolution: step}}
}

// Self-made sweeps on a grid of exact multiples of the printed step: nothing in
// the data tells whether the voltages were those or rounded, so a gate voltage is
// no better than the rectangle of one step. Without the step nothing is known.
func TestDisplayStepAlone(t *testing.T) {
	for _, b := range append([]simBench{{circuit: Fixed, vds: 0.1}}, offBenches...) {
		for _, step := range []float64{1e-3, 10e-3} {
			for _, h := range []float64{0.01, 0.02, 0.05} {
				d := simDevice{law: smoothLaw, vt: 3.3, beta: 4.8, n: 1.4}
				c := d.sweep(randomSource(61), b, exact(), 2.6, 4, h, 0)
				for k := range c.Vg {
					c.Vg[k] = math.Round(c.Vg[k]*1e3) / 1e3
				}
				s := b.setup()
				s.TestCurrent, s.IdleCurrent = 10e-3, 150e-3
				bare := One(c, s)
				s.Gate = displayOnly(step)
				q := One(c, s)
				name := fmt.Sprintf("%s, %g V display, %g V steps", b.circuit, step, h)
				for m, v := range q.VtBy {
					if !(v.Vt.U >= step/math.Sqrt(12)*(1-1e-12)) {
						t.Errorf("%s: u of V_T by %s %.2g V is below the step's", name, m, v.Vt.U)
					}
				}
				for _, k := range []Key{KeyVgsth, KeyVgsIdle, KeyVt} {
					x := *q.At(k)
					if !x.Ok() {
						t.Errorf("%s: no %s", name, k)
					}
					if !(x.U >= step/math.Sqrt(12)*(1-1e-12)) {
						t.Errorf("%s: u of %s %.2g V is below the step's", name, k, x.U)
					}
					if x.U > 3*step && x.U > 2*bare.At(k).U {
						t.Errorf("%s: u of %s %.2g V", name, k, x.U)
					}
				}
				for _, k := range Keys {
					if !math.IsNaN(q.At(k).UAbsolute) {
						t.Errorf("%s: an absolute uncertainty of %s without a statement", name, k)
					}
				}
				if !q.Has(CodeNoAccuracy) {
					t.Errorf("%s: codes %s", name, codesOf(q))
				}
			}
		}
	}
}

// Where noise or hand-turned voltages dither the display, readings average: the
// uncertainties stay honest, and finer than one step's.
func TestDisplayStepWithDither(t *testing.T) {
	r := randomSource(62)
	var h honesty
	finer := 0
	const n = 300
	for k := range n {
		d := simDevice{law: smoothLaw, vt: 2 + 2*r.Float64(), beta: math.Exp(2 * r.Float64()), n: 1.1 + 0.7*r.Float64(), theta: 0.15 * r.Float64()}
		b := offBenches[k%3]
		c := d.sweep(r, b, handheld(), d.vt-0.5, d.vt+0.6, 0.01, 0.002)
		s := b.setup()
		s.Gate, s.Load, s.Current = displayOnly(1e-3), displayOnly(1e-4), displayOnly(1e-6)
		s.TestCurrent = []float64{1e-3, 10e-3, 100e-3}[r.IntN(3)]
		q := One(c, s)
		h.add(q.Vgsth.Value-d.gateFor(b, s.TestCurrent), q.Vgsth.U)
		if !math.IsNaN(q.Vgsth.UAbsolute) || !q.Has(CodeNoAccuracy) {
			t.Fatalf("absolute u %g, codes %s", q.Vgsth.UAbsolute, codesOf(q))
		}
		if q.Vgsth.U < 1e-3/math.Sqrt(12) {
			finer++
		}
	}
	h.check(t, "1 mV display with dither")
	t.Logf("%d of %d finer than one step's rectangle", finer, n)
	if finer == 0 {
		t.Error("nothing was averaged")
	}
}

// A drain current that reads the same at the off voltage however often is known
// to one count.
func TestLeakageStep(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3.3, beta: 4.8, n: 1.4}
	b := simBench{circuit: Fixed, vds: 10}
	c := d.sweep(randomSource(63), b, exact(), 2, 4, 0.02, 0)
	for range 9 {
		c.Vg, c.Id = append(c.Vg, 0), append(c.Id, 30e-6)
	}
	s := b.setup()
	s.TestCurrent, s.Current = 10e-3, displayOnly(10e-6)
	if q := One(c, s).Idss; !(q.U >= 10e-6/math.Sqrt(12)*(1-1e-12)) || q.Value != 30e-6 {
		t.Errorf("leakage %g ± %g A", q.Value, q.U)
	}
}

package fit

import (
	"math"
	"testing"
)

// Self-made sweeps at a small fixed drain voltage that end at different overdrives:
// below the drain voltage the linear methods are refused and the square-root line is
// given; well above it they stand; at the knee nothing does.
func TestNeverLinear(t *testing.T) {
	r := randomSource(811)
	type count struct{ n, notLinear, subThreshold, sqrt, ratio int }
	for _, c := range []struct {
		vds, over   float64 // V, drain voltage and overdrive at the end of the sweep
		never, knee bool
	}{
		{0.8, 0.35, true, false}, {0.8, 0.6, true, false}, {0.5, 0.3, true, false}, {0.5, 0.4, true, false},
		{0.5, 1.4, false, false}, {0.1, 0.8, false, false}, {0.05, 0.5, false, false}, {0.3, 1.2, false, false},
		{0.1, -0.02, false, true}, {0.5, -0.02, false, true},
	} {
		var n count
		worst := 0.0
		for k := range 40 {
			d := simDevice{law: smoothLaw, vt: 2 + 2*r.Float64(), beta: 1 + 4*r.Float64(), n: 1.2 + 0.4*r.Float64(), theta: 0.1 * r.Float64()}
			b := simBench{circuit: Fixed, vds: c.vds}
			s := b.setup()
			s.TestCurrent = 100e-6
			m := []simMeters{handheld(), fineMeters(), exact()}[k%3]
			q := One(d.sweep(r, b, m, d.vt-0.6, d.vt+c.over, 0.02, 0.004), s)
			n.n++
			if q.Has(CodeNotLinear) {
				n.notLinear++
			}
			if q.Has(CodeSubThresholdOnly) {
				n.subThreshold++
			}
			if line, ok := q.VtBy["sqrt"]; ok {
				n.sqrt++
				worst = math.Max(worst, math.Abs(line.Vt.Value-d.vt))
			}
			if _, ok := q.VtBy["ratio"]; ok {
				n.ratio++
			}
		}
		t.Logf("V_DS %g V, overdrive %g V: %+v, square-root line off by %.1f mV at most", c.vds, c.over, n, 1e3*worst)
		switch {
		// The window of so short a line reaches into the knee, which pulls the
		// threshold down by up to 60 mV at 0.3 V of overdrive.
		case c.never && (n.notLinear < n.n || n.ratio > 0 || n.sqrt < n.n*9/10 || worst > 65e-3),
			c.knee && (n.subThreshold < n.n*9/10 || n.sqrt+n.ratio+n.notLinear > 0),
			!c.never && !c.knee && (n.notLinear > 0 || n.ratio < n.n*9/10):
			t.Errorf("V_DS %g V, overdrive %g V: %+v, worst %g V", c.vds, c.over, n, worst)
		}
	}
}

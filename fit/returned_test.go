package fit

import (
	"math"
	"slices"
	"testing"
)

// Self-made devices whose lowest point with a current is taken again after the
// sweep: nothing is said of cold ones, warm ones and those that kept a charge are
// told, and heating counts as looked for in all of them.
func TestReturnedReading(t *testing.T) {
	r := randomSource(811)
	run := func(what string, d warmDevice) (heating, history, none int) {
		for k := range 30 {
			d.simDevice = simDevice{law: smoothLaw, vt: 2 + 2*r.Float64(), beta: 1 + 5*r.Float64(), n: 1.2 + 0.4*r.Float64(), theta: 0.1 * r.Float64()}
			b := []simBench{{circuit: Load, rl: 10, vdd: 12}, {circuit: Fixed, vds: 10}}[k%2]
			s := b.setup()
			s.TestCurrent, s.IdleCurrent = 10e-3, 100e-3
			m := []simMeters{handheld(), fineMeters()}[k%2]
			grid := turnedGrid(r, d.vt-0.5, d.vt+0.8, []float64{0.02, 0.05}[r.IntN(2)], 0.2)
			again := slices.IndexFunc(grid, func(v float64) bool { return d.at(b, v) > 2e-3 })
			var rise, charge float64
			c := d.read(r, b, m, grid, &rise, &charge)
			plain := One(c, s)
			charge += d.memory
			back := d.read(r, b, m, []float64{grid[again] + 3e-3}, &rise, &charge)
			c.Vg, c.Id, c.Vl, c.Returned = append(c.Vg, back.Vg...), append(c.Id, back.Id...), append(c.Vl, back.Vl...), true
			res := One(c, s)
			if !res.Returned {
				t.Errorf("%s %d: not compared", what, k)
			}
			// 1 uV: the steps of the displays are looked for among all readings.
			if x, y := res.Vgsth.Value, plain.Vgsth.Value; math.Abs(x-y) > 1e-6 {
				t.Errorf("%s %d: the reading taken again moves V_GS(th) from %g to %g", what, k, y, x)
			}
			if both := Combine([]Result{res}, []string{"up"}); both.Has(CodeHeatingNotChecked) {
				t.Errorf("%s %d: heating is said not to be checked", what, k)
			}
			switch {
			case res.Has(CodeHeating):
				heating++
			case res.Has(CodeGateHistory):
				history++
			default:
				none++
			}
		}
		t.Logf("%s: heating %d, history %d, none %d", what, heating, history, none)
		return
	}
	if _, _, none := run("cold", warmDevice{lag: 1}); none < 29 { // three standard uncertainties: 0.3 % of sound ones
		t.Errorf("cold: nothing said in %d of 30 only", none)
	}
	if heating, _, _ := run("warm", warmDevice{kappa: 4e-3, alpha: 1.7, rth: 20, lag: 30}); heating < 27 {
		t.Errorf("warm: told in %d of 30 only", heating)
	}
	if _, history, _ := run("charged", warmDevice{lag: 1, memory: 30e-3}); history < 29 {
		t.Errorf("charged: told in %d of 30 only", history)
	}
}

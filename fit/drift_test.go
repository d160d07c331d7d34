package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

// warmDevice is a self-made device with a temperature of its own: the threshold
// falls by kappa, the gain by (T/300 K)^-alpha, and the temperature follows the power
// with a lag, in points.
type warmDevice struct {
	simDevice
	kappa, alpha, rth, lag float64 // V/K, 1, K/W, points
	memory                 float64 // V, added to the threshold once the sweep has turned
	creep                  float64 // V, by which it grows over a sweep, most of it at high gate voltages
}

// sweep reads the grid in its order and leaves the temperature (above 300 K) and
// the charge behind.
func (d warmDevice) read(r *rand.Rand, b simBench, m simMeters, grid []float64, rise, charge *float64) Curve {
	var c Curve
	share := 1 - math.Exp(-1/d.lag)
	for _, v := range grid {
		var i float64
		t := *rise
		for range 8 { // the power of this very point warms it
			x := d.simDevice
			x.vt += *charge - d.kappa*t
			x.beta *= math.Pow(1+t/300, -d.alpha)
			i = x.at(b, v)
			vds := b.vds
			switch b.circuit {
			case Diode:
				vds = v
			case Load:
				vds = b.vdd - i*b.rl
			}
			t = *rise + share*(d.rth*i*vds-*rise)
		}
		*rise = t
		*charge += d.creep * math.Max(0, v-d.vt) / (0.5 * float64(len(grid)))
		c.Vg = append(c.Vg, m.gate.read(r, v))
		if b.circuit == Load {
			c.Vl = append(c.Vl, m.load.read(r, i*b.rl))
		} else {
			c.Id = append(c.Id, m.current.read(r, i))
		}
	}
	return c
}

// Self-made parts that warm up with lags from a fraction of a point to far longer
// than a sweep, parts with a hysteresis, and parts whose charge creeps: the two
// causes are never taken for one another, and where they look alike that is said.
func TestHeatingOrHistory(t *testing.T) {
	r := randomSource(701)
	type outcome struct{ n, none, heating, unsure, history int }
	run := func(what string, make func() warmDevice) outcome {
		var o outcome
		for k := range 18 {
			d := make()
			d.simDevice = simDevice{law: smoothLaw, vt: 2 + 2*r.Float64(), beta: 1 + 5*r.Float64(), n: 1.2 + 0.4*r.Float64(), theta: 0.1 * r.Float64()}
			b := []simBench{{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Fixed, vds: 10}}[k%3]
			s := b.setup()
			s.TestCurrent, s.IdleCurrent = 10e-3, 100e-3
			var rise, charge float64
			m := []simMeters{handheld(), fineMeters()}[k%2]
			step := []float64{0.02, 0.05}[r.IntN(2)]
			up := turnedGrid(r, d.vt-0.5, d.vt+0.8, step, 0.2)
			down := turnedGrid(r, d.vt-0.5, d.vt+0.8, step, 0.2)
			for i, j := 0, len(down)-1; i < j; i, j = i+1, j-1 {
				down[i], down[j] = down[j], down[i]
			}
			sweeps := []Swept{{Setup: s, Direction: "up"}, {Setup: s, Direction: "down"}}
			sweeps[0].Curve = d.read(r, b, m, up, &rise, &charge)
			charge += d.memory
			sweeps[1].Curve = d.read(r, b, m, down, &rise, &charge)
			for j := range sweeps {
				sweeps[j].Result = One(sweeps[j].Curve, s)
			}
			res := Combine([]Result{sweeps[0].Result, sweeps[1].Result}, []string{"up", "down"})
			Drift(sweeps, &res)
			o.n++
			text := warningText(res, CodeHeating)
			switch {
			case res.Has(CodeGateHistory):
				o.history++
			case text == "":
				o.none++
			case strings.Contains(text, "cannot tell"):
				o.unsure++
			default:
				o.heating++
			}
		}
		t.Logf("%-28s of %d: none %d, heating %d, cannot tell %d, history %d", what, o.n, o.none, o.heating, o.unsure, o.history)
		return o
	}
	heating, n := 0, 0
	for _, lag := range []float64{0.3, 1, 3, 10, 30, 300} {
		for _, rth := range []float64{1, 5, 20} {
			o := run(fmt.Sprintf("lag %g, %g K/W", lag, rth), func() warmDevice { return warmDevice{kappa: 4e-3, alpha: 1.7, rth: rth, lag: lag} })
			if o.history > 0 {
				t.Errorf("lag %g, %g K/W: %d of %d called gate history", lag, rth, o.history, o.n)
			}
			// A lag of some points and a rise of tens of kelvins: seen, and mostly told.
			if lag >= 3 && lag <= 30 && rth >= 5 {
				heating, n = heating+o.heating, n+o.n
				if o.none > o.n/4 {
					t.Errorf("lag %g, %g K/W: %d of %d not seen", lag, rth, o.none, o.n)
				}
			}
			if lag < 1 && rth < 20 && o.none < o.n {
				t.Errorf("lag %g, %g K/W: seen in %d of %d although nothing can be", lag, rth, o.n-o.none, o.n)
			}
		}
	}
	t.Logf("told to be heating: %d of %d with a lag of 3 to 30 points", heating, n)
	if 4*heating < n {
		t.Errorf("told to be heating: %d of %d only", heating, n)
	}
	for _, v := range []float64{-20e-3, -5e-3, 5e-3, 20e-3} {
		// A level between two points 50 mV apart is known to some 2 mV.
		small := math.Abs(v) < 10e-3
		o := run(fmt.Sprintf("hysteresis %g mV", 1e3*v), func() warmDevice { return warmDevice{lag: 1, memory: v} })
		// Where the down sweep needs less gate voltage a warm part looks much alike.
		least, none := o.n*9/10, 0
		if v < 0 {
			least = o.n / 2
		}
		if small {
			least, none = 0, o.n/2
		}
		if o.heating > 0 || o.history < least || o.none > none {
			t.Errorf("hysteresis %g mV: %+v", 1e3*v, o)
		}
	}
	for _, v := range []float64{-20e-3, 20e-3} {
		if o := run(fmt.Sprintf("creep %g mV", 1e3*v), func() warmDevice { return warmDevice{lag: 1, creep: v} }); o.heating > 0 || o.none > 0 {
			t.Errorf("creep %g mV: %+v", 1e3*v, o)
		}
	}
	if o := run("nothing", func() warmDevice { return warmDevice{lag: 1} }); o.none < o.n {
		t.Errorf("nothing: %+v", o)
	}
}

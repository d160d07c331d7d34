package fit

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"testing"
)

// Noise-free curves of the model's own equation (self-made: arithmetic, not
// physics) give back their parameters in every circuit.
func TestWholeCurve(t *testing.T) {
	for _, b := range []simBench{{circuit: Diode}, {circuit: Fixed, vds: 10}, {circuit: Fixed, vds: 0.1}, {circuit: Load, rl: 10, vdd: 12}} {
		for _, theta := range []float64{0, 0.1, 0.3} {
			d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4, theta: theta}
			c, s := sweepOf(d, b, 2, 5, 0.03)
			r := One(c, s)
			name := fmt.Sprintf("%s %g V, θ %g: ", b.circuit, b.vds, theta)
			if r.Method != "curve" {
				t.Errorf("%smethod %q, codes %s", name, r.Method, codesOf(r))
				continue
			}
			// Weak priors and the floors of the weights leave some of the ridge of β and θ
			// (and λ, which is fitted in the load circuit and zero here).
			loose := 1.0
			if b.circuit == Load {
				loose = 15
			}
			near(t, name+"V_T", r.Vt.Value, 3, 0.1e-3*math.Min(loose, 8))
			near(t, name+"β", r.Beta.Value, 2, 2e-3*loose)
			near(t, name+"θ", r.Theta.Value, theta, 2e-3*loose)
			near(t, name+"knee", r.Shape.Knee.Value, 2*1.4*thermalVoltage, 1e-3)
			near(t, name+"slope factor", r.Shape.SubThreshold.Value, 1.4, 0.1) // the foot's upper end bends already
			if r.Shape.Misfit > 0.01 {
				t.Errorf("%sreduced χ² %g", name, r.Shape.Misfit)
			}
		}
	}
}

// Held-back devices of the simulator, on which no default was chosen, noise-free at
// uneven steps of about 10 mV: V_T against VTO of the card, for levels 1 and 3, where
// VTO is what the equation means by it. 2 mV; 5 mV with resistance in the source
// lead, which the model knowingly takes for mobility; 7 mV for the card in which that
// resistance bends the curve thirty times as much as mobility does (0.3 Ω at KP 12
// against THETA 0.03): there it does not stand in for it well.
func TestWholeCurveHeldBack(t *testing.T) {
	worst := map[string]float64{}
	for _, d := range denseCurves(t) {
		level := d.family == "level 1 held" || d.family == "level 3 held"
		if !level {
			continue
		}
		from, to := d.span()
		var c Curve
		r := randomSource(8)
		for v := from; v < to; v += 0.007 + 0.006*r.Float64() {
			c.Vg = append(c.Vg, v)
			c.Id = append(c.Id, d.at(v))
		}
		s := d.setup
		s.TestCurrent = 1e-3
		got := One(c, s)
		limit := 2e-3
		if d.rs > 0 {
			limit = 5e-3
		}
		if d.device == "h3d" {
			limit = 7e-3
		}
		e := got.VtBy["curve"].Vt.Value - d.vto
		if _, ok := got.VtBy["curve"]; !ok {
			t.Errorf("%s: no threshold by the whole curve: %s %s, codes %s", d.file, got.State, got.Method, codesOf(got))
			continue
		}
		if math.Abs(e) > limit {
			t.Errorf("%s: off by %.2f mV", d.file, 1e3*e)
		}
		key := d.family + " " + d.circuit
		if math.Abs(e) > math.Abs(worst[key]) {
			worst[key] = e
		}
	}
	for _, k := range slices.Sorted(maps.Keys(worst)) {
		t.Logf("%-30s %.2f mV", k, 1e3*worst[k])
	}
}

// Below the knee of the simulator's level 3, NFS = 2e11 and TOX = 50 nm give a slope
// factor of 1 + q NFS/C_ox = 1.46407 at 27 °C (arithmetic).
func TestSubThresholdSlope(t *testing.T) {
	seen := 0
	for _, o := range outsideCurves(t) {
		if o.device != "l3" || o.step != "10mV" || o.meter != "none" || o.setup.Circuit == Load {
			continue
		}
		s := o.setup
		s.TestCurrent, s.Temperature = 1e-3, 27
		if s.Circuit == Fixed && s.Vds < 1 {
			continue
		}
		seen++
		r := One(o.curve, s)
		near(t, o.file+" slope factor", r.Shape.SubThreshold.Value, 1.46407, 0.01)
	}
	if seen < 2 {
		t.Errorf("%d curves only", seen)
	}
}

// No single bad point moves the threshold by more than its uncertainty: any point of
// a sweep, its gate voltage off by up to 0.3 V or its current by up to a factor of
// three (self-made). That the point is lost moves it too, which no uncertainty of a
// fit without it holds: one in fifty may move it by up to 1.3 u.
func TestOneBadPoint(t *testing.T) {
	r := randomSource(21)
	worst, moved, n := 0.0, 0, 0
	for trial := range 60 {
		d := simDevice{law: law(trial % 3), vt: 2 + 2*r.Float64(), beta: 1 + 4*r.Float64(), n: 1.2 + 0.4*r.Float64(), theta: 0.2 * r.Float64()}
		b := []simBench{{circuit: Diode}, {circuit: Fixed, vds: 10}, {circuit: Fixed, vds: 0.1}, {circuit: Load, rl: 10, vdd: 24}}[trial%4]
		m := []simMeters{handheld(), fineMeters()}[trial%2]
		c := d.sweep(r, b, m, d.vt-0.5, d.vt+1.5, 0.05, 0.01)
		s := b.setup()
		s.TestCurrent = 1e-3
		clean := One(c, s)
		if clean.Method != "curve" {
			continue
		}
		for k := range c.Vg {
			bad := Curve{Vg: slices.Clone(c.Vg), Id: slices.Clone(c.Id), Vl: slices.Clone(c.Vl)}
			if r.IntN(2) == 0 {
				bad.Vg[k] += []float64{-1, 1}[r.IntN(2)] * math.Pow(10, -2.5+2*r.Float64())
			} else {
				f := math.Pow(3, 2*r.Float64()-1)
				if bad.Id != nil {
					bad.Id[k] *= f
				} else {
					bad.Vl[k] *= f
				}
			}
			got := One(bad, s)
			n++
			if got.Method != "curve" {
				t.Errorf("trial %d, point %d: method %q, %s", trial, k, got.Method, codesOf(got))
				continue
			}
			shift := math.Abs(got.Vt.Value-clean.Vt.Value) / math.Max(clean.Vt.U, got.Vt.U)
			worst = math.Max(worst, shift)
			if shift > 1 {
				moved++
				t.Logf("trial %d (%s law %d), point %d (%.3f V from V_T): moved %.2f mV, u %.2f mV", trial, b.circuit, d.law, k, c.Vg[k]-d.vt, 1e3*(got.Vt.Value-clean.Vt.Value), 1e3*clean.Vt.U)
			}
		}
	}
	t.Logf("%d bad points, %d moved V_T by more than u, at worst %.2f u", n, moved, worst)
	if moved*50 > n || worst > 1.3 {
		t.Errorf("%d of %d, at worst %.2f u", moved, n, worst)
	}
}

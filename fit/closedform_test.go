package fit

import (
	"math"
	"testing"
)

// The equations of the level-1 model (H. Shichman and D. A. Hodges, IEEE J.
// Solid-State Circuits SC-3, 1968, 285–289) with the 1/(1+θv) of the level-3
// model, recomputed for VTO = 3 V, KP = 2 A/V², λ = 0.01 1/V; a circuit simulator
// gives the same to all printed digits. They hold our own curves to the book
// before these test anything else.
func TestOurCurvesAreTheBooks(t *testing.T) {
	d := simDevice{law: squareLaw, vt: 3, beta: 2, lambda: 0.01}
	diode, linear := simBench{circuit: Diode}, simBench{circuit: Fixed, vds: 0.1}
	near(t, "I(3.5), diode", d.at(diode, 3.5), 0.25875, 1e-12)
	near(t, "I(4), diode", d.at(diode, 4), 1.0400, 1e-12)
	near(t, "I(4.5), diode", d.at(diode, 4.5), 2.35125, 1e-12)
	near(t, "I(3.5), 0.1 V", d.at(linear, 3.5), 0.0900900, 1e-9)
	near(t, "I(6), 0.1 V", d.at(linear, 6), 0.590590, 1e-9)
	load := simBench{circuit: Load, rl: 10, vdd: 12}
	for vg, want := range map[float64]float64{3.5: 2.731707, 4: 10.181818, 4.5: 11.548948, 6: 11.796909} {
		near(t, "V_L", 10*d.at(load, vg), want, 1e-6)
	}
	bent := simDevice{law: squareLaw, vt: 3, beta: 2, theta: 0.1}
	near(t, "θ, I(3.5)", bent.at(diode, 3.5), 0.238095, 1e-6)
	near(t, "θ, I(4)", bent.at(diode, 4), 0.909091, 1e-6)
	near(t, "θ, I(4.5)", bent.at(diode, 4.5), 1.956522, 1e-6)
	// Interpolation of Enz, Krummenacher and Vittoz (1995) at V_GS = V_T in
	// saturation: I = 2nβU_T² ln²2 and g_m n U_T/I = 1/(2 ln 2), with its factor
	// 1/n in β.
	e := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	ten := simBench{circuit: Fixed, vds: 10}
	i := e.at(ten, 3)
	near(t, "ln²2", i/(2*e.beta*e.n*e.n*thermalVoltage*thermalVoltage), math.Ln2*math.Ln2, 1e-6)
	gm := (e.at(ten, 3+1e-6) - e.at(ten, 3-1e-6)) / 2e-6
	near(t, "1/(2 ln 2)", gm*e.n*thermalVoltage/i, 0.72135, 1e-5)
}

// V_GS(th) by constant current lies √(2I/β) above the threshold of a square law:
// 31.6 mV at 1 mA and 316 mV at 100 mA with β = 2 A/V² (arithmetic).
func TestConstantCurrent(t *testing.T) {
	d := simDevice{law: squareLaw, vt: 3, beta: 2}
	for _, b := range []simBench{{circuit: Diode}, {circuit: Fixed, vds: 10}, {circuit: Load, rl: 10, vdd: 12}} {
		for _, step := range []float64{0.002, 0.005, 0.01} {
			c := d.sweep(randomSource(1), b, exact(), 2.5, 4, step, 0)
			s := b.setup()
			s.TestCurrent, s.IdleCurrent = 1e-3, 100e-3
			r := One(c, s)
			near(t, "1 mA", r.Vgsth.Value, 3.0316228, 1e-6)
			near(t, "100 mA", r.VgsIdle.Value, 3.3162278, 1e-6)
			if r.Has(CodeCoarseNearCurrent) {
				t.Errorf("step %g called coarse", step)
			}
		}
	}
	// With θ: (β/2)v²/(1+θv) = I solved for v.
	d.theta = 0.1
	v := (0.1*100e-3 + math.Sqrt(math.Pow(0.1*100e-3, 2)+2*2*100e-3)) / 2
	c := d.sweep(randomSource(1), simBench{circuit: Diode}, exact(), 2.5, 4, 0.01, 0)
	s := simBench{circuit: Diode}.setup()
	s.TestCurrent = 100e-3
	near(t, "100 mA with θ", One(c, s).Vgsth.Value, 3+v, 1e-6)
}

// At steps of 10 mV or less every circuit and law is read off within 0.5 mV at
// 1, 10 and 100 mA, noise-free (self-made curves; the simulator's are in
// TestOutsideCurves).
func TestWithinHalfAMillivolt(t *testing.T) {
	worst := 0.0
	for _, l := range []law{squareLaw, smoothLaw, kinkedLaw} {
		for _, beta := range []float64{0.5, 2, 10} {
			for _, b := range []simBench{
				{circuit: Diode}, {circuit: Fixed, vds: 10}, {circuit: Fixed, vds: 0.1},
				{circuit: Load, rl: 10, vdd: 12}, {circuit: Load, rl: 1000, vdd: 12},
			} {
				for _, step := range []float64{0.003, 0.01} {
					for _, start := range []float64{2.1, 2.1037, 2.1061} {
						d := simDevice{law: l, vt: 3, beta: beta, n: 1.4, theta: 0.1, rs: 0.05}
						c := d.sweep(randomSource(1), b, exact(), start, 3.9, step, 0)
						for _, i := range []float64{1e-3, 10e-3, 100e-3} {
							s := b.setup()
							s.TestCurrent = i
							r := One(c, s)
							if !r.Vgsth.Ok() {
								if d.at(b, 3.89) > i {
									t.Errorf("law %d %s: nothing at %g A: %s", l, b.circuit, i, r.Why)
								}
								continue
							}
							e := math.Abs(r.Vgsth.Value - d.gateFor(b, i))
							worst = math.Max(worst, e)
							if e > 0.5e-3 {
								t.Errorf("law %d β %g %s %g step %g from %g at %g A: off by %.3g mV", l, beta, b.circuit, b.rl, step, start, i, 1e3*e)
							}
						}
					}
				}
			}
		}
	}
	t.Logf("worst %.3f mV", 1e3*worst)
}

// The rule between two points: √I where both are in strong inversion, ln I below.
func TestTwoPointRule(t *testing.T) {
	s := unknownSetup()
	s.Circuit, s.Vds, s.Spot = Fixed, 10, true
	// √I from 0.3 to 0.4 over 0.1 V: 0.35² A in the middle.
	s.TestCurrent = 0.1225
	r := One(Curve{Vg: []float64{3.3, 3.4}, Id: []float64{0.09, 0.16}}, s)
	near(t, "√I", r.Vgsth.Value, 3.35, 1e-9)
	// A decade over 70 mV: the geometric mean in the middle, bounded by the root.
	s.TestCurrent = math.Sqrt(1e-5 * 1e-4)
	r = One(Curve{Vg: []float64{2.5, 2.57}, Id: []float64{1e-5, 1e-4}}, s)
	if d := math.Abs(r.Vgsth.Value - 2.535); d > 2*r.Vgsth.U || r.Vgsth.U > 10e-3 {
		t.Errorf("ln I: %g ± %g V, want 2.535", r.Vgsth.Value, r.Vgsth.U)
	}
}

func TestBelowSweepAndFirstPoint(t *testing.T) {
	s := unknownSetup()
	s.Circuit = Diode
	c := Curve{Vg: []float64{3, 3.1, 3.2, 3.3, 3.4}, Id: []float64{1e-3, 5e-3, 20e-3, 45e-3, 80e-3}}
	for i, ok := range map[float64]bool{1e-3: true, 0.995e-3: true, 0.9e-3: false, 80e-3: true, 81e-3: false} {
		s.TestCurrent = i
		if r := One(c, s); r.Vgsth.Ok() != ok {
			t.Errorf("%g A: %v, %s", i, r.Vgsth.Value, r.Why)
		}
	}
	s.TestCurrent = 1e-3
	near(t, "first point", One(c, s).Vgsth.Value, 3, 1e-9)
	s.TestCurrent = 80e-3
	near(t, "last point", One(c, s).Vgsth.Value, 3.4, 1e-6)
}

func TestManyCrossings(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	b := simBench{circuit: Diode}
	c := d.sweep(randomSource(1), b, exact(), 2.8, 3.4, 0.003, 0)
	for k := range c.Id { // a ripple of 3 %
		c.Id[k] *= 1 + 0.03*math.Cos(math.Pi*float64(k))
	}
	s := b.setup()
	s.TestCurrent = 100e-3
	r := One(c, s)
	if r.Crossings < 2 || !r.Has(CodeManyCrossings) {
		t.Errorf("%d crossings, %s", r.Crossings, codesOf(r))
	}
	near(t, "V_GS", r.Vgsth.Value, d.gateFor(b, 100e-3), 3*r.Vgsth.U)
}

// Points are called coarse where that hurts: at 50 mV the device's own curve tells the
// gate voltage well.
func TestCoarseGridIsSaid(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	b := simBench{circuit: Diode}
	for _, c := range []struct {
		step, i float64
		coarse  bool
	}{{0.25, 1e-3, true}, {0.05, 1e-3, false}, {0.01, 1e-3, false}, {0.05, 200e-3, false}} {
		x := d.sweep(randomSource(1), b, exact(), 2.33, 4, c.step, 0)
		s := b.setup()
		s.TestCurrent = c.i
		if r := One(x, s); r.Has(CodeCoarseNearCurrent) != c.coarse {
			t.Errorf("step %g at %g A: %s", c.step, c.i, codesOf(r))
		}
	}
}

// A data sheet gives g_fs = 7 S at 5 A (MRF150, Motorola 1998): a square law with
// β = g²/2I = 4.9 A/V² then has, at 250 mA, 0.31944 V overdrive and 1.5652 S
// (arithmetic).
func TestTransconductance(t *testing.T) {
	d := simDevice{law: squareLaw, vt: 3, beta: 4.9}
	b := simBench{circuit: Fixed, vds: 10}
	for _, step := range []float64{0.01, 0.05} {
		c := d.sweep(randomSource(1), b, exact(), 2.5, 3+math.Sqrt(2*5/4.9)+4*step, step, step/3)
		s := b.setup()
		s.TestCurrent, s.IdleCurrent = 100e-3, 250e-3
		r := One(c, s)
		near(t, "gate bias", r.VgsIdle.Value, 3.31944, 1e-5)
		near(t, "g_m at idle", r.GmIdle.Value, 1.5652, 1.5e-3) // 0.1 %: priors on mobility and knee are left in the model
		near(t, "greatest g_m", r.GmMax.Value, 7, 7*0.02)      // the last points are no candidates
		r.Choose("sqrt")
		near(t, "β by the line", r.Beta.Value, 4.9, 1e-6)
		near(t, "V_T by the line", r.Vt.Value, 3, 1e-6)
	}
}

// The tangent of v/(1+θv) at v meets zero θv² early, the tangent of √I in
// saturation θv²/(2+θv): -25.0 mV, -12.195 mV and -4.433 mV (arithmetic).
func TestTangentBias(t *testing.T) {
	const theta, h = 0.1, 1e-4
	tangent := func(f func(float64) float64, v float64) float64 {
		x := []float64{v - h, v, v + h}
		y := []float64{f(x[0]), f(x[1]), f(x[2])}
		l, ok := layLine(x, y, make([]float64, 3), 0)
		if !ok {
			t.Fatal("no line")
		}
		z, _ := l.zero()
		return z
	}
	linear := func(v float64) float64 { return v / (1 + theta*v) }
	sqrt := func(v float64) float64 { return v / math.Sqrt(1+theta*v) }
	near(t, "linear at 0.5 V", 1e3*tangent(linear, 0.5), -25.0, 1e-3)
	near(t, "√I at 0.5 V", 1e3*tangent(sqrt, 0.5), -12.195, 1e-3)
	near(t, "√I at 0.3 V", 1e3*tangent(sqrt, 0.3), -4.433, 1e-3)
}

// Read by 6,000-count meters, the greatest slope stays within some percent of the
// true one at the places that are candidates, and points a fraction of a
// millivolt apart do not make it explode.
func TestTransconductanceThroughMeters(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	for _, b := range []simBench{{circuit: Diode}, {circuit: Fixed, vds: 10}, {circuit: Fixed, vds: 0.1}} {
		for _, step := range []float64{0.002, 0.01, 0.05} {
			sum := 0.0
			for seed := range uint64(20) {
				c := d.sweep(randomSource(seed), b, handheld(), 2.5, 4.2, step, step/3)
				s := b.setup()
				s.TestCurrent = 1e-3
				got := One(c, s).GmMax
				truth := 0.0
				for v := 2.6; v < 4.2-3*step; v += 0.005 {
					truth = math.Max(truth, (d.at(b, v+1e-5)-d.at(b, v-1e-5))/2e-5)
				}
				sum += math.Pow(got.Value/truth-1, 2)
			}
			if rms := math.Sqrt(sum / 20); rms > 0.05 {
				t.Errorf("%s %g V step %g: %.1f %% rms", b.circuit, b.vds, step, 100*rms)
			}
		}
	}
}

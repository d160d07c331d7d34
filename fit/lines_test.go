package fit

import (
	"math"
	"strings"
	"testing"
)

func sweepOf(d simDevice, b simBench, from, to, step float64) (Curve, Setup) {
	s := b.setup()
	s.TestCurrent = 1e-3
	return d.sweep(randomSource(9), b, exact(), from, to, step, step/4), s
}

func TestSquareRootLine(t *testing.T) {
	d := simDevice{law: squareLaw, vt: 3, beta: 2}
	for _, b := range []simBench{{circuit: Diode}, {circuit: Fixed, vds: 10}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Load, rl: 100, vdd: 50}} {
		c, s := sweepOf(d, b, 2, 4.5, 0.03)
		for _, vdd := range []float64{b.vdd, nan()} {
			s.Vdd = vdd
			r := One(c, s)
			if r.Method != "curve" || len(r.VtBy) != 2 {
				t.Errorf("%s: method %q, %d methods", b.circuit, r.Method, len(r.VtBy))
			}
			r.Choose("sqrt")
			near(t, "V_T", r.Vt.Value, 3, 1e-6)
			near(t, "β", r.Beta.Value, 2, 1e-5)
			got := r.VtBy["sqrt"]
			if got.To-got.From != r.Vt.N || r.Vt.N < leastOnLine {
				t.Errorf("points %d…%d, n %d", got.From, got.To, r.Vt.N)
			}
		}
	}
}

// The window line of a bent curve lies below V_T, by a few millivolts with
// θ = 0.1 (the bias of its tangents, TestTangentBias).
func TestSquareRootBias(t *testing.T) {
	d := simDevice{law: squareLaw, vt: 3, beta: 2, theta: 0.1}
	c, s := sweepOf(d, simBench{circuit: Diode}, 2, 4.5, 0.03)
	r := One(c, s)
	r.Choose("sqrt")
	if e := r.Vt.Value - 3; e > 0 || e < -12.2e-3 {
		t.Errorf("off by %.2f mV", 1e3*e)
	}
}

// Each method only in its region.
func TestMethodsFollowTheRegion(t *testing.T) {
	d := simDevice{law: squareLaw, vt: 3, beta: 2, theta: 0.05}
	check := func(what string, c Curve, s Setup, methods, code string) {
		t.Helper()
		r := One(c, s)
		var got []string
		for _, m := range []string{"sqrt", "linear", "ratio"} {
			if _, ok := r.VtBy[m]; ok {
				got = append(got, m)
			}
		}
		if strings.Join(got, " ") != methods || code != "" && !r.Has(code) {
			t.Errorf("%s: methods %v, codes %s; want %q and %s", what, got, codesOf(r), methods, code)
		}
		if !r.Vgsth.Ok() {
			t.Errorf("%s: the constant-current value is gone", what)
		}
	}
	c, s := sweepOf(d, simBench{circuit: Fixed, vds: 0.1}, 2, 6, 0.05)
	check("0.1 V", c, s, "linear ratio", "")
	s.Burden = nan()
	check("0.1 V, burden not known", c, s, "", CodeBenchLimited)
	c.Vd = make([]float64, len(c.Vg))
	for k := range c.Vd {
		c.Vd[k] = 0.1
	}
	check("0.1 V, read at the drain", c, s, "linear ratio", "")
	c.Vd = nil
	s.Burden, s.Circuit = 0, NoCircuit
	check("circuit not given", c, s, "", CodeNoCircuit)

	c, s = sweepOf(d, simBench{circuit: Fixed, vds: 10}, 2, 4, 0.05)
	check("10 V", c, s, "sqrt", "")
	s.Vds = nan()
	check("V_DS not given", c, s, "", CodeNotSaturated)

	// 1.2 V: saturated up to 1.2 V overdrive, so there is a line from below that.
	c, s = sweepOf(d, simBench{circuit: Fixed, vds: 1.2}, 2, 6, 0.05)
	check("1.2 V", c, s, "sqrt", "")
	if r := One(c, s); math.Abs(r.Vt.Value-3) > 15e-3 {
		t.Errorf("1.2 V: V_T %g", r.Vt.Value)
	}
	// A large load resistor leaves no room above the knee.
	e := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	c, s = sweepOf(e, simBench{circuit: Load, rl: 5000, vdd: 12}, 2, 4, 0.02)
	check("5 kΩ", c, s, "", CodeSubThresholdOnly)
	// The sweep ends in the exponential foot.
	c, s = sweepOf(e, simBench{circuit: Diode}, 2, 3, 0.02)
	check("foot only", c, s, "", CodeSubThresholdOnly)
	// Two points above the test current.
	c, s = sweepOf(e, simBench{circuit: Diode}, 2.6, 3.2, 0.2)
	check("few", c, s, "", CodeFewPoints)
}

// The burden of the ammeter lowers V_DS; taken into account it moves neither V_T
// nor β.
func TestBurden(t *testing.T) {
	d := simDevice{law: squareLaw, vt: 3, beta: 2}
	b := simBench{circuit: Fixed, vds: 0.1}
	s := b.setup()
	s.TestCurrent, s.Burden = 1e-3, 0.2
	var c Curve
	for v := 2.5; v < 6; v += 0.05 {
		// I = β (v - V_DS/2) V_DS with V_DS = 0.1 V - 0.2 Ω I, by iteration.
		i := 0.0
		for range 200 {
			i = d.current(v, 0.1-0.2*i)/2 + i/2
		}
		c.Vg, c.Id = append(c.Vg, v), append(c.Id, i)
	}
	r := One(c, s)
	near(t, "V_T", r.Vt.Value, 3, 0.5e-3)
	near(t, "β", r.Beta.Value, 2, 0.01)
	s.Burden = 0
	if r := One(c, s); math.Abs(r.Beta.Value-2) < 0.02 {
		t.Errorf("without it β should be off, got %g", r.Beta.Value)
	}
}

func TestTangent(t *testing.T) {
	d := simDevice{law: squareLaw, vt: 3, beta: 2}
	c, s := sweepOf(d, simBench{circuit: Fixed, vds: 0.1}, 2, 6, 0.05)
	r := One(c, s)
	near(t, "V_T", r.VtBy["linear"].Vt.Value, 3, 0.1e-3)
	near(t, "β", r.VtBy["linear"].Beta.Value, 2, 1e-3)
	// Flat slope and handheld noise: a plain greatest slope would err by tens of
	// millivolts; the robust one stays within a few.
	sum, n := 0.0, 0
	for seed := range uint64(60) {
		c := d.sweep(randomSource(seed), simBench{circuit: Fixed, vds: 0.1}, handheld(), 2, 6, 0.05, 0.016)
		r := One(c, s)
		if v, ok := r.VtBy["linear"]; ok {
			sum += math.Pow(v.Vt.Value-3, 2)
			n++
		}
	}
	if rms := math.Sqrt(sum / float64(n)); n < 58 || rms > 4e-3 {
		t.Errorf("%d of 60, %.2f mV rms", n, 1e3*rms)
	}
}

func TestRatio(t *testing.T) {
	// Y = I/√g_m of I = βV_DS w/(1+θw) is √(βV_DS) w whatever θ (algebra).
	for _, theta := range []float64{0, 0.1, 0.3} {
		d := simDevice{law: squareLaw, vt: 3, beta: 2, theta: theta}
		c, s := sweepOf(d, simBench{circuit: Fixed, vds: 0.05}, 2, 6, 0.03)
		r := One(c, s)
		if r.Choose("ratio"); r.Method != "ratio" {
			t.Fatalf("θ %g: method %q, codes %s", theta, r.Method, codesOf(r))
		}
		// The parabolas' own bias against the bent curve is left.
		near(t, "V_T", r.Vt.Value, 3, 2e-3)
		near(t, "β", r.Beta.Value, 2, 0.02)
		near(t, "θ", r.Theta.Value, theta, 0.006)
	}
	// Series resistance goes into θ as β R_S and leaves V_T alone.
	d := simDevice{law: squareLaw, vt: 3, beta: 2, theta: 0.1, rs: 0.1}
	c, s := sweepOf(d, simBench{circuit: Fixed, vds: 0.05}, 2, 6, 0.03)
	r := One(c, s)
	r.Choose("ratio")
	near(t, "V_T with R_S", r.Vt.Value, 3, 5e-3)
	near(t, "θ + β R_S", r.Theta.Value, 0.3, 0.03)
}

// Scaling the current by a constant moves β and not V_T; a gate meter's gain
// error ε moves V_T by ε V_T, and 0.5 % at 3 V is 8.66 mV as a rectangle.
func TestAbsoluteUncertaintyOfTheLine(t *testing.T) {
	d := simDevice{law: squareLaw, vt: 3, beta: 2}
	b := simBench{circuit: Diode}
	c := d.sweep(randomSource(4), b, handheld(), 2, 4, 0.05, 0.01)
	s := b.setup()
	s.TestCurrent = 1e-3
	s.Gate = []Accuracy{{Top: 6, Percent: 0.5, Resolution: 1e-3}}
	s.Current = []Accuracy{{Top: 10, Percent: 2, Resolution: 1e-6}}
	s.Temperature = 25 // known to 1 K: 4 mV of V_T, 1.7/298 of β
	r := One(c, s)
	r.Choose("sqrt")
	if !(r.Vt.UAbsolute > 8.66e-3 && r.Vt.UAbsolute < 11e-3) {
		t.Errorf("absolute u(V_T) %g V", r.Vt.UAbsolute)
	}
	if r.Vt.U > 2e-3 {
		t.Errorf("random u(V_T) %g V holds more than scatter", r.Vt.U)
	}
	// β = 2b²: 2 % of current and twice 0.5 % of gate, as rectangles.
	want := 2 * math.Hypot(math.Hypot(0.02/math.Sqrt(3), 2*0.005/math.Sqrt(3)), 1.7/298.15)
	near(t, "absolute u(β)", r.Beta.UAbsolute, want, 0.2*want)
	if r.Has(CodeNoAccuracy) {
		t.Error("statements are there")
	}
	s.Gate = nil
	if r := One(c, s); !r.Has(CodeNoAccuracy) || !math.IsNaN(r.Vgsth.UAbsolute) || math.IsNaN(r.Vgsth.U) {
		t.Errorf("without the gate's statement: %v, %s", r.Vgsth, codesOf(r))
	}
}

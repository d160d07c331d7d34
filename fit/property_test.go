package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"pgregory.net/rapid"
)

// drawn is a metered curve of a random device (self-made).
func drawn(t *rapid.T) (Curve, Setup) {
	d := simDevice{
		law:   law(rapid.IntRange(0, 2).Draw(t, "law")),
		vt:    rapid.Float64Range(1, 4).Draw(t, "vt"),
		beta:  rapid.Float64Range(0.5, 8).Draw(t, "beta"),
		n:     rapid.Float64Range(1.1, 1.8).Draw(t, "n"),
		theta: rapid.Float64Range(0, 0.2).Draw(t, "theta"),
	}
	b := rapid.SampledFrom([]simBench{
		{circuit: Diode}, {circuit: Load, rl: 10, vdd: 12}, {circuit: Fixed, vds: 10}, {circuit: Fixed, vds: 0.1},
	}).Draw(t, "bench")
	m := rapid.SampledFrom([]simMeters{handheld(), fineMeters(), exact()}).Draw(t, "meters")
	step := rapid.SampledFrom([]float64{0.01, 0.03, 0.05}).Draw(t, "step")
	seed := rapid.Uint64().Draw(t, "seed")
	s := b.setup()
	s.TestCurrent, s.IdleCurrent = 1e-3, 20e-3
	return d.sweep(rand.New(rand.NewPCG(seed, 1)), b, m, d.vt-0.7, d.vt+0.8, step, step/4), s
}

func sameQuantity(t *rapid.T, what string, a, b Quantity, shift, factor, tolerance float64) {
	t.Helper()
	if a.Ok() != b.Ok() {
		t.Fatalf("%s: %v and %v", what, a, b)
	}
	if !a.Ok() {
		return
	}
	u := a.U * math.Abs(factor)
	if want := a.Value*factor + shift; math.Abs(b.Value-want) > tolerance {
		t.Fatalf("%s: %.12g, want %.12g (off by %.3g, u %.3g)", what, b.Value, want, b.Value-want, u)
	}
	if math.Abs(b.U-u) > tolerance+0.1*u {
		t.Fatalf("%s: u %.12g, want %.12g", what, b.U, u)
	}
}

// Shifting the gate voltage shifts every gate voltage found; shifts are whole
// millivolts so that the digits stay those of the meter.
func TestShiftOfTheGate(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c, s := drawn(t)
		if s.Circuit == Diode {
			s.Circuit = NoCircuit // there the drain moves as well
		}
		shift := float64(rapid.IntRange(-500, 500).Draw(t, "mV")) / 1000
		s.OffV = nan()
		s.Depletion = true // no off voltage: the leakage point would be another
		a := One(c, s)
		d := c
		d.Vg = make([]float64, len(c.Vg))
		for k, v := range c.Vg {
			d.Vg[k] = math.Round((v+shift)*1e9) / 1e9
		}
		b := One(d, s)
		// See TestScaleOfTheCurrent.
		for _, q := range [][2]Quantity{{a.Vgsth, b.Vgsth}, {a.VgsIdle, b.VgsIdle}} {
			if q[0].Ok() != q[1].Ok() || q[0].Ok() && math.Abs(q[0].Value+shift-q[1].Value) > 1e-7+q[0].U {
				t.Fatalf("shifted by %g: %v and %v", shift, q[0], q[1])
			}
		}
		// A rounding may tip the choice of a window, on exact curves.
		if a.GmMax.Ok() && math.Abs(a.GmMax.Value-b.GmMax.Value) > 0.01*a.GmMax.Value {
			t.Fatalf("g_m %g and %g", a.GmMax.Value, b.GmMax.Value)
		}
	})
}

// Scaling the current leaves the threshold of the square-root line, and scales β.
func TestScaleOfTheCurrent(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c, s := drawn(t)
		s.Circuit, s.Vds = Fixed, 10
		if c.Id == nil {
			return
		}
		// Powers of ten keep the digits.
		f := rapid.SampledFrom([]float64{0.1, 10, 100}).Draw(t, "factor")
		a := One(c, s)
		d := c
		d.Id = make([]float64, len(c.Id))
		for k, i := range c.Id {
			d.Id[k] = i * f
		}
		s.TestCurrent *= f
		s.IdleCurrent *= f
		b := One(d, s)
		// The last binary digit differs and may tip a choice (which ordinate, which
		// window) that stands on a knife's edge; then within u.
		within := func(what string, a, b Quantity, factor float64) {
			if a.Ok() != b.Ok() || a.Ok() && math.Abs(a.Value*factor-b.Value) > factor*(1e-7*math.Abs(a.Value)+a.U) {
				t.Fatalf("%s: %v and %v", what, a, b)
			}
		}
		within("V_T", a.Vt, b.Vt, 1)
		within("β", a.Beta, b.Beta, f)
		within("V_GS(th)", a.Vgsth, b.Vgsth, 1)
	})
}

// A p-channel part is an n-channel part with all signs turned.
func TestMirror(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c, s := drawn(t)
		a, b := One(c, s), One(mirrored(c), mirroredSetup(s))
		if a.State != b.State || a.Method != b.Method || a.Crossings != b.Crossings || len(a.Warnings) != len(b.Warnings) {
			t.Fatalf("%s %q %v and %s %q %v", a.State, a.Method, a.Warnings, b.State, b.Method, b.Warnings)
		}
		for _, k := range Keys {
			factor := 1.0
			switch k {
			case KeyVgsth, KeyVgsIdle, KeyVt, KeyIdss:
				factor = -1
			}
			sameQuantity(t, string(k), *a.At(k), *b.At(k), 0, factor, 1e-12)
		}
	})
}

func TestOrderDoesNotMatter(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c, s := drawn(t)
		a := One(c, s)
		order := rapid.Permutation(ascending(len(c.Vg))).Draw(t, "order")
		var d Curve
		for _, k := range order {
			d.Vg = append(d.Vg, c.Vg[k])
			if c.Id != nil {
				d.Id = append(d.Id, c.Id[k])
			}
			if c.Vl != nil {
				d.Vl = append(d.Vl, c.Vl[k])
			}
		}
		b := One(d, s)
		if a.State != b.State || len(a.LeftOut) != len(b.LeftOut) {
			t.Fatalf("%s %v and %s %v", a.State, a.LeftOut, b.State, b.LeftOut)
		}
		for _, k := range Keys {
			sameQuantity(t, string(k), *a.At(k), *b.At(k), 0, 1, 1e-12)
		}
	})
}

func ascending(n int) []int {
	x := make([]int, n)
	for k := range x {
		x[k] = k
	}
	return x
}

// A point beyond the meter's range changes nothing but the list of points left
// out.
func TestOverloadPointChangesNothing(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c, s := drawn(t)
		a := One(c, s)
		at := rapid.IntRange(0, len(c.Vg)).Draw(t, "at")
		put := func(x []float64, v float64) []float64 {
			if x == nil {
				return nil
			}
			y := append([]float64(nil), x[:at]...)
			return append(append(y, v), x[at:]...)
		}
		over := rapid.SampledFrom([]float64{math.Inf(1), math.Inf(-1)}).Draw(t, "over")
		d := Curve{Vg: put(c.Vg, rapid.Float64Range(0, 5).Draw(t, "vg")), Id: put(c.Id, over), Vl: put(c.Vl, over)}
		b := One(d, s)
		if a.State != b.State || a.Method != b.Method || a.Crossings != b.Crossings {
			t.Fatalf("%s and %s", a.State, b.State)
		}
		for _, k := range Keys {
			sameQuantity(t, string(k), *a.At(k), *b.At(k), 0, 1, 0)
		}
		if len(b.LeftOut) != len(a.LeftOut)+1 || !b.Has(CodeOverload) {
			t.Fatalf("left out %v", b.LeftOut)
		}
	})
}

// What a warning's code says must be explained, every quantity that has a value
// has an n, and nothing panics, whatever the slices hold.
func checkSane(t interface {
	Helper()
	Fatalf(string, ...any)
}, c Curve, s Setup) {
	t.Helper()
	before := len(c.Vg)
	r := One(c, s)
	for _, q := range Keys {
		if v := r.At(q); v.Ok() && (v.N < 1 || math.IsInf(v.Value, 0) || v.U < 0) {
			t.Fatalf("%s: %+v", q, *v)
		}
	}
	for _, w := range r.Warnings {
		if _, ok := Explain(w.Code); !ok || w.Text == "" {
			t.Fatalf("warning %+v", w)
		}
	}
	if r.State == "" || r.State != Measured && r.Why == "" {
		t.Fatalf("state %q without a reason", r.State)
	}
	last := -1
	for _, l := range r.LeftOut {
		if l.Index < last || l.Index >= before {
			t.Fatalf("left out %v", r.LeftOut)
		}
		last = l.Index
	}
	cl, _, _ := Clean(c, s)
	for k := 1; k < len(cl.Vg); k++ {
		if cl.Index[k] >= before || s.PChannel == (cl.Vg[k] > cl.Vg[k-1]) {
			t.Fatalf("cleaned points out of order: %v", cl.Vg)
		}
	}
	both := Combine([]Result{r, r}, []string{"up", "down"})
	Drift([]Swept{{c, s, "up", r}, {c, s, "down", r}}, &both)
	if both.Has(CodeHeating) || both.Has(CodeGateHistory) {
		t.Fatalf("one curve differs from itself: %v", both.Warnings)
	}
}

func TestNothingPanics(t *testing.T) {
	number := rapid.Custom(func(t *rapid.T) float64 {
		switch rapid.IntRange(0, 9).Draw(t, "kind") {
		case 0:
			return rapid.SampledFrom([]float64{nan(), math.Inf(1), math.Inf(-1), 0, 1e308, -1e308, 5e-324}).Draw(t, "odd")
		case 1:
			return rapid.Float64().Draw(t, "any")
		}
		return math.Round(rapid.Float64Range(-5, 12).Draw(t, "usual")*1000) / 1000
	})
	column := rapid.Custom(func(t *rapid.T) []float64 {
		if rapid.IntRange(0, 3).Draw(t, "none") == 0 {
			return nil
		}
		return rapid.SliceOfN(number, 0, 40).Draw(t, "column")
	})
	rapid.Check(t, func(t *rapid.T) {
		c := Curve{
			Vg: rapid.SliceOfN(number, 0, 40).Draw(t, "vg"), Id: column.Draw(t, "id"), Vl: column.Draw(t, "vl"),
			Vd: column.Draw(t, "vd"), Vdd: column.Draw(t, "vdd"), Gm: column.Draw(t, "gm"),
		}
		s := Setup{
			Circuit:  rapid.SampledFrom([]Circuit{NoCircuit, Load, Diode, Fixed, "other"}).Draw(t, "circuit"),
			PChannel: rapid.Bool().Draw(t, "p"), Depletion: rapid.Bool().Draw(t, "depletion"), Spot: rapid.Bool().Draw(t, "spot"),
			OffV: number.Draw(t, "off"), RL: number.Draw(t, "rl"), RLTol: number.Draw(t, "tol"), Vdd: number.Draw(t, "vdd"),
			Vds: number.Draw(t, "vds"), Burden: number.Draw(t, "burden"), TestCurrent: number.Draw(t, "test"),
			IdleCurrent: number.Draw(t, "idle"), MaxID: number.Draw(t, "max"), VgsthMax: number.Draw(t, "vgsthmax"),
		}
		checkSane(t, c, s)
	})
}

// FuzzOne feeds bytes as steps of a curve: two bytes a point.
func FuzzOne(f *testing.F) {
	f.Add([]byte("0123456789abcdefghijklmnopqrst"), uint8(3), 1e-3, 10.0)
	f.Add([]byte{0, 1, 0, 1, 0, 1, 255, 255, 254, 0, 3, 7, 9, 9}, uint8(0), 0.5, 0.1)
	f.Fuzz(func(t *testing.T, b []byte, flags uint8, test, other float64) {
		if len(b) > 4000 {
			b = b[:4000]
		}
		var c Curve
		for k := 0; k+1 < len(b); k += 2 {
			v, i := float64(b[k])/50, math.Pow(10, float64(b[k+1])/32-7)
			switch b[k+1] {
			case 255:
				i = math.NaN()
			case 254:
				i = math.Inf(1)
			case 253:
				i = -i
			case 0:
				i = 0
			}
			c.Vg, c.Id = append(c.Vg, v), append(c.Id, i)
			if flags&16 != 0 {
				c.Vl = append(c.Vl, i*other)
			}
			if flags&32 != 0 {
				c.Vd = append(c.Vd, 12-i*other)
			}
		}
		s := unknownSetup()
		s.Circuit = []Circuit{NoCircuit, Load, Diode, Fixed}[flags&3]
		s.PChannel, s.Depletion = flags&4 != 0, flags&8 != 0
		s.TestCurrent, s.IdleCurrent, s.RL, s.Vdd, s.Vds = test, 10*test, other, 12, other
		if flags&64 != 0 {
			s.Burden = 0
		}
		checkSane(t, c, s)
	})
}

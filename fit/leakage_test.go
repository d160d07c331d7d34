package fit

import (
	"strings"
	"testing"
)

func TestLeakage(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	b := simBench{circuit: Fixed, vds: 10}
	s := b.setup()
	s.TestCurrent = 10e-3
	for _, c := range []struct {
		leak, from float64
		has, warns bool
	}{
		{0, 0, true, false},
		{50e-6, 0, true, false}, // below 2 % of 10 mA
		{0.5e-3, 0, true, true}, // leaky or gate not at zero
		{0.5e-3, 0.15, true, true},
		{0.5e-3, 0.25, false, false}, // not measured near the off voltage
		{0.5e-3, -0.1, true, true},
	} {
		d.leak = c.leak
		for _, p := range []bool{false, true} {
			x, s := d.sweep(randomSource(1), b, handheld(), c.from, 4, 0.1, 0), s
			sign := 1.0
			if p {
				x, s = mirrored(x), mirroredSetup(s)
				sign = -1
			}
			r := One(x, s)
			if r.Idss.Ok() != c.has || r.Has(CodeDrainLeakage) != c.warns {
				t.Errorf("%+v p %v: Idss %g, codes %s", c, p, r.Idss.Value, codesOf(r))
			}
			if c.has {
				near(t, "Idss", r.Idss.Value, sign*c.leak, 3e-6)
				if !(r.Idss.U > 0 && r.Idss.U < 1e-6) {
					t.Errorf("u(Idss) = %g A", r.Idss.U)
				}
			}
			if r.State != Measured {
				t.Errorf("%+v: %s: %s", c, r.State, r.Why)
			}
		}
	}
	// A part of low threshold that already turns on at 0.2 V does not leak.
	d.leak, d.vt = 0, 0.3
	x := d.sweep(randomSource(1), b, handheld(), 0.15, 1.2, 0.02, 0)
	if r := One(x, s); r.Idss.Ok() || r.Has(CodeDrainLeakage) {
		t.Errorf("conduction taken for leakage: %g A, %s", r.Idss.Value, codesOf(r))
	}
	// A coarse meter's zero is no leakage.
	d.vt = 3
	x = d.sweep(randomSource(1), b, coarseMeters(), 0, 4, 0.1, 0)
	if r := One(x, s); r.Has(CodeDrainLeakage) {
		t.Errorf("zero of a coarse meter: %g A, %s", r.Idss.Value, codesOf(r))
	}
	// A depletion part's off voltage must be given.
	d.vt = -2
	x = d.sweep(randomSource(1), b, handheld(), -4, 0, 0.1, 0)
	s.Depletion, s.OffV = true, nan()
	if r := One(x, s); r.Idss.Ok() {
		t.Error("leakage without an off voltage")
	}
	s.OffV = -4
	d.leak = 0.5e-3
	x = d.sweep(randomSource(1), b, handheld(), -4, 0, 0.1, 0)
	if r := One(x, s); !r.Idss.Ok() || !r.Has(CodeDrainLeakage) {
		t.Errorf("depletion: %g A, %s", r.Idss.Value, codesOf(r))
	}
}

// The sentence tells the very limit that raises it: 2 % of the test current, at
// least 20 µA (self-made).
func TestLeakageSentence(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3.3, beta: 4.8, n: 1.4}
	b := simBench{circuit: Fixed, vds: 10}
	for _, c := range []struct {
		test, limit float64
		said        string
	}{{10e-3, 200e-6, "more than 200 µA)"}, {0.5e-3, 20e-6, "more than 20 µA)"}, {100e-3, 2e-3, "more than 2 mA)"}} {
		for _, share := range []float64{0.9, 1.1} {
			d.leak = share * c.limit
			s := b.setup()
			s.TestCurrent = c.test
			text := warningText(One(d.sweep(randomSource(71), b, exact(), 0, 4.2, 0.02, 0), s), CodeDrainLeakage)
			if over := share > 1; strings.Contains(text, c.said) != over || (text != "") != over {
				t.Errorf("%g A of leakage at a test current of %g A: %q", d.leak, c.test, text)
			}
		}
	}
}

package fit

import (
	"math"
	"strings"
	"testing"
)

// twoMeters is a load curve read by an ammeter and across R_L (self-made).
func twoMeters(m simMeters, seed uint64) (Curve, Setup, simDevice) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4, theta: 0.05}
	b := simBench{circuit: Load, rl: 10, vdd: 12}
	r := randomSource(seed)
	var c Curve
	for v := 2.3; v < 3.8; v += 0.05 {
		x := v + 0.01*(2*r.Float64()-1)
		i := d.at(b, x)
		c.Vg = append(c.Vg, m.gate.read(r, x))
		c.Id = append(c.Id, m.current.read(r, i))
		c.Vl = append(c.Vl, m.load.read(r, i*b.rl))
	}
	s := b.setup()
	s.TestCurrent, s.IdleCurrent = 1e-3, 100e-3
	return c, s, d
}

func codesOf(r Result) string {
	var all []string
	for _, w := range r.Warnings {
		all = append(all, w.Code)
	}
	return strings.Join(all, " ")
}

// Drain supply 12.02 V, drain at 10.02 V, 10 Ω: 0.2 A by arithmetic. A meter
// that says 0.200 A agrees, 0.0002 or 200 has lost its prefix.
func TestLostPrefixOfOneReading(t *testing.T) {
	s := unknownSetup()
	s.Circuit, s.RL, s.Vdd, s.Depletion = Load, 10, 12.02, true
	s.TestCurrent = 0.2
	for _, c := range []struct {
		i    float64
		lost bool
	}{{0.2, false}, {0.0002, true}, {200, true}} {
		r := One(Curve{Vg: []float64{3.3}, Id: []float64{c.i}, Vd: []float64{10.02}, Vdd: []float64{12.02}}, s)
		if r.Has(CodePrefixLost) != c.lost {
			t.Errorf("%g A: codes %s", c.i, codesOf(r))
		}
		near(t, "V_GS at 0.2 A", r.Vgsth.Value, 3.3, 1e-12)
	}
}

func TestLostPrefixOfACurve(t *testing.T) {
	c, s, _ := twoMeters(handheld(), 1)
	want := One(c, s)
	if want.Has(CodePrefixLost) || want.Has(CodeCurrentMismatch) {
		t.Fatalf("clean curve: %s", codesOf(want))
	}
	onlyLoad := One(Curve{Vg: c.Vg, Vl: c.Vl}, s)
	for _, factor := range []float64{1e3, 1e-3, 1e6} {
		d := c
		d.Id = make([]float64, len(c.Id))
		for k, i := range c.Id {
			d.Id[k] = i * factor
		}
		r := One(d, s)
		if !r.Has(CodePrefixLost) {
			t.Errorf("factor %g: codes %s", factor, codesOf(r))
		}
		near(t, "V_GS(th) by the load resistor", r.Vgsth.Value, onlyLoad.Vgsth.Value, 1e-9)
		near(t, "gate bias by the load resistor", r.VgsIdle.Value, onlyLoad.VgsIdle.Value, 1e-9)
	}
	// Only some points, as when an autoranging meter's µA are taken for mA.
	d := c
	d.Id = append([]float64(nil), c.Id...)
	for k := range d.Id {
		if d.Id[k] < 5e-3 {
			d.Id[k] *= 1e3
		}
	}
	r := One(d, s)
	if !r.Has(CodePrefixLost) {
		t.Errorf("some points: codes %s", codesOf(r))
	}
	near(t, "V_GS(th)", r.Vgsth.Value, want.Vgsth.Value, 1.5e-3)
}

func TestBothMetersAreUsed(t *testing.T) {
	// Over many curves the two readings together scatter less about the truth
	// than the load voltage alone; here at a current where one count of the load
	// meter is 1 mA.
	coarse := handheld()
	coarse.load = simMeter{tops: []float64{60}, counts: 6000, share: 1e-3, digit: 0.5}
	var both, alone float64
	for seed := range uint64(40) {
		d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
		b := simBench{circuit: Load, rl: 10, vdd: 12}
		r := randomSource(seed)
		var c Curve
		for v := 2.3; v < 3.8; v += 0.05 {
			x := v + 0.01*(2*r.Float64()-1)
			i := d.at(b, x)
			c.Vg = append(c.Vg, coarse.gate.read(r, x))
			c.Id = append(c.Id, coarse.current.read(r, i))
			c.Vl = append(c.Vl, coarse.load.read(r, i*b.rl))
		}
		s := b.setup()
		s.TestCurrent = 5e-3
		truth := d.gateFor(b, 5e-3)
		both += math.Pow(One(c, s).Vgsth.Value-truth, 2)
		alone += math.Pow(One(Curve{Vg: c.Vg, Vl: c.Vl}, s).Vgsth.Value-truth, 2)
	}
	if !(both < alone/4) {
		t.Errorf("mean squares: both %.3g V², load alone %.3g V²", both/40, alone/40)
	}
}

func TestMismatchOfSomePercent(t *testing.T) {
	c, s, _ := twoMeters(handheld(), 2)
	clean := One(c, s)
	for _, f := range []float64{1.05, 0.93} {
		d := c
		d.Id = make([]float64, len(c.Id))
		for k, i := range c.Id {
			d.Id[k] = i * f
		}
		r := One(d, s)
		if !r.Has(CodeCurrentMismatch) {
			t.Errorf("factor %g: codes %s", f, codesOf(r))
		}
		// The ammeter is kept: the crossing moves by (v/2) of the relative change.
		alone := One(Curve{Vg: c.Vg, Id: d.Id}, s)
		near(t, "gate bias by the ammeter", r.VgsIdle.Value, alone.VgsIdle.Value, 1e-3)
		if math.Abs(r.VgsIdle.Value-clean.VgsIdle.Value) < 3e-3 {
			t.Errorf("factor %g moved the gate bias by %.2g V only", f, r.VgsIdle.Value-clean.VgsIdle.Value)
		}
	}
	// 1 % is within what meters and a resistor of unknown quality may do.
	d := c
	d.Id = make([]float64, len(c.Id))
	for k, i := range c.Id {
		d.Id[k] = i * 1.01
	}
	if r := One(d, s); r.Has(CodeCurrentMismatch) {
		t.Errorf("1 %%: %s", codesOf(r))
	}
}

func TestDisagreementIsSettledByTheNeighbours(t *testing.T) {
	c, s, _ := twoMeters(handheld(), 3)
	want := One(c, s)
	k := 0 // a point near 30 mA
	for k < len(c.Vl)-1 && c.Vl[k] < 0.3 {
		k++
	}
	for name, spoil := range map[string]func(c *Curve){
		"ammeter half":         func(c *Curve) { c.Id[k] *= 0.5 },
		"load voltage half":    func(c *Curve) { c.Vl[k] *= 0.5 },
		"ammeter ten times":    func(c *Curve) { c.Id[k] *= 10 },
		"load voltage a tenth": func(c *Curve) { c.Vl[k] /= 10 },
	} {
		d := Curve{Vg: c.Vg, Id: append([]float64(nil), c.Id...), Vl: append([]float64(nil), c.Vl...)}
		spoil(&d)
		cl, left, warns := Clean(d, s)
		if len(left) != 0 {
			t.Errorf("%s: left out %v", name, left)
		}
		if len(warns) == 0 {
			t.Errorf("%s: nothing was said", name)
		}
		j := indexOf(cl.Index, k)
		near(t, name, cl.I[j], c.Vl[k]/10, 0.01*c.Vl[k]/10)
		r := One(d, s)
		near(t, name+": V_GS(th)", r.Vgsth.Value, want.Vgsth.Value, 1e-3)
	}
	// Both wrong: the point goes.
	d := Curve{Vg: c.Vg, Id: append([]float64(nil), c.Id...), Vl: append([]float64(nil), c.Vl...)}
	d.Id[k] *= 0.2
	d.Vl[k] *= 5
	if _, left, _ := Clean(d, s); len(left) != 1 || left[0].Index != k || left[0].Code != CodeCurrentMismatch {
		t.Errorf("both wrong: left out %v", left)
	}
}

func indexOf(x []int, k int) int {
	for j, v := range x {
		if v == k {
			return j
		}
	}
	return -1
}

func TestDeadAmmeter(t *testing.T) {
	c, s, _ := twoMeters(handheld(), 4)
	want := One(Curve{Vg: c.Vg, Vl: c.Vl}, s)
	d := Curve{Vg: c.Vg, Vl: c.Vl, Id: make([]float64, len(c.Id))}
	r := One(d, s)
	if !r.Has(CodeCurrentMismatch) || r.State != Measured {
		t.Errorf("state %s, codes %s", r.State, codesOf(r))
	}
	near(t, "V_GS(th)", r.Vgsth.Value, want.Vgsth.Value, 1e-9)
}

// Only the drain voltage was read, with a supply that is not quite nominal: the
// first points, where the part is off, tell it.
func TestDrainVoltageAlone(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	b := simBench{circuit: Load, rl: 10, vdd: 12.1}
	var c Curve
	for v := 2.0; v < 3.6; v += 0.01 {
		c.Vg = append(c.Vg, v)
		c.Vd = append(c.Vd, 12.1-10*d.at(b, v))
	}
	s := b.setup()
	s.Vdd, s.TestCurrent = 12, 50e-3
	r := One(c, s)
	near(t, "V_GS at 50 mA", r.Vgsth.Value, d.gateFor(b, 50e-3), 0.2e-3)
	if r.Idss.Ok() {
		t.Errorf("a leakage of %g A was taken from a nominal supply", r.Idss.Value)
	}
}

func TestNoCurrentColumn(t *testing.T) {
	s := unknownSetup()
	s.Circuit, s.TestCurrent = Load, 1e-3
	r := One(Curve{Vg: []float64{1, 2, 3, 4}, Vl: []float64{0, 0, 1, 5}}, s)
	if r.State != Declined || !strings.Contains(r.Why, "no drain current") {
		t.Errorf("state %s: %s", r.State, r.Why)
	}
}

// Self-made: R_L grows by some percent with its power. Said as that, from 3 % on,
// with the ammeter's values and no point lost; a resistor off by some percent, or an
// ammeter whose ranges differ by a percent, is not called warm.
func TestLoadWarmsUp(t *testing.T) {
	said := map[float64]int{}
	const n = 20
	for _, grows := range []float64{0, 0.03, 0.06, 0.12} {
		for seed := range uint64(n) {
			m := []simMeters{handheld(), fineMeters()}[seed%2]
			c, s, d := twoMeters(m, 900+seed)
			top := 0.0
			for _, v := range c.Vl {
				top = math.Max(top, v)
			}
			for k, v := range c.Vl {
				c.Vl[k] = math.Round(v*(1+grows*v*v/(top*top))*1e4) / 1e4
			}
			r := One(c, s)
			text := warningText(r, CodeCurrentMismatch)
			if strings.Contains(text, "warms up") {
				said[grows]++
			} else if text != "" {
				t.Errorf("%g: %s", grows, text)
			}
			if len(r.LeftOut) > 0 {
				t.Errorf("%g: left out %v", grows, r.LeftOut)
			}
			near(t, "gate bias", r.VgsIdle.Value, d.gateFor(simBench{circuit: Load, rl: 10, vdd: 12}, s.IdleCurrent), 3e-3)
		}
	}
	t.Log(said)
	if said[0] > 0 || said[0.03] < n*9/10 || said[0.06] < n || said[0.12] < n {
		t.Errorf("said of %d each: %v", n, said)
	}
	for _, f := range []float64{0.92, 1.07} {
		c, s, _ := twoMeters(handheld(), 950)
		for k := range c.Id {
			c.Id[k] *= f
			if c.Id[k] > 60e-3 {
				c.Id[k] *= 1.01
			}
		}
		if text := warningText(One(c, s), CodeCurrentMismatch); text == "" || strings.Contains(text, "warms up") {
			t.Errorf("factor %g: %q", f, text)
		}
	}
}

package fit

import (
	"math"
	"strings"
	"testing"
)

// deadCase is a part that does nothing a transistor does, on a 6,000-count
// bench (self-made from the physics named).
type deadCase struct {
	name   string
	state  State
	bench  simBench
	from   float64
	to     float64
	at     func(vg float64) (id, vd float64) // terminal current and drain voltage
	adjust func(s *Setup)
	noVdd  bool
}

// bodyDiode solves a diode of 1 nA saturation current and n = 1.1, which has
// 0.7 V at some amperes, in series with r from a supply.
func bodyDiode(supply, r float64) (i, v float64) {
	lo, hi := 0.0, supply
	for range 200 {
		v = (lo + hi) / 2
		if 1e-9*math.Exp(v/(1.1*thermalVoltage)) < (supply-v)/r {
			lo = v
		} else {
			hi = v
		}
	}
	return (supply - v) / r, v
}

func deadCases() []deadCase {
	load := simBench{circuit: Load, rl: 10, vdd: 12}
	small := simBench{circuit: Load, rl: 100, vdd: 5}
	fixed := simBench{circuit: Fixed, vds: 10}
	diode := simBench{circuit: Diode}
	none := func(vd float64) func(float64) (float64, float64) {
		return func(float64) (float64, float64) { return 0, vd }
	}
	short := func(b simBench, r float64) func(float64) (float64, float64) {
		return func(float64) (float64, float64) {
			i := b.vdd / (b.rl + r)
			return i, i * r
		}
	}
	wrong := func(b simBench) func(float64) (float64, float64) {
		// The channel lies beside the diode and opens with the gate.
		return func(vg float64) (float64, float64) {
			i, v := bodyDiode(b.vdd, b.rl)
			if ch := vg - 3; ch > 0 {
				v = math.Min(v, b.vdd/(1+2*ch*b.rl))
				i = (b.vdd - v) / b.rl
			}
			return i, v
		}
	}
	return []deadCase{
		{"open, load", Open, load, 1.5, 6, none(12), nil, false},
		{"open, from 0 V", Open, load, 0, 4.5, none(12), nil, false},
		{"open, fixed", Open, fixed, 1.5, 4.5, none(10), nil, false},
		{"open, diode", Open, diode, 1.5, 4.5, none(0), nil, false},
		{"open, known V_GS(th) of 2.5 V at most", Open, fixed, 0, 3, none(10), func(s *Setup) { s.VgsthMax = 2.5 }, false},
		{"open or above: gate to 3 V only", Above, fixed, 0, 3, none(10), nil, false},
		{"shorted, load", Shorted, load, 1.5, 6, short(load, 0.05), nil, false},
		{"shorted, load, from 0 V", Shorted, load, 0, 4.5, short(load, 0.05), nil, false},
		{"shorted, load, supply not known", Shorted, load, 0, 4.5, short(load, 0.02), nil, true},
		{"shorted, small supply", Shorted, small, 0, 4.5, short(small, 0.1), nil, false},
		{"shorted, fixed, supply in its limit", Shorted, fixed, 0, 4.5, func(float64) (float64, float64) { return 2, 0.1 }, nil, false},
		{"shorted through 100 Ω", Shorted, fixed, 0, 6, func(float64) (float64, float64) { return 0.1, 10 }, nil, false},
		{"shorted, diode", Shorted, diode, 0.1, 1, func(vg float64) (float64, float64) { return vg / 2, vg }, nil, false},
		{"wrong way round, load", WrongWayRound, load, 0, 5, wrong(load), nil, false},
		{"wrong way round, load, from 1.5 V", WrongWayRound, load, 1.5, 4.5, wrong(load), nil, false},
		{"wrong way round, small supply", WrongWayRound, small, 0, 5, wrong(small), nil, false},
		{"supply reversed, fixed", WrongWayRound, fixed, 0, 4.5, func(float64) (float64, float64) { return -1.5, -0.8 }, nil, false},
	}
}

func (d deadCase) curve(seed uint64, column string) (Curve, Setup) {
	r := randomSource(seed)
	m := handheld()
	var c Curve
	for vg := d.from; vg <= d.to+1e-9; vg += 0.1 {
		i, vd := d.at(vg)
		c.Vg = append(c.Vg, m.gate.read(r, vg))
		if strings.Contains(column, "i") {
			c.Id = append(c.Id, m.current.read(r, i))
		}
		if strings.Contains(column, "l") {
			c.Vl = append(c.Vl, m.load.read(r, i*d.bench.rl))
		}
		if strings.Contains(column, "d") {
			c.Vd = append(c.Vd, m.load.read(r, vd))
		}
	}
	s := d.bench.setup()
	s.TestCurrent = 1e-3
	if d.noVdd {
		s.Vdd = nan()
	}
	if d.adjust != nil {
		d.adjust(&s)
	}
	return c, s
}

func TestDeadParts(t *testing.T) {
	for k, d := range deadCases() {
		columns := []string{"i", "id"}
		if d.bench.circuit == Diode {
			columns = []string{"i"}
		}
		if d.bench.circuit == Load {
			columns = []string{"l", "i", "il", "ld"}
		}
		for _, col := range columns {
			for _, p := range []bool{false, true} {
				c, s := d.curve(uint64(k), col)
				if p {
					c, s = mirrored(c), mirroredSetup(s)
				}
				if d.bench.circuit == Fixed && d.state == WrongWayRound && p {
					continue // magnitudes and a reversed current look alike there
				}
				r := One(c, s)
				if r.State != d.state || r.Why == "" {
					t.Errorf("%s, columns %s, p-channel %v: %s: %s (%s)", d.name, col, p, r.State, r.Why, codesOf(r))
				}
				if code := stateCode(r.State); code != "" && !r.Has(code) {
					t.Errorf("%s: no warning %s", d.name, code)
				}
				if r.Has(CodeCurrentMismatch) {
					t.Errorf("%s, columns %s: %s", d.name, col, warningText(r, CodeCurrentMismatch))
				}
				if r.Vgsth.Ok() || r.Vt.Ok() || r.GmMax.Ok() {
					t.Errorf("%s: a dead part has numbers", d.name)
				}
			}
		}
	}
}

// A sound part whose sweep begins above its threshold is neither shorted nor
// wrong way round, only not to be read off.
func TestBelowTheSweepIsNoShort(t *testing.T) {
	for _, b := range []simBench{{circuit: Load, rl: 10, vdd: 12}, {circuit: Load, rl: 1000, vdd: 12}, {circuit: Fixed, vds: 10}} {
		for _, vt := range []float64{0.6, 1, 2, 3} {
			for _, above := range []float64{0.3, 0.6, 1, 1.5} {
				d := simDevice{law: smoothLaw, vt: vt, beta: 3, n: 1.4}
				c := d.sweep(randomSource(1), b, handheld(), vt+above, vt+above+2, 0.05, 0)
				s := b.setup()
				s.TestCurrent = 1e-3
				r := One(c, s)
				if r.State != Declined || !r.Has(CodeBelowSweep) {
					t.Errorf("%s %g, V_T %g, from %g V on: %s: %s", b.circuit, b.rl, vt, vt+above, r.State, r.Why)
				}
			}
		}
	}
}

func TestDepletionPartConductsAtZero(t *testing.T) {
	for _, b := range []simBench{{circuit: Load, rl: 10, vdd: 12}, {circuit: Fixed, vds: 10}, {circuit: Fixed, vds: 0.1}} {
		d := simDevice{law: smoothLaw, vt: -2, beta: 2, n: 1.4}
		for _, off := range []float64{nan(), -4} {
			for _, p := range []bool{false, true} {
				c := d.sweep(randomSource(1), b, handheld(), -3, 0, 0.05, 0.01)
				s := b.setup()
				s.Depletion, s.OffV, s.TestCurrent, s.IdleCurrent = true, off, 1e-3, 20e-3
				sign := 1.0
				if p {
					c, s = mirrored(c), mirroredSetup(s)
					sign = -1
				}
				r := One(c, s)
				if r.State != Measured {
					t.Fatalf("%s p %v: %s: %s", b.circuit, p, r.State, r.Why)
				}
				near(t, "V_GS at 1 mA", r.Vgsth.Value, sign*d.gateFor(b, 1e-3), 2e-3)
				near(t, "V_GS at 20 mA", r.VgsIdle.Value, sign*d.gateFor(b, 20e-3), 2e-3)
				if r.Has(CodeDrainLeakage) {
					t.Error("conduction at 0 V taken for leakage")
				}
				if r.Vt.Ok() {
					near(t, "V_T by "+r.Method, r.Vt.Value, sign*d.vt, 30e-3)
				} else {
					t.Errorf("%s: no extrapolated threshold: %s", b.circuit, codesOf(r))
				}
			}
		}
	}
	// A depletion part without current at 0 V is open.
	var c Curve
	for v := -4.0; v <= 0; v += 0.1 {
		c.Vg, c.Id = append(c.Vg, v), append(c.Id, 0)
	}
	s := unknownSetup()
	s.Circuit, s.Vds, s.Depletion, s.TestCurrent = Fixed, 10, true, 1e-3
	if r := One(c, s); r.State != Open {
		t.Errorf("%s: %s", r.State, r.Why)
	}
}

func TestAboveRange(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 4.6, beta: 2, n: 1.4}
	b := simBench{circuit: Diode}
	c := d.sweep(randomSource(1), b, handheld(), 1.5, 4.5, 0.05, 0)
	s := b.setup()
	s.TestCurrent = 1e-3
	r := One(c, s)
	if r.State != Above || !r.Has(CodeAboveRange) || r.Vgsth.Ok() {
		t.Errorf("%s: %s, %s", r.State, r.Why, codesOf(r))
	}
	// Reaches the test current but not the idle current: above, with the value it
	// has.
	d.vt = 3
	c = d.sweep(randomSource(1), b, handheld(), 1.5, 3.4, 0.05, 0)
	s.IdleCurrent = 5
	r = One(c, s)
	if r.State != Above || !r.Vgsth.Ok() || r.VgsIdle.Ok() || !strings.Contains(r.Why, "5 A") {
		t.Errorf("%s: %s", r.State, r.Why)
	}
}

func TestNoSupply(t *testing.T) {
	d := deadCase{bench: simBench{circuit: Load, rl: 10, vdd: 12}, from: 0, to: 6, at: func(float64) (float64, float64) { return 0, 0 }}
	c, s := d.curve(1, "ld")
	if r := One(c, s); r.State != Declined || !strings.Contains(r.Why, "no voltage") {
		t.Errorf("%s: %s", r.State, r.Why)
	}
}

func TestOverloadEverywhereIsAShort(t *testing.T) {
	var c Curve
	for v := 0.0; v < 4; v += 0.2 {
		c.Vg, c.Id = append(c.Vg, v), append(c.Id, math.Inf(1))
	}
	s := unknownSetup()
	s.Circuit, s.Vds, s.TestCurrent = Fixed, 10, 1e-3
	if r := One(c, s); r.State != Shorted {
		t.Errorf("%s: %s", r.State, r.Why)
	}
}

func TestFallingCurve(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	b := simBench{circuit: Fixed, vds: 10}
	c := d.sweep(randomSource(1), b, handheld(), 2, 4, 0.05, 0)
	for k := range c.Vg {
		c.Vg[k] = -c.Vg[k] // a p-channel part declared as n-channel
	}
	s := b.setup()
	s.TestCurrent = 1e-3
	if r := One(c, s); r.State != Declined || !r.Has(CodeFallingCurve) {
		t.Errorf("%s: %s %s", r.State, r.Why, codesOf(r))
	}
}

// The ammeter's leads exchanged, or magnitudes of a p-channel part written
// down.
func TestSigns(t *testing.T) {
	d := simDevice{law: smoothLaw, vt: 3, beta: 2, n: 1.4}
	b := simBench{circuit: Fixed, vds: 10}
	c := d.sweep(randomSource(1), b, handheld(), 2, 4, 0.05, 0)
	s := b.setup()
	s.TestCurrent = 1e-3
	want := One(c, s)
	turned := mirrored(Curve{Id: c.Id})
	r := One(Curve{Vg: c.Vg, Id: turned.Id}, s)
	if !r.Has(CodeSignTurned) || r.State != Measured {
		t.Errorf("leads exchanged: %s %s", r.State, codesOf(r))
	}
	near(t, "V_GS(th)", r.Vgsth.Value, want.Vgsth.Value, 1e-12)
	p := s
	p.PChannel = true
	r = One(c, p) // magnitudes
	if r.State != Measured || r.Has(CodeSignTurned) {
		t.Errorf("magnitudes: %s %s %s", r.State, r.Why, codesOf(r))
	}
	near(t, "V_GS(th) of the p-channel part", r.Vgsth.Value, -want.Vgsth.Value, 1e-12)
	near(t, "g_m is positive", r.GmMax.Value, want.GmMax.Value, 1e-12)
}

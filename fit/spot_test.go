package fit

import (
	"math"
	"strings"
	"testing"
)

// Ten parts of a bag at 10 mA and one of them at three currents, as published by
// a radio amateur: logger.hatenablog.com, March 2021 (ten IRF530 bought on a web
// marketplace; 0.5 mA with the gate pot at its minimum).
var publishedAt10mA = []float64{2.78, 2.67, 2.94, 2.82, 2.47, 2.82, 2.83, 2.91, 2.81, 2.82}

func TestSpots(t *testing.T) {
	s := unknownSetup()
	s.Spot, s.TestCurrent = true, 10e-3
	for _, v := range publishedAt10mA {
		r := One(Curve{Vg: []float64{v}, Id: []float64{10e-3}}, s)
		near(t, "V_GS at 10 mA", r.Vgsth.Value, v, 0)
		// A display step of 10 mV is a rectangle of 2.89 mV.
		near(t, "its u", r.Vgsth.U, 2.887e-3, 1e-5)
		if r.State != Measured || !r.Has(CodeSpotOnly) || r.Vgsth.N != 1 || r.Method != "current" {
			t.Errorf("%s %s n %d %q", r.State, codesOf(r), r.Vgsth.N, r.Method)
		}
		if r.Vt.Ok() || r.Idss.Ok() || r.GmMax.Ok() || !math.IsNaN(r.Vgsth.UAbsolute) {
			t.Error("a spot tells more than it can")
		}
	}
	// At another current it declines, unless that is the spot's own.
	s.TestCurrent = 1e-3
	if r := One(Curve{Vg: []float64{2.78}, Id: []float64{10e-3}}, s); r.State != Declined || r.Vgsth.Ok() {
		t.Errorf("%s: %s", r.State, r.Why)
	}
	for _, c := range []struct {
		i  float64
		ok bool
	}{{1.0099e-3, true}, {1.099e-3, true}, {1.11e-3, false}} {
		r := One(Curve{Vg: []float64{2.78}, Id: []float64{c.i}}, s)
		if r.Vgsth.Ok() != c.ok {
			t.Errorf("%g A for 1 mA: %v", c.i, r.Vgsth)
		}
	}
	// Stated resolution of the gate and of the current.
	s.TestCurrent = 10e-3
	s.Gate = []Accuracy{{Resolution: 1e-3, Top: 6, Percent: 0.5, Counts: 2}}
	s.Current = []Accuracy{{Top: 60e-3, Percent: 1, Counts: 3, Resolution: 1e-4}}
	s.Temperature = 25 // known to 1 K
	r := One(Curve{Vg: []float64{3}, Id: []float64{10.15e-3}}, s)
	near(t, "u with 1 mV steps", r.Vgsth.U, 0.2887e-3, 1e-6)
	if !(r.Vgsth.UAbsolute > 9.815e-3 && r.Vgsth.UAbsolute < 11e-3) {
		t.Errorf("absolute u %g V, want a little above 9.815 mV", r.Vgsth.UAbsolute)
	}
}

func TestThreePointsGiveNoExtrapolation(t *testing.T) {
	c := Curve{Vg: []float64{0, 2.4, 2.8, 3.1}, Id: []float64{0.5e-3, 1e-3, 10e-3, 100e-3}}
	for _, circuit := range []Circuit{Diode, Fixed, Load} {
		for from := 0; from < 2; from++ {
			s := unknownSetup()
			s.Circuit, s.Vds, s.Vdd, s.RL, s.TestCurrent, s.IdleCurrent = circuit, 10, 12, 10, 10e-3, 100e-3
			r := One(Curve{Vg: c.Vg[from:], Id: c.Id[from:]}, s)
			near(t, "V_GS at 10 mA", r.Vgsth.Value, 2.8, 1e-9)
			near(t, "V_GS at 100 mA", r.VgsIdle.Value, 3.1, 1e-9)
			if r.Vt.Ok() || len(r.VtBy) > 0 {
				t.Errorf("%s: extrapolated threshold %g from slopes of √I that disagree four to one", circuit, r.Vt.Value)
			}
			said := false
			for _, w := range r.Warnings {
				// (√10 mA - √1 mA)/0.4 V = 0.171, (√100 mA - √10 mA)/0.3 V = 0.721.
				said = said || strings.Contains(w.Text, "0.171") && strings.Contains(w.Text, "0.721")
			}
			if !said {
				t.Errorf("%s from %d: the disagreeing slopes are not told: %v", circuit, from, r.Warnings)
			}
			if leak := from == 0; r.Has(CodeDrainLeakage) != leak || r.Idss.Ok() != leak {
				t.Errorf("%s from %d: leakage %v, codes %s", circuit, from, r.Idss.Value, codesOf(r))
			}
			s.TestCurrent = 1e-3
			near(t, "V_GS at 1 mA", One(Curve{Vg: c.Vg[from:], Id: c.Id[from:]}, s).Vgsth.Value, 2.4, 1e-9)
		}
	}
}

// Push-pull pairs are listed with g_m at the idle current (self-made numbers in
// the way of such lists).
func TestSpotWithTransconductance(t *testing.T) {
	s := unknownSetup()
	s.Spot, s.TestCurrent, s.IdleCurrent = true, nan(), 250e-3
	c := Curve{Vg: []float64{3.380}, Id: []float64{250e-3}, Gm: []float64{1.406}}
	r := One(c, s)
	near(t, "gate bias", r.VgsIdle.Value, 3.380, 0)
	near(t, "g_m", r.GmIdle.Value, 1.406, 0)
	if r.State != Measured {
		t.Errorf("%s: %s", r.State, r.Why)
	}
	// Carried from 250 to 200 mA along the square law: with β = g²/2I the
	// overdrive is 2I/g, and V changes by 2I/g (√0.8 - 1).
	s.IdleCurrent = 200e-3
	r = One(c, s)
	near(t, "carried", r.VgsIdle.Value, 3.380+2*0.25/1.406*(math.Sqrt(0.8)-1), 1e-9)
	if !strings.Contains(warningText(r, CodeSpotOnly), "carried") {
		t.Errorf("not said: %v", r.Warnings)
	}
	s.IdleCurrent = 100e-3 // more than a factor of two
	if r = One(c, s); r.VgsIdle.Ok() {
		t.Error("carried too far")
	}
}

func warningText(r Result, code string) string {
	var all []string
	for _, w := range r.Warnings {
		if w.Code == code {
			all = append(all, w.Text)
		}
	}
	return strings.Join(all, " ")
}

func TestTwoSpots(t *testing.T) {
	s := unknownSetup()
	s.Spot, s.Circuit, s.TestCurrent, s.IdleCurrent = true, Diode, 5e-3, 500e-3
	// A square law of β = 1 A/V² above 4 V: 4.1 V at 5 mA, 5 V at 500 mA.
	c := Curve{Vg: []float64{4.1, 5}, Id: []float64{5e-3, 500e-3}}
	r := One(c, s)
	near(t, "at 5 mA", r.Vgsth.Value, 4.1, 0)
	near(t, "at 500 mA", r.VgsIdle.Value, 5, 0)
	// β = 1 A/V², 1 V of overdrive: 1 S. The chord would be 0.55 S.
	near(t, "square-law slope", r.GmIdle.Value, 1, 1e-12)
	if !(r.GmIdle.U > 0.02 && r.GmIdle.U < 0.4) {
		t.Errorf("u of the slope %g S", r.GmIdle.U)
	}
	if !strings.Contains(warningText(r, CodeSpotOnly), "from the two spots") {
		t.Errorf("not said: %v", r.Warnings)
	}
	// In between, within the stated uncertainty of 4.447 V at 100 mA.
	s.TestCurrent = 100e-3
	r = One(c, s)
	if d := math.Abs(r.Vgsth.Value - 4.44721); d > 2*r.Vgsth.U || r.Vgsth.U > 0.3 {
		t.Errorf("at 100 mA: %g ± %g V", r.Vgsth.Value, r.Vgsth.U)
	}
}

// 12 V through 36 Ω: 250 mA at V_GS = 3 V, 236 mA at 3.5 V, 6.7 % over 0.5 V on
// the way from 3.2 to 3.7 V or so (arithmetic).
func TestJigTellsEachPartsCurrent(t *testing.T) {
	s := unknownSetup()
	s.Spot, s.Circuit, s.RL, s.Vdd, s.IdleCurrent = true, Diode, 36, 12, 250e-3
	for _, nominal := range []bool{false, true} {
		c := Curve{Vg: []float64{3}}
		if nominal {
			c.Id = []float64{250e-3}
		}
		r := One(c, s)
		near(t, "at 250 mA", r.VgsIdle.Value, 3, 0)
		own := r.VgsIdle.U
		c.Vg = []float64{3.5}
		r = One(c, s)
		near(t, "at 236 mA", r.VgsIdle.Value, 3.5, 0)
		if !(r.VgsIdle.U > own+5e-3) || !strings.Contains(warningText(r, CodeSpotOnly), "236.1 mA") {
			t.Errorf("u %g V, %v", r.VgsIdle.U, r.Warnings)
		}
	}
}

func TestDeadSpots(t *testing.T) {
	s := unknownSetup()
	s.Spot, s.Circuit, s.TestCurrent, s.Vdd = true, Diode, 10e-3, 12
	for _, c := range []struct {
		v, i float64
		want State
	}{{0.01, 10e-3, Shorted}, {11.98, 0, Open}, {2.8, 10e-3, Measured}, {0.65, 10e-3, Measured}} {
		r := One(Curve{Vg: []float64{c.v}, Id: []float64{c.i}}, s)
		if r.State != c.want {
			t.Errorf("%g V: %s: %s", c.v, r.State, r.Why)
		}
		if diode := c.v == 0.65; r.Has(CodeWrongWayRound) != diode {
			t.Errorf("%g V: codes %s", c.v, codesOf(r))
		}
	}
}

// Self-made devices read at two currents: the transconductance at the upper, the
// lower and a middle one lies within its uncertainty.
func TestTwoSpotGainIsHonest(t *testing.T) {
	r := randomSource(51)
	var upper, middle, lower honesty
	const devices = 243
	sum := 0.0
	for k := range devices {
		d := simDevice{
			law: smoothLaw, vt: 2 + 2*r.Float64(), beta: 1 + 6*r.Float64(), n: 1.1 + 0.7*r.Float64(),
			theta: 0.15 * r.Float64(), rs: 0.05 * r.Float64(),
		}
		b := simBench{circuit: Fixed, vds: 10}
		hi := []float64{1, 0.25, 0.01}[k%3]
		lo := hi / []float64{2, 5, 10}[k/3%3]
		gate := func(i float64) float64 { return math.Round(d.gateFor(b, i)*1e3) / 1e3 }
		c := Curve{Vg: []float64{gate(lo), gate(hi)}, Id: []float64{lo, hi}}
		s := b.setup()
		s.Spot, s.TestCurrent = true, lo
		for i, h := range map[float64]*honesty{hi: &upper, lo: &lower, math.Sqrt(lo * hi): &middle} {
			s.IdleCurrent = i
			q := One(c, s).GmIdle
			want := trueGm(d, b, d.gateFor(b, i))
			h.add(q.Value/want-1, q.U/want)
			if i == hi {
				sum += math.Abs(q.Value/want - 1)
			}
		}
	}
	for _, x := range []struct {
		what string
		h    *honesty
	}{{"at the upper current", &upper}, {"in the middle", &middle}, {"at the lower current", &lower}} {
		t.Logf("%s: %s", x.what, x.h)
		if w := x.h.within(2); w < 0.9 {
			t.Errorf("%s: %.1f %% within 2u", x.what, 100*w)
		}
	}
	if mean := sum / devices; mean > 0.12 {
		t.Errorf("mean error at the upper current %.1f %%", 100*mean)
	}
}

// A list may give the threshold at one current and g_m at another: the point of
// the g_m has no gate voltage, and is no missing reading.
func TestTransconductanceAtACurrentOfItsOwn(t *testing.T) {
	s := unknownSetup()
	s.Spot, s.TestCurrent, s.IdleCurrent = true, 0.01, 1
	r := One(Curve{Vg: []float64{3.009, math.NaN()}, Id: []float64{0.01, 1}, Gm: []float64{math.NaN(), 4.55}}, s)
	if r.State != Measured || r.Vgsth.Value != 3.009 || r.GmIdle.Value != 4.55 || r.VgsIdle.Ok() {
		t.Errorf("%+v", r)
	}
	if r.Has(CodeMissingReading) || r.Has(CodeFewPoints) || len(r.LeftOut) > 0 {
		t.Errorf("warnings %v, left out %v", r.Warnings, r.LeftOut)
	}
}

package fit

import (
	"fmt"
	"math"
	"testing"

	"pgregory.net/rapid"
)

// idling is a device with that gate voltage at its idle current.
func idling(v float64) Result {
	r := NewResult()
	r.VgsIdle = Quantity{Value: v}
	return r
}

// A gain factor of 3.8 A/V² and 145 mV less overdrive: 90 mA instead of 250 mA
// (arithmetic beside the scenario of two lots).
func TestDrainCurrent(t *testing.T) {
	m := idling(3.145)
	i := m.CurrentAt(3, 0.25, 3.8, false)
	near(t, "by the gain factor given", i.I, 0.0900, 0.0001)
	if i.By != "the gain factor given" {
		t.Error(i.By)
	}
	m.Beta = Quantity{Value: 3.8}
	near(t, "by its own", m.CurrentAt(3, 0.25, 99, false).I, 0.0900, 0.0001)
	// The device as a p-channel part.
	p := idling(-3.145)
	p.Beta = Quantity{Value: -3.8}
	near(t, "p-channel", p.CurrentAt(-3, 0.25, math.NaN(), true).I, 0.0900, 0.0001)
	// With mobility degradation: v = [θI + √(θ²I²+2βI)]/β = 0.4033 at θ = 0.5, less 145 mV.
	m.Theta = Quantity{Value: 0.5}
	v := (0.5*0.25+math.Sqrt(0.25*0.25*0.25+2*3.8*0.25))/3.8 - 0.145
	near(t, "with θ", m.CurrentAt(3, 0.25, math.NaN(), false).I, 3.8/2*v*v/(1+0.5*v), 1e-12)
	// Below the threshold nothing flows.
	near(t, "off", m.CurrentAt(2, 0.25, math.NaN(), false).I, 0, 0)

	// Its own curve, of the same square law, to a thousandth between the points.
	c := idling(3.145)
	vt := 3.145 - math.Sqrt(2*0.25/3.8)
	for _, at := range LevelCurrents[3:13] {
		c.Levels = append(c.Levels, Level{I: at, Vg: vt + math.Sqrt(2*at/3.8)})
	}
	for _, gate := range []float64{2.85, 2.9, 3, 3.1, 3.145, 3.3} {
		i := c.CurrentAt(gate, 0.25, math.NaN(), false)
		want := 1.9 * (gate - vt) * (gate - vt)
		near(t, fmt.Sprint("along the curve at ", gate), i.I/want, 1, 1e-3)
		if i.By != "their own curves" {
			t.Error(i.By)
		}
	}
	if i := c.CurrentAt(2.5, 0.25, math.NaN(), false); i.Beyond != -1 || math.Abs(i.I-1e-3) > 1e-12 {
		t.Errorf("%+v", i)
	}
	if i := c.CurrentAt(9, 0.25, math.NaN(), false); i.Beyond != 1 || math.Abs(i.I-1) > 1e-12 {
		t.Errorf("%+v", i)
	}
	// By its transconductance: β = 1.25²/(2·0.25) = 3.125, so that v is 0.4 V, less 20 and 145 mV.
	g := idling(3.145)
	g.GmIdle = Quantity{Value: 1.25}
	near(t, "by gm", g.CurrentAt(3.125, 0.25, math.NaN(), false).I, 3.125/2*0.38*0.38, 1e-12)
	near(t, "by gm, far away", g.CurrentAt(3, 0.25, math.NaN(), false).I, 3.125/2*0.255*0.255, 1e-12)
	// Nothing tells.
	n := idling(3.145)
	if i := n.CurrentAt(3, 0.25, math.NaN(), false); !math.IsNaN(i.I) || i.By != "" {
		t.Errorf("%+v", i)
	}
}

// TestDrainRises: whatever the curve, its continuation rises and is never below 0.
func TestDrainRises(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		r := NewResult()
		sign := 1.0
		pch := rapid.Bool().Draw(t, "p")
		if pch {
			sign = -1
		}
		v := rapid.Float64Range(-3, 3).Draw(t, "from")
		for _, i := range LevelCurrents[rapid.IntRange(0, 4).Draw(t, "first"):rapid.IntRange(6, 12).Draw(t, "last")] {
			v += rapid.Float64Range(-0.01, 0.3).Draw(t, "step")
			r.Levels = append(r.Levels, Level{I: i, Vg: sign * v})
		}
		d := r.Drain(math.NaN(), math.NaN(), pch)
		if d.By == "" {
			return
		}
		a := rapid.Float64Range(-4, 8).Draw(t, "a")
		b := a + rapid.Float64Range(0, 2).Draw(t, "more")
		ia, ib := d.Continued(sign*a), d.Continued(sign*b)
		if !(ia >= 0) || ib < ia*(1-1e-12) {
			t.Fatalf("%g A at %g V, %g A at %g V", ia, a, ib, b)
		}
	})
}

// A sweep that ends between two of the currents looked at tells up to its highest
// point; beyond that the gain goes on from there. Square law of 3.8 A/V², by hand.
func TestDrainToTheEnd(t *testing.T) {
	const vt, beta = 2.8, 3.8
	gate := func(i float64) float64 { return vt + math.Sqrt(2*i/beta) }
	c := idling(gate(0.25))
	for _, at := range []float64{0.05, 0.1, 0.2} {
		c.Levels = append(c.Levels, Level{I: at, Vg: gate(at)})
	}
	if i := c.CurrentAt(gate(0.29), 0.25, math.NaN(), false); i.Beyond != 1 || math.Abs(i.I-0.25) > 1e-9 {
		t.Errorf("without its highest point: %+v", i)
	}
	c.Top = Level{I: 0.3, Vg: gate(0.3)}
	if i := c.CurrentAt(gate(0.29), 0.25, math.NaN(), false); i.Beyond != 0 || math.Abs(i.I-0.29) > 1e-4 {
		t.Errorf("before its highest point: %+v", i)
	}
	if i := c.CurrentBeyond(gate(0.4), 0.25, math.NaN(), false); i.Beyond != 1 || math.Abs(i.I-0.3) > 1e-9 || i.By != ByCurve {
		t.Errorf("no gain: %+v", i)
	}
	if i := c.CurrentBeyond(gate(0.4), 0.25, beta, false); i.Beyond != 1 || math.Abs(i.I-0.4) > 1e-9 || i.By != ByGainGiven {
		t.Errorf("by the gain given: %+v", i)
	}
	c.Beta = Quantity{Value: beta}
	if i := c.CurrentBeyond(gate(0.4), 0.25, 99, false); i.Beyond != 1 || math.Abs(i.I-0.4) > 1e-9 || i.By != ByGain {
		t.Errorf("by its own gain: %+v", i)
	}
	// As a p-channel part the same.
	p := NewResult()
	p.VgsIdle, p.Beta, p.Top = Quantity{Value: -c.VgsIdle.Value}, c.Beta, Level{I: 0.3, Vg: -gate(0.3)}
	for _, l := range c.Levels {
		p.Levels = append(p.Levels, Level{I: l.I, Vg: -l.Vg})
	}
	if i := p.CurrentBeyond(-gate(0.4), 0.25, math.NaN(), true); i.Beyond != 1 || math.Abs(i.I-0.4) > 1e-9 {
		t.Errorf("p-channel: %+v", i)
	}
	// Close to the last level the highest point would add only its noise.
	c.Top = Level{I: 0.26, Vg: gate(0.25) + 1e-6}
	if i := c.CurrentAt(gate(0.255), 0.25, math.NaN(), false); i.Beyond != 1 || math.Abs(i.I-0.25) > 1e-9 {
		t.Errorf("close to the last level: %+v", i)
	}
}

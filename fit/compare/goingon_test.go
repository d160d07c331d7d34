package compare

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"gatesill/fit"
)

// A gain factor of 3.8 A/V² and 145 mV less overdrive: 90 mA instead of 250 mA
// (arithmetic beside the scenario of two lots).
func TestIdleAtOldVoltage(t *testing.T) {
	m := member("D", 3.145, nan, nan, nan)
	i := idleAt(&m, 3, 0.25, 3.8, false)
	near(t, "by the gain factor given", i.i, 0.0900, 0.0001)
	if i.how != "the gain factor given" {
		t.Error(i.how)
	}
	m.Result.Beta = fit.Quantity{Value: 3.8}
	near(t, "by its own", idleAt(&m, 3, 0.25, 99, false).i, 0.0900, 0.0001)
	// The device as a p-channel part.
	p := member("P", -3.145, nan, nan, nan)
	p.Result.Beta = fit.Quantity{Value: -3.8}
	near(t, "p-channel", idleAt(&p, -3, 0.25, nan, true).i, 0.0900, 0.0001)
	// With mobility degradation: v = [θI + √(θ²I²+2βI)]/β = 0.4033 at θ = 0.5, less 145 mV.
	m.Result.Theta = fit.Quantity{Value: 0.5}
	v := (0.5*0.25+math.Sqrt(0.25*0.25*0.25+2*3.8*0.25))/3.8 - 0.145
	near(t, "with θ", idleAt(&m, 3, 0.25, nan, false).i, 3.8/2*v*v/(1+0.5*v), 1e-12)
	// Below the threshold nothing flows.
	near(t, "off", idleAt(&m, 2, 0.25, nan, false).i, 0, 0)

	// Its own curve, of the same square law, to a thousandth between the points.
	c := member("C", 3.145, nan, nan, nan)
	vt := 3.145 - math.Sqrt(2*0.25/3.8)
	for _, at := range fit.LevelCurrents[3:13] {
		c.Result.Levels = append(c.Result.Levels, fit.Level{I: at, Vg: vt + math.Sqrt(2*at/3.8)})
	}
	for _, gate := range []float64{2.85, 2.9, 3, 3.1, 3.145, 3.3} {
		i := idleAt(&c, gate, 0.25, nan, false)
		want := 1.9 * (gate - vt) * (gate - vt)
		near(t, fmt.Sprint("along the curve at ", gate), i.i/want, 1, 1e-3)
		if i.how != "their own curves" {
			t.Error(i.how)
		}
	}
	if i := idleAt(&c, 2.5, 0.25, nan, false); i.beyond != -1 || math.Abs(i.i-1e-3) > 1e-12 {
		t.Errorf("%+v", i)
	}
	if i := idleAt(&c, 9, 0.25, nan, false); i.beyond != 1 || math.Abs(i.i-1) > 1e-12 {
		t.Errorf("%+v", i)
	}
	// Transconductance for small changes only.
	g := member("G", 3.145, nan, nan, nan)
	g.Result.GmIdle = fit.Quantity{Value: 1.25}
	near(t, "by gm", idleAt(&g, 3.125, 0.25, nan, false).i, 0.225, 1e-12)
	if i := idleAt(&g, 3, 0.25, nan, false); !math.IsNaN(i.i) {
		t.Errorf("by gm over 145 mV: %+v", i)
	}
}

func option(t *testing.T, c *Comparison, name string, contains ...string) Option {
	t.Helper()
	for _, o := range c.Options {
		if o.Name == name {
			for _, s := range contains {
				if !strings.Contains(o.Text, s) {
					t.Errorf("%s: %q is not in %q", name, s, o.Text)
				}
			}
			return o
		}
	}
	t.Fatalf("no option %q", name)
	return Option{}
}

// The numbers of the scenario: its 95/95 band is 3.006 to 3.369 V by Howe's
// approximation, a millivolt more by the exact factor; trimmers, bins.
func TestGoingOn(t *testing.T) {
	a, b := scenarioLots(t)
	opt := plain()
	opt.Margin, opt.MarginSet, opt.Beta = 0.05, Before, 3.8
	opt.LimitLow, opt.LimitHigh, opt.SendBack = 2, 4, ByLimits
	c := compareLots(t, a, b, opt)
	option(t, &c, TakeAsItIs, "at 3.042 V", "instead of 250 mA", "30 devices by the gain factor given")
	option(t, &c, ReAdjust, "from 3.064 V to 3.365 V", "from 3.006 V to 3.370 V for 95 %")
	option(t, &c, ChangeResistor, "move by +139 mV, from 3.042 V to 3.182 V")
	option(t, &c, SortFirst, "7 bins of 50 mV", "2 of 30 lie within 50 mV of the centre of lot 2431")
	if o := option(t, &c, SendBack, "is kept", "2.000 V to 4.000 V"); o.Rule != ByLimits {
		t.Error(o.Rule)
	}
	opt.LimitHigh = 3.3
	c = compareLots(t, a, b, opt)
	option(t, &c, SendBack, "is broken", "2 devices of 30")
	opt.SendBack = ByMargin
	c = compareLots(t, a, b, opt)
	option(t, &c, SendBack, "is broken", "outside the margin")
	opt.SendBack = ""
	c = compareLots(t, a, b, opt)
	option(t, &c, SendBack, "no stored rule asks for it")
	opt.Beta = nan
	c = compareLots(t, a, b, opt)
	option(t, &c, TakeAsItIs, "--beta")
	a.Idle = nan
	c = compareLots(t, a, b, opt)
	option(t, &c, TakeAsItIs, "no idle current is given")
}

// On another bench, the gate voltage of the reference is carried over by the control
// parts: the same devices draw the same current.
func TestGoingOnAcrossBenches(t *testing.T) {
	a, b := scenarioLots(t)
	sit(&a, Sitting{"s", "m"}, 1e-3, 1e-2)
	sit(&b, Sitting{"s", "m"}, 1e-3, 1e-2)
	opt := plain()
	opt.Beta = 3.8
	want := compareLots(t, a, b, opt)
	sit(&b, Sitting{"t", "n"}, 1e-3, 1e-2)
	for i := range b.Members {
		b.Members[i].Result.VgsIdle.Value += 0.030
	}
	withControls(&a, &b, 3.1, 0.030, 0.030)
	got := compareLots(t, a, b, opt)
	near(t, "shift", got.Shift, want.Shift, 1e-9)
	for i := range want.Options {
		if n := want.Options[i].Name; n != SortFirst && got.Options[i].Text != want.Options[i].Text {
			t.Errorf("%s: %q, want %q", n, got.Options[i].Text, want.Options[i].Text)
		}
	}
}

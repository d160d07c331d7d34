package compare

import (
	"strings"
	"testing"
)

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
	for i := range b.Members {
		b.Members[i].Result.Vgsth = b.Members[i].Result.VgsIdle
	}
	opt := plain()
	opt.Margin, opt.MarginSet, opt.Beta = 0.05, Before, 3.8
	opt.LimitLow, opt.LimitHigh, opt.SendBack = 2, 4, ByLimits
	c := compareLots(t, a, b, opt)
	option(t, &c, TakeAsItIs, "at 3.042 V", "instead of 250 mA", "30 devices by the gain factor given")
	option(t, &c, ReAdjust, "from 3.064 V to 3.365 V", "95 % of a lot that lies like a normal distribution need 3.006 V to 3.370 V")
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
		text := strings.Replace(got.Options[i].Text, " (read as 3.212 V, less the +30 mV that are not the parts')", "", 1)
		if n := want.Options[i].Name; n != SortFirst && text != want.Options[i].Text {
			t.Errorf("%s: %q, want %q", n, text, want.Options[i].Text)
		}
		if n := want.Options[i].Name; (text == got.Options[i].Text) == (n == ReAdjust || n == ChangeResistor) {
			t.Errorf("%s: where it was read: %q", n, got.Options[i].Text)
		}
	}
}

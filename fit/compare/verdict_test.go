package compare

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"gatesill/fit"
)

func verdict(t *testing.T, a, b Lot, margin float64, want Verdict) Comparison {
	t.Helper()
	opt := plain()
	if opt.Margin = margin; margin > 0 {
		opt.MarginSet = Before
	}
	c := compareLots(t, a, b, opt)
	if c.Verdict != want {
		t.Errorf("%q, want %q: %s", c.Verdict, want, c.Sentence)
	}
	return c
}

// The interval alone decides.
func TestVerdicts(t *testing.T) {
	a := lotOf("A", spreadOut(20, 3, 0.02)...)
	at := func(shift float64) Lot { return lotOf("B", spreadOut(20, 3+shift, 0.02)...) }
	half := func(c Comparison) float64 { return (c.MarginHigh - c.MarginLow) / 2 }
	c := verdict(t, a, at(0), 0.05, InsideMargin)
	w := half(c)
	verdict(t, a, at(0.05-w-1e-6), 0.05, InsideMargin)
	verdict(t, a, at(0.05-w+1e-6), 0.05, TooFew)
	verdict(t, a, at(0.05+w-1e-6), 0.05, TooFew)
	verdict(t, a, at(0.05+w+1e-6), 0.05, OutsideMargin)
	verdict(t, a, at(-0.05-w-1e-6), 0.05, OutsideMargin)
	c = verdict(t, a, at(0), nan, NoDifference)
	near(t, "not excluded", c.NotExcluded, c.High, 1e-9)
	verdict(t, a, at(c.High-1e-6), nan, NoDifference)
	verdict(t, a, at(c.High+1e-6), nan, Differs)
	verdict(t, a, at(-c.High-1e-6), nan, Differs)
}

// Too few on a side, and devices that never reach the current.
func TestTooFewAndAbove(t *testing.T) {
	inf := math.Inf(1)
	c := verdict(t, lotOf("A", 3, 3.1), lotOf("B", 3, 3.1, 3.2, 3.3), nan, TooFew)
	if c.More != fewest || !math.IsNaN(c.Shift) {
		t.Errorf("more %d, shift %v", c.More, c.Shift)
	}
	// Two of ten are trimmed; the mean is that of the others.
	v := spreadOut(10, 3, 0.02)
	finite := verdict(t, lotOf("A", v...), lotOf("B", v...), nan, NoDifference)
	v2 := append([]float64(nil), v...)
	v2[8], v2[9] = inf, inf
	c = verdict(t, lotOf("A", v...), lotOf("B", v2...), nan, NoDifference)
	near(t, "shift", c.Shift, finite.Shift, 1e-12)
	if c.Counts[1] != (Counts{N: 10, WithValue: 8, Above: 2}) {
		t.Errorf("%+v", c.Counts[1])
	}
	for _, s := range c.Secondary {
		if ranks := strings.HasPrefix(s.Test, "ranks") || strings.HasPrefix(s.Test, "distr"); ranks == math.IsNaN(s.P) {
			t.Errorf("%s: p %v", s.Test, s.P)
		}
	}
	// Three are not.
	v2[7] = inf
	c = verdict(t, lotOf("A", v...), lotOf("B", v2...), nan, TooFew)
	if !math.IsNaN(c.Shift) || math.IsNaN(c.Secondary[1].P) || c.More != 0 || !strings.Contains(c.Sentence, "3 of 10 devices of lot B never reach the current") {
		t.Errorf("%s: %v, %v", c.Sentence, c.Shift, c.Secondary)
	}
	// A whole lot that does not: the ranks still tell.
	c = verdict(t, lotOf("A", v...), lotOf("B", inf, inf, inf, inf, inf, inf), nan, TooFew)
	if !(c.Secondary[1].P < 0.001) {
		t.Errorf("ranks: p %v", c.Secondary[1].P)
	}
}

// Devices with a fault, excluded and control ones are counted and take no part;
// flagged ones do.
func TestWhoTakesPart(t *testing.T) {
	a, b := lotOf("A", spreadOut(10, 3, 0.02)...), lotOf("B", spreadOut(10, 3, 0.02)...)
	before := compareLots(t, a, b, plain())
	b.Members[9].Flagged = true
	for _, aside := range []string{"open", "excluded"} {
		m := member("X"+aside, 9, 1e-5, 1e-4, 1e-3, bench)
		m.Aside = aside
		b.Members = append(b.Members, m)
	}
	bad := member("short", 9, 1e-5, 1e-4, 1e-3, bench)
	bad.Result.State = fit.Shorted
	none := member("none", 9, 1e-5, 1e-4, 1e-3, bench)
	none.Result.VgsIdle = fit.None()
	declined := member("declined", 9, 1e-5, 1e-4, 1e-3, bench)
	declined.Result.State = fit.Declined
	control := member("K", 9, 1e-5, 1e-4, 1e-3, bench)
	control.Control = true
	b.Members = append(b.Members, bad, none, declined, control)
	c := compareLots(t, a, b, plain())
	if want := (Counts{N: 12, WithValue: 10, Flagged: 1, Aside: 3, Without: 2, Control: 1}); c.Counts[1] != want {
		t.Errorf("%+v, want %+v", c.Counts[1], want)
	}
	if c.Shift != before.Shift || c.Low != before.Low || c.P != before.P {
		t.Errorf("they moved the shift: %v, %v", c.Shift, before.Shift)
	}
}

// Why no number of devices is given, and when one is.
func TestMore(t *testing.T) {
	a := lotOf("A", spreadOut(6, 3, 0.08)...)
	b := lotOf("B", spreadOut(6, 3.01, 0.08)...)
	c := verdict(t, a, b, 0.05, TooFew)
	if c.More < 30 || c.More > 80 || !strings.Contains(c.Sentence, "would show, with a chance of 80 %, that the shift is inside the margin, if there is none") {
		t.Errorf("%d: %s", c.More, c.Sentence)
	}
	// The shift seen does not enter the number.
	if d := verdict(t, a, lotOf("B", spreadOut(6, 3.03, 0.08)...), 0.05, TooFew); d.More != c.More {
		t.Errorf("%d with another shift, %d", d.More, c.More)
	}
	// Near the margin and not 0.
	c = verdict(t, lotOf("A", spreadOut(60, 3, 0.08)...), lotOf("B", spreadOut(60, 3.05, 0.08)...), 0.05, TooFew)
	if c.More != 0 || !strings.Contains(c.MoreText, "near the margin") {
		t.Errorf("%d: %s", c.More, c.MoreText)
	}
	// The bench alone.
	sit(&a, Sitting{"s", "m"}, 0.001, 0.04)
	sit(&b, Sitting{"t", "n"}, 0.001, 0.04)
	c = verdict(t, a, b, 0.05, TooFew)
	if c.More != 0 || !strings.Contains(c.MoreText, "no number of devices would tell") || !strings.Contains(c.MoreText, "control parts") {
		t.Errorf("%d: %s", c.More, c.MoreText)
	}
}

// Readings that step by more than the lots are wide still have a scatter.
func TestCoarseDisplay(t *testing.T) {
	coarse := func(l Lot) Lot {
		for i := range l.Members {
			l.Members[i].Result.VgsIdle.U = nan
		}
		return l
	}
	c := verdict(t, coarse(lotOf("A", 3, 3, 3, 3, 3, 3)), coarse(lotOf("B", 3.01, 3.01, 3.01, 3.01, 3.01, 3.01)), nan, Differs)
	if !(c.High-c.Low > 0.004) {
		t.Errorf("%v to %v", c.Low, c.High)
	}
	c = verdict(t, coarse(lotOf("A", 3, 3, 3, 3)), coarse(lotOf("B", 3, 3, 3, 3)), nan, TooFew)
	if !strings.Contains(c.Sentence, "all readings are the same") {
		t.Error(c.Sentence)
	}
}

// Exchanged lots, other orders, other zeros and p-channel parts give the same answer.
func TestSymmetries(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		draw := func(name string) []float64 {
			n := rapid.IntRange(3, 12).Draw(t, name)
			v := make([]float64, n)
			for i := range v {
				v[i] = 3 + 0.001*float64(rapid.IntRange(-200, 200).Draw(t, name))
				if rapid.IntRange(0, 15).Draw(t, name) == 0 {
					v[i] = math.Inf(1)
				}
			}
			return v
		}
		x, y := draw("x"), draw("y")
		opt := plain()
		if rapid.Bool().Draw(t, "margin") {
			opt.Margin, opt.MarginSet = 0.05, After
		}
		run := func(x, y []float64, p bool) Comparison {
			a, b := lotOf("A", x...), lotOf("B", y...)
			a.PChannel, b.PChannel = p, p
			c, err := Lots(a, b, opt)
			if err != nil {
				t.Fatal(err)
			}
			return c
		}
		c := run(x, y, false)
		same := func(what string, a, b float64) {
			if !(math.Abs(a-b) <= 1e-9*(1+math.Abs(b))) && !(math.IsNaN(a) && math.IsNaN(b)) {
				t.Errorf("%s: %v, %v", what, a, b)
			}
		}
		mirrored := func(what string, d Comparison) {
			if d.Verdict != c.Verdict || d.More != c.More {
				t.Errorf("%s: %s, %s", what, d.Verdict, c.Verdict)
			}
			same(what+" shift", d.Shift, -c.Shift)
			same(what+" low", d.Low, -c.High)
			same(what+" margin high", d.MarginHigh, -c.MarginLow)
			same(what+" p", d.P, c.P)
			for i := range c.Secondary {
				same(what+" "+c.Secondary[i].Test, d.Secondary[i].PAdjusted, c.Secondary[i].PAdjusted)
			}
		}
		mirrored("exchanged", run(y, x, false))
		neg := func(x []float64) []float64 {
			out := make([]float64, len(x))
			for i := range x {
				out[len(x)-1-i] = -x[i]
			}
			return out
		}
		p := run(neg(x), neg(y), true)
		mirrored("p-channel", p)
		if c.Verdict == InsideMargin && (math.Abs(c.MarginLow) > 0.05 || math.Abs(c.MarginHigh) > 0.05) {
			t.Error("inside with an interval that is not")
		}
		if c.Low > c.Shift || c.High < c.Shift || c.P < 0 || c.P > 1 {
			t.Errorf("%v to %v, shift %v, p %v", c.Low, c.High, c.Shift, c.P)
		}
	})
}

// A small lot against a large one: the interval is a little too narrow, which is
// said.
func TestUnlikeSizes(t *testing.T) {
	check := func(n, m int, want bool) {
		t.Helper()
		c := verdict(t, lotOf("A", spreadOut(n, 3, 0.02)...), lotOf("B", spreadOut(m, 3, 0.02)...), nan, NoDifference)
		if said := strings.Contains(fmt.Sprint(c.Warnings), "devices against"); said != want {
			t.Errorf("%d against %d: warned %t", n, m, !want)
		}
	}
	check(6, 12, true)
	check(12, 6, true)
	check(6, 11, false)
	check(7, 40, false)
}

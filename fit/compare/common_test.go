package compare

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// spreadOut is n values about mean, sd apart like normal ones.
func spreadOut(n int, mean, sd float64) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = mean + sd*stats.NormalQuantile((float64(i)+0.5)/float64(n))
	}
	return v
}

// commonLots are two lots of 10, the second 20 mV higher, with uncertainties of 3 mV
// by session and 8 mV by the gain of the meters.
func commonLots(ref, cand Sitting) (a, b Lot) {
	a, b = lotOf("A", spreadOut(10, 3, 0.02)...), lotOf("B", spreadOut(10, 3.02, 0.02)...)
	sit(&a, ref, 0.003, 0.008)
	sit(&b, cand, 0.003, 0.008)
	return a, b
}

func has(c *Comparison, code string) bool {
	for _, w := range c.Warnings {
		if w.Code == code {
			return true
		}
	}
	return false
}

// The variance of the shift by what the lots do not share, by hand.
func TestCommon(t *testing.T) {
	check := func(ref, cand Sitting, want float64, basis string) Comparison {
		t.Helper()
		a, b := commonLots(ref, cand)
		c := compareLots(t, a, b, plain())
		near(t, basis, c.Common.U, want, 1e-9)
		if c.Common.Basis != basis {
			t.Errorf("basis %q, want %q", c.Common.Basis, basis)
		}
		if has(&c, fit.CodeCommonUnknown) {
			t.Error("warned although all is known")
		}
		// Welch and Satterthwaite with the scatter of the lots.
		y := stats.YuenT(valuesOf(&b, fit.KeyVgsIdle).plain, valuesOf(&a, fit.KeyVgsIdle).plain, 0.2, 0.95)
		se := math.Hypot(y.SE, want)
		df := y.DF * math.Pow(se/y.SE, 4)
		near(t, "df", c.DF, df, 1e-6*df)
		near(t, "half width", (c.High-c.Low)/2, stats.UpperT(0.025, df)*se, 1e-9)
		return c
	}
	check(Sitting{"s", "m"}, Sitting{"s", "m"}, 0, "same session")
	check(Sitting{"s", "m"}, Sitting{"t", "m"}, math.Sqrt2*0.003, "sessions of one bench")
	check(Sitting{"s", "m"}, Sitting{"t", "n"}, math.Sqrt2*math.Hypot(0.003, 0.008), "different meters")
	check(Sitting{"s", "m"}, Sitting{"s", "n"}, math.Sqrt2*0.008, "one session, different meters")
	check(Sitting{}, Sitting{}, math.Sqrt2*math.Hypot(0.003, 0.008), "different meters")
	check(Sitting{"s", "m"}, Sitting{"", "m"}, math.Sqrt2*0.003, "sessions of one bench")

	// The candidate half in the session of the reference: (1/2)² + (1/2)² of tau².
	a, b := commonLots(Sitting{"s", "m"}, Sitting{"t", "m"})
	for i := range 5 {
		b.Members[2*i].Sittings[0].Session = "s"
	}
	near(t, "half shared", compareLots(t, a, b, plain()).Common.U, 0.003*math.Sqrt(0.5), 1e-9)

	// Every device measured in both sessions: the same share of each in both lots.
	for _, l := range []*Lot{&a, &b} {
		for i := range l.Members {
			l.Members[i].Sittings = []Sitting{{"s", "m"}, {"t", "m"}}
		}
	}
	near(t, "all shared", compareLots(t, a, b, plain()).Common.U, 0, 1e-12)
}

// Without accuracy statements the interval leaves the bench out and says so, but only
// where the lots do not share it.
func TestCommonNotKnown(t *testing.T) {
	check := func(ref, cand Sitting, tau, gamma float64, u float64, warned bool) {
		t.Helper()
		a, b := commonLots(ref, cand)
		sit(&a, ref, tau, gamma)
		sit(&b, cand, tau, gamma)
		c := compareLots(t, a, b, plain())
		near(t, "u", c.Common.U, u, 1e-9)
		if has(&c, fit.CodeCommonUnknown) != warned {
			t.Errorf("%v, %v: warned %t", ref, cand, !warned)
		}
		if math.IsNaN(c.Low) || c.Verdict == TooFew {
			t.Errorf("no interval: %s", c.Sentence)
		}
	}
	s, o := Sitting{"s", "m"}, Sitting{"t", "n"}
	check(s, s, nan, nan, 0, false)
	check(s, o, nan, nan, nan, true)
	check(s, o, 0.003, nan, 0.003*math.Sqrt2, true) // what is known is in it
	check(s, Sitting{"t", "m"}, 0.003, nan, 0.003*math.Sqrt2, false)

	// In one session what it does to both lots is nothing to their difference, also
	// where more is known of one of them.
	a, b := commonLots(s, s)
	sit(&a, s, 0.001, 0.002)
	near(t, "unlike statements, one session", compareLots(t, a, b, plain()).Common.U, 0, 0)
	// Another bench, each with its own.
	sit(&b, o, 0.003, 0.004)
	near(t, "two benches", compareLots(t, a, b, plain()).Common.U, math.Sqrt(1+4+9+16)*1e-3, 1e-9)
}

// withControls adds control parts, the reference's at v, the candidate's off higher.
func withControls(a, b *Lot, v float64, off ...float64) {
	for i, d := range off {
		for _, at := range []struct {
			l *Lot
			v float64
		}{{a, v}, {b, v + d}} {
			m := member(fmt.Sprintf("K%d", i), at.v, 2e-4, 1e-3, 1e-3, at.l.Members[0].Sittings...)
			m.Control = true
			at.l.Members = append(at.l.Members, m)
		}
	}
}

// Control parts replace what session and meters may do by what they did.
func TestControlParts(t *testing.T) {
	a, b := commonLots(Sitting{"s", "m"}, Sitting{"t", "n"})
	before := compareLots(t, a, b, plain())
	withControls(&a, &b, 3.1, 0.012, 0.014, 0.016)
	opt := plain()
	opt.Tempco = -0.004
	a.Temp, b.Temp = 21, 25
	c := compareLots(t, a, b, opt)
	near(t, "offset", c.Common.Offset, 0.014, 1e-12)
	near(t, "its u", c.Common.OffsetU, 0.002/math.Sqrt(3), 1e-9)
	near(t, "u", c.Common.U, c.Common.OffsetU, 0)
	near(t, "shift", c.Shift, before.Shift-0.014, 1e-12)
	near(t, "raw", c.Raw, before.Shift, 1e-12)
	near(t, "temperature, which the control parts hold", c.ForTemp, 0, 0)
	if c.Common.Controls != 3 || c.Common.Basis != "control parts" || c.Counts[0].Control != 3 || c.Counts[0].N != 10 {
		t.Errorf("%+v, %+v", c.Common, c.Counts)
	}
	if !strings.Contains(c.Sentence, "+14 mV of control parts") {
		t.Error(c.Sentence)
	}

	// One: its uncertainty is √2 of the larger of reading and inserting it anew.
	a, b = commonLots(Sitting{"s", "m"}, Sitting{"t", "n"})
	withControls(&a, &b, 3.1, 0.014)
	c = compareLots(t, a, b, plain())
	near(t, "one, by its reading", c.Common.U, 2e-4*math.Sqrt2, 1e-12)
	if !has(&c, fit.CodeNTooSmall) {
		t.Error("one control part without a word about it")
	}
	opt = plain()
	opt.Repeatability = 0.0015
	near(t, "one, by repeatability", compareLots(t, a, b, opt).Common.U, 0.0015*math.Sqrt2, 1e-12)

	// Measured in another session they say nothing of the lots.
	for i := range b.Members {
		if b.Members[i].Control {
			b.Members[i].Sittings = []Sitting{{"u", "n"}}
		}
	}
	if c = compareLots(t, a, b, plain()); c.Common.Controls != 0 {
		t.Error("control part of another session used")
	}
	// In one session with the same meters there is nothing to take off.
	a, b = commonLots(bench, bench)
	withControls(&a, &b, 3.1, 0.014)
	if c = compareLots(t, a, b, plain()); c.Common.Controls != 0 || !math.IsNaN(c.Raw) {
		t.Errorf("%+v", c.Common)
	}
}

// Temperature is taken off with both numbers said.
func TestTemperature(t *testing.T) {
	a, b := commonLots(bench, bench)
	a.Temp, b.Temp = 21.0, 25.2
	opt := plain()
	opt.Tempco = -0.004
	c := compareLots(t, a, b, opt)
	near(t, "taken off", c.ForTemp, -0.0168, 1e-12)
	near(t, "shift", c.Shift, c.Raw+0.0168, 1e-12)
	near(t, "middle", (c.Low+c.High)/2, c.Shift, 1e-12)
	if !strings.Contains(c.Sentence, "-17 mV were taken off for the temperature (25.2 °C against 21.0 °C at -4.0 mV/K; uncertain by 3.4 mV: 20 % of the slope, typical), before that the shift was +20 mV") {
		t.Error(c.Sentence)
	}
	b.Temp = nan
	if c = compareLots(t, a, b, opt); !has(&c, fit.CodeUnlikeConditions) || !math.IsNaN(c.Raw) {
		t.Error("unknown temperature passed in silence")
	}
}

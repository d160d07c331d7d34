package compare

import (
	"math"
	"strings"
	"testing"

	"gatesill/fit"
)

// Numbers of one interval have one number of decimals, that which a quarter of it
// allows; the values are rounded by hand.
func TestWordsOfShifts(t *testing.T) {
	for _, c := range []struct{ got, want string }{
		{rangeWords(0.0026, 0.1241), "+3 to +124 mV"},
		{rangeWords(0.0121, 0.0129), "+12.10 to +12.90 mV"},
		{rangeWords(-0.0304, 0.0304), "-30 to +30 mV"},
		{rangeWords(-0.0104, 0.0104), "-10.4 to +10.4 mV"},
		{rangeWords(0, 0), "0 to 0 mV"},
		{shiftWithin(0.0004, -0.05, 0.05), "0 mV"},
		{shiftWithin(0.0004, -0.001, 0.001), "+0.40 mV"},
		{millivolts(50e-6), "50 µV"},
		{millivolts(1e-3), "1.0 mV"},
		{millivolts(0), "0.0 mV"},
		{millivolts(0.05), "50 mV"},
	} {
		if c.got != c.want {
			t.Errorf("%q, want %q", c.got, c.want)
		}
	}
}

// Where the primary test and what stands beside it differ, one sentence says which
// counts; a margin, and tests that ask for no shift, have no part in it.
func TestWhichCounts(t *testing.T) {
	c := Comparison{Verdict: NoDifference, Level: 0.95, Curves: &Band{Differs: true}, Secondary: []Secondary{
		{Test: "means: Welch's t", PAdjusted: 0.03}, {Test: "ranks: Mann-Whitney", PAdjusted: 0.06}, {Test: "distributions", PAdjusted: 0.01}}}
	say := func(verdict Verdict) string {
		c.Verdict = verdict
		return (&comparing{out: c}).besideWords()
	}
	got := say(NoDifference)
	for _, want := range []string{"test of means (adjusted p 0.03)", "band of the curves", "primary test alone, which was chosen beforehand"} {
		if !strings.Contains(got, want) {
			t.Errorf("%q is not in %q", want, got)
		}
	}
	if strings.Contains(got, "ranks") || strings.Contains(got, "distributions") {
		t.Error(got)
	}
	for _, v := range []Verdict{Differs, InsideMargin, OutsideMargin, TooFew} {
		if got := say(v); got != "" {
			t.Errorf("%s: %q", v, got)
		}
	}
	c.ForTemp = 0.03 // not taken off the band
	if got := say(NoDifference); strings.Contains(got, "band") {
		t.Error(got)
	}
	c.ForTemp = 0
	c.Secondary[0].PAdjusted = 0.2
	if got := say(Differs); !strings.Contains(got, "no test of means or ranks sees a difference") {
		t.Error(got)
	}
	c.Secondary, c.Curves = nil, nil
	for _, v := range []Verdict{Differs, NoDifference} {
		if got := say(v); got != "" {
			t.Errorf("%s: %q", v, got)
		}
	}
}

// A shift that is seen outside the margin: more devices would rather show that, and
// the headline names no number that assumes the contrary.
func TestMoreWhenSeenOutside(t *testing.T) {
	a, b := lotOf("A", spreadOut(8, 3, 0.08)...), lotOf("B", spreadOut(8, 3.053, 0.08)...)
	c := verdict(t, a, b, 0.05, TooFew)
	if !strings.Contains(c.Sentence, "more devices would rather show that") || strings.Contains(c.Sentence, "devices a lot") {
		t.Error(c.Sentence)
	}
	if c.More < 9 || !strings.Contains(c.MoreText, "were the lots truly alike") {
		t.Error(c.More, c.MoreText)
	}
	c = verdict(t, a, lotOf("B", spreadOut(8, 3.02, 0.08)...), 0.05, TooFew)
	if c.More < 9 || strings.Contains(c.MoreText, "rather") {
		t.Error(c.More, c.MoreText)
	}
}

// A lot of two populations: no option speaks of a centre or a normal distribution
// without saying so.
func TestOptionsOfTwoPopulations(t *testing.T) {
	a, b := scenarioLots(t)
	opt := plain()
	opt.Beta = 3.8
	b.Populations = 2
	c := compareLots(t, a, b, opt)
	for _, name := range []string{TakeAsItIs, ReAdjust, ChangeResistor} {
		if o := option(t, &c, name, "is two populations"); strings.Contains(o.Text, "normal distribution") || strings.Contains(o.Text, "ratio of the spreads") {
			t.Error(o.Text)
		}
	}
}

// Lots that do not shift stay where they are.
func TestOptionsWithoutShift(t *testing.T) {
	a, b := scenarioLots(t)
	for i := range b.Members {
		b.Members[i].Result = a.Members[i].Result
	}
	c := compareLots(t, a, b, plain())
	option(t, &c, ReAdjust, "the centre stays at 3.042 V; trimmers")
	option(t, &c, ChangeResistor, "the gate voltage of the divider stays at 3.042 V")
}

// The rule by limits is judged by V_GS(th), whatever is compared; what a
// specification says of it goes before.
func TestRuleByLimitsIsOfVgsth(t *testing.T) {
	a, b := scenarioLots(t)
	opt := plain()
	opt.LimitLow, opt.LimitHigh, opt.SendBack = 2, 2.8, ByLimits
	for i := range b.Members {
		b.Members[i].Result.Vgsth = fit.Quantity{Value: 2.5}
	}
	c := compareLots(t, a, b, opt)
	option(t, &c, SendBack, "is kept")
	b.Members[3].Result.Vgsth.Value = 2.9
	c = compareLots(t, a, b, opt)
	option(t, &c, SendBack, "is broken", "1 device of 30", b.Members[3].Name)
	opt.Judged = "it is kept by the guard band"
	c = compareLots(t, a, b, opt)
	option(t, &c, SendBack, opt.Judged)
}

// The same devices read twice are not two lots.
func TestTheSameDevicesAreNoLots(t *testing.T) {
	a, b := remeasured(t)
	opt := plain()
	opt.Pairing = ByLikeness
	for i := range b.Members { // all by 20 mV more, on the same bench
		b.Members[i].Result.VgsIdle.Value = a.Members[i].Result.VgsIdle.Value + 0.020 + 1e-4*float64(i%3)
		b.Members[i].Sittings = a.Members[i].Sittings
	}
	c := compareLots(t, a, b, opt)
	if !strings.HasPrefix(c.Sentence, "the same devices read 20 mV more in lot") || !strings.Contains(c.Sentence, "the bench, the temperature or the session rather than the parts") {
		t.Error(c.Sentence)
	}
	if !SameDevices(a, b, fit.KeyVgsIdle) || SameDevices(a, lotOf("C", 3, 3.1, 3.2, 3.3, 3.05), fit.KeyVgsIdle) {
		t.Error("same devices or not")
	}
	// No serial in both: nothing is known in common, and the next step is no current.
	opt.Pairing = BySerial
	for i := range b.Members {
		b.Members[i].Name = "other " + b.Members[i].Name
	}
	c = compareLots(t, a, b, opt)
	if c.Verdict != TooFew || c.Common.Basis != "" || !math.IsNaN(c.Common.U) || has(&c, fit.CodeNotAsked) || !has(&c, fit.CodeNTooSmall) {
		t.Errorf("%+v", c)
	}
}

// Lots without a time are in no control limit.
func TestTrendOfUntimed(t *testing.T) {
	var lots []Lot
	for i, m := range []float64{3, 3.01, 2.99, 3.005} {
		l := lotOf(string(rune('A'+i)), spreadOut(20, m, 0.03)...)
		l.At = "2026-01-0" + string(rune('1'+i))
		lots = append(lots, l)
	}
	without := trendOf(t, lots)
	far := lotOf("U", spreadOut(20, 5, 0.03)...)
	with := trendOf(t, append(lots, far))
	if with.Low != without.Low || with.High != without.High || with.Lots[4].Outside || !with.Untimed {
		t.Errorf("%v to %v, without %v to %v", with.Low, with.High, without.Low, without.High)
	}
	if text := strings.Join(with.Text, "\n"); !strings.Contains(text, "lots without a time have no place in the run") || !strings.Contains(text, "rest on 4 lots") {
		t.Error(text)
	}
}

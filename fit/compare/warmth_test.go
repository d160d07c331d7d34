package compare

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"gatesill/fit/stats"
)

// The uncertainty of the slope counts by how far the lots are apart, that of the
// temperatures where nothing else holds it, and all of it enters the interval.
func TestTempU(t *testing.T) {
	opt := plain()
	opt.Tempco = -0.004
	near(t, "slope", opt.tempU(4.2, false), 4.2*0.2*0.004, 1e-15)
	near(t, "colder", opt.tempU(-4.2, false), 4.2*0.2*0.004, 1e-15)
	near(t, "nothing apart", opt.tempU(0, false), 0, 0)
	near(t, "temperatures", opt.tempU(0, true), math.Sqrt2*0.004, 1e-15)
	near(t, "both", opt.tempU(4.2, true), math.Hypot(4.2*0.0008, math.Sqrt2*0.004), 1e-15)
	opt.TempcoU = 0.001
	near(t, "as given", opt.tempU(4.2, false), 0.0042, 1e-15)

	a, b := commonLots(bench, bench)
	a.Temp, b.Temp = 21, 25.2
	free, opt := plain(), plain()
	opt.Tempco = -0.004
	without, with := compareLots(t, a, b, free), compareLots(t, a, b, opt)
	// One session: what is common is 0, and the standard error grows by the slope's alone.
	se := func(c Comparison) float64 { return math.Abs(c.Shift) / quantileOf(t, c) }
	near(t, "u", with.TempU, 0.00336, 1e-9)
	near(t, "standard error", se(with), math.Hypot(se(without), 0.00336), 1e-6)
	if !(with.High-with.Low > without.High-without.Low) || !(with.DF > without.DF) {
		t.Errorf("%v to %v, %v to %v", with.Low, with.High, without.Low, without.High)
	}

	// Sessions without any accuracy statement: 1 K of either temperature as well.
	for i := range a.Members {
		m := &a.Members[i]
		m.Sittings, m.Result.VgsIdle.UBetween, m.Result.VgsIdle.UAbsolute = nil, nan, nan
	}
	for i := range b.Members {
		m := &b.Members[i]
		m.Sittings, m.Result.VgsIdle.UBetween, m.Result.VgsIdle.UAbsolute = nil, nan, nan
	}
	c := compareLots(t, a, b, opt)
	near(t, "sessions not known", c.TempU, math.Hypot(0.00336, math.Sqrt2*0.004), 1e-12)
	if !strings.Contains(c.Sentence, "uncertain by 6.6 mV: 20 % of the slope, typical, and 1 K of either temperature") {
		t.Error(c.Sentence)
	}
	// Two sessions of which it is known what the readings are uncertain by from one to
	// another: that of the temperature is in it.
	a, b = commonLots(Sitting{"s", "m"}, Sitting{"t", "m"})
	a.Temp, b.Temp = 21, 25.2
	opt.TempcoU = 0.001
	c = compareLots(t, a, b, opt)
	near(t, "sessions known", c.TempU, 0.0042, 1e-12)
	if !strings.Contains(c.Sentence, "uncertain by 4.2 mV: 1 mV/K of the slope, as given)") {
		t.Error(c.Sentence)
	}
	// Control parts were as warm as their lots: no slope, none of its uncertainty.
	withControls(&a, &b, 3.1, 0.014)
	if c = compareLots(t, a, b, opt); c.TempU != 0 || c.ForTemp != 0 {
		t.Errorf("%+v", c)
	}
}

// quantileOf is |t| of a comparison, found from its p and degrees of freedom.
func quantileOf(t *testing.T, c Comparison) float64 {
	t.Helper()
	half := (c.High - c.Low) / 2
	return math.Abs(c.Shift) / half * stats.UpperT(0.025, c.DF)
}

// The run of lots does not mix temperatures: with a slope all are carried over to the
// first, without one those far from it are left out and named.
func TestTrendTemperature(t *testing.T) {
	var lots []Lot
	for i, temp := range []float64{22, 26, 40, nan} {
		at := 3.0
		if !math.IsNaN(temp) {
			at -= 0.004 * (temp - 22)
		}
		l := lotOf(fmt.Sprintf("L%d", i), spreadOut(20, at, 0.03)...)
		l.At, l.Temp = fmt.Sprintf("2026-%02d-01", i+1), temp
		lots = append(lots, l)
	}
	opt := plain()
	tr, err := TrendOf(lots, opt)
	if err != nil {
		t.Fatal(err)
	}
	text := strings.Join(tr.Text, "\n")
	if len(tr.Lots) != 3 || tr.Lots[1].Name != "L1" || tr.Lots[2].Name != "L3" || !strings.Contains(text, "more than 5 K away from the 22.0 °C of the first lot, and no slope given (--tempco): L2 (+18.0 K)") {
		t.Errorf("%+v\n%s", tr.Lots, text)
	}
	near(t, "as read", tr.Lots[1].Centre, 3-0.016, 1e-9)

	opt.Tempco = -0.004
	if tr, err = TrendOf(lots, opt); err != nil {
		t.Fatal(err)
	}
	text = strings.Join(tr.Text, "\n")
	if len(tr.Lots) != 4 || !strings.Contains(text, "carried over to 22.0 °C by -4.0 mV/K") || !strings.Contains(text, "as read, for the temperature is not known: L3") || strings.Contains(text, "left out") {
		t.Errorf("%+v\n%s", tr.Lots, text)
	}
	for _, l := range tr.Lots {
		near(t, l.Name, l.Centre, 3, 1e-9)
	}
	// 18 K apart the slope's 20 % are 14.4 mV: that pair's interval is much the widest.
	wide := func(a, b string) float64 {
		for _, q := range tr.Pairs {
			if q.A == a && q.B == b {
				return q.High - q.Low
			}
		}
		t.Fatal("no such pair")
		return 0
	}
	if !(wide("L0", "L2") > 1.5*wide("L0", "L1")) || !(wide("L0", "L1") > wide("L0", "L3")) {
		t.Errorf("%v, %v, %v", wide("L0", "L2"), wide("L0", "L1"), wide("L0", "L3"))
	}
	near(t, "the lots are not changed", lots[2].Members[0].Result.VgsIdle.Value, spreadOut(20, 3-0.072, 0.03)[0], 1e-12)

	// A first lot whose temperature is not known says nothing of the others'.
	lots[0].Temp = nan
	if tr, err = TrendOf(lots, plain()); err != nil || len(tr.Lots) != 4 {
		t.Errorf("%v %+v", err, tr.Lots)
	}
}
